//! Studies on a simulated economy.

use std::collections::BTreeMap;

use serde_json::{Value, json};

use super::*;
use crate::constraint::{Form, Region};
use crate::dist::normal_upper;
use crate::finding::{Finding, Severity};
use crate::series::{Prices, Quantity, Series, SeriesKey, Status, Timing, Unit};
use crate::time::{Frequency, Period};

pub(super) type Inputs = BTreeMap<SeriesKey, Series>;

pub(super) fn key(measure: &str) -> SeriesKey {
    format!("A.XAA.{measure}").parse().unwrap()
}

pub(super) fn document() -> Value {
    json!({
        "title": "Trade and growth of XAA",
        "area": "XAA",
        "frequency": "A",
        "headline": {"form": "strong_form", "estimator": "ols_differences"},
        "forms": ["weak_form", "weak_form_with_prices", "strong_form", "with_relative_prices"],
        "estimators": ["ols_levels", "ols_differences"],
        "activity": "A.XAA.gdp_real",
        "import_demand": {
            "volume": "A.XAA.imports_real",
            "activity": "A.XAA.gdp_real",
            "relative_price": "A.XAA.import_relative_price"
        },
        "export_demand": {
            "volume": "A.XAA.exports_real",
            "activity": "A.XAA.foreign_income",
            "relative_price": "A.XAA.export_relative_price"
        },
        "terms_of_trade": "A.XAA.terms_of_trade"
    })
}

pub(super) fn parse(value: &Value) -> Document {
    Document::parse(&value.to_string()).unwrap()
}

fn volume() -> Unit {
    Unit {
        quantity: Quantity::Money {
            currency: crate::series::CurrencyCode::parse("XAD").unwrap(),
        },
        timing: Timing::Flow,
        prices: Prices::Chained {
            price_reference: Some("2015".into()),
        },
        adjustment: crate::series::Adjustment::Raw,
    }
}

pub(super) fn insert(inputs: &mut Inputs, measure: &str, start: &str, values: Vec<f64>) {
    let unit = if measure.contains("price") || measure == "terms_of_trade" {
        Unit::ratio()
    } else {
        volume()
    };
    let series = Series::new(unit, start.parse().unwrap(), values);
    inputs.insert(key(measure), series);
}

pub(super) fn codes(findings: &[Finding]) -> Vec<&str> {
    findings.iter().map(|f| f.code.as_str()).collect()
}

pub(super) fn close(found: f64, wanted: f64, what: &str) {
    let relative = (found / wanted - 1.0).abs();
    assert!(relative < 1e-8, "{what}: {found}, wanted {wanted}");
}

/// Elasticities and mean growth rates of the simulated economy.
pub(super) const PI: f64 = 1.6;
pub(super) const EPSILON: f64 = 1.3;
pub(super) const ETA: f64 = 0.7;
pub(super) const ETA_STAR: f64 = 0.5;

/// An economy in which demand in differences is as METHODS has it, with independent errors.
fn simulated(seed: u64, years: usize) -> Inputs {
    let mut state = seed;
    let mut normal = |deviation: f64| {
        // splitmix64, then the inverse of the normal tail.
        state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = state;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        let high = u32::try_from((z ^ (z >> 31)) >> 32).unwrap();
        deviation * normal_upper((f64::from(high) + 0.5) / 2_f64.powi(32))
    };
    let mut levels: BTreeMap<&str, Vec<f64>> = BTreeMap::new();
    let mut push = |name: &'static str, change: f64| {
        let list = levels.entry(name).or_insert_with(|| vec![100.0]);
        list.push(list[list.len() - 1] * change.exp());
    };
    for _ in 1..years {
        let (y, z) = (0.025 + normal(0.02), 0.03 + normal(0.015));
        let (rm, rx, tt) = (0.004 + normal(0.04), normal(0.04), 0.002 + normal(0.03));
        push("gdp_real", y);
        push("foreign_income", z);
        push("import_relative_price", rm);
        push("export_relative_price", rx);
        push("terms_of_trade", tt);
        push("imports_real", PI * y + ETA * rm + normal(0.012));
        push("exports_real", EPSILON * z - ETA_STAR * rx + normal(0.012));
    }
    let mut inputs = Inputs::new();
    for (measure, values) in levels {
        insert(&mut inputs, measure, "1970", values);
    }
    inputs
}

