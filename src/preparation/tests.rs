//! Documents, plans and evaluations.

use std::collections::BTreeMap;

use proptest::prelude::*;
use serde_json::{Value, json};

use super::*;
use crate::finding::Severity;
use crate::series::algebra::samples::{money, price_index, rate, real_money, series};
use crate::series::{Adjustment, Unit, same};

/// The document of the module's documentation, with monthly rates beside quarterly trade.
const REAL_EXPORTS: &str = r#"{ "title": "Real exports", "outputs": {
    "A.XKA.exports_real...USD": [
        { "take": "Q.XKA.exports" },
        { "deflate": { "by": "Q.XKA.export_price", "reference": "2015" } },
        { "convert": { "to": "USD", "rates": "M.XKA.exchange_rate...USD", "at": "2015" } },
        { "aggregate": { "to": "A", "by": "sum" } } ] } }"#;

fn key(text: &str) -> InputRef {
    InputRef {
        key: text.parse().unwrap(),
        segment: None,
    }
}

fn store() -> BTreeMap<InputRef, Series> {
    let ramp = |n: usize, from: f64| -> Vec<f64> { (0..n).map(|i| from + i as f64).collect() };
    let mut store: BTreeMap<InputRef, Series> = [
        ("Q.XKA.exports", money("XAD"), "2014-Q1", ramp(11, 100.0)),
        ("Q.XKA.imports", money("XAD"), "2014-Q1", ramp(12, 200.0)),
        (
            "Q.XKA.export_price",
            price_index("XAD"),
            "2014-Q1",
            vec![100.0; 12],
        ),
        (
            "Q.XKA.foreign_price",
            price_index("USD"),
            "2014-Q1",
            ramp(12, 50.0),
        ),
        (
            "M.XKA.exchange_rate...USD",
            rate("XAD", "USD"),
            "2014-01",
            vec![2.0; 36],
        ),
        (
            "A.XKB.gdp_real",
            real_money("XBD", "2015"),
            "2014",
            ramp(3, 10.0),
        ),
        ("A.XKA.exports.XKB", money("XAD"), "2012", vec![3.0; 5]),
    ]
    .into_iter()
    .map(|(name, unit, start, values)| (key(name), series(unit, start, &values)))
    .collect();
    let old = InputRef {
        segment: Some(1),
        ..key("Q.XKA.export_price")
    };
    store.insert(old, series(price_index("XAD"), "2012-Q1", &[40.0; 12]));
    store
}

fn info(store: &BTreeMap<InputRef, Series>) -> BTreeMap<InputRef, InputInfo> {
    store
        .iter()
        .map(|(input, s)| {
            let info = InputInfo {
                unit: s.unit.clone(),
                first: s.start,
                last: s.end().unwrap(),
            };
            (input.clone(), info)
        })
        .collect()
}

fn document(outputs: &Value) -> Result<Document, Vec<Finding>> {
    Document::parse(&json!({ "outputs": outputs }).to_string())
}

/// Faults as `code pointer`.
fn faults<T: std::fmt::Debug>(result: Result<T, Vec<Finding>>) -> Vec<String> {
    let findings = result.expect_err("faults");
    findings
        .iter()
        .map(|f| {
            let pointer = f.place.pointer.clone().unwrap_or_default();
            format!("{} {pointer}", f.code)
        })
        .collect()
}

fn evaluated(outputs: &Value) -> Vec<Output> {
    evaluate(&document(outputs).unwrap(), &store()).unwrap()
}

#[test]
fn evaluates_the_documented_example_and_plans_it() {
    let document = Document::parse(REAL_EXPORTS).unwrap();
    assert_eq!(document.title(), Some("Real exports"));
    let names: Vec<String> = document.inputs().iter().map(ToString::to_string).collect();
    assert_eq!(
        names,
        [
            "Q.XKA.export_price",
            "Q.XKA.exports",
            "M.XKA.exchange_rate...USD"
        ]
        .map(str::to_owned)
    );
    let outputs = evaluate(&document, &store()).unwrap();
    let output = &outputs[0];
    // Sums of quarters over a price of 1 and a rate of 2; 2016 has three quarters.
    assert_eq!(output.series.values, [203.0, 211.0]);
    assert_eq!(output.notes[0].code, "incomplete_periods_dropped");
    assert_eq!(output.notes[0].place.period.as_deref(), Some("2016"));
    let plan = plan(&document, &info(&store())).unwrap();
    let planned = &plan.outputs[0];
    let words: Vec<&str> = planned.steps.iter().map(|s| s.words.as_str()).collect();
    assert_eq!(words, output.steps);
    assert_eq!(words[1], "deflate by Q.XKA.export_price, prices of 2015");
    let last = planned.steps.last().unwrap();
    assert_eq!(last.unit, output.series.unit);
    assert_eq!(
        (last.first, last.last),
        (Some(output.series.start), output.series.end())
    );
    let shown = serde_json::to_value(&plan).unwrap();
    assert_eq!(shown["outputs"][0]["steps"][3]["frequency"], "A");
}

