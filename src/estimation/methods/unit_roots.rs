//! Tests for a unit root and for stationarity of one series.

use super::Procedure;
use crate::estimate::{
    Break, CriticalValues, Deterministic, KpssLags, LagCriterion, Lags, NullDistribution, Ols,
    PBound, Regressor, SeriesError, adf, covariance, df_gls, dickey_fuller_regression, kpss,
    phillips_perron, rule_of_thumb_lags, simulate_unit_root, zivot_andrews,
};
use crate::estimation::judge;
use crate::estimation::options::{Options, deterministic_name, deterministic_words};
use crate::estimation::report::{EstimateTest, small, statistic, verdict};
use crate::estimation::request::too_many;
use crate::estimation::rows::Rows;
use crate::estimation::task::{Draft, Outcome, Task};

/// Most lags of a test.
pub(super) const MOST_LAGS: usize = 100;
/// Most draws of a simulation, and most draws times observations.
pub(super) const MOST_DRAWS: usize = 200_000;
const MOST_DRAWN: usize = 50_000_000;
/// Levels of simulated critical values.
pub(super) const LEVELS: [f64; 3] = [0.01, 0.05, 0.10];

/// Reads `lags`, or `lag_selection` and `max_lags`.
pub(super) fn read_lags(options: &mut Options<'_>) -> Option<Lags> {
    let criteria = [
        ("aic", LagCriterion::Aic),
        ("bic", LagCriterion::Bic),
        ("t_statistic", LagCriterion::TStatistic),
        ("modified_aic", LagCriterion::ModifiedAic),
    ];
    let lags = options.maybe_count("lags", 0, MOST_LAGS)?;
    if let Some(lags) = lags {
        options.useless(&["lag_selection", "max_lags"], "lags are given");
        return Some(Lags::Fixed(lags));
    }
    let by = options.choice("lag_selection", &criteria);
    let max = options.maybe_count("max_lags", 0, MOST_LAGS);
    Some(Lags::Chosen { by: by?, max: max? })
}

/// How lags came about, in words.
pub(super) fn lags_words(asked: Lags, lags: usize, max: Option<usize>) -> String {
    let Lags::Chosen { by, .. } = asked else {
        return format!("{lags} lagged differences");
    };
    let by = match by {
        LagCriterion::Aic => "AIC",
        LagCriterion::Bic => "BIC",
        LagCriterion::TStatistic => "the t statistic of the last lag at 10 % from the longest down",
        LagCriterion::ModifiedAic => "the modified AIC of Ng and Perron 2001",
    };
    let among = max.map_or(String::new(), |m| {
        format!(" among 0 to {m} on a common sample")
    });
    format!("{lags} lagged differences, chosen by {by}{among}")
}

/// Critical values of `MacKinnon` at three levels.
pub(super) fn mackinnon(values: CriticalValues) -> [(f64, f64); 3] {
    [(0.01, values.one), (0.05, values.five), (0.10, values.ten)]
}

/// Reads `draws` and `seed` of a simulation; 0 draws: none.
pub(super) fn read_simulation(options: &mut Options<'_>, draws: usize) -> Option<(usize, u64)> {
    let draws = options.count("draws", draws, 0, MOST_DRAWS);
    let seed = options.count("seed", 1, 0, usize::MAX);
    Some((draws?, seed? as u64))
}

/// Refuses simulations that would take minutes.
pub(super) fn check_draws(draws: usize, n: usize) -> Outcome<()> {
    if draws * n > MOST_DRAWN {
        return Err(too_many("Draws times observations", draws * n, MOST_DRAWN));
    }
    Ok(())
}

/// First differences, one fewer than the values.
pub(super) fn changes(values: &[f64]) -> Vec<f64> {
    values.windows(2).map(|w| w[1] - w[0]).collect()
}

/// The first difference of a series after so many lagged differences.
fn change(y: &Regressor, lags: usize) -> Regressor {
    Regressor::new(&format!("d.{}", y.name), changes(&y.values[lags..]))
}

/// The regression behind a test. Coefficients of levels and deterministic terms
/// have no t distribution under a unit root: they come without p-values.
fn behind(task: &Task<'_>, draft: &mut Draft, fit: &Ols, dependent: &Regressor) -> Outcome<()> {
    let Regressor { name, values } = dependent;
    let first = task.n() - fit.n;
    let v = covariance(&[fit], super::least_squares::CLASSICAL).map_err(|e| task.refuse(e))?;
    let words = "classical; levels and deterministic terms have no t distribution here";
    let mut equation = task.fitted("Test regression", name, fit, &v, first, words);
    for c in &mut equation.coefficients {
        if !c.name.starts_with("d.") {
            (c.p, c.low, c.high) = (None, None, None);
        }
    }
    draft.equations.push(equation);
    draft.rows = Rows::of_fit(name, values, fit, first);
    Ok(())
}

