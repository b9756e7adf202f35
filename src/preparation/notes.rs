//! What an evaluation is worth telling: coverage, link factors, periods left off. Thresholds are
//! those of METHODS section 6 (common practice).

use crate::finding::{Finding, counted};
use crate::series::algebra::{Aggregated, Effective, Incomplete, Linked};
use crate::series::{IndexKind, Quantity, RateTiming, Series, Timing};
use crate::time::Frequency;

/// Factor and spread of a link; a spread above 1 % is told, above 5 % an error.
pub(super) fn of_link(linked: &Linked) -> Vec<Finding> {
    let (first, last) = linked.overlap;
    let spread = format!("{:.2} %", 100.0 * linked.spread);
    let mut notes = vec![
        Finding::notice(
            "link_factor",
            format!(
                "linked on {}, {first} to {last}: factor {}, spread over the overlap {spread}",
                counted(linked.periods, "period"),
                linked.factor
            ),
        )
        .found(linked.factor.to_string()),
    ];
    if linked.spread > 0.01 {
        let message = format!("the link factor varies by {spread} over the overlap");
        let finding = if linked.spread > 0.05 {
            Finding::error("link_spread", message)
        } else {
            Finding::notice("link_spread", message)
        };
        notes.push(
            finding
                .found(spread)
                .expected("at most 1 %")
                .remedy("Link on a stated period, or look into how the two parts differ."),
        );
    }
    notes
}

/// Amounts without a price, unit values as deflators, and one side alone adjusted for season.
pub(super) fn of_deflating(nominal: &Series, index: &Series, result: &Series) -> Vec<Finding> {
    let mut notes = unmatched("no_matching_price", "price", nominal, result);
    if let Quantity::Index {
        kind: IndexKind::UnitValue,
        ..
    } = index.unit.quantity
    {
        notes.push(Finding::notice(
            "unit_value_deflator",
            "deflated by unit values, which move with the mix of goods as well as with prices",
        ));
    }
    if nominal.frequency() != Frequency::Annual
        && nominal.unit.adjustment.is_raw() != index.unit.adjustment.is_raw()
    {
        notes.push(
            Finding::notice(
                "adjustment_differs",
                "of amount and prices one is adjusted for season, the other is not",
            )
            .found(format!("{}; {}", nominal.unit, index.unit))
            .remedy("Deflate unadjusted by unadjusted, then adjust, where both are held."),
        );
    }
    notes
}

/// Amounts without a rate, and rates of another timing than the amount's.
pub(super) fn of_converting(
    amount: &Series,
    rates: &Series,
    result: &Series,
    fixed: bool,
) -> Vec<Finding> {
    let mut notes = unmatched("no_matching_rate", "exchange rate", amount, result);
    if let Quantity::Rate { rate_timing, .. } = rates.unit.quantity
        && (rate_timing == RateTiming::End) != (amount.unit.timing == Timing::Stock)
        && !fixed
    {
        notes.push(
            Finding::notice(
                "rate_timing",
                "flows take rates averaged over the period, stocks those at its end; here it is the other way",
            )
            .found(format!("{}; {}", amount.unit, rates.unit))
            .remedy("Take the rate of the matching timing where it is held."),
        );
    }
    notes
}

fn unmatched(code: &str, what: &str, amount: &Series, result: &Series) -> Vec<Finding> {
    let present = |series: &Series| series.values.iter().filter(|v| v.is_finite()).count();
    let lost = present(amount) - present(result);
    let first = (0..amount.len())
        .find(|i| amount.values[*i].is_finite() && !result.values[*i].is_finite())
        .and_then(|i| amount.period(i));
    first
        .map(|period| {
            Finding::notice(
                code,
                format!(
                    "missing for want of the {what} of the period: {}",
                    counted(lost, "amount")
                ),
            )
            .at_period(period)
            .found(lost.to_string())
        })
        .into_iter()
        .collect()
}

/// Periods left off, missing, or resting on part of their sub-periods.
pub(super) fn of_aggregating(aggregated: &Aggregated) -> Vec<Finding> {
    [
        (
            "incomplete_periods_dropped",
            "left off",
            &aggregated.dropped,
        ),
        ("incomplete_periods_missing", "missing", &aggregated.missing),
        (
            "partial_periods",
            "resting on part of the sub-periods",
            &aggregated.partial,
        ),
    ]
    .into_iter()
    .filter_map(|(code, what, periods)| {
        let first = periods.first()?;
        Some(
            Finding::notice(
                code,
                format!(
                    "{} {what}: {}",
                    counted(periods.len(), "incomplete period"),
                    shown(periods)
                ),
            )
            .at_period(first.period),
        )
    })
    .collect()
}

fn shown(periods: &[Incomplete]) -> String {
    let mut text = periods
        .iter()
        .take(5)
        .map(|p| format!("{} ({} of {})", p.period, p.held, p.of))
        .collect::<Vec<_>>()
        .join(", ");
    if periods.len() > 5 {
        text.push_str(", …");
    }
    text
}

/// Lowest coverage of the weights (below 80 % is told as such, below 60 % an error), partners without
/// a weight (most of them: an error), and periods beyond a break.
pub(super) fn of_weights(effective: &Effective, partners: usize) -> Vec<Finding> {
    let coverage = &effective.coverage;
    let Some(lowest) = coverage.iter().min_by(|a, b| a.share.total_cmp(&b.share)) else {
        return Vec::new();
    };
    let mean = coverage.iter().map(|c| c.share).sum::<f64>() / coverage.len() as f64;
    let share = format!("{:.1} %", 100.0 * lowest.share);
    let message = format!(
        "weights of {}: on average {:.1} % covered, least in {} with {share} ({})",
        counted(partners, "partner"),
        100.0 * mean,
        lowest.period,
        counted(lowest.partners, "partner")
    );
    let finding = if lowest.share < 0.6 {
        Finding::error("weight_coverage", message)
    } else {
        Finding::notice("weight_coverage", message)
    };
    let finding = finding.at_period(lowest.period).found(share);
    let mut notes = vec![if lowest.share < 0.8 {
        finding
            .expected("at least 80 %")
            .remedy("Send the missing incomes, prices or weights, or name other partners.")
    } else {
        finding
    }];
    // The first of the periods that lack most.
    let fewest = coverage.iter().rev().max_by_key(|c| c.unweighted);
    if let Some(fewest) = fewest.filter(|c| c.unweighted > 0) {
        let message = format!(
            "without a weight, which coverage does not show: in {} {} of {}",
            fewest.period,
            fewest.unweighted,
            counted(partners, "partner")
        );
        let finding = if 2 * fewest.unweighted > partners {
            Finding::error("weights_missing", message)
        } else {
            Finding::notice("weights_missing", message)
        };
        notes.push(
            finding
                .at_period(fewest.period)
                .found(fewest.unweighted.to_string())
                .remedy("Send the missing weights, zero for partners without trade."),
        );
    }
    if let [first, rest @ ..] = &effective.left_off[..] {
        let last = rest.last().unwrap_or(first);
        notes.push(
            Finding::notice(
                "periods_left_off",
                format!(
                    "left off for want of weights or of values in between: {}, {first} to {last}",
                    counted(effective.left_off.len(), "period")
                ),
            )
            .at_period(first)
            .found(effective.left_off.len().to_string()),
        );
    }
    notes
}
