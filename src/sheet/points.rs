//! Ends and breaks: where the span is cut.

use super::assemble::Assembler;
use super::condition::Read;
use super::lower::{Cover, Formula, Meaning};
use super::{Wanted, short};
use crate::formula::graph::{Inputs, NodeId};
use crate::formula::syntax::{self, Expression, Kind};
use crate::unit::Unit;
use std::collections::BTreeSet;
use std::ops::Range;

/// Most points (ends and breaks) of a sheet.
pub(super) const MOST_POINTS: usize = 4_000;

/// Points nearer than this part of the span are one point.
pub(super) const SAME_POINT: f64 = 1e-13;

impl Assembler<'_, '_> {
    /// What `smooth` insists on must be an unknown or a derivative of one.
    pub(super) fn check_smooth(&mut self) {
        for at in &self.source.smooth {
            let Some(formula) = self.lowerer.parse(at) else { continue };
            let name = match &formula.tree.kind {
                Kind::Name(name) => Some(name),
                Kind::Prime(inner, _) => match &inner.kind {
                    Kind::Name(name) => Some(name),
                    _ => None,
                },
                _ => None,
            };
            let function = name.and_then(|n| self.lowerer.meanings.get(n));
            if !matches!(function, Some(Meaning::Function(_) | Meaning::Faulty)) {
                let message = format!("`{}` is neither an unknown nor a derivative of one", at.text.trim());
                let hint = "smooth names what is continuous although a datum steps: smooth = [\"T'\"]";
                self.lowerer.fault::<()>("smooth", at, &formula.tree.span, message, hint);
            }
        }
    }

    /// Further breaks, with their places.
    pub(super) fn breaks(&mut self) -> Vec<(f64, Range<usize>)> {
        let mut breaks = Vec::new();
        for at in &self.source.breaks {
            let Some(formula) = self.lowerer.parse(at) else { continue };
            let Some(typed) = self.lowerer.lower(at, &formula.tree) else { continue };
            let wanted = self.lowerer.coordinate_dimension;
            if self.lowerer.expect(at, &formula.tree, typed, wanted).is_none() {
                continue;
            }
            match self.lowerer.number_of(typed.node) {
                Some(x) => breaks.push((x, at.span.clone())),
                None => {
                    self.lowerer.fault::<()>("break", at, &formula.tree.span, "a break must be a datum", "");
                }
            }
        }
        breaks
    }

    /// Ends and breaks, ascending; places outside the span are faults and left out.
    pub(super) fn points(
        &mut self,
        span: [f64; 2],
        equations: &[NodeId],
        reads: &[Read],
        breaks: &[(f64, Range<usize>)],
        wanted: &[Wanted],
    ) -> Vec<f64> {
        let length = span[1] - span[0];
        let small = SAME_POINT * length.max(span[0].abs()).max(span[1].abs());
        let inside = |x: f64| x >= span[0] - small && x <= span[1] + small;
        let unit = self.coordinate_unit();
        let shown = |x: f64| format!("{} {}", short(unit.from_si(x)), unit.text);
        let reach = format!("the span runs from {} to {}", shown(span[0]), shown(span[1]));
        let mut points = span.to_vec();
        for (x, place) in breaks {
            if inside(*x) {
                points.push(*x);
            } else {
                let message = format!("the break at {} lies outside the span", shown(*x));
                self.lowerer.faults.add("outside", place.clone(), message, Some(reach.clone()));
            }
        }
        for (node, place) in self.lowerer.limits.clone() {
            let Some(x) = self.lowerer.number_of(node) else { continue };
            if inside(x) {
                points.push(x);
            } else {
                let message = format!("this piece ends at {}, outside the span", shown(x));
                self.lowerer.faults.add("outside", place, message, Some(reach.clone()));
            }
        }
        for cover in std::mem::take(&mut self.lowerer.covers) {
            let Cover { name, ends, places } = cover;
            if ends[0] > span[0] + small {
                let message = format!("`{name}` has no value from {} to {}", shown(span[0]), shown(ends[0]));
                self.lowerer.faults.add("piece", places[0].clone(), message, Some(Cover::HINT.into()));
            }
            if ends[1] < span[1] - small {
                let message = format!("`{name}` has no value from {} to {}", shown(ends[1]), shown(span[1]));
                self.lowerer.faults.add("piece", places[1].clone(), message, Some(Cover::HINT.into()));
            }
        }
        let mut used: BTreeSet<u32> = BTreeSet::new();
        let mut own: Vec<NodeId> = equations.to_vec();
        for read in reads {
            used.extend(self.lowerer.all_slots(&read.node.into_iter().collect::<Vec<_>>()));
            if let Some((_, point, _)) = &read.release {
                match self.lowerer.number_of(*point) {
                    Some(x) if x > span[0] + small && x < span[1] - small => points.push(x),
                    _ => {
                        let message = "a jump or release must lie at a point inside the span";
                        let hint = "at an end write a condition instead: V(L) = -P";
                        self.lowerer.faults.add("outside", read.at.span.clone(), message, Some(hint.into()));
                    }
                }
            }
        }
        for slot in used {
            let functional = self.lowerer.functionals[slot as usize].clone();
            own.push(functional.expression);
            let values = functional.points.iter().filter_map(|p| self.lowerer.number_of(*p));
            points.extend(values.filter(|x| inside(*x)));
        }
        for functional in self.lowerer.functionals.clone() {
            own.push(functional.expression);
            for (node, place) in functional.points.iter().zip(functional.point_places) {
                if let Some(x) = self.lowerer.number_of(*node).filter(|x| !inside(*x)) {
                    let message = format!("this point, {}, lies outside the span", shown(x));
                    self.lowerer.faults.add("outside", place, message, Some(reach.clone()));
                }
            }
        }
        own.extend(wanted.iter().map(|w| w.node));
        own.extend(self.drawn().into_iter().map(|d| d.node));
        for test in self.lowerer.graph.piece_tests(&own) {
            if self.lowerer.graph.depends_on(test.gap).held {
                self.lowerer.moves.set(true);
            }
            points.extend(self.sign_changes(test.gap, span));
        }
        points.extend(self.measured_points(span));
        points.iter_mut().for_each(|x| *x = x.clamp(span[0], span[1]));
        points.sort_by(f64::total_cmp);
        let mut merged: Vec<f64> = Vec::with_capacity(points.len());
        for x in points {
            match merged.last() {
                Some(last) if x - last <= small => {}
                _ => merged.push(x),
            }
        }
        // The last end stays what was written.
        if let Some(last) = merged.last_mut() {
            *last = span[1];
        }
        if merged.len() > MOST_POINTS {
            let place = self.source.coordinate.as_ref().map_or(0..0, |c| c.name_span.clone());
            let message = format!("the sheet has {} breaks; at most {MOST_POINTS} are allowed", merged.len() - 2);
            self.lowerer.faults.add("too large", place, message, None);
        }
        merged
    }

