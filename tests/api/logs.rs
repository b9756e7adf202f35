//! What the service logs.

use serde_json::Value;

use crate::support::cluster::{Place, users};
use crate::support::db::TestDb;
use crate::support::program::Service;

#[tokio::test(flavor = "multi_thread")]
async fn every_line_of_a_request_bears_its_number() {
    let place = Place::new(&users()[0]);
    let db = TestDb::create();
    let url = format!("--database-url={}", db.url());
    let service = Service::start(&place, &[&url, "--log=debug", "--log-format=json"]);
    let answer = service.get("/v1/series").await.expect(200);
    let id = answer.header("x-request-id").unwrap();
    let log = service.running.log();
    let lines = log
        .lines()
        .map(|line| serde_json::from_str::<Value>(line).unwrap());
    let of_request = |line: &Value| line["span"]["operation"] == "list_series";
    let inside: Vec<Value> = lines.clone().filter(of_request).collect();
    let queries = inside.iter().filter(|l| l["target"] == "sqlx::query");
    assert!(queries.count() > 0, "{log}");
    assert!(
        inside.iter().all(|l| l["span"]["request.id"] == id),
        "{log}"
    );
    let mut last = lines.filter(|line| line["path"] == "/v1/series");
    assert_eq!(last.next().unwrap()["request.id"], id);
    service.running.kill();
}
