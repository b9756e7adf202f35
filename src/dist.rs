//! Probability distributions: p-values and quantiles. Hides the library behind it.
