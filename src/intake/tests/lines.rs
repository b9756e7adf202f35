//! Physical line numbers.

use super::*;

const HEADER: &str = "area,measure,currency,source,period,value";

/// Physical lines of two good rows and of the rejects in between.
fn lines(text: &str) -> (Vec<u32>, Vec<u64>) {
    let intake = read("trade", &[], text).unwrap();
    let good = intake.pieces.iter().flat_map(|p| p.lines.clone());
    let bad = intake.rejects.iter().map(|r| r.finding.place.line.unwrap());
    (good.collect(), bad.collect())
}

#[test]
fn are_physical_whatever_the_line_ends() {
    let rows = [
        "XAA,exports,XAD,,2019-Q1,1",
        "XAA,exports,XAD,,2019-Q9,2",
        "XAA,exports,XAD,,2019-Q3,3",
    ];
    for (end, blank) in [
        ("\n", ""),
        ("\r\n", ""),
        ("\n", "\n"),
        ("\r\n", "\r\n"),
        ("\r\n", "\n"),
    ] {
        for opening in ["", "\u{feff}", "\n", "\r\n\n"] {
            for closing in ["", end] {
                let mut text = opening.to_owned() + HEADER;
                for row in rows {
                    text += end;
                    text += blank;
                    text += row;
                }
                text += closing;
                let step = if blank.is_empty() { 1 } else { 2 };
                let first = 1 + u32::try_from(opening.matches('\n').count()).unwrap();
                let expected = (
                    vec![first + step, first + 3 * step],
                    vec![u64::from(first + 2 * step)],
                );
                assert_eq!(lines(&text), expected, "{text:?}");
            }
        }
    }
}

#[test]
fn count_quoted_line_breaks() {
    let text = format!(
        "{HEADER}\nXAA,exports,XAD,\"A\r\nB\n\",2019-Q1,1\nXAA,exports,XAD,\"A\",2019-Q1,2\nXAA,exports,XAD,,2019-Q2,x\n"
    );
    assert_eq!(lines(&text), (vec![5], vec![2, 6]));
    let intake = read("trade", &[], &text).unwrap();
    assert_eq!(intake.rejects[0].finding.code, "not_a_code");
    assert_eq!(intake.understood.lines, 6);
}

#[test]
fn an_unclosed_quote_is_named_where_it_opens() {
    let text =
        format!("{HEADER}\nXAA,exports,XAD,,2019-Q1,1\nXAA,exports,XAD,\"A,2019-Q1,2\nXAA\n");
    let fatal = read("trade", &[], &text).unwrap_err();
    assert_eq!(fatal.findings()[0].code, "unclosed_quote");
    assert_eq!(fatal.findings()[0].place.line, Some(3));
    let long = text + &"x".repeat(100_000);
    let fatal = read("trade", &[], &long).unwrap_err();
    assert_eq!(fatal.findings()[0].code, "row_too_long");
    assert_eq!(fatal.findings()[0].place.line, Some(3));
}

#[test]
fn bare_carriage_returns_nul_and_utf16_are_refused() {
    for (bytes, code, line) in [
        (
            &b"area,measure,currency,period,value\rXAA,exports,XAD,2019,1\r"[..],
            "bare_carriage_return",
            1,
        ),
        (
            b"area,measure,currency,period,value\nXAA,exports,XAD,2019,1\nXAA,exp\0",
            "nul_byte",
            3,
        ),
        (b"\xff\xfea\0r\0e\0a\0", "invalid_utf8", 1),
        (
            b"area,measure,currency,period,value\nXAA,exports,XAD,2019,1\xe2\x82",
            "invalid_utf8",
            2,
        ),
    ] {
        let fatal = read_with(reader("trade", &[]), bytes).unwrap_err();
        assert_eq!(fatal.findings()[0].code, code);
        assert_eq!(fatal.findings()[0].place.line, Some(line));
    }
    let text = b"area,measure,currency,period,value\nXAA,exports,XAD,2019,1\xe2x";
    let fatal = read_with(reader("trade", &[]), text).unwrap_err();
    assert!(fatal.to_string().contains("byte 57 "), "{fatal}");
}
