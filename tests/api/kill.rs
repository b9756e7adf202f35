//! Uploads under SIGKILL: a million rows sent in 200 slices with pauses, the service or its database killed at a
//! random slice or between the last byte and the answer. All of it is there afterwards, or nothing.

use crate::support::app::Answer;
use crate::support::cluster::{As, Place, kill_hard, shared, users};
use crate::support::db::TestDb;
use crate::support::program::{Sending, Service};
use realterms::random::Draws;
use realterms::store::Place as DatabasePlace;
use sqlx::PgConnection;
use std::io::{Read, Write};
use std::net::Shutdown;
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::{sleep, spawn};
use std::time::Duration;

const SERIES: usize = 2000;
const OBSERVATIONS: usize = 500;
const ROWS: usize = SERIES * OBSERVATIONS;
const SLICES: usize = 200;
const PAUSE: Duration = Duration::from_millis(1);
const HEADER: &str = "area,product,period,value\n";

#[derive(Clone, Copy, Debug)]
enum Victim {
    Service,
    Postmaster,
}

#[derive(Clone, Copy, Debug)]
enum Moment {
    /// After so many slices.
    Slice(usize),
    /// After the last byte, once the upload's transaction is seen at a statement like one of these.
    Stage(&'static [&'static str]),
}

/// What the transaction of an upload does after the last byte.
const STAGES: [&str; 3] = ["COPY fragment%", "COPY vintage%", "COMMIT%"];

// Ten kills in all, five of them between the last byte and the answer.
//
// Measured: killed at a slice, or before the transaction commits, nothing of the upload is left, and a service
// whose database was killed answers 503 and goes on with the next server. Killed in the commit, which takes long
// enough to be hit (the deferred checks of 2000 vintages), an upload was seen to land without an answer (service)
// and to vanish with a 503 (database).

