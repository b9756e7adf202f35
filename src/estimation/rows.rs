//! The rows that an estimator used, as a table for other programs.

use std::fmt::Write as _;

use serde::{Deserialize, Serialize};

use super::report::Report;
use crate::estimate::{Ols, Regressor};

/// The rows that an estimator used.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Rows {
    /// Periods, one a row.
    pub periods: Vec<String>,
    /// Variables, one value a row each.
    pub columns: Vec<RowColumn>,
    /// Position in the sample of the first row.
    #[serde(skip)]
    pub(super) first: usize,
}

/// One variable of the rows.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RowColumn {
    /// Name; a regressor is named as its coefficient.
    pub name: String,
    /// What it is in the estimation: `dependent`, `regressor`, `instrument`, `weight` or `variable`.
    pub role: String,
    /// Values.
    pub values: Vec<f64>,
}

impl Rows {
    /// Rows that begin at a position of the sample.
    pub(super) fn from(first: usize) -> Self {
        Self {
            first,
            ..Self::default()
        }
    }

    /// The rows of a least-squares fit of `y` that begin at a position of the sample.
    pub(super) fn of_fit(dependent: &str, y: &[f64], fit: &Ols, first: usize) -> Self {
        Self::from(first)
            .with("dependent", dependent, y.to_vec())
            .with_all("regressor", &fit.regressors)
    }

    /// With one more column; a name that is there already stays as it is.
    pub(super) fn with(mut self, role: &str, name: &str, values: Vec<f64>) -> Self {
        let name = shown(name);
        if !self.columns.iter().any(|c| c.name == name) {
            self.columns.push(RowColumn {
                name,
                role: role.to_owned(),
                values,
            });
        }
        self
    }

    /// With one more column a regressor.
    pub(super) fn with_all(self, role: &str, regressors: &[Regressor]) -> Self {
        regressors
            .iter()
            .fold(self, |rows, r| rows.with(role, &r.name, r.values.clone()))
    }

    /// A CSV file (RFC 4180) with a header row and numbers that round-trip; with `comments`, the call in
    /// words stands before it in lines that begin with `#`.
    #[must_use]
    pub fn csv(&self, report: &Report, comments: bool) -> String {
        let mut text = String::new();
        if comments {
            for line in [report.title.as_str()]
                .into_iter()
                .chain(report.description.iter().map(String::as_str))
            {
                let _ = writeln!(text, "# {line}");
            }
            for role in ["dependent", "regressor", "instrument", "weight", "variable"] {
                let of_role = self.columns.iter().filter(|c| c.role == role);
                let names: Vec<&str> = of_role.map(|c| c.name.as_str()).collect();
                if !names.is_empty() {
                    let _ = writeln!(text, "# {role}: {}", names.join("; "));
                }
            }
        }
        let names = self.columns.iter().map(|c| quoted(&c.name));
        let header: Vec<String> = std::iter::once("period".to_owned()).chain(names).collect();
        let _ = writeln!(text, "{}", header.join(","));
        for (t, period) in self.periods.iter().enumerate() {
            text.push_str(period);
            for column in &self.columns {
                let _ = write!(text, ",{}", column.values[t]);
            }
            text.push('\n');
        }
        text
    }
}

fn quoted(name: &str) -> String {
    if name.contains([',', '"', '\n', '\r']) {
        format!("\"{}\"", name.replace('"', "\"\""))
    } else {
        name.to_owned()
    }
}

/// A name of a term as the report prints it.
pub(super) fn shown(name: &str) -> String {
    match name {
        "const" => "constant".to_owned(),
        "trend²" => "trend_squared".to_owned(),
        other => other.to_owned(),
    }
}