/// A test against simulated quantiles of its lower tail.
fn lower_tail(
    mut test: EstimateTest,
    null: &str,
    statistic: f64,
    drawn: &NullDistribution,
) -> EstimateTest {
    test = test.judged(null, drawn.lower_tail(statistic));
    test = test.against(LEVELS.map(|l| (l, drawn.quantile(l))));
    for value in &mut test.critical_values {
        value.std_error = Some(drawn.quantile_error(value.level));
    }
    test
}

/// Augmented Dickey–Fuller.
pub(super) struct Adf {
    deterministic: Deterministic,
    lags: Lags,
}

impl Adf {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&[
            Deterministic::Constant,
            Deterministic::None,
            Deterministic::Trend,
            Deterministic::QuadraticTrend,
        ]);
        let lags = read_lags(options);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?,
        })
    }
}

impl Procedure for Adf {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let no = |e: SeriesError| task.refuse(e);
        let found = adf(y, self.deterministic, self.lags).map_err(no)?;
        let fit = dickey_fuller_regression(y, self.deterministic, found.lags).map_err(no)?;
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Augmented Dickey–Fuller test of {}: its first difference on {}, its lagged level and {}. p-value: \
             MacKinnon 1994; critical values: MacKinnon 2010 at {} rows.",
            y.name,
            deterministic_words(self.deterministic),
            lags_words(self.lags, found.lags, found.max_lags),
            found.observations
        ));
        let null = format!("A unit root in {}", y.name);
        let law = "Dickey–Fuller, lower tail (MacKinnon 1994, 2010)";
        draft.tests.push(
            EstimateTest::new("Augmented Dickey–Fuller", found.statistic, law)
                .judged(&null, found.p_value)
                .against(mackinnon(found.critical)),
        );
        draft.statistics = vec![
            statistic(
                "lagged_level_coefficient",
                found.coefficient,
                "coefficient of the lagged level",
            ),
            statistic("lags", f64::from(small(found.lags)), "lagged differences"),
            statistic(
                "aic",
                fit.aic,
                "k counts the regressors and not the variance",
            ),
            statistic(
                "bic",
                fit.bic,
                "k counts the regressors and not the variance",
            ),
        ];
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        behind(task, &mut draft, &fit, &change(y, found.lags))?;
        Ok(draft)
    }
}

/// Phillips–Perron.
pub(super) struct PhillipsPerron {
    deterministic: Deterministic,
    lags: Option<usize>,
    simulation: (usize, u64),
}

impl PhillipsPerron {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&[
            Deterministic::Constant,
            Deterministic::None,
            Deterministic::Trend,
        ]);
        let lags = options.maybe_count("lags", 0, MOST_LAGS);
        let simulation = read_simulation(options, 2000);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?,
            simulation: simulation?,
        })
    }
}

impl Procedure for PhillipsPerron {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let no = |e: SeriesError| task.refuse(e);
        let found = phillips_perron(y, self.deterministic, self.lags).map_err(no)?;
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Phillips–Perron test of {}: the series on {} and its lagged level; long-run variance by the \
             Bartlett kernel with {} lags (Hamilton 1994, equations 17.6.8 and 17.6.12).",
            y.name,
            deterministic_words(self.deterministic),
            found.lags
        ));
        let null = format!("A unit root in {}", y.name);
        draft.tests.push(
            EstimateTest::new(
                "Phillips–Perron Z_t",
                found.z_t,
                "Dickey–Fuller, lower tail (MacKinnon 1994, 2010)",
            )
            .judged(&null, found.p_value)
            .against(mackinnon(found.critical)),
        );
        let (draws, seed) = self.simulation;
        let z_alpha = EstimateTest::new(
            "Phillips–Perron Z_α",
            found.z_alpha,
            "simulated at the exact size",
        );
        draft.tests.push(if draws == 0 {
            z_alpha
        } else {
            check_draws(draws, task.n())?;
            let (deterministic, lags) = (self.deterministic, found.lags);
            let name = format!("Z_alpha;{};lags={lags}", deterministic_name(deterministic));
            let drawn = simulate_unit_root(
                &name,
                task.n(),
                task.simulation(draws, seed),
                task.store(),
                |y| Ok(phillips_perron(y, deterministic, Some(lags))?.z_alpha),
            );
            lower_tail(z_alpha, &null, found.z_alpha, &drawn)
        });
        let rows = found.observations;
        let mut regressors = self.deterministic.columns(rows);
        let level = y.values[..rows].to_vec();
        regressors.push(Regressor::new(&format!("{}.L1", y.name), level));
        let fit = Ols::fit(&y.values[1..], regressors).map_err(|e| task.refuse(e))?;
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        behind(
            task,
            &mut draft,
            &fit,
            &Regressor::new(&y.name, y.values[1..].to_vec()),
        )?;
        Ok(draft)
    }
}

