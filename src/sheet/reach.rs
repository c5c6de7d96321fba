//! Where measured data are read: nowhere beyond the points, in no result.

use super::assemble::Assembler;
use super::functional::{Functional, Kind, Memory, Reckoner};
use super::measured::{OUTSIDE, shown, span, within};
use crate::formula::graph::{Graph, Node, NodeId};
use crate::model::Side;
use crate::solve::Solution;
use crate::unit::Unit;
use std::collections::{BTreeMap, BTreeSet};
use std::ops::Range;

/// What a datum is read at.
#[derive(Debug, Clone)]
pub(super) struct Reach {
    pub name: String,
    /// As written.
    pub against: String,
    pub argument: NodeId,
    pub table: u16,
    pub unit: Unit,
    /// Where the data stand in the sheet.
    pub place: Range<usize>,
}

/// A number that must stay inside the range of measured data.
pub(super) struct Watched {
    name: String,
    against: String,
    range: [f64; 2],
    unit: Unit,
    read_at: Reckoner,
}

/// A table and what it is read at.
type Use = (u16, NodeId);

/// All readings of tables in an expression.
fn uses(graph: &Graph, e: NodeId) -> Vec<Use> {
    let nodes = graph.reach(&[e]).into_iter();
    nodes
        .filter_map(|id| match graph.node(id) {
            Node::Table { table, argument, .. } => Some((table, argument)),
            _ => None,
        })
        .collect()
}

impl Assembler<'_, '_> {
    /// Everything at which the equations, conditions and the report read measured data, to be looked at on a solution. What
    /// is known beforehand is refused at once.
    pub(super) fn watched(&mut self, equations: &[NodeId], unknowns: usize, points: &[f64]) -> Vec<Watched> {
        if self.lowerer.reaches.is_empty() {
            return Vec::new();
        }
        // Along whole pieces, and at single points.
        let mut along: BTreeMap<Use, BTreeSet<usize>> = BTreeMap::new();
        let mut single: Vec<(Use, NodeId, Option<Side>)> = Vec::new();
        let pieces = 0..points.len() - 1;
        for equation in equations {
            self.pieces_of(*equation, pieces.clone(), points, &mut along);
        }
        for functional in self.lowerer.functionals.clone() {
            let known: Vec<f64> = functional.points.iter().filter_map(|p| self.lowerer.shown_number(*p)).collect();
            let whole = self.lowerer.graph.expand(functional.expression);
            match (functional.kind, &functional.points[..]) {
                (Kind::Value | Kind::Jump, [point]) => {
                    let sides = match functional.kind {
                        Kind::Jump => vec![Some(Side::Left), Some(Side::Right)],
                        _ => vec![functional.side],
                    };
                    for side in sides {
                        let piece = known.first().map(|x| piece_at(points, *x, side));
                        let here = match piece {
                            Some(k) => self.lowerer.graph.in_piece(whole, 0.5 * (points[k] + points[k + 1])),
                            None => whole,
                        };
                        single.extend(uses(&self.lowerer.graph, here).into_iter().map(|used| (used, *point, side)));
                    }
                }
                (_, ends) => {
                    let low = known.iter().copied().fold(f64::INFINITY, f64::min);
                    let high = known.iter().copied().fold(f64::NEG_INFINITY, f64::max);
                    let all = ends.is_empty() || known.len() < ends.len();
                    let met = |k: &usize| all || (points[k + 1] > low && points[*k] < high);
                    for k in pieces.clone().filter(met) {
                        self.pieces_of(whole, k..k + 1, points, &mut along);
                    }
                }
            }
        }
        let mut watched = Vec::new();
        for (used, places) in along {
            for stretch in stretches(&places) {
                let ends = [points[stretch.start], points[stretch.end]];
                self.watch_along(used, ends, unknowns, points, &mut watched);
            }
        }
        for (used, point, side) in single {
            self.watch_at(used, point, side, unknowns, points, &mut watched);
        }
        watched
    }

    /// Notes in which of the pieces an expression reads which table.
    fn pieces_of(
        &mut self,
        e: NodeId,
        pieces: Range<usize>,
        points: &[f64],
        along: &mut BTreeMap<Use, BTreeSet<usize>>,
    ) {
        let whole = self.lowerer.graph.expand(e);
        if uses(&self.lowerer.graph, whole).is_empty() {
            return;
        }
        for k in pieces {
            let here = self.lowerer.graph.in_piece(whole, 0.5 * (points[k] + points[k + 1]));
            for used in uses(&self.lowerer.graph, here) {
                along.entry(used).or_default().insert(k);
            }
        }
    }

