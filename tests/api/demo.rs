//! The demo's walk through the API; `ending` has the command.

use realterms::demo::economy::{
    EXPORT_INCOME_ELASTICITY, EXPORT_PRICE_ELASTICITY, IMPORT_INCOME_ELASTICITY,
    IMPORT_PRICE_ELASTICITY,
};
use realterms::demo::{NAME, walk};

use crate::support::app::TestApp;

#[tokio::test]
async fn the_estimates_recover_the_known_elasticities_within_their_intervals() {
    let app = TestApp::start().await;
    let mut told = Vec::new();
    let walked = walk(&app.base, &mut told).await.unwrap();
    let told = String::from_utf8(told).unwrap();
    for line in [
        "held      exports_revised.csv",
        "level_ratio",
        "withdrawn exports_revised.csv",
    ] {
        assert!(told.contains(line), "{line} is not told:\n{told}");
    }
    assert!(told.contains(walked.table.trim_end()));

    let get = async |path: String| app.get(&path).await.expect(200).json();
    let run = get(format!("/v1/studies/{NAME}/runs/{}", walked.run)).await;
    let result = &run["result"];
    // Student's t at 95 %, for 35 to 37 degrees of freedom.
    const T: f64 = 2.03;
    let estimators = result["estimators"].as_array().unwrap();
    assert_eq!(estimators.len(), 3);
    assert_eq!(result["headline"]["estimator"], estimators[0]["estimator"]);
    for estimator in estimators {
        for (name, truth) in [
            ("import_income_elasticity", IMPORT_INCOME_ELASTICITY),
            ("import_price_elasticity", IMPORT_PRICE_ELASTICITY),
            ("export_income_elasticity", EXPORT_INCOME_ELASTICITY),
            ("export_price_elasticity", EXPORT_PRICE_ELASTICITY),
        ] {
            let number = |field: &str| estimator[name][field].as_f64().unwrap();
            let (value, error) = (number("value"), number("std_error"));
            assert!(
                (value - truth).abs() < T * error,
                "{name}: {value} ({error}), true {truth}"
            );
        }
    }
    // The headline's interval holds the rate that the true elasticities give.
    let headline = estimators[0]["forms"].as_array().unwrap();
    let strong = headline
        .iter()
        .find(|f| f["form"] == "strong_form")
        .unwrap();
    let z = result["growth"]["foreign_income"].as_f64().unwrap();
    let truth = EXPORT_INCOME_ELASTICITY * z / IMPORT_INCOME_ELASTICITY;
    let bound = |name: &str| strong["interval"][name].as_f64().unwrap();
    assert!(
        bound("low") < truth && truth < bound("high"),
        "{strong} {truth}"
    );
    assert!(
        strong["unreliable"].is_null() && strong["rate"].is_f64(),
        "{strong}"
    );

    // What was mislabelled left no trace in what is served: no revision since the first file.
    let exports = get("/v1/series/Q.XAA.exports/observations".to_owned()).await;
    assert_eq!(exports["released"], "2020-03-31");
    app.stop().await;
}
