//! Golden cases, published tables, limiting cases and the geometry of intervals.

use approx::assert_relative_eq;
use proptest::prelude::*;
use serde_json::Value;

use super::*;
use crate::linalg::Matrix;

fn number(case: &Value, name: &str) -> f64 {
    case["inputs"][name].as_f64().unwrap()
}

fn list(case: &Value, name: &str) -> Vec<f64> {
    let values = case["inputs"][name].as_array().unwrap();
    values.iter().map(|v| v.as_f64().unwrap()).collect()
}

/// One relative price throughout, deflated by the home price: `px = p_Y = 0`, `pm = −r`.
fn one_price(case: &Value) -> (ExportDemand, ImportDemand) {
    let r = number(case, "rp");
    let exports = ExportDemand {
        income_elasticity: number(case, "eps").into(),
        foreign_income: number(case, "z"),
        price_elasticity: (-number(case, "eta")).into(),
        relative_price: r,
        ..ExportDemand::default()
    };
    let imports = ImportDemand {
        price: -r,
        income_elasticity: number(case, "pi").into(),
        price_elasticity: (-number(case, "psi")).into(),
        relative_price: r,
        ..ImportDemand::default()
    };
    (exports, imports)
}

fn sectors(case: &Value, z: &[f64]) -> Ratio {
    let exports: Vec<(f64, ExportDemand)> = (0..z.len())
        .map(|i| {
            let demand = ExportDemand {
                income_elasticity: list(case, "eps")[i].into(),
                foreign_income: z[i],
                ..ExportDemand::default()
            };
            (list(case, "wx")[i], demand)
        })
        .collect();
    let imports: Vec<(f64, ImportDemand)> = (0..z.len())
        .map(|i| {
            let demand = ImportDemand {
                income_elasticity: list(case, "pi")[i].into(),
                ..ImportDemand::default()
            };
            (list(case, "wm")[i], demand)
        })
        .collect();
    by_sector(&exports, &imports).unwrap()
}

/// Six published laws, each through the identity, against cases worked from closed forms.
#[test]
fn golden_cases() {
    let text = include_str!("../../fixtures/reference/bop-golden.json");
    let cases: Vec<Value> = serde_json::from_str(text).unwrap();
    assert_eq!(cases.len(), 6);
    for case in &cases {
        let model = case["model"].as_str().unwrap();
        let ratio = match model {
            "original" => {
                let (x, m) = one_price(case);
                capital_flows(&x, &m, 1.0, 0.0).unwrap()
            }
            "thirlwall_hussain_1982" => {
                let (x, m) = one_price(case);
                let real = number(case, "c") - number(case, "pd_");
                capital_flows(&x, &m, number(case, "th"), real).unwrap()
            }
            "moreno_brid_1998" => {
                let (x, m) = one_price(case);
                constant_deficit_ratio(&x, &m, number(case, "th"), 0.0).unwrap()
            }
            "moreno_brid_2003" => {
                let (x, m) = one_price(case);
                let (t1, t2) = (number(case, "t1"), number(case, "t2"));
                debt_service(&x, &m, t1, t2, number(case, "r"), 0.0).unwrap()
            }
            "multisector_araujo_lima_2007" => sectors(case, &[number(case, "z"); 2]),
            "multicountry_nell_2003_form" => sectors(case, &list(case, "z")),
            other => panic!("unknown case {other}"),
        };
        let wanted = case["y_b"].as_f64().unwrap();
        assert_relative_eq!(ratio.value(), wanted, epsilon = 1e-11);
    }
}

/// Thirlwall 1979: table I to the printed digit, table II within 0.01.
#[test]
fn thirlwall_1979() {
    let text = include_str!("../../fixtures/reference/thirlwall-1979.csv");
    let mut checked = 0;
    for line in text.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        let parse = |i: usize| cells[i].parse::<f64>().ok();
        let (Some(x), Some(pi), Some(printed)) = (parse(4), parse(5), parse(6)) else {
            continue;
        };
        let economy = Economy {
            exports: x,
            import_income_elasticity: pi.into(),
            ..Economy::default()
        };
        let y = Form::WeakForm.solve(&economy, false).unwrap().value();
        let tolerance = if cells[0] == "I" { 0.005 } else { 0.01 };
        assert!((y - printed).abs() < tolerance + 1e-9, "{line}: {y}");
        checked += 1;
    }
    assert_eq!(checked, 26);
}

