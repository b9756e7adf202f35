//! How often each test rejects at 5 % where its null hypothesis holds.

use realterms::estimate::{
    ArdlData, ArdlOrders, AuxiliaryTest, Blocks, BoundsCase, BoundsDesign, Break,
    CointegratingScores, Deterministic, Instability, JohansenCase, KpssLags, LagCriterion, Lags,
    NoStore, NullDistribution, Ols, Regressor, ScoreDeterministic, Simulation, TestResult,
    UnknownBreak, adf, arch, bootstrap_bounds, breusch_godfrey, breusch_pagan,
    breusch_pagan_studentised, chow, cusum_of_squares, cusum_ols, cusum_recursive, df_gls,
    durbin_watson, engle_granger, hansen_1992, in_parallel, instability_null, jarque_bera,
    johansen, kpss, ljung_box, phillips_perron, replicate, reset, simulate, simulate_unit_root,
    unknown_break, white, zivot_andrews,
};
use realterms::random::Draws;

const LEVEL: f64 = 0.05;
const CONSTANT: Deterministic = Deterministic::Constant;
const SIZES: [usize; 2] = [40, 80];
/// Replications of the null distributions that are simulated.
const NULL_DRAWS: usize = 4000;

/// Null distributions at one size.
struct Nulls {
    df_gls: NullDistribution,
    zivot_andrews: NullDistribution,
    trace: NullDistribution,
    bounds: [NullDistribution; 3],
    hansen: Vec<Instability>,
}

fn lags() -> Lags {
    Lags::Chosen {
        by: LagCriterion::Aic,
        max: None,
    }
}

fn walk(name: &str, n: usize, draws: &mut Draws) -> Regressor {
    let mut level = 0.0;
    let values = (0..n).map(|_| {
        level += draws.normal();
        level
    });
    Regressor::new(name, values.collect())
}

fn trace(series: &[Regressor]) -> f64 {
    johansen(series, 1, JohansenCase::Constant, &[]).map_or(f64::NAN, |j| j.tests[0].trace)
}

fn orders() -> ArdlOrders {
    ArdlOrders {
        p: 1,
        q: vec![1, 1],
    }
}

impl Nulls {
    fn new(n: usize, threads: usize) -> Self {
        let simulation = Simulation {
            draws: NULL_DRAWS,
            seed: 5,
            threads,
        };
        let one = |name: &str, statistic: &(dyn Fn(&Regressor) -> f64 + Sync)| {
            simulate_unit_root(name, n, simulation, &NoStore, |y| Ok(statistic(y)))
        };
        let [trace] = simulate(simulation, "trace", &NoStore, |draws| {
            [trace(&[walk("a", n, draws), walk("b", n, draws)])]
        });
        let design = BoundsDesign {
            observations: n - 1,
            regressors: 2,
            case: BoundsCase::III,
            orders: Some(orders()),
        };
        let bounds = design.simulate(simulation, &NoStore);
        let bounds = bounds.expect("the orders suit the design");
        let upper = |null: &[NullDistribution; 2]| null[1].clone();
        let terms = ScoreDeterministic::Constant;
        let hansen = in_parallel(NULL_DRAWS, threads, |r| {
            instability_null(n, terms, 1, 5, r as u64).ok()
        });
        Self {
            df_gls: one("DF-GLS", &df_gls_statistic),
            zivot_andrews: one("Zivot–Andrews", &zivot_andrews_statistic),
            trace,
            hansen: hansen.into_iter().flatten().collect(),
            bounds: [
                upper(&bounds.f),
                upper(&bounds.t),
                upper(&bounds.f_regressors),
            ],
        }
    }
}

fn df_gls_statistic(y: &Regressor) -> f64 {
    df_gls(y, CONSTANT, lags()).map_or(f64::NAN, |t| t.statistic)
}

fn zivot_andrews_statistic(y: &Regressor) -> f64 {
    zivot_andrews(y, Break::Mean, Lags::Fixed(1), 0.15).map_or(f64::NAN, |t| t.statistic)
}

