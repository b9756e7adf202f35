//! Constants, context and kinds.

use super::*;

fn refused(kind: &str, name: &str, text: &str) -> crate::finding::Finding {
    let parameters = [(name.to_owned(), text.to_owned())];
    Settings::parse(kind, &parameters).unwrap_err().remove(0)
}

#[test]
fn wrong_ones_are_told_before_the_body() {
    for (kind, name, text, code, parameter) in [
        ("trades", "area", "XAA", "unknown_kind", "kind"),
        ("trade", "curency", "USD", "unknown_parameter", "curency"),
        (
            "weights",
            "currency",
            "USD",
            "unknown_parameter",
            "currency",
        ),
        (
            "trade",
            "currency",
            "dollar",
            "unknown_currency",
            "currency",
        ),
        ("trade", "measure", "gdp", "unknown_measure", "measure"),
        ("trade", "period", "2019", "not_a_constant", "period"),
        (
            "trade",
            "unit_multiplier",
            "x",
            "wrong_multiplier",
            "unit_multiplier",
        ),
        (
            "price_index",
            "reference_value",
            "0",
            "not_positive",
            "reference_value",
        ),
        (
            "price_index",
            "reference",
            "2015=100",
            "wrong_period",
            "reference",
        ),
    ] {
        let finding = refused(kind, name, text);
        assert_eq!(finding.code, code);
        assert_eq!(finding.place.parameter.as_deref(), Some(parameter));
        assert_eq!(finding.place.column, None);
        assert!(finding.remedy.is_some(), "{finding:?}");
    }
    let twice = [("area", "XAA"), ("area", "XAB")].map(|(n, t)| (n.to_owned(), t.to_owned()));
    assert_eq!(
        Settings::parse("trade", &twice).unwrap_err()[0].code,
        "repeated_parameter"
    );
    let settings = Settings::parse("trade", &[("currency".into(), "XYD".into())]).unwrap();
    let fatal = Reader::new(settings, context(), Limits::default(), false)
        .err()
        .unwrap();
    assert_eq!(fatal.findings()[0].code, "unknown_currency");
    assert_eq!(
        fatal.findings()[0].place.parameter.as_deref(),
        Some("currency")
    );
}

#[test]
fn stand_for_columns_and_may_not_be_contradicted() {
    let text = "measure,period,value\nexports,2019-Q1,1\n";
    let constants = [
        ("area", "XAA"),
        ("currency", "XAD"),
        ("unit_multiplier", "6"),
    ];
    let intake = read("trade", &constants, text).unwrap();
    assert_eq!(intake.pieces[0].key.to_string(), "Q.XAA.exports");
    assert_eq!(intake.pieces[0].values, [1e6]);
    assert_eq!(intake.understood.constants["currency"], "XAD");

    let text = "area,measure,period,value\nXAA,exports,2019-Q1,1\n,exports,2019-Q2,1\nXAB,exports,2019-Q2,1\n";
    let intake = read("trade", &constants, text).unwrap();
    let finding = only_reject(&intake);
    assert_eq!(finding.code, "contradicts_parameter");
    assert_eq!(finding.place.line, Some(4));
    assert_eq!(intake.pieces[0].lines, [2, 3]);
}

#[test]
fn a_contradicted_own_money_holds_the_file_once() {
    let text = "area,measure,currency,own_currency,period,value\nXAA,exports,XBD,XBD,2019,1\n\
                XAA,imports,XBD,XBD,2019,1\nXAC,imports,XCD,,2019,1\n";
    let intake = read("trade", &[], text).unwrap();
    assert_eq!(intake.understood.rows_accepted, 3);
    let found: Vec<_> = intake
        .findings
        .iter()
        .map(|f| (f.code.as_str(), f.severity))
        .collect();
    assert_eq!(
        found,
        [
            ("currency_contradicted", Severity::Error),
            ("own_money_unknown", Severity::Notice)
        ]
    );
    assert_eq!(intake.pieces[0].key.to_string(), "A.XAA.exports");
}

#[test]
fn every_kind_describes_itself() {
    for kind in kinds() {
        let template = template_csv(kind.name).unwrap();
        let header: Vec<&str> = template.trim_end().split(',').collect();
        let named: Vec<&str> = kind.columns.iter().map(|c| c.name).collect();
        assert_eq!(header, named);
        let fatal = read(kind.name, &[], &template).unwrap_err();
        assert_eq!(fatal.findings()[0].code, "no_rows");
        assert!(kind.columns.iter().all(|c| !c.description.is_empty()));
        let columns: BTreeSet<&str> = named.into_iter().collect();
        let measures: BTreeSet<&str> = kind.measures.iter().map(|m| m.name).collect();
        assert_eq!(columns.len(), kind.columns.len());
        assert_eq!(measures.len(), kind.measures.len());
    }
    assert_eq!(template_csv("nothing"), None);
}
