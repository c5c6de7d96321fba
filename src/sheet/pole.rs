//! Poles: places where an expression divides by zero and grows without bound. Samples miss them, so an extreme or an
//! integral over one would be a wrong number that looks right.

use super::along::Along;
use super::assemble::{Assembler, Carrying};
use super::short;
use crate::error::Result;
use crate::field::Field;
use crate::formula::graph::{Graph, Node, NodeId, Unary};
use crate::model::{Profile, Side};
use crate::quantity;
use std::collections::BTreeSet;

/// Distance from a zero at which growth is measured, relative to the stretch: far above the rounding of the zero,
/// far below what data change over.
const NEAR: f64 = 1e-6;

/// A divisor this small at an end, relative to its size inside, is zero there.
const NOTHING: f64 = 1e-9;

/// Growth from which on there is no extreme: below it lies only what rounding makes of a finite limit.
pub(super) const NO_EXTREME: f64 = 0.1;
/// |x|^-1 has no integral.
pub(super) const NO_INTEGRAL: f64 = 0.95;
/// |x|^(-1/2) has no square integral.
pub(super) const NO_NORM: f64 = 0.475;

/// Samples of all divisors of the equations together.
const MOST_SAMPLES: usize = 50_000;

/// Everything in an expression without derivatives that may divide by zero along the span.
pub(super) fn divisors(graph: &mut Graph, node: NodeId) -> Vec<NodeId> {
    let mut whole = Vec::new();
    for id in graph.reach(&[node]) {
        match graph.node(id) {
            Node::Divide(_, b) => whole.push(b),
            Node::Power(a, b) if graph.as_number(b).is_some_and(|b| b < 0.0) => whole.push(a),
            Node::Unary(Unary::Tan, a) => whole.push(graph.unary(Unary::Cos, a)),
            _ => {}
        }
    }
    // The bases of powers: a square touches zero without a change of sign.
    let mut bases = BTreeSet::new();
    for divisor in whole {
        for (factor, exponent) in graph.factors(divisor).1 {
            let base = match graph.node(factor) {
                Node::Power(base, _) => base,
                _ => factor,
            };
            let depends = graph.depends_on(base);
            if exponent != 0 && (depends.coordinate || depends.jets) {
                bases.insert(base);
            }
        }
    }
    bases.into_iter().collect()
}

/// How fast |f| grows towards a place: p for |x|^-p, from values at four distances on one side. Each distance is
/// halved once, far out and near by; the weaker growth counts, so that a steep but finite shape is none.
fn growth(value: impl Fn(f64) -> Option<f64>, step: f64) -> Option<f64> {
    let order = |d: f64| Some((value(d)?.abs() / value(2.0 * d)?.abs()).log2());
    let (far, near) = (order(step)?, order(step / 16.0)?);
    let order = far.min(near);
    order.is_finite().then_some(order)
}

/// A place in [from, to] where one of the divisors vanishes and the expression grows at least as |x|^-`most`.
pub(super) fn pole(
    field: &Field,
    along: &Along,
    divisors: &[Along],
    [from, to]: [f64; 2],
    most: f64,
) -> Result<Option<f64>> {
    let at = |profile: &Along, x: f64| {
        let inside = x >= from && x <= to;
        let value = || quantity::value_at(field, profile, x, Side::Left).ok().map(|e| e.value);
        if inside { value().filter(|v| v.is_finite()) } else { None }
    };
    let step = NEAR * (to - from);
    let grows = |x: f64| {
        [step, -step].into_iter().any(|step| growth(|d| at(along, x + d), step).is_some_and(|order| order >= most))
    };
    for divisor in divisors {
        // Where a divisor itself has no value its zeros cannot be told.
        let roots = quantity::roots(field, divisor, from, to).unwrap_or_default();
        let inner = [0.19, 0.385, 0.71].map(|t| at(divisor, from + t * (to - from)).unwrap_or(0.0).abs());
        let size = inner.into_iter().fold(0.0, f64::max);
        let ends = [from, to].into_iter().filter(|x| at(divisor, *x).is_some_and(|v| v.abs() <= NOTHING * size));
        let found = roots.iter().filter(|r| r.error <= 1e-3 * step).map(|r| r.value).chain(ends).find(|x| grows(*x));
        if found.is_some() {
            return Ok(found);
        }
    }
    Ok(None)
}