#[test]
fn a_denominator_that_is_not_positive_is_refused_with_the_reason() {
    let economy = Economy {
        exports: 0.05,
        import_income_elasticity: (-0.2).into(),
        ..Economy::default()
    };
    let error = Form::WeakForm.solve(&economy, false).unwrap_err();
    assert!(matches!(
        error,
        ConstraintError::DenominatorNotPositive { .. }
    ));
    assert!(error.to_string().contains("must be positive"), "{error}");
    // π = 0.1 exceeds nothing once the inflow answers income by 0.3.
    let (exports, imports) = (
        ExportDemand::default(),
        ImportDemand {
            income_elasticity: 0.1.into(),
            ..ImportDemand::default()
        },
    );
    assert!(constant_deficit_ratio(&exports, &imports, 0.7, 0.0).is_err());
}

#[test]
fn a_form_says_which_price_it_lacks() {
    let economy = Economy {
        import_income_elasticity: 1.0.into(),
        import_relative_price: Some(0.0),
        ..Economy::default()
    };
    let error = Form::WithRelativePrices.solve(&economy, false).unwrap_err();
    let text = error.to_string();
    assert!(
        text.contains("terms of trade and a relative price of exports"),
        "{text}"
    );
    assert!(Form::StrongForm.solve(&economy, false).is_ok());
    let unequal = balance(&[Item::given(0.9, 0.0)], &[Item::given(1.0, 0.0)]).unwrap_err();
    assert!(matches!(
        unequal,
        ConstraintError::Shares {
            side: "receipts",
            ..
        }
    ));
}

/// Demands with every part present; coefficients 0 to 5 of a stack.
fn demands() -> impl Strategy<Value = (ExportDemand, ImportDemand)> {
    let g = || -0.1..0.1_f64;
    let e = || 0.2..2.5_f64;
    (g(), g(), e(), g(), e(), g(), (g(), g(), e(), e(), g())).prop_map(
        |(px, ax, eps, z, etax, rx, (pm, am, pi, etam, rm))| {
            let exports = ExportDemand {
                price: px,
                autonomous: Affine::coefficient(0, ax),
                income_elasticity: Affine::coefficient(1, eps),
                foreign_income: z,
                price_elasticity: Affine::coefficient(2, etax),
                relative_price: rx,
            };
            let imports = ImportDemand {
                price: pm,
                autonomous: Affine::coefficient(3, am),
                income_elasticity: Affine::coefficient(4, pi),
                price_elasticity: Affine::coefficient(5, etam),
                relative_price: rm,
            };
            (exports, imports)
        },
    )
}

fn economy(exports: &ExportDemand, imports: &ImportDemand, x: f64) -> Economy {
    Economy {
        exports: x,
        foreign_income: exports.foreign_income,
        terms_of_trade: Some(exports.price - imports.price),
        import_relative_price: Some(imports.relative_price),
        export_relative_price: Some(exports.relative_price),
        import_income_elasticity: imports.income_elasticity.clone(),
        export_income_elasticity: exports.income_elasticity.clone(),
        import_price_elasticity: imports.price_elasticity.clone(),
        export_price_elasticity: exports.price_elasticity.clone(),
        import_autonomous: imports.autonomous.clone(),
        export_autonomous: exports.autonomous.clone(),
    }
}

/// Relative equality with room for cancellation between growth rates of a few per cent.
fn same(a: f64, b: f64) -> bool {
    (a - b).abs() <= 1e-12 + 1e-11 * a.abs().max(b.abs())
}

