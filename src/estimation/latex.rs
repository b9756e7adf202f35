//! A report as tables for a paper: `tabular` with the rules of the package `booktabs`.

use std::fmt::Write as _;

use super::print::{STARS, cell, critical, interval_head, number, p_value, stars};
use super::report::{EstimateTable, EstimatedEquation, Report};
use crate::finding::Severity;

/// Prints the tables of a report. `header_lines` come above them as comments.
#[must_use]
pub fn render(report: &Report, header_lines: &[String]) -> String {
    let mut text = String::new();
    for line in header_lines.iter().chain(&report.description) {
        let _ = writeln!(text, "% {line}");
    }
    text.push_str("% Needs \\usepackage{booktabs}.\n");
    for equation in &report.equations {
        text.push_str(&equation_table(report, equation));
    }
    if !report.tests.is_empty() {
        text.push_str(&tests_table(report));
    }
    for table in &report.tables {
        text.push_str(&plain_table(table));
    }
    for finding in &report.findings {
        let weight = match finding.severity {
            Severity::Error => "Unreliable",
            Severity::Notice => "Note",
        };
        let _ = writeln!(text, "\n{weight}: {}.", escape(&finding.message));
    }
    let _ = writeln!(text, "\n{}", escape(&report.caution));
    text
}

fn equation_table(report: &Report, equation: &EstimatedEquation) -> String {
    let caption = format!(
        "{}. {}: {}",
        report.title, equation.name, equation.dependent
    );
    let mut rows = Vec::new();
    for c in &equation.coefficients {
        let mark = match stars(c.p) {
            "" => String::new(),
            stars => format!("$^{{{stars}}}$"),
        };
        let bounds = match (c.low, c.high) {
            (Some(low), Some(high)) => format!("[{}, {}]", math(Some(low)), math(Some(high))),
            _ => "--".to_owned(),
        };
        let error = c
            .std_error
            .map_or_else(|| "--".to_owned(), |e| format!("({})", math(Some(e))));
        rows.push(vec![
            escape(&c.name),
            format!("{}{mark}", math(c.estimate)),
            error,
            c.t.map_or_else(|| "--".to_owned(), |t| format!("${t:.2}$")),
            escape(&p_value(c.p)),
            bounds,
        ]);
    }
    let mut foot: Vec<Vec<String>> = Vec::new();
    if let (Some(from), Some(to), Some(n)) = (&equation.from, &equation.to, equation.observations) {
        foot.push(vec![
            "Observations".to_owned(),
            format!("{n} ({from}--{to})"),
        ]);
    }
    // Numbers about the whole stand below the table of the only equation.
    if report.equations.len() == 1 {
        for s in &report.statistics {
            let value = s
                .value
                .map_or_else(|| "--".to_owned(), |v| escape(&cell(&v.into())));
            foot.push(vec![escape(&s.name.replace('_', " ")), value]);
        }
    }
    let head = [
        "",
        "Estimate",
        "Std. error",
        "$t$",
        "$p$",
        &escape(&interval_head(report)),
    ]
    .map(str::to_owned);
    let note = format!(
        "Standard errors in parentheses: {}. {STARS}.",
        equation.std_errors
    );
    tabular(&caption, &head, &rows, &foot, &note)
}

fn tests_table(report: &Report) -> String {
    let head = ["Test", "Statistic", "$p$", "Distribution"].map(str::to_owned);
    let row = |t: &super::report::EstimateTest| {
        let distribution = critical(t).unwrap_or_else(|| t.distribution.clone());
        vec![
            escape(&t.name),
            math(t.statistic),
            escape(&p_value(t.p_value)),
            escape(&distribution),
        ]
    };
    let rows: Vec<Vec<String>> = report.tests.iter().map(row).collect();
    tabular(&format!("{}. Tests", report.title), &head, &rows, &[], "")
}

fn plain_table(table: &EstimateTable) -> String {
    let head: Vec<String> = table.columns.iter().map(|c| escape(c)).collect();
    let row = |r: &Vec<super::report::Cell>| r.iter().map(|c| escape(&cell(c))).collect();
    let rows: Vec<Vec<String>> = table.rows.iter().map(row).collect();
    tabular(&table.title, &head, &rows, &[], "")
}

/// A table; `foot` rows have two cells, the second across all other columns.
fn tabular(
    caption: &str,
    head: &[String],
    rows: &[Vec<String>],
    foot: &[Vec<String>],
    note: &str,
) -> String {
    let mut text = String::new();
    let others = head.len().saturating_sub(1);
    let _ = writeln!(text, "\n\\begin{{table}}[htbp]");
    let _ = writeln!(text, "\\centering");
    let _ = writeln!(text, "\\caption{{{}}}", escape(caption));
    let _ = writeln!(text, "\\begin{{tabular}}{{l{}}}", "r".repeat(others));
    let _ = writeln!(text, "\\toprule");
    let _ = writeln!(text, "{} \\\\", head.join(" & "));
    let _ = writeln!(text, "\\midrule");
    for row in rows {
        let _ = writeln!(text, "{} \\\\", row.join(" & "));
    }
    if !foot.is_empty() {
        let _ = writeln!(text, "\\midrule");
    }
    for row in foot {
        let value = &row[1];
        let _ = writeln!(
            text,
            "{} & \\multicolumn{{{others}}}{{l}}{{{value}}} \\\\",
            row[0]
        );
    }
    let _ = writeln!(text, "\\bottomrule");
    let _ = writeln!(text, "\\end{{tabular}}");
    if !note.is_empty() {
        let _ = writeln!(text, "\\par\\footnotesize {}", escape(note));
    }
    let _ = writeln!(text, "\\end{{table}}");
    text
}

/// A number in math mode, so that minus signs are minus signs.
fn math(value: Option<f64>) -> String {
    match value {
        None => "--".to_owned(),
        Some(_) => {
            let plain = number(value);
            match plain.split_once('e') {
                Some((digits, power)) => format!("${digits} \\times 10^{{{power}}}$"),
                None => format!("${plain}$"),
            }
        }
    }
}

/// Text with what is special to LaTeX, or outside its fonts, written out.
fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' | '%' | '$' | '#' | '_' | '{' | '}' => {
                out.push('\\');
                out.push(c);
            }
            // After the end of a row a bracket would be an option.
            '[' => out.push_str("{[}"),
            '\\' => out.push_str("\\textbackslash{}"),
            '~' => out.push_str("\\textasciitilde{}"),
            '^' => out.push_str("\\textasciicircum{}"),
            '<' => out.push_str("$<$"),
            '>' => out.push_str("$>$"),
            '–' => out.push_str("--"),
            '−' => out.push_str("$-$"),
            '²' => out.push_str("$^2$"),
            '√' => out.push_str("$\\surd$"),
            '≤' => out.push_str("$\\leq$"),
            '≥' => out.push_str("$\\geq$"),
            '·' => out.push_str("$\\cdot$"),
            '×' => out.push_str("$\\times$"),
            'Σ' => out.push_str("$\\Sigma$"),
            'Δ' => out.push_str("$\\Delta$"),
            'α' => out.push_str("$\\alpha$"),
            'β' => out.push_str("$\\beta$"),
            'λ' => out.push_str("$\\lambda$"),
            'ω' => out.push_str("$\\omega$"),
            'ρ' => out.push_str("$\\rho$"),
            'σ' => out.push_str("$\\sigma$"),
            'φ' => out.push_str("$\\varphi$"),
            'χ' => out.push_str("$\\chi$"),
            'θ' => out.push_str("$\\theta$"),
            other => out.push(other),
        }
    }
    out
}