/// Prints the table for so many runs a cell.
pub(crate) fn print(runs: usize, threads: usize) {
    println!(
        "Rejections at 5 % under the null, per cent of {runs} runs (standard error: {:.1}).\n",
        100.0 * (LEVEL * (1.0 - LEVEL) / runs as f64).sqrt()
    );
    println!(
        "| test | null | {} |",
        SIZES.map(|n| format!("n = {n}")).join(" | ")
    );
    println!("|---|---|{}", "---|".repeat(SIZES.len()));
    let mut columns = Vec::new();
    for n in SIZES {
        let nulls = Nulls::new(n, threads);
        let simulation = Simulation {
            draws: runs,
            seed: n as u64,
            threads,
        };
        columns.push(replicate(simulation, |draws| run(n, draws, &nulls)));
    }
    for (i, (test, null, _)) in columns[0][0].iter().enumerate() {
        let cells: Vec<String> = columns.iter().map(|rows| share(rows, i)).collect();
        println!("| {test} | {null} | {} |", cells.join(" | "));
    }
}

/// Rejections among the runs in which the test could be computed.
fn share(rows: &[Vec<Row>], i: usize) -> String {
    let p: Vec<f64> = rows
        .iter()
        .map(|r| r[i].2)
        .filter(|p| !p.is_nan())
        .collect();
    let rejected = p.iter().filter(|p| **p < LEVEL).count();
    format!("{:.1}", 100.0 * rejected as f64 / p.len() as f64)
}

/// A test, its null hypothesis, its p-value.
type Row = (&'static str, &'static str, f64);

fn run(n: usize, draws: &mut Draws, nulls: &Nulls) -> Vec<Row> {
    let [y, x, z] = ["y", "x", "z"].map(|name| walk(name, n, draws));
    let mut rows = unit_roots(&y, nulls);
    rows.extend(stability(&x, draws, nulls));
    rows.extend(cointegration(&y, &[x, z], draws, nulls));
    rows.extend(diagnostics(n, draws));
    rows
}

fn unit_roots(y: &Regressor, nulls: &Nulls) -> Vec<Row> {
    const WALK: &str = "random walk";
    let noise: Vec<f64> = y.values.windows(2).map(|w| w[1] - w[0]).collect();
    let noise = Regressor::new("noise", noise);
    let p = |found: Result<f64, _>| found.unwrap_or(f64::NAN);
    vec![
        (
            "ADF, AIC",
            WALK,
            p(adf(y, CONSTANT, lags()).map(|t| t.p_value)),
        ),
        (
            "Phillips–Perron",
            WALK,
            p(phillips_perron(y, CONSTANT, None).map(|t| t.p_value)),
        ),
        (
            "DF-GLS, AIC, simulated null",
            WALK,
            nulls.df_gls.lower_tail(df_gls_statistic(y)),
        ),
        (
            "Zivot–Andrews, mean, simulated null",
            WALK,
            nulls.zivot_andrews.lower_tail(zivot_andrews_statistic(y)),
        ),
        (
            "KPSS, automatic lags",
            "white noise",
            p(kpss(&noise, CONSTANT, KpssLags::Automatic).map(|t| t.p_value)),
        ),
    ]
}

/// Hansen's tests on a regression in levels with independent errors, which is cointegrated and stable.
fn stability(x: &Regressor, draws: &mut Draws, nulls: &Nulls) -> Vec<Row> {
    const NULL: &str = "stable cointegration, simulated null";
    let regressors = vec![Regressor::constant(x.values.len()), x.clone()];
    let y: Vec<f64> = x.values.iter().map(|x| 2.0 * x + draws.normal()).collect();
    let Ok(fit) = Ols::fit(&y, regressors) else {
        return Vec::new();
    };
    let score = |r: &Regressor| {
        let products = r.values.iter().zip(&fit.residuals);
        products.map(|(x, e)| x * e).collect()
    };
    let input = CointegratingScores {
        scores: fit.regressors.iter().map(score).collect(),
        regressors: fit.regressors.clone(),
        omega: fit.s2,
    };
    let found = hansen_1992(&input, &nulls.hansen);
    let p = found.map_or([f64::NAN; 3], |t| {
        [t.lc.p_value, t.mean_f.p_value, t.sup_f.p_value]
    });
    vec![
        ("Hansen 1992, Lc", NULL, p[0]),
        ("Hansen 1992, MeanF", NULL, p[1]),
        ("Hansen 1992, SupF", NULL, p[2]),
    ]
}

