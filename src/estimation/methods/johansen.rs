//! Johansen's rank tests and the vector error-correction model.

use std::collections::BTreeMap;

use super::Procedure;
use super::unit_roots::{check_draws, read_simulation};
use crate::estimate::{
    Johansen, JohansenCase, LikelihoodRatio, RankDesign, RankNull, Regressor, SeriesError, Vecm,
    johansen, simulate_rank,
};
use crate::estimation::fault::option;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{Cell, EstimateTable, EstimateTest, small, statistic, verdict};
use crate::estimation::request::Id;
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task};
use crate::finding::Finding;
use crate::linalg::Matrix;

/// The method and its options.
pub(super) struct ReducedRank {
    /// Whether the whole error-correction model is asked for.
    vecm: bool,
    case: JohansenCase,
    lags: usize,
    rank: Option<usize>,
    exogenous: Vec<Id>,
    small_sample: bool,
    weakly_exogenous: Vec<String>,
    excluded: Vec<String>,
    /// Columns of H in β = H φ.
    relations: Vec<BTreeMap<String, f64>>,
    simulation: (usize, u64),
}

const CASES: [(&str, JohansenCase); 5] = [
    ("constant", JohansenCase::Constant),
    ("none", JohansenCase::None),
    ("restricted_constant", JohansenCase::RestrictedConstant),
    ("restricted_trend", JohansenCase::RestrictedTrend),
    ("trend", JohansenCase::Trend),
];

impl ReducedRank {
    pub(super) fn read(options: &mut Options<'_>, vecm: bool) -> Option<Self> {
        let case = options.choice("case", &CASES);
        let lags = options.count("lags", 2, 1, 24);
        let rank = options.maybe_count("rank", 1, 50);
        let exogenous = options.variables("exogenous");
        let small_sample = options.flag("small_sample", false);
        let weakly_exogenous = options.names("weakly_exogenous");
        let excluded = options.names("excluded");
        let relations = options.maps("relations_within");
        let simulation = read_simulation(options, 5000);
        Some(Self {
            vecm,
            case: case?,
            lags: lags?,
            rank: rank?,
            exogenous: exogenous?,
            small_sample: small_sample?,
            weakly_exogenous: weakly_exogenous?,
            excluded: excluded?,
            relations: relations?,
            simulation: simulation?,
        })
    }
}

impl Procedure for ReducedRank {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        super::at_most(task, 2000)?;
        let equation = task.equation();
        let ids: Vec<Id> = [equation.dependent]
            .into_iter()
            .chain(equation.regressors.clone())
            .collect();
        let series = task.columns(&ids);
        let mut short_run = task.dummies(true)?;
        short_run.extend(task.columns(&self.exogenous));
        let no = |e: SeriesError| task.refuse(e);
        let system = johansen(&series, self.lags, self.case, &short_run).map_err(no)?;
        let mut draft = Draft::default();
        self.say(&system, &short_run, &mut draft);
        let chosen = self.rank_tests(task, &system, &mut draft)?;
        let p = system.series;
        let rank = self.rank.unwrap_or(chosen);
        if self.rank.is_some_and(|r| r >= p) {
            let message = format!("A system of {p} series has ranks 1 to {} to impose", p - 1);
            return Err(option("rank", message, &format!("1 to {}", p - 1)));
        }
        if chosen == 0 {
            let message = "The trace test does not reject rank 0 at 5 per cent".to_owned();
            draft.findings.push(judge::no_cointegration(message));
        }
        if (2..p).contains(&rank) {
            let message = format!(
                "The series have {rank} cointegrating relations: a single equation mixes them, and each needs \
                 restrictions to be told from the others"
            );
            draft
                .findings
                .push(Finding::notice("several_cointegrating_vectors", message));
        }
        if (1..p).contains(&rank) {
            self.at_rank(task, &system, rank, &mut draft)?;
        } else if self.vecm {
            let message =
                format!("The trace test finds rank {rank}: there is no error correction to model");
            let finding = Finding::error("no_cointegration", message).at_pointer("/options/rank");
            return Err(Box::new(
                finding.remedy("Name a rank to impose, or estimate in differences"),
            ));
        }
        draft.statistics.push(statistic(
            "rank",
            f64::from(small(rank)),
            if self.rank.is_some() {
                "imposed"
            } else {
                "first not rejected by the trace test at 5 %"
            },
        ));
        draft.findings.extend(judge::observations(
            task,
            system.observations,
            p * self.lags + short_run.len() + 1,
        ));
        draft.findings.extend(judge::twice_integrated(task, &ids));
        draft.rows = rows(&system, self.lags);
        Ok(draft)
    }
}

