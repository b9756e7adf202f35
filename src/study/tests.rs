//! Studies on reference data and on a simulated economy.