#[test]
fn outputs_feed_one_another_and_segments_are_told_apart() {
    let outputs = evaluated(&json!({
        "Q.XKA.balance": [{ "subtract": ["Q.XKA.exports", "Q.XKA.imports"] }],
        "Q.XKA.balance_ratio": [{ "take": "Q.XKA.balance" }, { "divide": ["Q.XKA.imports"] }],
        "Q.XKA.price_linked": [
            { "link": {
                "target": "Q.XKA.export_price",
                "with": { "take": "Q.XKA.export_price", "segment": 1 },
                "over": "2014" } },
            { "rebase": { "reference": "2012/2013" } }],
        "Q.XKA.old_price": [{ "take": "Q.XKA.export_price", "segment": 1 }],
    }));
    let find = |name: &str| outputs.iter().find(|o| o.key.to_string() == name).unwrap();
    assert_eq!(find("Q.XKA.balance").series.values, [-100.0; 11]);
    assert_eq!(find("Q.XKA.balance_ratio").series.values[..1], [-0.5]);
    assert_eq!(find("Q.XKA.balance_ratio").inputs.len(), 2);
    let linked = find("Q.XKA.price_linked");
    assert_eq!(linked.series.values, [100.0; 20]);
    assert_eq!(linked.notes[0].code, "link_factor");
    assert_eq!(linked.notes[0].found.as_deref(), Some("2.5"));
    assert_eq!(find("Q.XKA.old_price").series.values, [40.0; 12]);
    assert!(linked.steps[0].contains("Q.XKA.export_price (segment 1)"));
}

#[test]
fn aggregates_of_partners_carry_their_coverage() {
    let outputs = evaluated(&json!({
        "A.XKA.foreign_income": [{ "foreign_income": {
            "partners": [{ "income": "A.XKB.gdp_real", "weights": "A.XKA.exports.XKB" }],
            "reference": "2015", "reference_value": 1, "weight_years": 1 } }],
        "Q.XKA.exchange_rate_q...USD": [{ "take": "M.XKA.exchange_rate...USD" }, { "aggregate": { "to": "Q" } }],
        "Q.XKA.rer": [{ "real_exchange_rate": {
            "home_price": "Q.XKA.export_price", "foreign_price": "Q.XKA.foreign_price",
            "rate": "Q.XKA.exchange_rate_q...USD", "reference": "2014-Q1" } }],
        "Q.XKA.reer": [{ "real_effective_exchange_rate": {
            "home_price": "Q.XKA.export_price", "reference": "2014-Q1",
            "partners": [{ "price": "Q.XKA.foreign_price", "rate": "Q.XKA.exchange_rate_q...USD",
                           "weights": "A.XKA.exports.XKB" }] } }],
    }));
    let find = |name: &str| outputs.iter().find(|o| o.key.to_string() == name).unwrap();
    let income = find("A.XKA.foreign_income");
    assert!((income.series.values[2] - 12.0 / 11.0).abs() < 1e-15);
    assert_eq!(income.notes[0].code, "weight_coverage");
    assert_eq!(income.notes[0].found.as_deref(), Some("100.0 %"));
    let (rer, reer) = (&find("Q.XKA.rer").series, &find("Q.XKA.reer").series);
    assert_eq!(rer.unit, reer.unit);
    for (a, b) in rer.values.iter().zip(&reer.values) {
        assert!((a / b - 1.0).abs() < 1e-13);
    }
}

