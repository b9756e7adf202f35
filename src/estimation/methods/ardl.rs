//! Autoregressive distributed lags: orders, error-correction form, long run, bounds tests, multipliers.

use super::Procedure;
use super::unit_roots::{LEVELS, changes, check_draws, read_simulation};
use crate::estimate::{
    Ardl, ArdlData, ArdlOrders, Blocks, BoundsCase, BoundsDesign, InformationCriterion,
    LevelRelation, NullDistribution, SeriesError, bootstrap_bounds, select_orders,
};
use crate::estimation::fault::option;
use crate::estimation::judge;
use crate::estimation::options::Options;
use crate::estimation::report::{
    Cell, CriticalValue, EstimateStatistic, EstimateTable, EstimateTest, finite, statistic,
};
use crate::estimation::request::too_many;
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task, standard_errors};
use crate::finding::Finding;

/// The method and its options.
pub(super) struct DistributedLags {
    case: BoundsCase,
    orders: Orders,
    simulation: (usize, u64),
    bounds: Bounds,
    horizon: usize,
    diagnostic_lags: Option<usize>,
}

/// Where the critical values of the bounds tests come from.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Bounds {
    /// Random walks at the exact size and orders.
    Simulated,
    /// The same without lagged differences.
    Published,
    /// This sample, with each null imposed.
    Bootstrap,
}

enum Orders {
    Fixed(ArdlOrders),
    Chosen {
        by: InformationCriterion,
        max_p: Option<usize>,
        max_q: Option<Vec<usize>>,
    },
}

const CASES: [(&str, BoundsCase); 5] = [
    ("III", BoundsCase::III),
    ("I", BoundsCase::I),
    ("II", BoundsCase::II),
    ("IV", BoundsCase::IV),
    ("V", BoundsCase::V),
];

/// Most equations of a grid.
const MOST_EQUATIONS: usize = 500_000;

impl DistributedLags {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let case = options.choice("case", &CASES);
        let p = options.maybe_count("p", 1, 24);
        let q = options.counts("q");
        let max_p = options.maybe_count("max_p", 1, 24);
        let max_q = options.counts("max_q");
        let simulation = read_simulation(options, 10_000);
        let published_design = options.flag("published_design", false);
        let bounds = options.choice(
            "bounds",
            &[
                ("simulated", Bounds::Simulated),
                ("bootstrap", Bounds::Bootstrap),
            ],
        );
        if bounds == Some(Bounds::Bootstrap) {
            options.useless(
                &["published_design"],
                "the null distributions are bootstrapped",
            );
        }
        let horizon = options.count("horizon", 10, 0, 200);
        let diagnostic_lags = options.maybe_count("diagnostic_lags", 1, 100);
        let (p, q) = (p?, q?);
        let orders = match (p, q) {
            (Some(p), Some(q)) => {
                options.useless(
                    &["selection", "max_p", "max_q"],
                    "the orders p and q are given",
                );
                Some(Orders::Fixed(ArdlOrders { p, q }))
            }
            (None, None) => {
                let criteria = [
                    ("aic", InformationCriterion::Aic),
                    ("bic", InformationCriterion::Bic),
                ];
                let by = options.choice("selection", &criteria);
                Some(Orders::Chosen {
                    by: by?,
                    max_p: max_p?,
                    max_q: max_q?,
                })
            }
            (given, _) => {
                let name = if given.is_some() { "q" } else { "p" };
                let message = "The orders p and q come together";
                options.refuse(name, message, "both, or neither to have them chosen");
                None
            }
        };
        Some(Self {
            case: case?,
            orders: orders?,
            simulation: simulation?,
            bounds: if published_design? {
                Bounds::Published
            } else {
                bounds?
            },
            horizon: horizon?,
            diagnostic_lags: diagnostic_lags?,
        })
    }
}

