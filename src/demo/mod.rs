//! The demo: an invented economy, the files of its offices, and their way through the HTTP API.

pub mod economy;
mod files;

pub use files::RawFile;
