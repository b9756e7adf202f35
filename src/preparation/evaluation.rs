//! Evaluation of a document on series: the one place where steps meet the algebra.

use std::collections::{BTreeMap, BTreeSet};

use super::agreement::{disagreement, moneys};
use super::document::Document;
use super::step::{IncomePartner, InputRef, PricePartner, Step};
use super::{fault, notes};
use crate::finding::Finding;
use crate::series::algebra::{
    self, AlgebraError, Partner, Reference, Span, TradePartner, WeightYears,
};
use crate::series::{Series, SeriesKey};

/// A step as it was done.
#[derive(Clone, Debug)]
pub(super) struct Done {
    pub(super) words: String,
    pub(super) series: Series,
}

/// An output with all its steps.
#[derive(Clone, Debug)]
pub(super) struct Evaluated {
    pub(super) key: SeriesKey,
    pub(super) steps: Vec<Done>,
    pub(super) inputs: Vec<InputRef>,
    pub(super) notes: Vec<Finding>,
}

/// Why a step has no result.
enum Halt {
    /// A fault of its own.
    Fault(AlgebraError),
    /// It needs a series whose absence is reported already.
    Reported,
}

impl From<AlgebraError> for Halt {
    fn from(error: AlgebraError) -> Self {
        Self::Fault(error)
    }
}

/// Evaluates all outputs in order. `settle` sees the result of every step before it goes on: the
/// plan replaces numbers by stand-ins there, an evaluation leaves them alone.
pub(super) fn run(
    document: &Document,
    inputs: &BTreeMap<InputRef, Series>,
    settle: impl Fn(Series) -> Series,
) -> Result<Vec<Evaluated>, Vec<Finding>> {
    let mut faults = unknown_inputs(document, inputs);
    let moneys = moneys(inputs);
    let mut made: BTreeMap<SeriesKey, Series> = BTreeMap::new();
    let mut outputs = Vec::new();
    for (key, steps) in document.outputs() {
        let pointer = fault::output_pointer(&key.to_string());
        let mut done: Vec<Done> = Vec::new();
        let mut all_notes = Vec::new();
        let mut halted = false;
        for (i, step) in steps.iter().enumerate() {
            let at = |finding: Finding| finding.at_pointer(format!("{pointer}/{i}")).at_series(key);
            let lookup = |operand: &InputRef| {
                let found = if document.makes(&operand.key) {
                    made.get(&operand.key)
                } else {
                    inputs.get(operand)
                };
                found.ok_or(Halt::Reported)
            };
            let words = step.words();
            match apply(step, done.last().map(|d| &d.series), &lookup) {
                Ok((series, notes)) => {
                    all_notes.extend(notes.into_iter().map(at));
                    done.push(Done {
                        words,
                        series: settle(series),
                    });
                }
                Err(halt) => {
                    if let Halt::Fault(error) = halt {
                        let mut finding = Finding::from(error);
                        finding.message = format!("{words}: {}", finding.message);
                        faults.push(at(finding));
                    }
                    halted = true;
                    break;
                }
            }
        }
        let Some(last) = done.last().filter(|_| !halted) else {
            continue;
        };
        if let Some(finding) = disagreement(key, &last.series, &moneys) {
            faults.push(finding.at_pointer(pointer).at_series(key));
            continue;
        }
        made.insert(key.clone(), last.series.clone());
        let named: BTreeSet<&InputRef> = steps.iter().flat_map(Step::operands).collect();
        outputs.push(Evaluated {
            key: key.clone(),
            steps: done,
            inputs: named.into_iter().cloned().collect(),
            notes: all_notes,
        });
    }
    if faults.is_empty() {
        Ok(outputs)
    } else {
        Err(faults)
    }
}

/// Operands that neither the document makes nor the inputs hold, each where it is named.
fn unknown_inputs(document: &Document, inputs: &BTreeMap<InputRef, Series>) -> Vec<Finding> {
    let mut faults = Vec::new();
    for (key, steps) in document.outputs() {
        for (i, step) in steps.iter().enumerate() {
            for operand in step.operands() {
                let makes = document.makes(&operand.key);
                if makes && operand.segment.is_none() || !makes && inputs.contains_key(operand) {
                    continue;
                }
                let (message, remedy) = if makes {
                    (
                        format!(
                            "{} is an output of this document, which has no segments",
                            operand.key
                        ),
                        "Leave out 'segment'.",
                    )
                } else {
                    (
                        format!("the series {operand} is not known"),
                        "Send it first, or correct the key.",
                    )
                };
                faults.push(
                    Finding::error("unknown_series", message)
                        .at_pointer(format!("{}/{i}", fault::output_pointer(&key.to_string())))
                        .at_series(key)
                        .found(operand.to_string())
                        .remedy(remedy),
                );
            }
        }
    }
    faults
}

type Lookup<'a, 'b> = &'b dyn Fn(&InputRef) -> Result<&'a Series, Halt>;

