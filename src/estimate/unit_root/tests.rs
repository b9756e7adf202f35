//! Unit-root tests against general-purpose libraries (statsmodels 0.15.0, arch 8.0.0, urca 1.3.3).

use serde_json::Value;

use super::super::test_data::{close, count, crosscheck, danish, dynamics, more, us_log, us_trade};
use super::super::{Deterministic, Regressor, SeriesError};
use super::*;

const TERMS: [(&str, Deterministic); 3] = [
    ("n", Deterministic::None),
    ("c", Deterministic::Constant),
    ("ct", Deterministic::Trend),
];

fn number(value: &Value, key: &str) -> f64 {
    value[key].as_f64().unwrap_or_else(|| panic!("{key}"))
}

/// log p-values are compared, so that small ones count.
fn close_p(what: &str, found: f64, expected: f64) {
    if expected <= 0.0 || expected >= 1.0 {
        close(what, found, expected, 1e-12);
    } else {
        close(what, found.ln(), expected.ln(), 1e-6);
    }
}

fn critical(what: &str, found: &CriticalValues, expected: &Value) {
    for (level, value) in [("1%", found.one), ("5%", found.five), ("10%", found.ten)] {
        close(what, value, number(&expected["crit"], level), 1e-8);
    }
}

/// Returns how many statistics were compared.
fn compare(y: &Regressor, expected: &Value) -> usize {
    let mut compared = 0;
    let max = usize::try_from(expected["adf_maxlag"].as_u64().unwrap()).unwrap();
    assert_eq!(schwert_lags(y.values.len(), Deterministic::Trend), max);
    for (code, terms) in TERMS {
        let mut choices = vec![
            (
                "AIC",
                Lags::Chosen {
                    by: LagCriterion::Aic,
                    max: None,
                },
            ),
            (
                "BIC",
                Lags::Chosen {
                    by: LagCriterion::Bic,
                    max: Some(max),
                },
            ),
        ];
        for (name, lags) in [("lag0", 0), ("lag1", 1), ("lag4", 4)] {
            choices.push((name, Lags::Fixed(lags)));
        }
        for (choice, lags) in choices {
            let what = format!("{} adf_{code}_{choice}", y.name);
            let wanted = &expected[format!("adf_{code}_{choice}")];
            let found = adf(y, terms, lags).unwrap();
            close(&what, found.statistic, number(wanted, "stat"), 1e-8);
            close_p(&what, found.p_value, number(wanted, "p"));
            assert_eq!(Some(found.lags as u64), wanted["lag"].as_u64(), "{what}");
            assert_eq!(Some(found.observations as u64), wanted["nobs"].as_u64());
            critical(&what, &found.critical, wanted);
            compared += 1;
        }
        let what = format!("{} pp_{code}", y.name);
        let found = phillips_perron(y, terms, Some(4)).unwrap();
        let tau = &expected[format!("pp_{code}_tau_lag4")];
        close(&what, found.z_t, number(tau, "stat"), 1e-8);
        close_p(&what, found.p_value, number(tau, "p"));
        critical(&what, &found.critical, tau);
        let rho = &expected[format!("pp_{code}_rho_lag4")];
        close(&what, found.z_alpha, number(rho, "stat"), 1e-8);
        if terms == Deterministic::None {
            continue;
        }
        for choice in ["auto", "legacy", "4"] {
            let what = format!("{} kpss_{code}_{choice}", y.name);
            let wanted = &expected[format!("kpss_{code}_{choice}")];
            let lag = usize::try_from(wanted["lag"].as_u64().unwrap()).unwrap();
            let lags = if choice == "auto" {
                KpssLags::Automatic
            } else {
                KpssLags::Fixed(lag)
            };
            let found = kpss(y, terms, lags).unwrap();
            assert_eq!(found.lags, lag, "{what}");
            close(&what, found.statistic, number(wanted, "stat"), 1e-8);
            let p = number(wanted, "p_interpolated_in_0p01_0p10");
            close(&what, found.p_value, p, 1e-8);
            compared += 1;
        }
        let what = format!("{} dfgls_{code}", y.name);
        let found = df_gls(y, terms, Lags::Fixed(4)).unwrap();
        let wanted = number(&expected[format!("dfgls_{code}_lag4")], "stat");
        close(&what, found.statistic, wanted, 1e-8);
        compared += 2;
    }
    let found = zivot_andrews(y, Break::Both, Lags::Fixed(1), 0.15).unwrap();
    let wanted = number(&expected["zivot_andrews_ct_lag1"], "stat");
    close(&y.name, found.statistic, wanted, 1e-8);
    compared + 1
}

