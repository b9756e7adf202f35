//! Uploads: what lands, what is held, what is refused, and what a withdrawal leaves.

use crate::support::app::TestApp;

const TRADE: &str = "period,value\n2019-Q1,100\n2019-Q2,104.5\n2019-Q3,\n2019-Q4,110\n";
const QUERY: &str = "kind=trade&area=XAA&measure=exports&currency=XAD&own_currency=XAD&unit_multiplier=6\
    &released=2020-03-31&title=Trade&publisher=Office";

#[tokio::test]
async fn an_upload_lands_and_its_series_can_be_read_and_traced() {
    let app = TestApp::start().await;
    app.put(
        "/v1/currencies/XAD",
        r#"{"name": "Dinar of XAA", "areas": ["XAA"]}"#,
    )
    .await
    .expect(201);
    let answer = app.upload(QUERY, TRADE).await.expect(201);
    assert_eq!(answer.at("/state"), "landed");
    assert_eq!(answer.at("/report/observations/new"), 4);
    assert_eq!(answer.at("/report/series_created/keys/0"), "Q.XAA.exports");
    assert_eq!(
        app.values("Q.XAA.exports", "").await,
        [
            ("2019-Q1".to_owned(), Some(100e6)),
            ("2019-Q2".to_owned(), Some(104.5e6)),
            ("2019-Q3".to_owned(), None),
            ("2019-Q4".to_owned(), Some(110e6)),
        ]
    );
    let lineage = app
        .get("/v1/series/Q.XAA.exports/lineage?period=2019-Q2")
        .await
        .expect(200);
    assert_eq!(lineage.at("/spans/0/line"), 3);
    assert_eq!(lineage.at("/spans/0/upload"), answer.at("/id"));
    app.stop().await;
}
