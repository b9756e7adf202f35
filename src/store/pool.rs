//! The database: a private cluster or a server of the user's, its pools, and the migrations.

use super::cluster::{Access, Address, Cluster, ClusterError, ClusterOptions, SUPERUSER};
use sqlx::migrate::{MigrateError, Migrator};
use sqlx::postgres::{PgConnectOptions, PgPoolOptions, PgSslMode};
use sqlx::{Connection, PgConnection, PgPool};
use std::str::FromStr;
use std::time::Duration;

/// The schema that holds everything of ours.
pub(super) const SCHEMA: &str = "realterms";

/// The embedded migrations, forward only.
pub(super) static MIGRATIONS: Migrator = sqlx::migrate!("./migrations");

/// The advisory lock that migrations run under.
const MIGRATION_LOCK: i64 = 0x7265_616c_7465_726d;

/// The oldest server, as `server_version_num`.
const OLDEST: i32 = 140_000;

/// A connection idle for longer is tried before it is given out: a restart of the server breaks them all.
const TRUSTED_IDLE: Duration = Duration::from_secs(1);

/// Where the database is.
#[derive(Clone, Debug)]
pub enum Place {
    /// A private cluster that this process alone may use.
    Held(ClusterOptions),
    /// A private cluster, joined if another process holds it.
    HeldOrJoined(ClusterOptions),
    /// A database of the user's, as a `postgres://` URL.
    Url(String),
}

/// Where the database is and how many connections it may use.
#[derive(Clone, Debug)]
pub struct DatabaseOptions {
    /// Where it is.
    pub place: Place,
    /// Connections for everything but uploads.
    pub connections: u32,
    /// Connections for uploads, each of which keeps one while its body streams.
    pub upload_connections: u32,
}

/// Why the database could not be opened.
#[derive(Debug, thiserror::Error)]
pub enum OpenError {
    /// The private cluster.
    #[error(transparent)]
    Cluster(#[from] ClusterError),
    /// The server does not answer, or refuses.
    #[error("cannot use the database {place}: {source}")]
    Connect {
        /// Which one, without its password.
        place: String,
        /// Why not.
        source: sqlx::Error,
    },
    /// The server answers but does not suit.
    #[error("cannot use the database {place}: {why}")]
    Unsuitable {
        /// Which one, without its password.
        place: String,
        /// Why not.
        why: String,
    },
    /// A migration failed, or the database was written by a later release.
    #[error("cannot migrate the database {place}: {source}")]
    Migrate {
        /// Which one, without its password.
        place: String,
        /// Why not.
        source: MigrateError,
    },
}

/// An open, migrated database. Dropped, it ends the private cluster if this process holds it.
#[derive(Debug)]
pub struct Database {
    pool: PgPool,
    upload_pool: PgPool,
    connect: PgConnectOptions,
    cluster: Option<Cluster>,
}

impl Database {
    /// Starts or joins the server, makes database and schema where missing, migrates and opens the pools.
    ///
    /// # Errors
    /// No server, one that does not suit, or a migration that fails.
    pub async fn open(options: &DatabaseOptions) -> Result<Self, OpenError> {
        let database = Self::open_without_migrating(options).await?;
        database.migrate().await?;
        Ok(database)
    }

