//! The identity itself.

use super::Affine;

/// One item of the balance of payments whose nominal growth is linear in home growth:
/// `v = a + κ y`.
#[derive(Clone, Debug, PartialEq)]
pub struct Item {
    /// Share in the value of all receipts, or of all payments; the shares of a side sum to 1.
    pub share: f64,
    /// Growth at no home growth.
    pub a: Affine,
    /// Response to home growth.
    pub kappa: Affine,
}

impl Item {
    /// An item whose nominal growth is given: `κ = 0`.
    #[must_use]
    pub fn given(share: f64, growth: impl Into<Affine>) -> Self {
        Self {
            share,
            a: growth.into(),
            kappa: Affine::default(),
        }
    }

    /// An item that stays a constant share of nominal income: `a = p_Y`, `κ = 1`.
    #[must_use]
    pub fn tied_to_income(share: f64, income_price: f64) -> Self {
        Self {
            share,
            a: income_price.into(),
            kappa: 1.0.into(),
        }
    }
}

/// Why no growth rate balances the items.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ConstraintError {
    /// Payments do not rise faster than receipts as home income grows, so that no growth rate is
    /// an upper bound.
    #[error(
        "growth does not widen the deficit: payments respond to home income by {payments:.3}, \
         receipts by {receipts:.3}; their difference must be positive"
    )]
    DenominatorNotPositive {
        /// Response of payments to home growth, `Σ q κ`.
        payments: f64,
        /// Response of receipts to home growth, `Σ s κ`.
        receipts: f64,
    },
    /// Shares of a side that do not sum to 1.
    #[error("the shares of {side} sum to {sum}, not to 1")]
    Shares {
        /// `receipts` or `payments`.
        side: &'static str,
        /// What they sum to.
        sum: f64,
    },
    /// A form that needs a growth rate which was not given.
    #[error("the form needs {}, which the study does not give", needed.join(" and "))]
    NotGiven {
        /// What is missing, in words.
        needed: Vec<&'static str>,
    },
}

/// The balancing growth rate `y_b = N / D` with numerator and denominator affine in the estimated
/// coefficients, `D > 0`.
#[derive(Clone, Debug, PartialEq)]
pub struct Ratio {
    /// `N = Σ s_i a_i − Σ q_j a_j`.
    pub numerator: Affine,
    /// `D = Σ q_j κ_j − Σ s_i κ_i`.
    pub denominator: Affine,
}

impl Ratio {
    /// `N / D`, log growth per period.
    #[must_use]
    pub fn value(&self) -> f64 {
        self.numerator.value / self.denominator.value
    }

    /// The same ratio with numerator and denominator multiplied by a factor other than zero.
    ///
    /// Fieller's set depends on how a ratio is written: multiplied by the speeds of adjustment that its
    /// elasticities were divided by, it is free of that division (the product form).
    #[must_use]
    pub fn times(&self, factor: &Affine) -> Self {
        Self {
            numerator: self.numerator.times(factor),
            denominator: self.denominator.times(factor),
        }
    }
}

/// The home growth at which receipts and payments grow alike, both in nominal terms and home
/// currency: `Σ s_i (a_i + κ_i y) = Σ q_j (a_j + κ_j y)` solved for y.
///
/// # Errors
/// [`ConstraintError::Shares`], and [`ConstraintError::DenominatorNotPositive`] where the solution
/// has no economic meaning.
pub fn balance(receipts: &[Item], payments: &[Item]) -> Result<Ratio, ConstraintError> {
    for (side, items) in [("receipts", receipts), ("payments", payments)] {
        let sum: f64 = items.iter().map(|i| i.share).sum();
        // Written so that a NaN is refused.
        let near = (sum - 1.0).abs() <= 1e-9;
        if !near {
            return Err(ConstraintError::Shares { side, sum });
        }
    }
    let weigh = |items: &[Item], part: fn(&Item) -> &Affine| -> Affine {
        items.iter().map(|i| part(i).clone() * i.share).sum()
    };
    let numerator = weigh(receipts, |i| &i.a) - weigh(payments, |i| &i.a);
    let (out, back) = (weigh(payments, |i| &i.kappa), weigh(receipts, |i| &i.kappa));
    let (paid, received) = (out.value, back.value);
    let denominator = out - back;
    // Written so that a NaN is refused.
    let positive = denominator.value > 0.0;
    if !positive {
        return Err(ConstraintError::DenominatorNotPositive {
            payments: paid,
            receipts: received,
        });
    }
    Ok(Ratio {
        numerator,
        denominator,
    })
}
