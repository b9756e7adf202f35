//! Who may do what.

use std::collections::HashMap;
use std::sync::Mutex;
use std::time::{Duration, Instant};

use sha2::{Digest, Sha256};

use super::Fault;
use crate::finding::Finding;
use crate::store::{self, Connection, Database};

/// What a caller may do; each role may do what the ones before it may.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Role {
    /// Read everything.
    Read,
    /// Send data and documents, and run them.
    Contribute,
    /// Everything.
    Administer,
}

impl Role {
    /// All roles, least first.
    pub const ALL: [Self; 3] = [Self::Read, Self::Contribute, Self::Administer];

    /// The role's name.
    #[must_use]
    pub fn as_str(self) -> &'static str {
        match self {
            Self::Read => "read",
            Self::Contribute => "contribute",
            Self::Administer => "administer",
        }
    }

    /// The role of a name.
    #[must_use]
    pub fn parse(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|r| r.as_str() == name)
    }
}

/// Who calls.
#[derive(Clone, Debug)]
pub struct Principal {
    /// Name of the token; `open` where the service is open.
    pub name: String,
    /// What it may do.
    pub role: Role,
}

/// Every token begins with this, so that one found in a file is recognised.
const PREFIX: &str = "rt_";

/// How long an answer of the store about tokens is believed. A revoked token stops working at the
/// latest after this time.
const BELIEVED: Duration = Duration::from_secs(1);

/// Checks bearer tokens, remembering the store's answers for a moment.
#[derive(Debug)]
pub struct Gate {
    may_be_open: bool,
    tokens: Mutex<HashMap<[u8; 32], (Instant, Principal)>>,
    ever: Mutex<Option<(Instant, bool)>>,
}

/// Answer to a caller.
#[derive(Debug)]
pub enum Admission {
    /// Let in as.
    Admitted(Principal),
    /// A token is asked for and none came.
    TokenMissing,
    /// The token is not known, or was revoked.
    TokenUnknown,
}

impl Gate {
    /// A gate that lets everybody in while no token was ever made, if it may be open. One that other machines
    /// reach may not. A revoked token counts: revoking the last one closes the service, it opens nothing.
    #[must_use]
    pub fn new(may_be_open: bool) -> Self {
        Self {
            may_be_open,
            tokens: Mutex::default(),
            ever: Mutex::default(),
        }
    }

    /// Who a caller with this bearer token is.
    ///
    /// # Errors
    /// [`Fault::Store`].
    pub async fn admit(
        &self,
        database: &Database,
        bearer: Option<&str>,
    ) -> Result<Admission, Fault> {
        let Some(token) = bearer else {
            return Ok(if !self.may_be_open || self.ever_a_token(database).await? {
                Admission::TokenMissing
            } else {
                Admission::Admitted(Principal {
                    name: "open".to_owned(),
                    role: Role::Administer,
                })
            });
        };
        if !token.starts_with(PREFIX) {
            return Ok(Admission::TokenUnknown);
        }
        let hash = hash(token);
        if let Some((at, principal)) = lock(&self.tokens).get(&hash)
            && at.elapsed() < BELIEVED
        {
            return Ok(Admission::Admitted(principal.clone()));
        }
        let mut connection = database.connection().await?;
        let found = store::token::find(&mut connection, &hash).await?;
        let mut tokens = lock(&self.tokens);
        let Some((name, role)) = found else {
            tokens.remove(&hash);
            return Ok(Admission::TokenUnknown);
        };
        let role = Role::parse(&role).unwrap_or(Role::Read);
        let principal = Principal { name, role };
        tokens.insert(hash, (Instant::now(), principal.clone()));
        Ok(Admission::Admitted(principal))
    }

    async fn ever_a_token(&self, database: &Database) -> Result<bool, Fault> {
        let known = *lock(&self.ever);
        if let Some((at, ever)) = known
            && (ever || at.elapsed() < BELIEVED)
        {
            return Ok(ever);
        }
        let mut connection = database.connection().await?;
        let ever = store::token::existing(&mut connection).await?.ever;
        *lock(&self.ever) = Some((Instant::now(), ever));
        Ok(ever)
    }
}

fn lock<T>(mutex: &Mutex<T>) -> std::sync::MutexGuard<'_, T> {
    mutex
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
}

fn hash(token: &str) -> [u8; 32] {
    Sha256::digest(token.as_bytes()).into()
}

/// Longest name of a token, in characters.
const NAME_LENGTH: usize = 100;

/// A name is an author: it has to be seen, and to stay on its line.
fn check_name(name: &str) -> Result<(), Fault> {
    let seen = !name.is_empty() && name.trim() == name && !name.contains(char::is_control);
    if seen && name.chars().count() <= NAME_LENGTH {
        return Ok(());
    }
    let expected = format!(
        "1 to {NAME_LENGTH} characters without control characters and no space at either end"
    );
    let message = format!("{name:?} is no name for a token: it takes {expected}");
    let fault = Finding::error("bad_name", message)
        .found(name)
        .expected(expected);
    Err(Fault::invalid("bad_name", vec![fault]))
}

/// Makes a token and answers its secret, which is shown once and not stored. `random` must be 24
/// unpredictable bytes.
///
/// # Errors
/// [`Fault::Invalid`] for a name that cannot be one; [`Fault::Conflict`] where a valid token has the name; [`Fault::Store`].
pub async fn create(
    database: &Database,
    name: &str,
    role: Role,
    random: [u8; 24],
) -> Result<String, Fault> {
    use std::fmt::Write as _;
    check_name(name)?;
    let mut secret = String::from(PREFIX);
    for byte in random {
        let _ = write!(secret, "{byte:02x}");
    }
    let mut connection = database.connection().await?;
    match store::token::insert(&mut connection, name, role.as_str(), &hash(&secret)).await {
        Ok(_) => Ok(secret),
        Err(e) if e.constraint() == Some("token_name_unique") => Err(Fault::Conflict {
            code: "name_taken",
            detail: format!(
                "a valid token is already named '{name}'; revoke it or take another name"
            ),
        }),
        Err(e) => Err(e.into()),
    }
}

/// All tokens, without their secrets.
///
/// # Errors
/// [`Fault::Store`].
pub async fn list(database: &Database) -> Result<Vec<store::token::TokenRow>, Fault> {
    let mut connection = database.connection().await?;
    Ok(store::token::list(&mut connection).await?)
}

/// Revokes a token by name.
///
/// # Errors
/// [`Fault::NotFound`] where no valid token has the name; [`Fault::Store`].
pub async fn revoke(database: &Database, name: &str) -> Result<(), Fault> {
    let mut connection = database.connection().await?;
    if store::token::revoke(&mut connection, name).await? {
        Ok(())
    } else {
        Err(Fault::not_found(format!("valid token named '{name}'")))
    }
}

/// Whether tokens exist.
///
/// # Errors
/// [`Fault::Store`].
pub async fn existing(connection: &mut Connection) -> Result<store::token::Existing, Fault> {
    Ok(store::token::existing(connection).await?)
}
