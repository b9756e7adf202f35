//! Settings, read from flags and `REALTERMS_*` in this one place and passed down.

use crate::http;
use crate::intake;
use crate::service::receiving::Limits;
use crate::store::cluster::{Binaries, ClusterOptions};
use crate::store::{DatabaseOptions, Place};
use crate::telemetry::LogFormat;
use clap::builder::Resettable;
use clap::{Args, Command, FromArgMatches};
use std::fmt;
use std::net::SocketAddr;
use std::num::NonZeroUsize;
use std::path::PathBuf;
use std::str::FromStr;
use std::time::Duration;
use tracing_subscriber::EnvFilter;

/// The start of the name of every setting in the environment.
const PREFIX: &str = "REALTERMS_";

/// Every setting of the program.
#[derive(Args, Clone, Debug)]
#[command(next_help_heading = "Settings")]
pub struct Settings {
    /// Address to serve on
    #[arg(
        long,
        global = true,
        env = "REALTERMS_LISTEN",
        value_name = "ADDRESS:PORT"
    )]
    #[arg(default_value = "127.0.0.1:8640")]
    pub listen: SocketAddr,

    /// Folder of the private database cluster [default: /var/lib/realterms for root, else realterms in the XDG data
    /// folder; a fresh one for the demo]
    #[arg(
        long,
        global = true,
        env = "REALTERMS_DATA_FOLDER",
        value_name = "FOLDER"
    )]
    pub data_folder: Option<PathBuf>,

    /// Use this PostgreSQL (14 or later) instead of a private cluster [default: a private cluster]
    #[arg(
        long,
        global = true,
        env = "REALTERMS_DATABASE_URL",
        value_name = "URL"
    )]
    #[arg(hide_env_values = true)]
    pub database_url: Option<String>,

    /// Folder of the programs of the PostgreSQL server [default: searched on PATH and in the usual folders]
    #[arg(
        long,
        global = true,
        env = "REALTERMS_POSTGRES_BIN",
        value_name = "FOLDER"
    )]
    pub postgres_bin: Option<PathBuf>,

    /// Whether commits are forced to disk; false is for tests, since a power cut may then ruin the private cluster
    #[arg(long, global = true, env = "REALTERMS_DURABLE", value_name = "BOOL")]
    #[arg(default_value_t = true, action = clap::ArgAction::Set)]
    pub durable: bool,

    /// Database connections for everything but uploads
    #[arg(
        long,
        global = true,
        env = "REALTERMS_CONNECTIONS",
        value_name = "COUNT"
    )]
    #[arg(default_value_t = 16, value_parser = clap::value_parser!(u32).range(1..))]
    pub connections: u32,

    /// Database connections for uploads, one for each that is under way
    #[arg(
        long,
        global = true,
        env = "REALTERMS_UPLOAD_CONNECTIONS",
        value_name = "COUNT"
    )]
    #[arg(default_value_t = 4, value_parser = clap::value_parser!(u32).range(1..))]
    pub upload_connections: u32,

    /// Threads that answer requests [default: one for each core]
    #[arg(long, global = true, env = "REALTERMS_WORKERS", value_name = "COUNT")]
    pub workers: Option<NonZeroUsize>,

    /// Largest upload, as received: bytes, or with KiB, MiB or GiB
    #[arg(
        long,
        global = true,
        env = "REALTERMS_MAX_UPLOAD_BYTES",
        value_name = "BYTES"
    )]
    #[arg(default_value = "4GiB")]
    pub max_upload_bytes: Bytes,

    /// Memory for the observations of one upload before they spill to the database
    #[arg(
        long,
        global = true,
        env = "REALTERMS_UPLOAD_MEMORY",
        value_name = "BYTES"
    )]
    #[arg(default_value = "256MiB")]
    pub upload_memory: Bytes,

    /// Slowest body that is waited for, in bytes a second over the body patience
    #[arg(
        long,
        global = true,
        env = "REALTERMS_MIN_BODY_RATE",
        value_name = "BYTES"
    )]
    #[arg(default_value = "1KiB")]
    pub min_body_rate: Bytes,

    /// Seconds that a body may be slower than that before it is answered with 408
    #[arg(
        long,
        global = true,
        env = "REALTERMS_BODY_PATIENCE",
        value_name = "SECONDS"
    )]
    #[arg(default_value_t = 30, value_parser = clap::value_parser!(u64).range(1..=86_400))]
    pub body_patience: u64,

    /// Days that refused uploads are kept with their report and bytes
    #[arg(
        long,
        global = true,
        env = "REALTERMS_REFUSED_DAYS",
        value_name = "DAYS"
    )]
    #[arg(default_value_t = 30)]
    pub refused_days: u32,

    /// Days that estimates are kept with their result and rows
    #[arg(
        long,
        global = true,
        env = "REALTERMS_ESTIMATE_RETENTION_DAYS",
        value_name = "DAYS"
    )]
    #[arg(default_value_t = 30)]
    pub estimate_retention_days: u32,

    /// What to log: a level, or directives for parts of the program [default: info,sqlx=warn; error for the demo]
    #[arg(long, global = true, env = "REALTERMS_LOG", value_name = "FILTER")]
    #[arg(value_parser = parse_filter)]
    pub log: Option<String>,

    /// How to log, on standard error
    #[arg(
        long,
        global = true,
        env = "REALTERMS_LOG_FORMAT",
        value_name = "FORMAT"
    )]
    #[arg(default_value_t, value_enum)]
    pub log_format: LogFormat,
}

