//! What each curve reaches along the span over the sheet as it stands and all its load cases.

use super::axis::{few, pretty};
use super::outcome::{Curve, Envelope, Extent, Mark, Outcome, Peak};
use crate::model::{Profile, Side};
use crate::quantity;
use crate::sheet::Sheet;
use crate::solve::Solution;
use crate::unit::Unit;
use std::fmt::Write;

/// Name of the sheet as it stands.
pub const BASE: &str = "base";

/// Places between two points of the span.
const BETWEEN: usize = 24;
/// Most places, breaks apart.
const MOST_PLACES: usize = 4_000;

/// A solved case.
pub(super) struct Solved<'a> {
    pub name: &'a str,
    pub sheet: &'a Sheet,
    pub solution: &'a Solution,
}

/// Envelopes of all curves; cases on another span are left out, which is said in the warnings returned.
pub(super) fn envelopes(all: &[Solved<'_>]) -> (Vec<Envelope>, Vec<String>) {
    let Some(base) = all.first() else { return (Vec::new(), Vec::new()) };
    let [from, to] = base.sheet.statement.span;
    let small = 1e-12 * (to - from).max(from.abs()).max(to.abs());
    let fits = |s: &&Solved<'_>| {
        let [a, b] = s.sheet.statement.span;
        (a - from).abs() <= small && (b - to).abs() <= small
    };
    let warnings = all
        .iter()
        .filter(|s| !fits(s))
        .map(|s| format!("case `{}` has another span: it is not part of the envelopes", s.name))
        .collect();
    let all: Vec<&Solved<'_>> = all.iter().filter(fits).collect();
    if all.len() < 2 {
        return (Vec::new(), warnings);
    }
    let mut envelopes = Vec::new();
    for (name, unit, _) in base.sheet.curves() {
        let profiles: Vec<(&Solved<'_>, &dyn Profile)> = all
            .iter()
            .filter_map(|s| s.sheet.curves().find(|(own, ..)| *own == name).map(|(_, _, profile)| (*s, profile)))
            .collect();
        envelopes.push(one(name, unit, &base.sheet.statement.coordinate_unit, &profiles));
    }
    (envelopes, warnings)
}

fn one(name: &str, unit: &Unit, x_unit: &Unit, profiles: &[(&Solved<'_>, &dyn Profile)]) -> Envelope {
    let mut points: Vec<f64> = Vec::new();
    let mut peaks: [Option<Peak>; 2] = [None, None];
    for (solved, profile) in profiles {
        let ends = solved.solution.field.mesh.span();
        points.extend(
            solved.solution.field.mesh.elements.windows(2).filter(|p| p[0].piece != p[1].piece).map(|p| p[1].left),
        );
        points.extend(ends);
        let found =
            [solved.solution.minimum(*profile, ends[0], ends[1]), solved.solution.maximum(*profile, ends[0], ends[1])];
        for (k, extreme) in found.into_iter().enumerate() {
            let Ok(extreme) = extreme else { continue };
            points.push(extreme.place.value.clamp(ends[0], ends[1]));
            let value = unit.from_si(extreme.value.value);
            let better = |best: &Peak| {
                // A difference within rounding governs nothing: the first stays.
                let gain = if k == 0 { best.value - value } else { value - best.value };
                gain > 1e-12 * value.abs()
            };
            if peaks[k].as_ref().is_none_or(better) {
                peaks[k] = Some(Peak {
                    value,
                    error: unit.difference_from_si(extreme.value.error).abs(),
                    x: x_unit.from_si(extreme.place.value),
                    case: solved.name.to_owned(),
                });
            }
        }
    }
    points.sort_by(f64::total_cmp);
    let length = points.last().zip(points.first()).map_or(0.0, |(b, a)| b - a);
    points.dedup_by(|b, a| *b - *a <= 1e-12 * length);
    let between = BETWEEN.min(MOST_PLACES / points.len().max(1)).max(1);
    let mut rows = Vec::new();
    for (index, pair) in points.windows(2).enumerate() {
        for k in 0..=between {
            let (x, side) = match k {
                0 => (pair[0], Side::Right),
                k if k == between => (pair[1], Side::Left),
                k => (pair[0] + (pair[1] - pair[0]) * k as f64 / between as f64, Side::Right),
            };
            let Some(row) = extent(x, side, unit, x_unit, profiles) else { continue };
            let same = |last: &Extent| {
                k == 0 && index > 0 && last.x == row.x && close(last.low.0, row.low.0) && close(last.high.0, row.high.0)
            };
            if !rows.last().is_some_and(same) {
                rows.push(row);
            }
        }
    }
    let [low, high] = peaks;
    let cases = profiles.iter().map(|(s, _)| s.name.to_owned()).collect();
    Envelope { name: name.to_owned(), unit: unit.text.clone(), cases, rows, low, high }
}

fn close(a: f64, b: f64) -> bool {
    (a - b).abs() <= 1e-9 * a.abs().max(b.abs())
}

/// Smallest and largest value at a place.
fn extent(x: f64, side: Side, unit: &Unit, x_unit: &Unit, profiles: &[(&Solved<'_>, &dyn Profile)]) -> Option<Extent> {
    let mut found: Option<Extent> = None;
    for (k, (solved, profile)) in profiles.iter().enumerate() {
        let Ok(value) = quantity::value_at(&solved.solution.field, *profile, x, side) else { continue };
        let value = unit.from_si(value.value);
        if !value.is_finite() {
            continue;
        }
        let extent = found.get_or_insert(Extent { x: x_unit.from_si(x), low: (value, k), high: (value, k) });
        let more = 1e-12 * value.abs();
        if value < extent.low.0 - more {
            extent.low = (value, k);
        }
        if value > extent.high.0 + more {
            extent.high = (value, k);
        }
    }
    found
}

impl Envelope {
    /// Both bounds as a curve to be drawn.
    pub fn curve(&self) -> Curve {
        let mut pieces: Vec<Vec<(f64, f64)>> = Vec::new();
        for pick in [|r: &Extent| r.low.0, |r: &Extent| r.high.0] {
            let mut line: Vec<(f64, f64)> = Vec::new();
            for row in &self.rows {
                // A place that comes twice is a break.
                if line.last().is_some_and(|last| last.0 == row.x) {
                    pieces.push(std::mem::take(&mut line));
                }
                line.push((row.x, pick(row)));
            }
            pieces.push(line);
        }
        let mark = |word: &str, peak: &Option<Peak>| {
            peak.as_ref().map(|p| Mark { x: p.x, value: p.value, label: format!("{word} (case {})", p.case) })
        };
        let marks = [mark("largest", &self.high), mark("smallest", &self.low)].into_iter().flatten().collect();
        Curve { name: format!("{}, envelope", self.name), unit: self.unit.clone(), pieces, marks }
    }

    /// In words, for those who do not see the picture.
    pub fn words(&self, outcome: &Outcome) -> String {
        let shown = |unit: &str| if unit == "1" { String::new() } else { format!(" {}", pretty(unit)) };
        let mut words =
            format!("Largest and smallest {} along {} over {}", self.name, outcome.coordinate, self.cases.join(", "));
        for (word, peak) in [("largest", &self.high), ("smallest", &self.low)] {
            let Some(peak) = peak else { continue };
            let (value, place) = (few(peak.value, 5), few(peak.x, 4));
            let _ = write!(
                words,
                "; {word} {value}{} at {place}{} in case {}",
                shown(&self.unit),
                shown(&outcome.coordinate_unit),
                peak.case
            );
        }
        words + "."
    }
}

/// All envelopes as comma-separated values: place, then for each curve its smallest and largest value with the case that
/// governs each. Curves have rows of their own, for their places differ.
pub fn table(outcome: &Outcome) -> String {
    let quoted = |text: &str| {
        if text.contains([',', '"', '\n']) { format!("\"{}\"", text.replace('"', "\"\"")) } else { text.to_owned() }
    };
    let head = if outcome.coordinate_unit == "1" {
        outcome.coordinate.clone()
    } else {
        format!("{} [{}]", outcome.coordinate, outcome.coordinate_unit)
    };
    let mut text = format!("curve,unit,{},smallest,smallest in case,largest,largest in case\n", quoted(&head));
    for e in &outcome.envelopes {
        for Extent { x, low, high } in &e.rows {
            let case = |k: usize| quoted(e.cases.get(k).map_or("", String::as_str));
            let (name, unit) = (quoted(&e.name), quoted(&e.unit));
            let _ = writeln!(text, "{name},{unit},{x:?},{:?},{},{:?},{}", low.0, case(low.1), high.0, case(high.1));
        }
    }
    text
}