impl Procedure for DistributedLags {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let (y, x, fixed) = (task.dependent(), task.regressors(), task.dummies(false)?);
        let data = ArdlData {
            y,
            x: &x,
            fixed: &fixed,
        };
        let mut draft = Draft::default();
        let orders = self.orders(task, &data, &mut draft)?;
        let found = Ardl::fit(&data, orders, self.case).map_err(|e| task.refuse(e))?;
        let names: Vec<&str> = x.iter().map(|r| r.name.as_str()).collect();
        let q: Vec<String> = found.orders.q.iter().map(ToString::to_string).collect();
        let others: Vec<&str> = fixed.iter().map(|r| r.name.as_str()).collect();
        let others = if others.is_empty() {
            String::new()
        } else {
            format!(", with {}", others.join(", "))
        };
        draft.said.insert(0, format!(
            "ARDL({}, {}) of {} on {}{others}, deterministic case {:?} of Pesaran, Shin and Smith 2001 ({}); \
             estimated by least squares in error-correction form, order 0 by the present level.",
            found.orders.p,
            q.join(", "),
            y.name,
            names.join(", "),
            self.case,
            case_words(self.case)
        ));
        let first = found.orders.longest();
        let words = "classical, residual variance ssr/(n − k)";
        let dependent = format!("d.{}", y.name);
        draft.equations.push(task.fitted(
            "Error-correction form",
            &dependent,
            &found.ecm,
            &found.covariance,
            first,
            words,
        ));
        self.long_run(task, &found, &mut draft);
        if self.bounds == Bounds::Bootstrap && self.simulation.0 > 0 {
            self.bootstrap(task, &data, &found, &mut draft)?;
        } else {
            self.bounds(task, &found, &mut draft)?;
        }
        self.multipliers(task, &found, &names, &mut draft);
        let fit = &found.ecm;
        draft.statistics.extend([
            statistic(
                "adjustment",
                found.adjustment,
                "φ, coefficient of the lagged level",
            ),
            statistic("adjustment_std_error", found.adjustment_error, "classical"),
            statistic(
                "half_life",
                found.half_life.unwrap_or(f64::NAN),
                "ln ½ / ln(1 + φ) periods",
            ),
        ]);
        draft
            .statistics
            .extend(super::least_squares::fit_statistics(
                fit,
                fit.r2,
                fit.log_likelihood,
            ));
        let lags = self
            .diagnostic_lags
            .unwrap_or_else(|| judge::diagnostic_lags(task));
        let tests = judge::diagnostics(fit, lags, true);
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        draft
            .findings
            .extend(judge::adjustment(task, found.adjustment, found.half_life));
        draft.findings.extend(judge::failed(&tests));
        let equation = task.equation();
        let ids: Vec<usize> = [equation.dependent]
            .into_iter()
            .chain(equation.regressors.clone())
            .collect();
        draft.findings.extend(judge::twice_integrated(task, &ids));
        draft.tests.extend(tests);
        draft.rows = Rows::of_fit(&dependent, &changes(&y.values[first - 1..]), fit, first);
        Ok(draft)
    }
}

impl DistributedLags {
    fn orders(
        &self,
        task: &Task<'_>,
        data: &ArdlData<'_>,
        draft: &mut Draft,
    ) -> Outcome<ArdlOrders> {
        let k = data.x.len();
        let one_each = |given: &[usize], name: &str| -> Outcome<Vec<usize>> {
            match given {
                [one] => Ok(vec![*one; k]),
                many if many.len() == k => Ok(many.to_vec()),
                many => {
                    let message = format!("{} orders for {k} regressors", many.len());
                    Err(option(
                        name,
                        message,
                        "one number for all, or one a regressor",
                    ))
                }
            }
        };
        let (by, max_p, max_q) = match &self.orders {
            Orders::Fixed(orders) => {
                let q = one_each(&orders.q, "q")?;
                return Ok(ArdlOrders { p: orders.p, q });
            }
            Orders::Chosen { by, max_p, max_q } => (*by, max_p, max_q),
        };
        let usual = if task.annual() { 2 } else { 4 };
        let max_p = max_p.unwrap_or(usual);
        let max_q = one_each(max_q.as_deref().unwrap_or(&[usual]), "max_q")?;
        let size = max_q.iter().fold(max_p, |n, q| n.saturating_mul(q + 1));
        if size > MOST_EQUATIONS {
            return Err(too_many(
                "Equations of the grid of orders",
                size,
                MOST_EQUATIONS,
            ));
        }
        let terms = self.case.deterministic();
        let found = select_orders(data, max_p, &max_q, terms, by).map_err(|e| task.refuse(e))?;
        let name = match by {
            InformationCriterion::Aic => "AIC",
            InformationCriterion::Bic => "BIC",
        };
        draft.said.push(format!(
            "Orders chosen by {name} over the grid p = 1 to {max_p}, q = 0 to {max_q:?}: {} equations compared on a \
             common sample of {}, {} left out with fewer than max(10, n/3) degrees of freedom, {} collinear; then \
             refitted on all rows.",
            found.compared, found.observations, found.too_large, found.collinear
        ));
        let title = format!("Orders by {name}, best first");
        let mut table = EstimateTable::new("orders", &title, &["p", "q", "criterion"]);
        for candidate in &found.best {
            let q: Vec<String> = candidate.orders.q.iter().map(ToString::to_string).collect();
            table.rows.push(vec![
                Cell::from(candidate.orders.p),
                Cell::from(q.join(", ")),
                candidate.criterion.into(),
            ]);
        }
        draft.tables.push(table);
        Ok(found.best[0].orders.clone())
    }

