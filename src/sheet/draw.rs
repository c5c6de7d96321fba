//! What is drawn along the span and what must balance.

use super::along::Along;
use super::assemble::{Assembler, Carrying};
use super::functional::Kind as Asked;
use super::{Balance, CurveItem};
use crate::formula::graph::{NodeId, Variable};
use crate::formula::syntax::{self, Kind};
use crate::unit::Unit;

/// An expression to be drawn along the span.
pub(super) struct Drawn {
    pub name: String,
    pub node: NodeId,
    pub unit: Unit,
}

impl Assembler<'_, '_> {
    /// Unknowns, named expressions of them, and what the report asks of other expressions.
    pub(super) fn drawn(&mut self) -> Vec<Drawn> {
        let mut drawn: Vec<Drawn> = Vec::new();
        for (u, function) in self.lowerer.functions.iter().enumerate() {
            let node = self.lowerer.graph.jet(u as u16, 0);
            drawn.push(Drawn { name: function.name.clone(), node, unit: function.unit.clone() });
        }
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let Some(typed) = self.lowerer.named(&name) else { continue };
            let depends = self.lowerer.graph.depends_on(typed.node);
            if !depends.jets || depends.slots {
                continue;
            }
            let dimension = typed.dimension.unwrap_or_default();
            let unit = self.reported_unit(&entry.name).filter(|u| u.dimension == dimension && !u.is_absolute());
            let unit = unit.unwrap_or_else(|| Unit::si(dimension));
            drawn.push(Drawn { name: entry.name.clone(), node: typed.node, unit });
        }
        for functional in &self.lowerer.functionals {
            let depends = self.lowerer.graph.depends_on(functional.expression);
            let along = !matches!(functional.kind, Asked::Value | Asked::Jump);
            let new = !drawn.iter().any(|d| d.node == functional.expression || d.name == functional.text);
            if along && functional.reported && new && depends.jets && !depends.slots {
                let (name, node) = (functional.text.clone(), functional.expression);
                let asked = functional.unit.clone().filter(|u| Some(u.dimension) == functional.dimension);
                let unit = asked.unwrap_or_else(|| Unit::si(functional.dimension.unwrap_or_default()));
                drawn.push(Drawn { name, node, unit });
            }
        }
        drawn
    }

    pub(super) fn curves(&mut self, unknowns: usize, points: &[f64]) -> Vec<CurveItem> {
        let drawn = self.drawn().into_iter();
        let graph = &mut self.lowerer.graph;
        let reduction = &self.lowerer.reduction;
        let item = |d: Drawn| {
            let node = reduction.reduce(graph, d.node);
            CurveItem { name: d.name, unit: d.unit, along: Along::new(graph, node, unknowns, points) }
        };
        drawn.map(item).collect()
    }

    /// The unit in which the report first asks for something of a name.
    pub(super) fn reported_unit(&self, name: &str) -> Option<Unit> {
        self.source.report.iter().find_map(|entry| {
            let (tree, unit) = syntax::parse_report(&entry.value.text).ok()?;
            let mut stack = vec![&tree];
            while let Some(e) = stack.pop() {
                match &e.kind {
                    Kind::Call { name: own, .. } if own == name => return unit.map(|u| u.0),
                    Kind::Name(own) if own == name => return unit.map(|u| u.0),
                    Kind::Call { arguments, .. } => stack.extend(arguments.iter().map(|a| &a.value)),
                    Kind::Negate(a) => stack.push(a),
                    Kind::Binary(_, a, b) => stack.extend([&**a, &**b]),
                    _ => {}
                }
            }
            None
        })
    }

    /// For each equation coefficient * g^(k) + rest = 0 with g carried: -rest/coefficient.
    pub(super) fn balances(
        &mut self,
        equations: &[Carrying],
        orders: &[usize],
        unknowns: usize,
        points: &[f64],
    ) -> Vec<Balance> {
        let functions = self.lowerer.functions.len();
        let mut balances = Vec::new();
        for equation in equations {
            let jets = self.lowerer.graph.jets_of(equation.main);
            let top =
                jets.iter().find(|(u, k)| usize::from(*u) >= functions && usize::from(*k) == orders[usize::from(*u)]);
            let Some(&(unknown, order)) = top.filter(|(_, k)| *k > 0) else { continue };
            let graph = &mut self.lowerer.graph;
            let factor = graph.partial(equation.main, Variable::Jet { unknown, order });
            if graph.depends_on(factor).unknowns() {
                continue;
            }
            let jet = graph.jet(unknown, order);
            let zero = graph.number(0.0);
            let rest = graph.substitute(equation.main, &[(jet, zero)].into());
            let source = graph.divide(rest, factor);
            let source = graph.negate(source);
            let source = Along::new(graph, source, unknowns, points);
            let (unknown, order) = (usize::from(unknown), usize::from(order) - 1);
            balances.push(Balance { name: equation.name.clone(), unknown, order, source });
        }
        balances
    }
}
