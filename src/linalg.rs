//! Linear algebra for estimation: least squares and decompositions. Hides the library behind it.
