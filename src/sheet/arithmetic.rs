//! Sums, products, powers, derivatives, choices: nodes and dimensions.

use super::lower::{Lowerer, Typed};
use super::source::Located;
use crate::formula::graph::NodeId;
use crate::formula::syntax::{Comparison, Expression, Kind, Operator, Span, Test};
use crate::unit::Dimension;

impl Lowerer<'_> {
    /// The common dimension of two parts, or a fault that names both.
    pub(super) fn same(
        &mut self,
        at: &Located,
        e: &Expression,
        a: (&Expression, Typed),
        b: (&Expression, Typed),
    ) -> Option<Option<Dimension>> {
        match (a.1.dimension, b.1.dimension) {
            (Some(p), Some(q)) if p != q => {
                let text = |e: &Expression| at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
                let message = format!("`{}` is {} but `{}` is {}", text(a.0), p.describe(), text(b.0), q.describe());
                self.fault("dimension", at, &e.span, message, "both must measure the same: check factors and units")
            }
            (p, q) => Some(p.or(q)),
        }
    }

    /// Checks a dimension that the place demands.
    pub fn expect(&mut self, at: &Located, e: &Expression, typed: Typed, wanted: Option<Dimension>) -> Option<()> {
        match (typed.dimension, wanted) {
            (Some(found), Some(wanted)) if found != wanted => {
                let text = at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
                let message = format!("`{text}` is {} but {} is needed here", found.describe(), wanted.describe());
                self.fault("dimension", at, &e.span, message, "")
            }
            _ => Some(()),
        }
    }

    pub(super) fn binary(
        &mut self,
        at: &Located,
        e: &Expression,
        operator: Operator,
        a: &Expression,
        b: &Expression,
    ) -> Option<Typed> {
        let (left, right) = (self.lower(at, a), self.lower(at, b));
        let (left, right) = (left?, right?);
        let graph = &mut self.graph;
        match operator {
            Operator::Add | Operator::Subtract => {
                let minus = operator == Operator::Subtract;
                let dimension = self.same(at, e, (a, left), (b, right))?;
                let node = if minus {
                    self.graph.subtract(left.node, right.node)
                } else {
                    self.graph.add(left.node, right.node)
                };
                let absolute = if minus { left.absolute - right.absolute } else { left.absolute + right.absolute };
                Some(Typed { node, dimension, absolute })
            }
            Operator::Multiply => {
                let node = graph.multiply(left.node, right.node);
                let dimension = self.product(at, e, left.dimension, right.dimension, false)?;
                let absolute = match (self.number_of(left.node), self.number_of(right.node)) {
                    (Some(c), _) if left.absolute == 0.0 => c * right.absolute,
                    (_, Some(c)) if right.absolute == 0.0 => c * left.absolute,
                    _ if left.absolute == 0.0 && right.absolute == 0.0 => 0.0,
                    _ => f64::NAN,
                };
                Some(Typed { node, dimension, absolute })
            }
            Operator::Divide => {
                if self.number_of(right.node) == Some(0.0) {
                    let text = at.text.get(b.span.clone()).unwrap_or("").trim().to_owned();
                    return self.fault("division by zero", at, &b.span, format!("division by zero: `{text}` is 0"), "");
                }
                let node = self.graph.divide(left.node, right.node);
                let dimension = self.product(at, e, left.dimension, right.dimension, true)?;
                let absolute = match self.number_of(right.node) {
                    Some(c) => left.absolute / c,
                    None if left.absolute == 0.0 => 0.0,
                    None => f64::NAN,
                };
                Some(Typed { node, dimension, absolute })
            }
            Operator::Power => self.power(at, e, (a, left), (b, right)),
        }
    }

    pub(super) fn product(
        &mut self,
        at: &Located,
        e: &Expression,
        left: Option<Dimension>,
        right: Option<Dimension>,
        divide: bool,
    ) -> Option<Option<Dimension>> {
        // A literal 0 times anything is still a 0 that fits everywhere.
        let (Some(left), Some(right)) = (left, right) else { return Some(None) };
        match if divide { left.div(right) } else { left.mul(right) } {
            Ok(dimension) => Some(Some(dimension)),
            Err(_) => self.fault("dimension", at, &e.span, "the exponents of this unit grow beyond all use", ""),
        }
    }

    pub(super) fn power(
        &mut self,
        at: &Located,
        e: &Expression,
        base: (&Expression, Typed),
        exponent: (&Expression, Typed),
    ) -> Option<Typed> {
        self.expect(at, exponent.0, exponent.1, Some(Dimension::default()))?;
        let node = self.graph.power(base.1.node, exponent.1.node);
        let pure = base.1.dimension.is_none_or(Dimension::is_none);
        if pure {
            return Some(Typed { node, dimension: Some(Dimension::default()), absolute: 0.0 });
        }
        let Some(n) = self.number_of(exponent.1.node) else {
            let message = "a power of a quantity with a unit needs a constant exponent";
            return self.fault("dimension", at, &exponent.0.span, message, "divide by a reference value first");
        };
        match base.1.dimension.map(|d| d.powf(n)) {
            Some(Ok(dimension)) => Some(Typed { node, dimension: Some(dimension), absolute: 0.0 }),
            _ => self.fault("dimension", at, &e.span, "this power of a unit cannot be kept as a simple fraction", ""),
        }
    }

    /// The derivative of some order along the span.
    pub(super) fn primed(&mut self, at: &Located, span: &Span, a: Typed, order: usize) -> Option<Typed> {
        if order > 60 {
            return self.fault("too deep", at, span, "derivatives above the 60th are not taken", "");
        }
        let mut node = a.node;
        let mut dimension = a.dimension;
        for _ in 0..order {
            node = if self.scalars { self.graph.total(node) } else { self.graph.derivative(node) };
            dimension = match (dimension, self.coordinate_dimension) {
                (Some(d), Some(x)) => Some(d.div(x).ok()?),
                (d, None) => d,
                (None, _) => None,
            };
        }
        Some(Typed { node, dimension, absolute: if order == 0 { a.absolute } else { 0.0 } })
    }

    pub(super) fn choose(&mut self, at: &Located, test: &Test, then: NodeId, otherwise: NodeId) -> Option<NodeId> {
        match test {
            Test::Compare(a, comparison, b) => {
                let (left, right) = (self.lower(at, a), self.lower(at, b));
                let (left, right) = (left?, right?);
                let whole = Expression { kind: Kind::Name(String::new()), span: a.span.start..b.span.end };
                self.same(at, &whole, (a, left), (b, right))?;
                let (gap, strict) = match comparison {
                    Comparison::Less => (self.graph.subtract(left.node, right.node), true),
                    Comparison::LessEqual => (self.graph.subtract(left.node, right.node), false),
                    Comparison::Greater => (self.graph.subtract(right.node, left.node), true),
                    Comparison::GreaterEqual => (self.graph.subtract(right.node, left.node), false),
                };
                Some(self.graph.choose(gap, strict, then, otherwise))
            }
            Test::And(p, q) => {
                let inner = self.choose(at, q, then, otherwise)?;
                self.choose(at, p, inner, otherwise)
            }
            Test::Or(p, q) => {
                let inner = self.choose(at, q, then, otherwise)?;
                self.choose(at, p, then, inner)
            }
        }
    }
}
