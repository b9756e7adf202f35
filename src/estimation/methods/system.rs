//! Seemingly unrelated regressions.

use super::Procedure;
use super::least_squares::in_words;
use crate::estimate::{Restriction, SystemEquation, seemingly_unrelated};
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{Cell, EstimateTable, EstimateTest, small, statistic};
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};

/// The method and its options.
pub(super) struct SeeminglyUnrelated {
    iterate: bool,
    restrictions: Vec<Restriction>,
}

impl SeeminglyUnrelated {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let iterate = options.flag("iterate", false);
        let restrictions = options.restrictions("restrictions");
        Some(Self {
            iterate: iterate?,
            restrictions: restrictions?,
        })
    }
}

impl Procedure for SeeminglyUnrelated {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let mut equations = Vec::new();
        for equation in &task.request.equations {
            equations.push(SystemEquation {
                name: equation.name.clone(),
                y: task.column(equation.dependent).values.clone(),
                regressors: task.design(equation)?,
            });
        }
        let found = seemingly_unrelated(&equations, &self.restrictions, self.iterate)
            .map_err(|e| task.refuse(e))?;
        let how = if self.iterate {
            format!(
                "iterated to the maximum of the likelihood in {} rounds",
                found.rounds
            )
        } else {
            "two steps".to_owned()
        };
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Seemingly unrelated regressions (Zellner 1962), {how}; covariance of the errors e_i'e_j/n; \
             standard errors from (X'(Σ⁻¹ ⊗ I)X)⁻¹, normal distribution."
        ));
        if !self.restrictions.is_empty() {
            let list: Vec<String> = self.restrictions.iter().map(in_words).collect();
            draft
                .said
                .push(format!("Under the restrictions {}.", list.join("; ")));
        }
        let errors = standard_errors(&found.covariance);
        let (mut place, mut sigma) = (
            0,
            EstimateTable::new("error_covariance", "Covariance of the errors", &[]),
        );
        sigma.columns.push("equation".to_owned());
        draft.rows = Rows::from(0);
        for (i, (equation, asked)) in equations.iter().zip(&task.request.equations).enumerate() {
            let k = equation.regressors.len();
            let names: Vec<String> = equation.regressors.iter().map(|r| r.name.clone()).collect();
            let range = place..place + k;
            let coefficients = task.coefficients(
                &names,
                &found.coefficients[range.clone()],
                &errors[range],
                None,
            );
            place += k;
            let dependent = &task.column(asked.dependent).name;
            draft.said.push(format!(
                "{}: {dependent} on {}.",
                equation.name,
                names.join(", ")
            ));
            let rows = Some((0, equation.y.len()));
            draft.equations.push(task.estimated(
                &equation.name,
                dependent,
                coefficients,
                rows,
                None,
                "of generalised least squares",
            ));
            draft
                .findings
                .extend(judge::observations(task, equation.y.len(), k));
            sigma.columns.push(equation.name.clone());
            let cells = (0..equations.len()).map(|j| Cell::from(found.sigma.at(i, j)));
            sigma.rows.push(
                [Cell::from(equation.name.as_str())]
                    .into_iter()
                    .chain(cells)
                    .collect(),
            );
            let rows = std::mem::take(&mut draft.rows);
            draft.rows = rows
                .with("dependent", dependent, equation.y.clone())
                .with_all("regressor", &equation.regressors);
        }
        draft.tables.push(sigma);
        draft.statistics = vec![
            statistic(
                "log_likelihood",
                found.log_likelihood,
                "Gaussian, at the covariance of these residuals",
            ),
            statistic(
                "rounds",
                f64::from(small(found.rounds)),
                "of generalised least squares",
            ),
        ];
        draft
            .tests
            .push(EstimateTest::from(found.breusch_pagan).named("Breusch–Pagan, across equations"));
        Ok(draft)
    }
}
