//! The record as one page: self-contained, no script, for screen and paper.

use super::axis::{few, pretty, typeset};
use super::mathematics::formula;
use super::number::concise;
use super::outcome::{Check, Entry, Outcome, Quantity, Status};
use super::plot::{self, Plot};
use maud::{DOCTYPE, Markup, PreEscaped, html};

const STYLE: &str = include_str!("page.css");
/// Most rows of the table of values along the span, breaks apart.
const MOST_STATIONS: usize = 24;

/// The page; `plots` are set into it.
pub fn render(outcome: &Outcome, plots: &[Plot], sha256: &str, version: &str) -> String {
    let title = if outcome.title.is_empty() { "Calculation record" } else { outcome.title.as_str() };
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light dark";
                title { (title) }
                style { (PreEscaped(STYLE)) }
            }
            body {
                (head(outcome, title, sha256, version))
                main {
                    @if !outcome.warnings.is_empty() {
                        section class="warnings" {
                            h2 { "Warnings" }
                            ul { @for warning in &outcome.warnings { li { (worded(warning)) } } }
                        }
                    }
                    (results(outcome))
                    (super::path::section(outcome))
                    (super::cases::section(outcome))
                    (statement(outcome, plots))
                    (checks(outcome))
                    (pictures(plots))
                    (stations(outcome))
                    (mesh(outcome))
                    (cautions())
                    section {
                        h2 { "The sheet" }
                        pre { (outcome.sheet) }
                    }
                }
            }
        }
    };
    page.into_string()
}

fn head(outcome: &Outcome, title: &str, sha256: &str, version: &str) -> Markup {
    let (class, words) = match outcome.status {
        Status::Solved => ("good", "Solved: every asked number met its accuracy"),
        Status::Inaccurate => ("poor", "Solved, but not every number met the accuracy asked"),
        Status::Failed => ("bad", "Not solved"),
    };
    html! {
        header {
            p class="kind" { "Calculation record" }
            h1 { (title) }
            @if let Some(note) = &outcome.note { p class="note" { (note) } }
            p class={ "status " (class) } { (words) }
            @if let Some(reason) = &outcome.reason { p class="reason" { (worded(reason)) } }
            dl {
                div { dt { "Sheet" } dd { (outcome.source) } }
                div { dt { "Digest (SHA-256)" } dd class="digest" { (sha256) } }
                div { dt { "Program" } dd { "spanwise " (version) } }
                div { dt { "Accuracy asked" } dd { (few(outcome.relative, 2)) ", relative" } }
                div { dt { "Prepared" } dd class="blank" {} }
                div { dt { "Checked" } dd class="blank" {} }
            }
        }
    }
}

fn unit(text: &str) -> String {
    if text == "1" { String::new() } else { pretty(text) }
}

/// A coordinate or a value that carries no bar.
fn shown(value: f64) -> String {
    few(value, 7)
}

/// A sentence: what stands between back quotes as code, powers of ten as print shows them.
fn worded(text: &str) -> Markup {
    let closed = text.matches('`').count().is_multiple_of(2);
    html! {
        @if closed {
            @for (k, part) in text.split('`').enumerate() {
                @if k % 2 == 1 { code { (part) } } @else { (typeset(part)) }
            }
        } @else {
            (typeset(text))
        }
    }
}

fn results(outcome: &Outcome) -> Markup {
    html! {
        @if !outcome.quantities.is_empty() {
            section {
                h2 { "Results" }
                p class="lead" {
                    "The digits in brackets are the error bar, in units of the last digits shown: 1.234(5) stands for "
                    "1.234 ± 0.005."
                }
                div class="wide" {
                    table class="results" {
                        thead { tr { th { "Quantity" } th { "Value" } th { "Unit" } th class="bar" { "Bar, relative" } } }
                        tbody { @for q in &outcome.quantities { (result(q, &outcome.coordinate)) } }
                    }
                }
            }
        }
    }
}

fn result(q: &Quantity, coordinate: &str) -> Markup {
    let relative = q.value.filter(|v| *v != 0.0).map(|v| few(q.error / v.abs(), 2));
    html! {
        tr class=[(!q.met).then_some("missed")] {
            th scope="row" {
                (q.name)
                span class="formula" { (formula(&q.formula, coordinate)) }
                @for remark in &q.remarks { span class="remark" { (worded(remark)) } }
                @if !q.met {
                    span class="remark reason" {
                        b { @if q.value.is_some() { "accuracy missed" } @else { "no value" } }
                        @if let Some(reason) = &q.reason { ": " (worded(reason)) }
                    }
                }
            }
            td class="number" { @match q.value { Some(v) => (concise(v, q.error).replace('-', "−")), None => "none" } }
            td class="unit" { (unit(&q.unit)) }
            td class="number bar" { (relative.unwrap_or_default()) }
        }
    }
}

fn statement(outcome: &Outcome, plots: &[Plot]) -> Markup {
    let (from, to) = outcome.span;
    let set = |text: &str| formula(text, &outcome.coordinate);
    html! {
        section {
            h2 { "The problem as understood" }
            p {
                "Along " i { (outcome.coordinate) } " from " (shown(from)) " to " (shown(to)) " "
                (unit(&outcome.coordinate_unit)) "."
            }
            @if let Some(span) = plots.iter().find(|p| p.file == plot::SPAN) {
                div class="picture span" role="img" aria-label=(span.words) { (PreEscaped(&span.svg)) }
            }
            (entries("Unknowns", &outcome.unknowns, &|text| html! { (unit(text)) }))
            (entries("Equations", &outcome.equations, &set))
            (entries("Conditions", &outcome.conditions, &set))
            (entries("Data and named expressions", &outcome.data, &set))
        }
    }
}

