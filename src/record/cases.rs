//! Load cases: their results beside those of the sheet as it stands.

use super::axis::{few, pretty};
use super::build::{self, Origin};
use super::envelope::{self, BASE, Solved};
use super::number::concise;
use super::outcome::{CaseResult, Entry, Envelope, Outcome, Peak, Quantity, Status};
use crate::error::Error;
use crate::sheet::{Case, Sheet};
use crate::solve::Solution;
use maud::{Markup, html};
use std::fmt::Write;

/// A case with its solution, or why there is none.
pub type Answer<'a> = (&'a Case, std::result::Result<Solution, Error>);

/// Puts the results of all cases and the envelopes beside those of the sheet as it stands.
pub fn join(outcome: &mut Outcome, sheet: &Sheet, base: Option<&Solution>, answers: &[Answer<'_>], origin: Origin<'_>) {
    for (case, answer) in answers {
        let own = match answer {
            Ok(solution) => build::solved(&case.sheet, solution, origin, false),
            Err(error) => build::failed(&case.sheet, origin, error),
        };
        let changed = case.changed.iter().map(|(name, text)| Entry {
            name: name.clone(),
            text: text.clone(),
            remark: String::new(),
        });
        if let Some(reason) = &own.reason {
            outcome.warnings.push(format!("case `{}` is not solved: {reason}", case.name));
        }
        // Of the whole sheet, what is worst is said.
        if outcome.status == Status::Solved && own.status != Status::Solved {
            outcome.status = Status::Inaccurate;
        }
        let new = own.warnings.iter().filter(|w| !sheet.warnings.contains(w));
        outcome.warnings.extend(new.map(|w| format!("case `{}`: {w}", case.name)));
        outcome.cases.push(CaseResult {
            name: case.name.clone(),
            changed: changed.collect(),
            status: own.status,
            reason: own.reason,
            quantities: own.quantities,
            checks: own.checks,
        });
    }
    let mut solved: Vec<Solved<'_>> = base.map(|solution| Solved { name: BASE, sheet, solution }).into_iter().collect();
    for (case, answer) in answers {
        if let Ok(solution) = answer {
            solved.push(Solved { name: &case.name, sheet: &case.sheet, solution });
        }
    }
    let (envelopes, warnings) = envelope::envelopes(&solved);
    outcome.envelopes = envelopes;
    outcome.warnings.extend(warnings);
}

fn changes(case: &CaseResult) -> String {
    case.changed.iter().map(|e| format!("{} = {}", e.name, e.text)).collect::<Vec<_>>().join(", ")
}

fn value(q: &Quantity) -> String {
    match q.value {
        Some(value) => concise(value, q.error),
        None => "none".into(),
    }
}

fn united(text: String, unit: &str) -> String {
    if unit == "1" { text } else { format!("{text} {unit}") }
}

/// For a terminal.
pub fn text(outcome: &Outcome) -> String {
    let mut text = String::new();
    for case in &outcome.cases {
        let _ = writeln!(text, "\ncase {}: {}", case.name, changes(case));
        if let Some(reason) = &case.reason {
            let _ = writeln!(text, "  not solved: {reason}");
            continue;
        }
        let width = case.quantities.iter().map(|q| q.name.chars().count()).max().unwrap_or(0);
        for q in &case.quantities {
            let gap = " ".repeat(width - q.name.chars().count());
            let shown = if q.value.is_some() { united(value(q), &q.unit) } else { value(q) };
            let _ = writeln!(text, "  {}{gap}   {shown}", q.name);
            if let Some(reason) = &q.reason {
                let _ = writeln!(text, "      {reason}");
            }
        }
        for check in case.checks.iter().filter(|c| c.passed == Some(false)) {
            let _ = writeln!(text, "  LOOK  {}   {}", check.name, check.result);
        }
    }
    if !outcome.envelopes.is_empty() {
        let _ = writeln!(text, "\nenvelope over {}", outcome.envelopes[0].cases.join(", "));
    }
    let width = outcome.envelopes.iter().map(|e| e.name.chars().count()).max().unwrap_or(0);
    for e in &outcome.envelopes {
        let gap = " ".repeat(width - e.name.chars().count());
        let peak = |p: &Option<Peak>| match p {
            Some(p) => {
                let (value, place) = (united(concise(p.value, p.error), &e.unit), few(p.x, 5));
                format!("{value} at {} ({})", united(place, &outcome.coordinate_unit), p.case)
            }
            None => "none".to_owned(),
        };
        let _ = writeln!(text, "  {}{gap}   largest {}, smallest {}", e.name, peak(&e.high), peak(&e.low));
    }
    text
}

/// For the page.
pub(super) fn section(outcome: &Outcome) -> Markup {
    let unit = |text: &str| if text == "1" { String::new() } else { pretty(text) };
    let minus = |text: String| text.replace('-', "−");
    html! {
        @if !outcome.cases.is_empty() {
            section class="cases" {
                h2 { "Load cases" }
                dl {
                    @for case in &outcome.cases {
                        div { dt { (case.name) } dd { (changes(case)) @if let Some(reason) = &case.reason { ": not solved, " (reason) } } }
                    }
                }
                div class="wide" {
                    table class="results" {
                        thead { tr { th { "Quantity" } th { "Case" } th { "Value" } th { "Unit" } } }
                        @for (k, q) in outcome.quantities.iter().enumerate() {
                            tbody {
                                tr {
                                    th scope="rowgroup" rowspan=(outcome.cases.len() + 1) { (q.name) }
                                    td { (BASE) } td class="number" { (minus(value(q))) } td class="unit" { (unit(&q.unit)) }
                                }
                                @for case in &outcome.cases {
                                    @if let Some(q) = case.quantities.get(k) {
                                        tr { td { (case.name) } td class="number" { (minus(value(q))) } td class="unit" { (unit(&q.unit)) } }
                                    }
                                }
                            }
                        }
                    }
                }
                @if !outcome.envelopes.is_empty() {
                    div class="wide" { (peaks(&outcome.envelopes, outcome)) }
                    p class="remark" { "All places with the cases that govern them are in envelope.csv." }
                }
            }
        }
    }
}

fn peaks(envelopes: &[Envelope], outcome: &Outcome) -> Markup {
    let unit = |text: &str| if text == "1" { String::new() } else { pretty(text) };
    html! {
        table class="figures" {
            thead {
                tr {
                    th { "Along the span" } th { "Unit" }
                    @for word in ["largest", "smallest"] {
                        th { (word) } th { "at " (outcome.coordinate) " " span class="unit" { (unit(&outcome.coordinate_unit)) } } th { "case" }
                    }
                }
            }
            tbody {
                @for e in envelopes {
                    tr {
                        th scope="row" { (e.name) }
                        td class="unit" { (unit(&e.unit)) }
                        @for peak in [&e.high, &e.low] {
                            @match peak {
                                Some(p) => {
                                    td class="number" { (concise(p.value, p.error).replace('-', "−")) }
                                    td class="number" { (few(p.x, 5)) }
                                    td { (p.case) }
                                }
                                None => { td { "none" } td {} td {} }
                            }
                        }
                    }
                }
            }
        }
    }
}
