//! Derivatives above the order of their unknown, by way of the equations.
//!
//! With `(E*I*y'')'' = q` the solver carries y to its second derivative and M = E*I*y'' beside it; a condition on y'''
//! is then one on (M/(E*I))'.

use crate::formula::graph::{Graph, NodeId, Variable};
use std::collections::HashMap;

/// Highest derivatives so far above the order that they are not worth the formula.
const MOST_ABOVE: u8 = 8;
/// Rounds of putting in; what is not done by then goes in circles.
const MOST_ROUNDS: usize = 8;

/// For each unknown function its highest derivative, solved from an equation.
#[derive(Debug, Clone, Default)]
pub(super) struct Reduction {
    orders: Vec<u8>,
    solved: Vec<Option<NodeId>>,
}

impl Reduction {
    /// `owners` names for each unknown an equation that holds its highest derivative.
    pub fn new(graph: &mut Graph, equations: &[NodeId], orders: &[u8], owners: &[Option<usize>]) -> Self {
        let mut solved = Vec::with_capacity(orders.len());
        for (u, owner) in owners.iter().enumerate() {
            let equation = owner.map(|e| equations[e]);
            solved.push(equation.and_then(|e| solve(graph, e, u as u16, orders[u])));
        }
        Self { orders: orders.to_vec(), solved }
    }

    /// The expression without derivatives above the orders, as far as that can be had.
    pub fn reduce(&self, graph: &mut Graph, e: NodeId) -> NodeId {
        self.put_in(graph, e, 1)
    }

    /// The expression in states alone: without the highest derivatives themselves, as far as that can be had.
    pub fn lowest(&self, graph: &mut Graph, e: NodeId) -> NodeId {
        self.put_in(graph, e, 0)
    }

    /// Puts in for each derivative that is `above` its unknown's order or more.
    fn put_in(&self, graph: &mut Graph, e: NodeId, above: u8) -> NodeId {
        let whole = graph.expand(e);
        let mut e = whole;
        for _ in 0..MOST_ROUNDS {
            let mut map = HashMap::new();
            for (unknown, order) in graph.jets_of(e) {
                let Some(own) = self.orders.get(usize::from(unknown)) else { continue };
                if order < own.saturating_add(above) {
                    continue;
                }
                let Some(mut slope) = self.solved[usize::from(unknown)] else { return whole };
                if order - own > MOST_ABOVE {
                    return whole;
                }
                for _ in *own..order {
                    slope = graph.total(slope);
                }
                let jet = graph.jet(unknown, order);
                map.insert(jet, slope);
            }
            if map.is_empty() {
                return e;
            }
            e = graph.substitute(e, &map);
        }
        whole
    }
}

/// u^(m) from factor * u^(m) + rest = 0.
fn solve(graph: &mut Graph, equation: NodeId, unknown: u16, order: u8) -> Option<NodeId> {
    let factor = graph.partial(equation, Variable::Jet { unknown, order });
    if graph.as_number(factor) == Some(0.0) {
        return None;
    }
    let (jet, zero) = (graph.jet(unknown, order), graph.number(0.0));
    let rest = graph.substitute(equation, &[(jet, zero)].into());
    let own = |graph: &Graph, e| graph.jets_of(e).contains(&(unknown, order));
    if own(graph, factor) || own(graph, rest) {
        return None;
    }
    let quotient = graph.divide(rest, factor);
    Some(graph.negate(quotient))
}