#[test]
fn a_simulated_economy_is_recovered_within_its_intervals() {
    let outcome = run(&parse(&document()), &simulated(7, 50)).unwrap();
    let result = &outcome.estimators[1];
    let within = |e: &Estimate, truth: f64| {
        assert!(
            (e.value - truth).abs() < 2.02 * e.std_error,
            "{e:?} {truth}"
        );
        assert!(e.std_error < 0.2, "{e:?}");
    };
    within(&result.import_income_elasticity, PI);
    within(&result.export_income_elasticity, EPSILON);
    within(&result.import_price_elasticity.unwrap(), ETA);
    within(&result.export_price_elasticity.unwrap(), ETA_STAR);
    let growth = &outcome.growth;
    let (tt, rm, rx) = (
        growth.terms_of_trade.unwrap(),
        growth.import_relative_price.unwrap(),
        growth.export_relative_price.unwrap(),
    );
    let strong = EPSILON * growth.foreign_income / PI;
    let effect = (tt - ETA * rm - ETA_STAR * rx) / PI;
    for (i, truth) in [
        (0, growth.exports / PI),
        (1, (growth.exports + tt - ETA * rm) / PI),
        (2, strong),
        (3, strong + effect),
    ] {
        let form = &result.forms[i];
        assert_eq!(form.unreliable, None);
        assert!(
            form.numbers.interval.unwrap().contains(truth),
            "{form:?} {truth}"
        );
    }
    let found = result.forms[2]
        .numbers
        .relative_price_effect
        .as_ref()
        .unwrap();
    assert!(
        !found.included && found.interval.contains(effect),
        "{found:?}"
    );
    assert!(found.p_zero.unwrap() > 0.0 && found.p_zero.unwrap() < 1.0);
    assert!(outcome.headline_form().unwrap().numbers.rate.is_some());
}

/// Share of simulated economies whose 95 per cent interval holds the rate at the true elasticities
/// and the sample's growth of foreign income. 400 draws have a standard error of 1.1 points.
#[test]
fn fieller_covers_in_simulated_economies() {
    let mut value = document();
    value["estimators"] = json!(["ols_differences"]);
    let document = parse(&value);
    let covered = (1_u64..=400).filter(|draw| {
        let outcome = run(&document, &simulated(draw * 1_000_003, 40)).unwrap();
        let form = &outcome.estimators[0].forms[2];
        let numbers = form
            .unreliable
            .as_ref()
            .map_or(&form.numbers, |u| &u.numbers);
        let truth = EPSILON * outcome.growth.foreign_income / PI;
        numbers.interval.unwrap().contains(truth)
    });
    let share = f64::from(u32::try_from(covered.count()).unwrap()) / 400.0;
    println!("strong form, differences, 40 years: {share}");
    assert!((0.92..=0.98).contains(&share), "{share}");
}

/// Two random walks in levels: the headline number may not show, and the page gives the reason.
#[test]
fn levels_of_unrelated_walks_are_marked_unreliable() {
    let mut inputs = simulated(7, 50);
    let other = simulated(8, 50);
    for measure in ["imports_real", "exports_real"] {
        inputs.insert(key(measure), other[&key(measure)].clone());
    }
    let mut value = document();
    value["headline"]["estimator"] = json!("ols_levels");
    let outcome = run(&parse(&value), &inputs).unwrap();
    let form = outcome.headline_form().unwrap();
    assert_eq!(form.numbers, FormNumbers::default());
    let unreliable = form.unreliable.as_ref().unwrap();
    assert!(codes(&unreliable.reasons).contains(&"possibly_spurious"));
    let rate = super::run::compound(unreliable.numbers.rate.unwrap());
    let page = text::render(&outcome, &[], false);
    assert!(page.contains("possibly_spurious") && page.contains("unreliable (a"));
    assert!(!page.contains(&format!("{rate:.2} [")), "{page}");
    let marked = text::render(&outcome, &[], true);
    println!("{marked}");
    assert!(marked.lines().all(|l| l.chars().count() <= 100));
    assert!(marked.contains(&format!("{rate:.2}* [")), "{marked}");
}

/// A bad export equation spoils the forms that use it and no other.
#[test]
fn a_form_is_unreliable_only_through_its_own_equations() {
    let mut inputs = simulated(7, 50);
    let exports = inputs.get_mut(&key("exports_real")).unwrap();
    let noise: Vec<f64> = (0..50_i32)
        .map(|t| 100.0 * 1.03_f64.powi(t) * (1.0 + 0.1 * f64::from(t * t % 7)))
        .collect();
    exports.values = noise;
    let outcome = run(&parse(&document()), &inputs).unwrap();
    let forms = &outcome.estimators[1].forms;
    assert_eq!(forms[0].unreliable, None);
    let reasons = &forms[2].unreliable.as_ref().unwrap().reasons;
    assert!(
        codes(reasons).contains(&"insignificant_income_elasticity"),
        "{reasons:?}"
    );
}

