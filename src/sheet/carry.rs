//! Fluxes: what stands inside a derivative becomes an unknown of its own, continuous where data step.
//!
//! All terms under the same outer derivative of one equation are one flux, so that the order of the problem stays
//! its true order: `-(D*u')' + (v*u)'` carries `-D*u' + v*u` (order 2), `w'''' - (N*w')'` carries
//! `w''' - N*w'` (order 4).

use crate::formula::graph::{Graph, Node, NodeId};
use std::collections::HashMap;

/// A flux found in the equations.
#[derive(Debug, Clone, Copy)]
pub(super) struct Flux {
    /// What was written inside the derivative.
    pub written: NodeId,
    /// The same with inner fluxes carried: the defining equation is `defined - g = 0`.
    pub defined: NodeId,
    /// Index of the carried unknown g.
    pub unknown: u16,
}

/// A coefficient that steps between derivatives that cannot be joined in one flux.
#[derive(Debug, Clone, Copy)]
pub(super) struct Stepping;

/// Finds and carries the fluxes of all equations.
pub(super) struct Carrier<'g> {
    pub graph: &'g mut Graph,
    pub fluxes: Vec<Flux>,
    /// Index of the next unknown.
    pub next: u16,
}

/// A term coefficient * inner'.
struct Under {
    coefficient: NodeId,
    inner: NodeId,
}

