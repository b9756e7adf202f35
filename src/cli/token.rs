//! `realterms token`: bearer tokens, before or beside a running server.

use std::fs::File;
use std::io::Read;

use anyhow::Context;
use clap::builder::PossibleValue;
use clap::{Subcommand, ValueEnum};

use super::say;
use crate::config::Settings;
use crate::service::Fault;
use crate::service::tokens::{self, Role};
use crate::store::Database;

#[derive(Debug, Subcommand)]
pub(super) enum TokenCommand {
    /// Make a token and print it; it is shown this once
    Create {
        /// What to call it; unique among valid tokens
        #[arg(long)]
        name: String,
        /// What it may do
        #[arg(long, value_enum)]
        role: Role,
    },
    /// List tokens, without their secrets
    List,
    /// Revoke a token by name
    Revoke {
        /// Its name
        #[arg(long)]
        name: String,
    },
}

impl ValueEnum for Role {
    fn value_variants<'a>() -> &'a [Self] {
        &Self::ALL
    }

    fn to_possible_value(&self) -> Option<PossibleValue> {
        let may = match self {
            Self::Read => "Read everything",
            Self::Contribute => "Send data and documents and run them, too",
            Self::Administer => "Everything",
        };
        Some(PossibleValue::new(self.as_str()).help(may))
    }
}

impl TokenCommand {
    pub(super) async fn run(self, settings: &Settings) -> anyhow::Result<()> {
        let database = Database::open(&settings.database("realterms token", true)?).await?;
        let outcome = self.on(&database).await;
        database.close().await;
        outcome
    }

    async fn on(self, database: &Database) -> anyhow::Result<()> {
        match self {
            Self::Create { name, role } => {
                let mut random = [0; 24];
                File::open("/dev/urandom")
                    .and_then(|mut source| source.read_exact(&mut random))
                    .context("no random bytes from /dev/urandom")?;
                let secret = tokens::create(database, &name, role, random).await;
                say(secret.map_err(told)?);
            }
            Self::List => {
                for row in tokens::list(database).await.map_err(told)? {
                    let state = row
                        .revoked
                        .map_or_else(|| "valid".to_owned(), |at| format!("revoked {at:.0?}"));
                    say(format!(
                        "{:<24} {:<12} made {:.0?}  {state}",
                        row.name, row.role, row.created
                    ));
                }
            }
            Self::Revoke { name } => {
                tokens::revoke(database, &name).await.map_err(told)?;
                say(format!("revoked {name}; it stops working within a second"));
            }
        }
        Ok(())
    }
}

fn told(fault: Fault) -> anyhow::Error {
    anyhow::anyhow!("{fault}")
}