impl Assembler<'_, '_> {
    /// Refuses equations with data that are infinite inside the span.
    pub(super) fn check_poles(&mut self, equations: &[Carrying], nodes: &[NodeId], unknowns: usize, points: &[f64]) {
        for e in 0..nodes.len() {
            let graph = &mut self.lowerer.graph;
            let mut bases = divisors(graph, nodes[e]);
            bases.retain(|b| graph.depends_on(*b).only_coordinate());
            if bases.is_empty() {
                continue;
            }
            let equation = Along::new(graph, nodes[e], unknowns, points);
            let rows: usize = equation.tops().iter().map(|top| top + 1).sum();
            let jets: Vec<f64> = (0..rows).map(|k| 1.0 + (7.3 * k as f64).sin().abs()).collect();
            let constants = vec![1.385; self.lowerer.constants.len()];
            let samples = (MOST_SAMPLES / (points.len() * bases.len())).clamp(5, 65);
            for base in bases {
                let divisor = Along::new(&mut self.lowerer.graph, base, unknowns, points);
                let zero = points.windows(2).enumerate().find_map(|(piece, ends)| {
                    let value = |x: f64| divisor.value(x, piece, &[], &[]);
                    let step = NEAR * (ends[1] - ends[0]);
                    let grows = |x: f64| {
                        let near = |d: f64| Some(equation.value(x + d, piece, &jets, &constants));
                        growth(near, step).is_some_and(|order| order >= NO_EXTREME)
                    };
                    zeros(value, [ends[0], ends[1]], samples).into_iter().find(|x| grows(*x))
                });
                let Some(x) = zero else { continue };
                let unit = self.coordinate_unit();
                let (name, at) = (&self.lowerer.coordinate, short(unit.from_si(x)));
                let message = format!("division by zero at {name} = {at} {}: the data are infinite there", unit.text);
                let place = self.written_for(equations, nodes, e);
                let hint = "correct the datum, or end the span before that place".to_owned();
                self.lowerer.faults.add("division by zero", place, message, Some(hint));
                break;
            }
        }
    }
}

/// Changes of sign inside a piece, by samples and bisection.
fn zeros(value: impl Fn(f64) -> f64, [from, to]: [f64; 2], samples: usize) -> Vec<f64> {
    // Not at simple fractions of the piece, where data like to vanish.
    let place = |k: usize| from + (to - from) * (k as f64 + 0.5137) / (samples as f64 + 0.11);
    let mut found = Vec::new();
    for k in 0..samples - 1 {
        let (mut a, mut b) = (place(k), place(k + 1));
        let below = value(a) < 0.0;
        if (value(b) < 0.0) == below {
            continue;
        }
        for _ in 0..80 {
            let middle = 0.5 * (a + b);
            if (value(middle) < 0.0) == below { a = middle } else { b = middle }
        }
        found.push(0.5 * (a + b));
    }
    found
}

#[cfg(test)]
mod tests {
    use super::growth;

    #[test]
    fn growth_is_the_order_of_a_pole() {
        for p in [0.5, 1.0, 2.0, 3.5] {
            let order = growth(|d| Some(d.powf(-p) + 3.0), 1e-6).expect("a number");
            assert!((order - p).abs() < 0.01, "{p}: {order}");
        }
        for finite in [|d: f64| d.sin() / d, |d: f64| 1.0 / (1.0 + (d / 1e-6).powi(2)), |d: f64| d] {
            assert!(growth(|d| Some(finite(d)), 1e-6).is_none_or(|order| order < 0.1));
        }
    }
}
