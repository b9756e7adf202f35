//! Vintages: what was known when, and that any order of uploads and withdrawals gives what replay gives.

use std::cell::RefCell;
use std::collections::BTreeMap;

use proptest::prelude::*;
use proptest::test_runner::{Config, TestRunner};
use serde_json::{Value, json};

use crate::support::app::{Answer, TestApp};
use crate::uploads::start;

fn table(values: &[(&str, &str)]) -> String {
    let mut file = "area,measure,currency,period,value\n".to_owned();
    for (period, value) in values {
        file.push_str(&format!("XAA,exports,XAD,{period},{value}\n"));
    }
    file
}

async fn send(app: &TestApp, released: &str, values: &[(&str, &str)]) -> Answer {
    let query = format!("kind=trade&released={released}&on_finding=land");
    app.upload(&query, table(values)).await.expect(201)
}

async fn withdraw(app: &TestApp, upload: &Answer) -> Answer {
    let path = format!("/v1/uploads/{}", upload.at("/id"));
    app.delete(&path).await.expect(200)
}

fn observed(values: &[(&str, f64)]) -> Vec<(String, Option<f64>)> {
    values
        .iter()
        .map(|(p, v)| ((*p).to_owned(), (!v.is_nan()).then_some(*v)))
        .collect()
}

const KEY: &str = "A.XAA.exports";

#[tokio::test]
async fn an_older_release_loaded_late_fills_history_and_never_becomes_current() {
    let app = start().await;
    let june = [("2018", "18.5"), ("2019", "19.5")];
    send(&app, "2020-06-30", &june).await;
    let march = [("2016", "16"), ("2018", "18"), ("2019", "")];
    send(&app, "2020-03-31", &march).await;
    assert_eq!(
        app.values(KEY, "").await,
        observed(&[("2016", 16.0), ("2018", 18.5), ("2019", 19.5)])
    );
    assert_eq!(
        app.values(KEY, "as_of=2020-06-29").await,
        observed(&[("2016", 16.0), ("2018", 18.0), ("2019", f64::NAN)])
    );
    let path = format!("/v1/series/{KEY}");
    app.get(&format!("{path}/observations?as_of=2020-03-30"))
        .await
        .expect(404);
    // As of the first revision nobody here knew of March.
    assert_eq!(
        app.values(KEY, "as_of=revision:1").await,
        observed(&[("2018", 18.5), ("2019", 19.5)])
    );
    let vintages = app.get(&format!("{path}/vintages")).await.expect(200);
    let shown: Vec<(Value, Value, Value)> = vintages
        .json()
        .as_array()
        .unwrap()
        .iter()
        .map(|v| {
            (
                v["released"].clone(),
                v["revision"].clone(),
                v["new"].clone(),
            )
        })
        .collect();
    assert_eq!(
        shown,
        [
            (json!("2020-03-31"), json!(2), json!(3)),
            (json!("2020-06-30"), json!(1), json!(2)),
            (json!("2020-06-30"), json!(2), json!(1)),
        ]
    );
    let current = app.get(&path).await.expect(200);
    assert_eq!(current.at("/released"), "2020-06-30");
    app.stop().await;
}

#[tokio::test]
async fn a_release_that_restates_keeps_its_say_when_an_older_one_comes_or_goes() {
    let app = start().await;
    let january = send(&app, "2020-01-31", &[("2019", "1")]).await;
    // March repeats January, so it writes no vintage; but it did say 1.
    let march = send(&app, "2020-03-31", &[("2019", "1")]).await;
    assert_eq!(march.at("/report/series_changed/count"), 0);
    let february = send(&app, "2020-02-29", &[("2019", "2")]).await;
    let current = async || app.values(KEY, "").await;
    let one = observed(&[("2019", 1.0)]);
    assert_eq!(
        app.values(KEY, "as_of=2020-03-01").await,
        observed(&[("2019", 2.0)])
    );
    assert_eq!(current().await, one);
    withdraw(&app, &february).await;
    assert_eq!(app.values(KEY, "as_of=2020-03-01").await, one);
    assert_eq!(current().await, one);
    withdraw(&app, &january).await;
    let path = format!("/v1/series/{KEY}");
    let early = app
        .get(&format!("{path}/observations?as_of=2020-03-01"))
        .await;
    assert_eq!(early.status, 404);
    assert_eq!(current().await, one);
    let lineage = app.get(&format!("{path}/lineage")).await.expect(200);
    assert_eq!(lineage.at("/spans/0/upload"), march.at("/id"));
    withdraw(&app, &march).await;
    app.get(&path).await.expect(404);
    app.stop().await;
}

