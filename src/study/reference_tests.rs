//! Studies on real data, against figures computed elsewhere.

use serde_json::{Value, json};

use super::tests::{Inputs, close, document, insert, parse};
use super::*;

fn numbers(value: &Value) -> Vec<f64> {
    let values = value.as_array().unwrap();
    values.iter().map(|v| v.as_f64().unwrap()).collect()
}

/// The inputs of a study of one country. The file's import relative price is the other way up: Rm = 1/rpm, but
/// Rx = rpx.
fn penn(country: &Value) -> Inputs {
    let mut inputs = Inputs::new();
    for (name, measure, sign) in [
        ("ln_m", "imports_real", 1.0),
        ("ln_y", "gdp_real", 1.0),
        ("ln_rpm", "import_relative_price", -1.0),
        ("ln_x", "exports_real", 1.0),
        ("ln_z", "foreign_income", 1.0),
        ("ln_rpx", "export_relative_price", 1.0),
    ] {
        let values = numbers(&country["series"][name]);
        let levels = values.iter().map(|v| (sign * v).exp()).collect();
        insert(&mut inputs, measure, "1960", levels);
    }
    let tt = numbers(&country["terms_of_trade"]);
    insert(&mut inputs, "terms_of_trade", "1960", tt);
    inputs
}

/// ARDL(1,1,1) of the twelve countries: adjustment, long run and bounds statistics against the library, and the
/// countries whose data cannot answer come out unreliable, with the reasons.
#[test]
fn ardl_of_twelve_countries_and_those_it_cannot_answer() {
    let text = include_str!("../../fixtures/reference/pwt91-trade.json");
    let countries: Value = serde_json::from_str(text).unwrap();
    let text = include_str!("../../fixtures/reference/pwt91-ardl.json");
    let figures: Value = serde_json::from_str(text).unwrap();
    let mut value = document();
    value["estimators"] = json!(["ardl"]);
    value["headline"]["estimator"] = json!("ardl");
    value["ardl"] = json!({"import_orders": [1, 1, 1], "export_orders": [1, 1, 1]});
    value["simulation"] = json!({"draws": 400});
    let document = parse(&value);
    for (area, country) in countries.as_object().unwrap() {
        let outcome = run(&document, &penn(country)).unwrap();
        let result = &outcome.estimators[0];
        for (found, side, names) in [
            (&result.import_demand, "import", ["const", "ln_y", "ln_rpm"]),
            (&result.export_demand, "export", ["const", "ln_z", "ln_rpx"]),
        ] {
            let wanted = &figures[area][side];
            let what = format!("{area} {side}");
            let number = |key: &str| wanted[key].as_f64().unwrap();
            assert_eq!(Some(u64::from(found.observations)), wanted["n"].as_u64());
            let adjustment = found.adjustment.unwrap();
            close(adjustment.speed, number("ect_coef"), &what);
            close(adjustment.std_error, number("ect_bse"), &what);
            for (found, name) in found.long_run.iter().zip(names).skip(1) {
                // Rm is the inverse of rpm.
                let sign = if name == "ln_rpm" { -1.0 } else { 1.0 };
                let wanted = &wanted["longrun"][name];
                close(
                    found.estimate,
                    sign * wanted["coef"].as_f64().unwrap(),
                    &what,
                );
                close(found.std_error, wanted["se"].as_f64().unwrap(), &what);
            }
            for (name, key) in [("bounds F", "F_by_hand"), ("bounds t", "t_y_lag1")] {
                let test = found.tests.iter().find(|t| t.name == name).unwrap();
                let wanted = wanted["bounds_iii"][key].as_f64().unwrap();
                close(test.statistic.unwrap(), wanted, &what);
            }
        }
        let reasons: Vec<&str> = result.forms.iter().fold(Vec::new(), |mut all, form| {
            let reasons = form.unreliable.iter().flat_map(|u| &u.reasons);
            all.extend(reasons.map(|r| r.code.as_str()));
            all
        });
        println!("{area}: {reasons:?}");
        let strong = &result.forms[2];
        let cannot = ["FRA", "IND", "ITA", "JPN", "KOR", "MEX"].contains(&area.as_str());
        assert_eq!(
            reasons.contains(&"adjustment_outside_range"),
            cannot,
            "{area}"
        );
        if cannot {
            assert!(strong.numbers.rate.is_none(), "{area}");
            assert!(
                strong.unreliable.is_some() || strong.refused.is_some(),
                "{area}"
            );
            let page = text::render(&outcome, &[], false);
            assert!(page.contains("adjustment_outside_range"), "{page}");
        }
        if ["ITA", "JPN"].contains(&area.as_str()) {
            assert!(reasons.contains(&"no_cointegration"), "{area}: {reasons:?}");
            assert!(
                reasons.contains(&"insignificant_income_elasticity"),
                "{area}: {reasons:?}"
            );
        }
    }
}

