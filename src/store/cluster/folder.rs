//! The data folder: its parts, its lock, its owner, and the folder of its socket.

use super::error::{ClusterError, Doing};
use super::process::runs;
use nix::unistd::{User, geteuid};
use serde::{Deserialize, Serialize};
use std::fs::{self, DirBuilder, File, OpenOptions, TryLockError};
use std::io::{self, Seek, Write};
use std::os::unix::fs::{DirBuilderExt, MetadataExt, OpenOptionsExt, PermissionsExt, chown};
use std::path::{Path, PathBuf};
use std::process::Command;
use std::thread::sleep;
use std::time::{Duration, Instant};

/// The longest path of a Unix socket: one byte less than the address holds.
const SOCKET_LIMIT: usize = if cfg!(target_os = "macos") { 103 } else { 107 };
const SOCKET_PREFIX: &str = "rt-";
pub(super) const PORT: u16 = 5432;

/// The longest that the lock is held by someone who does not keep it.
const GLANCE: Duration = Duration::from_secs(1);

/// The cluster's own folder in a data folder.
pub(super) fn cluster_in(data: &Path) -> PathBuf {
    data.join("postgres")
}

/// Refuses a folder in which no cluster was ever made or begun, most likely a slip of the pen.
pub(super) fn check_existing(data: &Path) -> Result<(), ClusterError> {
    if cluster_in(data).exists() || data.join("lock").exists() {
        return Ok(());
    }
    Err(ClusterError::NoFolder(data.to_owned()))
}

/// A data folder, made if missing; its path is canonical.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub(super) struct DataFolder(PathBuf);

impl DataFolder {
    /// Opens the folder, making it where it is missing. Under root others may pass through it, since the
    /// server runs as another user; what it holds is closed to them.
    pub(super) fn open(path: &Path) -> Result<Self, ClusterError> {
        let mode = if geteuid().is_root() { 0o755 } else { 0o700 };
        let path = std::path::absolute(path).doing(|| format!("find {}", path.display()))?;
        DirBuilder::new()
            .recursive(true)
            .mode(mode)
            .create(&path)
            .doing(|| format!("make the data folder {}", path.display()))?;
        let path = path
            .canonicalize()
            .doing(|| format!("find {}", path.display()))?;
        Ok(Self(path))
    }

    pub(super) fn path(&self) -> &Path {
        &self.0
    }

    /// The cluster's own folder.
    pub(super) fn cluster(&self) -> PathBuf {
        cluster_in(&self.0)
    }

    /// What the running server wrote.
    pub(super) fn log(&self) -> PathBuf {
        self.0.join("server.log")
    }

    /// Takes the folder for this process; the lock ends with it, however it ends. `program` is what
    /// holders run.
    pub(super) fn lock(&self, holder: &str, program: &Path) -> Result<File, ClusterError> {
        let patience = Instant::now() + GLANCE;
        let mut file = loop {
            if let Some(file) = self.lock_if_free()? {
                break file;
            }
            // Whoever only looks who holds the folder has the lock for a moment and no name in it.
            let living = self.holder().filter(|(pid, _)| runs(*pid, program));
            if living.is_some() || Instant::now() > patience {
                return Err(ClusterError::InUse {
                    folder: self.0.clone(),
                    holder: living.map_or_else(
                        || "another process".to_owned(),
                        |(pid, what)| format!("process {pid} ({what})"),
                    ),
                });
            }
            sleep(Duration::from_millis(20));
        };
        let write = |file: &mut File| -> io::Result<()> {
            file.set_len(0)?;
            file.rewind()?;
            writeln!(file, "{}\n{holder}", std::process::id())
        };
        write(&mut file).doing(|| format!("write to {}", self.0.join("lock").display()))?;
        Ok(file)
    }

    /// Takes the lock without a name on it, unless another process holds it.
    pub(super) fn lock_if_free(&self) -> Result<Option<File>, ClusterError> {
        let file = self.open_lock("lock")?;
        self.try_lock(&file).map(|taken| taken.then_some(file))
    }

    /// Takes the keeper's lock, waiting while an earlier keeper ends its server.
    pub(super) fn lock_as_keeper(&self) -> Result<File, ClusterError> {
        let file = self.open_lock("keeper.lock")?;
        let patience = Instant::now() + Duration::from_secs(90);
        while !self.try_lock(&file)? {
            if Instant::now() > patience {
                return Err(ClusterError::Failed(format!(
                    "an earlier keeper of {} has not ended within 90 s; look for `keep-cluster` among the \
                     processes and end it",
                    self.0.display()
                )));
            }
            sleep(Duration::from_millis(20));
        }
        Ok(file)
    }

    fn try_lock(&self, file: &File) -> Result<bool, ClusterError> {
        match file.try_lock() {
            Ok(()) => Ok(true),
            Err(TryLockError::WouldBlock) => Ok(false),
            Err(TryLockError::Error(error)) => {
                Err(error).doing(|| format!("lock {}", self.0.display()))
            }
        }
    }

    /// Process and command written by whoever took the lock last and was killed, or has it still.
    pub(super) fn holder(&self) -> Option<(i32, String)> {
        let text = fs::read_to_string(self.0.join("lock")).ok()?;
        let (pid, what) = text.trim_end().split_once('\n')?;
        Some((pid.parse().ok()?, what.to_owned()))
    }

    fn open_lock(&self, name: &str) -> Result<File, ClusterError> {
        let path = self.0.join(name);
        open_private(OpenOptions::new().read(true).write(true), &path)
            .doing(|| format!("open {}", path.display()))
    }
}

