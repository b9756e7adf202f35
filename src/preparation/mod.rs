//! Preparations: a document of steps, checked and evaluated on series.