#[test]
fn all_tests_on_eleven_series() {
    let expected = dynamics();
    let mut compared = 0;
    for name in ["lrm", "lry", "ibo", "ide", "lpy"] {
        compared += compare(&danish(name), &expected["danish"]["unit_roots"][name]);
    }
    for (name, key) in [
        ("realgdp", "realgdp"),
        ("realcons", "realcons"),
        ("cpi_macrodata", "cpi_macrodata"),
    ] {
        compared += compare(&us_log(name), &expected["us_macro"]["unit_roots"][key]);
    }
    for name in ["ln_imports_real", "ln_real_gdp", "ln_pm_over_cpi"] {
        compared += compare(&us_trade(name), &expected["us_trade"]["unit_roots"][name]);
    }
    assert_eq!(compared, 11 * 26);
}

/// urca 1.3.3 scales the variances of Phillips–Perron otherwise, so that test is left out.
#[test]
fn danish_money_as_an_independent_program_has_it() {
    let r = &crosscheck()["ur_danish_lrm"];
    let y = danish("lrm");
    for (name, terms) in [
        ("none", Deterministic::None),
        ("drift", Deterministic::Constant),
        ("trend", Deterministic::Trend),
    ] {
        for lags in [0, 1, 4] {
            let found = adf(&y, terms, Lags::Fixed(lags)).unwrap().statistic;
            let wanted = number(&r["adf"], &format!("{name}_lag{lags}"));
            close(name, found, wanted, 1e-8);
        }
    }
    for (code, terms) in &TERMS[1..] {
        let found = kpss(&y, *terms, KpssLags::Fixed(4)).unwrap().statistic;
        close(
            "kpss",
            found,
            number(&r["kpss"], &format!("{code}_lag4")),
            1e-8,
        );
        let found = df_gls(&y, *terms, Lags::Fixed(4)).unwrap().statistic;
        close(
            "dfgls",
            found,
            number(&r["dfgls"], &format!("{code}_lag4")),
            1e-8,
        );
    }
    let found = zivot_andrews(&y, Break::Both, Lags::Fixed(1), 0.15).unwrap();
    close("za", found.statistic, number(r, "za_both_lag1"), 1e-8);
}

/// Choices of lags, quadratic trends and breaks that the other fixture lacks.
#[test]
fn further_choices() {
    let expected = &more()["unit_roots"];
    for (name, wanted) in expected.as_object().unwrap() {
        let y = match name.strip_prefix("ln_") {
            Some(us) => us_log(us),
            None => danish(name),
        };
        let lags_of = |key: &str| count(&wanted[key]["lags"]);
        let max = Some(count(&wanted["largest"]));
        for (code, terms) in [
            ("c", Deterministic::Constant),
            ("ct", Deterministic::Trend),
            ("ctt", Deterministic::QuadraticTrend),
        ] {
            let what = format!("{name} {code}");
            let chosen = |by| adf(&y, terms, Lags::Chosen { by, max }).unwrap();
            let key = format!("adf_{code}_tstat");
            let found = chosen(LagCriterion::TStatistic);
            assert_eq!(found.lags, lags_of(&key), "{what}");
            close(&what, found.statistic, number(&wanted[&key], "stat"), 1e-8);
            close_p(&what, found.p_value, number(&wanted[&key], "p"));
            let critical = wanted[&key]["crit"].as_array().unwrap();
            close(
                &what,
                found.critical.one,
                critical[0].as_f64().unwrap(),
                1e-8,
            );
            close(
                &what,
                found.critical.ten,
                critical[2].as_f64().unwrap(),
                1e-8,
            );
            if code == "ctt" {
                continue;
            }
            let key = format!("adf_{code}_maic");
            let found = chosen(LagCriterion::ModifiedAic);
            assert_eq!(found.lags, lags_of(&key), "{what}");
            close(&what, found.statistic, number(&wanted[&key], "stat"), 1e-8);
            let key = format!("dfgls_{code}_bic");
            let by = LagCriterion::Bic;
            let found = df_gls(&y, terms, Lags::Chosen { by, max }).unwrap();
            assert_eq!(found.lags, lags_of(&key), "{what}");
            close(&what, found.statistic, number(&wanted[&key], "stat"), 1e-8);
        }
        for (key, kind) in [
            ("za_mean_lag2", Break::Mean),
            ("za_trend_lag2", Break::Trend),
            ("za_both_lag2", Break::Both),
        ] {
            let found = zivot_andrews(&y, kind, Lags::Fixed(2), 0.15).unwrap();
            let wanted = number(wanted, key);
            let first = y.values.len() * 15 / 100 + 1;
            if kind == Break::Trend && found.break_after == first {
                // The library dates a break of the trend one observation earlier and so tries one more here.
                assert!(wanted < found.statistic);
            } else {
                close(&format!("{name} {key}"), found.statistic, wanted, 1e-8);
            }
        }
    }
}

