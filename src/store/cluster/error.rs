//! What can go wrong with a private cluster, each with who, what and the remedy.

use std::io;
use std::path::PathBuf;

/// Why a private cluster could not be started, joined or stopped.
#[derive(Debug, thiserror::Error)]
pub enum ClusterError {
    /// No folder holds the programs of a server of version 14 or later.
    #[error(
        "found no PostgreSQL server (14 or later; initdb, postgres, pg_dump and pg_restore side by side); \
         looked in: {looked}. Install one with .ci/setup, name its folder with --postgres-bin \
         (REALTERMS_POSTGRES_BIN), or use a server of your own with --database-url (REALTERMS_DATABASE_URL)"
    )]
    NoBinaries {
        /// Each folder with what is missing there.
        looked: String,
    },
    /// The data folder was made by a version that is not installed.
    #[error(
        "{folder} was made by PostgreSQL {made_by}, but the programs found are of version {found}. \
         Install PostgreSQL {made_by}, or name its folder with --postgres-bin (REALTERMS_POSTGRES_BIN)"
    )]
    OtherVersion {
        /// The cluster's folder.
        folder: PathBuf,
        /// Its major version.
        made_by: u32,
        /// The major versions that are there.
        found: String,
    },
    /// Another process holds the data folder.
    #[error(
        "the data folder {folder} is in use by {holder}. Stop it with `realterms database stop --data-folder \
         {folder}`, or choose another folder with --data-folder (REALTERMS_DATA_FOLDER)"
    )]
    InUse {
        /// The data folder.
        folder: PathBuf,
        /// Process number and command of the holder.
        holder: String,
    },
    /// Nothing of ours is there.
    #[error(
        "there is no data folder at {0}; name another with --data-folder (REALTERMS_DATA_FOLDER), or make one \
         with `realterms serve`"
    )]
    NoFolder(PathBuf),
    /// The user that the server runs as cannot enter a folder.
    #[error(
        "{path} cannot be reached by the user `{user}`, as whom the server runs when started by root: {ancestor} \
         is closed to it. Choose a folder elsewhere, or open {ancestor} with `chmod o+x`"
    )]
    Unreachable {
        /// The folder that is wanted.
        path: PathBuf,
        /// The folder on the way that is closed.
        ancestor: PathBuf,
        /// The user's name.
        user: String,
    },
    /// The temp folder's name leaves no room for a Unix socket.
    #[error(
        "the socket path {path} has {length} bytes, and this system allows {limit}. Set TMPDIR to a shorter folder"
    )]
    SocketPathTooLong {
        /// The socket.
        path: PathBuf,
        /// Its length in bytes.
        length: usize,
        /// What the system allows.
        limit: usize,
    },
    /// A system call failed.
    #[error("cannot {doing}: {source}")]
    Io {
        /// What was being done, to what.
        doing: String,
        /// Why not.
        source: io::Error,
    },
    /// The server or one of its tools said no, or the folder is not in order.
    #[error("{0}")]
    Failed(String),
}

/// Adds what was being done to an I/O error.
pub(super) trait Doing<T> {
    fn doing(self, what: impl FnOnce() -> String) -> Result<T, ClusterError>;
}

impl<T> Doing<T> for io::Result<T> {
    fn doing(self, what: impl FnOnce() -> String) -> Result<T, ClusterError> {
        self.map_err(|source| ClusterError::Io {
            doing: what(),
            source,
        })
    }
}