    fn long_run(&self, task: &Task<'_>, found: &Ardl, draft: &mut Draft) {
        let names: Vec<String> = found.long_run.iter().map(|c| c.name.clone()).collect();
        let values: Vec<f64> = found.long_run.iter().map(|c| c.value).collect();
        let errors = standard_errors(&found.long_run_covariance);
        let df = Some(found.ecm.df);
        let coefficients = task.coefficients(&names, &values, &errors, df);
        let name = &task.dependent().name;
        let words = "delta method, θ = −b/φ";
        let mut equation = task.estimated("Long-run relation", name, coefficients, None, df, words);
        for c in &mut equation.coefficients {
            if c.name == name.as_str() {
                c.series = None;
            }
        }
        draft.equations.push(equation);
    }

    fn bounds(&self, task: &Task<'_>, found: &Ardl, draft: &mut Draft) -> Outcome<()> {
        let no = |e: SeriesError| task.refuse(e);
        let bounds = found.bounds().map_err(no)?;
        let law = "bounds at I(0) and I(1), simulated";
        let mut f = EstimateTest::new("Bounds F", bounds.f, law);
        let mut t = EstimateTest::new("Bounds t", bounds.t, law);
        let mut f_x = EstimateTest::new(
            "F of the lagged regressor levels",
            bounds.f_regressors.unwrap_or(f64::NAN),
            law,
        );
        let (draws, seed) = self.simulation;
        if draws > 0 {
            check_draws(draws, bounds.observations * (found.orders.q.len() + 1))?;
            let design = BoundsDesign {
                observations: bounds.observations,
                regressors: found.orders.q.len(),
                case: self.case,
                orders: (self.bounds == Bounds::Simulated).then(|| found.orders.clone()),
            };
            let null = design
                .simulate(task.simulation(draws, seed), task.store())
                .map_err(no)?;
            draft.said.push(format!(
                "Bounds from {draws} draws under the null at {} rows, seed {seed}, {}.",
                bounds.observations,
                if self.bounds == Bounds::Published {
                    "without lagged differences, as in the published tables"
                } else {
                    "with the lagged differences of this equation"
                }
            ));
            let upper =
                |test: &mut EstimateTest, pair: &[NullDistribution; 2], null: &str, x: f64| {
                    set_bounds(
                        test,
                        pair,
                        |d, l| d.quantile(1.0 - l),
                        |d, l| d.quantile_error(1.0 - l),
                    );
                    test.p_value = finite(pair[1].upper_tail(x));
                    test.sentence = between(null, pair[0].upper_tail(x), pair[1].upper_tail(x));
                };
            upper(&mut f, &null.f, "No level relation", bounds.f);
            let x = bounds.f_regressors.unwrap_or(f64::NAN);
            upper(
                &mut f_x,
                &null.f_regressors,
                "That the regressors have no part in a level relation",
                x,
            );
            set_bounds(
                &mut t,
                &null.t,
                NullDistribution::quantile,
                NullDistribution::quantile_error,
            );
            t.p_value = finite(null.t[1].lower_tail(bounds.t));
            let (low, high) = (
                null.t[0].lower_tail(bounds.t),
                null.t[1].lower_tail(bounds.t),
            );
            t.sentence = between("That nothing draws the dependent variable back", low, high);
            tell_relation(bounds.judge(&null, 0.05), draft);
        } else {
            let message = "No draws were asked for: the bounds tests have no critical values";
            draft
                .findings
                .push(Finding::notice("no_critical_values", message).at_pointer("/options/draws"));
        }
        if !self.case.has_published_t() {
            t.distribution
                .push_str("; no table of t was published for this case");
        }
        draft.tests.extend([f, t, f_x]);
        Ok(())
    }

