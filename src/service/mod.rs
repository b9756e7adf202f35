//! The use cases: they own the transactions, call the pure rooms and fill views.
