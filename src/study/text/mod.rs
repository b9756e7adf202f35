//! An outcome as a page of plain text, at most 100 columns wide.
//!
//! Growth rates are printed as compound per cent a year; what should not be relied on is replaced by
//! a letter that leads to the reasons.

mod equations;
mod words;

use words::{describe, describe_all, estimator_label, form_label, interval, letter, verdict};

use super::document::CrossCovariance;
use super::outcome::{EstimatorResult, FormNumbers, FormResult, Outcome};
use super::run::compound;
use crate::constraint::{Form, IntervalMethod};
use crate::finding::{Finding, Severity};

const WIDTH: usize = 96;
const LABEL: usize = 34;
const CELL: usize = 32;
/// Estimators that stand side by side.
const ACROSS: usize = 2;

/// Prints an outcome for a reader. `header_lines` come below the title; with `with_unreliable`,
/// numbers that should not be relied on are printed, marked by their letter.
#[must_use]
pub fn render(outcome: &Outcome, header_lines: &[String], with_unreliable: bool) -> String {
    let mut page = Page {
        text: String::new(),
        outcome,
        notes: Vec::new(),
        with_unreliable,
    };
    page.head(header_lines);
    page.headline();
    page.rates();
    page.elasticities();
    page.tests();
    page.price_effects();
    page.near_identity();
    page.findings();
    page.section("Caution");
    page.paragraph(&outcome.caution, "");
    page.line(&format!("Method {}.", outcome.method_version));
    page.text
}

struct Page<'a> {
    text: String,
    outcome: &'a Outcome,
    /// Reasons against rates, in the order of their letters.
    notes: Vec<String>,
    with_unreliable: bool,
}