#[tokio::test]
async fn the_auditor_sees_what_was_recorded_when() {
    let app = start().await;
    let first = send(&app, "2020-01-31", &[("2019", "1"), ("2020", "")]).await;
    let between = realterms::clock::now().to_rfc3339();
    let second = send(&app, "2020-01-31", &[("2019", "1.5"), ("2020", "2")]).await;
    let query = |moment: &str| format!("recorded_as_of={}", moment.replace('+', "%2B"));
    let before = observed(&[("2019", 1.0), ("2020", f64::NAN)]);
    let after = observed(&[("2019", 1.5), ("2020", 2.0)]);
    assert_eq!(app.values(KEY, &query(&between)).await, before);
    let now = realterms::clock::now().to_rfc3339();
    assert_eq!(app.values(KEY, &query(&now)).await, after);
    assert_eq!(app.values(KEY, "").await, after);
    let revision = |u: &Answer| format!("as_of=revision:{}", u.at("/revision"));
    assert_eq!(app.values(KEY, &revision(&first)).await, before);
    let withdrawn = withdraw(&app, &second).await;
    assert_eq!(app.values(KEY, "").await, before);
    assert_eq!(app.values(KEY, &revision(&second)).await, after);
    let at = format!("as_of=revision:{}", withdrawn.at("/withdrawn_revision"));
    assert_eq!(app.values(KEY, &at).await, before);
    let path = format!("/v1/series/{KEY}/observations");
    for wrong in [
        "as_of=soon",
        "as_of=revision:x",
        "recorded_as_of=2020-01-01",
        "as_of=2020-02-30",
    ] {
        let answer = app.get(&format!("{path}?{wrong}")).await.expect(400);
        assert!(answer.at("/errors/0/parameter").is_string(), "{wrong}");
    }
    for early in ["as_of=revision:0", "recorded_as_of=2001-01-01T00:00:00Z"] {
        app.get(&format!("{path}?{early}")).await.expect(404);
    }
    app.stop().await;
}

/// What happens to one series.
#[derive(Clone, Debug)]
enum Event {
    /// An upload: month of release, first year, cells, whether it replaces, whether its level is such
    /// that it is held where something is stored.
    Upload {
        month: u32,
        first: i32,
        cells: Vec<Cell>,
        replace: bool,
        thousandfold: bool,
    },
    /// A withdrawal of one of those that landed or are held.
    Withdraw(prop::sample::Index),
    /// An acceptance of one of those that are held.
    Accept(prop::sample::Index),
}

/// What an upload says of a year.
#[derive(Clone, Copy, Debug)]
enum Cell {
    Unnamed,
    Missing,
    Value(u8),
}

fn any_event() -> impl Strategy<Value = Event> {
    let cell = prop_oneof![
        1 => Just(Cell::Unnamed),
        1 => Just(Cell::Missing),
        5 => (20..24_u8).prop_map(Cell::Value),
    ];
    let upload = (
        1..6_u32,
        2000..2006_i32,
        prop::collection::vec(cell, 1..5),
        prop::bool::weighted(0.2),
        prop::bool::weighted(0.3),
    )
        .prop_filter_map(
            "names something",
            |(month, first, cells, replace, thousandfold)| {
                let named = cells.iter().any(|c| !matches!(c, Cell::Unnamed));
                named.then_some(Event::Upload {
                    month,
                    first,
                    cells,
                    replace,
                    thousandfold,
                })
            },
        );
    prop_oneof![
        6 => upload,
        3 => any::<prop::sample::Index>().prop_map(Event::Withdraw),
        2 => any::<prop::sample::Index>().prop_map(Event::Accept),
    ]
}

/// An upload as the oracle remembers it.
#[derive(Clone, Debug)]
struct Said {
    id: i64,
    released: String,
    file: String,
    cells: BTreeMap<i32, Option<f64>>,
    replace: bool,
}

/// The slow way: the last word on each year, in the order of release and, among equals, of landing.
fn replay(landed: &[Said], as_of: &str) -> Vec<(String, Option<f64>)> {
    let mut counted: Vec<&Said> = landed
        .iter()
        .filter(|s| s.released.as_str() <= as_of)
        .collect();
    counted.sort_by_key(|s| s.released.clone());
    let mut state: BTreeMap<i32, Option<f64>> = BTreeMap::new();
    for said in counted {
        if said.replace {
            state.clear();
        }
        state.extend(&said.cells);
    }
    state.into_iter().map(|(y, v)| (y.to_string(), v)).collect()
}