/// Dynamic and fully modified least squares of the same demands against the libraries.
#[test]
fn cointegrating_regressions_are_those_of_the_libraries() {
    let text = include_str!("../../fixtures/reference/pwt91-trade.json");
    let countries: Value = serde_json::from_str(text).unwrap();
    let text = include_str!("../../fixtures/reference/dynamics.json");
    let figures: Value = serde_json::from_str(text).unwrap();
    let mut value = document();
    value["estimators"] = json!(["dols", "fmols"]);
    value["headline"]["estimator"] = json!("dols");
    for (area, figures) in figures["pwt91"].as_object().unwrap() {
        for (side, income, price, sign) in [
            ("import", "ln_y", "ln_rpm", -1.0),
            ("export", "ln_z", "ln_rpx", -1.0),
        ] {
            let wanted = &figures[format!("{side}_dols_1_1")];
            value["lags"] = wanted["hac_lag"].clone();
            let outcome = run(&parse(&value), &penn(&countries[area])).unwrap();
            let number = |value: &Value| value.as_f64().unwrap();
            for (i, estimator) in ["arch_dols_unadjusted", "arch_fmols"].iter().enumerate() {
                let what = format!("{area} {side} {estimator}");
                let result = &outcome.estimators[i];
                let (found, found_price) = if side == "import" {
                    (
                        result.import_income_elasticity,
                        result.import_price_elasticity,
                    )
                } else {
                    (
                        result.export_income_elasticity,
                        result.export_price_elasticity,
                    )
                };
                if i == 0 {
                    close(found.value, number(&wanted["params"][1]), &what);
                    close(
                        found_price.unwrap().value,
                        sign * number(&wanted["params"][2]),
                        &what,
                    );
                } else {
                    let params = &wanted[estimator]["params"];
                    close(found.value, number(&params[income]), &what);
                    close(
                        found_price.unwrap().value,
                        sign * number(&params[price]),
                        &what,
                    );
                }
                let error = number(&wanted[estimator]["bse"][income]);
                close(found.std_error, error, &what);
            }
        }
    }
}

