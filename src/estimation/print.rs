//! What text and LaTeX have in common: numbers, stars, the order of things.

use super::report::{Cell, EstimateTest, EstimatedCoefficient, Report};

/// A number with four decimals, or with an exponent where these would say nothing.
pub(super) fn number(value: Option<f64>) -> String {
    match value {
        None => "–".to_owned(),
        Some(0.0) => "0".to_owned(),
        Some(v) if (0.001..100_000.0).contains(&v.abs()) => format!("{v:.4}"),
        Some(v) => format!("{v:.4e}"),
    }
}

/// A p-value.
pub(super) fn p_value(value: Option<f64>) -> String {
    match value {
        None => "–".to_owned(),
        Some(p) if p < 0.0001 => "<0.0001".to_owned(),
        Some(p) => format!("{p:.4}"),
    }
}

/// Stars of significance.
pub(super) fn stars(p: Option<f64>) -> &'static str {
    match p {
        Some(p) if p < 0.01 => "***",
        Some(p) if p < 0.05 => "**",
        Some(p) if p < 0.10 => "*",
        _ => "",
    }
}

pub(super) const STARS: &str = "* p < 0.1, ** p < 0.05, *** p < 0.01";

/// A cell of a table.
pub(super) fn cell(cell: &Cell) -> String {
    match cell {
        Cell::Number(v) if v.fract() == 0.0 && v.abs() < 1e9 => format!("{v}"),
        Cell::Number(v) => number(Some(*v)),
        Cell::Text(text) => text.clone(),
        Cell::Missing(_) => "–".to_owned(),
    }
}

/// Interval of a coefficient.
pub(super) fn interval(coefficient: &EstimatedCoefficient) -> String {
    match (coefficient.low, coefficient.high) {
        (Some(low), Some(high)) => format!("{} to {}", number(Some(low)), number(Some(high))),
        _ => "–".to_owned(),
    }
}

/// Critical values of a test, level by level.
pub(super) fn critical(test: &EstimateTest) -> Option<String> {
    if test.critical_values.is_empty() {
        return None;
    }
    let one = |v: &super::report::CriticalValue| {
        let bound = v
            .bound
            .as_deref()
            .map_or(String::new(), |b| format!(" {b}"));
        format!("{} %{bound}: {}", 100.0 * v.level, number(v.value))
    };
    let values: Vec<String> = test.critical_values.iter().map(one).collect();
    Some(format!("Critical values {}", values.join(", ")))
}

/// Head of the column of intervals.
pub(super) fn interval_head(report: &Report) -> String {
    format!("{} % interval", 100.0 * report.level)
}
