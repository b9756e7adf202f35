//! Stability of an equation over time.

use super::least_squares::CLASSICAL;
use super::{Procedure, at_most};
use crate::estimate::{
    Cusum, EstimateError, Ols, Window, chow, covariance, cusum_of_squares, cusum_ols,
    cusum_recursive, recursive, recursive_residuals, rolling, unknown_break,
};
use crate::estimation::covariance::Covariance;
use crate::estimation::fault::option;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{Cell, EstimateTable, EstimateTest};
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task};
use crate::time::Period;

/// Which look at stability.
pub(super) enum Stability {
    Residuals,
    Cusum {
        recursive: bool,
    },
    CusumOfSquares,
    Chow {
        at: Period,
    },
    UnknownBreak {
        trim: f64,
    },
    Rolling {
        width: usize,
        covariance: Covariance,
    },
    Recursive {
        shortest: usize,
        covariance: Covariance,
    },
}

impl Stability {
    pub(super) fn cusum(options: &mut Options<'_>) -> Option<Self> {
        let recursive = options.choice("residuals", &[("recursive", true), ("ols", false)])?;
        Some(Self::Cusum { recursive })
    }

    pub(super) fn chow(options: &mut Options<'_>) -> Option<Self> {
        let at = options.period("at")?;
        if at.is_none() {
            options.refuse(
                "at",
                "A Chow test needs its date",
                "the first period after the break",
            );
        }
        at.map(|at| Self::Chow { at })
    }

    pub(super) fn unknown_break(options: &mut Options<'_>) -> Option<Self> {
        let trim = options.number("trim", 0.15, |t| (0.01..=0.49).contains(&t), "0.01 to 0.49")?;
        Some(Self::UnknownBreak { trim })
    }

    pub(super) fn rolling(options: &mut Options<'_>) -> Option<Self> {
        let width = options.count("width", 20, 2, 5000);
        let covariance = Covariance::read(options);
        Some(Self::Rolling {
            width: width?,
            covariance: covariance?,
        })
    }

    pub(super) fn recursive(options: &mut Options<'_>) -> Option<Self> {
        let shortest = options.count("shortest", 20, 2, 5000);
        let covariance = Covariance::read(options);
        Some(Self::Recursive {
            shortest: shortest?,
            covariance: covariance?,
        })
    }
}

impl Procedure for Stability {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        at_most(task, 1000)?;
        let y = task.dependent();
        let design = task.design(task.equation())?;
        let names: Vec<String> = design.iter().map(|r| r.name.clone()).collect();
        let no = |e: EstimateError| task.refuse(e);
        let fit = Ols::fit(&y.values, design).map_err(no)?;
        let v = covariance(&[&fit], CLASSICAL).map_err(no)?;
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Least squares of {} on {}.",
            y.name,
            names.join(", ")
        ));
        let words = "classical, residual variance ssr/(n − k)";
        draft
            .equations
            .push(task.fitted("Whole sample", &y.name, &fit, &v, 0, words));
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        draft.rows = Rows::of_fit(&y.name, &y.values, &fit, 0);
        match self {
            Self::Residuals => residuals(task, &fit, &mut draft)?,
            Self::Cusum { recursive: true } => {
                let found = cusum_recursive(&fit).map_err(no)?;
                path(
                    task,
                    "CUSUM of recursive residuals (Brown, Durbin and Evans 1975), boundary at 5 %",
                    found,
                    0,
                    &mut draft,
                );
            }
            Self::Cusum { recursive: false } => {
                let found = cusum_ols(&fit);
                path(
                    task,
                    "CUSUM of OLS residuals (Ploberger and Krämer 1992), boundary at 5 %",
                    found,
                    0,
                    &mut draft,
                );
            }
            Self::CusumOfSquares => {
                let found = cusum_of_squares(&fit).map_err(no)?;
                let m = found.path.len();
                path(
                    task,
                    "CUSUM of squares of recursive residuals (Brown, Durbin and Evans 1975), boundary at 5 % around \
                    the diagonal (Edgerton and Wells 1994)",
                    found,
                    m,
                    &mut draft,
                );
            }
            Self::Chow { at } => {
                let Some(place) = task.data.periods.iter().position(|p| p == at) else {
                    let message = format!("{at} does not lie in the sample");
                    let expected = format!(
                        "a period from {} to {}",
                        task.period(0),
                        task.period(task.n())
                    );
                    return Err(option("at", message, &expected));
                };
                let mut test = EstimateTest::from(chow(&fit, place).map_err(no)?);
                test.sentence = test
                    .sentence
                    .replace(&format!("observation {}", place + 1), &at.to_string());
                draft.said.push(format!(
                    "Chow (1960): the same coefficients before {at} and from it on; one variance."
                ));
                draft.tests.push(test);
            }
            Self::UnknownBreak { trim } => unknown(task, &fit, *trim, &mut draft)?,
            Self::Rolling { width, covariance } => {
                let (kind, words) = covariance.resolve(&fit).map_err(no)?;
                let found = rolling(&fit, *width, kind, task.request.level).map_err(no)?;
                draft.said.push(format!(
                    "Windows of {width} observations. Covariance: {words}."
                ));
                windows(task, &names, &found, &mut draft);
            }
            Self::Recursive {
                shortest,
                covariance,
            } => {
                let (kind, words) = covariance.resolve(&fit).map_err(no)?;
                let found = recursive(&fit, *shortest, kind, task.request.level).map_err(no)?;
                draft.said.push(format!(
                    "Windows from the first observation, the shortest of {shortest}. Covariance: {words}."
                ));
                windows(task, &names, &found, &mut draft);
            }
        }
        let failed = judge::failed(&draft.tests);
        draft.findings.extend(failed);
        Ok(draft)
    }
}