#[test]
fn foreign_income_takes_mean_weights_of_three_years_unless_asked() {
    let income = json!({ "partners": [{ "income": "A.XKB.gdp_real", "weights": "A.XKA.exports.XKB" }],
                         "reference": "2015" });
    let outputs = evaluated(&json!({ "A.XKA.foreign_income": [{ "foreign_income": income }] }));
    assert!(
        outputs[0].steps[0].contains("mean weights of the three years before"),
        "{:?}",
        outputs[0].steps
    );
    // Weights of 2012 on serve 2015 at the earliest.
    assert_eq!(outputs[0].series.start.to_string(), "2014");
    assert_eq!(outputs[0].series.len(), 3);
}

/// No currency in a key means the area's own money, which rates tell as well as amounts.
#[test]
fn what_is_in_other_money_needs_its_currency_in_the_key() {
    let refused = |inputs: &[(&str, Unit)], outputs: Value, expected: &str| {
        let inputs = inputs
            .iter()
            .map(|(name, unit)| (key(name), series(unit.clone(), "2014", &[1.0, 2.0])))
            .collect();
        let faults = evaluate(&document(&outputs).unwrap(), &inputs).expect_err("a mismatch");
        assert_eq!(faults[0].code, "currency_mismatch");
        assert_eq!(faults[0].expected.as_deref(), Some(expected));
    };
    let (price, dollars) = (
        ("A.XKC.export_price...USD", price_index("USD")),
        ("A.XKC.exports...USD", money("USD")),
    );
    refused(
        &[price.clone(), ("A.XKC.exports", money("XCD"))],
        json!({ "A.XKC.price": [{ "take": "A.XKC.export_price...USD" }] }),
        "XCD, the money of XKC",
    );
    refused(
        &[price, ("A.XKC.exchange_rate...USD", rate("XCD", "USD"))],
        json!({ "A.XKC.price": [{ "take": "A.XKC.export_price...USD" }] }),
        "XCD, the money of XKC",
    );
    refused(
        &[dollars, ("A.XKC.exchange_rate...USD", rate("USD", "XCD"))],
        json!({ "A.XKC.sales": [{ "take": "A.XKC.exports...USD" }] }),
        "XCD, the money of XKC",
    );
    // Own money unknown: what stands in the keys of the area's series is not it.
    refused(
        &[("A.XKC.exports...USD", money("USD"))],
        json!({ "A.XKC.sales": [{ "take": "A.XKC.exports...USD" }] }),
        "the money of XKC",
    );
}

#[test]
fn every_fault_of_a_document_has_a_pointer() {
    let parse = |outputs: Value| faults(document(&outputs));
    let exports = json!({ "take": "Q.XKA.exports" });
    assert_eq!(faults(Document::parse("{")), ["invalid_json "]);
    assert_eq!(faults(Document::parse("[]")), ["invalid_value "]);
    assert_eq!(
        faults(Document::parse("{\"outputs\": {}}")),
        ["no_outputs /outputs"]
    );
    assert_eq!(
        faults(Document::parse("{\"outputs\": {}, \"variants\": {}}")),
        ["unknown_field /variants"]
    );
    assert_eq!(
        faults(Document::parse("{\n \"outputs\": {\"Q.XKA.a\":\n 3}}")),
        ["invalid_value /outputs/Q.XKA.a"]
    );
    assert_eq!(
        parse(json!({ "Q/XKA": [exports] })),
        ["invalid_key /outputs/Q~1XKA"]
    );
    assert_eq!(
        parse(json!({ "Q.XKA.a": [] })),
        ["no_steps /outputs/Q.XKA.a"]
    );
    let step = |step: Value| parse(json!({ "Q.XKA.a": [exports, step] }));
    let at = |code: &str, rest: &str| [format!("{code} /outputs/Q.XKA.a/1{rest}")];
    assert_eq!(step(json!({ "smooth": {} })), at("unknown_step", "/smooth"));
    assert_eq!(
        step(json!({ "deflate": { "by": "Q.XKA.p", "base": "2015" } })),
        at("unknown_field", "/deflate/base")
    );
    assert_eq!(
        step(json!({ "deflate": { "by": "Q.XKA.p" } })),
        at("missing_field", "/deflate")
    );
    assert_eq!(
        step(json!({ "deflate": { "by": "Q.XKA", "reference": "2015" } })),
        at("invalid_value", "/deflate/by")
    );
    assert_eq!(
        step(json!({ "deflate": { "by": "Q.XKA.p", "reference": 2015 } })),
        at("invalid_value", "/deflate/reference")
    );
    assert_eq!(
        step(json!({ "deflate": { "by": { "take": "Q.XKA.p", "part": 1 }, "reference": "2015" } })),
        at("unknown_field", "/deflate/by/part")
    );
    assert_eq!(
        step(json!({ "add": ["Q.XKA.b", "c"] })),
        at("invalid_value", "/add/1")
    );
    assert_eq!(
        step(json!({ "growth": { "kind": "wild" } })),
        at("unknown_step", "/growth/kind")
    );
    assert_eq!(
        step(json!({ "aggregate": { "to": "Y" } })),
        at("invalid_value", "/aggregate/to")
    );
    assert_eq!(step(json!({ "rebase": {}, "negate": {} })).len(), 1);
    assert_eq!(step(json!("negate")).len(), 1);
    assert_eq!(
        step(json!({ "deflate": ["Q.XKA.p", "2015"] })),
        at("invalid_value", "/deflate")
    );
    assert_eq!(step(exports.clone()), at("misplaced_step", ""));
    assert_eq!(step(json!({ "add": [] })), at("misplaced_step", ""));
    assert_eq!(
        parse(json!({ "Q.XKA.a": [{ "negate": {} }], "Q.XKA.b": [{ "add": ["Q.XKA.c"] }] })),
        [
            "misplaced_step /outputs/Q.XKA.a/0",
            "misplaced_step /outputs/Q.XKA.b/0"
        ]
    );
    let twice =
        r#"{"outputs": {"Q.XKA.a": [{"take": "Q.XKA.b"}], "Q.XKA.a.": [{"take": "Q.XKA.c"}]}}"#;
    assert_eq!(
        faults(Document::parse(twice)),
        ["duplicate_output /outputs/Q.XKA.a."]
    );
    let unknown = document(&json!({ "Q.XKA.a": [exports, { "rebase": { "base": 1 } }] }));
    let expected = unknown.unwrap_err()[0].expected.clone().unwrap();
    assert_eq!(expected, "`reference` or `reference_value`");
}

