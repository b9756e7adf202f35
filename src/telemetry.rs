//! The log: text or JSON lines on standard error.

use clap::ValueEnum;
use std::io::IsTerminal;
use tracing_subscriber::EnvFilter;

/// How log lines look.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum)]
pub enum LogFormat {
    /// For a person.
    #[default]
    Text,
    /// One JSON object a line.
    Json,
}

/// Starts the log of this process.
///
/// # Errors
/// The filter is not one, or the log was started before.
pub fn start(filter: &str, format: LogFormat) -> anyhow::Result<()> {
    let builder = tracing_subscriber::fmt()
        .with_env_filter(EnvFilter::try_new(filter)?)
        .with_ansi(std::io::stderr().is_terminal())
        .with_writer(std::io::stderr);
    let started = match format {
        LogFormat::Text => builder.try_init(),
        LogFormat::Json => builder.json().flatten_event(true).try_init(),
    };
    started.map_err(|error| anyhow::anyhow!("cannot start the log: {error}"))
}
