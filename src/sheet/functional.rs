//! Numbers made from a solution: values at points, extremes, places, integrals.

use super::along::Along;
use super::pole;
use crate::error::{Error, Result};
use crate::field::Field;
use crate::formula::graph::{Graph, NodeId};
use crate::formula::number::Rounded;
use crate::formula::tape::{ScalarInputs, Tape};
use crate::model::{Profile, Side};
use crate::quantity::{self, Estimate, Extreme};
use crate::unit::{Dimension, Unit};
use std::cell::RefCell;
use std::collections::{BTreeSet, HashMap};
use std::ops::Range;

/// What is asked of an expression.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    Value,
    Jump,
    Maximum,
    Minimum,
    PlaceOfMaximum,
    PlaceOfMinimum,
    Integral,
    Mean,
    Norm,
    /// The n-th, from 1.
    Root(usize),
}

impl Kind {
    /// Growth of a pole from which on there is no such number; `None` for what looks at points only.
    fn bound(self) -> Option<f64> {
        match self {
            Kind::Maximum | Kind::PlaceOfMaximum | Kind::Minimum | Kind::PlaceOfMinimum => Some(pole::NO_EXTREME),
            Kind::Integral | Kind::Mean => Some(pole::NO_INTEGRAL),
            Kind::Norm => Some(pole::NO_NORM),
            Kind::Value | Kind::Jump | Kind::Root(_) => None,
        }
    }
}

/// One number asked of an expression along the span; it fills the slot of its index.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Functional {
    pub kind: Kind,
    pub expression: NodeId,
    /// A point, or both ends of a stretch, or none for the whole span.
    pub points: Vec<NodeId>,
    /// Where the points stand in the sheet.
    pub point_places: Vec<Range<usize>>,
    pub side: Option<Side>,
    /// Where it stands in the sheet.
    pub place: Range<usize>,
    /// The expression as written.
    pub text: String,
    /// What the expression measures.
    pub dimension: Option<Dimension>,
    /// Unit in which the report asks for it, where it asks for nothing else in the line.
    pub unit: Option<Unit>,
    /// Whether it stands in the report itself.
    pub reported: bool,
}

impl Functional {
    /// Whether a condition on it needs an integral that runs along.
    pub fn runs(&self) -> bool {
        matches!(self.kind, Kind::Integral | Kind::Mean)
    }
}

/// A formula of numbers asked, ready to be evaluated on fields.
pub(super) struct Reckoner {
    formula: Tape,
    /// Needed functionals in order, with the expression along the span and the formulas of the points.
    parts: Vec<Part>,
    slots: usize,
}

struct Part {
    index: usize,
    kind: Kind,
    side: Option<Side>,
    text: String,
    along: Along,
    /// What it divides by, where a whole stretch is asked.
    divisors: Vec<Along>,
    points: Vec<Tape>,
}

/// Part of its size by which a number is varied to see how a formula answers.
const SMALL: f64 = 1e-6;

/// Where extremes were found on the first field: the others must answer for the same ones.
pub(super) type Memory = RefCell<HashMap<usize, f64>>;

impl Reckoner {
    pub fn new(
        graph: &mut Graph,
        formula: NodeId,
        functionals: &[Functional],
        unknowns: usize,
        points: &[f64],
    ) -> Self {
        let mut needed: BTreeSet<usize> = BTreeSet::new();
        let mut queue = vec![formula];
        while let Some(node) = queue.pop() {
            for slot in graph.slots_of(node) {
                if needed.insert(slot as usize) {
                    let functional = &functionals[slot as usize];
                    queue.push(functional.expression);
                    queue.extend(&functional.points);
                }
            }
        }
        // Inner ones were lowered first: ascending order is an order of dependence.
        let parts = needed.into_iter().map(|index| {
            let f = &functionals[index];
            let whole = graph.expand(f.expression);
            let divisors = if f.kind.bound().is_some() { pole::divisors(graph, whole) } else { Vec::new() };
            Part {
                index,
                kind: f.kind,
                side: f.side,
                text: f.text.clone(),
                along: Along::new(graph, f.expression, unknowns, points),
                divisors: divisors.into_iter().map(|d| Along::new(graph, d, unknowns, points)).collect(),
                points: f.points.iter().map(|p| Tape::compile(graph, &[*p])).collect(),
            }
        });
        let parts = parts.collect();
        Self { formula: Tape::compile(graph, &[formula]), parts, slots: functionals.len() }
    }