#[test]
fn the_same_inputs_give_the_same_bytes_and_survive_json() {
    let (document, inputs) = (parse(&document()), simulated(3, 40));
    let first = serde_json::to_string(&run(&document, &inputs).unwrap()).unwrap();
    let second = serde_json::to_string(&run(&document, &inputs).unwrap()).unwrap();
    assert_eq!(first, second);
    let back: Outcome = serde_json::from_str(&first).unwrap();
    assert_eq!(serde_json::to_string(&back).unwrap(), first);
}

#[test]
fn a_page_fits_and_says_what_a_stranger_needs() {
    let outcome = run(&parse(&document()), &simulated(7, 50)).unwrap();
    let page = text::render(&outcome, &["Run 1.".to_owned()], false);
    println!("{page}");
    for part in [
        "Actual growth",
        "compound per cent a year",
        "Run 1.",
        "not a forecast",
        "labour",
    ] {
        assert!(page.to_lowercase().contains(&part.to_lowercase()), "{part}");
    }
    assert!(page.lines().all(|l| l.chars().count() <= 100), "{page}");
}

/// Quarterly growth is told per year: four times the quarterly log growth.
#[test]
fn quarterly_rates_are_per_year() {
    let quarterly = |text: &str| text.replace("A.XAA", "Q.XAA");
    let mut value: Value = serde_json::from_str(&quarterly(&document().to_string())).unwrap();
    value["frequency"] = json!("Q");
    let annual = run(&parse(&document()), &simulated(7, 50)).unwrap();
    let inputs = simulated(7, 50)
        .into_iter()
        .map(|(key, mut series)| {
            series.start = Period::in_year(Frequency::Quarterly, 1990, 1).unwrap();
            if key.to_string().ends_with("gdp_real") {
                let by = "the source".to_owned();
                series.unit.adjustment = crate::series::Adjustment::SeasonallyAdjusted(by);
            }
            (quarterly(&key.to_string()).parse().unwrap(), series)
        })
        .collect();
    let found = run(&parse(&value), &inputs).unwrap();
    assert!(codes(&found.findings).contains(&"filtered_series"));
    assert!(!codes(&annual.findings).contains(&"filtered_series"));
    close(found.actual_growth, 4.0 * annual.actual_growth, "actual");
    let rate = |o: &Outcome| {
        let form = &o.estimators[1].forms[2];
        form.numbers
            .rate
            .or_else(|| form.unreliable.as_ref()?.numbers.rate)
    };
    close(rate(&found).unwrap(), 4.0 * rate(&annual).unwrap(), "rate");
}

#[test]
fn forms_without_their_prices_are_refused_and_the_rest_stands() {
    let mut value = document();
    value["terms_of_trade"] = Value::Null;
    value["export_demand"]["relative_price"] = Value::Null;
    let outcome = run(&parse(&value), &simulated(7, 50)).unwrap();
    let forms = &outcome.estimators[1].forms;
    assert!(forms[0].numbers.rate.is_some() && forms[2].numbers.rate.is_some());
    assert!(
        forms[1]
            .refused
            .as_ref()
            .unwrap()
            .contains("terms of trade")
    );
    assert!(
        forms[3]
            .refused
            .as_ref()
            .unwrap()
            .contains("relative price of exports")
    );
    assert_eq!(forms[0].numbers.relative_price_effect, None);
    assert!(text::render(&outcome, &[], false).contains("No rate exists"));
}