impl Page<'_> {
    fn head(&mut self, header_lines: &[String]) {
        let outcome = self.outcome;
        let title = format!("{} ({})", outcome.title, outcome.area);
        self.line(&title);
        self.line(&"=".repeat(title.chars().count().min(WIDTH)));
        for line in header_lines {
            self.line(line);
        }
        let sample = &outcome.sample;
        let word = match sample.frequency.as_str() {
            "A" => "years",
            "S" => "half-years",
            "Q" => "quarters",
            _ => "months",
        };
        self.line(&format!(
            "Sample {} to {}, {} {word}. Growth in compound per cent a year, averaged over the sample.",
            sample.from, sample.to, sample.observations
        ));
    }

    fn headline(&mut self) {
        let outcome = self.outcome;
        let actual = compound(outcome.actual_growth);
        self.text.push('\n');
        self.line(&format!("Actual growth               {actual:6.2}"));
        let Some(form) = outcome.headline_form() else {
            return;
        };
        let estimator = estimator_label(outcome.headline.estimator);
        let named = format!("{}, {estimator}", form_label(form.form));
        let sentence = if let Some(reason) = &form.refused {
            self.line("Balance-of-payments limit   none");
            format!("No rate exists for the headline named in advance ({named}): {reason}.")
        } else if let Some(unreliable) = &form.unreliable {
            let letters = self.note(&describe_all(&unreliable.reasons));
            if let (true, Some(rate)) = (self.with_unreliable, unreliable.numbers.rate) {
                let rate = compound(rate);
                self.line(&format!(
                    "Balance-of-payments limit   {rate:6.2}  unreliable {letters}"
                ));
            } else {
                self.line(&format!("Balance-of-payments limit   unreliable {letters}"));
            }
            let first = unreliable
                .reasons
                .first()
                .map_or("", |r| r.message.as_str());
            format!(
                "The headline named in advance ({named}) gives no rate to rely on. {first}: see {letters} \
                 below."
            )
        } else if let (Some(rate), Some(region)) = (form.numbers.rate, form.numbers.interval) {
            let (rate, region) = (compound(rate), region.map(compound));
            let level = self.level();
            self.line(&format!(
                "Balance-of-payments limit   {rate:6.2}  {level} interval {}",
                interval(region)
            ));
            format!(
                "{} Headline named in advance: {named}.",
                verdict(actual, region)
            )
        } else {
            return;
        };
        self.text.push('\n');
        self.paragraph(&sentence, "");
    }

    fn rates(&mut self) {
        let outcome = self.outcome;
        let method = match outcome.interval.method {
            IntervalMethod::Fieller => "Fieller",
            IntervalMethod::Delta => "delta-method",
        };
        let across = match outcome.interval.cross_covariance {
            CrossCovariance::Joint => "with",
            CrossCovariance::Zero => "without",
        };
        let bounded = match outcome.interval.method {
            IntervalMethod::Fieller => "",
            IntervalMethod::Delta => {
                " They are always bounded, and no such interval can cover where the income elasticity of \
                 imports may be near zero (Gleser and Hwang 1987; Dufour 1997)."
            }
        };
        let level = self.level();
        self.section("Growth at which exports pay for imports");
        self.paragraph(
            &format!(
                "Compound per cent a year; {level} {method} intervals {across} covariance across the two \
                 equations, mean growth rates held fixed; * marks the headline.{bounded}"
            ),
            "",
        );
        let free = |f: &FormResult| numbers(f).rate_with_autonomous_growth.is_some();
        for estimators in outcome.estimators.chunks(ACROSS) {
            self.estimator_heads(estimators);
            self.form_rows(estimators, |page, form, headline| {
                let star = if headline { "*" } else { "" };
                page.form_cell(form, |numbers| {
                    let (rate, region) = (numbers.rate?, numbers.interval?);
                    Some(format!(
                        "{:.2}{star} {}",
                        compound(rate),
                        interval(region.map(compound))
                    ))
                })
            });
            if estimators.iter().any(|e| e.forms.iter().any(free)) {
                self.text.push('\n');
                self.line("With autonomous growth (constants in differences, trends in levels)");
                self.form_rows(estimators, |page, form, _| {
                    page.form_cell(form, |numbers| {
                        Some(match numbers.rate_with_autonomous_growth {
                            Some(rate) => format!("{:.2}", compound(rate)),
                            None => "-".to_owned(),
                        })
                    })
                });
            }
        }
        self.print_notes();
    }

    fn price_effects(&mut self) {
        let given = |f: &FormResult| numbers(f).relative_price_effect.is_some();
        let any = |e: &EstimatorResult| e.forms.iter().any(given);
        if !self.outcome.estimators.iter().any(any) {
            return;
        }
        self.section("What relative prices add");
        self.paragraph(
            "Percentage points of log growth a year, and the p-value of a test that they add nothing; the \
             weak and strong forms leave it out, the forms with prices include it.",
            "",
        );
        for estimators in self.outcome.estimators.chunks(ACROSS) {
            self.estimator_heads(estimators);
            self.form_rows(estimators, |page, form, _| {
                page.form_cell(form, effect_cell)
            });
        }
    }

    fn near_identity(&mut self) {
        self.section("How much of the agreement is arithmetic");
        let headline = self.outcome.headline.estimator;
        let result = self
            .outcome
            .estimators
            .iter()
            .find(|e| e.estimator == headline);
        if let Some(result) = result {
            self.paragraph(&result.near_identity.sentence, "");
        }
    }

    fn findings(&mut self) {
        let outcome = self.outcome;
        let notes = std::mem::take(&mut self.notes);
        let mut lines: Vec<(Severity, String)> = Vec::new();
        // Reasons printed under the table are not repeated.
        let mut add = |label: &str, finding: &Finding| {
            let text = describe(finding);
            if notes.contains(&text) {
                return;
            }
            let text = format!("{label}{text}");
            if !lines.iter().any(|(_, l)| *l == text) {
                lines.push((finding.severity, text));
            }
        };
        for finding in &outcome.findings {
            add("", finding);
        }
        for result in &outcome.estimators {
            let label = estimator_label(result.estimator);
            for finding in &result.findings {
                add(&format!("{label}: "), finding);
            }
            for form in &result.forms {
                let label = format!("{label}, {}: ", form_label(form.form));
                form.findings.iter().for_each(|f| add(&label, f));
            }
        }
        if lines.is_empty() {
            return;
        }
        self.section("Findings");
        for (severity, line) in lines {
            let mark = if severity == Severity::Error {
                "!"
            } else {
                "-"
            };
            self.paragraph(&format!("{mark} {line}"), "  ");
        }
    }

    /// One row a form, one cell an estimator.
    fn form_rows(
        &mut self,
        estimators: &[EstimatorResult],
        cell: impl Fn(&mut Self, &FormResult, bool) -> String,
    ) {
        let outcome = self.outcome;
        let forms: Vec<Form> = outcome
            .estimators
            .first()
            .map_or_else(Vec::new, |e| e.forms.iter().map(|f| f.form).collect());
        for (i, form) in forms.into_iter().enumerate() {
            let headline = |e: &EstimatorResult| {
                outcome.headline.form == form && outcome.headline.estimator == e.estimator
            };
            let mut cells = Vec::new();
            for result in estimators {
                cells.push(cell(self, &result.forms[i], headline(result)));
            }
            self.row(form_label(form), &cells);
        }
    }

    /// What a form's cell shows: its numbers, or the letter of the reasons against them.
    fn form_cell(
        &mut self,
        form: &FormResult,
        show: impl Fn(&FormNumbers) -> Option<String>,
    ) -> String {
        if let Some(reason) = &form.refused {
            let letters = self.note(&[format!("No rate exists: {reason}")]);
            return format!("none {letters}");
        }
        let Some(unreliable) = &form.unreliable else {
            return show(&form.numbers).unwrap_or_default();
        };
        let letters = self.note(&describe_all(&unreliable.reasons));
        match show(&unreliable.numbers) {
            Some(cell) if cell == "-" => cell,
            Some(cell) if self.with_unreliable => format!("{cell} {letters}"),
            _ => format!("unreliable {letters}"),
        }
    }

    /// The letters of reasons, in brackets; each reason has one letter on the whole page.
    fn note(&mut self, reasons: &[String]) -> String {
        let mut letters = Vec::new();
        for reason in reasons {
            let known = self.notes.iter().position(|n| n == reason);
            let i = known.unwrap_or(self.notes.len());
            if known.is_none() {
                self.notes.push(reason.clone());
            }
            letters.push(letter(i));
        }
        format!("({})", letters.join(","))
    }

    fn print_notes(&mut self) {
        if self.notes.is_empty() {
            return;
        }
        self.text.push('\n');
        for (i, note) in self.notes.clone().into_iter().enumerate() {
            self.paragraph(&format!("({}) {note}", letter(i)), "    ");
        }
    }

    fn estimator_heads(&mut self, estimators: &[EstimatorResult]) {
        self.text.push('\n');
        let heads: Vec<String> = estimators
            .iter()
            .map(|e| estimator_label(e.estimator).to_owned())
            .collect();
        self.row("", &heads);
        let rules: Vec<String> = heads.iter().map(|_| "-".repeat(CELL - 2)).collect();
        self.row(&"-".repeat(LABEL - 2), &rules);
    }

    fn row(&mut self, label: &str, cells: &[String]) {
        let mut line = format!("{label:<width$} ", width = LABEL - 1);
        for cell in cells {
            line.push_str(&format!("{cell:<width$} ", width = CELL - 1));
        }
        self.line(line.trim_end());
    }

    fn section(&mut self, title: &str) {
        self.text.push('\n');
        self.line(title);
        self.line(&"-".repeat(title.chars().count()));
    }

    fn line(&mut self, line: &str) {
        self.text.push_str(line);
        self.text.push('\n');
    }

    /// Breaks a text into lines; all but the first are indented.
    fn paragraph(&mut self, text: &str, indent: &str) {
        let mut line = String::new();
        for word in text.split_whitespace() {
            if !line.is_empty() && line.chars().count() + 1 + word.chars().count() > WIDTH {
                self.line(&line);
                indent.clone_into(&mut line);
                line.push_str(word);
                continue;
            }
            if !line.is_empty() {
                line.push(' ');
            }
            line.push_str(word);
        }
        self.line(&line);
    }

    fn level(&self) -> String {
        format!("{} per cent", 100.0 * self.outcome.interval.level)
    }
}

/// A form's numbers, reliable or not.
fn numbers(form: &FormResult) -> &FormNumbers {
    form.unreliable
        .as_ref()
        .map_or(&form.numbers, |u| &u.numbers)
}

/// What relative prices add, with the p-value.
fn effect_cell(numbers: &FormNumbers) -> Option<String> {
    let Some(effect) = &numbers.relative_price_effect else {
        return Some("-".to_owned());
    };
    let p = match effect.p_zero {
        Some(p) if p < 0.005 => " p <0.01".to_owned(),
        Some(p) => format!(" p {p:.2}"),
        None => String::new(),
    };
    Some(format!(
        "{:+.2} {}{p}",
        effect.effect,
        interval(effect.interval)
    ))
}