/// Kwiatkowski, Phillips, Schmidt and Shin.
pub(super) struct Kpss {
    deterministic: Deterministic,
    lags: KpssLags,
}

impl Kpss {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&[Deterministic::Constant, Deterministic::Trend]);
        let lags = options.maybe_count("lags", 0, MOST_LAGS);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?.map_or(KpssLags::Automatic, KpssLags::Fixed),
        })
    }
}

impl Procedure for Kpss {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let found = kpss(y, self.deterministic, self.lags).map_err(|e| task.refuse(e))?;
        let how = match self.lags {
            KpssLags::Fixed(_) => "given",
            KpssLags::Automatic => "chosen from the residuals (Hobijn, Franses and Ooms 1998)",
        };
        let mut draft = Draft::default();
        draft.said.push(format!(
            "KPSS test of {} (Kwiatkowski, Phillips, Schmidt and Shin 1992): residuals from {}; long-run variance \
             by the Bartlett kernel with {} lags, {how}.",
            y.name,
            deterministic_words(self.deterministic),
            found.lags
        ));
        let around = if self.deterministic == Deterministic::Trend {
            "a trend"
        } else {
            "its mean"
        };
        let null = format!("Stationarity of {} around {around}", y.name);
        let mut test = EstimateTest::new("KPSS", found.statistic, "KPSS 1992, table 1, upper tail")
            .judged(&null, found.p_value)
            .against([0.10, 0.05, 0.025, 0.01].into_iter().zip(found.critical));
        let bound = match found.bound {
            PBound::Interpolated => None,
            PBound::AtMost => Some("below"),
            PBound::AtLeast => Some("above"),
        };
        if let Some(bound) = bound {
            let exact = verdict(&null, found.p_value);
            let said = format!("(p {bound} {:.2}).", found.p_value);
            let end = exact.rfind('(').unwrap_or(exact.len());
            test.sentence = format!("{}{said}", &exact[..end]);
        }
        draft.tests.push(test);
        draft.statistics = vec![statistic(
            "lags",
            f64::from(small(found.lags)),
            "of the Bartlett kernel",
        )];
        let fit = Ols::fit(&y.values, self.deterministic.columns(task.n()))
            .map_err(|e| task.refuse(e))?;
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        draft.rows = Rows::of_fit(&y.name, &y.values, &fit, 0);
        Ok(draft)
    }
}

/// Dickey–Fuller after detrending by generalised least squares.
pub(super) struct DfGls {
    deterministic: Deterministic,
    lags: Lags,
    simulation: (usize, u64),
}

impl DfGls {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let deterministic = options.deterministic(&[Deterministic::Constant, Deterministic::Trend]);
        let lags = read_lags(options);
        let simulation = read_simulation(options, 2000);
        Some(Self {
            deterministic: deterministic?,
            lags: lags?,
            simulation: simulation?,
        })
    }
}

impl Procedure for DfGls {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let y = task.dependent();
        let no = |e: SeriesError| task.refuse(e);
        let found = df_gls(y, self.deterministic, self.lags).map_err(no)?;
        let mut draft = Draft::default();
        draft.said.push(format!(
            "DF-GLS test of {} (Elliott, Rothenberg and Stock 1996): detrended by generalised least squares of {} \
             at 1 − {}/n; then the Dickey–Fuller regression without deterministic terms, {}.",
            y.name,
            deterministic_words(self.deterministic),
            if self.deterministic == Deterministic::Trend { "13.5" } else { "7" },
            lags_words(self.lags, found.lags, None)
        ));
        let null = format!("A unit root in {}", y.name);
        let mut test = EstimateTest::new("DF-GLS", found.statistic, "simulated at the exact size");
        let (draws, seed) = self.simulation;
        if draws > 0 {
            check_draws(draws, task.n())?;
            let (deterministic, lags) = (self.deterministic, found.lags);
            let name = format!("df_gls;{};lags={lags}", deterministic_name(deterministic));
            let drawn = simulate_unit_root(
                &name,
                task.n(),
                task.simulation(draws, seed),
                task.store(),
                |y| Ok(df_gls(y, deterministic, Lags::Fixed(lags))?.statistic),
            );
            test = lower_tail(test, &null, found.statistic, &drawn);
            draft.said.push(format!(
                "p-value from {draws} simulated random walks, seed {seed}."
            ));
        }
        draft.tests.push(test);
        let name = format!("{}, detrended", y.name);
        let detrended = Regressor::new(&name, found.detrended);
        let fit =
            dickey_fuller_regression(&detrended, Deterministic::None, found.lags).map_err(no)?;
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        behind(task, &mut draft, &fit, &change(&detrended, found.lags))?;
        Ok(draft)
    }
}