#[test]
fn lag_rules_keep_to_their_definitions() {
    let y = danish("lrm");
    // The last lag of the chosen equation is significant at 10 %, those of longer ones are not.
    let by = LagCriterion::TStatistic;
    let max = Some(6);
    let chosen = adf(&y, Deterministic::Constant, Lags::Chosen { by, max }).unwrap();
    assert_eq!(chosen.max_lags, max);
    assert!(chosen.lags > 0 && chosen.observations == 54 - chosen.lags);
}

#[test]
fn a_break_is_found_where_it_is() {
    let mut state = 0.3_f64;
    let values = (0..80)
        .map(|t| {
            state = (state * 3.9 * (1.0 - state)).clamp(0.01, 0.99);
            let level = if t < 45 { 0.0 } else { 6.0 };
            level + 0.05 * f64::from(t) + state
        })
        .collect();
    let y = Regressor::new("y", values);
    let found = zivot_andrews(&y, Break::Mean, Lags::Fixed(0), 0.15).unwrap();
    assert!(
        found.statistic < -6.0 && found.break_after.abs_diff(45) <= 1,
        "{found:?}"
    );
}

#[test]
fn faults_name_the_series() {
    let lags = Lags::Fixed(1);
    let adf = |values: Vec<f64>| {
        adf(
            &Regressor::new("exports", values),
            Deterministic::Constant,
            lags,
        )
        .unwrap_err()
    };
    let series = "exports".to_owned();
    assert_eq!(
        adf(vec![2.0; 30]),
        SeriesError::Constant {
            series: series.clone()
        }
    );
    let line = (0..30).map(|t| 3.0 + 2.0 * f64::from(t)).collect();
    assert!(matches!(
        adf(line),
        SeriesError::Constant { .. } | SeriesError::Collinear { .. }
    ));
    let mut gap = danish("lrm").values;
    gap[3] = f64::NAN;
    assert_eq!(
        adf(gap),
        SeriesError::Missing {
            series,
            observation: 4
        }
    );
    let short = adf(vec![1.0, 2.0, 1.5, 3.0]);
    assert!(
        matches!(short, SeriesError::TooShort { needed: 6, .. }),
        "{short}"
    );
    assert!(short.to_string().contains("exports has 4 observations"));
    let y = danish("lrm");
    assert!(kpss(&y, Deterministic::None, KpssLags::Automatic).is_err());
    assert!(df_gls(&y, Deterministic::None, lags).is_err());
    assert!(phillips_perron(&y, Deterministic::QuadraticTrend, None).is_err());
    assert!(zivot_andrews(&y, Break::Both, lags, 0.5).is_err());
}

/// Surfaces at T → ∞ and where none exists.
#[test]
fn response_surfaces() {
    let far = mackinnon_critical(Deterministic::Constant, 12, 1_000_000_000).unwrap();
    close("12 series", far.five, -6.11279, 1e-6);
    assert!(mackinnon_critical(Deterministic::Constant, 13, 50).is_none());
    assert!(mackinnon_critical(Deterministic::None, 2, 50).is_none());
    assert!(mackinnon_p(-3.0, Deterministic::Trend, 7).is_none());
    // The two polynomials meet within the error of either.
    for series in 1..=6 {
        let five = mackinnon_critical(Deterministic::Trend, series, 1_000_000_000)
            .unwrap()
            .five;
        let p = mackinnon_p(five, Deterministic::Trend, series).unwrap();
        assert!((p - 0.05).abs() < 0.002, "{series}: {p}");
    }
}