async fn read(app: &TestApp, key: &str, query: &str) -> Vec<(String, Option<f64>)> {
    let path = format!("/v1/series/{key}/observations?{query}");
    if app.get(&path).await.status == 404 {
        return Vec::new();
    }
    app.values(key, query).await
}

const DATES: [&str; 6] = [
    "2020-01-31",
    "2020-02-28",
    "2020-03-31",
    "2020-04-30",
    "2020-05-31",
    "2020-12-31",
];

/// Plays events on a series of their own and compares each date of each moment with the oracle.
async fn play(app: &TestApp, area: &str, events: &[Event]) {
    let key = format!("A.{area}.current_account_ratio");
    let mut landed: Vec<Said> = Vec::new();
    let mut held: Vec<Said> = Vec::new();
    let mut moments: Vec<(String, Vec<Said>)> = Vec::new();
    for (i, event) in events.iter().enumerate() {
        match event {
            Event::Upload {
                month,
                first,
                cells,
                replace,
                thousandfold,
            } => {
                let released = DATES[*month as usize - 1];
                // Blank lines make every file different from every other.
                let mut file = "\n".repeat(i + 1) + "area,measure,period,value\n";
                let mut named = BTreeMap::new();
                for (year, cell) in (*first..).zip(cells) {
                    let value = match cell {
                        Cell::Unnamed => continue,
                        Cell::Missing => None,
                        Cell::Value(v) => {
                            Some(f64::from(*v) * if *thousandfold { 1e3 } else { 1.0 })
                        }
                    };
                    let text = value.map_or_else(String::new, |v| v.to_string());
                    file.push_str(&format!("{area},current_account_ratio,{year},{text}\n"));
                    named.insert(year, value);
                }
                let scope = if *replace { "replace" } else { "merge" };
                let finding = if *thousandfold { "hold" } else { "land" };
                let query =
                    format!("kind=ratio&released={released}&scope={scope}&on_finding={finding}");
                let answer = app.upload(&query, file.clone()).await;
                let said = Said {
                    id: answer.at("/id").as_i64().unwrap(),
                    released: released.to_owned(),
                    file,
                    cells: named,
                    replace: *replace,
                };
                match answer.status {
                    201 => landed.push(said),
                    202 => held.push(said),
                    other => panic!("{other}: {}", answer.text()),
                }
            }
            Event::Withdraw(which) => {
                let count = landed.len() + held.len();
                if count == 0 {
                    continue;
                }
                let i = which.index(count);
                let said = match i.checked_sub(landed.len()) {
                    None => landed.remove(i),
                    Some(i) => held.remove(i),
                };
                app.delete(&format!("/v1/uploads/{}", said.id))
                    .await
                    .expect(200);
            }
            Event::Accept(which) => {
                if held.is_empty() {
                    continue;
                }
                let said = held.remove(which.index(held.len()));
                app.post(&format!("/v1/uploads/{}/accept", said.id), "")
                    .await
                    .expect(200);
                landed.push(said);
            }
        }
        let now = realterms::clock::now().to_rfc3339().replace('+', "%2B");
        moments.push((now, landed.clone()));
    }
    for date in DATES {
        let query = format!("as_of={date}");
        let values = read(app, &key, &query).await;
        assert_eq!(values, replay(&landed, date), "as of {date}");
        if !values.is_empty() {
            check_lineage(app, &key, date, &values, &landed).await;
        }
    }
    assert_eq!(read(app, &key, "").await, replay(&landed, "9999"));
    for (moment, then) in moments {
        for date in [DATES[2], DATES[5]] {
            let query = format!("as_of={date}&recorded_as_of={moment}");
            assert_eq!(
                read(app, &key, &query).await,
                replay(&then, date),
                "{query}"
            );
        }
    }
}

