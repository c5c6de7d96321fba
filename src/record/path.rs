//! Paths: the asked numbers along a parameter, folds, and how the path went.

use super::axis::{few, pretty};
use super::build::{self, Origin, asked_quantity};
use super::number::concise;
use super::outcome::{Check, Curve, Mark, Outcome, PathResult, PathRow, Quantity, Status};
use crate::error::{Error, Result};
use crate::quantity::Estimate;
use crate::sheet::{AskedAt, PathAsked, Sheet};
use crate::solve::{Path, PathEnd};
use maud::{Markup, html};
use std::fmt::Write;

/// The record of a sheet that follows a parameter. The sheet's own numbers are those at the last point of the path.
pub fn followed(sheet: &Sheet, path: &Result<Path>, origin: Origin<'_>, second_route: bool) -> Outcome {
    let (path, asked) = match (path, sheet.path()) {
        (Ok(path), Some(asked)) => (path, asked),
        (Err(error), _) => return build::failed(sheet, origin, error),
        (Ok(_), None) => return build::failed(sheet, origin, &Error::Unsupported("the sheet follows no path".into())),
    };
    let Some(last) = path.points.last() else {
        return build::failed(sheet, origin, &Error::Unsupported("the path has no point".into()));
    };
    let mut outcome = build::solved(sheet, &last.solution, origin, second_route);
    let along = sheet.evaluate_along(path);
    let row = |at: &AskedAt| PathRow {
        parameter: parameter(at.parameter, asked, sheet.relative),
        branch: at.branch,
        quantities: at.asked.iter().map(|a| asked_quantity(a, sheet.relative)).collect(),
    };
    let points: Vec<PathRow> = along.points.iter().map(row).collect();
    let folds: Vec<PathRow> = along.folds.iter().map(row).collect();
    if let Some(last) = points.last() {
        outcome.quantities.clone_from(&last.quantities);
    }
    let met = |rows: &[PathRow]| rows.iter().all(|r| r.parameter.met && r.quantities.iter().all(|q| q.met));
    outcome.status = if met(&points) && met(&folds) { Status::Solved } else { Status::Inaccurate };
    let shown = |value: f64| united(few(asked.unit.from_si(value), 8), &asked.unit.text);
    let name = &asked.parameter;
    let folded = match folds.len() {
        0 => "no fold".to_owned(),
        1 => "one fold".to_owned(),
        n => format!("{n} folds"),
    };
    let (verdict, passed) = match &path.end {
        PathEnd::Reached => (format!("followed to {name} = {}; {folded}", shown(asked.to)), Some(true)),
        PathEnd::Returned => (
            format!(
                "the path turned back: {name} = {} was not reached, behind {folded} it came again to {name} = {}, where it \
                 began",
                shown(asked.to),
                shown(asked.from)
            ),
            Some(true),
        ),
        PathEnd::Fold => {
            let at = folds.last().map_or_else(String::new, |f| printed(&f.parameter));
            let verdict = format!(
                "{name} = {} was not reached: the solutions have a fold at {name} = {at} and there is none beyond it; \
                 through_folds = true goes on behind it",
                shown(asked.to)
            );
            (verdict, Some(false))
        }
        PathEnd::Lost { parameter, reason } => {
            let verdict = format!(
                "{name} = {} was not reached: the path was followed to {name} = {} ({folded}); {reason}",
                shown(asked.to),
                shown(*parameter)
            );
            // The other branch may run on without end; its folds are known all the same.
            (verdict, Some(asked.through_folds && !folds.is_empty()))
        }
    };
    outcome.checks.insert(
        0,
        Check {
            name: format!("path of `{name}`"),
            result: verdict.clone(),
            meaning:
                "each point was solved with the parameter held, each fold as a solution of the extended system, both \
                      to the same bars as any boundary problem"
                    .into(),
            passed,
        },
    );
    if passed == Some(false) {
        outcome.status = Status::Failed;
        outcome.reason = Some(verdict.clone());
        for q in &mut outcome.quantities {
            (q.value, q.met, q.reason) = (None, false, Some(verdict.clone()));
        }
    } else if path.end != PathEnd::Reached {
        outcome.warnings.push(verdict.clone());
    }
    let steps = path.steps.iter().map(|s| (s.length, asked.unit.from_si(s.parameter), s.elements)).collect();
    let (name, unit) = (asked.parameter.clone(), asked.unit.text.clone());
    outcome.path = Some(PathResult { parameter: name, unit, points, folds, steps, verdict });
    outcome
}