    /// The number on a field, with the rounding of its own making.
    pub fn number(&self, field: &Field, memory: &Memory) -> Result<Estimate> {
        let slots = self.fill(field, memory)?;
        let value = scalar(&self.formula, &slots, field);
        if value.value.is_finite() && value.error.is_finite() {
            return Ok(Estimate { value: value.value, error: value.error });
        }
        Err(Error::NotFinite { what: "the result".into(), x: f64::NAN })
    }

    fn fill(&self, field: &Field, memory: &Memory) -> Result<Vec<Rounded>> {
        let mut slots = vec![Rounded::exact(f64::NAN); self.slots];
        for part in &self.parts {
            let found = part.evaluate(field, &slots, field.mesh.span(), memory)?;
            slots[part.index] = Rounded { value: found.value, error: found.error };
        }
        Ok(slots)
    }

    /// Size against which the accuracy of the number counts: the number itself, or what it would be with each of its
    /// parts as large as its expression gets on the span.
    pub fn scale(&self, field: &Field) -> Result<f64> {
        let memory = Memory::default();
        let mut slots = self.fill(field, &memory)?;
        let own = scalar(&self.formula, &slots, field).value.abs();
        let [from, to] = field.mesh.span();
        for part in &self.parts {
            let size = match part.kind {
                Kind::PlaceOfMaximum | Kind::PlaceOfMinimum | Kind::Root(_) => to - from,
                kind => {
                    let mut along = part.along.clone();
                    along.fill(&slots);
                    // At a singular end the expression may have no value: then its value here must do.
                    let size = [quantity::maximum, quantity::minimum]
                        .iter()
                        .filter_map(|find| find(field, &along, from, to, None).ok())
                        .map(|extreme| extreme.value.value.abs())
                        .fold(slots[part.index].value.abs(), f64::max);
                    match kind {
                        Kind::Integral => size * (to - from),
                        Kind::Norm => size * (to - from).sqrt(),
                        _ => size,
                    }
                }
            };
            // A small part of the size, so that the formula stays near where it is.
            slots[part.index].error = SMALL * size;
        }
        let spread = scalar(&self.formula, &slots, field).error / SMALL;
        Ok(if spread.is_finite() { own.max(spread) } else { own })
    }

    /// The extreme behind a number that is just one, for remarks on sides and ties.
    pub fn extreme(&self, field: &Field) -> Option<Extreme> {
        let [part] = &self.parts[..] else { return None };
        let ends = part.ends(field, &[], field.mesh.span()).ok()?;
        match part.kind {
            Kind::Maximum | Kind::PlaceOfMaximum => quantity::maximum(field, &part.along, ends[0], ends[1], None).ok(),
            Kind::Minimum | Kind::PlaceOfMinimum => quantity::minimum(field, &part.along, ends[0], ends[1], None).ok(),
            _ => None,
        }
    }
}

fn scalar(tape: &Tape, slots: &[Rounded], field: &Field) -> Rounded {
    let constants: Vec<Rounded> = field.constants.iter().map(|c| Rounded::exact(*c)).collect();
    let mut out = [Rounded::exact(f64::NAN)];
    let inputs = ScalarInputs { x: Rounded::exact(f64::NAN), jets: &[], constants: &constants, slots, tests: &[] };
    tape.run_scalar(&mut Vec::new(), &inputs, &mut out);
    out[0]
}

impl Part {
    /// Points, or both ends of the span.
    fn ends(&self, field: &Field, slots: &[Rounded], span: [f64; 2]) -> Result<Vec<f64>> {
        if self.points.is_empty() {
            return Ok(span.to_vec());
        }
        let inside = |x: f64| {
            // A point found by a computation may lie beyond an end by rounding.
            let slack = 1e-9 * (span[1] - span[0]);
            if x.is_finite() && x >= span[0] - slack && x <= span[1] + slack {
                Ok(x.clamp(span[0], span[1]))
            } else {
                Err(Error::Argument { what: "point", value: x.to_string(), range: "the span (SI units)" })
            }
        };
        self.points.iter().map(|tape| inside(scalar(tape, slots, field).value)).collect()
    }

