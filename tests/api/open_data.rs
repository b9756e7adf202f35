//! Real open data from the raw file to the result through the HTTP interface, against what general-purpose
//! statistics libraries compute on the same data. Sources and licences stand at the head of each module.

mod penn_world_table;
mod us_preparation;
mod us_revisions;

use serde_json::Value;

use crate::support::app::{Answer, TestApp};

/// Bytes of a file under `fixtures`.
fn fixture(path: &str) -> Vec<u8> {
    let path = format!("{}/fixtures/{path}", env!("CARGO_MANIFEST_DIR"));
    std::fs::read(&path).unwrap_or_else(|e| panic!("{path}: {e}"))
}

fn reference(name: &str) -> Value {
    serde_json::from_slice(&fixture(&format!("reference/{name}"))).unwrap()
}

/// Sends a file of `fixtures/open-data/long`, which must land whole and unquestioned.
async fn send(app: &TestApp, file: &str, query: &str) -> Answer {
    let answer = app
        .upload(query, fixture(&format!("open-data/long/{file}")))
        .await
        .expect(201);
    assert_eq!(answer.at("/state"), "landed", "{file}: {}", answer.text());
    assert_eq!(answer.at("/report/rejects"), serde_json::json!([]));
    answer
}

/// The two vintages of US data, by release date.
const JUNE: &str = "2016-06-29";
const JULY: &str = "2016-07-29";

/// Sends the four files of a US vintage.
async fn send_us(app: &TestApp, released: &str) {
    for (name, query) in [
        ("trade", "kind=trade&unit_multiplier=6&adjustment=S"),
        ("trade_prices", "kind=price_index&reference=2000"),
        ("consumer_prices", "kind=price_index&adjustment=S"),
        (
            "income",
            "kind=income&unit_multiplier=9&prices=chained&price_reference=2009&flow=annual_rate&adjustment=S",
        ),
    ] {
        let query = format!(
            "{query}&area=USA&currency=USD&own_currency=USD&released={released}&title=Nowcasting+data\
             &publisher=Federal+Reserve+Bank+of+New+York"
        );
        send(app, &format!("us_{name}_{released}.csv"), &query).await;
    }
}

/// Prepares the US series from what was sent.
async fn prepare_us(app: &TestApp) -> Answer {
    let document = serde_json::from_slice(&fixture("open-data/us_preparation.json")).unwrap();
    put_and_run(app, "/v1/preparations/us", &document).await
}

/// Puts a document and runs it.
async fn put_and_run(app: &TestApp, path: &str, document: &Value) -> Answer {
    let answer = app.put(path, &document.to_string()).await;
    assert!((200..=201).contains(&answer.status), "{}", answer.text());
    app.post(&format!("{path}/runs"), "").await.expect(201)
}

/// The result of a run of a study, byte for byte as it was sent.
fn result(run: &Answer) -> String {
    let text = run.text();
    let (_, result) = text.split_once("\"result\":").expect("a run has a result");
    result.to_owned()
}

/// 1e-8 relative, and 1e-12 near zero.
#[track_caller]
fn close(found: f64, wanted: f64, what: &str) {
    let error = (found - wanted).abs();
    assert!(
        error <= (1e-8 * wanted.abs()).max(1e-12),
        "{what}: {found}, wanted {wanted}"
    );
}

#[track_caller]
fn number(value: &Value, pointer: &str) -> f64 {
    let found = value.pointer(pointer).and_then(Value::as_f64);
    found.unwrap_or_else(|| panic!("no number at {pointer}: {value}"))
}

#[track_caller]
fn numbers(value: &Value) -> Vec<f64> {
    let list = value.as_array().expect("a list");
    list.iter().map(|v| number(v, "")).collect()
}

/// An equation of a study against statistics of the same regression, Newey–West errors under `robust` among
/// them. `price_sign` is −1 where that regression has the inverse of the relative price. A constant in levels
/// depends on units and references, so that its comparison is left to who knows them.
fn check_equation(found: &Value, wanted: &Value, price_sign: f64, robust: &str, what: &str) {
    for (pointer, wanted) in [
        ("/observations", number(wanted, "/n")),
        ("/r_squared", number(wanted, "/rsquared")),
        ("/adjusted_r_squared", number(wanted, "/rsquared_adj")),
        ("/durbin_watson", number(wanted, "/durbin_watson")),
        ("/residual_std_dev", number(wanted, "/s2").sqrt()),
        ("/lags", number(&wanted[robust], "/lag")),
    ] {
        close(number(found, pointer), wanted, &format!("{what}{pointer}"));
    }
    let coefficients = found["coefficients"].as_array().expect("a list");
    let names: Vec<&Value> = coefficients.iter().map(|c| &c["name"]).collect();
    assert_eq!(names, ["constant", "income", "relative_price"], "{what}");
    let in_differences = wanted["names"][1].as_str().unwrap().starts_with("d_");
    let first = usize::from(!in_differences);
    let classical = found["covariance"] == "classical";
    let tested = if classical { wanted } else { &wanted[robust] };
    for (j, coefficient) in coefficients.iter().enumerate().skip(first) {
        let what = format!("{what} {}", coefficient["name"]);
        let sign = if j == 2 { price_sign } else { 1.0 };
        for (pointer, wanted) in [
            ("/estimate", sign * numbers(&wanted["params"])[j]),
            ("/std_error_classical", numbers(&wanted["bse"])[j]),
            ("/std_error_newey_west", numbers(&wanted[robust]["bse"])[j]),
            ("/t", sign * numbers(&tested["t"])[j]),
        ] {
            close(number(coefficient, pointer), wanted, &what);
        }
        if classical {
            // A tail of 1e-70 moves by 1e-8 where its t moves by 1e-10: the exponent is what is compared.
            let p = numbers(&wanted["p"])[j];
            close(number(coefficient, "/p").ln(), p.ln(), &what);
        }
    }
}
