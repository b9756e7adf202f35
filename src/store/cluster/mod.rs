//! The private PostgreSQL cluster: found, made once, held while this process lives, and ended with it.
//!
//! A [`Cluster`] holds the lock of the data folder and one end of a pipe. The other end is read by a keeper
//! (see `keeper`), which runs the server and ends it when the pipe does: nothing outlives this process,
//! SIGKILL included. A keeper or server that ends on its own is replaced.

mod binaries;
mod error;
mod folder;
mod keeper;
mod process;

pub use binaries::Binaries;
pub use error::ClusterError;
pub use folder::fresh_folder;
pub use keeper::keep;

use error::Doing;
use folder::{DataFolder, Owner, PORT};
use keeper::Order;
use nix::sys::signal::{Signal, kill};
use nix::unistd::Pid;
use process::Server;
use std::fs::{self, File};
use std::io::{BufRead, BufReader, Read};
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread::{self, JoinHandle, sleep};
use std::time::{Duration, Instant};

/// The database user of a private cluster, and the name of its database.
pub const SUPERUSER: &str = "realterms";

/// The hidden command whose one argument is what [`keep`] takes.
pub const KEEPER_COMMAND: &str = "keep-cluster";

/// After living this long a server that ends is started again without a pause.
const STEADY: Duration = Duration::from_secs(60);

/// What a private cluster is made and run from.
#[derive(Clone, Debug)]
pub struct ClusterOptions {
    /// The data folder; made if missing.
    pub folder: PathBuf,
    /// The folder of the server's programs; None to search.
    pub binaries: Option<PathBuf>,
    /// The folders of PATH.
    pub search_path: Vec<PathBuf>,
    /// Where the folder of the socket goes.
    pub temp_folder: PathBuf,
    /// The program whose hidden command [`KEEPER_COMMAND`] calls [`keep`].
    pub keeper: PathBuf,
    /// What to call this process to another that wants the same folder.
    pub holder: String,
    /// False for data that may be lost with the machine: nothing is forced to disk.
    pub durable: bool,
    /// Whether the data folder is removed with the cluster.
    pub disposable: bool,
}

/// Where a server listens.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Address {
    /// The folder of its socket.
    pub sockets: PathBuf,
    /// The port number in the socket's name.
    pub port: u16,
}

/// What is known of a data folder without starting anything.
#[derive(Clone, Debug)]
pub struct Whereabouts {
    /// The data folder.
    pub folder: PathBuf,
    /// The programs that would run it.
    pub binaries: Binaries,
    /// Who holds the folder: process and command.
    pub holder: Option<(i32, String)>,
    /// Where its server listens, if it does.
    pub address: Option<Address>,
}

/// What [`stop`] found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Stopped {
    /// A process held the folder and has ended.
    Holder(i32),
    /// Nobody held the folder, but a server was left running.
    Leftover,
    /// Nothing ran.
    Nothing,
}

/// A private cluster held by this process.
#[derive(Debug)]
pub struct Cluster {
    address: Address,
    link: Arc<Mutex<Link>>,
    supervisor: Option<JoinHandle<()>>,
    lock: File,
}

/// The holder's end of the keeper's pipe; None once the cluster is being stopped.
#[derive(Debug)]
struct Link(Option<ChildStdin>);

/// A server that is there, held by this process or by another.
#[derive(Debug)]
pub enum Access {
    /// Started and held by this process.
    Held(Cluster),
    /// Held by another process.
    Joined(Address),
}

impl Access {
    /// Where the server listens.
    #[must_use]
    pub fn address(&self) -> &Address {
        match self {
            Self::Held(cluster) => &cluster.address,
            Self::Joined(address) => address,
        }
    }
}