impl Carrier<'_> {
    /// The same equation without any [`Node::Derivative`].
    pub fn carry(&mut self, e: NodeId) -> Result<NodeId, Stepping> {
        if !self.graph.has_derivative(e) {
            return Ok(e);
        }
        let (mut under, mut bare, mut rest) = (Vec::new(), Vec::new(), Vec::new());
        for (factor, term) in self.graph.terms(e) {
            self.sort(factor, term, &mut under, &mut bare, &mut rest);
        }
        let mut sum = self.graph.number(0.0);
        if !under.is_empty() {
            let inside = self.orders(&under.iter().map(|u: &Under| u.inner).collect::<Vec<_>>());
            for (coefficient, unknown, order, term) in bare {
                // A bare derivative of higher order than the rest of the flux belongs to it.
                if inside.get(&unknown).is_some_and(|k| order > *k) {
                    let inner = self.graph.jet(unknown, order - 1);
                    under.push(Under { coefficient, inner });
                } else {
                    rest.push(term);
                }
            }
            sum = self.joined(under)?;
        } else {
            rest.extend(bare.into_iter().map(|(_, _, _, term)| term));
        }
        for term in rest {
            let term = self.inner_derivatives(term)?;
            sum = self.graph.add(sum, term);
        }
        Ok(sum)
    }

    #[allow(clippy::type_complexity)]
    fn sort(
        &mut self,
        factor: f64,
        term: NodeId,
        under: &mut Vec<Under>,
        bare: &mut Vec<(NodeId, u16, u8, NodeId)>,
        rest: &mut Vec<NodeId>,
    ) {
        let (own, factors) = self.graph.factors(term);
        let number = self.graph.number(factor);
        let whole = self.graph.multiply(number, term);
        let one = |graph: &Graph, f: &(NodeId, i32)| f.1 == 1 && matches!(graph.node(f.0), Node::Derivative(_));
        let derivatives = factors.iter().filter(|f| one(self.graph, f)).count();
        let open = factors.iter().filter(|f| self.graph.has_derivative(f.0)).count();
        let pick = if derivatives == 1 && open == 1 {
            factors.iter().position(|f| one(self.graph, f))
        } else if open == 0 && factors.iter().filter(|f| self.graph.depends_on(f.0).jets).count() == 1 {
            factors
                .iter()
                .position(|f| f.1 == 1 && matches!(self.graph.node(f.0), Node::Jet { order, .. } if order > 0))
        } else {
            None
        };
        let Some(pick) = pick else {
            rest.push(whole);
            return;
        };
        let mut coefficient = self.graph.number(factor * own);
        for (k, (node, exponent)) in factors.iter().enumerate() {
            if k != pick {
                let power = self.graph.number(f64::from(*exponent));
                let part = self.graph.power(*node, power);
                coefficient = self.graph.multiply(coefficient, part);
            }
        }
        match self.graph.node(factors[pick].0) {
            Node::Derivative(inner) => under.push(Under { coefficient, inner }),
            Node::Jet { unknown, order } => bare.push((coefficient, unknown, order, whole)),
            _ => rest.push(whole),
        }
    }

    /// Largest order of each unknown in some expressions, derivatives of expressions counted.
    pub fn orders(&self, expressions: &[NodeId]) -> HashMap<u16, u8> {
        let mut own: HashMap<NodeId, HashMap<u16, u8>> = HashMap::new();
        for part in self.graph.reach(expressions) {
            let mut orders: HashMap<u16, u8> = HashMap::new();
            let node = self.graph.node(part);
            if let Node::Jet { unknown, order } = node {
                orders.insert(unknown, order);
            }
            let more = u8::from(matches!(node, Node::Derivative(_)));
            for operand in node.operands() {
                for (unknown, order) in own.get(&operand).into_iter().flatten() {
                    let at = orders.entry(*unknown).or_insert(0);
                    *at = (*at).max(order.saturating_add(more));
                }
            }
            own.insert(part, orders);
        }
        let mut all: HashMap<u16, u8> = HashMap::new();
        for (unknown, order) in expressions.iter().filter_map(|e| own.get(e)).flatten() {
            let at = all.entry(*unknown).or_insert(0);
            *at = (*at).max(*order);
        }
        all
    }

    /// The sum of coefficient * inner' over terms that share one flux.
    fn joined(&mut self, under: Vec<Under>) -> Result<NodeId, Stepping> {
        if let [single] = &under[..] {
            let slope = self.slope(single.inner)?;
            return Ok(self.graph.multiply(single.coefficient, slope));
        }
        let numbers = under.iter().all(|u| self.graph.as_number(u.coefficient).is_some());
        let first = under[0].coefficient;
        let ratios: Option<Vec<f64>> = under.iter().map(|u| self.graph.ratio(u.coefficient, first)).collect();
        if let (false, Some(ratios)) = (numbers, ratios) {
            // A common factor stays outside.
            let mut flux = self.graph.number(0.0);
            for (u, ratio) in under.iter().zip(ratios) {
                let ratio = self.graph.number(ratio);
                let part = self.graph.multiply(ratio, u.inner);
                flux = self.graph.add(flux, part);
            }
            let slope = self.slope(flux)?;
            return Ok(self.graph.multiply(first, slope));
        }
        // c1*a' + c2*b' = (c1*a + c2*b)' - c1'*a - c2'*b, as long as the coefficients have slopes.
        let mut flux = self.graph.number(0.0);
        let mut correction = self.graph.number(0.0);
        for u in &under {
            if !self.graph.piece_tests(&[u.coefficient]).is_empty() {
                return Err(Stepping);
            }
            let part = self.graph.multiply(u.coefficient, u.inner);
            flux = self.graph.add(flux, part);
            let slope = self.graph.total(u.coefficient);
            let part = self.graph.multiply(slope, u.inner);
            correction = self.graph.add(correction, part);
        }
        let slope = self.slope(flux)?;
        let correction = self.carry(correction)?;
        Ok(self.graph.subtract(slope, correction))
    }

    /// The derivative of an expression through its carried flux.
    fn slope(&mut self, written: NodeId) -> Result<NodeId, Stepping> {
        let defined = self.carry(written)?;
        let (factor, factors) = self.graph.factors(defined);
        // A bare unknown or its derivative needs no carrying; with a factor it is a flux even if the factor is uniform:
        // the user may ask for it by name, and two second orders are better conditioned than one fourth.
        if let [(node, 1)] = factors[..]
            && factor.abs() == 1.0
            && let Node::Jet { unknown, order } = self.graph.node(node)
        {
            let next = self.graph.jet(unknown, order + 1);
            let factor = self.graph.number(factor);
            return Ok(self.graph.multiply(factor, next));
        }
        for k in 0..self.fluxes.len() {
            let Flux { written: known, unknown, .. } = self.fluxes[k];
            if let Some(ratio) = self.graph.ratio(written, known) {
                let (ratio, jet) = (self.graph.number(ratio), self.graph.jet(unknown, 1));
                return Ok(self.graph.multiply(ratio, jet));
            }
        }
        let unknown = self.next;
        self.next += 1;
        self.fluxes.push(Flux { written, defined, unknown });
        Ok(self.graph.jet(unknown, 1))
    }

    /// Derivatives that stand inside functions, powers or products of each other: each is a flux of its own.
    fn inner_derivatives(&mut self, e: NodeId) -> Result<NodeId, Stepping> {
        if !self.graph.has_derivative(e) {
            return Ok(e);
        }
        // Outermost ones: those not inside another derivative.
        let mut found = Vec::new();
        let mut stack = vec![e];
        while let Some(part) = stack.pop() {
            match self.graph.node(part) {
                Node::Derivative(inner) => found.push((part, inner)),
                node => stack.extend(node.operands().filter(|o| self.graph.has_derivative(*o))),
            }
        }
        let mut map = HashMap::new();
        for (node, inner) in found {
            map.insert(node, self.slope(inner)?);
        }
        Ok(self.graph.substitute(e, &map))
    }
}