#[tokio::test(flavor = "multi_thread")]
async fn a_killed_service_leaves_all_of_an_upload_or_nothing() {
    let stages = [Moment::Stage(&STAGES), Moment::Stage(&STAGES[2..])];
    kill_during_uploads(&users()[0], Victim::Service, 3, &stages).await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_killed_database_leaves_all_of_an_upload_or_nothing() {
    let stages = [
        Moment::Slice(SLICES),
        Moment::Stage(&STAGES[1..]),
        Moment::Stage(&STAGES[2..]),
    ];
    let user = users().pop().unwrap();
    kill_during_uploads(&user, Victim::Postmaster, 2, &stages).await;
}

/// Kills the victim at as many random slices, then at these moments after the last byte.
async fn kill_during_uploads(user: &As, victim: Victim, at_slices: u64, stages: &[Moment]) {
    let mut moments: Vec<Moment> = stages.iter().rev().copied().collect();
    let mut draws = Draws::new(2, at_slices);
    for i in 0..at_slices {
        // One in each stretch of the body.
        let sent = SLICES as f64 * (i as f64 + draws.uniform()) / at_slices as f64;
        let slices = (1..SLICES).take_while(|n| (*n as f64) < sent).count();
        moments.push(Moment::Slice(slices.max(1)));
    }
    let place = Place::new(user);
    let mut service = Service::start(&place, &[]);
    service.ready().await;
    service.declare("XAD", "XAA").await;
    let mut body = body();
    let mut areas = ('A'..='Z').map(|c| format!("XA{c}"));
    let mut area = areas.next().unwrap();
    while let Some(moment) = moments.pop() {
        name_area(&mut body, &area);
        let before = counts(&mut place.connect().await).await;
        let mut watch = place.connect().await;
        let mut sending = Sending::begin(service.address, QUERY, body.len());
        let mut slices = body.chunks(body.len().div_ceil(SLICES));
        let first = match moment {
            Moment::Slice(n) => n,
            Moment::Stage(_) => SLICES,
        };
        for slice in slices.by_ref().take(first) {
            assert!(sending.send(slice), "{}", service.running.log());
            sleep(PAUSE);
        }
        if let Moment::Stage(statements) = moment {
            wait_for_one_of(statements, &mut watch, &sending).await;
        }
        let too_late = sending.is_answered();
        match victim {
            Victim::Service => {
                service.running.kill();
                service = Service::start(&place, &[]);
            }
            Victim::Postmaster => {
                kill_hard(place.postmaster());
                for slice in slices {
                    sending.send(slice);
                    sleep(PAUSE);
                }
            }
        }
        let answer = sending.answer();
        service.ready().await;
        let at = format!("{victim:?} killed at {moment:?}, answered {answer:?}");
        let after = counts(&mut place.connect().await).await;
        let gained: Vec<i64> = after.iter().zip(&before).map(|(a, b)| a - b).collect();
        let landed = gained != [0; 9];
        if landed {
            assert_eq!(gained, whole(&body), "{at}");
            assert_is_kept(&service, &body, &area).await;
        }
        match answer.as_ref().map(|a| (a.status, a.at("/code"))) {
            None => assert!(matches!(victim, Victim::Service), "{at}"),
            Some((201, _)) => assert!(landed, "{at}"),
            Some((503, code)) if code == "store_unavailable" => assert!(!landed, "{at}"),
            Some((503, code)) => assert_eq!(code, "outcome_unknown", "{at}"),
            Some(_) => panic!("{at}"),
        }
        if matches!(moment, Moment::Slice(n) if n < SLICES) {
            assert!(!landed && !too_late, "{at}");
        }
        if too_late {
            moments.push(moment);
        }
        if landed {
            area = areas.next().unwrap();
        } else {
            let target = format!("/v1/series/M.{area}.exports..0000/observations");
            service.get(&target).await.expect(404);
        }
    }

    // What was cut off before stands in nobody's way.
    name_area(&mut body, &area);
    let mut sending = Sending::begin(service.address, QUERY, body.len());
    assert!(sending.send(&body));
    let answer = sending.answer().unwrap().expect(201);
    assert_eq!(answer.at("/report/observations/new"), ROWS);
    assert_is_kept(&service, &body, &area).await;

    let cluster_name = place.cluster_name();
    service.running.terminate();
    assert!(service.running.end().success());
    place.wait_for_the_end(&cluster_name);
}

const QUERY: &str = "kind=trade&measure=exports&currency=XAD&own_currency=XAD&released=2022-03-31";

/// A million rows of the same length, about 24 MB.
fn body() -> Vec<u8> {
    let mut body = HEADER.as_bytes().to_vec();
    for series in 0..SERIES {
        for t in 0..OBSERVATIONS {
            let (year, month) = (1980 + t / 12, t % 12 + 1);
            let value = 10_000 + (series * 7919 + t * 104_729) % 90_000;
            let (whole, tenth) = (value / 10, value % 10);
            writeln!(body, "XAA,{series:04},{year}-{month:02},{whole}.{tenth}").unwrap();
        }
    }
    body
}

/// Makes the file that of another area, so that rounds are told apart.
fn name_area(body: &mut [u8], area: &str) {
    let rows = &mut body[HEADER.len()..];
    let length = rows.len() / ROWS;
    for row in rows.chunks_exact_mut(length) {
        row[..3].copy_from_slice(area.as_bytes());
    }
}

/// Everything that an upload may leave, as rows.
async fn counts(connection: &mut PgConnection) -> Vec<i64> {
    sqlx::query_scalar(
        "SELECT ARRAY[(SELECT count(*) FROM upload), (SELECT count(*) FROM upload_part),
             (SELECT count(*) FROM upload_reject), (SELECT count(*) FROM series),
             (SELECT count(*) FROM segment), (SELECT count(*) FROM fragment),
             (SELECT count(*) FROM vintage), (SELECT count(*) FROM change),
             (SELECT coalesce(sum(observation_count), 0) FROM vintage)]",
    )
    .fetch_one(connection)
    .await
    .unwrap()
}

/// What a whole upload adds to [`counts`].
fn whole(body: &[u8]) -> [i64; 9] {
    let parts = body.len().div_ceil(8 << 20);
    [1, parts, 0, SERIES, SERIES, SERIES, SERIES, 1, ROWS].map(|n| i64::try_from(n).unwrap())
}

async fn assert_is_kept(service: &Service, body: &[u8], area: &str) {
    let uploads = service.get("/v1/uploads?limit=1").await.expect(200);
    assert_eq!(uploads.at("/0/state"), "landed");
    let id = uploads.at("/0/id");
    let raw = service.get(&format!("/v1/uploads/{id}/raw")).await;
    assert!(raw.expect(200).bytes == body, "the bytes as they came");
    let last = format!("M.{area}.exports..{:04}", SERIES - 1);
    let last = service
        .get(&format!("/v1/series/{last}/observations"))
        .await;
    let observations = last.expect(200).at("/observations");
    assert_eq!(observations.as_array().unwrap().len(), OBSERVATIONS);
}

