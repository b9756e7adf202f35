//! Whole files through the reader.

mod files;
mod lines;
mod properties;
mod rows;
mod settings;

use std::collections::{BTreeMap, BTreeSet};
use std::io::Write as _;

use flate2::Compression;
use flate2::write::GzEncoder;
use proptest::prelude::*;

use super::*;
use crate::finding::Severity;
use crate::series::{CurrencyCode, Fragment, Piece, Quantity, Status};

fn context() -> Context {
    let money = |text| CurrencyCode::parse(text).unwrap();
    Context {
        declared: ["XAD", "XBD", "XCD"].map(money).into(),
        own_money: [("XAA".to_owned(), money("XAD"))].into(),
    }
}

fn reader(kind: &str, parameters: &[(&str, &str)]) -> Reader {
    let owned: Vec<(String, String)> = parameters
        .iter()
        .map(|(n, t)| ((*n).to_owned(), (*t).to_owned()))
        .collect();
    let settings = Settings::parse(kind, &owned).unwrap();
    Reader::new(settings, context(), Limits::default(), false).unwrap()
}

fn read_with(mut reader: Reader, bytes: &[u8]) -> Result<Intake, Fatal> {
    reader.push(bytes)?;
    reader.finish()
}

fn read(kind: &str, parameters: &[(&str, &str)], text: &str) -> Result<Intake, Fatal> {
    read_with(reader(kind, parameters), text.as_bytes())
}

fn fixture(name: &str) -> Vec<u8> {
    let path = format!("{}/fixtures/uploads/{name}", env!("CARGO_MANIFEST_DIR"));
    std::fs::read(path).unwrap()
}

fn gzip(bytes: &[u8]) -> Vec<u8> {
    let mut encoder = GzEncoder::new(Vec::new(), Compression::default());
    encoder.write_all(bytes).unwrap();
    encoder.finish().unwrap()
}

/// Key and unit in words, periods, value bits, status and lines of each piece.
type Shown = (String, String, Vec<i32>, Vec<u64>, Vec<u8>, Vec<u32>);

fn shown(pieces: &[Piece]) -> BTreeSet<Shown> {
    let bits = |p: &Piece| p.values.iter().map(|v| v.to_bits()).collect();
    pieces
        .iter()
        .map(|p| {
            let (key, unit) = (p.key.to_string(), p.unit.to_string());
            (
                key,
                unit,
                p.periods.clone(),
                bits(p),
                p.status.iter().map(|s| s.byte()).collect(),
                p.lines.clone(),
            )
        })
        .collect()
}

fn only_reject(intake: &Intake) -> &crate::finding::Finding {
    assert_eq!(intake.rejects.len(), 1, "{:?}", intake.rejects);
    &intake.rejects[0].finding
}