    /// Where an expression of the coordinate and data changes sign inside the span.
    pub(super) fn sign_changes(&mut self, gap: NodeId, span: [f64; 2]) -> Vec<f64> {
        let slope = self.lowerer.graph.total(gap);
        let graph = &self.lowerer.graph;
        let at = |x: f64| graph.evaluate::<f64>(gap, &Inputs::at(x));
        if let Some(slope) = graph.as_number(slope) {
            // Straight: the crossing is exact.
            let x = -at(0.0) / slope;
            return if x > span[0] && x < span[1] { vec![x] } else { Vec::new() };
        }
        let samples = 2000;
        let place = |k: usize| span[0] + (span[1] - span[0]) * k as f64 / samples as f64;
        let mut changes = Vec::new();
        for k in 0..samples {
            let (mut a, mut b) = (place(k), place(k + 1));
            let (left, right) = (at(a), at(b));
            if left == 0.0 && k > 0 {
                changes.push(a);
            }
            if (left < 0.0) == (right < 0.0) || left == 0.0 || right == 0.0 {
                continue;
            }
            for _ in 0..200 {
                let middle = 0.5 * (a + b);
                if middle <= a || middle >= b {
                    break;
                }
                if (at(middle) < 0.0) == (left < 0.0) { a = middle } else { b = middle }
            }
            changes.push(b);
        }
        changes
    }

    /// The unit in which the ends of the span are written.
    pub(super) fn coordinate_unit(&self) -> Unit {
        fn first(tree: &Expression) -> Option<Unit> {
            match &tree.kind {
                Kind::Number { unit, .. } => unit.clone(),
                Kind::Negate(a) => first(a),
                Kind::Binary(_, a, b) => first(a).or_else(|| first(b)),
                _ => None,
            }
        }
        let dimension = self.lowerer.coordinate_dimension.unwrap_or_default();
        let mut queue: Vec<Expression> = Vec::new();
        for at in self.source.coordinate.iter().flat_map(|c| &c.value) {
            queue.extend(syntax::parse(&at.text).ok());
        }
        let mut named = Vec::new();
        for tree in &queue {
            if let Some(unit) = first(tree).filter(|u| u.dimension == dimension) {
                return unit;
            }
            if let Kind::Name(name) = &tree.kind {
                named.push(name.clone());
            }
        }
        let by_name = named.iter().find_map(|name| match self.lowerer.meanings.get(name) {
            Some(Meaning::Formula(Formula { tree, .. }) | Meaning::Held(_, Formula { tree, .. })) => {
                first(tree).filter(|u| u.dimension == dimension)
            }
            _ => None,
        });
        by_name.unwrap_or_else(|| Unit::si(dimension))
    }
}
