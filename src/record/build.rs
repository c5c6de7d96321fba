//! From a solved sheet to what a record shows. Display units are applied here.

use super::outcome::{Check, Curve, Entry, Feature, FeatureKind, Mark, MeshRow, Outcome, Quantity, Status};
use crate::error::Error;
use crate::evidence::nodal::nodal;
use crate::evidence::residual::{Residual, residual};
use crate::field::Field;
use crate::model::{Profile, Side};
use crate::quantity;
use crate::sheet::{Asked, Datum, Line, Role, Sheet};
use crate::solve::Solution;
use crate::unit::Unit;

/// Points drawn per element.
const DRAWN: usize = 24;
/// Most elements whose coefficients and curves are kept in full.
const MOST_ELEMENTS: usize = 400;
/// Most elements for which every point is drawn.
const SIGNIFICANT: f64 = 1e-14;

/// Where a sheet comes from.
#[derive(Debug, Clone, Copy)]
pub struct Origin<'a> {
    /// File as named on the command line.
    pub source: &'a str,
    /// Its text.
    pub text: &'a str,
}

/// A record of a sheet that was read but not solved.
pub fn unsolved(sheet: &Sheet, origin: Origin<'_>) -> Outcome {
    let s = &sheet.statement;
    let unit = &s.coordinate_unit;
    let shown = |x: f64| unit.from_si(x);
    let line = |l: &Line| Entry { name: l.name.clone(), text: l.text.clone(), remark: l.remark.clone() };
    let features = s.features.iter().map(|f| Feature {
        x: shown(f.x),
        label: f.label.clone(),
        kind: match f.role {
            Role::Condition => FeatureKind::Condition,
            Role::Jump => FeatureKind::Jump,
            Role::Release => FeatureKind::Release,
            Role::Break => FeatureKind::Break,
        },
    });
    Outcome {
        title: sheet.title.clone(),
        note: sheet.note.clone(),
        source: origin.source.to_owned(),
        sheet: origin.text.to_owned(),
        status: Status::Failed,
        reason: None,
        coordinate: s.coordinate.clone(),
        coordinate_unit: unit.text.clone(),
        span: (shown(s.span[0]), shown(s.span[1])),
        unknowns: s.unknowns.iter().map(line).collect(),
        equations: s.equations.iter().map(line).collect(),
        conditions: s.conditions.iter().map(line).collect(),
        data: s.data.iter().map(datum).collect(),
        quantities: Vec::new(),
        checks: Vec::new(),
        curves: Vec::new(),
        stations: Vec::new(),
        residual: Vec::new(),
        features: features.collect(),
        path: None,
        cases: Vec::new(),
        envelopes: Vec::new(),
        modes: Vec::new(),
        count_checked: None,
        count_region: [f64::NAN; 4],
        decay_names: s.carried.clone(),
        mesh: Vec::new(),
        passes: 0,
        warnings: sheet.warnings.clone(),
        relative: sheet.relative,
    }
}

fn datum(d: &Datum) -> Entry {
    let value = d.value.as_ref().map(|(v, unit)| {
        let shown = unit.from_si(*v);
        if unit.text == "1" { number(shown) } else { format!("{} {}", number(shown), unit.text) }
    });
    let remark = match value {
        // A plain datum speaks for itself.
        Some(value) if value == d.text => String::new(),
        Some(value) => format!("= {value}"),
        None => d.remark.clone(),
    };
    Entry { name: d.name.clone(), text: d.text.clone(), remark }
}

/// Up to twelve digits, without zeros at the end.
fn number(value: f64) -> String {
    let rounded: f64 = format!("{value:.11e}").parse().unwrap_or(value);
    if rounded != 0.0 && !(1e-4..1e9).contains(&rounded.abs()) { format!("{rounded:e}") } else { format!("{rounded}") }
}

/// A record of a sheet that could not be solved.
pub fn failed(sheet: &Sheet, origin: Origin<'_>, error: &Error) -> Outcome {
    let reason = sheet.reason(error);
    let mut outcome = unsolved(sheet, origin);
    for (label, formula, unit) in sheet.wanted() {
        outcome.quantities.push(Quantity {
            name: label.to_owned(),
            formula: formula.to_owned(),
            value: None,
            error: 0.0,
            unit: unit.text.clone(),
            reason: Some(reason.clone()),
            remarks: Vec::new(),
            met: false,
        });
    }
    outcome.reason = Some(reason);
    outcome
}

