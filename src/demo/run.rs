//! The demo as a command: the service on a free port with a fresh cluster, the walk, the end.

use std::io::Write;
use std::net::{Ipv4Addr, SocketAddr};
use std::time::Instant;

use anyhow::Context;

use super::{look_further, walk};
use crate::config::Settings;
use crate::http::Application;
use crate::store::cluster::fresh_folder;
use crate::store::{Database, DatabaseOptions, Place};

/// Runs the demo and tells it on `out`; with `keep` it goes on serving until `stop` is ready.
///
/// The service listens on a free port of the loopback address and keeps its data in a fresh folder,
/// which goes away with it, unless the settings name a folder or a database.
///
/// # Errors
/// The service does not start, or a step of the walk fails.
pub async fn run(
    settings: &Settings,
    keep: bool,
    stop: impl Future<Output = ()>,
    out: &mut dyn Write,
) -> anyhow::Result<()> {
    let started = Instant::now();
    let mut settings = settings.clone();
    settings.listen = SocketAddr::from((Ipv4Addr::LOCALHOST, 0));
    let database = open(&database_options(&settings)?).await?;
    let application = Application::build(settings.serving(), database).await?;
    let base = format!("http://{}", application.address());
    let handle = application.handle();
    let server = tokio::spawn(application.run_until_stopped());
    let seconds = started.elapsed().as_secs_f64();
    writeln!(
        out,
        "Realterms listens on {base}; private database ready after {seconds:.1} s\n"
    )?;

    let outcome = told(&base, keep, stop, out).await;
    handle.stop(true).await;
    server.await.context("the server ended early")??;
    outcome
}

async fn told(
    base: &str,
    keep: bool,
    stop: impl Future<Output = ()>,
    out: &mut dyn Write,
) -> anyhow::Result<()> {
    let walked = walk(base, out).await?;
    if keep {
        writeln!(out, "To look further:")?;
        look_further(base, walked.run, out)?;
        writeln!(out, "\nServing on {base} until interrupted.")?;
        stop.await;
    } else {
        writeln!(
            out,
            "To look further, run it with --keep and use the address that it prints:"
        )?;
        look_further("$api", walked.run, out)?;
    }
    Ok(())
}

/// Opens the database; a fresh folder goes again where that fails, since no keeper may have taken it over.
async fn open(options: &DatabaseOptions) -> anyhow::Result<Database> {
    let opened = Database::open(options).await;
    if let (Err(_), Place::Held(cluster)) = (&opened, &options.place)
        && cluster.disposable
    {
        let _ = std::fs::remove_dir_all(&cluster.folder);
    }
    Ok(opened?)
}

fn database_options(settings: &Settings) -> anyhow::Result<DatabaseOptions> {
    let mut options = settings.database("realterms demo", false)?;
    if settings.data_folder.is_none()
        && let Place::Held(cluster) = &mut options.place
    {
        cluster.folder = fresh_folder(&cluster.temp_folder)?;
        cluster.disposable = true;
    }
    Ok(options)
}
