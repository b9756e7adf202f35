//! `realterms serve`.

use tokio::signal::unix::{SignalKind, signal};

use super::say;
use crate::config::Settings;
use crate::http::Application;
use crate::store::Database;

/// Serves until interrupted or terminated; requests under way end first.
pub(super) async fn serve(settings: &Settings) -> anyhow::Result<()> {
    let database = Database::open(&settings.database("realterms serve", false)?).await?;
    let application = Application::build(settings.serving(), database).await?;
    say(format!("listening on http://{}", application.address()));
    let handle = application.handle();
    let stopper = tokio::spawn(async move {
        stopped().await;
        tracing::info!("stopping; requests under way end first");
        handle.stop(true).await;
    });
    let outcome = application.run_until_stopped().await;
    stopper.abort();
    outcome
}

/// Ready when the process is asked to stop.
pub(super) async fn stopped() {
    let (interrupt, terminate) = (
        signal(SignalKind::interrupt()),
        signal(SignalKind::terminate()),
    );
    match (interrupt, terminate) {
        (Ok(mut interrupt), Ok(mut terminate)) => {
            tokio::select! {
                _ = interrupt.recv() => {}
                _ = terminate.recv() => {}
            }
        }
        _ => std::future::pending().await,
    }
}