/// Changes, lagged levels and short-run terms.
fn rows(system: &Johansen, lags: usize) -> Rows {
    let raw = &system.raw;
    let mut rows = Rows::from(lags);
    for (name, change) in system.names.iter().zip(&raw.changes) {
        rows = rows.with("dependent", &format!("d.{name}"), change.clone());
    }
    for (i, (name, level)) in system.names.iter().zip(&raw.levels).enumerate() {
        let name = if i < system.series {
            format!("{name}.L1")
        } else {
            name.clone()
        };
        rows = rows.with("regressor", &name, level.clone());
    }
    rows.with_all("regressor", &raw.short_run)
}

impl ReducedRank {
    fn say(&self, system: &Johansen, short_run: &[Regressor], draft: &mut Draft) {
        let case = match self.case {
            JohansenCase::None => "no deterministic terms",
            JohansenCase::RestrictedConstant => "a constant restricted to the relations",
            JohansenCase::Constant => "an unrestricted constant",
            JohansenCase::RestrictedTrend => {
                "a trend restricted to the relations and an unrestricted constant"
            }
            JohansenCase::Trend => "an unrestricted constant and trend",
        };
        let others: Vec<&str> = short_run.iter().map(|r| r.name.as_str()).collect();
        let others = if others.is_empty() {
            String::new()
        } else {
            format!(
                "; unrestricted I(0) terms {} (seasonal dummies centred)",
                others.join(", ")
            )
        };
        draft.said.push(format!(
            "Johansen's reduced-rank regression of {} with {} lags in levels, {case}{others}; {} rows.",
            system.names[..system.series].join(", "),
            self.lags,
            system.observations
        ));
    }

    /// The rank tests with simulated p-values; gives the first rank not rejected by the trace test.
    fn rank_tests(&self, task: &Task<'_>, system: &Johansen, draft: &mut Draft) -> Outcome<usize> {
        let (draws, seed) = self.simulation;
        if draws == 0 && self.rank.is_none() {
            return Err(option(
                "draws",
                "Without draws the rank has to be given".to_owned(),
                "draws above 0, or rank",
            ));
        }
        check_draws(draws, system.observations * system.series)?;
        if draws > 0 {
            draft.said.push(format!(
                "Null distributions of the rank tests from {draws} draws at {} rows with {} lagged differences, seed \
                 {seed}; of the corrected statistics at 400 rows.",
                system.observations,
                system.lags - 1
            ));
        }
        let columns = [
            "rank",
            "eigenvalue",
            "trace",
            "5 %",
            "p",
            "maximum eigenvalue",
            "5 % of it",
            "p of it",
        ];
        let mut table = EstimateTable::new("rank_tests", "Rank tests: at most this rank", &columns);
        let columns = ["rank", "trace", "p", "maximum eigenvalue", "p of it"];
        let title = "Rank tests with n − pk for n (Reinsel and Ahn 1992)";
        let mut corrected = EstimateTable::new("rank_tests_small_sample", title, &columns);
        let mut chosen = None;
        for test in &system.tests {
            let simulated = |design: RankDesign| {
                (draws > 0)
                    .then(|| simulate_rank(design, task.simulation(draws, seed), task.store()))
                    .transpose()
                    .map_err(|e| task.refuse(e))
            };
            let null = simulated(system.design(test.rank))?;
            // What is corrected for the sample's size is compared with large samples.
            let large = simulated(system.design(test.rank).large())?;
            let of = |f: &dyn Fn(&RankNull) -> f64| null.as_ref().map(f);
            let p_trace = of(&|n| n.trace.upper_tail(test.trace));
            let p_small = large
                .as_ref()
                .map(|n| n.trace.upper_tail(test.trace_small_sample));
            let p_judged = if self.small_sample { p_small } else { p_trace };
            let p_max = of(&|n| n.max_eigenvalue.upper_tail(test.max_eigenvalue));
            table.rows.push(vec![
                Cell::from(test.rank),
                system.eigenvalues[test.rank].into(),
                test.trace.into(),
                of(&|n| n.trace.quantile(0.95)).into(),
                p_trace.into(),
                test.max_eigenvalue.into(),
                of(&|n| n.max_eigenvalue.quantile(0.95)).into(),
                p_max.into(),
            ]);
            corrected.rows.push(vec![
                Cell::from(test.rank),
                test.trace_small_sample.into(),
                p_small.into(),
                test.max_eigenvalue_small_sample.into(),
                large
                    .as_ref()
                    .map(|n| {
                        n.max_eigenvalue
                            .upper_tail(test.max_eigenvalue_small_sample)
                    })
                    .into(),
            ]);
            let Some(p) = p_judged else { continue };
            if chosen.is_none() && p >= 0.05 {
                chosen = Some(test.rank);
            }
            let (value, how, law) = if self.small_sample {
                (
                    test.trace_small_sample,
                    ", n − pk for n (Reinsel and Ahn 1992)",
                    "simulated in large samples",
                )
            } else {
                (test.trace, "", "simulated at the exact size")
            };
            let name = format!("Trace, rank at most {}{how}", test.rank);
            draft.tests.push(
                EstimateTest::new(&name, value, law)
                    .judged(&format!("A rank of at most {}", test.rank), p),
            );
        }
        draft.tables.extend([table, corrected]);
        Ok(chosen.or(self.rank).unwrap_or(system.series))
    }