#[test]
fn cycles_are_named() {
    let fault = document(&json!({
        "Q.XKA.a": [{ "take": "Q.XKA.b" }],
        "Q.XKA.b": [{ "add": ["Q.XKA.c", "Q.XKA.free"] }],
        "Q.XKA.c": [{ "take": "Q.XKA.b" }],
        "Q.XKA.self": [{ "take": "Q.XKA.self", "segment": 1 }],
    }))
    .unwrap_err();
    let messages: Vec<&str> = fault.iter().map(|f| f.message.as_str()).collect();
    assert_eq!(
        messages,
        [
            "outputs depend on themselves: Q.XKA.b needs Q.XKA.c needs Q.XKA.b",
            "outputs depend on themselves: Q.XKA.self needs Q.XKA.self"
        ]
    );
}

/// What a plan refuses for units and periods, an evaluation refuses alike.
#[test]
fn plans_and_evaluations_refuse_alike() {
    let check = |outputs: Value, expected: &[&str]| {
        let document = document(&outputs).unwrap();
        let planned = faults(plan(&document, &info(&store())));
        assert_eq!(planned, faults(evaluate(&document, &store())));
        assert_eq!(planned, expected, "{outputs}");
    };
    let exports = json!({ "take": "Q.XKA.exports" });
    check(
        json!({ "Q.XKA.a": [{ "take": "Q.XKA.nothing" }], "Q.XKA.b": [{ "take": "Q.XKA.a" }] }),
        &["unknown_series /outputs/Q.XKA.a/0"],
    );
    check(
        json!({ "Q.XKA.a": [{ "take": "Q.XKA.export_price", "segment": 7 }] }),
        &["unknown_series /outputs/Q.XKA.a/0"],
    );
    check(
        json!({ "Q.XKA.a": [exports, { "deflate": { "by": "Q.XKA.foreign_price", "reference": "2015" } }],
                "Q.XKA.b": [{ "take": "Q.XKA.a" }],
                "A.XKA.c": [{ "take": "Q.XKA.export_price" }, { "aggregate": { "to": "A", "by": "sum" } }] }),
        &[
            "unsuitable_unit /outputs/A.XKA.c/1",
            "unit_clash /outputs/Q.XKA.a/1",
        ],
    );
    check(
        json!({ "Q.XKA.a": [exports, { "deflate": { "by": "Q.XKA.export_price", "reference": "2019" } }] }),
        &["reference_not_covered /outputs/Q.XKA.a/1"],
    );
    check(
        json!({ "M.XKA.a": [exports] }),
        &["frequency_mismatch /outputs/M.XKA.a"],
    );
    check(
        json!({ "Q.XKA.a...USD": [exports] }),
        &["currency_mismatch /outputs/Q.XKA.a...USD"],
    );
    check(
        json!({ "Q.XKA.rate...USD": [{ "take": "M.XKA.exchange_rate...USD" }, { "aggregate": { "to": "Q" } }],
                "Q.XKA.a": [exports, { "convert": { "to": "USD", "rates": "Q.XKA.rate...USD" } }] }),
        &["currency_mismatch /outputs/Q.XKA.a"],
    );
}