fn residuals(task: &Task<'_>, fit: &Ols, draft: &mut Draft) -> Outcome<()> {
    let found = recursive_residuals(fit).map_err(|e| task.refuse(e))?;
    draft.said.push(
        "Recursive residuals (Brown, Durbin and Evans 1975): one-step forecast errors over their standard \
         deviation in units of the error's."
            .to_owned(),
    );
    let title = "Recursive residuals";
    let mut table = EstimateTable::new("recursive_residuals", title, &["period", "residual"]);
    for (i, value) in found.values.iter().enumerate() {
        table.rows.push(vec![
            Cell::from(task.period(found.first + i).to_string()),
            (*value).into(),
        ]);
    }
    draft.tables.push(table);
    Ok(())
}

/// A cumulated sum; `steps` above 0: expected to rise evenly to one in so many steps.
fn path(task: &Task<'_>, title: &str, found: Cusum, steps: usize, draft: &mut Draft) {
    draft.said.push(format!("{title}."));
    let columns = ["period", "sum", "lower boundary", "upper boundary"];
    let mut table = EstimateTable::new("path", title, &columns);
    for (i, (value, distance)) in found.path.iter().zip(&found.boundary).enumerate() {
        let centre = if steps == 0 {
            0.0
        } else {
            Task::float(i + 1) / Task::float(steps)
        };
        table.rows.push(vec![
            Cell::from(task.period(found.first + i).to_string()),
            (*value).into(),
            (centre - distance).into(),
            (centre + distance).into(),
        ]);
    }
    draft.tables.push(table);
    draft.tests.push(found.test.into());
}

fn unknown(task: &Task<'_>, fit: &Ols, trim: f64, draft: &mut Draft) -> Outcome<()> {
    let found = unknown_break(fit, trim).map_err(|e| task.refuse(e))?;
    let at = task.period(found.at);
    draft.said.push(format!(
        "One break of all coefficients at an unknown date (Quandt 1960; Andrews 1993; Andrews and Ploberger 1994), \
         {trim} of the observations trimmed at either end; for stationary regressors. The largest statistic has \
         {at} as the first period after the break."
    ));
    let title = "W = (ssr − ssr₁ − ssr₂)/((ssr₁ + ssr₂)/(n − 2k)) by first period after the break";
    let mut table = EstimateTable::new("path", title, &["period", "w"]);
    for (i, value) in found.path.iter().enumerate() {
        table.rows.push(vec![
            Cell::from(task.period(found.first + i).to_string()),
            (*value).into(),
        ]);
    }
    draft.tables.push(table);
    draft.tests.extend([
        found.sup.into(),
        found.average.into(),
        found.exponential.into(),
    ]);
    let equation = task.equation();
    draft.findings.extend(judge::levels_inference(
        task,
        equation.dependent,
        &equation.regressors,
    ));
    Ok(())
}

fn windows(task: &Task<'_>, names: &[String], found: &[Window], draft: &mut Draft) {
    let columns = [
        "from",
        "to",
        "coefficient",
        "estimate",
        "std. error",
        "low",
        "high",
    ];
    let mut table = EstimateTable::new("windows", "Coefficients by window", &columns);
    for window in found {
        for (j, name) in names.iter().enumerate() {
            table.rows.push(vec![
                Cell::from(task.period(window.from).to_string()),
                Cell::from(task.period(window.to - 1).to_string()),
                Cell::from(name.as_str()),
                window.coefficients[j].into(),
                window.std_errors[j].into(),
                window.low[j].into(),
                window.high[j].into(),
            ]);
        }
    }
    draft.tables.push(table);
}