/// Zivot–Andrews.
pub(super) struct ZivotAndrews {
    kind: Break,
    lags: Lags,
    trim: f64,
    simulation: (usize, u64),
}

impl ZivotAndrews {
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let kinds = [
            ("both", Break::Both),
            ("mean", Break::Mean),
            ("trend", Break::Trend),
        ];
        let kind = options.choice("break", &kinds);
        let lags = read_lags(options);
        let trim = options.number("trim", 0.15, |t| (0.0..=1.0 / 3.0).contains(&t), "0 to 1/3");
        let simulation = read_simulation(options, 1000);
        Some(Self {
            kind: kind?,
            lags: lags?,
            trim: trim?,
            simulation: simulation?,
        })
    }
}

impl Procedure for ZivotAndrews {
    fn run(&self, task: &Task<'_>) -> Outcome<Draft> {
        let (y, n) = (task.dependent(), task.n());
        super::at_most(task, 1000)?;
        let found =
            zivot_andrews(y, self.kind, self.lags, self.trim).map_err(|e| task.refuse(e))?;
        let what = match self.kind {
            Break::Mean => "the mean",
            Break::Trend => "the slope of the trend",
            Break::Both => "the mean and the slope of the trend",
        };
        let last = task.period(found.break_after - 1);
        let mut draft = Draft::default();
        draft.said.push(format!(
            "Zivot–Andrews test of {} (1992): a unit root against stationarity around a trend with one break in \
             {what} at an unknown date, {} of the observations trimmed at either end; {}. The smallest t statistic is \
             found with {last} as the last period before the break.",
            y.name,
            self.trim,
            lags_words(self.lags, found.lags, None)
        ));
        let null = format!("A unit root in {}", y.name);
        let mut test = EstimateTest::new(
            "Zivot–Andrews",
            found.statistic,
            "simulated at the exact size",
        );
        let (draws, seed) = self.simulation;
        if draws > 0 {
            // Each draw tries every date.
            check_draws(draws, n * n / 8)?;
            let (kind, lags, trim) = (self.kind, found.lags, self.trim);
            let name = format!("zivot_andrews;{kind:?};lags={lags};trim={trim}");
            let drawn =
                simulate_unit_root(&name, n, task.simulation(draws, seed), task.store(), |y| {
                    Ok(zivot_andrews(y, kind, Lags::Fixed(lags), trim)?.statistic)
                });
            test = lower_tail(test, &null, found.statistic, &drawn);
            draft.said.push(format!(
                "p-value from {draws} simulated random walks, seed {seed}."
            ));
        }
        draft.tests.push(test);
        let fit = self
            .regression(y, found.lags, found.break_after)
            .map_err(|e| task.refuse(e))?;
        draft
            .findings
            .extend(judge::observations(task, fit.n, fit.k));
        behind(task, &mut draft, &fit, &change(y, found.lags))?;
        Ok(draft)
    }
}

impl ZivotAndrews {
    /// The regression at the break that was found.
    fn regression(
        &self,
        y: &Regressor,
        lags: usize,
        after: usize,
    ) -> Result<Ols, crate::estimate::EstimateError> {
        let n = y.values.len();
        let rows = n - 1 - lags;
        let change = changes(&y.values);
        let since = |t: usize| f64::from(small((lags + 2 + t).saturating_sub(after)));
        let mut regressors = Deterministic::Trend.columns(rows);
        if self.kind != Break::Trend {
            let step = (0..rows).map(|t| since(t).min(1.0)).collect();
            regressors.push(Regressor::new("step after the break", step));
        }
        if self.kind != Break::Mean {
            let slope = (0..rows).map(since).collect();
            regressors.push(Regressor::new("trend after the break", slope));
        }
        let level = y.values[lags..n - 1].to_vec();
        regressors.push(Regressor::new(&format!("{}.L1", y.name), level));
        regressors.extend((1..=lags).map(|i| {
            let values = change[lags - i..lags - i + rows].to_vec();
            Regressor::new(&format!("d.{}.L{i}", y.name), values)
        }));
        Ols::fit(&change[lags..], regressors)
    }
}

/// Lags of a kernel unless given, for descriptions.
pub(super) fn thumb(lags: Option<usize>, n: usize) -> String {
    match lags {
        Some(lags) => format!("{lags} lags"),
        None => format!("{} lags by rule of thumb", rule_of_thumb_lags(n)),
    }
}
