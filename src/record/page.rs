//! The record as one page: self-contained, no script, for screen and paper.

use super::number::concise;
use super::outcome::{Check, Entry, Feature, FeatureKind, Outcome, Quantity, Status};
use super::plot::{self, Plot};
use crate::sheet::short;
use maud::{DOCTYPE, Markup, PreEscaped, html};

const STYLE: &str = include_str!("page.css");

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
                            ul { @for warning in &outcome.warnings { li { (warning) } } }
                        }
                    }
                    (results(outcome))
                    (statement(outcome))
                    (checks(outcome))
                    (pictures(plots))
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
            @if let Some(reason) = &outcome.reason { p class="reason" { (reason) } }
            dl {
                div { dt { "Sheet" } dd { (outcome.source) } }
                div { dt { "Digest (SHA-256)" } dd class="digest" { (sha256) } }
                div { dt { "Program" } dd { "spanwise " (version) } }
                div { dt { "Accuracy asked" } dd { (format!("{:e}", outcome.relative)) ", relative" } }
                div { dt { "Prepared" } dd class="blank" {} }
                div { dt { "Checked" } dd class="blank" {} }
            }
        }
    }
}

fn unit(text: &str) -> &str {
    if text == "1" { "" } else { text }
}

fn results(outcome: &Outcome) -> Markup {
    html! {
        section {
            h2 { "Results" }
            p { "The digits in brackets are the error bar, in units of the last digits shown." }
            div class="wide" {
                table class="results" {
                    thead { tr { th { "Quantity" } th { "Value" } th { "Unit" } th { "Relative bar" } th { "Formula" } } }
                    tbody { @for q in &outcome.quantities { (result(q)) } }
                }
            }
        }
    }
}

fn result(q: &Quantity) -> Markup {
    let relative = q.value.filter(|v| *v != 0.0).map(|v| format!("{:.1e}", q.error / v.abs()));
    html! {
        tr class=[(!q.met).then_some("missed")] {
            th scope="row" {
                (q.name)
                @for remark in &q.remarks { span class="remark" { (remark) } }
                @if let Some(reason) = &q.reason { span class="remark reason" { (reason) } }
            }
            td class="number" { @match q.value { Some(v) => (concise(v, q.error)), None => "none" } }
            td { (unit(&q.unit)) }
            td class="number" { (relative.unwrap_or_default()) }
            td { code { (q.formula) } }
        }
    }
}

fn statement(outcome: &Outcome) -> Markup {
    let (from, to) = outcome.span;
    html! {
        section {
            h2 { "The problem as understood" }
            p {
                "Along " i { (outcome.coordinate) } " from " (short(from)) " to " (short(to)) " "
                (unit(&outcome.coordinate_unit)) "."
            }
            (drawing(outcome))
            (entries("Unknowns", &outcome.unknowns))
            (entries("Equations", &outcome.equations))
            (entries("Conditions", &outcome.conditions))
            (entries("Data and named expressions", &outcome.data))
        }
    }
}

fn entries(name: &str, entries: &[Entry]) -> Markup {
    html! {
        @if !entries.is_empty() {
            h3 { (name) }
            div class="wide" {
                table {
                    tbody {
                        @for e in entries {
                            tr { th scope="row" { (e.name) } td { code { (e.text) } } td class="remark" { (e.remark) } }
                        }
                    }
                }
            }
        }
    }
}