/// A record of a solved sheet. With `second_route` the problem is also solved by the independent dense route.
pub fn solved(sheet: &Sheet, solution: &Solution, origin: Origin<'_>, second_route: bool) -> Outcome {
    let mut outcome = unsolved(sheet, origin);
    let asked = sheet.evaluate(solution);
    outcome.quantities = asked.iter().map(|a| asked_quantity(a, sheet.relative)).collect();
    let met = outcome.quantities.iter().all(|q| q.met);
    outcome.status = if met { Status::Solved } else { Status::Inaccurate };
    outcome.passes = solution.passes;
    if sheet.infinite() {
        let unit = &sheet.statement.coordinate_unit;
        let [from, to] = solution.field.mesh.span().map(|x| unit.from_si(x));
        outcome.span = (from, to);
    }
    let found = residual(&sheet.model_of(&solution.field), &solution.field).ok();
    outcome.checks = checks(sheet, solution, found.as_ref());
    if sheet.infinite() {
        let (from, to) = outcome.span;
        let unit = if outcome.coordinate_unit == "1" { "" } else { &outcome.coordinate_unit };
        outcome.checks.push(Check {
            name: "infinite end".into(),
            result: format!("cut to {from:.4} .. {to:.4} {unit}").trim_end().to_owned(),
            meaning: "twice the span on which no asked number moved any more; the difference is in the bars".into(),
            passed: None,
        });
    }
    if second_route {
        outcome.checks.push(second(sheet, solution, &asked));
    }
    if let Some(found) = &found {
        outcome.residual = vec![residual_curve(sheet, found)];
    }
    outcome.curves = curves(sheet, solution);
    outcome.stations = stations(sheet, &solution.field);
    outcome.mesh = mesh(sheet, &solution.field);
    outcome
}

pub(super) fn asked_quantity(asked: &Asked, relative: f64) -> Quantity {
    let printed = asked.printed();
    let limit = relative * asked.unit.difference_from_si(asked.scale).abs();
    let met = printed.is_some_and(|p| p.error <= limit || p.error == 0.0);
    let reason = match (&asked.value, printed) {
        (Err(reason), _) => Some(reason.clone()),
        (Ok(_), Some(p)) if !met => {
            Some(format!("the bar {:.1e} is above the {limit:.1e} that relative = {relative:e} allows", p.error))
        }
        _ => None,
    };
    Quantity {
        name: asked.label.clone(),
        formula: asked.formula.clone(),
        value: printed.map(|p| p.value),
        error: printed.map_or(0.0, |p| p.error),
        unit: asked.unit.text.clone(),
        reason,
        remarks: asked.remarks.clone(),
        met,
    }
}

fn checks(sheet: &Sheet, solution: &Solution, found: Option<&Residual>) -> Vec<Check> {
    let mut checks = Vec::new();
    for balance in sheet.balances(solution) {
        let gap = (balance.flows.value - balance.sources.value).abs();
        let bar = balance.flows.error + balance.sources.error + 1e-14 * balance.size;
        let relative = if balance.size > 0.0 { gap / balance.size } else { 0.0 };
        checks.push(Check {
            name: format!("balance of `{}`", balance.name),
            result: format!("open by {relative:.1e} of the largest flow"),
            meaning: "what the span takes up along its length against what passes its ends and prescribed jumps".into(),
            passed: Some(gap <= bar.max(1e-10 * balance.size)),
        });
    }
    if let Some(found) = found {
        checks.push(Check {
            name: "residual on a finer Gauss grid".into(),
            result: format!(
                "{:.1e} in the mean, {:.1e} at most, relative to the largest terms",
                found.norm, found.largest
            ),
            meaning: "how well the equations hold between the points where they were enforced".into(),
            passed: Some(found.norm <= 1e-8),
        });
    }
    checks.push(Check {
        name: "decay of the coefficients".into(),
        result: format!(
            "{} element{}, {} pass{}",
            solution.field.mesh.elements.len(),
            if solution.field.mesh.elements.len() == 1 { "" } else { "s" },
            solution.passes,
            if solution.passes == 1 { "" } else { "es" }
        ),
        meaning: if solution.resolved {
            "the last Legendre coefficients on every element are as small as asked or rounding".into()
        } else {
            "the mesh did not resolve the solution to the end: rely on the bars only".into()
        },
        passed: Some(solution.resolved),
    });
    checks.push(Check {
        name: "conditioning".into(),
        result: format!("{:.1e}", solution.condition),
        meaning: "largest against smallest singular value of the closing system: relative changes of the data may be \
                  amplified by as much; the bars contain it"
            .into(),
        passed: None,
    });
    checks
}

