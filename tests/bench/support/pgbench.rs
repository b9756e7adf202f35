//! The database's own load generator, as the yardstick.

use std::path::PathBuf;
use std::process::Command;

use anyhow::{Context, bail};

use super::service::Database;

/// Finds `pgbench` on the PATH or where distributions keep the server's programs.
pub(crate) fn find() -> anyhow::Result<PathBuf> {
    let path = std::env::var_os("PATH").unwrap_or_default();
    let usual = [
        "/usr/lib/postgresql",
        "/usr/pgsql",
        "/opt/homebrew/opt/postgresql",
    ];
    let mut folders: Vec<PathBuf> = std::env::split_paths(&path).collect();
    folders.push(PathBuf::from("/usr/pgsql/bin"));
    for folder in usual {
        for version in (14..=20).rev() {
            folders.push(PathBuf::from(format!("{folder}/{version}/bin")));
            folders.push(PathBuf::from(format!("{folder}-{version}/bin")));
            folders.push(PathBuf::from(format!("{folder}@{version}/bin")));
        }
    }
    folders
        .into_iter()
        .map(|folder| folder.join("pgbench"))
        .find(|program| program.is_file())
        .context(
            "pgbench is missing: it comes with PostgreSQL's server or contrib package (Debian, Ubuntu: \
             postgresql-contrib or postgresql; Fedora: postgresql-contrib; Homebrew: postgresql)",
        )
}

/// Transactions a second of a script of one statement, prepared, on so many connections.
pub(crate) fn run(
    program: &PathBuf,
    database: &Database,
    script: &std::path::Path,
    connections: usize,
    seconds: u64,
) -> anyhow::Result<f64> {
    let output = Command::new(program)
        .args(["--no-vacuum", "--protocol=prepared"])
        .arg(format!("--client={connections}"))
        .arg(format!("--jobs={}", connections.min(2)))
        .arg(format!("--time={seconds}"))
        .arg(format!("--host={}", database.socket.display()))
        .arg(format!("--port={}", database.port))
        .arg(format!("--username={}", database.user))
        .arg(format!("--file={}", script.display()))
        .arg(&database.name)
        .output()?;
    let text = String::from_utf8_lossy(&output.stdout);
    let rate = text
        .lines()
        .find_map(|line| line.strip_prefix("tps = ")?.split(' ').next()?.parse().ok());
    match rate {
        Some(rate) if output.status.success() => Ok(rate),
        _ => bail!(
            "pgbench failed: {}",
            String::from_utf8_lossy(&output.stderr)
        ),
    }
}
