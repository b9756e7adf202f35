//! The processes of a server, found by what the system shows of them, and how they are ended.

use super::error::ClusterError;
use nix::sys::signal::{Signal, kill};
use nix::unistd::{Pid, geteuid};
use sha2::{Digest, Sha256};
use std::fs;
use std::path::{Path, PathBuf};
use std::thread::sleep;
use std::time::{Duration, Instant};

/// How long a server may take to write out its last checkpoint before it is cut short.
const FAST: Duration = Duration::from_secs(30);
/// How long processes get to leave after a stronger signal.
const FIRM: Duration = Duration::from_secs(5);

/// The server of one cluster folder, running or not.
#[derive(Clone, Debug)]
pub(super) struct Server {
    cluster: PathBuf,
    uid: u32,
}

/// What `postmaster.pid` says.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct PidFile {
    pub(super) pid: i32,
    pub(super) sockets: PathBuf,
    pub(super) ready: bool,
}

/// One process as the system shows it.
struct Process {
    pid: i32,
    uid: u32,
    /// Its program as it was called; elsewhere than on Linux cut at the first space.
    program: String,
    command: String,
}

impl Server {
    /// `uid` is the user that the server runs as; None for the user of this process.
    pub(super) fn new(cluster: PathBuf, uid: Option<u32>) -> Self {
        let uid = uid.unwrap_or_else(|| geteuid().as_raw());
        Self { cluster, uid }
    }

    /// The name that the server's processes carry in their titles (`cluster_name`): the working folder of
    /// another user's process is hidden from root in a container, its title is not.
    pub(super) fn title(&self) -> String {
        let digest = Sha256::digest(self.cluster.as_os_str().as_encoded_bytes());
        let digits: String = digest[..8].iter().map(|b| format!("{b:02x}")).collect();
        format!("realterms-{digits}")
    }

    /// What `postmaster.pid` says, stale or not.
    pub(super) fn pid_file(&self) -> Option<PidFile> {
        let text = fs::read_to_string(self.cluster.join("postmaster.pid")).ok()?;
        let lines: Vec<&str> = text.lines().map(str::trim).collect();
        Some(PidFile {
            pid: lines.first()?.parse().ok()?,
            sockets: lines.get(4).copied().unwrap_or_default().into(),
            ready: lines.get(7) == Some(&"ready"),
        })
    }

    /// The processes of this server, its postmaster included or gone.
    pub(super) fn processes(&self) -> Vec<i32> {
        let title = format!("postgres: {}: ", self.title());
        let argument = format!(" -D {} ", self.cluster.display());
        let ours = |process: &Process| {
            process.uid == self.uid
                && (process.command.starts_with(&title)
                    || (process.command.contains(&argument)
                        && process.program.ends_with("postgres")))
        };
        all_processes()
            .into_iter()
            .filter(ours)
            .map(|process| process.pid)
            .collect()
    }

    /// Ends the server and everything left of it: fast (unless `at_once`), then immediately, then by force.
    /// True if there was something to end.
    pub(super) fn end(&self, at_once: bool) -> Result<bool, ClusterError> {
        let found = self.processes();
        if found.is_empty() {
            return Ok(false);
        }
        if !at_once
            && let Some(file) = self.pid_file()
            && found.contains(&file.pid)
        {
            signal(&[file.pid], Signal::SIGINT);
            if self.wait(FAST).is_empty() {
                return Ok(true);
            }
        }
        for how in [Signal::SIGQUIT, Signal::SIGKILL] {
            signal(&self.processes(), how);
            if self.wait(FIRM).is_empty() {
                return Ok(true);
            }
        }
        Err(ClusterError::Failed(format!(
            "processes {:?} of the server in {} do not end, not even by SIGKILL",
            self.processes(),
            self.cluster.display()
        )))
    }

    /// Removes a `postmaster.pid` whose number now belongs to a process of someone else, for which the server
    /// would refuse to start. Other stale files the server recognises by itself. Nothing of the server may run.
    pub(super) fn clear_stale_pid_file(&self) -> std::io::Result<()> {
        match self.pid_file() {
            Some(file) if is_alive(file.pid) => {
                fs::remove_file(self.cluster.join("postmaster.pid"))
            }
            Some(_) | None => Ok(()),
        }
    }

    fn wait(&self, patience: Duration) -> Vec<i32> {
        let end = Instant::now() + patience;
        loop {
            let left = self.processes();
            if left.is_empty() || Instant::now() > end {
                return left;
            }
            sleep(Duration::from_millis(20));
        }
    }
}

fn signal(pids: &[i32], how: Signal) {
    for pid in pids {
        // One that has just ended needs no signal; one that may not be signalled is found by the wait after.
        let _ = kill(Pid::from_raw(*pid), how);
    }
}

/// Whether a process has this number, be it another user's.
pub(super) fn is_alive(pid: i32) -> bool {
    pid > 0 && kill(Pid::from_raw(pid), None) != Err(nix::errno::Errno::ESRCH)
}

/// Whether the process of this number runs a program of this name; a number may have been given away since
/// it was written down.
pub(super) fn runs(pid: i32, program: &Path) -> bool {
    let mut all = all_processes().into_iter();
    all.any(|process| {
        process.pid == pid && Path::new(&process.program).file_name() == program.file_name()
    })
}

#[cfg(target_os = "linux")]
fn all_processes() -> Vec<Process> {
    use std::os::unix::fs::MetadataExt;
    let entries = fs::read_dir(Path::new("/proc")).into_iter().flatten();
    entries
        .flatten()
        .filter_map(|entry| {
            let pid = entry.file_name().to_str()?.parse().ok()?;
            let command = fs::read(entry.path().join("cmdline")).ok()?;
            let command = String::from_utf8_lossy(&command);
            Some(Process {
                pid,
                uid: entry.metadata().ok()?.uid(),
                program: command.split('\0').next()?.to_owned(),
                command: command.replace('\0', " "),
            })
        })
        .collect()
}

#[cfg(not(target_os = "linux"))]
fn all_processes() -> Vec<Process> {
    let listed = std::process::Command::new(Path::new("/bin/ps"))
        .args(["-A", "-ww", "-o", "pid=,uid=,command="])
        .output();
    let listed = listed.map_or_else(|_| Vec::new(), |output| output.stdout);
    String::from_utf8_lossy(&listed)
        .lines()
        .filter_map(|line| {
            let (pid, rest) = line.trim_start().split_once(' ')?;
            let (uid, command) = rest.trim_start().split_once(' ')?;
            Some(Process {
                pid: pid.parse().ok()?,
                uid: uid.parse().ok()?,
                program: command.trim_start().split(' ').next()?.to_owned(),
                command: format!("{} ", command.trim_start()),
            })
        })
        .collect()
}
