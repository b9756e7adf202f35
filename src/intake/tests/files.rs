//! Example files and wrong ones.

use super::*;

#[test]
fn reads_one_example_of_each_kind() {
    for (kind, rows, keys) in [
        (
            "trade",
            16,
            vec!["Q.XAA.exports", "Q.XAA.exports.XAB", "Q.XAA.imports"],
        ),
        (
            "price_index",
            12,
            vec!["Q.XAA.export_price", "Q.XAA.import_price"],
        ),
        (
            "income",
            12,
            vec!["Q.XAA.gdp.....S", "Q.XAA.gdp_real.....S"],
        ),
        (
            "exchange_rate",
            8,
            vec!["M.XAA.exchange_rate...USD", "M.XAA.exchange_rate...USD"],
        ),
        (
            "weights",
            4,
            vec![
                "A.XAA.export_weight.XAB",
                "A.XAA.export_weight.XAC",
                "A.XAA.export_weight.XAE",
                "A.XAA.export_weight.XAF",
            ],
        ),
        ("ratio", 3, vec!["A.XAA.current_account_ratio"]),
    ] {
        let intake = read_with(reader(kind, &[]), &fixture(&format!("{kind}.csv"))).unwrap();
        assert_eq!(intake.rejects, [], "{kind}");
        assert_eq!(intake.findings, [], "{kind}");
        assert_eq!(intake.understood.rows_accepted, rows, "{kind}");
        let mut found: Vec<String> = intake.pieces.iter().map(|p| p.key.to_string()).collect();
        found.sort();
        assert_eq!(found, keys, "{kind}");
    }
}

#[test]
fn applies_multiplier_status_and_unit() {
    let intake = read_with(reader("trade", &[]), &fixture("trade.csv")).unwrap();
    let exports = &intake.pieces[0];
    assert_eq!(exports.unit.to_string(), "XAD, flow, current prices");
    assert_eq!(exports.values[1].to_bits(), 1_251_300_000_f64.to_bits());
    assert_eq!(exports.status[5], Status::Provisional);
    assert_eq!(exports.lines, [2, 3, 4, 5, 6, 7]);
    let to_partner = &intake.pieces[2];
    assert!(to_partner.values[1].is_nan());
    assert_eq!(to_partner.status[1], Status::Suppressed);
    let ratio = read_with(reader("ratio", &[]), &fixture("ratio.csv")).unwrap();
    assert_eq!(ratio.pieces[0].values[0].to_bits(), (-0.021_f64).to_bits());
    assert_eq!(intake.understood.delimiter, "comma");
    assert_eq!(intake.understood.periods[0].first, "2019-Q1");
    assert_eq!(intake.understood.periods[0].last, "2020-Q2");
    assert_eq!(intake.understood.units, ["XAD, flow, current prices"]);
}

#[test]
fn wrong_files_are_refused_with_line_and_remedy() {
    for (kind, name, code, line) in [
        ("trade", "no_header.csv", "no_header", Some(1)),
        ("trade", "unknown_column.csv", "unknown_column", Some(1)),
        ("trade", "missing_column.csv", "missing_column", Some(1)),
        ("trade", "empty.csv", "empty_body", None),
        ("trade", "no_rows.csv", "no_rows", Some(1)),
        ("trade", "invalid_utf8.csv", "invalid_utf8", Some(3)),
        ("trade", "truncated.csv.gz", "truncated_gzip", Some(1)),
    ] {
        let fatal = read_with(reader(kind, &[]), &fixture(&format!("bad/{name}"))).unwrap_err();
        let finding = &fatal.findings()[0];
        assert_eq!(finding.code, code, "{name}");
        assert_eq!(finding.place.line, line, "{name}");
        assert!(
            finding.remedy.is_some() || finding.expected.is_some(),
            "{name}"
        );
    }
    let fatal = read_with(reader("trade", &[]), &fixture("bad/unknown_column.csv")).unwrap_err();
    assert_eq!(
        fatal.findings()[0].remedy.as_deref(),
        Some("did you mean value?")
    );
    assert_eq!(fatal.findings()[1].code, "missing_column");
}

