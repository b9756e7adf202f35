//! Studies: a document and prepared series in, estimates and constrained growth out.
