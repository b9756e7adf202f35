//! Intake: bytes of a raw file to typed fragments and findings.
//!
//! Start reading at [`Reader`]: bytes are pushed in, in chunks of any size; [`Piece`]s (rows by
//! series) and a report of what was understood come out. [`kinds`] says what files may hold,
//! [`Settings`] what is stated beside the bytes. A fault of the file stops it ([`Fatal`]); a fault of
//! a row rejects the row ([`Reject`]) and the rest is read on.
//!
//! Bytes pass gzip and UTF-8 (`decode`), are cut into records and cells without being copied
//! (`split`), the first of which says what the columns are (`header`); descriptive cells become key
//! and unit (`describe`), the others observations (`rows`), gathered by series (`gather`). Line
//! numbers count physical lines, from 1, whatever the line ends, blank lines and quoted line breaks.
//!
//! [`Piece`]: crate::series::Piece

mod column;
mod decode;
mod describe;
mod fault;
mod gather;
mod header;
mod kind;
mod measure;
mod nearest;
mod number;
mod reader;
mod report;
mod rows;
mod settings;
mod split;

pub use fault::{Fatal, Reject};
pub use kind::{ColumnSpec, KindSpec, MeasureSpec, kinds, template_csv};
pub use reader::Reader;
pub use report::{Intake, Understood, UnderstoodColumn, UnderstoodPeriods};
pub use settings::{Context, Limits, Settings};

#[cfg(test)]
mod tests;
