//! Sums, products, powers, derivatives, choices: nodes and dimensions.

use super::absolute::Absolute;
use super::lower::{Lowerer, Typed};
use super::source::Located;
use crate::formula::graph::NodeId;
use crate::formula::syntax::{Comparison, Expression, Kind, Operator, Span, Test};
use crate::unit::{Dimension, Unit};

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
                self.faults.unequal.push((p, q));
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
                self.faults.unequal.push((found, wanted));
                let text = at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
                let message = format!("`{text}` is {} but {} is needed here", found.describe(), wanted.describe());
                let hint = if wanted == Dimension::default() {
                    format!("divide it by a value of its own kind, as in {text}/(1 {})", Unit::si(found).text)
                } else if found == Dimension::default() && matches!(e.kind, Kind::Number { .. }) {
                    format!("give the number its unit: {text} {}", Unit::si(wanted).text)
                } else {
                    String::new()
                };
                self.fault("dimension", at, &e.span, message, &hint)
            }
            _ => Some(()),
        }
    }

    /// Refuses a place that does not measure what the coordinate does.
    pub fn expect_place(&mut self, at: &Located, e: &Expression, typed: Typed) -> Option<()> {
        let pure = Some(Dimension::default());
        if self.coordinate_dimension == pure && typed.dimension.is_some() && typed.dimension != pure {
            if std::mem::replace(&mut self.misplaced, true) {
                // Said once: every place would be at fault.
                return None;
            }
            let text = at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
            let found = typed.dimension.unwrap_or_default().describe();
            let name = &self.coordinate;
            let message = format!("`{text}` is {found} but the ends of `{name}` are pure numbers");
            let hint = format!("write the span with units: {name} = [\"0 m\", \"L\"]");
            return self.fault("dimension", at, &e.span, message, &hint);
        }
        self.expect(at, e, typed, self.coordinate_dimension)
    }

    /// Refuses a difference of temperatures set against an absolute one.
    pub(super) fn balanced(&mut self, at: &Located, a: (&Expression, Typed), b: (&Expression, Typed)) -> Option<()> {
        let temperature = a.1.dimension.or(b.1.dimension) == Some(Dimension::TEMPERATURE);
        if !temperature || a.1.absolute.minus(b.1.absolute).balances() {
            return Some(());
        }
        let text = |e: &Expression| at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
        let (left, right) = (text(a.0), text(b.0));
        let span = a.0.span.start..b.0.span.end;
        if a.1.dimension.is_none() || b.1.dimension.is_none() {
            let other = if a.1.dimension.is_none() { right } else { left };
            let message = format!("`{other}` is an absolute temperature: 0 would be 0 K");
            return self.fault("temperature difference", at, &span, message, "write 0 degC, or the value in K");
        }
        let (p, q) = (a.1.absolute.describe(), b.1.absolute.describe());
        let message = format!("`{left}` is {p} but `{right}` is {q}");
        let hint = "a value in degC is an absolute temperature; write a difference in K";
        self.fault("temperature difference", at, &span, message, hint)
    }

    /// A temperature as a factor: refuses sums such as T + 5 degC, and warns where a datum in degC is taken as absolute.
    fn factor_temperature(&mut self, at: &Located, (e, typed): (&Expression, Typed)) {
        if typed.dimension == Some(Dimension::TEMPERATURE)
            && self.single_temperature(at, (e, typed)).is_some()
            && typed.absolute.is_temperature()
            && let Some(value) = self.shown_number(typed.node)
        {
            let text = at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
            if matches!(e.kind, Kind::Number { .. }) {
                let message = format!("`{text}` is an absolute temperature, not a difference");
                let hint = format!("a difference is written in K; if {} K is meant, write that", super::short(value));
                self.fault::<()>("temperature difference", at, &e.span, message, &hint);
                return;
            }
            let warning = format!(
                "`{text}` counts as an absolute temperature in a product, {} K; if a difference is meant, write it in K",
                super::short(value)
            );
            self.warn(warning);
        }
    }

    /// Refuses a sum of absolute temperatures as a factor or base.
    fn single_temperature(&mut self, at: &Located, (e, typed): (&Expression, Typed)) -> Option<()> {
        if typed.dimension != Some(Dimension::TEMPERATURE) || !typed.absolute.adds_up() {
            return Some(());
        }
        let text = at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
        let message = format!("`{text}` adds up absolute temperatures");
        let hint = "a value in degC is an absolute temperature; write a difference in K";
        self.fault("temperature difference", at, &e.span, message, hint)
    }

    /// The value of an expression that is a number without a unit.
    fn pure_number(&self, typed: Typed) -> Option<f64> {
        typed.dimension.is_none_or(Dimension::is_none).then(|| self.shown_number(typed.node))?
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
                let absolute =
                    if minus { left.absolute.minus(right.absolute) } else { left.absolute.plus(right.absolute) };
                Some(Typed { node, dimension, absolute })
            }
            Operator::Multiply => {
                let node = graph.multiply(left.node, right.node);
                let dimension = self.product(at, e, left.dimension, right.dimension, false)?;
                let absolute = match (self.pure_number(left), self.pure_number(right)) {
                    (Some(c), _) => right.absolute.times(c),
                    (_, Some(c)) => left.absolute.times(c),
                    _ => {
                        self.factor_temperature(at, (a, left));
                        self.factor_temperature(at, (b, right));
                        left.absolute.in_product().plus(right.absolute.in_product())
                    }
                };
                Some(Typed { node, dimension, absolute })
            }
            Operator::Divide => {
                if self.shown_number(right.node) == Some(0.0) {
                    let text = at.text.get(b.span.clone()).unwrap_or("").trim().to_owned();
                    return self.fault("division by zero", at, &b.span, format!("division by zero: `{text}` is 0"), "");
                }
                let node = self.graph.divide(left.node, right.node);
                let dimension = self.product(at, e, left.dimension, right.dimension, true)?;
                let absolute = match self.pure_number(right) {
                    Some(c) => left.absolute.times(c.recip()),
                    None => {
                        self.factor_temperature(at, (a, left));
                        self.factor_temperature(at, (b, right));
                        left.absolute.in_product()
                    }
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
        self.single_temperature(at, base);
        let node = self.graph.power(base.1.node, exponent.1.node);
        let pure = base.1.dimension.is_none_or(Dimension::is_none);
        if pure {
            return Some(Typed { node, dimension: Some(Dimension::default()), absolute: Absolute::NONE });
        }
        let Some(n) = self.number_of(exponent.1.node) else {
            let message = "a power of a quantity with a unit needs a constant exponent";
            return self.fault("dimension", at, &exponent.0.span, message, "divide by a reference value first");
        };
        match base.1.dimension.map(|d| d.powf(n)) {
            Some(Ok(dimension)) => Some(Typed { node, dimension: Some(dimension), absolute: Absolute::NONE }),
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
                // Where either is at fault nothing can be said.
                _ => None,
            };
        }
        Some(Typed { node, dimension, absolute: if order == 0 { a.absolute } else { Absolute::NONE } })
    }

    pub(super) fn choose(&mut self, at: &Located, test: &Test, then: NodeId, otherwise: NodeId) -> Option<NodeId> {
        match test {
            Test::Compare(a, comparison, b) => {
                let (left, right) = (self.lower(at, a), self.lower(at, b));
                let (left, right) = (left?, right?);
                let whole = Expression { kind: Kind::Name(String::new()), span: a.span.start..b.span.end };
                self.same(at, &whole, (a, left), (b, right))?;
                self.balanced(at, (a, left), (b, right))?;
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