    /// The bounds tests against bootstrap distributions of their own.
    fn bootstrap(
        &self,
        task: &Task<'_>,
        data: &ArdlData<'_>,
        found: &Ardl,
        draft: &mut Draft,
    ) -> Outcome<()> {
        let (draws, seed) = self.simulation;
        check_draws(draws, found.ecm.n * (found.orders.q.len() + 1))?;
        let lags = found.orders.longest().saturating_sub(1).max(1);
        let null = bootstrap_bounds(
            data,
            &found.orders,
            self.case,
            lags,
            Blocks::Moving(1),
            task.simulation(draws, seed),
        )
        .map_err(|e| task.refuse(e))?;
        draft.said.push(format!(
            "Bounds tests by bootstrap (McNown, Sam and Goh 2018): {draws} replicates, {} of them left out, seed \
             {seed}; dates drawn singly for the centred residuals of the equation with each null imposed and of \
             the regressors' own equations in differences with {lags} lags.",
            null.failed
        ));
        let law = "bootstrap";
        let p = null.p_values();
        let mut test =
            |name: &str, x: f64, p: f64, null: &NullDistribution, lower: bool, words: &str| {
                let mut test = EstimateTest::new(name, x, law);
                test.p_value = finite(p);
                for level in LEVELS {
                    let tail = if lower { level } else { 1.0 - level };
                    test.critical_values.push(CriticalValue {
                        level,
                        bound: None,
                        value: finite(null.quantile(tail)),
                        std_error: finite(null.quantile_error(tail)),
                    });
                }
                let verdict = if p < 0.05 { "is" } else { "is not" };
                test.sentence =
                    format!("{words} {verdict} rejected at the 5 % level (p = {p:.4}).");
                draft.tests.push(test);
            };
        let s = &null.statistics;
        test("Bounds F", s.f, p.f, &null.f, false, "No level relation");
        let words = "That nothing draws the dependent variable back";
        test("Bounds t", s.t, p.t, &null.t, true, words);
        if let (Some(x), Some(p), Some(null)) = (s.f_regressors, p.f_regressors, &null.f_regressors)
        {
            let words = "That the regressors have no part in a level relation";
            test("F of the lagged regressor levels", x, p, null, false, words);
        }
        tell_relation(null.judge(0.05), draft);
        Ok(())
    }

    fn multipliers(&self, task: &Task<'_>, found: &Ardl, names: &[&str], draft: &mut Draft) {
        if self.horizon == 0 {
            return;
        }
        let columns = [
            "periods after",
            "regressor",
            "response",
            "std. error",
            "low",
            "high",
        ];
        let title = "Cumulative dynamic multipliers of a permanent rise by one";
        let mut table = EstimateTable::new("dynamic_multipliers", title, &columns);
        for (j, name) in names.iter().enumerate() {
            let Some(path) = found.multipliers(j, self.horizon, 1.0 - task.request.level) else {
                continue;
            };
            for (h, (response, error)) in path.response.iter().zip(&path.standard_error).enumerate()
            {
                table.rows.push(vec![
                    Cell::from(h),
                    Cell::from(*name),
                    (*response).into(),
                    (*error).into(),
                    (response - path.quantile * error).into(),
                    (response + path.quantile * error).into(),
                ]);
            }
        }
        draft.tables.push(table);
    }
}

/// Says what the bounds tests come to together.
fn tell_relation(relation: LevelRelation, draft: &mut Draft) {
    let words = relation_words(relation);
    draft.statistics.push(EstimateStatistic {
        name: "level_relation".to_owned(),
        value: None,
        note: words.to_owned(),
    });
    if relation != LevelRelation::Cointegrated {
        draft
            .findings
            .push(judge::no_cointegration(format!("Bounds tests: {words}")));
    }
}

fn set_bounds(
    test: &mut EstimateTest,
    pair: &[NullDistribution; 2],
    quantile: impl Fn(&NullDistribution, f64) -> f64,
    error: impl Fn(&NullDistribution, f64) -> f64,
) {
    for level in LEVELS {
        for (bound, drawn) in ["lower", "upper"].into_iter().zip(pair) {
            test.critical_values.push(CriticalValue {
                level,
                bound: Some(bound.to_owned()),
                value: finite(quantile(drawn, level)),
                std_error: finite(error(drawn, level)),
            });
        }
    }
}

/// The verdict of a bounds test from p-values at both bounds.
fn between(null: &str, lower: f64, upper: f64) -> String {
    let (lower, upper) = (lower.min(upper), lower.max(upper));
    let p = format!("p between {lower:.4} and {upper:.4}");
    if upper < 0.05 {
        format!("{null} is rejected at the 5 % level, whatever the order of integration ({p}).")
    } else if lower >= 0.05 {
        format!("{null} is not rejected at the 5 % level, whatever the order of integration ({p}).")
    } else {
        format!("{null}: no conclusion at the 5 % level without the order of integration ({p}).")
    }
}

fn relation_words(relation: LevelRelation) -> &'static str {
    match relation {
        LevelRelation::Cointegrated => "cointegrated: all three tests reject at 5 %",
        LevelRelation::DependentStationary => {
            "degenerate: the dependent variable is stationary by itself, the regressors have no part in a relation"
        }
        LevelRelation::NoAdjustment => {
            "degenerate: nothing draws the dependent variable back to the relation"
        }
        LevelRelation::None => "no level relation at 5 %",
        LevelRelation::Inconclusive => "no conclusion at 5 %",
    }
}

fn case_words(case: BoundsCase) -> &'static str {
    match case {
        BoundsCase::I => "no constant, no trend",
        BoundsCase::II => "constant restricted to the level relation",
        BoundsCase::III => "unrestricted constant",
        BoundsCase::IV => "unrestricted constant, trend restricted to the level relation",
        BoundsCase::V => "unrestricted constant and trend",
    }
}
