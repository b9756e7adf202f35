//! How the program ends: what is under way is answered, and nothing is left of it.

use crate::support::cluster::{Place, finish, users, wait_until};
use crate::support::program::{Running, Sending, Service};
use std::net::TcpStream;
use std::path::Path;
use std::process::Command;

/// The demo as a stranger runs it: with a fresh folder of its own in the temp folder.
fn demo(place: &Place, arguments: &[&str]) -> Command {
    let mut command = place.program(arguments);
    command.env_remove("REALTERMS_DATA_FOLDER");
    command.env("TMPDIR", place.temp());
    command
}

fn is_empty(folder: &Path) -> bool {
    folder.read_dir().unwrap().next().is_none()
}

/// The number that a text begins with, and what follows it.
fn number(text: &str) -> (f64, &str) {
    let text = text.trim_start();
    let end = text
        .find(|c: char| !c.is_ascii_digit() && c != '.' && c != '-')
        .unwrap_or(text.len());
    (text[..end].parse().unwrap(), &text[end..])
}

#[test]
fn the_demo_shows_the_whole_way_and_leaves_nothing_behind() {
    let place = Place::new(&users()[0]);
    let mut demo = Running::start(&place, demo(&place, &["demo"]));
    demo.until("Realterms listens on http://127.0.0.1:");
    let cluster_name = place.cluster_name();
    let said = demo.rest();
    assert!(demo.end().success());
    place.wait_for_the_end(&cluster_name);
    assert!(is_empty(&place.temp()));
    for part in [
        "held      exports_revised.csv",
        "level_ratio: the level is",
        "withdrawn exports_revised.csv",
        "Growth that the balance of payments allows",
        "Headline named in advance: strong form",
        "They are not a forecast\nand not advice",
        "curl -s",
    ] {
        assert!(said.contains(part), "no '{part}' in:\n{said}");
    }
    let (_, headline) = said.split_once("Balance-of-payments limit").unwrap();
    let (rate, rest) = number(headline);
    let (low, rest) = number(rest.split_once('[').unwrap().1);
    let (high, _) = number(rest.strip_prefix(',').unwrap());
    assert!(low < rate && rate < high, "{headline}");
}

#[test]
fn a_demo_that_cannot_start_leaves_no_folder_behind() {
    let place = Place::new(&users()[0]);
    let mut demo = demo(&place, &["demo"]);
    demo.env("REALTERMS_POSTGRES_BIN", &place.root);
    let (ran, _, error) = finish(demo);
    assert!(!ran && error.contains("no initdb"), "{error}");
    assert!(is_empty(&place.temp()));
}

#[test]
fn a_killed_demo_leaves_nothing_behind() {
    let place = Place::new(&users().pop().unwrap());
    let mut demo = Running::start(&place, demo(&place, &["demo", "--keep"]));
    let said = demo.until("Serving on http://127.0.0.1:");
    assert!(said.contains("curl -s \"http://127.0.0.1:"), "{said}");
    let cluster_name = place.cluster_name();
    assert!(!is_empty(&place.temp()));
    demo.kill();
    place.wait_for_the_end(&cluster_name);
    wait_until("the folder goes", || is_empty(&place.temp()));
}

#[tokio::test(flavor = "multi_thread")]
async fn a_terminated_service_answers_what_is_under_way_and_ends() {
    const FILE: &str = "period,value\n2019-Q1,100\n2019-Q2,104.5\n";
    const QUERY: &str = "kind=trade&area=XAA&measure=exports&currency=XAD&own_currency=XAD";
    let place = Place::new(&users()[0]);
    let service = Service::start(&place, &[]);
    service.ready().await;
    service.declare("XAD", "XAA").await;
    let cluster_name = place.cluster_name();

    // Another on the same folder is told who holds it.
    let (started, _, error) = place.run(&["serve", "--listen=127.0.0.1:0"]);
    assert!(!started);
    let who = format!(
        "in use by process {} (realterms serve)",
        service.running.pid()
    );
    assert!(error.contains(&who), "{error}");

    let (first, second) = FILE.as_bytes().split_at(20);
    let mut sending = Sending::begin(service.address, QUERY, FILE.len());
    assert!(sending.send(first));
    let mut watch = place.connect().await;
    loop {
        let under_way: bool = sqlx::query_scalar(
            "SELECT EXISTS (SELECT FROM pg_stat_activity
             WHERE application_name = 'realterms' AND state = 'idle in transaction')",
        )
        .fetch_one(&mut watch)
        .await
        .unwrap();
        if under_way {
            break;
        }
    }
    drop(watch);
    service.running.terminate();
    wait_until("nobody is admitted any more", || {
        TcpStream::connect(service.address).is_err()
    });
    assert!(sending.send(second));
    let answer = sending.answer().unwrap().expect(201);
    assert_eq!(answer.at("/state"), "landed");
    assert!(service.running.end().success());
    place.wait_for_the_end(&cluster_name);

    // It was told the truth.
    let service = Service::start(&place, &[]);
    service
        .get("/v1/series/Q.XAA.exports/observations")
        .await
        .expect(200);
    service.running.kill();
    place.wait_for_the_end(&cluster_name);
}
