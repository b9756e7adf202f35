//! A report as a page of plain text that reads like a table of a journal.

use super::print::{STARS, cell, critical, interval, interval_head, number, p_value, stars};
use super::report::{EstimateTable, EstimatedEquation, Report};
use crate::finding::{Finding, Severity};

const WIDTH: usize = 96;

/// Prints a report for a reader. `header_lines` come below the title.
#[must_use]
pub fn render(report: &Report, header_lines: &[String]) -> String {
    let mut page = Page(String::new());
    page.line(&report.title);
    page.line(&"=".repeat(report.title.chars().count()));
    for line in header_lines {
        page.line(line);
    }
    for line in &report.description {
        page.paragraph(line, "");
    }
    for equation in &report.equations {
        page.equation(report, equation);
    }
    page.statistics(report);
    page.tests(report);
    for table in &report.tables {
        page.table(table);
    }
    page.findings(&report.findings);
    page.section("Caution");
    page.paragraph(&report.caution, "");
    page.line(&format!("Method {}.", report.method_version));
    page.0
}

/// Text that grows.
struct Page(String);

impl Page {
    fn line(&mut self, line: &str) {
        self.0.push_str(line.trim_end());
        self.0.push('\n');
    }

    fn section(&mut self, title: &str) {
        self.0.push('\n');
        self.line(title);
        self.line(&"-".repeat(title.chars().count()));
    }

    /// Wraps words to the width of the page.
    fn paragraph(&mut self, text: &str, indent: &str) {
        let mut line = indent.to_owned();
        for word in text.split_whitespace() {
            let long = line.chars().count() + 1 + word.chars().count() > WIDTH;
            if long && line.len() > indent.len() {
                self.line(&line);
                indent.clone_into(&mut line);
            }
            if line.len() > indent.len() {
                line.push(' ');
            }
            line.push_str(word);
        }
        self.line(&line);
    }

    fn equation(&mut self, report: &Report, equation: &EstimatedEquation) {
        let dependent = match &equation.series {
            Some(key) if *key != equation.dependent => format!("{} ({key})", equation.dependent),
            _ => equation.dependent.clone(),
        };
        self.section(&format!("{}: {dependent}", equation.name));
        let head = [
            "",
            "Estimate",
            "",
            "Std. error",
            "t",
            "p",
            &interval_head(report),
        ];
        let mut rows = vec![head.map(str::to_owned).to_vec()];
        for c in &equation.coefficients {
            rows.push(vec![
                c.name.clone(),
                number(c.estimate),
                stars(c.p).to_owned(),
                c.std_error
                    .map_or_else(|| "–".to_owned(), |e| format!("({})", number(Some(e)))),
                c.t.map_or_else(|| "–".to_owned(), |t| format!("{t:.2}")),
                p_value(c.p),
                interval(c),
            ]);
        }
        self.columns(&rows, &[2]);
        let mut note = format!(
            "Standard errors in parentheses: {}. {STARS}",
            equation.std_errors
        );
        note.push_str(match equation.degrees_of_freedom {
            Some(_) => ", by Student's t.",
            None => ", by the normal distribution.",
        });
        if let (Some(from), Some(to), Some(n)) =
            (&equation.from, &equation.to, equation.observations)
        {
            let df = equation
                .degrees_of_freedom
                .map_or(String::new(), |df| format!(", {df} degrees of freedom"));
            note.push_str(&format!(" Rows {from} to {to}, {n} observations{df}."));
        }
        self.paragraph(&note, "");
    }

    fn statistics(&mut self, report: &Report) {
        if report.statistics.is_empty() {
            return;
        }
        self.section("Statistics");
        let rows: Vec<Vec<String>> = report
            .statistics
            .iter()
            .map(|s| {
                let value = s.value.map_or_else(|| "–".to_owned(), |v| cell(&v.into()));
                vec![s.name.replace('_', " "), value, s.note.clone()]
            })
            .collect();
        self.columns(&rows, &[2]);
    }

    fn tests(&mut self, report: &Report) {
        if report.tests.is_empty() {
            return;
        }
        self.section("Tests");
        let names = report.tests.iter().map(|t| t.name.chars().count());
        let width = names.max().unwrap_or(0);
        for test in &report.tests {
            let p = test
                .p_value
                .map_or(String::new(), |p| format!("p {}", p_value(Some(p))));
            let gap = width - test.name.chars().count();
            self.line(&format!(
                "{}{}  {:>12}  {:<10}  {}",
                test.name,
                " ".repeat(gap),
                number(test.statistic),
                p,
                test.distribution
            ));
            if let Some(values) = critical(test) {
                self.paragraph(&values, "    ");
            }
            if !test.sentence.is_empty() {
                self.paragraph(&test.sentence, "    ");
            }
        }
    }

    fn table(&mut self, table: &EstimateTable) {
        self.section(&table.title);
        let mut rows = vec![table.columns.clone()];
        rows.extend(table.rows.iter().map(|r| r.iter().map(cell).collect()));
        self.columns(&rows, &[]);
    }

    fn findings(&mut self, findings: &[Finding]) {
        if findings.is_empty() {
            return;
        }
        self.section("Findings");
        for finding in findings {
            let weight = match finding.severity {
                Severity::Error => "unreliable",
                Severity::Notice => "notice",
            };
            let text = format!("{weight}: {} ({}).", finding.message, finding.code);
            self.paragraph(&text, "");
        }
    }

    /// Rows in aligned columns: the first and those named to the left, the others to the right.
    fn columns(&mut self, rows: &[Vec<String>], left: &[usize]) {
        let count = rows.first().map_or(0, Vec::len);
        let width = |j: usize| rows.iter().map(|r| r[j].chars().count()).max().unwrap_or(0);
        let widths: Vec<usize> = (0..count).map(width).collect();
        for row in rows {
            let mut line = String::new();
            for (j, text) in row.iter().enumerate() {
                let gap = " ".repeat(widths[j] - text.chars().count());
                if j > 0 {
                    // Stars cling to their number.
                    line.push_str(if left.contains(&j) && count > 3 {
                        ""
                    } else {
                        "  "
                    });
                }
                if j == 0 || left.contains(&j) {
                    line.push_str(text);
                    line.push_str(&gap);
                } else {
                    line.push_str(&gap);
                    line.push_str(text);
                }
            }
            self.line(&line);
        }
    }
}
