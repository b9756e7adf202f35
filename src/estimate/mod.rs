//! Estimators: plain vectors and matrices in, structs out.