/// The second route: its numbers against the answer's.
fn second(sheet: &Sheet, solution: &Solution, asked: &[Asked]) -> Check {
    let name = "second route (dense, nodal values, differentiation matrices)".to_owned();
    let meaning =
        "an independent solution of the same problem; its own rounding grows with the nodes, so agreement to \
                   seven digits is what it can show"
            .to_owned();
    if !sheet.statement.linear {
        return Check { name, result: "not made: it is for linear problems".into(), meaning, passed: None };
    }
    match nodal(&sheet.model_of(&solution.field), &solution.base().mesh) {
        Ok(field) => {
            let mut worst = 0.0f64;
            for (asked, other) in asked.iter().zip(sheet.plain_numbers(&field)) {
                if let (Ok(own), Ok(other)) = (&asked.value, other)
                    && asked.scale > 0.0
                {
                    worst = worst.max((own.value - other).abs() / asked.scale);
                }
            }
            let result = format!("largest difference {worst:.1e}, relative");
            Check { name, result, meaning, passed: Some(worst <= 1e-6) }
        }
        Err(error) => Check { name, result: error.to_string(), meaning, passed: None },
    }
}

fn residual_curve(sheet: &Sheet, found: &Residual) -> Curve {
    let unit = &sheet.statement.coordinate_unit;
    let step = found.points.len().div_ceil(MOST_ELEMENTS).max(1);
    let pieces = found.points.iter().step_by(step);
    let pieces = pieces.map(|p| p.iter().map(|(x, r)| (unit.from_si(*x), *r)).collect()).collect();
    Curve { name: "residual, relative".into(), unit: "1".into(), pieces, marks: Vec::new() }
}

/// The first unknown along the span.
pub(super) fn first_curve(sheet: &Sheet, solution: &Solution) -> Option<Curve> {
    let x_unit = &sheet.statement.coordinate_unit;
    let (name, unit, profile) = sheet.curves().next()?;
    let pieces = pieces(&solution.field, profile, x_unit, unit);
    let marks = marks(&solution.field, profile, x_unit, unit);
    Some(Curve { name: name.to_owned(), unit: unit.text.clone(), pieces, marks })
}

/// Unknowns and named expressions along the span, extremes marked.
fn curves(sheet: &Sheet, solution: &Solution) -> Vec<Curve> {
    let x_unit = &sheet.statement.coordinate_unit;
    sheet
        .curves()
        .map(|(name, unit, profile)| {
            let pieces = pieces(&solution.field, profile, x_unit, unit);
            let marks = marks(&solution.field, profile, x_unit, unit);
            Curve { name: name.to_owned(), unit: unit.text.clone(), pieces, marks }
        })
        .collect()
}

