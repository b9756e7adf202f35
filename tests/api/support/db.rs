//! A database of its own for each test, cloned from a template that has the migrations.

use super::cluster;
use realterms::service::tokens::{self, Role};
use realterms::store::cluster::SUPERUSER;
use realterms::store::{Database, DatabaseOptions, Place, migrations_digest};
use sqlx::postgres::{PgConnectOptions, PgSslMode};
use sqlx::{AssertSqlSafe, Connection, PgConnection};
use std::sync::OnceLock;
use std::sync::atomic::{AtomicU32, Ordering};

/// A migrated, empty database that is dropped with this value.
pub(crate) struct TestDb {
    name: String,
}

impl TestDb {
    /// Clones the template, making it the first time.
    pub(crate) fn create() -> Self {
        static TEMPLATE: OnceLock<String> = OnceLock::new();
        static NUMBER: AtomicU32 = AtomicU32::new(1);
        let template = TEMPLATE.get_or_init(make_template);
        let number = NUMBER.fetch_add(1, Ordering::Relaxed);
        let name = format!("test_{}_{number}", std::process::id());
        maintain(&format!("CREATE DATABASE {name} TEMPLATE {template}"));
        Self { name }
    }

    /// How the service is told to use it, with few connections.
    pub(crate) fn options(&self) -> DatabaseOptions {
        options(&self.name)
    }

    /// Where it is, for a command.
    pub(crate) fn url(&self) -> String {
        match self.options().place {
            Place::Url(url) => url,
            Place::Held(_) | Place::HeldOrJoined(_) => unreachable!("they have URLs"),
        }
    }

    /// Opens it as the service does.
    pub(crate) async fn open(&self) -> Database {
        open(&self.options()).await
    }

    /// Makes a token in it.
    pub(crate) async fn token(&self, name: &str, role: Role) -> String {
        let database = self.open().await;
        let mut random = [0; 24];
        for (to, from) in random.iter_mut().zip(name.bytes()) {
            *to = from;
        }
        let secret = tokens::create(&database, name, role, random)
            .await
            .expect("the name is free");
        database.close().await;
        secret
    }

    /// Ends all connections and takes no more.
    pub(crate) fn refuse(&self) {
        let name = &self.name;
        maintain(&format!("ALTER DATABASE {name} ALLOW_CONNECTIONS false"));
        maintain(&format!(
            "SELECT pg_terminate_backend(pid) FROM pg_stat_activity WHERE datname = '{name}'"
        ));
    }
}

impl Drop for TestDb {
    fn drop(&mut self) {
        maintain(&format!("DROP DATABASE {} WITH (FORCE)", self.name));
    }
}

fn make_template() -> String {
    let name = format!("template_{}", migrations_digest());
    maintain(&format!("CREATE DATABASE {name}"));
    apart(|| async {
        open(&options(&name)).await.close().await;
    });
    name
}

async fn open(options: &DatabaseOptions) -> Database {
    Database::open(options)
        .await
        .expect("a database of the tests opens")
}

/// Only ever names the private socket of this run.
fn options(name: &str) -> DatabaseOptions {
    let address = cluster::shared().address();
    let sockets = address.sockets.display().to_string().replace('/', "%2F");
    let port = address.port;
    DatabaseOptions {
        place: Place::Url(format!(
            "postgres://{SUPERUSER}@{sockets}:{port}/{name}?sslmode=disable"
        )),
        connections: 4,
        upload_connections: 8,
    }
}

fn maintain(statement: &str) {
    let address = cluster::shared().address();
    let connect = PgConnectOptions::new_without_pgpass()
        .ssl_mode(PgSslMode::Disable)
        .socket(&address.sockets)
        .port(address.port)
        .username(SUPERUSER)
        .database("postgres");
    let statement = AssertSqlSafe(statement.to_owned());
    apart(|| async move {
        let mut connection = PgConnection::connect_with(&connect)
            .await
            .expect("connects");
        sqlx::query(statement)
            .execute(&mut connection)
            .await
            .expect("maintains");
        connection.close().await.expect("closes");
    });
}

/// Runs to the end on a thread and runtime of its own: needed in `drop`, and within other runtimes.
fn apart<F: Future<Output = ()>>(work: impl FnOnce() -> F + Send) {
    std::thread::scope(|scope| {
        scope.spawn(|| {
            tokio::runtime::Builder::new_current_thread()
                .enable_all()
                .build()
                .expect("a runtime starts")
                .block_on(work());
        });
    });
}

#[tokio::test]
async fn each_test_has_a_migrated_database_that_is_dropped_after() {
    let (first, second) = (TestDb::create(), TestDb::create());
    assert_ne!(first.name, second.name);
    let database = first.open().await;
    let (schema, applied): (String, i64) =
        sqlx::query_as("SELECT current_schema()::text, count(*) FROM _sqlx_migrations")
            .fetch_one(database.pool())
            .await
            .expect("the table of migrations is in the schema of ours");
    assert_eq!(schema, "realterms");
    assert!(applied >= 1);
    // Dropped although a connection is open.
    let name = first.name.clone();
    drop(first);
    let left: i64 = sqlx::query_scalar("SELECT count(*) FROM pg_database WHERE datname = $1")
        .bind(name)
        .fetch_one(second.open().await.pool())
        .await
        .expect("the other database answers");
    assert_eq!(left, 0);
}
