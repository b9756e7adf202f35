//! The page's part on equations: elasticities, dynamics, tests.

use super::words::estimator_label;
use super::{ACROSS, Page};
use crate::study::outcome::{EquationResult, Estimate, EstimatorResult, TestGroup};
use crate::study::run::compound;

type Cell<'c> = &'c dyn Fn(&EstimatorResult) -> Option<String>;

impl Page<'_> {
    pub(super) fn elasticities(&mut self) {
        self.section("Elasticities and equations");
        self.line("Standard errors in brackets.");
        // A third digit where two would show no error at all.
        let plain = |e: &Estimate| {
            let digits = if e.std_error < 0.01 { 3 } else { 2 };
            format!("{:.digits$} ({:.digits$})", e.value, e.std_error)
        };
        let rate = |e: &Option<Estimate>| e.as_ref().map(plain);
        let rows: [(&str, Cell<'_>); 14] = [
            ("imports: income elasticity", &|r| {
                Some(plain(&r.import_income_elasticity))
            }),
            ("imports: price elasticity", &|r| {
                rate(&r.import_price_elasticity)
            }),
            ("imports: autonomous growth, log %", &|r| {
                rate(&r.import_autonomous_growth)
            }),
            ("imports: R2, Durbin-Watson, n", &|r| {
                Some(fit(&r.import_demand))
            }),
            ("imports: lags", &|r| lags(&r.import_demand)),
            ("imports: adjustment, half-life", &|r| {
                adjustment(&r.import_demand)
            }),
            ("imports: no level relation, p", &|r| {
                cointegration(&r.import_demand)
            }),
            ("exports: income elasticity", &|r| {
                Some(plain(&r.export_income_elasticity))
            }),
            ("exports: price elasticity", &|r| {
                rate(&r.export_price_elasticity)
            }),
            ("exports: autonomous growth, log %", &|r| {
                rate(&r.export_autonomous_growth)
            }),
            ("exports: R2, Durbin-Watson, n", &|r| {
                Some(fit(&r.export_demand))
            }),
            ("exports: lags", &|r| lags(&r.export_demand)),
            ("exports: adjustment, half-life", &|r| {
                adjustment(&r.export_demand)
            }),
            ("exports: no level relation, p", &|r| {
                cointegration(&r.export_demand)
            }),
        ];
        for estimators in self.outcome.estimators.chunks(ACROSS) {
            self.estimator_heads(estimators);
            for (label, cell) in &rows {
                let cells: Vec<Option<String>> = estimators.iter().map(cell).collect();
                if cells.iter().any(Option::is_some) {
                    let absent = || "-".to_owned();
                    let cells: Vec<String> = cells
                        .into_iter()
                        .map(|c| c.unwrap_or_else(absent))
                        .collect();
                    self.row(label, &cells);
                }
            }
        }
        self.average_growth();
    }

    fn average_growth(&mut self) {
        let growth = &self.outcome.growth;
        let mut means = vec![
            ("exports", growth.exports),
            ("imports", growth.imports),
            ("home activity", growth.home_activity),
            ("foreign income", growth.foreign_income),
        ];
        let prices = [
            ("terms of trade", growth.terms_of_trade),
            ("home over import price", growth.import_relative_price),
            (
                "export over competitors' price",
                growth.export_relative_price,
            ),
        ];
        means.extend(
            prices
                .iter()
                .filter_map(|(label, g)| g.map(|g| (*label, g))),
        );
        let means: Vec<String> = means
            .iter()
            .map(|(label, g)| format!("{label} {:.2}", compound(*g)))
            .collect();
        self.text.push('\n');
        self.paragraph(&format!("Average growth: {}.", means.join(", ")), "");
    }

    /// Every test of every equation, one paragraph an equation.
    pub(super) fn tests(&mut self) {
        let outcome = self.outcome;
        let given = |e: &EquationResult| !e.tests.is_empty();
        let mut any = outcome.estimators.iter();
        if !any.any(|e| given(&e.import_demand) || given(&e.export_demand)) {
            return;
        }
        self.section("Tests of the equations");
        self.paragraph(
            "Statistics with p-values or 5 per cent critical values. Diagnostics and tests of exogeneity are passed \
             where p is large, tests of no level relation and of weak instruments where it is small.",
            "",
        );
        if let Some(simulation) = outcome.simulation {
            self.line(&format!(
                "Critical values of bounds and trace tests: {} draws at the exact size, seed {}.",
                simulation.draws, simulation.seed
            ));
        }
        for result in &outcome.estimators {
            let label = estimator_label(result.estimator);
            for (noun, equation) in [
                ("imports", &result.import_demand),
                ("exports", &result.export_demand),
            ] {
                if given(equation) {
                    self.paragraph(&format!("{label}, {noun}: {}.", tests(equation)), "  ");
                }
            }
        }
    }
}

fn tests(equation: &EquationResult) -> String {
    let told = equation.tests.iter().map(|test| {
        let Some(statistic) = test.statistic else {
            return format!("{}: {}", test.name, test.sentence.trim_end_matches('.'));
        };
        let beside = match (test.p, test.critical) {
            (_, Some(critical)) => format!("5 % value {critical:.2}"),
            (Some(p), None) if p < 0.0005 => "p <0.001".to_owned(),
            (Some(p), None) => format!("p {p:.3}"),
            (None, None) => test.distribution.clone(),
        };
        format!("{} {statistic:.2} ({beside})", test.name)
    });
    told.collect::<Vec<_>>().join("; ")
}

fn fit(equation: &EquationResult) -> String {
    let two = |v: Option<f64>| v.map_or_else(|| "-".to_owned(), |v| format!("{v:.2}"));
    format!(
        "{}, {}, {}",
        two(equation.r_squared),
        two(equation.durbin_watson),
        equation.observations
    )
}

fn lags(equation: &EquationResult) -> Option<String> {
    let dynamics = equation.dynamics.as_ref()?;
    let lags: Vec<String> = dynamics.lags.iter().map(ToString::to_string).collect();
    let lags = lags.join(", ");
    Some(match (dynamics.case, dynamics.leads) {
        (Some(case), _) => format!("({lags}), case {case:?}"),
        (None, Some(leads)) => format!("{lags}, leads {leads}"),
        (None, None) => lags,
    })
}

fn adjustment(equation: &EquationResult) -> Option<String> {
    let found = equation.adjustment?;
    let half_life = found
        .half_life_years
        .map_or_else(|| "none".to_owned(), |years| format!("{years:.1} years"));
    Some(format!(
        "{:.2} ({:.2}), {half_life}",
        found.speed, found.std_error
    ))
}

/// p-values of the tests of a level relation.
fn cointegration(equation: &EquationResult) -> Option<String> {
    let tests = equation.tests.iter();
    let told: Vec<String> = tests
        .filter(|t| t.group == TestGroup::Cointegration)
        .filter_map(|t| {
            let name = match t.name.as_str() {
                "F of lagged regressors" => "Fx ",
                name if name.starts_with("bounds F") => "F ",
                name if name.starts_with("bounds t") => "t ",
                name if name.starts_with("trace") => name.trim_start_matches("trace, "),
                _ => "",
            };
            let space = if name.starts_with("rank") { " " } else { "" };
            t.p.map(|p| format!("{name}{space}{p:.3}"))
        })
        .collect();
    (!told.is_empty()).then(|| told.join(", "))
}
