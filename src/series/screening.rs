//! Screening of what an upload says against what is stored.

use super::vintage::{State, Statement};
use crate::finding::{Finding, counted};
use crate::time::Period;

/// Powers of ten that a wrong unit multiplier leaves behind (common practice, no source).
const SUSPICIOUS_POWERS: [i32; 4] = [-6, -3, 3, 6];

/// How far, in log10, a ratio may lie from such a power and still count as near: a factor of 1.41
/// either way, wider than a year's growth and narrower than anything that is not a unit error.
const TOLERANCE: f64 = 0.15;

/// How many observations on either side of a join give the level there.
const NEIGHBOURS: usize = 4;

/// Whether a statement stands near a thousand or a million times what is stored, or its inverse.
///
/// Compared period by period where both have values, else by the median level on either side of the
/// join. The finding has code `level_ratio` and severity error, which holds the upload.
#[must_use]
pub fn level_ratio(base: &State, statement: &Statement) -> Option<Finding> {
    let mut suspicious: Option<(Period, f64, f64, f64)> = None;
    let mut count = 0;
    let mut after: Vec<f64> = Vec::new();
    let mut before: Vec<f64> = Vec::new();
    let base_end = base.start.ordinal() + i32::try_from(base.values.len()).ok()?;
    for (i, value) in statement.values.iter().enumerate() {
        let ordinal = statement.start.ordinal() + i32::try_from(i).ok()?;
        if !usable(*value) {
            continue;
        }
        if ordinal >= base_end {
            after.push(*value);
        } else if ordinal < base.start.ordinal() {
            before.push(*value);
        } else {
            let stored = base.values[usize::try_from(ordinal - base.start.ordinal()).ok()?];
            if usable(stored) && near_power(value / stored) {
                count += 1;
                let period = statement.start.plus(i32::try_from(i).ok()?)?;
                suspicious.get_or_insert((period, *value, stored, value / stored));
            }
        }
    }
    if suspicious.is_none() {
        let level = |values: &mut dyn Iterator<Item = f64>| {
            median(values.filter(|v| usable(*v)).take(NEIGHBOURS).collect())
        };
        let newest = level(&mut base.values.iter().rev().copied());
        let oldest = level(&mut base.values.iter().copied());
        let joins = [
            (level(&mut after.iter().copied()), newest, base_end),
            (
                level(&mut before.iter().rev().copied()),
                oldest,
                base.start.ordinal() - 1,
            ),
        ];
        for (stated, stored, ordinal) in joins {
            if let (Some(stated), Some(stored)) = (stated, stored)
                && near_power(stated / stored)
            {
                count += 1;
                let period = Period::from_ordinal(base.start.frequency(), ordinal)?;
                suspicious.get_or_insert((period, stated, stored, stated / stored));
            }
        }
    }
    let (period, value, stored, ratio) = suspicious?;
    let times = if count > 1 {
        format!(" and in {}", counted(count - 1, "more place"))
    } else {
        String::new()
    };
    Some(
        Finding::error(
            "level_ratio",
            format!(
                "the level is {} times what is stored{times}: is the unit multiplier right?",
                shown(ratio)
            ),
        )
        .at_period(period)
        .found(format!("{value}"))
        .expected(format!("about {stored}"))
        .remedy(
            "withdraw this upload and send it again with the right unit_multiplier, or accept it if \
             the level is right",
        ),
    )
}

/// Four digits of a ratio, as a power of ten where there would be zeros before them.
fn shown(ratio: f64) -> String {
    let rounded: f64 = format!("{ratio:.3e}").parse().unwrap_or(ratio);
    if rounded.abs() < 1e-4 {
        format!("{rounded:e}")
    } else {
        rounded.to_string()
    }
}

fn usable(value: f64) -> bool {
    value.is_finite() && value != 0.0
}

fn near_power(ratio: f64) -> bool {
    let log = ratio.abs().log10();
    SUSPICIOUS_POWERS
        .iter()
        .any(|p| (log - f64::from(*p)).abs() < TOLERANCE)
}

fn median(mut values: Vec<f64>) -> Option<f64> {
    values.sort_unstable_by(f64::total_cmp);
    let n = values.len();
    match n {
        0 => None,
        n if n % 2 == 1 => Some(values[n / 2]),
        n => Some(f64::midpoint(values[n / 2 - 1], values[n / 2])),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::series::Status;
    use crate::series::provenance::Origin;
    use crate::series::vintage::{Scope, replay};
    use crate::time::Frequency;

    fn statement(year: i32, values: &[f64]) -> Statement {
        Statement {
            start: Period::in_year(Frequency::Annual, year, 1).unwrap(),
            values: values.to_vec(),
            status: vec![Status::Normal; values.len()],
            origins: vec![Origin::Upload { id: 1, line: 2 }; values.len()],
            scope: Scope::Merge,
        }
    }

    #[test]
    fn a_ratio_is_shown_with_the_digits_that_tell() {
        for (ratio, expected) in [
            (1e-6, "1e-6"),
            (1.0234e-6, "1.023e-6"),
            (0.001_002_34, "0.001002"),
            (1000.43, "1000"),
            (-1.5e6, "-1500000"),
        ] {
            assert_eq!(shown(ratio), expected);
        }
    }

    #[test]
    fn finds_a_thousand_and_a_million_and_lets_growth_pass() {
        let base = replay([&statement(2000, &[100.0, 104.0, 109.0])]).unwrap();
        for (year, values, suspicious) in [
            (2002, &[109_300.0, 113_000.0][..], true),
            (2001, &[104.0, 0.109][..], true),
            (2003, &[113_000_000.0, 118_000_000.0][..], true),
            (1998, &[0.092, 0.095][..], true),
            (2002, &[109.3, 113.0][..], false),
            (2003, &[1130.0, 1180.0][..], false),
            (2003, &[240.0, 500.0][..], false),
        ] {
            let finding = level_ratio(&base, &statement(year, values));
            assert_eq!(
                finding.is_some(),
                suspicious,
                "{year} {values:?} {finding:?}"
            );
        }
    }
}
