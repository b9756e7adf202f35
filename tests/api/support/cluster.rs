//! The one cluster of a test run, and the program run as a user would.
//!
//! Statics are never dropped: the keeper ends the server and removes its folder when this process is gone,
//! however it went.

use nix::sys::signal::{Signal, kill};
use nix::unistd::{Pid, User, geteuid};
use realterms::config::Settings;
use realterms::store::cluster::{Cluster, ClusterOptions, SUPERUSER, fresh_folder};
use sqlx::postgres::{PgConnectOptions, PgSslMode};
use sqlx::{Connection, PgConnection};
use std::io::{BufRead, BufReader};
use std::os::unix::fs::{PermissionsExt, chown};
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdout, Command, ExitStatus, Stdio};
use std::sync::OnceLock;
use std::thread::sleep;
use std::time::{Duration, Instant};

/// The cluster, started by the first test that asks.
pub(crate) fn shared() -> &'static Cluster {
    static CLUSTER: OnceLock<Cluster> = OnceLock::new();
    CLUSTER.get_or_init(|| Cluster::start(&forgetful()).expect("the cluster of the tests starts"))
}

/// A fresh cluster that forces nothing to disk and is removed with its holder.
pub(crate) fn forgetful() -> ClusterOptions {
    let folder = fresh_folder(&std::env::temp_dir()).expect("the temp folder takes a folder");
    let settings = Settings {
        data_folder: Some(folder),
        durable: false,
        ..Settings::default()
    };
    ClusterOptions {
        keeper: env!("CARGO_BIN_EXE_realterms").into(),
        disposable: true,
        ..settings.cluster("a test").expect("a folder is set")
    }
}

/// Who runs the program: the user of this process, or `nobody` for one who is not root.
#[derive(Clone, Debug)]
pub(crate) struct As(Option<User>);

/// Root and an ordinary user where this process is root, else the user that it is.
pub(crate) fn users() -> Vec<As> {
    if !geteuid().is_root() {
        return vec![As(None)];
    }
    let nobody = User::from_name("nobody").expect("users can be looked up");
    assert!(
        nobody.is_some(),
        "root needs a user `nobody` for these tests"
    );
    vec![As(None), As(nobody)]
}

/// A folder of one test, directly under the temp folder so that every user reaches it, with a copy of the program
/// (the build folder may be out of reach). Removed with this value.
pub(crate) struct Place {
    pub(crate) root: PathBuf,
    user: As,
}

impl Place {
    pub(crate) fn new(user: &As) -> Self {
        let root = fresh_folder(&std::env::temp_dir()).expect("the temp folder takes a folder");
        std::fs::set_permissions(&root, PermissionsExt::from_mode(0o755)).expect("it is ours");
        let root = root.canonicalize().expect("it is there");
        // By another process: a descriptor open for writing here would be inherited by whatever other
        // tests start meanwhile, and the copy could not be run ("text file busy").
        let mut copy = Command::new("cp");
        copy.arg(env!("CARGO_BIN_EXE_realterms"))
            .arg(root.join("realterms"));
        assert!(copy.status().expect("cp runs").success(), "the copy");
        if let Some(user) = &user.0 {
            chown(&root, Some(user.uid.as_raw()), Some(user.gid.as_raw())).expect("we are root");
        }
        let user = user.clone();
        Self { root, user }
    }

    /// The data folder; the program makes it.
    pub(crate) fn data(&self) -> PathBuf {
        self.root.join("data")
    }

    /// Gives what a test made to the user who runs the program.
    pub(crate) fn own(&self, path: &Path) {
        if let Some(user) = &self.user.0 {
            chown(path, Some(user.uid.as_raw()), Some(user.gid.as_raw())).expect("we are root");
        }
    }

    /// The program with these arguments, on the data folder; nothing else is set but that disks are spared.
    pub(crate) fn program(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(self.root.join("realterms"));
        command.args(arguments).current_dir("/");
        for (name, _) in std::env::vars_os() {
            if name.to_string_lossy().starts_with("REALTERMS_") {
                command.env_remove(name);
            }
        }
        command.env("REALTERMS_DATA_FOLDER", self.data());
        command.env("REALTERMS_DURABLE", "false");
        if let Some(user) = &self.user.0 {
            command.uid(user.uid.as_raw()).gid(user.gid.as_raw());
        }
        command
    }

    /// Runs the program to its end: whether it succeeded, its output and its errors.
    pub(crate) fn run(&self, arguments: &[&str]) -> (bool, String, String) {
        finish(self.program(arguments))
    }

    /// Starts `database start` and waits until it says how to connect.
    pub(crate) fn start(&self) -> Held {
        Self::start_by(self.program(&["database", "start"]))
    }

    /// As [`Place::start`], by a command of the test's own.
    pub(crate) fn start_by(mut command: Command) -> Held {
        let mut child = command
            .stdout(Stdio::piped())
            .spawn()
            .expect("the program runs");
        let mut says = BufReader::new(child.stdout.take().expect("it is piped"));
        let mut line = String::new();
        says.read_line(&mut line).expect("it is text");
        let connect = line
            .strip_prefix("connect   ")
            .expect("it says how to connect");
        let sockets = connect.split([' ', '=']).nth(1).expect("it names the host");
        Held {
            sockets: sockets.into(),
            _guard: Guard::of(&child),
            child,
            _says: says,
        }
    }

    /// A folder below, to which all users may write, for what is temporary.
    pub(crate) fn temp(&self) -> PathBuf {
        let temp = self.root.join("t");
        let _ = std::fs::create_dir(&temp);
        std::fs::set_permissions(&temp, PermissionsExt::from_mode(0o1777)).expect("it is ours");
        temp
    }

