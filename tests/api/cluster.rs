//! The private cluster under SIGKILL: of the service, the keeper and the server, during a query, as root and as an
//! ordinary user. What was committed is there at the next start, what was not is not, and nothing keeps running.

use crate::support::cluster::{Guard, Held, Place, is_running, kill_hard, users, wait_until};
use nix::sys::signal::{Signal, kill};
use nix::unistd::{Pid, geteuid};
use realterms::store::cluster::SUPERUSER;
use sqlx::postgres::{PgConnectOptions, PgSslMode};
use sqlx::{Connection, PgConnection};
use std::fs::{self, File};
use std::os::unix::fs::MetadataExt;
use std::path::Path;
use std::process::Command;
use std::time::Duration;

async fn connect(sockets: &Path) -> sqlx::Result<PgConnection> {
    let options = PgConnectOptions::new_without_pgpass()
        .ssl_mode(PgSslMode::Disable)
        .socket(sockets)
        .username(SUPERUSER)
        .database(SUPERUSER);
    PgConnection::connect_with(&options).await
}

/// Connects, waiting while the server is started again.
async fn reconnect(sockets: &Path) -> PgConnection {
    for _ in 0..600 {
        if let Ok(mut connection) = connect(sockets).await
            && connection.ping().await.is_ok()
        {
            return connection;
        }
        tokio::time::sleep(Duration::from_millis(50)).await;
    }
    panic!("no server in {} within 30 s", sockets.display());
}

/// Three backends at work: one sleeps in a query, one holds an uncommitted row, one computes without ever looking
/// up. Their process numbers; the row 1 is committed.
async fn put_to_work(sockets: &Path) -> Vec<i32> {
    let mut first = connect(sockets).await.unwrap();
    sqlx::query("CREATE TABLE IF NOT EXISTS kept (n int PRIMARY KEY)")
        .execute(&mut first)
        .await
        .unwrap();
    sqlx::query("INSERT INTO kept VALUES (1) ON CONFLICT DO NOTHING")
        .execute(&mut first)
        .await
        .unwrap();
    let mut pids = Vec::new();
    for work in [
        "SELECT pg_sleep(600)",
        "BEGIN; INSERT INTO kept VALUES (2); SELECT pg_sleep(600)",
        "SELECT count(*) FROM generate_series(1, 10000) a, generate_series(1, 10000) b, generate_series(1, 10000) c",
    ] {
        let mut connection = connect(sockets).await.unwrap();
        pids.push(
            sqlx::query_scalar("SELECT pg_backend_pid()")
                .fetch_one(&mut connection)
                .await
                .unwrap(),
        );
        tokio::spawn(async move { sqlx::raw_sql(work).execute(&mut connection).await });
    }
    let at_work = "SELECT count(*) FROM pg_stat_activity WHERE state = 'active' AND pid = ANY($1)";
    loop {
        let active: i64 = sqlx::query_scalar(at_work)
            .bind(&pids)
            .fetch_one(&mut first)
            .await
            .unwrap();
        if active == 3 {
            return pids;
        }
    }
}

async fn committed(sockets: &Path) -> Vec<i32> {
    let mut connection = reconnect(sockets).await;
    sqlx::query_scalar("SELECT n FROM kept ORDER BY n")
        .fetch_all(&mut connection)
        .await
        .unwrap()
}

fn assert_all_ended(place: &Place, backends: &[i32]) {
    wait_until("everything ends", || {
        place.processes().is_empty() && !backends.iter().any(|pid| is_running(*pid))
    });
}

/// Starts again, finds what was committed, and ends in good order.
async fn assert_next_start(place: &Place) {
    let held = place.start();
    assert_eq!(committed(&held.sockets).await, [1]);
    let sockets = held.sockets.clone();
    assert!(held.stop().success());
    assert_all_ended(place, &[]);
    assert!(!sockets.exists(), "the folder of the socket is removed");
}