/// An amount that is negative only among stand-ins must not fail a plan.
#[test]
fn plans_do_not_stumble_over_their_stand_ins() {
    let document = document(&json!({
        "Q.XKA.net": [{ "subtract": ["Q.XKA.imports", "Q.XKA.exports"] }],
        "Q.XKA.ratio": [{ "divide": ["Q.XKA.exports", "Q.XKA.net"] }],
        "A.XKA.ratio": [{ "take": "Q.XKA.ratio" }, { "aggregate": { "to": "A" } }],
        "Q.XKA.linked": [{ "link": { "target": "Q.XKA.net", "with": "Q.XKA.exports" } }],
    }))
    .unwrap();
    assert_eq!(plan(&document, &info(&store())).unwrap().outputs.len(), 4);
    assert_eq!(evaluate(&document, &store()).unwrap().len(), 4);
}

#[test]
fn notes_tell_what_did_not_match() {
    let mut inputs = store();
    inputs
        .get_mut(&key("Q.XKA.export_price"))
        .unwrap()
        .values
        .truncate(9);
    inputs
        .get_mut(&key("Q.XKA.export_price"))
        .unwrap()
        .status
        .truncate(9);
    let old = inputs
        .keys()
        .find(|k| k.segment == Some(1))
        .unwrap()
        .clone();
    inputs.get_mut(&old).unwrap().values[8] = 44.0;
    let document = document(&json!({
        "Q.XKA.a": [{ "take": "Q.XKA.exports" },
                    { "deflate": { "by": "Q.XKA.export_price", "reference": "2015" } }],
        "Q.XKA.b": [{ "link": { "target": "Q.XKA.export_price",
                                "with": { "take": "Q.XKA.export_price", "segment": 1 } } }],
    }))
    .unwrap();
    let outputs = evaluate(&document, &inputs).unwrap();
    let notes: Vec<(&str, Option<&str>)> = outputs
        .iter()
        .flat_map(|o| &o.notes)
        .map(|n| (n.code.as_str(), n.found.as_deref()))
        .collect();
    assert_eq!(notes[0], ("no_matching_price", Some("2")));
    assert_eq!(outputs[0].notes[0].place.period.as_deref(), Some("2016-Q2"));
    assert_eq!(
        outputs[0].notes[0].place.pointer.as_deref(),
        Some("/outputs/Q.XKA.a/1")
    );
    assert_eq!(notes[2], ("link_spread", Some("10.00 %")));
    assert_eq!(outputs[1].notes[1].severity, Severity::Error);
}