fn cointegration(y: &Regressor, x: &[Regressor; 2], draws: &mut Draws, nulls: &Nulls) -> Vec<Row> {
    const NONE: &str = "independent random walks";
    let engle_granger = engle_granger(y, x, CONSTANT, lags());
    let data = ArdlData { y, x, fixed: &[] };
    let simulation = Simulation {
        draws: 199,
        seed: draws.uniform().to_bits(),
        threads: 1,
    };
    let case = BoundsCase::III;
    let found = bootstrap_bounds(&data, &orders(), case, 1, Blocks::Moving(1), simulation);
    let Ok(found) = found else {
        return Vec::new();
    };
    let (s, p) = (&found.statistics, found.p_values());
    let f_x = s.f_regressors.unwrap_or(f64::NAN);
    vec![
        (
            "Engle–Granger, AIC",
            NONE,
            engle_granger.map_or(f64::NAN, |t| t.p_value.unwrap_or(f64::NAN)),
        ),
        (
            "Johansen trace, simulated null",
            "two independent random walks",
            nulls.trace.upper_tail(trace(&[y.clone(), x[0].clone()])),
        ),
        (
            "bounds F, upper bound",
            NONE,
            nulls.bounds[0].upper_tail(s.f),
        ),
        (
            "bounds t, upper bound",
            NONE,
            nulls.bounds[1].lower_tail(s.t),
        ),
        (
            "bounds F of the regressors, upper bound",
            NONE,
            nulls.bounds[2].upper_tail(f_x),
        ),
        (
            "bounds, all three, upper bounds",
            NONE,
            nulls.bounds[0]
                .upper_tail(s.f)
                .max(nulls.bounds[1].lower_tail(s.t))
                .max(nulls.bounds[2].upper_tail(f_x)),
        ),
        (
            "bootstrap bounds, all three",
            NONE,
            p.f.max(p.t).max(p.f_regressors.unwrap_or(f64::NAN)),
        ),
        ("bootstrap bounds F", NONE, p.f),
        ("bootstrap bounds t alone", NONE, p.t),
        (
            "bootstrap bounds F of the regressors alone",
            NONE,
            p.f_regressors.unwrap_or(f64::NAN),
        ),
    ]
}

/// On a regression with independent normal errors and two independent regressors.
fn diagnostics(n: usize, draws: &mut Draws) -> Vec<Row> {
    const NULL: &str = "independent normal errors";
    let mut noise = |name: &str| Regressor::new(name, (0..n).map(|_| draws.normal()).collect());
    let regressors = vec![Regressor::constant(n), noise("x"), noise("z")];
    let y = noise("y").values;
    let Ok(fit) = Ols::fit(&y, regressors) else {
        return Vec::new();
    };
    let p = |found: Result<TestResult, _>| found.map_or(f64::NAN, |t| t.p_value);
    let lm = |found: Result<AuxiliaryTest, _>| {
        found.map_or([f64::NAN; 2], |t| [t.lm.p_value, t.f.p_value])
    };
    let godfrey = lm(breusch_godfrey(&fit, 2));
    let arch = lm(arch(&fit, 2));
    let pagan = lm(breusch_pagan_studentised(&fit));
    let white = lm(white(&fit));
    let unknown = unknown_break(&fit, 0.15).ok();
    let of_unknown = |pick: fn(&UnknownBreak) -> f64| unknown.as_ref().map_or(f64::NAN, pick);
    let watson = durbin_watson(&fit, false).map_or(f64::NAN, |t| t.p_positive);
    [
        ("Durbin–Watson, against positive", watson),
        ("Breusch–Godfrey(2), LM", godfrey[0]),
        ("Breusch–Godfrey(2), F", godfrey[1]),
        ("Ljung–Box(4)", p(ljung_box(&fit, 4))),
        ("ARCH(2), LM", arch[0]),
        ("ARCH(2), F", arch[1]),
        ("Breusch–Pagan, studentised, LM", pagan[0]),
        ("Breusch–Pagan, original", p(breusch_pagan(&fit))),
        ("White, LM", white[0]),
        ("White, F", white[1]),
        ("Jarque–Bera", jarque_bera(&fit).p_value),
        ("RESET, powers 2 and 3", p(reset(&fit, 3))),
        ("Chow, at the middle", p(chow(&fit, n / 2))),
        (
            "CUSUM, recursive residuals",
            cusum_recursive(&fit).map_or(f64::NAN, |t| t.test.p_value),
        ),
        ("CUSUM, OLS residuals", cusum_ols(&fit).test.p_value),
        (
            "CUSUM of squares",
            cusum_of_squares(&fit).map_or(f64::NAN, |t| t.test.p_value),
        ),
        ("sup F (Hansen 1997)", of_unknown(|u| u.sup.p_value)),
        ("average F", of_unknown(|u| u.average.p_value)),
        ("exponential F", of_unknown(|u| u.exponential.p_value)),
    ]
    .map(|(test, p)| (test, NULL, p))
    .to_vec()
}