/// Polylines; a new one begins where the values on both sides of a joint differ.
fn pieces(field: &Field, profile: &dyn Profile, x_unit: &Unit, unit: &Unit) -> Vec<Vec<(f64, f64)>> {
    let elements = &field.mesh.elements;
    let count = if elements.len() > MOST_ELEMENTS { 3 } else { DRAWN };
    let mut lines: Vec<Vec<(f64, f64)>> = Vec::new();
    let mut before: Option<f64> = None;
    let mut size = 0.0f64;
    for (index, element) in elements.iter().enumerate() {
        let mut line: Vec<(f64, f64)> = Vec::with_capacity(count + 1);
        let mut last = None;
        for k in 0..=count {
            // Denser towards the ends, as solutions bend there.
            let s = -(std::f64::consts::PI * k as f64 / count as f64).cos();
            let s = if k == count { 1.0 } else { s };
            let jets = field.jets(index, s, profile.tops());
            let x = element.coordinate(s);
            let value = profile.value(x, element.piece, &jets, &field.constants);
            if value.is_finite() {
                size = size.max(value.abs());
                line.push((x_unit.from_si(x), unit.from_si(value)));
                last = Some(value);
                if k == 0
                    && let (Some(b), Some(open)) = (before, lines.last_mut())
                    && (b - value).abs() <= 1e-9 * size.max(SIGNIFICANT)
                {
                    line.pop();
                    let joined = std::mem::take(open);
                    lines.pop();
                    line = joined;
                }
            }
        }
        before = last;
        lines.push(line);
    }
    lines.retain(|l| !l.is_empty());
    lines
}

/// The table of values along the span.
fn stations(sheet: &Sheet, field: &Field) -> Vec<Vec<f64>> {
    let x_unit = &sheet.statement.coordinate_unit;
    let elements = &field.mesh.elements;
    let count = if elements.len() > MOST_ELEMENTS { 4 } else { DRAWN };
    let mut rows = Vec::new();
    for (index, element) in elements.iter().enumerate() {
        let joint = index > 0 && elements[index - 1].piece == element.piece;
        for k in usize::from(joint)..=count {
            let s = 2.0 * k as f64 / count as f64 - 1.0;
            let x = element.coordinate(s);
            let mut row = vec![x_unit.from_si(x)];
            row.extend(sheet.curves().map(|(_, unit, profile)| {
                let jets = field.jets(index, s, profile.tops());
                unit.from_si(profile.value(x, element.piece, &jets, &field.constants))
            }));
            rows.push(row);
        }
    }
    rows
}

fn marks(field: &Field, profile: &dyn Profile, x_unit: &Unit, unit: &Unit) -> Vec<Mark> {
    let [from, to] = field.mesh.span();
    let high = quantity::maximum(field, profile, from, to, None);
    let low = quantity::minimum(field, profile, from, to, None);
    let mut marks = Vec::new();
    for (found, word) in [(high, "largest"), (low, "smallest")] {
        let Ok(found) = found else { continue };
        let label = match found.side {
            Some(Side::Left) => format!("{word} (left of the break)"),
            Some(Side::Right) => format!("{word} (right of the break)"),
            None => word.to_owned(),
        };
        marks.push(Mark { x: x_unit.from_si(found.place.value), value: unit.from_si(found.value.value), label });
    }
    // What is rounding beside the other one is zero.
    let size = marks.iter().map(|m| m.value.abs()).fold(0.0, f64::max);
    marks.iter_mut().filter(|m| m.value.abs() <= 1e-11 * size).for_each(|m| m.value = 0.0);
    // A constant needs no two marks.
    if let [a, b] = &marks[..]
        && (a.value - b.value).abs() <= 1e-12 * a.value.abs().max(b.value.abs())
    {
        marks.truncate(1);
    }
    marks
}

fn mesh(sheet: &Sheet, field: &Field) -> Vec<MeshRow> {
    let unit = &sheet.statement.coordinate_unit;
    let count = sheet.statement.carried.len();
    let orders = field.layout.orders();
    let largest: Vec<f64> = (0..count)
        .map(|u| {
            let series = (0..field.mesh.elements.len()).flat_map(|e| field.series(e, u, orders[u]).iter());
            series.fold(0.0f64, |s, c| s.max(c.abs()))
        })
        .collect();
    let step = field.mesh.elements.len().div_ceil(MOST_ELEMENTS).max(1);
    (0..field.mesh.elements.len())
        .step_by(step)
        .map(|e| {
            let element = field.element(e);
            let decay = (0..count)
                .map(|u| {
                    let scale = if largest[u] > 0.0 { largest[u] } else { 1.0 };
                    field.series(e, u, orders[u]).iter().map(|c| c.abs() / scale).collect()
                })
                .collect();
            MeshRow { from: unit.from_si(element.left), to: unit.from_si(element.right), nodes: element.nodes, decay }
        })
        .collect()
}