proptest! {
    /// METHODS: each preset equals its closed form.
    #[test]
    fn presets_equal_closed_forms((xd, md) in demands(), x in -0.1..0.1_f64) {
        let e = economy(&xd, &md, x);
        let (pi, eps) = (md.income_elasticity.value, xd.income_elasticity.value);
        let (eta, eta_star) = (md.price_elasticity.value, xd.price_elasticity.value);
        let (am, ax) = (md.autonomous.value, xd.autonomous.value);
        let (tt, rm, rx) = (xd.price - md.price, md.relative_price, xd.relative_price);
        let z = xd.foreign_income;
        let value = |f: Form, a: bool| f.solve(&e, a).unwrap().value();
        prop_assert!(same(value(Form::WeakForm, false), x / pi));
        prop_assert!(same(value(Form::WeakForm, true), (x - am) / pi));
        prop_assert!(same(value(Form::WeakFormWithPrices, false), (x + tt - eta * rm) / pi));
        prop_assert!(same(value(Form::StrongForm, false), eps * z / pi));
        prop_assert!(same(value(Form::StrongForm, true), (eps * z + ax - am) / pi));
        let full = (tt - eta * rm - eta_star * rx + eps * z) / pi;
        prop_assert!(same(value(Form::WithRelativePrices, false), full));
        for (plain, priced) in [
            (Form::WeakForm, Form::WeakFormWithPrices),
            (Form::StrongForm, Form::WithRelativePrices),
        ] {
            let effect = plain.relative_price_effect(&e).unwrap().value();
            prop_assert!(same(effect, value(priced, false) - value(plain, false)));
        }
    }

    /// With one relative price and no autonomous growth: `[(1 − η − η*) r + ε z]/π`.
    #[test]
    fn one_relative_price_gives_the_textbook_law((mut xd, mut md) in demands(), r in -0.1..0.1_f64) {
        (xd.price, xd.relative_price, md.price, md.relative_price) = (r, r, 0.0, r);
        let found = Form::WithRelativePrices.solve(&economy(&xd, &md, 0.0), false).unwrap();
        let (eta, eta_star) = (md.price_elasticity.value, xd.price_elasticity.value);
        let n = (1.0 - eta - eta_star) * r + xd.income_elasticity.value * xd.foreign_income;
        prop_assert!(same(found.value(), n / md.income_elasticity.value));
    }

    /// θ = 1 collapses the laws with an inflow; at c = y_b a given inflow is one tied to income; no
    /// interest collapses debt service; one sector collapses sectors.
    #[test]
    fn laws_collapse_into_each_other(
        (xd, md) in demands(), theta in 0.8..1.1_f64, c in -0.1..0.1_f64, p in -0.1..0.1_f64
    ) {
        let e = economy(&xd, &md, 0.0);
        let full = Form::WithRelativePrices.solve(&e, true).unwrap();
        prop_assert!(same(capital_flows(&xd, &md, 1.0, c).unwrap().value(), full.value()));
        prop_assert!(same(by_sector(&[(1.0, xd.clone())], &[(1.0, md.clone())]).unwrap().value(), full.value()));
        prop_assert!(same(constant_deficit_ratio(&xd, &md, 1.0, p).unwrap().value(), full.value()));
        prop_assume!(md.income_elasticity.value > 0.4);
        let tied = constant_deficit_ratio(&xd, &md, theta, p).unwrap().value();
        let given = capital_flows(&xd, &md, theta, tied + p).unwrap().value();
        prop_assert!(same(tied, given));
        let free = debt_service(&xd, &md, theta, 0.0, c, p).unwrap().value();
        prop_assert!(same(free, tied));
    }

    /// One inflation rate in every price and nominal flow changes nothing, and the solution satisfies
    /// the identity.
    #[test]
    fn inflation_is_neutral_and_the_solution_balances(
        (xd, md) in demands(), i in -0.2..0.2_f64, interest in -0.1..0.1_f64, p in -0.1..0.1_f64
    ) {
        prop_assume!(md.income_elasticity.value > 0.5);
        let solve = |i: f64| {
            let x = ExportDemand { price: xd.price + i, ..xd.clone() };
            let m = ImportDemand { price: md.price + i, ..md.clone() };
            debt_service(&x, &m, 0.9, 0.05, interest + i, p + i).unwrap().value()
        };
        let y = solve(0.0);
        prop_assert!(same(y, solve(i)));
        let x = xd.price + xd.autonomous.value
            + xd.income_elasticity.value * xd.foreign_income
            - xd.price_elasticity.value * xd.relative_price;
        let m = md.price + md.autonomous.value
            + md.price_elasticity.value * md.relative_price
            + md.income_elasticity.value * y;
        let (paid_in, paid_out) = (0.9 * x + 0.15 * (p + y), m + 0.05 * interest);
        prop_assert!(same(paid_in, paid_out), "{paid_in} {paid_out}");
    }

    /// Fieller's set holds the estimate, and its finite ends are the ratios that the t test of
    /// N − β D = 0 just rejects.
    #[test]
    fn fieller_inverts_the_t_test(
        n in -2.0..2.0_f64, d in 0.05..2.0_f64, sn in 0.01..1.0_f64, sd in 0.01..1.0_f64,
        rho in -0.95..0.95_f64, t in 0.5..4.0_f64
    ) {
        let ratio = ratio(n, d);
        let joint = covariance(sn, sd, rho);
        let region = ratio.interval(&joint, t, IntervalMethod::Fieller);
        prop_assert!(region.contains(ratio.value()));
        let statistic = |beta: f64| {
            let gap = n - beta * d;
            let variance = sn * sn - 2.0 * beta * rho * sn * sd + beta * beta * sd * sd;
            gap.abs() / variance.sqrt()
        };
        match region {
            Region::Interval { low, high } | Region::Complement { low, high } => {
                for end in [low, high] {
                    prop_assert!((statistic(end) - t).abs() < 1e-6, "{region:?} {end}");
                }
                let outside = match region {
                    Region::Interval { .. } => low - 1.0,
                    Region::Complement { .. } | Region::WholeLine => f64::midpoint(low, high),
                };
                prop_assert!(statistic(outside) > t && !region.contains(outside));
            }
            Region::WholeLine => {
                for beta in [-1e6, -10.0, -1.0, 0.0, 1.0, 10.0, 1e6] {
                    prop_assert!(statistic(beta) <= t + 1e-9);
                }
            }
        }
    }

    /// A denominator known without error: Fieller is the delta interval, N's own over D.
    #[test]
    fn fieller_tends_to_delta(n in -2.0..2.0_f64, d in 0.1..2.0_f64, sn in 0.01..1.0_f64) {
        let ratio = ratio(n, d);
        let joint = covariance(sn, 0.0, 0.0);
        let ends = |m| match ratio.interval(&joint, 2.0, m) {
            Region::Interval { low, high } => (low, high),
            other @ (Region::Complement { .. } | Region::WholeLine) => panic!("{other:?}"),
        };
        let (fieller, delta) = (ends(IntervalMethod::Fieller), ends(IntervalMethod::Delta));
        prop_assert!((fieller.0 - delta.0).abs() < 1e-7 && (fieller.1 - delta.1).abs() < 1e-7);
        prop_assert!((delta.1 - (n + 2.0 * sn) / d).abs() < 1e-9);
    }
}