impl Default for Settings {
    /// The defaults, whatever the environment says.
    fn default() -> Self {
        let command = Self::augment_args(Command::new("realterms"))
            .mut_args(|argument| argument.env(Resettable::Reset));
        let matches = command.get_matches_from(["realterms"]);
        Self::from_arg_matches(&matches).expect("the defaults are values of their settings")
    }
}

impl Settings {
    /// The database that these settings name, for a process that calls itself `holder`. A private cluster is
    /// held by this process alone, or `joined` where another holds it.
    ///
    /// # Errors
    /// No data folder is set and none can be derived.
    pub fn database(&self, holder: &str, joined: bool) -> anyhow::Result<DatabaseOptions> {
        let place = match &self.database_url {
            Some(url) => Place::Url(url.clone()),
            None if joined => Place::HeldOrJoined(self.cluster(holder)?),
            None => Place::Held(self.cluster(holder)?),
        };
        Ok(DatabaseOptions {
            place,
            connections: self.connections,
            upload_connections: self.upload_connections,
        })
    }

    /// How to serve.
    #[must_use]
    pub fn serving(&self) -> http::Options {
        let cores = || std::thread::available_parallelism().map_or(1, usize::from);
        http::Options {
            listen: self.listen,
            workers: self.workers.map_or_else(cores, usize::from),
            limits: Limits {
                max_bytes: self.max_upload_bytes.0,
                memory_budget: usize::try_from(self.upload_memory.0).unwrap_or(usize::MAX),
                min_rate: self.min_body_rate.0,
                patience: Duration::from_secs(self.body_patience),
                intake: intake::Limits::default(),
            },
            refused_days: self.refused_days,
            estimate_days: self.estimate_retention_days,
        }
    }

    /// The programs that dump and restore: of a private cluster, those of the version that made it.
    ///
    /// # Errors
    /// None that fit; or no data folder is set and none can be derived.
    pub fn tools(&self, holder: &str) -> anyhow::Result<Binaries> {
        Ok(match self.database_url {
            Some(_) => Binaries::find(self.postgres_bin.as_deref(), &search_path(), None)?,
            None => self.cluster(holder)?.find_binaries()?,
        })
    }

    /// The private cluster that these settings name.
    ///
    /// # Errors
    /// No data folder is set and none can be derived.
    pub fn cluster(&self, holder: &str) -> anyhow::Result<ClusterOptions> {
        let folder = self.data_folder.clone().or_else(default_data_folder);
        let folder = folder.ok_or_else(|| {
            anyhow::anyhow!("no data folder: set --data-folder (REALTERMS_DATA_FOLDER), or HOME")
        })?;
        Ok(ClusterOptions {
            folder,
            binaries: self.postgres_bin.clone(),
            search_path: search_path(),
            temp_folder: std::env::temp_dir(),
            keeper: std::env::current_exe()?,
            holder: holder.to_owned(),
            durable: self.durable,
            disposable: false,
        })
    }
}