#[test]
fn wrong_rows_are_rejected_with_line_column_and_remedy() {
    for (kind, name, expected) in [
        (
            "trade",
            "wrong_period.csv",
            vec![("wrong_period", 3, "period")],
        ),
        (
            "trade",
            "text_in_number.csv",
            vec![("not_a_number", 3, "value"), ("not_a_number", 4, "value")],
        ),
        (
            "trade",
            "unknown_currency.csv",
            vec![("unknown_currency", 2, "currency")],
        ),
        (
            "price_index",
            "negative_index.csv",
            vec![("not_positive", 3, "value")],
        ),
    ] {
        let intake = read_with(reader(kind, &[]), &fixture(&format!("bad/{name}"))).unwrap();
        let found: Vec<_> = intake
            .rejects
            .iter()
            .map(|r| {
                let place = &r.finding.place;
                let column = place.column.as_deref().unwrap();
                (r.finding.code.as_str(), place.line.unwrap(), column)
            })
            .collect();
        assert_eq!(found, expected, "{name}");
        assert!(
            intake
                .rejects
                .iter()
                .all(|r| !r.row.is_empty() && r.finding.expected.is_some())
        );
    }
    let intake = read_with(reader("trade", &[]), &fixture("bad/unknown_currency.csv")).unwrap();
    let finding = only_reject(&intake);
    assert!(finding.expected.as_deref().unwrap().contains("USD"));
    assert!(
        finding
            .remedy
            .as_deref()
            .unwrap()
            .contains("PUT /v1/currencies/UDS")
    );
}

#[test]
fn a_key_with_two_values_names_both_lines() {
    let intake = read_with(reader("trade", &[]), &fixture("bad/duplicate_key.csv")).unwrap();
    let (_, duplicates) = Fragment::settle(&intake.pieces);
    for (line, other) in [("2", "4: 1204.6"), ("4", "2: 1204.5")] {
        let found = duplicates.iter().find(|d| d.line.to_string() == line);
        let reject = Reject::duplicate(&intake.pieces[0].key, found.unwrap()).finding;
        assert_eq!(reject.code, "duplicate_key");
        assert!(reject.message.contains("lines 2 and 4"));
        assert!(reject.found.unwrap().ends_with(&format!("on line {line}")));
        let (at, value) = other.split_once(": ").unwrap();
        let expected = format!("what line {at} says: {value}");
        assert_eq!(reject.expected, Some(expected));
    }
}

#[test]
fn faults_are_told_as_soon_as_they_are_known() {
    let mut early = reader("trade", &[]);
    early.push(b"area,measure,cur").unwrap();
    let fatal = early.push(b"rency,period,vlaue\nXAA,").unwrap_err();
    assert_eq!(fatal.findings()[0].code, "unknown_column");
    assert_eq!(early.push(b"more"), Err(fatal.clone()));
    assert_eq!(early.finish(), Err(fatal));
}

#[test]
fn every_prefix_of_a_gzip_stream_is_truncated() {
    let whole = gzip(&fixture("trade.csv"));
    for n in 1..whole.len() {
        let fatal = read_with(reader("trade", &[]), &whole[..n]).unwrap_err();
        let code = fatal.findings()[0].code.as_str();
        // One byte alone is not yet gzip, and a control character is no header.
        assert_eq!(
            code,
            if n == 1 {
                "no_header"
            } else {
                "truncated_gzip"
            },
            "{n}"
        );
    }
    let mut spoilt = whole.clone();
    let crc = whole.len() - 6;
    spoilt[crc] ^= 1;
    assert!(read_with(reader("trade", &[]), &spoilt).is_err());
    let mut behind = whole;
    behind.extend_from_slice(b"area,measure");
    assert!(read_with(reader("trade", &[]), &behind).is_err());
}

#[test]
fn gzip_members_follow_one_another_and_bombs_are_stopped() {
    let text = fixture("trade.csv");
    let (a, b) = text.split_at(100);
    let intake = read_with(reader("trade", &[]), &[gzip(a), gzip(b)].concat()).unwrap();
    let plain = read_with(reader("trade", &[]), &text).unwrap();
    assert_eq!(shown(&intake.pieces), shown(&plain.pieces));
    assert_eq!(intake.understood.compression, "gzip");

    let header = b"area,measure,currency,period,value\n";
    let bomb = gzip(&[header.to_vec(), vec![b'\n'; 40 << 20]].concat());
    let fatal = read_with(reader("trade", &[]), &bomb).unwrap_err();
    assert!(matches!(&fatal, Fatal::TooLarge(f) if f[0].code == "compression_ratio"));

    let settings = Settings::parse("trade", &[]).unwrap();
    let limits = Limits {
        max_decoded_bytes: 200,
        ..Limits::default()
    };
    let small = Reader::new(settings, context(), limits, false).unwrap();
    let fatal = read_with(small, &gzip(&text)).unwrap_err();
    assert!(matches!(&fatal, Fatal::TooLarge(f) if f[0].code == "too_large"));
}

#[test]
fn a_body_declared_gzip_must_be_gzip() {
    let settings = || Settings::parse("trade", &[]).unwrap();
    let declared = || Reader::new(settings(), context(), Limits::default(), true).unwrap();
    let text = fixture("trade.csv");
    assert!(read_with(declared(), &gzip(&text)).is_ok());
    let fatal = read_with(declared(), &text).unwrap_err();
    assert_eq!(fatal.findings()[0].code, "not_gzip");
}