    /// Relations, adjustment and the tests on both at a rank.
    fn at_rank(
        &self,
        task: &Task<'_>,
        system: &Johansen,
        rank: usize,
        draft: &mut Draft,
    ) -> Outcome<()> {
        let no = |e: SeriesError| task.refuse(e);
        let model = system.vecm(rank).map_err(no)?;
        let series = &system.names[..system.series];
        for j in 0..rank {
            let pick = |m: &Matrix| (0..m.rows()).map(|i| m.at(i, j)).collect::<Vec<f64>>();
            let (beta, alpha) = (pick(&model.beta), pick(&model.alpha));
            let beta = task.coefficients(&system.names, &beta, &pick(&model.beta_errors), None);
            let name = format!("Cointegrating relation {}", j + 1);
            let words = "asymptotic, given the normalisation";
            draft
                .equations
                .push(task.estimated(&name, &series[j], beta, None, None, words));
            let alpha = task.coefficients(series, &alpha, &pick(&model.alpha_errors), None);
            let name = format!("Adjustment to relation {}", j + 1);
            let words = "residual covariance with divisor n";
            draft.equations.push(task.estimated(
                &name,
                "first differences",
                alpha,
                None,
                None,
                words,
            ));
        }
        draft.said.push(format!(
            "At rank {rank}: β normalised so that its first {rank} rows are the identity; the relations are \
             β'(levels, restricted term), their adjustment α."
        ));
        draft.statistics.push(statistic(
            "log_likelihood",
            model.log_likelihood,
            "Gaussian, at this rank",
        ));
        self.hypotheses(task, system, rank, draft)?;
        if self.vecm {
            self.equations(task, system, &model, draft);
        }
        Ok(())
    }