    /// As [`Database::open`], leaving the schema as it is.
    ///
    /// # Errors
    /// No server, or one that does not suit.
    pub async fn open_without_migrating(options: &DatabaseOptions) -> Result<Self, OpenError> {
        let (connect, cluster) = match &options.place {
            Place::Url(url) => {
                let connect =
                    PgConnectOptions::from_str(url).map_err(|source| OpenError::Connect {
                        place: "that --database-url (REALTERMS_DATABASE_URL) names".to_owned(),
                        source,
                    })?;
                (connect, None)
            }
            Place::Held(cluster) => {
                let cluster = cluster.clone();
                let cluster = blocking(move || Cluster::start(&cluster)).await?;
                (private(cluster.address()), Some(cluster))
            }
            Place::HeldOrJoined(cluster) => {
                let cluster = cluster.clone();
                let access = blocking(move || Cluster::start_or_join(&cluster)).await?;
                let connect = private(access.address());
                match access {
                    Access::Held(cluster) => (connect, Some(cluster)),
                    Access::Joined(_) => (connect, None),
                }
            }
        };
        if !matches!(options.place, Place::Url(_)) {
            make_database(&connect).await?;
        }
        let connect = connect
            .options([("search_path", SCHEMA)])
            .application_name("realterms");
        check_server(&connect).await?;
        // The look-ups by key know one plan; planning them anew each time costs more than running them.
        let planned_once = connect
            .clone()
            .options([("plan_cache_mode", "force_generic_plan")]);
        let pool = |size: u32, connect: &PgConnectOptions| {
            PgPoolOptions::new()
                .max_connections(size)
                .acquire_timeout(Duration::from_secs(10))
                .test_before_acquire(false)
                .before_acquire(|connection, about| {
                    Box::pin(async move {
                        Ok(about.idle_for < TRUSTED_IDLE || connection.ping().await.is_ok())
                    })
                })
                .connect_lazy_with(connect.clone())
        };
        Ok(Self {
            pool: pool(options.connections, &planned_once),
            upload_pool: pool(options.upload_connections, &connect),
            connect,
            cluster,
        })
    }

    /// Applies the migrations that are missing, under an advisory lock: of several processes that start at once
    /// one migrates and the others wait.
    ///
    /// # Errors
    /// A migration that fails, or a database written by a later release.
    pub async fn migrate(&self) -> Result<(), OpenError> {
        let mut connection = PgConnection::connect_with(&self.connect)
            .await
            .map_err(|source| connect_error(&self.connect, source))?;
        let outcome = migrate(&mut connection).await;
        // The lock goes with the connection, also where this fails.
        let _ = connection.close().await;
        outcome.map_err(|source| OpenError::Migrate {
            place: place(&self.connect),
            source,
        })
    }

    /// The connections for everything but uploads.
    #[must_use]
    pub fn pool(&self) -> &PgPool {
        &self.pool
    }

    /// The connections for uploads.
    #[must_use]
    pub fn upload_pool(&self) -> &PgPool {
        &self.upload_pool
    }

    /// Where the private cluster listens, if this process holds it.
    #[must_use]
    pub fn address(&self) -> Option<&Address> {
        self.cluster.as_ref().map(Cluster::address)
    }

    /// How to connect to it.
    #[must_use]
    pub fn connect_options(&self) -> &PgConnectOptions {
        &self.connect
    }

    /// Closes the connections; whoever asks for one from now on gets an error.
    pub async fn disconnect(&self) {
        self.pool.close().await;
        self.upload_pool.close().await;
    }

