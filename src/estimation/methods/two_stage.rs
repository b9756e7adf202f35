//! Two-stage least squares.

use super::Procedure;
use super::least_squares::CLASSICAL;
use crate::estimate::{
    EstimateError, InstrumentedEquation, Region, anderson_rubin, effective_f, two_stage,
};
use crate::estimation::covariance::Covariance;
use crate::estimation::fault::option;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{Cell, EstimateTable, EstimateTest, statistic};
use crate::estimation::request::Id;
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};
use crate::finding::Finding;

/// The method and its options.
pub(super) struct TwoStage {
    endogenous: Vec<String>,
    instruments: Vec<Id>,
    covariance: Covariance,
}

impl TwoStage {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let endogenous = options.names("endogenous");
        let instruments = options.variables("instruments");
        let covariance = Covariance::read(options);
        let (endogenous, instruments) = (endogenous?, instruments?);
        if endogenous.is_empty() {
            let message = "Two-stage least squares needs an endogenous regressor";
            options.refuse("endogenous", message, "a list of names of regressors");
        }
        if instruments.len() < endogenous.len() {
            let message = format!(
                "{} instruments cannot identify {} endogenous regressors",
                instruments.len(),
                endogenous.len()
            );
            options.refuse(
                "instruments",
                message,
                "at least one series for each endogenous regressor",
            );
        }
        Some(Self {
            endogenous,
            instruments,
            covariance: covariance?,
        })
    }
}

impl Procedure for TwoStage {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let design = task.design(task.equation())?;
        let names: Vec<String> = design.iter().map(|r| r.name.clone()).collect();
        if let Some(name) = self.endogenous.iter().find(|e| !names.contains(e)) {
            let message = format!("There is no regressor '{name}'");
            return Err(option("endogenous", message, &names.join(", ")));
        }
        let (endogenous, exogenous): (Vec<_>, Vec<_>) = design
            .into_iter()
            .partition(|r| self.endogenous.contains(&r.name));
        let input = InstrumentedEquation {
            y: y.values.clone(),
            exogenous,
            endogenous,
            instruments: task.columns(&self.instruments),
        };
        let no = |e: EstimateError| task.refuse(e);
        let first = two_stage(&input, CLASSICAL).map_err(no)?;
        let (kind, words) = self.covariance.resolve(&first.fit).map_err(no)?;
        let found = two_stage(&input, kind).map_err(no)?;
        let fit = &found.fit;
        let instruments: Vec<&str> = input.instruments.iter().map(|r| r.name.as_str()).collect();
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Two-stage least squares of {} on {}; endogenous {}, instruments {} and the other regressors.",
            y.name,
            fit.names().join(", "),
            self.endogenous.join(", "),
            instruments.join(", ")
        ));
        draft
            .said
            .push(format!("Covariance with structural residuals: {words}."));
        let df = Some(fit.df);
        let errors = standard_errors(&found.covariance);
        let coefficients = task.coefficients(&fit.names(), &fit.coefficients, &errors, df);
        let rows = Some((0, fit.n));
        let equation = task.estimated(
            "Dependent variable",
            &y.name,
            coefficients,
            rows,
            df,
            &words,
        );
        draft.equations.push(equation);
        draft.statistics = vec![
            statistic(
                "r_squared",
                fit.r2,
                "1 − ssr/tss of structural residuals; may be negative",
            ),
            statistic("sum_of_squared_residuals", fit.ssr, "structural"),
            statistic("residual_std_dev", fit.s2.sqrt(), "√(ssr/(n − k))"),
            statistic(
                "durbin_watson",
                fit.durbin_watson,
                "of structural residuals",
            ),
        ];
        for (test, name) in found.first_stages.into_iter().zip(&self.endogenous) {
            draft
                .tests
                .push(EstimateTest::from(test).named(&format!("First-stage F of {name}")));
        }
        draft.tests.extend(found.wu_hausman.map(EstimateTest::from));
        if let Some(over) = found.overidentification {
            draft.tests.push(over.sargan.into());
            draft.tests.push(over.hansen_j.into());
        }
        if input.endogenous.len() == 1 {
            let strength = effective_f(&input, kind).map_err(no)?;
            let law = "Montiel Olea and Pflueger 2013; critical values for a bias of 10 and 30 %";
            let mut test = EstimateTest::new("Effective F", strength.statistic, law)
                .against([(0.05, strength.critical_10), (0.05, strength.critical_30)]);
            for (value, bias) in test
                .critical_values
                .iter_mut()
                .zip(["bias 10 %", "bias 30 %"])
            {
                value.bound = Some(bias.to_owned());
            }
            test.sentence = strength.sentence;
            if strength.statistic < strength.critical_30 {
                let message = format!(
                    "The instruments are weak: effective F {:.2}; read the Anderson-Rubin set",
                    strength.statistic
                );
                draft.findings.push(
                    Finding::notice("weak_instruments", message).at_pointer("/options/instruments"),
                );
            }
            draft.tests.push(test);
            let set = anderson_rubin(&input, task.request.level).map_err(no)?;
            draft.tables.push(set_table(&self.endogenous[0], set));
        }
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        let inputs = input
            .exogenous
            .iter()
            .chain(&input.endogenous)
            .cloned()
            .collect::<Vec<_>>();
        draft.rows = Rows::from(0)
            .with("dependent", &y.name, y.values.clone())
            .with_all("regressor", &inputs)
            .with_all("instrument", &input.instruments);
        Ok(draft)
    }
}

/// The values of a coefficient that Anderson and Rubin's test does not reject.
fn set_table(name: &str, set: Option<Region>) -> EstimateTable {
    let title =
        format!("Anderson–Rubin set of the coefficient of {name}, valid under weak instruments");
    let mut table = EstimateTable::new("anderson_rubin_set", &title, &["shape", "low", "high"]);
    let (shape, low, high): (&str, Option<f64>, Option<f64>) = match set {
        None => ("empty: the instruments are rejected", None, None),
        Some(Region::Interval { low, high }) => ("between", Some(low), Some(high)),
        Some(Region::Complement { low, high }) => ("outside", Some(low), Some(high)),
        Some(Region::WholeLine) => ("every number", None, None),
    };
    table
        .rows
        .push(vec![Cell::from(shape), low.into(), high.into()]);
    table
}