/// Waits until the transaction of the upload gets to one of these statements, or the answer is there.
async fn wait_for_one_of(statements: &[&str], watch: &mut PgConnection, sending: &Sending) {
    let seen = "SELECT EXISTS (SELECT FROM pg_stat_activity
        WHERE application_name = 'realterms' AND state <> 'idle' AND query LIKE ANY($1))";
    while !sending.is_answered() {
        let seen: bool = sqlx::query_scalar(seen)
            .bind(statements)
            .fetch_one(&mut *watch)
            .await
            .unwrap();
        if seen {
            return;
        }
        sleep(Duration::from_millis(1));
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_commit_whose_answer_is_lost_is_not_called_a_failure() {
    let database = TestDb::create();
    let place = Place::new(&users()[0]);
    let wire = Wire::lay(&place.temp());
    let DatabasePlace::Url(url) = database.options().place else {
        panic!("the tests have a database with a URL");
    };
    let sockets = |path: &Path| path.display().to_string().replace('/', "%2F");
    let through_the_wire = url.replace(
        &sockets(&shared().address().sockets),
        &sockets(&place.temp()),
    );
    assert_ne!(url, through_the_wire);
    let service = Service::start(&place, &["--database-url", &through_the_wire]);
    let send = |body: &str| -> Answer {
        let mut sending = Sending::begin(service.address, QUERY, body.len());
        sending.send(body.as_bytes());
        sending.answer().unwrap()
    };
    service.declare("XAD", "XAA").await;
    let file = format!("{HEADER}XAA,1,2020,1.5\n");
    send(&file).expect(201);

    let other = format!("{HEADER}XAB,1,2020,1.5\n");
    wire.lose_the_next_answer_to_a_commit
        .store(true, Ordering::SeqCst);
    let lost = send(&other).expect(503);
    assert!(!wire.lose_the_next_answer_to_a_commit.load(Ordering::SeqCst));
    assert_eq!(lost.at("/code"), "outcome_unknown");
    // It had been done; sent again, it is recognised.
    let again = send(&other).expect(200);
    assert_eq!(again.at("/recognised"), true);
    assert_eq!(again.at("/state"), "landed");

    // No cluster of its own beside the database that it was given.
    assert_eq!(place.processes().len(), 1, "{:?}", place.processes());
    assert!(!place.data().exists());
    service.running.terminate();
    assert!(service.running.end().success());
}

/// A socket that passes on what goes between the service and its database.
struct Wire {
    lose_the_next_answer_to_a_commit: Arc<AtomicBool>,
}

impl Wire {
    /// From a socket in this folder to the cluster of the tests.
    fn lay(folder: &Path) -> Self {
        let address = shared().address();
        let name = format!(".s.PGSQL.{}", address.port);
        let server = address.sockets.join(&name);
        let listener = UnixListener::bind(folder.join(&name)).unwrap();
        let lose = Arc::new(AtomicBool::new(false));
        let lose_the_next_answer_to_a_commit = Arc::clone(&lose);
        spawn(move || {
            for client in listener.incoming().flatten() {
                pass_on(&client, &server, &lose);
            }
        });
        Self {
            lose_the_next_answer_to_a_commit,
        }
    }
}

fn pass_on(client: &UnixStream, server: &PathBuf, lose: &Arc<AtomicBool>) {
    let server = UnixStream::connect(server).unwrap();
    let lost = Arc::new(AtomicBool::new(false));
    let (lose, losing) = (Arc::clone(lose), Arc::clone(&lost));
    let (from, to) = (client.try_clone().unwrap(), server.try_clone().unwrap());
    spawn(move || {
        copy(from, to, |bytes| {
            if bytes.windows(7).any(|w| w == b"COMMIT\0") && lose.swap(false, Ordering::SeqCst) {
                losing.store(true, Ordering::SeqCst);
            }
            true
        });
    });
    let to = client.try_clone().unwrap();
    spawn(move || copy(server, to, |_| !lost.load(Ordering::SeqCst)));
}

/// Copies until either end is gone or what was read shall not go on; then nothing goes either way.
fn copy(mut from: UnixStream, mut to: UnixStream, may_go_on: impl Fn(&[u8]) -> bool) {
    let mut buffer = [0; 1 << 16];
    while let Ok(n) = from.read(&mut buffer) {
        if n == 0 || !may_go_on(&buffer[..n]) || to.write_all(&buffer[..n]).is_err() {
            break;
        }
    }
    let _ = from.shutdown(Shutdown::Both);
    let _ = to.shutdown(Shutdown::Both);
}