    fn evaluate(&self, field: &Field, slots: &[Rounded], span: [f64; 2], memory: &Memory) -> Result<Estimate> {
        let mut ends = self.ends(field, slots, span)?;
        let mut along = self.along.clone();
        along.fill(slots);
        // Only an integral counts its direction.
        if let ([from, to], true) = (&mut ends[..], self.kind != Kind::Integral)
            && from > to
        {
            std::mem::swap(from, to);
        }
        if let (Some(bound), &[from, to]) = (self.kind.bound(), &ends[..]) {
            let divisors = self.divisors.iter().cloned().map(|mut divisor| {
                divisor.fill(slots);
                divisor
            });
            let divisors: Vec<Along> = divisors.collect();
            if let Some(x) = pole::pole(field, &along, &divisors, [from.min(to), from.max(to)], bound)? {
                return Err(Error::NotFinite { what: format!("`{}`", self.text), x });
            }
        }
        let near = || memory.borrow().get(&self.index).copied();
        let keep = |extreme: &Extreme| {
            memory.borrow_mut().entry(self.index).or_insert(extreme.place.value);
        };
        match self.kind {
            Kind::Value => self.value(field, &along, ends[0], slots),
            Kind::Jump => {
                let left = quantity::value_at(field, &along, ends[0], Side::Left)?;
                let right = quantity::value_at(field, &along, ends[0], Side::Right)?;
                Ok(Estimate { value: right.value - left.value, error: left.error + right.error })
            }
            Kind::Maximum | Kind::PlaceOfMaximum | Kind::Minimum | Kind::PlaceOfMinimum => {
                let largest = matches!(self.kind, Kind::Maximum | Kind::PlaceOfMaximum);
                let find = if largest { quantity::maximum } else { quantity::minimum };
                let extreme = find(field, &along, ends[0], ends[1], near())?;
                keep(&extreme);
                let place = matches!(self.kind, Kind::PlaceOfMaximum | Kind::PlaceOfMinimum);
                Ok(if place { extreme.place } else { extreme.value })
            }
            Kind::Integral => quantity::integral(field, &along, ends[0], ends[1]),
            Kind::Mean => {
                let sum = quantity::integral(field, &along, ends[0], ends[1])?;
                let length = ends[1] - ends[0];
                if length == 0.0 {
                    return Err(Error::Unsupported("the stretch of this mean has no length".into()));
                }
                Ok(Estimate { value: sum.value / length, error: sum.error / length.abs() })
            }
            Kind::Norm => quantity::norm(field, &along, ends[0], ends[1]),
            Kind::Root(n) => {
                let roots = quantity::roots(field, &along, ends[0], ends[1])?;
                roots.get(n - 1).copied().ok_or_else(|| {
                    let text = &self.text;
                    Error::Unsupported(match roots.len() {
                        0 => format!("`{text}` does not change sign there"),
                        1 => format!("`{text}` changes sign only once there"),
                        count => format!("`{text}` changes sign only {count} times there"),
                    })
                })
            }
        }
    }

    /// Value at a point; without a side both sides must agree.
    fn value(&self, field: &Field, along: &Along, x: f64, slots: &[Rounded]) -> Result<Estimate> {
        let _ = slots;
        if let Some(side) = self.side {
            return quantity::value_at(field, along, x, side);
        }
        let left = quantity::value_at(field, along, x, Side::Left)?;
        let right = quantity::value_at(field, along, x, Side::Right)?;
        let size = left.value.abs().max(right.value.abs()).max(along.size_near(field, x));
        if (left.value - right.value).abs() > 1e-7 * size {
            return Err(Error::Unsupported(format!(
                "`{}` has two values there ({} and {} in SI units): mark the side, as in (a-) or (a+)",
                self.text, left.value, right.value
            )));
        }
        Ok(left)
    }
}

impl Along {
    /// Rough size of the expression around a point: at both ends of the element that holds it.
    fn size_near(&self, field: &Field, x: f64) -> f64 {
        let element = field.locate(x, Side::Left);
        [-1.0, 0.0, 1.0]
            .iter()
            .map(|s| {
                let jets = field.jets(element, *s, self.tops());
                let place = field.element(element);
                self.value(place.coordinate(*s), place.piece, &jets, &field.constants).abs()
            })
            .filter(|v| v.is_finite())
            .fold(0.0, f64::max)
    }
}