/// Twelve countries of the Penn World Table 9.1, against a general-purpose statistics library: both
/// demand equations and the growth rates in levels and differences, with the delta method, no
/// covariance across equations, and export growth as given.
#[test]
fn twelve_countries_of_the_penn_world_table() {
    let text = include_str!("../../fixtures/reference/pwt91-trade.json");
    let countries: Value = serde_json::from_str(text).unwrap();
    let mut value = document();
    value["covariance"] = json!("classical");
    value["interval"] = json!({"method": "delta", "cross_covariance": "zero"});
    let document = parse(&value);
    for (area, country) in countries.as_object().unwrap() {
        let inputs = penn(country);
        let outcome = run(&document, &inputs).unwrap();

        let bop = &country["bop"];
        let mean = |name: &str| bop[name].as_f64().unwrap();
        close(outcome.actual_growth / 100.0, mean("y_mean_dlog"), area);
        close(outcome.growth.exports / 100.0, mean("x_mean_dlog"), area);
        close(
            outcome.growth.foreign_income / 100.0,
            mean("z_mean_dlog"),
            area,
        );
        let rm = outcome.growth.import_relative_price.unwrap();
        close(rm / 100.0, -mean("ln_rpm_mean_dlog"), area);
        let rx = outcome.growth.export_relative_price.unwrap();
        close(rx / 100.0, mean("ln_rpx_mean_dlog"), area);

        for (result, name) in outcome.estimators.iter().zip(["levels", "dlog"]) {
            let estimates = &bop["estimates"][name];
            let wanted = |key: &str| estimates[key].as_f64().unwrap();
            let what = format!("{area} {name}");
            close(result.import_income_elasticity.value, wanted("pi"), &what);
            close(
                result.import_income_elasticity.std_error,
                wanted("pi_se"),
                &what,
            );
            close(result.export_income_elasticity.value, wanted("eps"), &what);
            close(
                result.export_income_elasticity.std_error,
                wanted("eps_se"),
                &what,
            );
            // psi = −η and eta = −η* in the file.
            close(
                result.import_price_elasticity.unwrap().value,
                -wanted("psi"),
                &what,
            );
            close(
                result.export_price_elasticity.unwrap().value,
                -wanted("eta"),
                &what,
            );
            for (found, side, price_sign) in [
                (&result.import_demand, "import", -1.0),
                (&result.export_demand, "export", 1.0),
            ] {
                let equation = &country[format!("{side}_{name}")];
                check_equation(found, equation, price_sign, &format!("{what} {side}"));
            }
            for (i, key) in [(0, "yb_weak"), (2, "yb_strong"), (3, "yb_relative_prices")] {
                let form = &result.forms[i];
                let numbers = form
                    .unreliable
                    .as_ref()
                    .map_or(&form.numbers, |u| &u.numbers);
                close(numbers.rate.unwrap() / 100.0, wanted(key), &what);
                let error = match key {
                    "yb_weak" => wanted("yb_weak_se_x_fixed"),
                    "yb_strong" => wanted("yb_strong_se_cov0"),
                    _ => continue,
                };
                close(numbers.std_error.unwrap() / 100.0, error, &what);
            }
        }
    }
}

/// `price_sign` is −1 where the file's relative price is the other way up: its coefficient has the other sign.
fn check_equation(found: &EquationResult, wanted: &Value, price_sign: f64, what: &str) {
    let value = |key: &str| wanted[key].as_f64().unwrap();
    assert_eq!(
        Some(u64::from(found.observations)),
        wanted["n"].as_u64(),
        "{what}"
    );
    close(found.r_squared.unwrap(), value("rsquared"), what);
    close(
        found.adjusted_r_squared.unwrap(),
        value("rsquared_adj"),
        what,
    );
    close(found.durbin_watson.unwrap(), value("durbin_watson"), what);
    close(found.residual_std_dev, value("s2").sqrt(), what);
    for (j, coefficient) in found.coefficients.iter().enumerate() {
        let sign = if j == 2 { price_sign } else { 1.0 };
        close(
            coefficient.estimate,
            sign * numbers(&wanted["params"])[j],
            what,
        );
        close(
            coefficient.std_error_classical.unwrap(),
            numbers(&wanted["bse"])[j],
            what,
        );
        let robust = numbers(&wanted["hac_L0_corr"]["bse"])[j];
        close(coefficient.std_error_newey_west.unwrap(), robust, what);
        close(
            coefficient.t.unwrap(),
            sign * numbers(&wanted["t"])[j],
            what,
        );
    }
    assert_eq!(
        Some(u64::from(found.lags)),
        wanted["hac_L0"]["lag"].as_u64(),
        "{what}"
    );
}