#[test]
fn every_fault_of_the_data_names_series_and_period() {
    let document = parse(&document());
    let fault = |change: &dyn Fn(&mut Inputs)| {
        let mut inputs = simulated(7, 50);
        change(&mut inputs);
        run(&document, &inputs).unwrap_err().remove(0)
    };
    let edit = |inputs: &mut Inputs, measure: &str, f: &dyn Fn(&mut Series)| {
        f(inputs.get_mut(&key(measure)).unwrap());
    };
    let found = fault(&|i| {
        i.remove(&key("foreign_income"));
    });
    assert_eq!(
        (found.code.as_str(), found.place.pointer.as_deref()),
        ("missing_input", Some("/export_demand/activity"))
    );
    let found = fault(&|i| edit(i, "gdp_real", &|s| s.values[5] = 0.0));
    assert_eq!(
        (found.code.as_str(), found.place.period.as_deref()),
        ("not_positive", Some("1975"))
    );
    let found = fault(&|i| {
        edit(i, "imports_real", &|s| {
            s.values[3] = f64::NAN;
            s.status[3] = Status::Missing;
        });
    });
    assert_eq!(
        (found.code.as_str(), found.place.period.as_deref()),
        ("gap_in_sample", Some("1973"))
    );
    assert_eq!(found.place.series.as_deref(), Some("A.XAA.imports_real"));
    let found = fault(&|i| edit(i, "gdp_real", &|s| s.unit = Unit::ratio()));
    assert_eq!(found.code, "wrong_unit");
    let found = fault(&|i| edit(i, "terms_of_trade", &|s| s.unit = volume()));
    assert_eq!(found.code, "wrong_unit");
    let found = fault(&|i| edit(i, "gdp_real", &|s| s.start = "1970-Q1".parse().unwrap()));
    assert_eq!(found.code, "wrong_frequency");
    let found = fault(&|i| edit(i, "import_relative_price", &|s| s.values.fill(1.0)));
    assert_eq!(found.code, "constant_series");
    let found = fault(&|i| {
        let gdp = i[&key("gdp_real")].values.clone();
        edit(i, "import_relative_price", &|s| s.values.clone_from(&gdp));
    });
    assert_eq!(found.code, "collinear");
    assert!(found.found.unwrap().contains("A.XAA.gdp_real"));
    let found = fault(&|i| edit(i, "gdp_real", &|s| s.start = "2018".parse().unwrap()));
    assert_eq!(found.code, "too_few_observations");
    let found = fault(&|i| edit(i, "gdp_real", &|s| s.start = "2300".parse().unwrap()));
    assert_eq!(found.code, "no_common_sample");
}

#[test]
fn forecasts_stay_out_and_current_prices_are_noticed() {
    let mut inputs = simulated(7, 50);
    let gdp = inputs.get_mut(&key("gdp_real")).unwrap();
    gdp.status[48] = Status::Forecast;
    gdp.status[49] = Status::Forecast;
    let imports = inputs.get_mut(&key("imports_real")).unwrap();
    imports.unit.prices = Prices::Current;
    let mut value = document();
    value["sample"] = json!({"from": "1980", "to": "2019"});
    let outcome = run(&parse(&value), &inputs).unwrap();
    assert_eq!(
        (outcome.sample.from.as_str(), outcome.sample.to.as_str()),
        ("1980", "2017")
    );
    assert_eq!(outcome.sample.observations, 38);
    assert_eq!(
        codes(&outcome.findings),
        ["current_price_volume", "sample_shortened"]
    );
    assert!(
        outcome
            .findings
            .iter()
            .all(|f| f.severity == Severity::Notice)
    );
}

#[test]
fn short_samples_and_bad_signs_are_marked() {
    let mut value = document();
    value["sample"] = json!({"from": "2005"});
    let outcome = run(&parse(&value), &simulated(7, 50)).unwrap();
    let reasons = &outcome.estimators[1].forms[0]
        .unreliable
        .as_ref()
        .unwrap()
        .reasons;
    assert!(codes(reasons).contains(&"few_observations"), "{reasons:?}");

    let mut inputs = simulated(7, 50);
    let price = inputs.get_mut(&key("export_relative_price")).unwrap();
    price.values.iter_mut().for_each(|v| *v = 1.0 / *v);
    let outcome = run(&parse(&document()), &inputs).unwrap();
    let forms = &outcome.estimators[1].forms;
    let reasons = &forms[3].unreliable.as_ref().unwrap().reasons;
    assert_eq!(codes(reasons), ["wrong_sign"]);
    assert_eq!(forms[1].unreliable, None);
}

/// Income elasticity not told from zero: Fieller's set has no end, and no rate is printed.
#[test]
fn an_unbounded_set_is_told_as_such() {
    let mut inputs = simulated(7, 50);
    let imports = inputs.get_mut(&key("imports_real")).unwrap();
    // A small response to income drowned in an alternating error.
    let sign = |t: i32| if t % 2 == 0 { 1.0_f64 } else { -1.0 };
    let gdp = simulated(7, 50)[&key("gdp_real")].values.clone();
    imports.values = (0..50_i32)
        .zip(gdp)
        .map(|(t, y)| y.powf(0.5) * (0.2 * sign(t)).exp())
        .collect();
    let outcome = run(&parse(&document()), &inputs).unwrap();
    let form = &outcome.estimators[1].forms[0];
    let unreliable = form.unreliable.as_ref().unwrap();
    let region = unreliable.numbers.interval.unwrap();
    assert!(!matches!(region, Region::Interval { .. }), "{region:?}");
    assert!(codes(&unreliable.reasons).contains(&"interval_unbounded"));
    assert_eq!(form.numbers.rate, None);
}