fn entries(name: &str, entries: &[Entry], set: &dyn Fn(&str) -> Markup) -> Markup {
    html! {
        @if !entries.is_empty() {
            h3 { (name) }
            div class="wide" {
                table class="entries" {
                    tbody {
                        @for e in entries {
                            tr { th scope="row" { (e.name) } td { (set(&e.text)) } td class="remark" { (e.remark) } }
                        }
                    }
                }
            }
        }
    }
}

fn checks(outcome: &Outcome) -> Markup {
    html! {
        @if !outcome.checks.is_empty() {
            section {
                h2 { "Checks" }
                ul class="checks" { @for c in &outcome.checks { (check(c)) } }
            }
        }
    }
}

fn check(c: &Check) -> Markup {
    let (class, words) = match c.passed {
        Some(true) => ("good", "passed"),
        Some(false) => ("bad", "failed"),
        None => ("plain", "for information"),
    };
    html! {
        li {
            p class={ "verdict " (class) } { (words) }
            div {
                p { b { (worded(&c.name)) } " — " (worded(&c.result)) }
                p class="remark" { (worded(&c.meaning)) }
            }
        }
    }
}

fn pictures(plots: &[Plot]) -> Markup {
    html! {
        @if plots.iter().any(|p| p.file != plot::SPAN) {
            section {
                h2 { "Along the span" }
                div class="pictures" {
                    @for plot in plots.iter().filter(|p| p.file != plot::SPAN) {
                        figure {
                            div class="picture" role="img" aria-label=(plot.words) { (PreEscaped(&plot.svg)) }
                            figcaption { (plot.words) }
                        }
                    }
                }
            }
        }
    }
}

/// Values at chosen places: evenly through the rows, and both limits at every place where a value jumps.
fn stations(outcome: &Outcome) -> Markup {
    let rows = &outcome.stations;
    let step = rows.len().div_ceil(MOST_STATIONS).max(1);
    let close = |a: usize, b: usize| rows.get(a).zip(rows.get(b)).is_some_and(|(a, b)| a.first() == b.first());
    let joint = |k: usize| close(k, k + 1) || k > 0 && close(k - 1, k);
    let joints = (0..rows.len()).filter(|&k| joint(k)).count();
    let chosen = |k: usize| k.is_multiple_of(step) || k + 1 == rows.len() || joints <= MOST_STATIONS && joint(k);
    // Rounding beside much larger values is shown as the zero that it stands for; the file has all digits.
    let columns = rows.first().map_or(0, Vec::len);
    let largest = |k: usize| rows.iter().filter_map(|row| row.get(k)).fold(0.0f64, |s, v| s.max(v.abs()));
    let sizes: Vec<f64> = (0..columns).map(largest).collect();
    let clean = |k: usize, value: f64| if value.abs() < 1e-13 * sizes[k] { 0.0 } else { value };
    html! {
        @if !rows.is_empty() {
            section class="stations" {
                h2 { "Values along the span" }
                p class="lead" {
                    "Chosen places; all of them are in solution.csv. "
                    "A place that stands twice is a break: its left limit, then its right limit."
                }
                div class="wide" {
                    table class="figures" {
                        thead {
                            tr {
                                th { (outcome.coordinate) " " span class="unit" { (unit(&outcome.coordinate_unit)) } }
                                @for c in &outcome.curves { th { (c.name) " " span class="unit" { (unit(&c.unit)) } } }
                            }
                        }
                        tbody {
                            @for (_, row) in rows.iter().enumerate().filter(|(k, _)| chosen(*k)) {
                                tr { @for (k, value) in row.iter().enumerate() { td class="number" { (shown(clean(k, *value))) } } }
                            }
                        }
                    }
                }
            }
        }
    }
}

fn mesh(outcome: &Outcome) -> Markup {
    let rows = &outcome.mesh;
    html! {
        @if !rows.is_empty() {
            section {
                h2 { "Mesh" }
                p { (rows.len()) " element" @if rows.len() != 1 { "s" } ", " (outcome.passes) " pass" @if outcome.passes != 1 { "es" } "." }
                details open[rows.len() <= 12] {
                    summary { "Elements" }
                    div class="wide" {
                        table class="figures" {
                            thead { tr { th { "from" } th { "to" } th { "nodes" } th { "last coefficient, relative" } } }
                            tbody {
                                @for row in rows {
                                    @let last = row.decay.iter().filter_map(|d| d.last()).fold(0.0f64, |s, c| s.max(*c));
                                    tr {
                                        td class="number" { (shown(row.from)) }
                                        td class="number" { (shown(row.to)) }
                                        td class="number" { (row.nodes) }
                                        td class="number" { (few(last, 2)) }
                                    }
                                }
                            }
                        }
                    }
                }
            }
        }
    }
}

fn cautions() -> Markup {
    html! {
        section class="cautions" {
            h2 { "Cautions" }
            ul {
                li { "The numbers answer the equations and data written in the sheet. Whether these describe the structure, the plant or the soil is for the engineer to judge." }
                li { "The bars bound the numerical error and the rounding of the data. They do not contain the uncertainty of data, material or model." }
                li { "Limit states, safety factors, load combinations and detailing are not looked at. Local codes and licensed practice decide." }
            }
        }
    }
}

/// Plots and page of an outcome together.
pub fn with_plots(outcome: &Outcome, sha256: &str, version: &str) -> (String, Vec<Plot>) {
    let plots = plot::all(outcome);
    (render(outcome, &plots, sha256, version), plots)
}