#[cfg(test)]
mod tests {
    use super::Carrier;
    use crate::formula::graph::{Graph, NodeId};

    /// Orders of all unknowns after carrying; the number of given unknowns is 1.
    fn carried(build: impl Fn(&mut Graph) -> NodeId) -> (Vec<u8>, usize) {
        let mut graph = Graph::default();
        let equation = build(&mut graph);
        let mut carrier = Carrier { graph: &mut graph, fluxes: Vec::new(), next: 1 };
        let main = carrier.carry(equation).expect("nothing steps");
        let fluxes = carrier.fluxes.clone();
        let mut all = vec![main];
        for flux in &fluxes {
            let g = graph.jet(flux.unknown, 0);
            all.push(graph.subtract(flux.defined, g));
        }
        let mut orders = vec![0; 1 + fluxes.len()];
        for id in all {
            for (unknown, order) in graph.jets_of(id) {
                let at = &mut orders[usize::from(unknown)];
                *at = order.max(*at);
            }
        }
        (orders, fluxes.len())
    }

    fn primes(g: &mut Graph, mut e: NodeId, n: usize) -> NodeId {
        for _ in 0..n {
            e = g.derivative(e);
        }
        e
    }

    /// A datum that varies.
    fn datum(g: &mut Graph, c: f64) -> NodeId {
        let (x, c) = (g.coordinate(), g.number(c));
        g.add(x, c)
    }

    #[test]
    fn true_orders_are_kept() {
        let bending = |g: &mut Graph| {
            let (k, y2) = (datum(g, 2.385), g.jet(0, 2));
            let m = g.multiply(k, y2);
            primes(g, m, 2)
        };
        assert_eq!(carried(bending), (vec![2, 2], 1));
        let beam_column = |g: &mut Graph| {
            let first = bending(g);
            let (n, y1) = (datum(g, -7.0), g.jet(0, 1));
            let pull = g.multiply(n, y1);
            let pull = primes(g, pull, 1);
            g.subtract(first, pull)
        };
        assert_eq!(carried(beam_column), (vec![2, 1, 1], 2));
        let uniform_column = |g: &mut Graph| {
            let (n, y1, y4) = (datum(g, -7.0), g.jet(0, 1), g.jet(0, 4));
            let pull = g.multiply(n, y1);
            let pull = primes(g, pull, 1);
            g.subtract(y4, pull)
        };
        assert_eq!(carried(uniform_column), (vec![3, 1], 1));
        let transport = |g: &mut Graph| {
            let (d, v, u, u1) = (datum(g, 1.0), datum(g, 3.0), g.jet(0, 0), g.jet(0, 1));
            let (spread, flow) = (g.multiply(d, u1), g.multiply(v, u));
            let (spread, flow) = (primes(g, spread, 1), primes(g, flow, 1));
            g.subtract(flow, spread)
        };
        assert_eq!(carried(transport), (vec![1, 1], 1));
        let advection = |g: &mut Graph| {
            let (a, v, u, u1) = (datum(g, 1.0), datum(g, 3.0), g.jet(0, 0), g.jet(0, 1));
            let flow = g.multiply(v, u);
            let flow = primes(g, flow, 1);
            let slope = g.multiply(a, u1);
            g.add(slope, flow)
        };
        assert_eq!(carried(advection), (vec![0, 1], 1));
        let conduction_and_flow = |g: &mut Graph| {
            let (k, c, u1) = (datum(g, 1.0), datum(g, 3.0), g.jet(0, 1));
            let flux = g.multiply(k, u1);
            let flux = primes(g, flux, 1);
            let flow = g.multiply(c, u1);
            g.subtract(flux, flow)
        };
        assert_eq!(carried(conduction_and_flow), (vec![1, 1], 1));
        let different_factors = |g: &mut Graph| {
            let (r, a, u, u1) = (g.coordinate(), datum(g, 2.0), g.jet(0, 0), g.jet(0, 1));
            let first = g.multiply(r, u1);
            let first = primes(g, first, 1);
            let first = g.divide(first, r);
            let second = g.multiply(a, u);
            let second = primes(g, second, 1);
            g.add(first, second)
        };
        assert_eq!(carried(different_factors), (vec![1, 1], 1));
    }
}
