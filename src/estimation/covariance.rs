//! The option that says how the covariance of coefficients is estimated.

use super::options::Options;
use crate::estimate::{
    BandwidthRule, CovarianceKind, EstimateError, Hc, Kernel, Ols, bandwidth, rule_of_thumb_lags,
};

/// How the covariance of coefficients is to be estimated.
#[derive(Clone, Copy, Debug)]
pub(super) enum Covariance {
    Classical,
    Robust(Hc),
    NeweyWest {
        lags: Option<usize>,
        small_sample: bool,
    },
    Kernel {
        kernel: Kernel,
        bandwidth: Result<f64, BandwidthRule>,
        small_sample: bool,
    },
}

#[derive(Clone, Copy)]
enum Name {
    Classical,
    Robust(Hc),
    NeweyWest,
    Kernel,
}

const NAMES: [(&str, Name); 7] = [
    ("classical", Name::Classical),
    ("hc0", Name::Robust(Hc::Hc0)),
    ("hc1", Name::Robust(Hc::Hc1)),
    ("hc2", Name::Robust(Hc::Hc2)),
    ("hc3", Name::Robust(Hc::Hc3)),
    ("newey_west", Name::NeweyWest),
    ("kernel", Name::Kernel),
];

/// Kernels by name.
const KERNELS: [(&str, Kernel); 3] = [
    ("bartlett", Kernel::Bartlett),
    ("parzen", Kernel::Parzen),
    ("quadratic_spectral", Kernel::QuadraticSpectral),
];

/// Rules of the bandwidth by name.
const RULES: [(&str, BandwidthRule); 3] = [
    ("rule_of_thumb", BandwidthRule::RuleOfThumb),
    ("newey_west_1994", BandwidthRule::NeweyWest1994),
    ("andrews_1991", BandwidthRule::Andrews1991),
];

/// A kernel's or rule's name in words.
fn named<T: PartialEq>(table: &[(&'static str, T)], value: &T) -> &'static str {
    table
        .iter()
        .find(|(_, v)| v == value)
        .map_or("", |(n, _)| n)
}

impl Covariance {
    /// Reads `covariance`, `kernel`, `bandwidth`, `lags`, `small_sample`.
    pub(super) fn read(options: &mut Options<'_>) -> Option<Self> {
        let name = options.choice("covariance", &NAMES);
        Self::of(options, name?)
    }

    /// The same where no covariance is a choice of its own: none if `covariance` is not given.
    pub(super) fn read_if_given(
        options: &mut Options<'_>,
        else_name: &str,
    ) -> Option<Option<Self>> {
        let mut choices: Vec<(&str, Option<Name>)> = vec![(else_name, None)];
        choices.extend(NAMES.iter().map(|(n, v)| (*n, Some(*v))));
        match options.choice("covariance", &choices)? {
            None => Some(None),
            Some(name) => Self::of(options, name).map(Some),
        }
    }

    fn of(options: &mut Options<'_>, name: Name) -> Option<Self> {
        let why = |only: &str| format!("it belongs to the covariance {only}");
        match name {
            Name::Classical | Name::Robust(_) => {
                options.useless(&["lags"], &why("newey_west"));
                options.useless(&["kernel", "bandwidth"], &why("kernel"));
                options.useless(&["small_sample"], &why("newey_west or kernel"));
            }
            Name::NeweyWest => options.useless(&["kernel", "bandwidth"], &why("kernel")),
            Name::Kernel => options.useless(&["lags"], &why("newey_west")),
        }
        match name {
            Name::Classical => Some(Self::Classical),
            Name::Robust(hc) => Some(Self::Robust(hc)),
            Name::NeweyWest => {
                let lags = options.maybe_count("lags", 0, 5000);
                let small_sample = options.flag("small_sample", true);
                Some(Self::NeweyWest {
                    lags: lags?,
                    small_sample: small_sample?,
                })
            }
            Name::Kernel => {
                let kernel = options.choice("kernel", &KERNELS);
                let bandwidth = options.number_or_choice("bandwidth", &RULES);
                let small_sample = options.flag("small_sample", true);
                Some(Self::Kernel {
                    kernel: kernel?,
                    bandwidth: bandwidth?,
                    small_sample: small_sample?,
                })
            }
        }
    }

    /// The kind, its automatic parts chosen from a fit, and the same in words.
    pub(super) fn resolve(self, fit: &Ols) -> Result<(CovarianceKind, String), EstimateError> {
        let corrected = |small_sample: bool| {
            if small_sample {
                ", multiplied by n/(n − k)"
            } else {
                ", without small-sample factor"
            }
        };
        Ok(match self {
            Self::Classical => (
                CovarianceKind::Classical,
                "classical, residual variance ssr/(n − k)".to_owned(),
            ),
            Self::Robust(hc) => {
                let formula = match hc {
                    Hc::Hc0 => "HC0: e²",
                    Hc::Hc1 => "HC1: e² n/(n − k)",
                    Hc::Hc2 => "HC2: e²/(1 − h)",
                    Hc::Hc3 => "HC3: e²/(1 − h)²",
                };
                let words = format!("robust to heteroskedasticity, {formula}");
                (CovarianceKind::Robust(hc), words)
            }
            Self::NeweyWest { lags, small_sample } => {
                let lags = lags.unwrap_or_else(|| rule_of_thumb_lags(fit.n));
                let words = format!(
                    "Newey and West 1987, Bartlett weights 1 − j/(L + 1), L = {lags} lags{}",
                    corrected(small_sample)
                );
                (CovarianceKind::NeweyWest { lags, small_sample }, words)
            }
            Self::Kernel {
                kernel,
                bandwidth: asked,
                small_sample,
            } => {
                let (bandwidth, how) = match asked {
                    Ok(number) => (number, "given".to_owned()),
                    Err(rule) => (
                        bandwidth(fit, kernel, rule)?,
                        format!("by {}", named(&RULES, &rule)),
                    ),
                };
                let words = format!(
                    "kernel {}, bandwidth {bandwidth} ({how}), no prewhitening{}",
                    named(&KERNELS, &kernel),
                    corrected(small_sample)
                );
                let kind = CovarianceKind::Kernel {
                    kernel,
                    bandwidth,
                    small_sample,
                };
                (kind, words)
            }
        })
    }
}
