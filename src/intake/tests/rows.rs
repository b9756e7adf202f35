//! What one row says, and why one is rejected.

use super::*;

fn trade_row(row: &str) -> Result<Piece, String> {
    let header = "area,measure,currency,own_currency,adjustment,frequency,flow,prices,price_reference,\
                  unit_multiplier,period,value,status";
    let mut intake = read("trade", &[], &format!("{header}\n{row}\n")).unwrap();
    match intake.rejects.pop() {
        Some(reject) => {
            assert!(reject.finding.remedy.is_some(), "{reject:?}");
            Err(reject.finding.code)
        }
        None => Ok(intake.pieces.remove(0)),
    }
}

#[test]
fn are_rejected_with_a_remedy_that_fits() {
    for (measure, multiplier, value, remedy) in [
        ("exports", "", "\u{2212}5", "a hyphen for minus"),
        ("exports", "", "0x10", "the digits 0 to 9"),
        ("exports", "", "\u{661}\u{662}", "the digits 0 to 9"),
        ("exports", "", "1 000", "nothing between thousands"),
        ("exports", "", "n/a", "leave the cell empty"),
        ("exports", "12", "1e300", "the unit_multiplier of 12"),
        ("exports", "", "1e309", "correct the value"),
        ("export_price", "", "1", "kind=price_index"),
        ("export", "", "1", "did you mean exports"),
        ("zzzzzzzzz", "", "1", "one of those expected"),
    ] {
        let text = format!(
            "area,measure,currency,unit_multiplier,period,value\nXAA,{measure},XAD,{multiplier},2019,{value}\n"
        );
        let intake = read("trade", &[], &text).unwrap();
        let found = only_reject(&intake).remedy.as_deref().unwrap();
        assert!(found.contains(remedy), "{measure} {value}: {found}");
    }
}

#[test]
fn say_key_and_unit() {
    for (row, key, unit) in [
        (
            "XAA,exports,XAD,,,,,,,,2019-Q1,1,",
            "Q.XAA.exports",
            "XAD, flow, current prices",
        ),
        (
            "XAA,exports,USD,,N,,annual_rate,,,,2019-01,1,",
            "M.XAA.exports...USD",
            "USD, flow at annual rate, current prices",
        ),
        (
            "XAB,imports,XBD,XBD,S,,year_to_date,,,,2019-S1,1,",
            "S.XAB.imports.....S",
            "XBD, year-to-date flow, current prices, seasonally adjusted by source",
        ),
        (
            "XAC,imports,XCD,,W,,,,,,2019,1,",
            "A.XAC.imports...XCD..W",
            "XCD, flow, current prices",
        ),
        (
            "XAA,exports_real,XAD,,,,,chained,2015-Q1,,2019-Q1,1,",
            "Q.XAA.exports_real",
            "XAD, flow, chained volumes in prices of 2015-Q1",
        ),
        (
            "XAA,exports_real,XAD,,,,,constant,2015-A1,,2019-Q1,1,",
            "Q.XAA.exports_real",
            "XAD, flow, constant prices of 2015",
        ),
        (
            "XAA,exports_real,XAD,,,,,previous_year,,,2019-Q1,1,",
            "Q.XAA.exports_real",
            "XAD, flow, prices of the previous year",
        ),
        (
            "XAA,exports,XAD,,,M,,,,,2019-01-31,1,",
            "M.XAA.exports",
            "XAD, flow, current prices",
        ),
        (
            "XAA,exports,XAD,,,,,,,,2019-01-31,1,",
            "D.XAA.exports",
            "XAD, flow, current prices",
        ),
        (" XAA , exports,\"XAD\",,,,,,,, \"2019-Q1\", 1 ,", "", ""),
    ] {
        // A quote after a blank is text, so that the last row is no period.
        let found = trade_row(row);
        if key.is_empty() {
            assert_eq!(found, Err("wrong_period".to_owned()));
        } else {
            let piece = found.unwrap();
            assert_eq!(piece.key.to_string(), key);
            assert_eq!(piece.unit.to_string(), unit);
        }
    }
}

