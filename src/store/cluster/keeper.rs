//! The keeper: the program run again, holding the server and a pipe from the process that wants it.
//!
//! When the pipe ends, however its other end was lost, the keeper ends the server. It says `ready` on its
//! standard output once the server takes connections, and why, when it ends otherwise. It never restarts a
//! server: the holder starts another keeper, which ends what an earlier one left.

use super::error::{ClusterError, Doing};
use super::folder::{self, DataFolder, Owner, PORT};
use super::process::Server;
use super::{SUPERUSER, binaries};
use nix::sys::signal::{SigSet, Signal};
use serde::{Deserialize, Serialize};
use std::fs::{self, File};
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{Receiver, RecvTimeoutError, Sender, channel};
use std::thread;
use std::time::Duration;

/// The first line of a keeper that succeeded.
pub(super) const READY: &str = "ready\n";

/// Settings of every server. What a session may change itself is not set here.
const SETTINGS: [&str; 17] = [
    "listen_addresses=",
    "unix_socket_permissions=0700",
    "max_connections=200",
    "shared_buffers=256MB",
    "maintenance_work_mem=128MB",
    "max_wal_size=4GB",
    "checkpoint_timeout=15min",
    "wal_compression=on",
    "random_page_cost=1.1",
    "jit=off",
    "timezone=UTC",
    "log_timezone=UTC",
    "log_checkpoints=off",
    "log_line_prefix=%m [%p] ",
    "logging_collector=off",
    "ssl=off",
    "password_encryption=scram-sha-256",
];

/// The setting of a server whose data may be lost with the machine. What is committed still survives every
/// SIGKILL: the system has it, and commits and full pages are written as ever.
const FORGETFUL: [&str; 1] = ["fsync=off"];

/// What a keeper is told to hold, as the one argument of its command.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub(super) struct Order {
    pub(super) folder: DataFolder,
    pub(super) binaries: PathBuf,
    pub(super) sockets: PathBuf,
    pub(super) owner: Option<Owner>,
    pub(super) durable: bool,
    pub(super) disposable: bool,
}

enum Event {
    HolderGone,
    ServerEnded(io::Result<ExitStatus>),
}

/// Runs the hidden command `keep-cluster`; true if it ended because its holder did.
pub fn keep(order: &str) -> bool {
    // A service manager that signals every process of a service leaves the stop to the holder.
    let mut signals = SigSet::empty();
    for signal in [Signal::SIGTERM, Signal::SIGINT, Signal::SIGHUP] {
        signals.add(signal);
    }
    let outcome = signals
        .thread_block()
        .map_err(|errno| ClusterError::Failed(format!("cannot block signals: {errno}")))
        .and_then(|()| {
            serde_json::from_str(order)
                .map_err(|error| ClusterError::Failed(format!("not an order: {error}")))
        })
        .and_then(|order: Order| order.run());
    if let Err(error) = &outcome {
        // A holder that is gone reads nothing.
        let _ = writeln!(io::stdout(), "{error}");
    }
    outcome.is_ok()
}

impl Order {
    fn run(&self) -> Result<(), ClusterError> {
        let (sender, events) = channel();
        watch_holder(sender.clone());
        let _lock = self.folder.lock_as_keeper()?;
        let server = Server::new(self.folder.cluster(), self.owner.as_ref().map(|o| o.uid));
        self.end_leftovers(&server)?;
        let held = self.hold(&server, &events, sender);
        // Whatever happened above, nothing stays behind.
        let ended = server.end(self.disposable);
        if held.is_ok() {
            let _ = fs::remove_dir_all(&self.sockets);
            if self.disposable {
                let _ = fs::remove_dir_all(self.folder.path());
            }
        }
        held.and(ended.map(|_| ()))
    }

    /// Starts the server and waits for its end (an error) or the holder's.
    fn hold(
        &self,
        server: &Server,
        events: &Receiver<Event>,
        sender: Sender<Event>,
    ) -> Result<(), ClusterError> {
        let log = self.folder.log();
        if log.exists() {
            fs::rename(&log, log.with_extension("log.1"))
                .doing(|| format!("rename {}", log.display()))?;
        }
        if !self.folder.cluster().exists() && !self.create(events)? {
            return Ok(());
        }
        if binaries::made_by(&self.folder.cluster()).is_none() {
            return Err(ClusterError::Failed(format!(
                "{} is not a database cluster; move it away",
                self.folder.cluster().display()
            )));
        }
        let mut child = self.start(server)?;
        let pid = child.id();
        thread::spawn(move || sender.send(Event::ServerEnded(child.wait())));
        let is_ready = || {
            server
                .pid_file()
                .is_some_and(|file| file.ready && file.pid.unsigned_abs() == pid)
        };
        while !is_ready() {
            match events.recv_timeout(Duration::from_millis(10)) {
                Ok(Event::HolderGone) => return Ok(()),
                Ok(Event::ServerEnded(how)) => return Err(self.ended("did not start", &how)),
                Err(RecvTimeoutError::Timeout | RecvTimeoutError::Disconnected) => {}
            }
        }
        let told = io::stdout()
            .write_all(READY.as_bytes())
            .and_then(|()| io::stdout().flush());
        if told.is_err() {
            return Ok(());
        }
        match events.recv() {
            Ok(Event::ServerEnded(how)) => Err(self.ended("ended", &how)),
            Ok(Event::HolderGone) | Err(_) => Ok(()),
        }
    }