    /// Closes the connections, then ends the private cluster if this process holds it.
    pub async fn close(self) {
        self.disconnect().await;
        let cluster = self.cluster;
        blocking(move || drop(cluster)).await;
    }
}

/// Names the migrations by their contents: 16 hexadecimal digits that change with any of them.
#[must_use]
pub fn migrations_digest() -> String {
    use sha2::{Digest, Sha256};
    let mut digest = Sha256::new();
    for migration in MIGRATIONS.iter() {
        digest.update(&migration.checksum);
    }
    let digest = digest.finalize();
    digest[..8].iter().map(|b| format!("{b:02x}")).collect()
}

async fn migrate(connection: &mut PgConnection) -> Result<(), MigrateError> {
    lock_migrations(connection).await?;
    undo_cut_short_restore(connection).await?;
    if !schema_exists(connection, SCHEMA).await? {
        sqlx::query("CREATE SCHEMA realterms")
            .execute(&mut *connection)
            .await?;
    }
    MIGRATIONS.run_direct(None, connection, false).await
}

/// Takes the advisory lock that migrations and restores run under, until the connection ends.
pub(super) async fn lock_migrations(connection: &mut PgConnection) -> sqlx::Result<()> {
    sqlx::query("SELECT pg_advisory_lock($1)")
        .bind(MIGRATION_LOCK)
        .execute(connection)
        .await
        .map(|_| ())
}

/// Puts back what a restore set aside, if one was cut short. Needs the lock of [`lock_migrations`]: while a restore
/// runs, it holds the lock itself.
pub(super) async fn undo_cut_short_restore(connection: &mut PgConnection) -> sqlx::Result<()> {
    if !schema_exists(connection, "realterms_before_restore").await? {
        return Ok(());
    }
    let mut transaction = connection.begin().await?;
    sqlx::query("DROP SCHEMA IF EXISTS realterms CASCADE")
        .execute(&mut *transaction)
        .await?;
    sqlx::query("ALTER SCHEMA realterms_before_restore RENAME TO realterms")
        .execute(&mut *transaction)
        .await?;
    transaction.commit().await
}

async fn schema_exists(connection: &mut PgConnection, name: &str) -> sqlx::Result<bool> {
    sqlx::query_scalar("SELECT EXISTS (SELECT FROM pg_namespace WHERE nspname = $1)")
        .bind(name)
        .fetch_one(connection)
        .await
}

/// Makes the database of a private cluster the first time.
async fn make_database(connect: &PgConnectOptions) -> Result<(), OpenError> {
    let maintenance = connect.clone().database("postgres");
    let make = async {
        let mut connection = PgConnection::connect_with(&maintenance).await?;
        let exists: bool =
            sqlx::query_scalar("SELECT EXISTS (SELECT FROM pg_database WHERE datname = $1)")
                .bind(SUPERUSER)
                .fetch_one(&mut connection)
                .await?;
        if !exists {
            sqlx::query("CREATE DATABASE realterms")
                .execute(&mut connection)
                .await?;
        }
        connection.close().await
    };
    make.await.map_err(|source| connect_error(connect, source))
}

async fn check_server(connect: &PgConnectOptions) -> Result<(), OpenError> {
    let ask = async {
        let mut connection = PgConnection::connect_with(connect).await?;
        let said: (String, String) = sqlx::query_as(
            "SELECT current_setting('server_version_num'), current_setting('server_encoding')",
        )
        .fetch_one(&mut connection)
        .await?;
        connection.close().await?;
        Ok(said)
    };
    let (version, encoding) = ask.await.map_err(|source| connect_error(connect, source))?;
    let why = if version.parse().unwrap_or(0) < OLDEST {
        format!("its version is {version}, and 14 (140000) or later is needed")
    } else if encoding != "UTF8" {
        format!("its encoding is {encoding}, and UTF8 is needed")
    } else {
        return Ok(());
    };
    Err(OpenError::Unsuitable {
        place: place(connect),
        why,
    })
}

fn private(address: &Address) -> PgConnectOptions {
    PgConnectOptions::new_without_pgpass()
        .ssl_mode(PgSslMode::Disable)
        .socket(&address.sockets)
        .port(address.port)
        .username(SUPERUSER)
        .database(SUPERUSER)
}

fn connect_error(connect: &PgConnectOptions, source: sqlx::Error) -> OpenError {
    OpenError::Connect {
        place: place(connect),
        source,
    }
}

fn place(connect: &PgConnectOptions) -> String {
    let host = match connect.get_socket() {
        Some(socket) => socket.display().to_string(),
        None => connect.get_host().to_owned(),
    };
    format!(
        "{} on {host}:{}",
        connect.get_database().unwrap_or_default(),
        connect.get_port()
    )
}

async fn blocking<T: Send + 'static>(work: impl FnOnce() -> T + Send + 'static) -> T {
    tokio::task::spawn_blocking(work)
        .await
        .expect("work on a blocking thread does not panic and is not aborted")
}