/// The parameter as a number of the record.
fn parameter(at: Estimate, asked: &PathAsked, relative: f64) -> Quantity {
    let value = asked.unit.from_si(at.value);
    let error = if at.error == 0.0 {
        0.0
    } else {
        asked.unit.difference_from_si(at.error).abs() + 0.5 * f64::EPSILON * value.abs()
    };
    let sound = value.is_finite() && error.is_finite();
    let span = asked.unit.difference_from_si(asked.to - asked.from).abs();
    Quantity {
        name: asked.parameter.clone(),
        formula: asked.parameter.clone(),
        value: sound.then_some(value),
        error: if sound { error } else { 0.0 },
        unit: asked.unit.text.clone(),
        reason: (!sound).then(|| "it is not finite".into()),
        remarks: Vec::new(),
        met: sound && error <= relative * value.abs().max(span),
    }
}

fn united(text: String, unit: &str) -> String {
    if unit == "1" { text } else { format!("{text} {unit}") }
}

fn printed(q: &Quantity) -> String {
    q.value.map_or_else(|| "none".into(), |value| united(concise(value, q.error), &q.unit))
}

impl PathResult {
    /// Points and folds in the order of the path; true for a fold.
    pub fn rows(&self) -> impl Iterator<Item = (bool, &PathRow)> {
        let branches = 0..=self.folds.len();
        branches.flat_map(move |branch| {
            let points = self.points.iter().filter(move |p| p.branch == branch).map(|p| (false, p));
            points.chain(self.folds.get(branch).map(|f| (true, f)))
        })
    }

    /// Asked numbers that differ along the path; those made of folds and data alone do not.
    fn varying(&self) -> Vec<usize> {
        let count = self.points.first().map_or(0, |p| p.quantities.len());
        let differs = |k: &usize| {
            let mut values = self.rows().filter_map(|(_, row)| row.quantities.get(*k)).map(|q| q.value);
            let first = values.next().flatten();
            values.any(|v| v != first)
        };
        (0..count).filter(differs).collect()
    }

    /// Heads of the columns: the parameter, then the asked numbers given; name and unit.
    fn heads(&self, columns: &[usize]) -> Vec<(&str, &str)> {
        let asked = self.points.first().map_or(&[][..], |p| &p.quantities);
        std::iter::once((self.parameter.as_str(), self.unit.as_str()))
            .chain(columns.iter().filter_map(|k| asked.get(*k)).map(|q| (q.name.as_str(), q.unit.as_str())))
            .collect()
    }

    /// Curves over the parameter, and the parameter over the length of the path.
    fn curves(&self) -> Vec<Curve> {
        let columns = self.varying();
        let heads = self.heads(&columns);
        heads[1..]
            .iter()
            .zip(&columns)
            .map(|((name, unit), &k)| {
                let at = |row: &PathRow| Some((row.parameter.value?, row.quantities.get(k)?.value?));
                let line = self.rows().filter_map(|(_, row)| at(row)).collect();
                let marks = self.folds.iter().enumerate().filter_map(|(n, row)| {
                    at(row).map(|(x, value)| Mark { x, value, label: format!("fold {}", n + 1) })
                });
                Curve { name: (*name).to_owned(), unit: (*unit).to_owned(), pieces: vec![line], marks: marks.collect() }
            })
            .collect()
    }
}

/// Pictures of a path: file name, curve, and the axis that it is drawn over (name, unit, ends).
pub(super) fn pictures(outcome: &Outcome) -> Vec<(String, Curve, Outcome)> {
    let Some(path) = &outcome.path else { return Vec::new() };
    let over = |name: &str, unit: &str, values: &mut dyn Iterator<Item = f64>| {
        let ends = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), v| (a.min(v), b.max(v)));
        Outcome {
            coordinate: name.into(),
            coordinate_unit: unit.into(),
            span: ends,
            features: Vec::new(),
            ..outcome.clone()
        }
    };
    let parameters = over(&path.parameter, &path.unit, &mut path.rows().filter_map(|(_, row)| row.parameter.value));
    let mut all = Vec::new();
    if parameters.span.0 < parameters.span.1 {
        for (k, curve) in path.curves().into_iter().enumerate() {
            all.push((format!("path-{:02}-{}", k + 1, curve.name), curve, parameters.clone()));
        }
    }
    if path.steps.len() > 1 {
        let lengths = over("length of the path, relative", "1", &mut path.steps.iter().map(|s| s.0));
        let line = path.steps.iter().map(|s| (s.0, s.1)).collect();
        let name = format!("{} along the path", path.parameter);
        let curve = Curve { name, unit: path.unit.clone(), pieces: vec![line], marks: Vec::new() };
        all.push(("path-history".into(), curve, lengths));
    }
    all
}

