//! What a sheet says about where its solution lies: guess, above, below.

use super::assemble::Assembler;
use super::carry::Flux;
use super::model::Guess;
use super::source::Located;
use crate::formula::graph::{Graph, NodeId};
use crate::formula::tape::Tape;
use crate::model::Layout;
use crate::unit::Dimension;
use std::collections::HashMap;

/// Lower and upper bounds of unknown functions or constants: index, both limits exclusive.
pub(super) type Limits = Vec<(usize, f64, f64)>;

impl Assembler<'_, '_> {
    /// A formula of the coordinate and data with the dimension of an unknown.
    fn own(&mut self, at: &Located, wanted: Dimension, constant: bool) -> Option<NodeId> {
        let formula = self.lowerer.parse(at)?;
        let typed = self.lowerer.lower(at, &formula.tree)?;
        self.lowerer.expect(at, &formula.tree, typed, Some(wanted))?;
        let depends = self.lowerer.graph.depends_on(typed.node);
        if depends.unknowns() || (constant && depends.coordinate) {
            let message = if constant { "this must be a datum" } else { "a guess holds data and the coordinate only" };
            return self.lowerer.fault("unknown", at, &formula.tree.span, message, "");
        }
        Some(typed.node)
    }

    /// `above` and `below` of all unknowns: of functions, of constants.
    pub(super) fn limits(&mut self) -> [Limits; 2] {
        let source = self.source;
        let mut limits = [Limits::new(), Limits::new()];
        let mut next = [0, 0];
        for entry in &source.unknowns {
            let kind = usize::from(entry.value.constant);
            let index = next[kind];
            next[kind] += 1;
            let list = if entry.value.constant { &self.lowerer.constants } else { &self.lowerer.functions };
            let Some(dimension) = list.get(index).map(|u| u.unit.dimension) else { continue };
            let mut bound = |at: &Option<Located>, default: f64| {
                let Some(at) = at else { return default };
                let node = self.own(at, dimension, true);
                node.and_then(|n| self.lowerer.number_of(n)).unwrap_or(default)
            };
            let (low, high) = (bound(&entry.value.above, f64::NEG_INFINITY), bound(&entry.value.below, f64::INFINITY));
            if low.is_finite() || high.is_finite() {
                limits[kind].push((index, low, high));
            }
            if low >= high {
                let message = format!("`{}` lies above its upper limit", entry.name);
                self.lowerer.faults.add("unknown", entry.name_span.clone(), message, None);
            }
        }
        limits
    }

    /// The guess of the sheet, if it has one; unknowns without start at zero, fluxes at what their definition gives.
    pub(super) fn guess(&mut self, fluxes: &[Flux], layout: &Layout, points: &[f64]) -> Option<Guess> {
        let source = self.source;
        if source.unknowns.iter().all(|u| u.value.guess.is_none()) {
            return None;
        }
        let zero = self.lowerer.graph.number(0.0);
        let (mut functions, mut constants) = (Vec::new(), Vec::new());
        for entry in &source.unknowns {
            let list = if entry.value.constant { &self.lowerer.constants } else { &self.lowerer.functions };
            let index = if entry.value.constant { constants.len() } else { functions.len() };
            let dimension = list.get(index)?.unit.dimension;
            let node = match &entry.value.guess {
                Some(at) => self.own(at, dimension, entry.value.constant)?,
                None => zero,
            };
            if entry.value.constant {
                constants.push(self.lowerer.number_of(node)?);
            } else {
                functions.push(node);
            }
        }
        let graph = &mut self.lowerer.graph;
        let mut values = functions;
        for flux in fluxes {
            let node = substituted(graph, flux.defined, &values, &constants);
            values.push(node);
        }
        // Integrals in conditions start at zero.
        values.resize(layout.unknowns(), zero);
        let mut jets = Vec::with_capacity(layout.jets());
        for (value, m) in values.iter().zip(layout.orders()) {
            let mut node = *value;
            for k in 0..=*m {
                if k > 0 {
                    node = graph.total(node);
                }
                jets.push(node);
            }
        }
        let tape = Tape::compile(graph, &jets);
        let tests = points.windows(2).map(|p| graph.decide(tape.tests(), 0.5 * (p[0] + p[1]))).collect();
        Some(Guess { tape, tests, constants })
    }
}

/// An expression with the unknowns replaced by formulas of the coordinate.
fn substituted(graph: &mut Graph, node: NodeId, values: &[NodeId], constants: &[f64]) -> NodeId {
    let mut map = HashMap::new();
    for (unknown, order) in graph.jets_of(node) {
        let Some(value) = values.get(usize::from(unknown)) else { continue };
        let mut slope = *value;
        for _ in 0..order {
            slope = graph.total(slope);
        }
        map.insert(graph.jet(unknown, order), slope);
    }
    for constant in graph.constants_of(node) {
        let value = constants.get(usize::from(constant)).copied().unwrap_or(0.0);
        let (own, value) = (graph.constant(constant), graph.number(value));
        map.insert(own, value);
    }
    graph.substitute(node, &map)
}