#[tokio::test(flavor = "multi_thread")]
async fn a_killed_service_takes_its_server_along() {
    for user in users() {
        let place = Place::new(&user);
        let mut held = place.start();
        let backends = put_to_work(&held.sockets).await;
        held.child.kill().unwrap();
        held.child.wait().unwrap();
        assert_all_ended(&place, &backends);
        assert!(!held.sockets.exists());
        assert_next_start(&place).await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_service_killed_while_it_makes_its_cluster_starts_afresh() {
    let halves = |place: &Place| -> usize {
        let entries = fs::read_dir(place.data()).into_iter().flatten().flatten();
        entries
            .filter(|entry| {
                entry
                    .file_name()
                    .to_string_lossy()
                    .starts_with("postgres.new-")
            })
            .count()
    };
    for user in users() {
        let place = Place::new(&user);
        let mut child = place.program(&["database", "start"]).spawn().unwrap();
        wait_until("the cluster is being made", || halves(&place) == 1);
        child.kill().unwrap();
        child.wait().unwrap();
        assert_all_ended(&place, &[]);
        assert!(!place.data().join("postgres").exists());
        assert!(place.start().stop().success());
        assert_eq!(halves(&place), 0);
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_killed_keeper_is_replaced() {
    for user in users() {
        let place = Place::new(&user);
        let held = place.start();
        let backends = put_to_work(&held.sockets).await;
        let (keeper, postmaster) = (place.keeper(), place.postmaster());
        kill_hard(keeper);
        assert_replaced(&place, &held, postmaster, &backends).await;
        assert_ne!(place.keeper(), keeper);
        assert!(held.stop().success());
        assert_next_start(&place).await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_killed_server_is_replaced() {
    for user in users() {
        let place = Place::new(&user);
        let held = place.start();
        let backends = put_to_work(&held.sockets).await;
        let postmaster = place.postmaster();
        kill_hard(postmaster);
        assert_replaced(&place, &held, postmaster, &backends).await;
        assert!(held.stop().success());
        assert_next_start(&place).await;
    }
}

/// The same service offers another server in the same place, with what was committed, and the old one is gone.
async fn assert_replaced(place: &Place, held: &Held, postmaster: i32, backends: &[i32]) {
    wait_until("the old server ends", || {
        !is_running(postmaster) && !backends.iter().any(|pid| is_running(*pid))
    });
    assert_eq!(committed(&held.sockets).await, [1]);
    assert_ne!(place.postmaster(), postmaster);
}

#[tokio::test(flavor = "multi_thread")]
async fn a_server_that_lost_service_and_keeper_is_ended_by_the_next_start() {
    for user in users() {
        let place = Place::new(&user);
        let mut held = place.start();
        let backends = put_to_work(&held.sockets).await;
        let postmaster = place.postmaster();
        // Stopped first, so that it cannot see the keeper's end and replace it.
        kill(Pid::from_raw(held.pid()), Signal::SIGSTOP).unwrap();
        kill_hard(place.keeper());
        held.child.kill().unwrap();
        held.child.wait().unwrap();
        assert!(is_running(postmaster), "nobody was left to end it");
        assert_next_start(&place).await;
        assert!(!is_running(postmaster));
        assert_all_ended(&place, &backends);
        assert!(!held.sockets.exists());
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn backends_that_lost_everything_are_ended_by_the_next_start() {
    for user in users() {
        let place = Place::new(&user);
        let mut held = place.start();
        let backends = put_to_work(&held.sockets).await;
        let postmaster = place.postmaster();
        kill(Pid::from_raw(held.pid()), Signal::SIGSTOP).unwrap();
        kill_hard(place.keeper());
        kill_hard(postmaster);
        held.child.kill().unwrap();
        held.child.wait().unwrap();
        assert!(is_running(backends[2]), "it computes and sees nothing");
        // The number in the stale file now belongs to a process of someone else.
        let file = place.data().join("postgres/postmaster.pid");
        let text = fs::read_to_string(&file).unwrap();
        let (_, rest) = text.split_once('\n').unwrap();
        fs::write(&file, format!("{}\n{rest}", std::process::id())).unwrap();
        assert_next_start(&place).await;
        assert_all_ended(&place, &backends);
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn the_shipped_cluster_forces_commits_to_disk() {
    let place = Place::new(&users()[0]);
    let mut command = place.program(&["database", "start"]);
    command.env_remove("REALTERMS_DURABLE");
    let held = Place::start_by(command);
    let mut connection = connect(&held.sockets).await.unwrap();
    for setting in [
        "fsync",
        "synchronous_commit",
        "full_page_writes",
        "data_checksums",
    ] {
        let value: String = sqlx::query_scalar("SELECT current_setting($1)")
            .bind(setting)
            .fetch_one(&mut connection)
            .await
            .unwrap();
        assert_eq!(value, "on", "{setting}");
    }
    assert!(held.stop().success());
}

#[test]
fn a_second_process_on_the_folder_is_told_who_holds_it() {
    for user in users() {
        let place = Place::new(&user);
        let held = place.start();
        let (started, _, error) = place.run(&["database", "start"]);
        assert!(!started);
        let who = format!(
            "in use by process {} (realterms database start)",
            held.pid()
        );
        assert!(error.contains(&who), "{error}");
        assert!(
            error.contains("realterms database stop --data-folder"),
            "{error}"
        );
        let (stopped, said, error) = place.run(&["database", "stop"]);
        assert!(
            stopped && said.contains("stopped with process"),
            "{said}{error}"
        );
        assert_all_ended(&place, &[]);
        let (stopped, said, _) = place.run(&["database", "stop"]);
        assert!(stopped && said.contains("nothing was running"), "{said}");
    }
}

#[test]
fn a_lock_without_a_living_holder_is_waited_for_and_nobody_is_ended_for_it() {
    let place = Place::new(&users()[0]);
    fs::create_dir(place.data()).unwrap();
    let path = place.data().join("lock");
    // The number of a holder that was killed is now that of another process.
    let mut other = Command::new("sleep").arg("600").spawn().unwrap();
    let _guard = Guard::of(&other);
    let stale = format!("{}\nrealterms serve\n", other.id());
    // Whoever looks who holds the folder has the lock for a moment.
    let with_lock = |run: &(dyn Fn() -> (bool, String) + Sync)| {
        fs::write(&path, &stale).unwrap();
        let look = File::open(&path).unwrap();
        look.lock().unwrap();
        std::thread::scope(|scope| {
            let running = scope.spawn(run);
            std::thread::sleep(Duration::from_millis(400));
            drop(look);
            running.join().unwrap()
        })
    };
    let (ended, _) = with_lock(&|| (place.start().stop().success(), String::new()));
    assert!(ended);
    assert_eq!(fs::read_to_string(&path).unwrap(), "", "nobody is named");
    let (ran, said) = with_lock(&|| {
        let (ran, said, error) = place.run(&["database", "stop"]);
        (ran, said + &error)
    });
    assert!(ran && said.contains("nothing was running"), "{said}");
    assert!(other.try_wait().unwrap().is_none(), "it was ended");
    other.kill().unwrap();
    other.wait().unwrap();
}

#[test]
fn a_folder_that_the_server_cannot_reach_is_refused_by_its_closed_ancestor() {
    if !geteuid().is_root() {
        return; // Only root runs the server as somebody else.
    }
    let place = Place::new(&users()[0]);
    let closed = place.root.join("closed");
    fs::create_dir(&closed).unwrap();
    fs::set_permissions(&closed, std::os::unix::fs::PermissionsExt::from_mode(0o700)).unwrap();
    let mut command = place.program(&["database", "start"]);
    command.env("REALTERMS_DATA_FOLDER", closed.join("below/data"));
    let (started, _, error) = crate::support::cluster::finish(command);
    assert!(!started);
    let named = format!("{} is closed to it", closed.display());
    assert!(error.contains(&named), "{error}");
}

#[test]
fn a_temp_folder_too_long_for_a_socket_is_refused_with_the_limit() {
    let place = Place::new(&users()[0]);
    let long = place.root.join("x".repeat(90));
    fs::create_dir(&long).unwrap();
    let mut command = place.program(&["database", "start"]);
    command.env("TMPDIR", &long);
    let (started, _, error) = crate::support::cluster::finish(command);
    assert!(!started);
    assert!(error.contains("this system allows 10"), "{error}");
    assert!(error.contains("TMPDIR"), "{error}");
    assert_eq!(
        fs::read_dir(&long).unwrap().count(),
        0,
        "nothing is left in it"
    );
}

/// Under root others pass through the data folder; they read nothing in it.
#[test]
fn nobody_else_reads_what_is_in_the_data_folder() {
    for user in &users() {
        let place = Place::new(user);
        // A lock of an earlier release was open to all.
        fs::create_dir(place.data()).unwrap();
        fs::write(place.data().join("lock"), "").unwrap();
        place.own(&place.data());
        place.own(&place.data().join("lock"));
        let held = place.start();
        let mut seen = 0;
        for entry in fs::read_dir(place.data()).unwrap() {
            let entry = entry.unwrap();
            let mode = entry.metadata().unwrap().mode();
            assert_eq!(mode & 0o077, 0, "{}", entry.path().display());
            seen += 1;
        }
        assert!(seen >= 4, "lock, keeper.lock, postgres, server.log: {seen}");
        assert!(held.stop().success());
    }
}