/// For a terminal.
pub fn text(outcome: &Outcome) -> String {
    let Some(path) = &outcome.path else { return String::new() };
    let columns = path.varying();
    let heads =
        path.heads(&columns).into_iter().map(|(n, u)| if u == "1" { n.to_owned() } else { format!("{n} [{u}]") });
    let mut rows: Vec<Vec<String>> = vec![std::iter::once(String::new()).chain(heads).collect()];
    let mut fold = 0;
    for (folds, row) in path.rows() {
        fold += usize::from(folds);
        let first = if folds { format!("fold {fold}") } else { String::new() };
        let cell = |q: &Quantity| q.value.map_or_else(|| "none".to_owned(), |v| concise(v, q.error));
        rows.push(
            std::iter::once(first)
                .chain(std::iter::once(&row.parameter).chain(columns.iter().map(|k| &row.quantities[*k])).map(cell))
                .collect(),
        );
    }
    let columns = rows[0].len();
    let widths: Vec<usize> = (0..columns)
        .map(|k| rows.iter().filter_map(|r| r.get(k)).map(|c| c.chars().count()).max().unwrap_or(0))
        .collect();
    let mut text = format!("\npath of {}: {}\n", path.parameter, path.verdict);
    for row in rows {
        let line: Vec<String> =
            row.iter().zip(&widths).map(|(c, w)| format!("{c}{}", " ".repeat(w - c.chars().count()))).collect();
        let _ = writeln!(text, "  {}", line.join("   ").trim_end());
    }
    text
}

/// For the page.
pub(super) fn section(outcome: &Outcome) -> Markup {
    let unit = |text: &str| if text == "1" { String::new() } else { pretty(text) };
    let columns = outcome.path.as_ref().map_or_else(Vec::new, PathResult::varying);
    let value = |q: &Quantity| q.value.map_or_else(|| "none".to_owned(), |v| concise(v, q.error).replace('-', "−"));
    html! {
        @if let Some(path) = &outcome.path {
            section class="path" {
                h2 { "Path of " (path.parameter) }
                p { (path.verdict) "." }
                div class="wide" {
                    table class="figures" {
                        thead {
                            tr {
                                th { "" }
                                @for (name, own) in path.heads(&columns) { th { (name) " " span class="unit" { (unit(own)) } } }
                            }
                        }
                        tbody {
                            @for (number, (fold, row)) in numbered(path) {
                                tr {
                                    th scope="row" { @if fold { "fold " (number) } }
                                    td class="number" { (value(&row.parameter)) }
                                    @for k in &columns { td class="number" { (value(&row.quantities[*k])) } }
                                }
                            }
                        }
                    }
                }
                p class="remark" { "All digits are in path.csv." }
            }
        }
    }
}

/// Rows with the number of folds so far.
fn numbered(path: &PathResult) -> Vec<(usize, (bool, &PathRow))> {
    let mut folds = 0;
    path.rows()
        .map(|(fold, row)| {
            folds += usize::from(fold);
            (folds, (fold, row))
        })
        .collect()
}

/// All points and folds as comma-separated values, each number with its bar.
pub fn table(path: &PathResult) -> String {
    let quoted = |text: String| {
        if text.contains([',', '"', '\n']) { format!("\"{}\"", text.replace('"', "\"\"")) } else { text }
    };
    let mut text = "fold".to_owned();
    let all: Vec<usize> = (0..path.points.first().map_or(0, |p| p.quantities.len())).collect();
    for (name, unit) in path.heads(&all) {
        let head = if unit == "1" { name.to_owned() } else { format!("{name} [{unit}]") };
        let _ = write!(text, ",{},{}", quoted(head), quoted(format!("bar of {name}")));
    }
    text.push('\n');
    for (number, (fold, row)) in numbered(path) {
        if fold {
            let _ = write!(text, "{number}");
        }
        for q in std::iter::once(&row.parameter).chain(&row.quantities) {
            match q.value {
                Some(value) => {
                    let _ = write!(text, ",{value:?},{:?}", q.error);
                }
                None => text.push_str(",,"),
            }
        }
        text.push('\n');
    }
    text
}