/// Each observation leads to a line, of an upload that counts, which holds the value.
async fn check_lineage(
    app: &TestApp,
    key: &str,
    date: &str,
    values: &[(String, Option<f64>)],
    landed: &[Said],
) {
    let lineage = app
        .get(&format!("/v1/series/{key}/lineage?as_of={date}"))
        .await
        .expect(200);
    let mut origins: BTreeMap<i32, (i64, i64)> = BTreeMap::new();
    for span in lineage.at("/spans").as_array().unwrap() {
        let number = |name: &str| span[name].as_i64().unwrap();
        let year = |name: &str| span[name].as_str().unwrap().parse::<i32>().unwrap();
        for (i, year) in (year("from")..=year("to")).enumerate() {
            let line = number("line") + number("line_step") * i64::try_from(i).unwrap();
            assert!(origins.insert(year, (number("upload"), line)).is_none());
        }
    }
    assert_eq!(origins.len(), values.len());
    for (period, value) in values {
        let (upload, line) = origins[&period.parse().unwrap()];
        let said = landed.iter().find(|s| s.id == upload);
        let said = said.unwrap_or_else(|| panic!("upload {upload} does not count"));
        assert!(said.released.as_str() <= date);
        let row = said.file.lines().nth(usize::try_from(line).unwrap() - 1);
        let cells: Vec<&str> = row.unwrap().split(',').collect();
        assert_eq!((cells[2], cells[3].parse().ok()), (period.as_str(), *value));
    }
}

#[test]
fn any_order_of_uploads_and_withdrawals_gives_what_replay_gives() {
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .unwrap();
    let app = runtime.block_on(start());
    let number = RefCell::new(0);
    let config = Config {
        failure_persistence: None,
        ..Config::with_cases(16)
    };
    let events = prop::collection::vec(any_event(), 1..9);
    let outcome = TestRunner::new(config).run(&events, |events| {
        *number.borrow_mut() += 1;
        let area = format!("T{}", number.borrow());
        runtime.block_on(play(&app, &area, &events));
        Ok(())
    });
    runtime.block_on(app.stop());
    outcome.unwrap();
}

/// A release sent under a wrong reference period makes another segment current, until it is withdrawn.
#[tokio::test]
async fn withdrawing_gives_the_say_back_to_the_release_that_spoke_last() {
    let app = start().await;
    let send = async |released: &str, reference: &str, values: &str| {
        let query = format!(
            "kind=price_index&area=XAA&measure=export_price&currency=XAD&reference={reference}\
             &released={released}&on_finding=land"
        );
        let file = format!("period,value\n{values}");
        app.upload(&query, file).await.expect(201)
    };
    let key = "A.XAA.export_price";
    let path = format!("/v1/series/{key}");
    let current = async || {
        let answer = app.get(&path).await.expect(200);
        (answer.at("/segment"), answer.at("/released"))
    };
    send("2020-01-31", "2010", "2018,118\n").await;
    send("2020-02-29", "2015", "2018,115\n").await;
    assert_eq!(current().await, (json!(2), json!("2020-02-29")));
    let wrong = send("2020-03-31", "2010", "2018,115\n2019,116\n").await;
    assert_eq!(current().await, (json!(1), json!("2020-03-31")));

    withdraw(&app, &wrong).await;
    assert_eq!(current().await, (json!(2), json!("2020-02-29")));
    assert_eq!(app.values(key, "").await, observed(&[("2018", 115.0)]));
    let first = format!("{path}/observations?segment=1");
    assert_eq!(
        app.get(&first).await.expect(200).at("/released"),
        "2020-01-31"
    );
    assert_eq!(
        app.values(key, "segment=1").await,
        observed(&[("2018", 118.0)])
    );
    app.stop().await;
}

#[tokio::test]
async fn vintages_are_listed_once_by_the_release_that_speaks() {
    let app = start().await;
    send(&app, "2020-01-31", &[("2019", "1")]).await;
    let february = send(&app, "2020-02-29", &[("2019", "2")]).await;
    let march = send(&app, "2020-03-31", &[("2019", "3")]).await;
    let april = send(&app, "2020-04-30", &[("2019", "4")]).await;
    // Now an older release speaks at the dates of later ones, at several by one revision.
    withdraw(&app, &march).await;
    withdraw(&app, &april).await;
    withdraw(&app, &february).await;
    let path = format!("/v1/series/{KEY}/vintages");
    let whole = app.get(&path).await.expect(200).json();
    let place = |v: &Value| {
        let released = v["released"].as_str().unwrap().to_owned();
        let number = |name: &str| v[name].as_i64().unwrap();
        (released, number("revision"), number("segment"))
    };
    let places: Vec<_> = whole.as_array().unwrap().iter().map(place).collect();
    let mut sorted = places.clone();
    sorted.sort();
    sorted.dedup();
    assert_eq!(places, sorted);
    assert!(
        places.contains(&("2020-01-31".to_owned(), 7, 1)),
        "{places:?}"
    );
    assert_eq!(
        app.pages(&format!("{path}?limit=1")).await,
        *whole.as_array().unwrap()
    );
    app.stop().await;
}
