//! `realterms database`: the private cluster by hand, migrations, dump and restore.

use super::say;
use crate::config::Settings;
use crate::store::cluster::{self, Address, Stopped};
use crate::store::{Database, archive};
use anyhow::Context;
use clap::Subcommand;
use std::path::PathBuf;
use tokio::signal::unix::{SignalKind, signal};

#[derive(Debug, Subcommand)]
pub(super) enum DatabaseCommand {
    /// Say where the database is, who holds it and how to connect
    Where,
    /// Start the private cluster, migrate, and hold it in the foreground until interrupted
    Start,
    /// Stop the private cluster, whoever holds it
    Stop,
    /// Apply the migrations that are missing
    Migrate,
    /// Write everything to a new file; the service may run meanwhile
    Dump {
        /// The file to make
        file: PathBuf,
    },
    /// Put the content of a dump in the place of everything; the service must not run
    Restore {
        /// The file to read
        file: PathBuf,
    },
}

impl DatabaseCommand {
    pub(super) async fn run(self, settings: &Settings) -> anyhow::Result<()> {
        match self {
            Self::Where => locate(settings),
            Self::Start => start(settings).await,
            Self::Stop => stop(settings),
            Self::Migrate => {
                let options = settings.database("realterms database migrate", true)?;
                Database::open(&options).await?.close().await;
                say("the database is up to date");
                Ok(())
            }
            Self::Dump { file } => {
                let holder = "realterms database dump";
                if settings.database_url.is_none() {
                    settings.cluster(holder)?.check_existing()?;
                }
                let tools = settings.tools(holder)?;
                let options = settings.database(holder, true)?;
                let database = Database::open_without_migrating(&options).await?;
                let dumped = archive::dump(&database, &tools, &file).await;
                database.close().await;
                dumped?;
                say(format!("dumped to {}", file.display()));
                Ok(())
            }
            Self::Restore { file } => {
                let holder = "realterms database restore";
                let tools = settings.tools(holder)?;
                let database = Database::open(&settings.database(holder, false)?).await?;
                let restored = archive::restore(&database, &tools, &file).await;
                database.close().await;
                restored?;
                say(format!("restored from {}", file.display()));
                Ok(())
            }
        }
    }
}

fn locate(settings: &Settings) -> anyhow::Result<()> {
    if settings.database_url.is_some() {
        say(
            "--database-url (REALTERMS_DATABASE_URL) names the database; no private cluster is used",
        );
        return Ok(());
    }
    let whereabouts = cluster::whereabouts(&settings.cluster("realterms database where")?)?;
    say(format!("folder    {}", whereabouts.folder.display()));
    say(format!("programs  {}", whereabouts.binaries));
    match whereabouts.holder {
        Some((pid, what)) => say(format!("held by   process {pid} ({what})")),
        None => say("held by   nobody"),
    }
    match whereabouts.address {
        Some(address) => say(format!("connect   {}", connection_string(&address))),
        None => say("server    not running"),
    }
    Ok(())
}

async fn start(settings: &Settings) -> anyhow::Result<()> {
    only_private(settings)?;
    let mut interrupt = signal(SignalKind::interrupt())?;
    let mut terminate = signal(SignalKind::terminate())?;
    let options = settings.database("realterms database start", false)?;
    let database = Database::open(&options).await?;
    let address = database.address().context("the cluster is private")?;
    say(format!("connect   {}", connection_string(address)));
    say("running until interrupted");
    tokio::select! {
        _ = interrupt.recv() => {}
        _ = terminate.recv() => {}
    }
    database.close().await;
    say("stopped");
    Ok(())
}

fn stop(settings: &Settings) -> anyhow::Result<()> {
    only_private(settings)?;
    match cluster::stop(&settings.cluster("realterms database stop")?)? {
        Stopped::Holder(pid) => say(format!("stopped with process {pid}, which held it")),
        Stopped::Leftover => say("stopped a server that nobody held"),
        Stopped::Nothing => say("nothing was running"),
    }
    Ok(())
}

fn only_private(settings: &Settings) -> anyhow::Result<()> {
    anyhow::ensure!(
        settings.database_url.is_none(),
        "--database-url (REALTERMS_DATABASE_URL) names a server that is not ours to start or stop"
    );
    Ok(())
}

fn connection_string(address: &Address) -> String {
    format!(
        "host={} port={} user={user} dbname={user}",
        address.sockets.display(),
        address.port,
        user = cluster::SUPERUSER
    )
}