    /// Ends servers of this folder whose keeper or postmaster is gone, and removes what they left.
    fn end_leftovers(&self, server: &Server) -> Result<(), ClusterError> {
        let before = server.pid_file();
        server.end(self.disposable)?;
        server.clear_stale_pid_file().doing(|| {
            format!(
                "remove postmaster.pid in {}",
                self.folder.cluster().display()
            )
        })?;
        if let Some(file) = before
            && file.sockets != self.sockets
            && folder::is_socket_folder(&file.sockets)
        {
            let _ = fs::remove_dir_all(file.sockets);
        }
        for left in [format!(".s.PGSQL.{PORT}"), format!(".s.PGSQL.{PORT}.lock")] {
            let _ = fs::remove_file(self.sockets.join(left));
        }
        Ok(())
    }

    /// Makes the cluster aside and moves it in place whole; false if the holder went meanwhile.
    fn create(&self, events: &Receiver<Event>) -> Result<bool, ClusterError> {
        let half = |name: &str| name.starts_with("postgres.new-");
        let entries = fs::read_dir(self.folder.path()).into_iter().flatten();
        for entry in entries.flatten() {
            if half(&entry.file_name().to_string_lossy()) {
                let _ = fs::remove_dir_all(entry.path());
            }
        }
        let new = self
            .folder
            .path()
            .join(format!("postgres.new-{}", std::process::id()));
        folder::make_private(&new, self.owner.as_ref())
            .doing(|| format!("make {}", new.display()))?;
        let mut initdb = self.command("initdb");
        initdb.arg("-D").arg(&new).args([
            "-U",
            SUPERUSER,
            "--encoding=UTF8",
            "--locale=C",
            "--auth=trust",
            "--data-checksums",
            "--no-instructions",
        ]);
        if !self.durable {
            initdb.arg("--no-sync");
        }
        let mut child = self.spawn(initdb)?;
        let status = loop {
            if let Some(status) = child.try_wait().doing(|| "wait for initdb".to_owned())? {
                break status;
            }
            if let Ok(Event::HolderGone) = events.recv_timeout(Duration::from_millis(10)) {
                let _ = child.kill();
                let _ = child.wait();
                let _ = fs::remove_dir_all(&new);
                return Ok(false);
            }
        };
        if !status.success() {
            let _ = fs::remove_dir_all(&new);
            return Err(self.ended("could not be made: initdb ended", &Ok(status)));
        }
        fs::rename(&new, self.folder.cluster())
            .doing(|| format!("move {} in place", new.display()))?;
        Ok(true)
    }

    fn start(&self, server: &Server) -> Result<Child, ClusterError> {
        let mut postgres = self.command("postgres");
        postgres.arg("-D").arg(self.folder.cluster());
        let forgetful = if self.durable { &[][..] } else { &FORGETFUL };
        for setting in SETTINGS.iter().chain(forgetful) {
            postgres.arg("-c").arg(setting);
        }
        let sockets = self.sockets.display();
        postgres
            .arg("-c")
            .arg(format!("unix_socket_directories={sockets}"))
            .arg("-c")
            .arg(format!("cluster_name={}", server.title()))
            .args(["-p", &PORT.to_string()]);
        self.spawn(postgres)
    }

    fn command(&self, program: &str) -> Command {
        folder::command(&self.binaries.join(program), self.owner.as_ref())
    }

    /// Spawns with the log as output. Nothing of the keeper's pipes is inherited: std opens them close-on-exec.
    fn spawn(&self, mut command: Command) -> Result<Child, ClusterError> {
        let path = self.folder.log();
        let open = || -> io::Result<(File, File)> {
            let log = folder::open_private(File::options().append(true), &path)?;
            Ok((log.try_clone()?, log))
        };
        let (out, err) = open().doing(|| format!("open {}", path.display()))?;
        let program = command.get_program().to_owned();
        command
            .stdin(Stdio::null())
            .stdout(out)
            .stderr(err)
            .spawn()
            .doing(|| format!("run {}", Path::new(&program).display()))
    }

    fn ended(&self, what: &str, how: &io::Result<ExitStatus>) -> ClusterError {
        let how = match how {
            Ok(status) => status.to_string(),
            Err(error) => error.to_string(),
        };
        let log = self.folder.log();
        let text = fs::read(&log).unwrap_or_default();
        let text = String::from_utf8_lossy(&text);
        let lines: Vec<&str> = text.lines().collect();
        let tail = lines[lines.len().saturating_sub(4)..].join("\n  ");
        ClusterError::Failed(format!(
            "the server in {} {what} ({how}); {} ends with:\n  {tail}",
            self.folder.cluster().display(),
            log.display()
        ))
    }
}

fn watch_holder(sender: Sender<Event>) {
    thread::spawn(move || {
        // The holder writes nothing: whatever is read, an end or an error, means that it is gone.
        let mut all = Vec::new();
        let _ = io::stdin().lock().read_to_end(&mut all);
        sender.send(Event::HolderGone)
    });
}