    /// The processes that name the folder: of the program, of the server but for its backends, as (number, command).
    pub(crate) fn processes(&self) -> Vec<(i32, String)> {
        let root = format!("{}/", self.root.display());
        let mut all = processes();
        all.retain(|(_, command)| command.contains(&root));
        all
    }

    /// The one process that names the folder and this text.
    pub(crate) fn process(&self, text: &str) -> i32 {
        let mut all = self.processes();
        all.retain(|(_, command)| command.contains(text));
        assert_eq!(all.len(), 1, "{text}: {all:?}");
        all[0].0
    }

    pub(crate) fn postmaster(&self) -> i32 {
        self.process("postgres -D ")
    }

    pub(crate) fn keeper(&self) -> i32 {
        self.process("keep-cluster")
    }

    /// The name that the running server's backends carry in their titles.
    pub(crate) fn cluster_name(&self) -> String {
        let all = self.processes();
        let mut names = all
            .iter()
            .filter_map(|(_, command)| command.split("cluster_name=").nth(1)?.split(' ').next());
        names.next_back().expect("a server runs").to_owned()
    }

    /// Waits until nothing of the place runs, nor a backend of its server of this name.
    pub(crate) fn wait_for_the_end(&self, cluster_name: &str) {
        let backend = format!("postgres: {cluster_name}:");
        wait_until("everything ends", || {
            self.processes().is_empty() && !processes().iter().any(|(_, c)| c.starts_with(&backend))
        });
    }

    /// Connects to the server of the data folder, waiting while it starts.
    pub(crate) async fn connect(&self) -> PgConnection {
        let file = self.data().join("postgres/postmaster.pid");
        for _ in 0..600 {
            let text = std::fs::read_to_string(&file).unwrap_or_default();
            let options = PgConnectOptions::new_without_pgpass()
                .ssl_mode(PgSslMode::Disable)
                .socket(text.lines().nth(4).unwrap_or_default())
                .username(SUPERUSER)
                .database(SUPERUSER)
                .options([("search_path", "realterms")]);
            if let Ok(connection) = PgConnection::connect_with(&options).await {
                return connection;
            }
            tokio::time::sleep(Duration::from_millis(50)).await;
        }
        panic!("no server in {} within 30 s", self.data().display());
    }
}

impl Drop for Place {
    /// Whatever a failed test left running is ended by number.
    fn drop(&mut self) {
        for (pid, _) in self.processes() {
            kill_hard(pid);
        }
        let _ = std::fs::remove_dir_all(&self.root);
    }
}

/// A running `database start`.
pub(crate) struct Held {
    pub(crate) sockets: PathBuf,
    pub(crate) child: Child,
    _says: BufReader<ChildStdout>,
    _guard: Guard,
}

/// Kills a process when this process is gone, however it went.
pub(crate) struct Guard(Child);

impl Guard {
    pub(crate) fn of(child: &Child) -> Self {
        let guard = Command::new("sh")
            .args(["-c", "read -r _; kill -9 \"$0\"", &child.id().to_string()])
            .process_group(0)
            .stdin(Stdio::piped())
            .spawn()
            .expect("the shell runs");
        Self(guard)
    }
}

impl Drop for Guard {
    /// Lets go of the process.
    fn drop(&mut self) {
        let _ = self.0.kill();
        let _ = self.0.wait();
    }
}

impl Held {
    pub(crate) fn pid(&self) -> i32 {
        i32::try_from(self.child.id()).expect("a process number is small")
    }

    /// Asks it to end and waits until it has.
    pub(crate) fn stop(mut self) -> ExitStatus {
        kill(Pid::from_raw(self.pid()), Signal::SIGTERM).expect("it runs");
        self.child.wait().expect("it is our child")
    }
}

pub(crate) fn finish(mut command: Command) -> (bool, String, String) {
    let output = command.output().expect("the program runs");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("it prints text");
    (
        output.status.success(),
        text(output.stdout),
        text(output.stderr),
    )
}

pub(crate) fn kill_hard(pid: i32) {
    let _ = kill(Pid::from_raw(pid), Signal::SIGKILL);
}

/// Waits until something holds, for at most 30 s.
pub(crate) fn wait_until(what: &str, holds: impl Fn() -> bool) {
    let patience = Instant::now() + Duration::from_secs(30);
    while !holds() {
        assert!(Instant::now() < patience, "{what}: not within 30 s");
        sleep(Duration::from_millis(20));
    }
}

pub(crate) fn is_running(pid: i32) -> bool {
    processes().iter().any(|(other, _)| *other == pid)
}

/// All processes as (number, command); not those that have ended and wait to be collected.
fn processes() -> Vec<(i32, String)> {
    if !cfg!(target_os = "linux") {
        let mut ps = Command::new("ps");
        ps.args(["-A", "-ww", "-o", "pid=,stat=,command="]);
        let (_, listed, _) = finish(ps);
        let split = |line: &str| {
            let (pid, rest) = line.trim_start().split_once(' ')?;
            let (state, command) = rest.trim_start().split_once(' ')?;
            (!state.starts_with('Z')).then(|| Some((pid.parse().ok()?, command.to_owned())))?
        };
        return listed.lines().filter_map(split).collect();
    }
    let entries = Path::new("/proc").read_dir().expect("/proc is there");
    entries
        .flatten()
        .filter_map(|entry| {
            let pid = entry.file_name().to_str()?.parse().ok()?;
            let command = std::fs::read(entry.path().join("cmdline")).ok()?;
            let command = String::from_utf8_lossy(&command).replace('\0', " ");
            (!command.is_empty()).then_some((pid, command))
        })
        .collect()
}