/// Two of three partners have no weight from 2013 on, and none has one for 2016.
#[test]
fn notes_tell_of_missing_weights_and_of_adjustment_on_one_side() {
    let mut inputs = store();
    let mut put = |name: &str, unit: Unit, start: &str, values: &[f64]| {
        inputs.insert(key(name), series(unit, start, values));
    };
    for partner in ["XKC", "XKD"] {
        let income = format!("A.{partner}.gdp_real");
        put(&income, real_money("XBD", "2015"), "2014", &[1.0, 2.0, 3.0]);
        let weights = format!("A.XKA.exports.{partner}");
        put(&weights, money("XAD"), "2012", &[1.0]);
    }
    put("A.XKA.exports.XKB", money("XAD"), "2014", &[3.0]);
    let adjusted = Unit {
        adjustment: Adjustment::SeasonallyAdjusted("source".to_owned()),
        ..money("XAD")
    };
    put(
        "Q.XKA.imports.....S",
        adjusted.clone(),
        "2014-Q1",
        &[1.0; 12],
    );
    put("A.XKA.imports.....S", adjusted, "2014", &[1.0; 3]);
    put("A.XKA.import_price", price_index("XAD"), "2014", &[1.0; 3]);
    let partners = ["XKB", "XKC", "XKD"].map(|area| {
        json!({ "income": format!("A.{area}.gdp_real"), "weights": format!("A.XKA.exports.{area}") })
    });
    let deflate = |price: &str| json!({ "deflate": { "by": price, "reference": "2015" } });
    let document = document(&json!({
        "A.XKA.foreign_income": [{ "foreign_income": {
            "partners": partners, "reference": "2015", "weight_years": 1 } }],
        "A.XKA.imports_real.....S": [{ "take": "A.XKA.imports.....S" }, deflate("A.XKA.import_price")],
        "Q.XKA.imports_real.....S": [{ "take": "Q.XKA.imports.....S" }, deflate("Q.XKA.export_price")],
    }))
    .unwrap();
    let outputs = evaluate(&document, &inputs).unwrap();
    let told = |i: usize| -> Vec<(&str, Severity, Option<&str>, Option<&str>)> {
        let notes = outputs[i].notes.iter();
        notes
            .map(|n| {
                (
                    n.code.as_str(),
                    n.severity,
                    n.place.period.as_deref(),
                    n.found.as_deref(),
                )
            })
            .collect()
    };
    assert_eq!(
        told(0),
        [
            (
                "weight_coverage",
                Severity::Notice,
                Some("2015"),
                Some("100.0 %")
            ),
            ("weights_missing", Severity::Error, Some("2015"), Some("2")),
            (
                "periods_left_off",
                Severity::Notice,
                Some("2016"),
                Some("1")
            ),
        ]
    );
    assert_eq!(told(1), []);
    let codes: Vec<&str> = told(2).iter().map(|n| n.0).collect();
    assert_eq!(codes, ["adjustment_differs"]);
}

proptest! {
    /// Any order of outputs in the document gives the same outputs in the same order.
    #[test]
    fn the_order_of_outputs_does_not_matter(order in Just(vec![0, 1, 2, 3, 4]).prop_shuffle()) {
        let outputs = [
            r#""A.XKA.exports_real": [{"take": "Q.XKA.exports_real"}, {"aggregate": {"to": "A"}}]"#,
            r#""Q.XKA.exports_real": [{"take": "Q.XKA.exports"}, {"deflate": {"by": "Q.XKA.mean_price", "reference": "2015"}}]"#,
            r#""Q.XKA.mean_price": [{"geometric_mean": {"of": ["Q.XKA.export_price", "Q.XKA.home_price"]}}]"#,
            r#""Q.XKA.home_price": [{"take": "Q.XKA.export_price"}]"#,
            r#""A.XKA.growth": [{"take": "A.XKA.exports_real"}, {"growth": {"kind": "log"}}]"#,
        ];
        let text = |order: &[usize]| {
            let listed: Vec<&str> = order.iter().map(|i| outputs[*i]).collect();
            format!("{{\"outputs\": {{{}}}}}", listed.join(","))
        };
        let sorted = evaluate(&Document::parse(&text(&[0, 1, 2, 3, 4])).unwrap(), &store()).unwrap();
        let shuffled = evaluate(&Document::parse(&text(&order)).unwrap(), &store()).unwrap();
        prop_assert_eq!(sorted.len(), shuffled.len());
        for (a, b) in sorted.iter().zip(&shuffled) {
            prop_assert_eq!((&a.key, &a.steps, &a.notes), (&b.key, &b.steps, &b.notes));
            prop_assert!(a.series.values.iter().zip(&b.series.values).all(|(a, b)| same(*a, *b)));
            prop_assert_eq!(&a.series.status, &b.series.status);
        }
    }

    /// Any text gives a document or faults, never a panic.
    #[test]
    fn any_text_is_read_or_refused(text in r#"[\{\}\[\]":,a-z0-9. \\]{0,60}"#) {
        let _ = Document::parse(&text);
        let nested = format!("{{\"outputs\": {{\"Q.XKA.a\": [{{\"add\": {text}}}]}}}}");
        if let Err(faults) = Document::parse(&nested) {
            prop_assert!(!faults.is_empty());
        }
    }
}

#[test]
fn a_ratio_unit_needs_no_currency() {
    let outputs = evaluated(&json!({
        "Q.XKA.share": [{ "divide": ["Q.XKA.exports", "Q.XKA.imports"] }],
    }));
    assert_eq!(outputs[0].series.unit, Unit::ratio());
}