    fn watch_along(&mut self, used: Use, ends: [f64; 2], unknowns: usize, points: &[f64], watched: &mut Vec<Watched>) {
        let (graph, argument) = (&mut self.lowerer.graph, used.1);
        if argument == graph.coordinate() {
            return self.covered(used.0, ends);
        }
        if !graph.depends_on(argument).varies() {
            return self.watch(used, argument, unknowns, points, watched);
        }
        let ends = ends.map(|x| graph.number(x));
        for kind in [Kind::Minimum, Kind::Maximum] {
            let slot = self.asked(kind, argument, ends.to_vec(), None);
            self.watch(used, slot, unknowns, points, watched);
        }
    }

    fn watch_at(
        &mut self,
        used: Use,
        point: NodeId,
        side: Option<Side>,
        unknowns: usize,
        points: &[f64],
        watched: &mut Vec<Watched>,
    ) {
        let node = match self.lowerer.graph.depends_on(used.1).varies() {
            true => self.asked(Kind::Value, used.1, vec![point], side),
            false => used.1,
        };
        self.watch(used, node, unknowns, points, watched);
    }

    /// The slot of one more number asked.
    fn asked(&mut self, kind: Kind, argument: NodeId, points: Vec<NodeId>, side: Option<Side>) -> NodeId {
        let expression = self.lowerer.reduction.reduce(&mut self.lowerer.graph, argument);
        let slot = self.lowerer.functionals.len() as u32;
        self.lowerer.functionals.push(Functional {
            kind,
            expression,
            point_places: vec![0..0; points.len()],
            points,
            side,
            place: 0..0,
            text: String::new(),
            dimension: None,
            unit: None,
            reported: false,
        });
        self.lowerer.graph.slot(slot)
    }

    fn watch(&mut self, used: Use, node: NodeId, unknowns: usize, points: &[f64], watched: &mut Vec<Watched>) {
        let Some(reach) = self.lowerer.reaches.iter().find(|r| r.table == used.0).cloned() else { return };
        let Some(range) = self.lowerer.graph.tables().get(usize::from(used.0)).map(|t| t.range()) else { return };
        let Reach { name, against, unit, .. } = reach;
        let read_at = Reckoner::new(&mut self.lowerer.graph, node, &self.lowerer.functionals, unknowns, points);
        watched.push(Watched { name, against, range, unit, read_at });
    }

    /// Refuses data against the coordinate that do not reach over the stretch where they are needed.
    fn covered(&mut self, table: u16, [from, to]: [f64; 2]) {
        let Some(reach) = self.lowerer.reaches.iter().find(|r| r.table == table).cloned() else { return };
        let Some(range) = self.lowerer.graph.tables().get(usize::from(table)).map(|t| t.range()) else { return };
        for (gap, [a, b]) in
            [(!within(from, range), [from, range[0].min(to)]), (!within(to, range), [range[1].max(from), to])]
        {
            if gap {
                let unit = &reach.unit;
                let message = format!("`{}` has no value from {} to {}", reach.name, shown(a, unit), shown(b, unit));
                self.lowerer.faults.add("measured", reach.place.clone(), message, Some(OUTSIDE.into()));
            }
        }
    }
}

/// The piece on one side of a place.
fn piece_at(points: &[f64], x: f64, side: Option<Side>) -> usize {
    let last = points.len() - 2;
    let after = points.partition_point(|p| *p <= x);
    let right = after.saturating_sub(1).min(last);
    let small = 1e-12 * (points[last + 1] - points[0]);
    match side {
        // On a point the left piece is the one before.
        Some(Side::Left) | None if right > 0 && (x - points[right]).abs() <= small => right - 1,
        _ => right,
    }
}

/// Neighbouring pieces together: from the first point to the last.
fn stretches(pieces: &BTreeSet<usize>) -> Vec<Range<usize>> {
    let mut found: Vec<Range<usize>> = Vec::new();
    for k in pieces {
        match found.last_mut() {
            Some(last) if last.end == *k => last.end = k + 1,
            _ => found.push(*k..k + 1),
        }
    }
    found
}

impl Watched {
    /// Why a solution does not count: it needs values where nothing was measured.
    pub fn refuses(&self, solution: &Solution) -> Option<String> {
        let Self { name, against, range, unit, read_at } = self;
        let Ok(found) = read_at.number(&solution.field, &Memory::default()) else {
            return Some(format!("it cannot be seen whether `{against}` stays where `{name}` was measured"));
        };
        if within(found.value, *range) {
            return None;
        }
        Some(format!(
            "the solution needs `{name}` at {against} = {}, but it is measured {}: nothing is made up beyond the last point",
            shown(found.value, unit),
            span(*range, unit)
        ))
    }
}