/// With autonomous growth and prices, the weak form by least squares in differences is actual growth
/// plus the growth of the trade balance over π, whatever the data: the fit goes through the means.
#[test]
fn the_near_identity_is_exact_in_differences() {
    let result = &run(&parse(&document()), &simulated(5, 40)).unwrap();
    let differences = &result.estimators[1];
    let rate = differences.forms[1]
        .numbers
        .rate_with_autonomous_growth
        .unwrap();
    let part = differences.near_identity.trade_imbalance_part.unwrap();
    assert!(
        (rate - result.actual_growth - part).abs() < 1e-11,
        "{rate} {part}"
    );
    assert!(part.abs() > 0.01);
}

/// A perfect fit has no Durbin-Watson statistic and no t: they are null, never infinite.
#[test]
fn every_number_is_finite_or_null() {
    let mut inputs = simulated(7, 50);
    let gdp = inputs[&key("gdp_real")].values.clone();
    let imports = inputs.get_mut(&key("imports_real")).unwrap();
    imports.values = gdp.iter().map(|y| y * y).collect();
    let outcome = run(&parse(&document()), &inputs).unwrap();
    let text = serde_json::to_string(&outcome).unwrap();
    let back: Outcome = serde_json::from_str(&text).unwrap();
    assert_eq!(back, outcome);
    close(
        outcome.estimators[1].import_income_elasticity.value,
        2.0,
        "pi",
    );
}

#[test]
fn a_document_keeps_its_promises() {
    let document = parse(&document());
    assert_eq!(document.inputs().len(), 7);
    assert_eq!(document.forms, Form::ALL);
    let text = serde_json::to_string(&document).unwrap();
    assert_eq!(Document::parse(&text).unwrap(), document);
    assert_eq!(serde_json::from_str::<Document>(&text).unwrap(), document);
}

#[test]
fn faults_of_a_document_have_pointers_and_all_come_at_once() {
    let mut value = document();
    value["headline"]["form"] = json!("strongest");
    value["import_demand"]["volumes"] = json!(1);
    value["sample"] = json!({"from": "20x"});
    value["activity"] = Value::Null;
    value["a/b"] = json!(1);
    value.as_object_mut().unwrap().remove("title");
    let findings = Document::parse(&value.to_string()).unwrap_err();
    let pointer = |code: &str| -> Vec<&str> {
        let list = findings.iter().filter(|f| f.code == code);
        list.map(|f| f.place.pointer.as_deref().unwrap()).collect()
    };
    assert_eq!(
        pointer("unknown_field"),
        ["/a~1b", "/import_demand/volumes"]
    );
    assert_eq!(pointer("missing_field"), ["/title"]);
    assert_eq!(
        pointer("invalid_value"),
        ["/headline/form", "/sample/from", "/activity"]
    );
    let unknown = findings.iter().find(|f| f.code == "unknown_field").unwrap();
    assert!(
        unknown
            .expected
            .as_ref()
            .unwrap()
            .contains("terms_of_trade")
    );

    for (pointer, change) in [
        ("/headline/form", json!({"forms": ["weak_form"]})),
        (
            "/estimators/1",
            json!({"estimators": ["ols_differences", "ols_differences"]}),
        ),
        ("/forms", json!({"forms": []})),
        ("/frequency", json!({"frequency": "W"})),
        ("/activity", json!({"activity": "Q.XAA.gdp_real"})),
        (
            "/sample/to",
            json!({"sample": {"from": "2000", "to": "1990"}}),
        ),
        ("/interval/level", json!({"interval": {"level": 1.0}})),
        ("/activity", json!({"area": "XBB"})),
        (
            "/import_demand/activity",
            json!({"import_demand": {"volume": "A.XAA.imports_real", "activity": "A.XAA.imports_real"}}),
        ),
        ("/import_demand", json!({"import_demand": 3})),
    ] {
        let mut value = document();
        for (name, part) in change.as_object().unwrap() {
            value[name] = part.clone();
        }
        let findings = Document::parse(&value.to_string()).unwrap_err();
        assert_eq!(
            findings[0].place.pointer.as_deref(),
            Some(pointer),
            "{findings:?}"
        );
    }
    assert_eq!(codes(&Document::parse("{").unwrap_err()), ["invalid_json"]);
}