impl Cluster {
    /// Takes the data folder, starts its server (making the cluster the first time) and returns once it takes
    /// connections. Blocks.
    ///
    /// # Errors
    /// Programs missing, folder in use or out of reach, or a server that does not start.
    pub fn start(options: &ClusterOptions) -> Result<Self, ClusterError> {
        let folder = DataFolder::open(&options.folder)?;
        let cluster = folder.cluster();
        let binaries = options.find_binaries()?;
        let owner = Owner::of(&cluster)?;
        Owner::check_reach(owner.as_ref(), folder.path())?;
        Owner::check_reach(owner.as_ref(), &binaries.folder)?;
        let lock = folder.lock(&options.holder, &options.keeper)?;
        let sockets = folder::make_socket_folder(&options.temp_folder, owner.as_ref())?;
        let order = Order {
            folder,
            binaries: binaries.folder,
            sockets: sockets.clone(),
            owner,
            durable: options.durable,
            disposable: options.disposable,
        };
        let program = options.keeper.clone();
        let started = Keeper::spawn(&program, &order)
            .and_then(|(mut keeper, pipe)| keeper.wait_until_ready().map(|()| (keeper, pipe)));
        if started.is_err() {
            let _ = fs::remove_dir_all(&sockets);
        }
        let (keeper, pipe) = started?;
        let link = Arc::new(Mutex::new(Link(Some(pipe))));
        let shared = Arc::clone(&link);
        let supervisor = thread::Builder::new()
            .name("cluster".to_owned())
            .spawn(move || supervise(&shared, keeper, &program, &order))
            .doing(|| "start a thread".to_owned())?;
        Ok(Self {
            address: Address {
                sockets,
                port: PORT,
            },
            link,
            supervisor: Some(supervisor),
            lock,
        })
    }

    /// Starts the server, or joins the one that another process holds. Blocks.
    ///
    /// # Errors
    /// Those of [`Cluster::start`], or a holder whose server does not come up.
    pub fn start_or_join(options: &ClusterOptions) -> Result<Access, ClusterError> {
        let patience = Instant::now() + Duration::from_secs(60);
        loop {
            let in_use = match Self::start(options) {
                Ok(cluster) => return Ok(Access::Held(cluster)),
                Err(error @ ClusterError::InUse { .. }) => error,
                Err(error) => return Err(error),
            };
            let folder = DataFolder::open(&options.folder)?;
            if let Some(address) = running(&server_of(&folder)?) {
                return Ok(Access::Joined(address));
            }
            if Instant::now() > patience {
                return Err(in_use);
            }
            sleep(Duration::from_millis(50));
        }
    }

    /// Where the server listens.
    #[must_use]
    pub fn address(&self) -> &Address {
        &self.address
    }
}

impl Drop for Cluster {
    /// Ends the server, waits until it has ended, and takes this process's name off the folder.
    fn drop(&mut self) {
        hold(&self.link).0 = None;
        if let Some(supervisor) = self.supervisor.take() {
            let _ = supervisor.join();
        }
        let _ = self.lock.set_len(0);
    }
}

/// What is known of a data folder; starts nothing.
///
/// # Errors
/// No such folder, programs missing, or a folder that cannot be read.
pub fn whereabouts(options: &ClusterOptions) -> Result<Whereabouts, ClusterError> {
    options.check_existing()?;
    let folder = DataFolder::open(&options.folder)?;
    let binaries = options.find_binaries()?;
    let address = running(&server_of(&folder)?);
    let holder = match folder.lock_if_free()? {
        Some(_) => None,
        None => folder.holder(),
    };
    Ok(Whereabouts {
        folder: folder.path().to_owned(),
        binaries,
        holder,
        address,
    })
}

/// Ends the server of a data folder, whoever holds it: the holder is asked by SIGTERM to end; a server that
/// nobody holds any more is ended directly. Blocks until it has ended.
///
/// # Errors
/// No such folder, a holder of another user, or one that does not end within 90 s.
pub fn stop(options: &ClusterOptions) -> Result<Stopped, ClusterError> {
    options.check_existing()?;
    let folder = DataFolder::open(&options.folder)?;
    let mut asked = None;
    let patience = Instant::now() + Duration::from_secs(90);
    let _lock = loop {
        if let Some(lock) = folder.lock_if_free()? {
            break lock;
        }
        let holder = folder.holder();
        if let Some((pid, what)) = &holder
            && asked != Some(*pid)
            && process::runs(*pid, &options.keeper)
        {
            kill(Pid::from_raw(*pid), Signal::SIGTERM).map_err(|errno| {
                ClusterError::Failed(format!("cannot stop process {pid} ({what}): {errno}"))
            })?;
            asked = Some(*pid);
        }
        if Instant::now() > patience {
            let path = folder.path().display();
            let (pid, what) = holder.unwrap_or_default();
            return Err(ClusterError::Failed(format!(
                "process {pid} ({what}) holds {path} and has not ended within 90 s of SIGTERM"
            )));
        }
        sleep(Duration::from_millis(50));
    };
    let _keeper = folder.lock_as_keeper()?;
    let left = server_of(&folder)?.end(false)?;
    Ok(match asked {
        Some(pid) => Stopped::Holder(pid),
        None if left => Stopped::Leftover,
        None => Stopped::Nothing,
    })
}

