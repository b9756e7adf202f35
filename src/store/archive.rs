//! Dump to a file and restore from one, by the tools beside the server's programs.

use super::Database;
use super::cluster::Binaries;
use super::pool::{MIGRATIONS, SCHEMA, lock_migrations, undo_cut_short_restore};
use sqlx::postgres::{PgConnectOptions, PgSslMode};
use sqlx::{ConnectOptions, Connection, PgConnection};
use std::io;
use std::path::{Path, PathBuf};
use std::process::Stdio;
use tokio::process::Command;

/// Why a dump or a restore failed.
#[derive(Debug, thiserror::Error)]
pub enum ArchiveError {
    /// A dump does not write over a file.
    #[error("{0} exists; a dump overwrites nothing, so choose another name")]
    Exists(PathBuf),
    /// The file cannot be read or written.
    #[error("cannot {doing} {}: {source}", path.display())]
    File {
        /// What was being done.
        doing: &'static str,
        /// The file or program.
        path: PathBuf,
        /// Why not.
        source: io::Error,
    },
    /// The tool ended with an error.
    #[error("{tool} failed; nothing was changed: {said}")]
    Tool {
        /// Its name.
        tool: &'static str,
        /// What it said.
        said: String,
    },
    /// The file holds something else.
    #[error("{0} is not a dump of Realterms; nothing was changed")]
    Foreign(PathBuf),
    /// The database refused a step.
    #[error("the database refused; nothing was changed: {0}")]
    Database(#[from] sqlx::Error),
    /// What was restored cannot be brought up to date.
    #[error("the dump cannot be migrated to this release; nothing was changed: {0}")]
    Migrate(#[from] sqlx::migrate::MigrateError),
}

/// Writes everything of ours to `file`, as one consistent moment; the service may run meanwhile.
///
/// # Errors
/// The file exists or cannot be written, or the tool fails; then no file is left.
pub async fn dump(database: &Database, tools: &Binaries, file: &Path) -> Result<(), ArchiveError> {
    if file.exists() {
        return Err(ArchiveError::Exists(file.to_owned()));
    }
    // A dump that is cut short does not carry the name of one.
    let mut part = file.as_os_str().to_owned();
    part.push(".part");
    let part = PathBuf::from(part);
    let mut tool = tool(tools, "pg_dump", Some(database.connect_options()));
    tool.args(["--format=custom", "--no-owner", "--no-privileges"])
        .arg(format!("--schema={SCHEMA}"))
        .arg("--file")
        .arg(&part);
    let dumped = run("pg_dump", tool).await.and_then(|_| {
        std::fs::rename(&part, file).map_err(|source| ArchiveError::File {
            doing: "write",
            path: file.to_owned(),
            source,
        })
    });
    if dumped.is_err() {
        let _ = std::fs::remove_file(&part);
    }
    dumped
}

/// Puts what `file` holds in the place of everything of ours, brought up to date by the migrations.
///
/// The old content is kept aside until the new one is whole; a restore that is cut short is undone at the next
/// start.
///
/// # Errors
/// The file is no dump of ours, or a step fails; then everything is as before.
pub async fn restore(
    database: &Database,
    tools: &Binaries,
    file: &Path,
) -> Result<(), ArchiveError> {
    let mut list = tool(tools, "pg_restore", None);
    list.arg("--list").arg(file);
    let list = run("pg_restore", list).await?;
    if !list.contains(&format!(" SCHEMA - {SCHEMA} ")) {
        return Err(ArchiveError::Foreign(file.to_owned()));
    }
    let mut connection = PgConnection::connect_with(database.connect_options()).await?;
    lock_migrations(&mut connection).await?;
    undo_cut_short_restore(&mut connection).await?;
    sqlx::query("ALTER SCHEMA realterms RENAME TO realterms_before_restore")
        .execute(&mut connection)
        .await?;
    let mut tool = tool(tools, "pg_restore", Some(database.connect_options()));
    tool.args(["--single-transaction", "--exit-on-error"])
        .args(["--no-owner", "--no-privileges"])
        .arg("--dbname")
        .arg(
            database
                .connect_options()
                .get_database()
                .unwrap_or_default(),
        )
        .arg(file);
    let restored = async {
        run("pg_restore", tool).await?;
        MIGRATIONS.run_direct(None, &mut connection, false).await?;
        sqlx::query("DROP SCHEMA realterms_before_restore CASCADE")
            .execute(&mut connection)
            .await?;
        Ok(())
    };
    let restored = restored.await;
    if restored.is_err() {
        undo_cut_short_restore(&mut connection).await?;
    }
    connection.close().await?;
    restored
}

/// One of the tools, told by its environment where the database is: what stands in arguments, others can read.
fn tool(tools: &Binaries, name: &str, connect: Option<&PgConnectOptions>) -> Command {
    let mut command = Command::new(tools.program(name));
    command.stdin(Stdio::null()).kill_on_drop(true);
    let Some(connect) = connect else {
        return command;
    };
    let host = match connect.get_socket() {
        Some(socket) => socket.display().to_string(),
        None => connect.get_host().to_owned(),
    };
    command
        .env("PGHOST", host)
        .env("PGPORT", connect.get_port().to_string())
        .env("PGUSER", connect.get_username())
        .env("PGDATABASE", connect.get_database().unwrap_or_default())
        .env("PGSSLMODE", ssl_mode(connect.get_ssl_mode()));
    if let Some(password) = connect.to_url_lossy().password() {
        command.env("PGPASSWORD", percent_decoded(password));
    }
    command
}

/// Runs a tool to its end; what it printed.
async fn run(tool: &'static str, mut command: Command) -> Result<String, ArchiveError> {
    let output = command
        .output()
        .await
        .map_err(|source| ArchiveError::File {
            doing: "run",
            path: command.as_std().get_program().into(),
            source,
        })?;
    if output.status.success() {
        return Ok(String::from_utf8_lossy(&output.stdout).into_owned());
    }
    let said = String::from_utf8_lossy(&output.stderr).trim().to_owned();
    Err(ArchiveError::Tool { tool, said })
}

fn ssl_mode(mode: PgSslMode) -> &'static str {
    match mode {
        PgSslMode::Disable => "disable",
        PgSslMode::Allow => "allow",
        PgSslMode::Prefer => "prefer",
        PgSslMode::Require => "require",
        PgSslMode::VerifyCa => "verify-ca",
        PgSslMode::VerifyFull => "verify-full",
    }
}

fn percent_decoded(text: &str) -> String {
    let mut bytes = Vec::with_capacity(text.len());
    let mut rest = text;
    while let Some((plain, after)) = rest.split_once('%') {
        bytes.extend_from_slice(plain.as_bytes());
        let byte = after
            .get(..2)
            .and_then(|hex| u8::from_str_radix(hex, 16).ok());
        bytes.push(byte.unwrap_or(b'%'));
        rest = if byte.is_some() { &after[2..] } else { after };
    }
    bytes.extend_from_slice(rest.as_bytes());
    String::from_utf8_lossy(&bytes).into_owned()
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::str::FromStr;

    #[test]
    fn a_password_reaches_the_tools_as_it_is_typed_and_not_in_their_arguments() {
        let connect = PgConnectOptions::from_str("postgres://me:p%40s%2Fs%25+%C3%A9@h:5433/db");
        let folder = PathBuf::from("/bin");
        let tools = Binaries { folder, major: 15 };
        let command = tool(&tools, "pg_dump", Some(&connect.unwrap()));
        let environment: Vec<_> = command.as_std().get_envs().collect();
        let has = |name: &str, value: &str| {
            let pair = (name.as_ref(), Some(value.as_ref()));
            assert!(environment.contains(&pair), "{name} in {environment:?}");
        };
        has("PGPASSWORD", "p@s/s%+é");
        has("PGHOST", "h");
        has("PGPORT", "5433");
        has("PGDATABASE", "db");
        assert_eq!(command.as_std().get_args().count(), 0);
    }
}