    fn hypotheses(
        &self,
        task: &Task<'_>,
        system: &Johansen,
        rank: usize,
        draft: &mut Draft,
    ) -> Outcome<()> {
        let no = |e: SeriesError| task.refuse(e);
        let place = |name: &String, at: &str, among: &[String]| {
            among.iter().position(|n| n == name).ok_or_else(|| {
                option(
                    at,
                    format!("There is no series '{name}' in the system"),
                    &among.join(", "),
                )
            })
        };
        let series = &system.names[..system.series];
        if system.series > rank {
            for (i, name) in series.iter().enumerate() {
                let Ok(found) = system.weakly_exogenous(rank, &[i]) else {
                    continue;
                };
                let test = ratio(&format!("Weak exogeneity of {name}"), &found);
                if i > 0 && test.rejects() {
                    let message = format!(
                        "{name} adjusts to the relations: a single equation for {} leaves that out",
                        series[0]
                    );
                    let finding = Finding::notice("not_weakly_exogenous", message);
                    draft.findings.push(match task.variable(name) {
                        Some(variable) => variable.place(finding),
                        None => finding,
                    });
                }
                draft.tests.push(test);
            }
        }
        if !self.weakly_exogenous.is_empty() {
            let places = self
                .weakly_exogenous
                .iter()
                .map(|n| place(n, "weakly_exogenous", series));
            let places: Vec<usize> = places.collect::<Result<_, _>>()?;
            let found = system.weakly_exogenous(rank, &places).map_err(no)?;
            draft.tests.push(ratio(
                &format!("Weak exogeneity of {}", self.weakly_exogenous.join(", ")),
                &found,
            ));
        }
        if !self.excluded.is_empty() {
            for name in &self.excluded {
                place(name, "excluded", &system.names)?;
            }
            let names: Vec<&str> = self.excluded.iter().map(String::as_str).collect();
            let found = system
                .restrict_beta(rank, &system.without(&names))
                .map_err(no)?;
            draft.tests.push(ratio(
                &format!("Exclusion of {} from the relations", names.join(", ")),
                &found,
            ));
        }
        if !self.relations.is_empty() {
            for name in self.relations.iter().flat_map(BTreeMap::keys) {
                place(name, "relations_within", &system.names)?;
            }
            let weight = |i: usize, j: usize| {
                self.relations[j]
                    .get(&system.names[i])
                    .copied()
                    .unwrap_or(0.0)
            };
            let h = Matrix::from_fn(system.names.len(), self.relations.len(), weight);
            let found = system.restrict_beta(rank, &h).map_err(no)?;
            draft
                .tests
                .push(ratio("Relations within the given ones (β = H φ)", &found));
            let mut table =
                EstimateTable::new("restricted_beta", "β under the restriction", &["name"]);
            table
                .columns
                .extend((1..=rank).map(|r| format!("relation {r}")));
            for (i, name) in system.names.iter().enumerate() {
                let cells = (0..rank).map(|j| Cell::from(found.beta.at(i, j)));
                let name = crate::estimation::rows::shown(name);
                table
                    .rows
                    .push([Cell::from(name)].into_iter().chain(cells).collect());
            }
            draft.tables.push(table);
        }
        Ok(())
    }

    /// The equations of the error-correction model and the covariance of their errors.
    fn equations(&self, task: &Task<'_>, system: &Johansen, model: &Vecm, draft: &mut Draft) {
        let series = &system.names[..system.series];
        let mut sigma = EstimateTable::new(
            "error_covariance",
            "Covariance of the errors, e'e/n",
            &["equation"],
        );
        for (i, (fit, name)) in model.equations.iter().zip(series).enumerate() {
            let variance = model.residual_covariance.at(i, i);
            let errors: Vec<f64> = (0..fit.k)
                .map(|j| (variance * fit.inverse_gram.at(j, j)).sqrt())
                .collect();
            let coefficients = task.coefficients(&fit.names(), &fit.coefficients, &errors, None);
            let rows = Some((self.lags, fit.n));
            let dependent = format!("d.{name}");
            let words = "residual covariance with divisor n";
            let title = format!("Equation {}", i + 1);
            draft.equations.push(task.estimated(
                &title,
                &dependent,
                coefficients,
                rows,
                None,
                words,
            ));
            sigma.columns.push(dependent.clone());
            let cells = (0..series.len()).map(|j| Cell::from(model.residual_covariance.at(i, j)));
            sigma
                .rows
                .push([Cell::from(dependent)].into_iter().chain(cells).collect());
        }
        draft.tables.push(sigma);
    }
}

/// A likelihood-ratio test as an entry of the report.
fn ratio(null: &str, found: &LikelihoodRatio) -> EstimateTest {
    let law = format!("chi-squared({})", found.df);
    let mut test = EstimateTest::new(null, found.statistic, &law).judged(null, found.p_value);
    test.sentence = verdict(null, found.p_value);
    test
}
