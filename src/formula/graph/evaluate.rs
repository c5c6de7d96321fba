//! Evaluation at one point, node by node: for data, checks and tests; the work along the span is done by a
//! [`tape`](crate::formula::tape).

use super::{Graph, Node, NodeId};
use crate::formula::number::Number;
use std::collections::HashMap;

/// What a node is evaluated with.
#[derive(Clone, Copy)]
pub struct Inputs<'a, T = f64> {
    /// The coordinate.
    pub x: T,
    /// A coordinate inside the piece at hand, where the tests on data are decided; x itself where there are no
    /// pieces. At a break, x alone would not tell the sides apart.
    pub middle: f64,
    /// u_i^(k) at x.
    pub jets: &'a dyn Fn(u16, u8) -> T,
    /// Unknown constants, then held ones; those missing have their value as written, or are not a number.
    pub constants: &'a [T],
    /// Slots; those missing are taken as not a number.
    pub slots: &'a [T],
}

impl<T: Number> Inputs<'_, T> {
    /// For data: no unknowns, no pieces.
    pub fn at(x: T) -> Self {
        Self { x, middle: x.value(), jets: &|_, _| T::number(f64::NAN, f64::INFINITY), constants: &[], slots: &[] }
    }
}

impl Graph {
    /// The value of a node. It is not a number where a [`Node::Derivative`] is left: expand first.
    pub fn evaluate<T: Number>(&self, id: NodeId, inputs: &Inputs<'_, T>) -> T {
        let missing = T::number(f64::NAN, f64::INFINITY);
        let mut values: HashMap<NodeId, T> = HashMap::new();
        for part in self.reach(&[id]) {
            let of = |a: NodeId| values.get(&a).copied().unwrap_or(missing);
            let value = match self.node(part) {
                Node::Number(value) => T::number(value, self.facts(part).error),
                Node::Coordinate => inputs.x,
                Node::Jet { unknown, order } => (inputs.jets)(unknown, order),
                Node::Constant(c) => inputs
                    .constants
                    .get(usize::from(c))
                    .copied()
                    .unwrap_or_else(|| self.held(c).map_or(missing, |held| T::number(held.value, held.error))),
                Node::Slot(s) => inputs.slots.get(s as usize).copied().unwrap_or(missing),
                Node::Derivative(_) => missing,
                Node::Negate(a) => of(a).negate(),
                Node::Add(a, b) => of(a).add(of(b)),
                Node::Multiply(a, b) => of(a).multiply(of(b)),
                Node::Divide(a, b) => of(a).divide(of(b)),
                Node::Power(a, b) => of(a).power(of(b)),
                Node::Unary(f, a) => of(a).unary(f),
                Node::Binary(f, a, b) => of(a).binary(f, of(b)),
                Node::Table { table, order, argument } => match self.tables.get(usize::from(table)) {
                    Some(table) => of(argument).tabulated(table, order),
                    None => missing,
                },
                node @ Node::Choose { gap, strict, then, otherwise } => {
                    let at_middle = inputs.middle != inputs.x.value();
                    let gap = if at_middle && self.piece_test(node).is_some() {
                        let here = Inputs::at(inputs.middle);
                        T::number(self.evaluate(gap, &here), 0.0)
                    } else {
                        of(gap)
                    };
                    gap.choose(strict, of(then), of(otherwise))
                }
            };
            values.insert(part, value);
        }
        values.get(&id).copied().unwrap_or(missing)
    }

    /// The outcomes of piece tests in the piece around `middle`.
    pub fn decide(&self, tests: &[super::PieceTest], middle: f64) -> Vec<bool> {
        tests
            .iter()
            .map(|test| {
                let gap = self.evaluate(test.gap, &Inputs::at(middle));
                crate::formula::number::holds(gap, test.strict)
            })
            .collect()
    }
}
