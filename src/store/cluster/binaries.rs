//! Where the programs of the PostgreSQL server are.

use super::error::ClusterError;
use std::fmt;
use std::path::{Path, PathBuf};
use std::process::Command;

/// The oldest major version whose SQL we keep to.
const OLDEST: u32 = 14;

/// What must stand side by side: links and wrappers elsewhere are resolved to their folder.
const PROGRAMS: [&str; 4] = ["initdb", "postgres", "pg_dump", "pg_restore"];

/// Usual folders as (parent, start of the name, folder below).
const USUAL: [(&str, &str, &str); 8] = [
    ("/usr/lib/postgresql", "", "bin"),
    ("/usr", "pgsql-", "bin"),
    ("/usr/lib64", "postgresql-", "bin"),
    ("/usr/libexec", "postgresql", ""),
    ("/opt/homebrew/opt", "postgresql", "bin"),
    ("/usr/local/opt", "postgresql", "bin"),
    ("/opt/local/lib", "postgresql", "bin"),
    ("/Applications/Postgres.app/Contents/Versions", "", "bin"),
];

/// The programs of one installed server.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Binaries {
    /// The folder that holds them.
    pub folder: PathBuf,
    /// Their major version.
    pub major: u32,
}

impl Binaries {
    /// Finds the programs: in the folder set, else on the search path, else the newest in the usual folders.
    /// A `cluster` that exists decides the major version.
    ///
    /// # Errors
    /// None of version 14 or later, or none of the version that made `cluster`.
    pub fn find(
        setting: Option<&Path>,
        search_path: &[PathBuf],
        cluster: Option<&Path>,
    ) -> Result<Self, ClusterError> {
        let folders = match setting {
            Some(folder) => vec![folder.to_owned()],
            None => candidates(search_path),
        };
        let mut usable: Vec<Self> = Vec::new();
        let mut looked: Vec<String> = Vec::new();
        for folder in folders {
            match Self::inspect(&folder) {
                Ok(binaries) => usable.push(binaries),
                Err(why) => looked.push(format!("{} ({why})", folder.display())),
            }
        }
        if usable.is_empty() {
            if looked.is_empty() {
                looked.push("PATH and the usual folders".to_owned());
            }
            let looked = looked.join(", ");
            return Err(ClusterError::NoBinaries { looked });
        }
        let made = cluster.and_then(|cluster| Some((cluster, made_by(cluster)?)));
        let Some((cluster, made_by)) = made else {
            return Ok(usable.swap_remove(0));
        };
        if let Some(at) = usable.iter().position(|b| b.major == made_by) {
            return Ok(usable.swap_remove(at));
        }
        let found: Vec<String> = usable.iter().map(|b| b.major.to_string()).collect();
        Err(ClusterError::OtherVersion {
            folder: cluster.to_owned(),
            made_by,
            found: found.join(", "),
        })
    }

    /// The path of one of the programs.
    #[must_use]
    pub fn program(&self, name: &str) -> PathBuf {
        self.folder.join(name)
    }

    fn inspect(folder: &Path) -> Result<Self, String> {
        let missing: Vec<&str> = PROGRAMS
            .into_iter()
            .filter(|name| !folder.join(name).is_file())
            .collect();
        if !missing.is_empty() {
            return Err(format!("no {}", missing.join(", no ")));
        }
        let said = Command::new(folder.join("postgres"))
            .arg("--version")
            .output()
            .map_err(|error| format!("postgres --version: {error}"))?;
        let said = String::from_utf8_lossy(&said.stdout).trim().to_owned();
        match major_of(&said) {
            Some(major) if major >= OLDEST => Ok(Self {
                folder: folder.to_owned(),
                major,
            }),
            Some(major) => Err(format!("version {major}, too old")),
            None => Err(format!("postgres --version says {said:?}")),
        }
    }
}

impl fmt::Display for Binaries {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "PostgreSQL {} in {}", self.major, self.folder.display())
    }
}

/// The major version that made a cluster, where there is one.
pub(super) fn made_by(cluster: &Path) -> Option<u32> {
    let text = std::fs::read_to_string(cluster.join("PG_VERSION")).ok()?;
    text.trim().parse().ok()
}

/// The number after the product name in `postgres (PostgreSQL) 15.13 (…)`.
fn major_of(said: &str) -> Option<u32> {
    let (_, rest) = said.split_once("(PostgreSQL) ")?;
    let digits = rest.split(|c: char| !c.is_ascii_digit()).next()?;
    digits.parse().ok()
}

fn candidates(search_path: &[PathBuf]) -> Vec<PathBuf> {
    let mut folders: Vec<PathBuf> = Vec::new();
    let from_path = search_path
        .iter()
        .filter_map(|folder| folder.join("initdb").canonicalize().ok())
        .filter_map(|program| program.parent().map(Path::to_owned));
    let mut usual: Vec<(u32, PathBuf)> = Vec::new();
    for (parent, start, below) in USUAL {
        for entry in std::fs::read_dir(parent).into_iter().flatten().flatten() {
            let name = entry.file_name().to_string_lossy().into_owned();
            let folder = entry.path().join(below);
            if name.starts_with(start) && folder.join("initdb").exists() {
                let digits: String = name.chars().filter(char::is_ascii_digit).take(2).collect();
                usual.push((digits.parse().unwrap_or(0), folder));
            }
        }
    }
    usual.sort_by(|a, b| b.cmp(a));
    for folder in from_path.chain(usual.into_iter().map(|(_, folder)| folder)) {
        if !folders.contains(&folder) {
            folders.push(folder);
        }
    }
    folders
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_major_version_is_read_from_what_the_server_says() {
        assert_eq!(
            major_of("postgres (PostgreSQL) 15.13 (Debian 15.13-0)"),
            Some(15)
        );
        assert_eq!(major_of("postgres (PostgreSQL) 19devel"), Some(19));
        assert_eq!(major_of("another program 15.1"), None);
    }

    #[test]
    fn a_folder_without_the_programs_is_named_with_what_is_missing() {
        let empty = Path::new("/nonexistent/bin");
        let error = Binaries::find(Some(empty), &[], None).unwrap_err();
        let text = error.to_string();
        assert!(text.contains("/nonexistent/bin (no initdb"), "{text}");
        assert!(text.contains(".ci/setup"), "{text}");
    }
}