/// The span with what stands where, drawn to scale.
fn drawing(outcome: &Outcome) -> Markup {
    let (from, to) = outcome.span;
    let place = |x: f64| 40.0 + 720.0 * ((x - from) / (to - from)).clamp(0.0, 1.0);
    let many = outcome.features.len() > 24;
    // Labels that would cover each other go to different heights.
    let mut rows: Vec<f64> = Vec::new();
    let mut labelled: Vec<(&Feature, usize)> = Vec::new();
    for (k, feature) in outcome.features.iter().enumerate() {
        let x = place(feature.x);
        // Two lines of one condition at one point need one label.
        if k > 0 && outcome.features[k - 1].label == feature.label && outcome.features[k - 1].x == feature.x {
            labelled.push((feature, usize::MAX));
            continue;
        }
        let width = 7.0 * feature.label.chars().count().min(22) as f64 + 14.0;
        let row = rows.iter().position(|end| x - 0.5 * width > *end).unwrap_or(rows.len());
        let end = x + 0.5 * width;
        if row == rows.len() {
            rows.push(end)
        } else {
            rows[row] = end
        }
        labelled.push((feature, row));
    }
    let height = if many { 70 } else { 66 + 18 * rows.len() };
    html! {
        svg class="span" role="img" viewBox={ "0 0 800 " (height) } aria-label={ "The span with " (outcome.features.len()) " points" } {
            line class="member" x1="40" y1="34" x2="760" y2="34" {}
            @for (feature, row) in labelled {
                @let x = place(feature.x);
                (mark(feature.kind, x))
                @if !many && row < usize::MAX && !feature.label.is_empty() {
                    text x=(x) y=(66 + 18 * row) text-anchor="middle" {
                        (feature.label.chars().take(22).collect::<String>())
                    }
                }
                @if !many && feature.kind == FeatureKind::Break {
                    text class="soft" x=(x) y="16" text-anchor="middle" { (short(feature.x)) }
                }
            }
        }
        p class="legend" {
            "block: condition; arrow: prescribed jump; ring: continuity given up; tick: break of the data"
        }
    }
}

fn mark(kind: FeatureKind, x: f64) -> Markup {
    let points = |dx: f64, top: f64, tip: f64| format!("{},{top} {},{top} {x},{tip}", x - dx, x + dx);
    html! {
        @match kind {
            FeatureKind::Condition => rect class="ink" x=(x - 5.0) y="38" width="10" height="8" {},
            FeatureKind::Jump => {
                line class="load" x1=(x) y1="6" x2=(x) y2="30" {}
                polygon class="load" points=(points(4.0, 24.0, 33.0)) {}
            },
            FeatureKind::Release => circle class="ring" cx=(x) cy="34" r="5" {},
            FeatureKind::Break => line class="tick" x1=(x) y1="26" x2=(x) y2="42" {},
        }
    }
}

fn checks(outcome: &Outcome) -> Markup {
    html! {
        @if !outcome.checks.is_empty() {
            section {
                h2 { "Checks" }
                div class="wide" {
                    table {
                        thead { tr { th { "What was checked" } th { "" } th { "Result" } th { "What it means" } } }
                        tbody { @for c in &outcome.checks { (check(c)) } }
                    }
                }
            }
        }
    }
}

fn check(c: &Check) -> Markup {
    let (class, words) = match c.passed {
        Some(true) => ("good", "passed"),
        Some(false) => ("bad", "look here"),
        None => ("", "for information"),
    };
    html! {
        tr { th scope="row" { (c.name) } td class=(class) { (words) } td { (c.result) } td class="remark" { (c.meaning) } }
    }
}

fn pictures(plots: &[Plot]) -> Markup {
    html! {
        @if !plots.is_empty() {
            section {
                h2 { "Along the span" }
                @for plot in plots {
                    figure {
                        div role="img" aria-label=(plot.words) { (PreEscaped(&plot.svg)) }
                        figcaption { (plot.words) }
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
                        table {
                            thead { tr { th { "from" } th { "to" } th { "nodes" } th { "last coefficient, relative" } } }
                            tbody {
                                @for row in rows {
                                    @let last = row.decay.iter().filter_map(|d| d.last()).fold(0.0f64, |s, c| s.max(*c));
                                    tr {
                                        td class="number" { (short(row.from)) }
                                        td class="number" { (short(row.to)) }
                                        td class="number" { (row.nodes) }
                                        td class="number" { (format!("{last:.1e}")) }
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