/// Opens a file of the data folder, making it where it is missing; nobody but its owner reads it.
pub(super) fn open_private(options: &mut OpenOptions, path: &Path) -> io::Result<File> {
    const PRIVATE: u32 = 0o600;
    let file = options.create(true).mode(PRIVATE).open(path)?;
    // One that an earlier release made is open to all.
    if file.metadata()?.mode() & 0o077 != 0 {
        file.set_permissions(fs::Permissions::from_mode(PRIVATE))?;
    }
    Ok(file)
}

/// The user that the server runs as when root starts it: a server refuses to run as root.
#[derive(Clone, Debug, Serialize, Deserialize)]
pub(super) struct Owner {
    pub(super) name: String,
    pub(super) uid: u32,
    pub(super) gid: u32,
}

impl Owner {
    /// None for an ordinary user. For root: who owns the cluster, else `postgres`, else `nobody`.
    pub(super) fn of(cluster: &Path) -> Result<Option<Self>, ClusterError> {
        if !geteuid().is_root() {
            return Ok(None);
        }
        if let Ok(metadata) = fs::metadata(cluster) {
            let name = User::from_uid(metadata.uid().into()).ok().flatten();
            let name = name.map_or_else(|| metadata.uid().to_string(), |user| user.name);
            if metadata.uid() == 0 {
                return Err(ClusterError::Failed(format!(
                    "{} belongs to root, as whom no server runs; give it to the user that made it",
                    cluster.display()
                )));
            }
            return Ok(Some(Self {
                name,
                uid: metadata.uid(),
                gid: metadata.gid(),
            }));
        }
        let user = ["postgres", "nobody"]
            .into_iter()
            .find_map(|name| User::from_name(name).ok().flatten());
        let Some(user) = user else {
            return Err(ClusterError::Failed(
                "no user `postgres` or `nobody` to run the server as; start as an ordinary user"
                    .to_owned(),
            ));
        };
        Ok(Some(Self {
            name: user.name,
            uid: user.uid.as_raw(),
            gid: user.gid.as_raw(),
        }))
    }

    /// Refuses a path that the owner cannot enter, naming the folder on the way that is closed.
    pub(super) fn check_reach(owner: Option<&Self>, path: &Path) -> Result<(), ClusterError> {
        let Some(owner) = owner else { return Ok(()) };
        let ancestors: Vec<&Path> = path.ancestors().collect();
        for ancestor in ancestors.into_iter().rev() {
            let metadata =
                fs::metadata(ancestor).doing(|| format!("look at {}", ancestor.display()))?;
            let enter = if metadata.uid() == owner.uid {
                0o100
            } else if metadata.gid() == owner.gid {
                0o010
            } else {
                0o001
            };
            if metadata.mode() & enter == 0 {
                return Err(ClusterError::Unreachable {
                    path: path.to_owned(),
                    ancestor: ancestor.to_owned(),
                    user: owner.name.clone(),
                });
            }
        }
        Ok(())
    }
}

/// A command run as the owner, away from folders that the owner may not enter, and deaf to the caller's
/// environment (`PGPORT`, locale, time zone).
pub(super) fn command(program: &Path, owner: Option<&Owner>) -> Command {
    use std::os::unix::process::CommandExt;
    let mut command = Command::new(program);
    command.current_dir("/").env_clear().env("LC_ALL", "C");
    if let Some(owner) = owner {
        command.uid(owner.uid).gid(owner.gid);
    }
    command
}

/// Makes a folder that only the owner may enter.
pub(super) fn make_private(path: &Path, owner: Option<&Owner>) -> io::Result<()> {
    DirBuilder::new().mode(0o700).create(path)?;
    match owner {
        Some(owner) => chown(path, Some(owner.uid), Some(owner.gid)),
        None => Ok(()),
    }
}

/// Makes the folder of the socket: short, directly under the temp folder, mode 0700.
pub(super) fn make_socket_folder(
    temp: &Path,
    owner: Option<&Owner>,
) -> Result<PathBuf, ClusterError> {
    let path = first_free(temp, SOCKET_PREFIX, |path| make_private(path, owner))?;
    let socket = path.join(format!(".s.PGSQL.{PORT}"));
    let length = socket.as_os_str().len();
    let checked = if length > SOCKET_LIMIT {
        Err(ClusterError::SocketPathTooLong {
            path: socket,
            length,
            limit: SOCKET_LIMIT,
        })
    } else {
        Owner::check_reach(owner, &path)
    };
    if checked.is_err() {
        let _ = fs::remove_dir(&path);
    }
    checked.map(|()| path)
}

/// Whether a folder's name is one that [`make_socket_folder`] gives.
pub(super) fn is_socket_folder(path: &Path) -> bool {
    path.file_name()
        .is_some_and(|name| name.to_string_lossy().starts_with(SOCKET_PREFIX))
}

/// Makes a fresh data folder directly under the temp folder.
///
/// # Errors
/// The temp folder cannot be written to.
pub fn fresh_folder(temp: &Path) -> Result<PathBuf, ClusterError> {
    let mode = if geteuid().is_root() { 0o755 } else { 0o700 };
    first_free(temp, "realterms-", |path| {
        DirBuilder::new().mode(mode).create(path)
    })
}

fn first_free(
    temp: &Path,
    prefix: &str,
    make: impl Fn(&Path) -> io::Result<()>,
) -> Result<PathBuf, ClusterError> {
    let mut number = 0;
    loop {
        let path = temp.join(format!("{prefix}{}-{number}", std::process::id()));
        match make(&path) {
            Ok(()) => return Ok(path),
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists && number < 10_000 => {
                number += 1;
            }
            Err(error) => return Err(error).doing(|| format!("make {}", path.display())),
        }
    }
}