#[test]
fn are_rejected_for_what_is_wrong() {
    for (row, code) in [
        ("XAA,exports,XAD,,,,,,,,2019-Q1,1", "cell_count"),
        (",exports,XAD,,,,,,,,2019-Q1,1,", "empty_cell"),
        ("X A,exports,XAD,,,,,,,,2019-Q1,1,", "not_a_code"),
        ("XAA,export,XAD,,,,,,,,2019-Q1,1,", "unknown_measure"),
        ("XAA,exports,usd,,,,,,,,2019-Q1,1,", "unknown_currency"),
        ("XAA,exports,XZZ,,,,,,,,2019-Q1,1,", "unknown_currency"),
        ("XAA,exports,XAD,,,X,,,,,2019-Q1,1,", "unknown_word"),
        (
            "XAA,exports,XAD,,,,,constant,2015,,2019-Q1,1,",
            "wrong_prices",
        ),
        ("XAA,exports_real,XAD,,,,,,,,2019-Q1,1,", "wrong_prices"),
        (
            "XAA,exports_real,XAD,,,,,current,,,2019-Q1,1,",
            "wrong_prices",
        ),
        ("XAA,exports,XAD,,,,,,2015,,2019-Q1,1,", "not_applicable"),
        (
            "XAA,exports_real,XAD,,,,,chained,15,,2019-Q1,1,",
            "wrong_period",
        ),
        (
            "XAA,exports,XAD,,,,,,,million,2019-Q1,1,",
            "wrong_multiplier",
        ),
        ("XAA,exports,XAD,,,,,,,,Q1 2019,1,", "wrong_period"),
        ("XAA,exports,XAD,,,M,,,,,2019-Q1,1,", "wrong_period"),
        ("XAA,exports,XAD,,,,,,,,1499,1,", "wrong_period"),
        ("XAA,exports,XAD,,,,,,,,2201-01-01,1,", "wrong_period"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,-1,", "negative_value"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,NA,", "not_a_number"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,inf,", "not_a_number"),
        ("XAA,exports,XAD,,,,,,,9,2019-Q1,1e299,", ""),
        ("XAA,exports,XAD,,,,,,,9,2019-Q1,1e303,", "out_of_range"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,1,Z", "wrong_status"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,1,-", "wrong_status"),
        (
            "XAA,exports,XAD,,,,,,,,2019-Q1,1,M",
            "value_with_missing_status",
        ),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,,P", "status_without_value"),
        ("XAA,exports,XAD,,,,,,,,2019-Q1,\"1\"2,", "stray_quote"),
    ] {
        assert_eq!(trade_row(row).err().unwrap_or_default(), code, "{row}");
    }
}

#[test]
fn of_rates_say_which_money_is_priced() {
    let rate = |row: &str| {
        let header = "area,currency,own_currency,quotation,period,value";
        let mut intake = read("exchange_rate", &[], &format!("{header}\n{row}\n")).unwrap();
        match intake.rejects.pop() {
            Some(reject) => Err(reject.finding.code),
            None => Ok(intake.pieces.remove(0)),
        }
    };
    let direct = rate("XAA,USD,,,2019-01,2").unwrap();
    assert_eq!(direct.key.to_string(), "M.XAA.exchange_rate...USD");
    assert_eq!(direct.unit.to_string(), "XAD per USD");
    let indirect = rate("XAB,USD,XBD,indirect,2019-01,2").unwrap();
    assert_eq!(indirect.key.to_string(), "M.XAB.exchange_rate...USD");
    assert_eq!(indirect.unit.to_string(), "USD per XBD");
    assert_eq!(rate("XAB,USD,,,2019-01,2"), Err("own_money_needed".into()));
    assert_eq!(rate("XAA,XAD,,,2019-01,2"), Err("same_currency".into()));
    assert_eq!(rate("XAA,USD,,,2019-01,0"), Err("not_positive".into()));
}

#[test]
fn of_indices_say_whose_prices() {
    let index = |row: &str| {
        let header = "area,measure,currency,reference,reference_value,period,value";
        let mut intake = read("price_index", &[], &format!("{header}\n{row}\n")).unwrap();
        match intake.rejects.pop() {
            Some(reject) => Err(reject.finding.code),
            None => {
                let piece = intake.pieces.remove(0);
                Ok((piece.key.to_string(), piece.unit.quantity))
            }
        }
    };
    let money = |q: &Quantity| {
        let Quantity::Index {
            currency,
            reference_value,
            ..
        } = q
        else {
            panic!("{q:?} is no index")
        };
        (currency.map(|c| c.to_string()), *reference_value)
    };
    let (key, unit) = index("XAA,export_price,,2015,,2019-Q1,104").unwrap();
    assert_eq!(key, "Q.XAA.export_price");
    assert_eq!(money(&unit), (Some("XAD".to_owned()), 100.0));
    let (key, unit) = index("XAA,export_price_level,USD,2011,1,2019,0.4").unwrap();
    assert_eq!(key, "A.XAA.export_price_level...USD");
    assert_eq!(money(&unit), (Some("USD".to_owned()), 1.0));
    let (key, unit) = index("XAB,import_price,,,,2019-Q1,104").unwrap();
    assert_eq!(key, "Q.XAB.import_price");
    assert_eq!(money(&unit), (None, 100.0));
    let (_, unit) = index("XAA,industrial_production,,2012,,2019-01,104").unwrap();
    assert_eq!(money(&unit).0, None);
    assert_eq!(
        index("XAA,industrial_production,USD,2012,,2019-01,104"),
        Err("not_applicable".into())
    );
    assert_eq!(
        index("XAA,export_price,,2015,0,2019-Q1,104"),
        Err("not_positive".into())
    );
}

#[test]
fn adjustments_are_codes_of_the_list() {
    let row = |code: &str| trade_row(&format!("XAA,exports,XAD,,{code},,,,,,2019-Q1,1,"));
    for (code, adjusted) in [("N", false), ("S", true), ("W", false), ("Y", true)] {
        assert_eq!(!row(code).unwrap().unit.adjustment.is_raw(), adjusted);
    }
    // What such codes mean elsewhere, trends for one, is not known here.
    for code in ["T", "s", "SA", "NSA"] {
        assert_eq!(row(code).unwrap_err(), "unknown_word", "{code}");
    }
}

#[test]
fn an_index_measures_what_its_name_says() {
    for (measure, kind, expected) in [
        ("export_price", "unit_value", None),
        ("export_unit_value", "price", None),
        ("export_volume", "volume", None),
        ("export_price", "volume", Some("not_applicable")),
        ("export_price", "value", Some("unknown_word")),
        ("export_volume", "price", Some("not_applicable")),
        (
            "industrial_production",
            "unit_value",
            Some("not_applicable"),
        ),
    ] {
        let text = format!("area,measure,index_kind,period,value\nXAA,{measure},{kind},2014,98\n");
        let intake = read("price_index", &[], &text).unwrap();
        let code = intake.rejects.first().map(|r| r.finding.code.as_str());
        assert_eq!(code, expected, "{measure} {kind}");
    }
}

#[test]
fn of_one_series_and_two_units_become_two_pieces() {
    let text = "area,measure,reference,period,value\nXAA,export_price,2010,2014,98\n\
                XAA,export_price,2015,2015,100\nXAA,export_price,2010,2015,102\n";
    let intake = read("price_index", &[], text).unwrap();
    assert_eq!(intake.pieces.len(), 2);
    assert_eq!(intake.pieces[0].lines, [2, 4]);
    // Cells that differ and mean one series and unit share a piece.
    let text = "area,measure,adjustment,unit_multiplier,currency,period,value\n\
                XAA,exports,,3,XAD,2014,98\nXAA,exports,N,6,XAD,2015,0.1\n";
    let intake = read("trade", &[], text).unwrap();
    assert_eq!(intake.pieces.len(), 1);
    assert_eq!(intake.pieces[0].values, [98_000.0, 100_000.0]);
}
