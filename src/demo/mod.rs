//! The demo: an invented economy, the files of its offices, and their way through the HTTP API.
//!
//! [`economy`] is a pure generator; [`walk`] knows the service only by its address.

mod client;
pub mod economy;
mod files;
mod run;
mod walk;

pub use files::RawFile;
pub use run::run;
pub use walk::{NAME, PREPARATION, STUDY, Walked, look_further, walk};