fn ratio(n: f64, d: f64) -> Ratio {
    Ratio {
        numerator: Affine::coefficient(0, n),
        denominator: Affine::coefficient(1, d),
    }
}

fn covariance(sn: f64, sd: f64, rho: f64) -> Matrix {
    Matrix::from_fn(2, 2, |i, j| match (i, j) {
        (0, 0) => sn * sn,
        (1, 1) => sd * sd,
        _ => rho * sn * sd,
    })
}

/// The three shapes, by cases whose answer is plain: D far from 0, D unclear with N clear, both
/// unclear.
#[test]
fn fieller_reports_each_shape() {
    let shape =
        |n, d| ratio(n, d).interval(&covariance(1.0, 1.0, 0.0), 2.0, IntervalMethod::Fieller);
    assert!(matches!(shape(1.0, 10.0), Region::Interval { .. }));
    let Region::Complement { low, high } = shape(10.0, 1.0) else {
        panic!("two rays expected");
    };
    assert!(low < 0.0 && high > 0.0 && high < 10.0);
    assert_eq!(shape(0.5, 0.5), Region::WholeLine);
}

/// A ratio multiplied by the speeds of adjustment that its long-run elasticities were divided by is the product form
/// of error-correction coefficients: numerator, denominator and their covariance.
#[test]
fn undivided_ratios_are_the_product_form() {
    use crate::estimate::{ProductCoefficients, ProductForm, ProductGrowth};
    let c = ProductCoefficients {
        phi_m: -0.4,
        b_y: 0.7,
        b_rm: 0.2,
        phi_x: -0.25,
        c_z: 0.5,
        c_rx: -0.15,
    };
    let place = |i: usize| {
        let values = [c.phi_m, c.b_y, c.b_rm, c.phi_x, c.c_z, c.c_rx];
        Affine::coefficient(i, values[i])
    };
    let growth = ProductGrowth {
        terms_of_trade: 0.01,
        rm: -0.02,
        rx: 0.015,
        z: 0.035,
        x: 0.05,
    };
    let (m, x) = (-place(0), -place(3));
    let economy = Economy {
        exports: growth.x,
        foreign_income: growth.z,
        terms_of_trade: Some(growth.terms_of_trade),
        import_relative_price: Some(growth.rm),
        export_relative_price: Some(growth.rx),
        import_income_elasticity: place(1).over(&m),
        import_price_elasticity: place(2).over(&m),
        export_income_elasticity: place(4).over(&x),
        export_price_elasticity: -place(5).over(&x),
        ..Economy::default()
    };
    // Positive definite, with covariance everywhere.
    let v = Matrix::from_fn(6, 6, |i, j| {
        let distance = f64::from(u32::try_from(i.abs_diff(j)).unwrap());
        0.01 * (1.0 + f64::from(u32::try_from(i + j).unwrap())) * 0.4_f64.powf(distance)
    });
    for (form, product) in [
        (Form::WeakForm, ProductForm::Weak),
        (Form::WeakFormWithPrices, ProductForm::WeakWithPrices),
        (Form::StrongForm, ProductForm::Strong),
        (Form::WithRelativePrices, ProductForm::WithRelativePrices),
    ] {
        let mut ratio = form.solve(&economy, false).unwrap().times(&m);
        if form.uses_export_demand() {
            ratio = ratio.times(&x);
        }
        let wanted = c.ratio(product, &growth, &v);
        let (n, d) = (&ratio.numerator, &ratio.denominator);
        assert_relative_eq!(n.value, wanted.numerator, max_relative = 1e-12);
        assert_relative_eq!(d.value, wanted.denominator, max_relative = 1e-12);
        assert_relative_eq!(n.variance(&v), wanted.v_nn, max_relative = 1e-10);
        assert_relative_eq!(n.covariance(d, &v), wanted.v_nd, max_relative = 1e-10);
        assert_relative_eq!(d.variance(&v), wanted.v_dd, max_relative = 1e-10);
    }
}
