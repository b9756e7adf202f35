//! Realterms: from raw trade, price and income files to the growth rate that the balance of
//! payments allows.
//!
//! The rooms and what each may import are described in `DEVELOPERS.md`; a test over the sources
//! keeps the arrows. Everything above `store` is pure: no I/O, clock, log or environment.

pub mod finding;
pub mod linalg;
pub mod random;
pub mod series;
pub mod time;

pub mod dist;
pub mod document;
pub mod estimate;

pub mod constraint;

pub mod estimation;
pub mod intake;
pub mod preparation;
pub mod study;

pub mod store;

pub mod service;

pub mod cli;
pub mod clock;
pub mod config;
pub mod demo;
pub mod http;
pub mod telemetry;