impl ClusterOptions {
    /// Refuses a folder that holds nothing of ours, for commands that make nothing.
    ///
    /// # Errors
    /// [`ClusterError::NoFolder`].
    pub fn check_existing(&self) -> Result<(), ClusterError> {
        folder::check_existing(&self.folder)
    }

    /// Finds the server's programs: those that made the cluster, where there is one.
    ///
    /// # Errors
    /// None that fit.
    pub fn find_binaries(&self) -> Result<Binaries, ClusterError> {
        let cluster = folder::cluster_in(&self.folder);
        Binaries::find(self.binaries.as_deref(), &self.search_path, Some(&cluster))
    }
}

fn server_of(folder: &DataFolder) -> Result<Server, ClusterError> {
    let cluster = folder.cluster();
    let owner = Owner::of(&cluster)?;
    Ok(Server::new(cluster, owner.map(|owner| owner.uid)))
}

fn running(server: &Server) -> Option<Address> {
    let file = server.pid_file().filter(|file| file.ready)?;
    server.processes().contains(&file.pid).then_some(Address {
        sockets: file.sockets,
        port: PORT,
    })
}

/// Waits for the keeper's end and starts another, until the cluster is stopped. A new keeper ends what the
/// old one left, so a killed keeper costs a restart of the server, and a killed server costs its recovery.
fn supervise(link: &Mutex<Link>, mut keeper: Keeper, program: &Path, order: &Order) {
    let mut ready = Ok(());
    let mut started = Instant::now();
    let mut failures = 0_u32;
    loop {
        let why = keeper.wait(ready);
        failures = if started.elapsed() > STEADY {
            0
        } else {
            failures + 1
        };
        // Not at once after the first failure; a stop meanwhile is seen after the pause.
        let pause = Duration::from_millis(200) * failures.saturating_sub(1).min(25);
        if hold(link).0.is_none() {
            return;
        }
        tracing::error!(why, "the database server ended; starting it again");
        sleep(pause);
        started = Instant::now();
        ready = {
            let mut link = hold(link);
            if link.0.is_none() {
                return;
            }
            Keeper::spawn(program, order).map(|(new, pipe)| {
                link.0 = Some(pipe);
                keeper = new;
            })
        };
        ready = ready.and_then(|()| keeper.wait_until_ready());
    }
}

fn hold(link: &Mutex<Link>) -> MutexGuard<'_, Link> {
    link.lock().unwrap_or_else(PoisonError::into_inner)
}

struct Keeper {
    child: Child,
    says: BufReader<ChildStdout>,
}

impl Keeper {
    /// Starts a keeper in a process group of its own, so that an interrupt from the terminal reaches this
    /// process alone, which then decides.
    fn spawn(program: &Path, order: &Order) -> Result<(Self, ChildStdin), ClusterError> {
        let argument = serde_json::to_string(order)
            .map_err(|error| ClusterError::Failed(format!("path not in UTF-8: {error}")))?;
        let mut child = Command::new(program)
            .args([KEEPER_COMMAND, &argument])
            .env_clear()
            .current_dir("/")
            .process_group(0)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .doing(|| format!("run the keeper {}", program.display()))?;
        let pipes = child.stdin.take().zip(child.stdout.take());
        let (pipe, says) = pipes.expect("both were asked to be piped");
        let says = BufReader::new(says);
        Ok((Self { child, says }, pipe))
    }

    fn wait_until_ready(&mut self) -> Result<(), ClusterError> {
        let mut line = String::new();
        let _ = self.says.read_line(&mut line);
        if line == keeper::READY {
            return Ok(());
        }
        let _ = self.says.read_to_string(&mut line);
        if line.is_empty() {
            line.push_str("the keeper was killed while the server started");
        }
        Err(ClusterError::Failed(line.trim_end().to_owned()))
    }

    /// Waits for the keeper's end: why it was not ready, else what it said last, else how it ended.
    fn wait(&mut self, ready: Result<(), ClusterError>) -> String {
        let mut said = String::new();
        let _ = self.says.read_to_string(&mut said);
        let status = self.child.wait();
        match (ready, status) {
            (Err(error), _) => error.to_string(),
            (Ok(()), _) if !said.is_empty() => said.trim_end().to_owned(),
            (Ok(()), Ok(status)) => format!("its keeper ended ({status})"),
            (Ok(()), Err(error)) => error.to_string(),
        }
    }
}
