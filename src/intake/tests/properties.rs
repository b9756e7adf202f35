//! Files written any way read back the same; arbitrary bytes never panic.

use super::*;

#[derive(Clone, Debug)]
struct Row {
    cells: [String; 6],
    value: Option<f64>,
}

const NAMES: [&str; 7] = [
    "area", "measure", "partner", "currency", "product", "period", "value",
];

fn any_row() -> impl Strategy<Value = Row> {
    let pick = |words: &'static [&'static str]| proptest::sample::select(words);
    (
        pick(&["XAA", "XAB"]),
        pick(&["exports", "imports_goods"]),
        pick(&["", "XAC", "X-1_a"]),
        pick(&["XAD", "USD"]),
        pick(&["", "10"]),
        pick(&["2019", "2019-Q3", "2020-07", "2020-W53", "2020-02-29"]),
        proptest::option::of(0.0..1e12_f64),
    )
        .prop_map(|(a, b, c, d, e, f, value)| Row {
            cells: [a, b, c, d, e, f].map(str::to_owned),
            value,
        })
}

/// The rows as a file: columns in this order, blank lines where asked, quotes everywhere or
/// nowhere; and the physical line of each row.
fn write(
    rows: &[Row],
    order: &[usize],
    delimiter: char,
    end: &str,
    blank: &[bool],
    quoted: bool,
) -> (String, Vec<u32>) {
    let line = |cells: Vec<String>| {
        let cells: Vec<String> = order
            .iter()
            .map(|i| {
                if quoted {
                    format!("\"{}\"", cells[*i])
                } else {
                    cells[*i].clone()
                }
            })
            .collect();
        cells.join(&delimiter.to_string())
    };
    let mut text = line(NAMES.map(str::to_owned).to_vec()) + end;
    let (mut at, mut lines) = (1, Vec::new());
    for (i, row) in rows.iter().enumerate() {
        if blank[i % blank.len()] {
            text += end;
            at += 1;
        }
        at += 1;
        lines.push(at);
        let mut cells = row.cells.to_vec();
        cells.push(row.value.map_or(String::new(), |v| v.to_string()));
        text += &line(cells);
        text += end;
    }
    (text, lines)
}

proptest! {
    #[test]
    fn rows_read_back_however_they_are_written(
        rows in proptest::collection::vec(any_row(), 1..30),
        order in Just((0..7).collect::<Vec<usize>>()).prop_shuffle(),
        delimiter in proptest::sample::select(vec![',', ';', '\t']),
        crlf: bool,
        blank in proptest::collection::vec(any::<bool>(), 1..4),
        quoted: bool,
        compressed: bool,
        cuts in proptest::collection::vec(1..40_usize, 1..6),
    ) {
        let end = if crlf { "\r\n" } else { "\n" };
        let (text, lines) = write(&rows, &order, delimiter, end, &blank, quoted);
        let mut expected: BTreeMap<String, Vec<(i32, u64, u32)>> = BTreeMap::new();
        for (row, line) in rows.iter().zip(lines) {
            let [area, measure, partner, currency, product, period] = &row.cells;
            let period: crate::time::Period = period.parse().unwrap();
            let own = area == "XAA" && currency == "XAD";
            let money = if own { "" } else { currency.as_str() };
            let f = period.frequency();
            let key = format!("{f}.{area}.{measure}.{partner}.{product}.{money}");
            let key = key.trim_end_matches('.').to_owned();
            let bits = row.value.unwrap_or(f64::NAN).to_bits();
            expected.entry(key).or_default().push((period.ordinal(), bits, line));
        }

        let bytes = if compressed { gzip(text.as_bytes()) } else { text.into_bytes() };
        let mut reader = reader("trade", &[]);
        let mut pieces = Vec::new();
        let (mut rest, mut cuts) = (bytes.as_slice(), cuts.iter().cycle());
        while !rest.is_empty() {
            let n = rest.len().min(*cuts.next().unwrap());
            reader.push(&rest[..n]).unwrap();
            rest = &rest[n..];
            if n % 7 == 0 {
                pieces.extend(reader.take_pieces());
                prop_assert_eq!(reader.pending_bytes(), 0);
            }
        }
        let intake = reader.finish().unwrap();
        prop_assert_eq!(&intake.rejects, &[]);
        prop_assert_eq!(intake.understood.rows_accepted, rows.len() as u64);
        prop_assert_eq!(intake.understood.series, expected.len() as u64);
        pieces.extend(intake.pieces);
        let mut found: BTreeMap<String, Vec<(i32, u64, u32)>> = BTreeMap::new();
        for p in pieces {
            for i in 0..p.lines.len() {
                prop_assert_eq!(p.values[i].is_nan(), p.status[i] == Status::Missing);
                let row = (p.periods[i], p.values[i].to_bits(), p.lines[i]);
                found.entry(p.key.to_string()).or_default().push(row);
            }
        }
        prop_assert_eq!(found, expected);
    }

    /// Whatever is sent, the reader answers, and answers the same however it is cut.
    #[test]
    fn arbitrary_bytes_never_panic(
        start in proptest::sample::select(vec![
            &b""[..],
            b"area,measure,currency,period,value,status\n",
            b"area,measure,currency,period,value,status\nXAA,exports,XAD,2019-Q1,1,A\n",
            b"\x1f\x8b\x08\0\0\0\0\0\0\xff",
        ]),
        tail in proptest::collection::vec(
            prop_oneof![any::<u8>(), proptest::sample::select(b",;\t\"\n\r.-eQ0129A\xef\xbb".to_vec())],
            0..200,
        ),
        cut in 1..50_usize,
    ) {
        let bytes = [start, tail.as_slice()].concat();
        let whole = read_with(reader("trade", &[]), &bytes);
        let mut cut_up = reader("trade", &[]);
        let pushed = bytes.chunks(cut).try_for_each(|chunk| cut_up.push(chunk));
        let pieces = pushed.and_then(|()| cut_up.finish());
        let lines = bytes.iter().filter(|b| **b == b'\n').count() as u64 + 1;
        match (whole, pieces) {
            (Ok(a), Ok(b)) => {
                prop_assert_eq!(shown(&a.pieces), shown(&b.pieces));
                prop_assert_eq!(&a.rejects, &b.rejects);
                for reject in &a.rejects {
                    prop_assert!((1..=lines).contains(&reject.finding.place.line.unwrap()));
                }
                prop_assert_eq!(a.understood, b.understood);
            }
            // A gzip stream may break before its text does.
            (Err(a), Err(b)) => prop_assert!(start.starts_with(&[0x1f]) || a == b, "{a:?} {b:?}"),
            (a, b) => prop_assert!(false, "{a:?} {b:?}"),
        }
    }
}
