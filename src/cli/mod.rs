//! The commands of the program.

mod database;
mod serve;
mod token;

use crate::config::{Settings, check_environment};
use crate::demo;
use crate::http::openapi;
use crate::store::cluster;
use crate::telemetry;
use clap::error::{ContextKind, ContextValue};
use clap::{CommandFactory, Parser, Subcommand};
use std::io::Write as _;
use std::process::ExitCode;

/// Raw trade, price and income files in; the growth rate that the balance of payments allows out.
#[derive(Debug, Parser)]
#[command(name = "realterms", version, disable_help_subcommand = true)]
struct Cli {
    #[command(subcommand)]
    command: Command,
    #[command(flatten)]
    settings: Settings,
}

#[derive(Debug, Subcommand)]
enum Command {
    /// Serve the HTTP API until interrupted
    Serve,
    /// Show the whole way on an invented economy: raw files in, constrained growth out
    Demo {
        /// Go on serving until interrupted
        #[arg(long)]
        keep: bool,
    },
    /// Bearer tokens: create, list, revoke
    #[command(subcommand)]
    Token(token::TokenCommand),
    /// Print the OpenAPI document of the API
    Openapi,
    /// The database: where it is, start, stop, migrate, dump, restore
    #[command(subcommand)]
    Database(database::DatabaseCommand),
    /// Holds a private cluster for the process that started it
    #[command(hide = true)]
    KeepCluster {
        /// What to hold
        order: String,
    },
}

/// Runs the command that the arguments name; errors go to standard error.
#[must_use]
pub fn main() -> ExitCode {
    let cli = match Cli::try_parse() {
        Ok(cli) => cli,
        Err(error) => name_variable(error).exit(),
    };
    if let Command::KeepCluster { order } = &cli.command {
        let kept = cluster::keep(order);
        return if kept {
            ExitCode::SUCCESS
        } else {
            ExitCode::FAILURE
        };
    }
    match run(cli) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) if unread(&error) => ExitCode::SUCCESS,
        Err(error) => {
            complain(&error);
            ExitCode::FAILURE
        }
    }
}

/// Adds the variable to the flag that an error names: either may hold the wrong value.
fn name_variable(mut error: clap::Error) -> clap::Error {
    let Some(ContextValue::String(flag)) = error.get(ContextKind::InvalidArg) else {
        return error;
    };
    let mut command = Cli::command();
    command.build();
    let argument = command
        .get_arguments()
        .find(|argument| argument.to_string() == *flag);
    if let Some(variable) = argument.and_then(clap::Arg::get_env) {
        let both = format!("{flag} ({})", variable.display());
        error.insert(ContextKind::InvalidArg, ContextValue::String(both));
    }
    error
}

fn run(cli: Cli) -> anyhow::Result<()> {
    check_environment(&Cli::command())?;
    let quiet = matches!(cli.command, Command::Demo { .. });
    let default = if quiet { "error" } else { "info,sqlx=warn" };
    let filter = cli.settings.log.as_deref().unwrap_or(default);
    telemetry::start(filter, cli.settings.log_format)?;
    let runtime = tokio::runtime::Builder::new_multi_thread()
        .enable_all()
        .build()?;
    runtime.block_on(async {
        match cli.command {
            Command::Serve => serve::serve(&cli.settings).await,
            Command::Demo { keep } => {
                let mut out = std::io::stdout();
                demo::run(&cli.settings, keep, serve::stopped(), &mut out).await
            }
            Command::Token(command) => command.run(&cli.settings).await,
            Command::Openapi => {
                say(openapi::document().trim_end());
                Ok(())
            }
            Command::Database(command) => command.run(&cli.settings).await,
            Command::KeepCluster { .. } => unreachable!("the keeper runs without a runtime"),
        }
    })
}

/// The last word of a command that failed.
fn complain(error: &anyhow::Error) {
    // Nobody listens any more: not even that can be said.
    let _ = writeln!(std::io::stderr(), "realterms: {error:#}");
}

/// Prints a line of a command's answer. Whoever reads may have stopped reading (`| head`), which is no error.
fn say(line: impl std::fmt::Display) {
    let _ = writeln!(std::io::stdout(), "{line}");
}

/// Whether a command failed for nothing but that nobody reads its answer any more.
fn unread(error: &anyhow::Error) -> bool {
    let error = error.downcast_ref::<std::io::Error>();
    error.is_some_and(|e| e.kind() == std::io::ErrorKind::BrokenPipe)
}