/// The folders of PATH.
fn search_path() -> Vec<PathBuf> {
    std::env::split_paths(&std::env::var_os("PATH").unwrap_or_default()).collect()
}

/// `/var/lib/realterms` for root, else `realterms` in the XDG data folder.
fn default_data_folder() -> Option<PathBuf> {
    if nix::unistd::geteuid().is_root() {
        return Some(PathBuf::from("/var/lib/realterms"));
    }
    let absolute = |name: &str| {
        let folder = PathBuf::from(std::env::var_os(name)?);
        folder.is_absolute().then_some(folder)
    };
    absolute("XDG_DATA_HOME")
        .or_else(|| absolute("HOME").map(|home| home.join(".local/share")))
        .map(|folder| folder.join("realterms"))
}

/// Refuses a `REALTERMS_*` that names no setting of the command, most likely a slip of the pen.
///
/// # Errors
/// The variable is named, and the known ones are listed.
pub fn check_environment(command: &Command) -> anyhow::Result<()> {
    let known: Vec<String> = command
        .get_arguments()
        .filter_map(|argument| argument.get_env())
        .map(|name| name.to_string_lossy().into_owned())
        .collect();
    for (name, _) in std::env::vars_os() {
        let name = name.to_string_lossy();
        if name.starts_with(PREFIX) && !known.iter().any(|k| *k == name) {
            anyhow::bail!("{name} is not a setting; known are {}", known.join(", "));
        }
    }
    Ok(())
}

/// A number of bytes; read with a unit of KiB, MiB or GiB, or none.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Bytes(pub u64);

const UNITS: [(&str, u64); 3] = [("GiB", 1 << 30), ("MiB", 1 << 20), ("KiB", 1 << 10)];

impl FromStr for Bytes {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let (digits, unit) = UNITS
            .into_iter()
            .find_map(|(name, unit)| Some((text.strip_suffix(name)?, unit)))
            .unwrap_or((text, 1));
        digits
            .trim_end()
            .parse::<u64>()
            .ok()
            .and_then(|count| count.checked_mul(unit))
            .map(Self)
            .ok_or_else(|| {
                "expected a whole number, alone or followed by KiB, MiB or GiB".to_owned()
            })
    }
}

impl fmt::Display for Bytes {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (name, unit) in UNITS {
            if self.0 >= unit && self.0.is_multiple_of(unit) {
                return write!(f, "{} {name}", self.0 / unit);
            }
        }
        write!(f, "{} bytes", self.0)
    }
}

fn parse_filter(text: &str) -> Result<String, String> {
    EnvFilter::try_new(text)
        .map(|_| text.to_owned())
        .map_err(|error| error.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bytes_are_read_with_and_without_a_unit() {
        assert_eq!("4GiB".parse(), Ok(Bytes(4 << 30)));
        assert_eq!("256 MiB".parse(), Ok(Bytes(256 << 20)));
        assert_eq!("17".parse(), Ok(Bytes(17)));
        assert!("4GB".parse::<Bytes>().is_err());
        assert!("-1".parse::<Bytes>().is_err());
        assert!("99999999999GiB".parse::<Bytes>().is_err());
        assert_eq!(Bytes(3 << 20).to_string(), "3 MiB");
        assert_eq!(Bytes(1025).to_string(), "1025 bytes");
    }

    #[test]
    fn the_defaults_are_those_of_the_contract() {
        let settings = Settings::default();
        assert_eq!(settings.listen.to_string(), "127.0.0.1:8640");
        assert_eq!(settings.max_upload_bytes, Bytes(4 << 30));
        assert_eq!(settings.upload_memory, Bytes(256 << 20));
        assert_eq!(settings.body_patience, 30);
        assert_eq!(settings.refused_days, 30);
        assert_eq!(settings.estimate_retention_days, 30);
    }
}