/// One step: its result and what is worth noting about it.
fn apply(
    step: &Step,
    before: Option<&Series>,
    lookup: Lookup<'_, '_>,
) -> Result<(Series, Vec<Finding>), Halt> {
    // Parsing has seen to it that what needs a series before it has one.
    let current = || before.ok_or(Halt::Reported);
    let plain = |series: Series| Ok((series, Vec::new()));
    match step {
        Step::Take(series) => plain(lookup(series)?.clone()),
        Step::Add(of) => plain(fold(before, of, lookup, algebra::add)?),
        Step::Subtract(of) => plain(fold(before, of, lookup, algebra::subtract)?),
        Step::Multiply(of) => plain(fold(before, of, lookup, algebra::multiply)?),
        Step::Divide(of) => plain(fold(before, of, lookup, algebra::divide)?),
        Step::GeometricMean { of, weights } => {
            let of = of.iter().map(lookup).collect::<Result<Vec<_>, _>>()?;
            plain(algebra::geometric_mean(&of, weights.as_deref())?)
        }
        Step::Link { target, with, over } => {
            let linked = algebra::link(lookup(target)?, lookup(with)?, *over)?;
            let notes = notes::of_link(&linked);
            Ok((linked.series, notes))
        }
        Step::ForeignIncome {
            partners,
            reference,
            reference_value,
            weight_years,
        } => foreign_income(
            partners,
            lookup,
            *weight_years,
            level(*reference, *reference_value),
        ),
        Step::RealExchangeRate {
            home_price,
            foreign_price,
            rate,
            reference,
            reference_value,
        } => plain(algebra::real_exchange_rate(
            lookup(home_price)?,
            lookup(foreign_price)?,
            rate.as_ref().map(lookup).transpose()?,
            level(*reference, *reference_value),
        )?),
        Step::RealEffectiveExchangeRate {
            home_price,
            partners,
            reference,
            reference_value,
            weight_years,
        } => real_effective_exchange_rate(
            lookup(home_price)?,
            partners,
            lookup,
            *weight_years,
            level(*reference, *reference_value),
        ),
        Step::Rebase {
            reference,
            reference_value,
        } => plain(algebra::rebase(current()?, *reference, *reference_value)?),
        Step::Deflate { by, reference } => {
            let (nominal, index) = (current()?, lookup(by)?);
            let series = algebra::deflate(nominal, index, &by.key.to_string(), *reference)?;
            let notes = notes::of_deflating(nominal, index, &series);
            Ok((series, notes))
        }
        Step::Convert { to, rates, at } => {
            let (amount, rates) = (current()?, lookup(rates)?);
            let series = algebra::convert(amount, *to, rates, *at)?;
            let notes = notes::of_converting(amount, rates, &series, at.is_some());
            Ok((series, notes))
        }
        Step::Aggregate {
            to,
            by,
            min_coverage,
            ends,
        } => {
            let aggregated = algebra::aggregate(current()?, *to, *by, *min_coverage, *ends)?;
            let notes = notes::of_aggregating(&aggregated);
            Ok((aggregated.series, notes))
        }
        Step::Growth {
            kind,
            over,
            annualised,
        } => plain(algebra::growth(current()?, *kind, *over, *annualised)?),
        Step::Negate {} => plain(algebra::negate(current()?)?),
    }
}

fn level(span: Span, value: f64) -> Reference {
    Reference { span, value }
}

/// `operation` from left to right over what came before and the named series.
fn fold(
    before: Option<&Series>,
    of: &[InputRef],
    lookup: Lookup<'_, '_>,
    operation: impl Fn(&Series, &Series) -> Result<Series, AlgebraError>,
) -> Result<Series, Halt> {
    let mut result = before.cloned();
    for operand in of {
        let next = lookup(operand)?;
        result = Some(match &result {
            None => next.clone(),
            Some(so_far) => operation(so_far, next)?,
        });
    }
    result.ok_or(Halt::Reported)
}

fn foreign_income(
    partners: &[IncomePartner],
    lookup: Lookup<'_, '_>,
    years: WeightYears,
    reference: Reference,
) -> Result<(Series, Vec<Finding>), Halt> {
    let names: Vec<String> = partners.iter().map(|p| p.income.to_string()).collect();
    let partners = partners
        .iter()
        .zip(&names)
        .map(|(p, name)| {
            Ok(Partner {
                name,
                level: lookup(&p.income)?,
                weights: lookup(&p.weights)?,
            })
        })
        .collect::<Result<Vec<_>, Halt>>()?;
    let effective = algebra::foreign_income(&partners, years, reference)?;
    let notes = notes::of_weights(&effective, partners.len());
    Ok((effective.series, notes))
}

fn real_effective_exchange_rate(
    home_price: &Series,
    partners: &[PricePartner],
    lookup: Lookup<'_, '_>,
    years: WeightYears,
    reference: Reference,
) -> Result<(Series, Vec<Finding>), Halt> {
    let names: Vec<String> = partners.iter().map(|p| p.price.to_string()).collect();
    let partners = partners
        .iter()
        .zip(&names)
        .map(|(p, name)| {
            Ok(TradePartner {
                name,
                price: lookup(&p.price)?,
                rate: p.rate.as_ref().map(lookup).transpose()?,
                weights: lookup(&p.weights)?,
            })
        })
        .collect::<Result<Vec<_>, Halt>>()?;
    let effective = algebra::real_effective_exchange_rate(home_price, &partners, years, reference)?;
    let notes = notes::of_weights(&effective, partners.len());
    Ok((effective.series, notes))
}
