//! Constructors that fold and bring sums and products into one form.
//!
//! A *term* is (n/d) R with numbers n, d and a rest R; a *product* is R = N/D with N and D chains of powers of
//! bases, sorted by id, each base once. A *sum* is a chain of terms sorted by the ids of their rests, each rest
//! once. n/d is kept as a pair unless the division is exact: x/L is exactly 1 at x = L, which x times the
//! rounded 1/L need not be.

use super::{Binary, Graph, NOT_A_NUMBER, Node, NodeId, ONE, Unary, ZERO};
use crate::formula::number::{Number, Rounded, holds};
use crate::formula::table::Table;
use crate::unit::Unit;
use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::Arc;

/// Longest sum or product that is flattened; a longer one stays as it is, which costs only recognition.
const LONGEST: usize = 500;

/// Largest exponent that counts as a repetition of its base.
const MOST_REPEATED: f64 = 1000.0;

/// The coefficient n/d.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Coefficient {
    n: Rounded,
    d: Rounded,
}

impl Coefficient {
    const ONE: Self = Self { n: Rounded { value: 1.0, error: 0.0 }, d: Rounded { value: 1.0, error: 0.0 } };

    fn from(n: Rounded) -> Self {
        Self { n, ..Self::ONE }
    }

    fn negate(self) -> Self {
        Self { n: self.n.negate(), ..self }
    }

    fn times(self, other: Self) -> Self {
        Self { n: self.n.multiply(other.n), d: self.d.multiply(other.d) }.reduced()
    }

    fn over(self, other: Self) -> Self {
        Self { n: self.n.multiply(other.d), d: self.d.multiply(other.n) }.reduced()
    }

    fn plus(self, other: Self) -> Self {
        if self.d == other.d {
            return Self { n: self.n.add(other.n), ..self }.reduced();
        }
        Self::from(self.quotient().add(other.quotient()))
    }

    fn quotient(self) -> Rounded {
        self.n.divide(self.d)
    }

    /// Divides where that is exact.
    fn reduced(self) -> Self {
        let exact = |a: Rounded, b: Rounded| {
            let q = a.value / b.value;
            q.is_finite() && q != 0.0 && (-q).mul_add(b.value, a.value) == 0.0
        };
        if self.n.value == 0.0 && self.d.value != 0.0 {
            return Self { n: self.n, ..Self::ONE };
        }
        if exact(self.n, self.d) {
            Self::from(self.quotient())
        } else if exact(self.d, self.n) {
            Self { n: Self::ONE.n, d: self.d.divide(self.n) }
        } else {
            self
        }
    }

    fn value(self) -> f64 {
        self.n.value / self.d.value
    }
}

/// Powers of bases.
type Factors = BTreeMap<NodeId, i32>;

impl Graph {
    fn rounded_node(&mut self, r: Rounded) -> NodeId {
        self.intern(Node::Number(r.value), r.error)
    }

    /// A number as read from decimal digits ([`Rounded::from_decimal`]).
    pub fn number(&mut self, value: f64) -> NodeId {
        self.rounded_node(Rounded::from_decimal(value))
    }

    /// A number with its unit, in SI; the bound for its error counts the reading of the digits and the conversion.
    pub fn quantity(&mut self, value: f64, unit: &Unit) -> NodeId {
        let si = unit.to_si(value);
        let read = Rounded::from_decimal(value).error * unit.factor;
        let converted = if si == value && read == 0.0 { 0.0 } else { si.abs() * f64::EPSILON / 2.0 };
        self.number_within(si, read + converted)
    }

    /// A number with a bound for its error.
    pub fn number_within(&mut self, value: f64, error: f64) -> NodeId {
        self.rounded_node(Rounded { value, error })
    }

    pub(super) fn exact(&mut self, value: f64) -> NodeId {
        self.rounded_node(Rounded::exact(value))
    }

    /// The coordinate.
    pub fn coordinate(&mut self) -> NodeId {
        self.intern(Node::Coordinate, 0.0)
    }

    /// A derivative of an unknown function, order 0 for the function itself.
    pub fn jet(&mut self, unknown: u16, order: u8) -> NodeId {
        self.intern(Node::Jet { unknown, order }, 0.0)
    }

    /// An unknown constant.
    pub fn constant(&mut self, index: u16) -> NodeId {
        self.intern(Node::Constant(index), 0.0)
    }

    /// A number known only from the solution.
    pub fn slot(&mut self, index: u32) -> NodeId {
        self.intern(Node::Slot(index), 0.0)
    }

    /// d/dx of an expression. Of data it is taken at once, of an unknown it is its next derivative; anything else
    /// stays a [`Node::Derivative`], to be carried as a flux or expanded.
    pub fn derivative(&mut self, a: NodeId) -> NodeId {
        if !self.depends_on(a).jets {
            return self.total(a);
        }
        match self.node(a) {
            Node::Jet { unknown, order } => self.next_jet(unknown, order),
            _ => self.intern(Node::Derivative(a), 0.0),
        }
    }

    pub(super) fn next_jet(&mut self, unknown: u16, order: u8) -> NodeId {
        match order.checked_add(1) {
            Some(order) => self.jet(unknown, order),
            None => NOT_A_NUMBER,
        }
    }

    /// -a
    pub fn negate(&mut self, a: NodeId) -> NodeId {
        if matches!(self.node(a), Node::Add(..)) {
            return self.sum(&[(Coefficient::ONE.negate(), a)]);
        }
        let (coefficient, rest) = self.term(a);
        self.with_coefficient(coefficient.negate(), rest)
    }

    /// a + b
    pub fn add(&mut self, a: NodeId, b: NodeId) -> NodeId {
        self.sum(&[(Coefficient::ONE, a), (Coefficient::ONE, b)])
    }

    /// a - b
    pub fn subtract(&mut self, a: NodeId, b: NodeId) -> NodeId {
        self.sum(&[(Coefficient::ONE, a), (Coefficient::ONE.negate(), b)])
    }

    /// a b; 0 times anything is 0.
    pub fn multiply(&mut self, a: NodeId, b: NodeId) -> NodeId {
        let ((ca, ra), (cb, rb)) = (self.term(a), self.term(b));
        self.product(ca.times(cb), ra, rb, 1)
    }

    /// a / b
    pub fn divide(&mut self, a: NodeId, b: NodeId) -> NodeId {
        let ((ca, ra), (cb, rb)) = (self.term(a), self.term(b));
        self.product(ca.over(cb), ra, rb, -1)
    }

    /// a^b
    pub fn power(&mut self, a: NodeId, b: NodeId) -> NodeId {
        match (self.rounded(a), self.rounded(b)) {
            (Some(a), Some(b)) => return self.rounded_node(a.power(b)),
            (_, Some(b)) if b.value == 0.0 => return ONE,
            (_, Some(b)) if b.value == 1.0 => return a,
            (_, Some(b)) if b.value == 0.5 => return self.unary(Unary::Sqrt, a),
            (Some(a), _) if a.value == 1.0 => return ONE,
            (_, Some(b)) if b.value.fract() == 0.0 && b.value.abs() <= MOST_REPEATED => {
                return self.repeated(a, b.value as i32);
            }
            _ => {}
        }
        self.intern(Node::Power(a, b), 0.0)
    }

    /// a^k for an integer k.
    fn repeated(&mut self, a: NodeId, k: i32) -> NodeId {
        if let Node::Negate(inner) = self.node(a) {
            let power = self.repeated_base(inner, k);
            return if k % 2 == 0 { power } else { self.negate(power) };
        }
        self.repeated_base(a, k)
    }

    fn repeated_base(&mut self, a: NodeId, k: i32) -> NodeId {
        let mut factors = Factors::new();
        let (coefficient, rest) = self.term(a);
        let single = coefficient == Coefficient::ONE && self.collect(rest, 1, &mut factors) && factors.len() == 1;
        let (base, exponent) = match factors.pop_first() {
            Some((base, e)) if single => match e.checked_mul(k) {
                Some(e) if f64::from(e).abs() <= MOST_REPEATED => (base, e),
                _ => (a, k),
            },
            _ => (a, k),
        };
        let factors = Factors::from([(base, exponent)]);
        self.assemble(Coefficient::ONE, &factors)
    }

    /// f(a)
    pub fn unary(&mut self, f: Unary, a: NodeId) -> NodeId {
        if let Some(a) = self.rounded(a) {
            return self.rounded_node(a.unary(f));
        }
        if self.depends_on(a).only_coordinate() {
            match f {
                Unary::Abs => {
                    let minus = self.negate(a);
                    return self.choose(a, true, minus, a);
                }
                Unary::Sign => {
                    // Zero along a whole stretch counts, zero at a place does not.
                    let (opposite, minus) = (self.negate(a), self.exact(-1.0));
                    let above = self.choose(opposite, true, ONE, ZERO);
                    return self.choose(a, true, minus, above);
                }
                _ => {}
            }
        }
        self.intern(Node::Unary(f, a), 0.0)
    }

    /// f(a, b)
    pub fn binary(&mut self, f: Binary, a: NodeId, b: NodeId) -> NodeId {
        if let (Some(a), Some(b)) = (self.rounded(a), self.rounded(b)) {
            return self.rounded_node(a.binary(f, b));
        }
        let data = self.depends_on(a).or(self.depends_on(b)).only_coordinate();
        match f {
            Binary::Min | Binary::Max if a == b => a,
            Binary::Min | Binary::Max if data => {
                let gap = self.subtract(a, b);
                let (least, most) = if f == Binary::Min { (a, b) } else { (b, a) };
                self.choose(gap, false, least, most)
            }
            Binary::Min | Binary::Max => self.intern(Node::Binary(f, a.min(b), a.max(b)), 0.0),
            Binary::SignedPower if self.as_number(b) == Some(1.0) => a,
            Binary::SignedPower if data && self.as_number(b).is_some() => {
                let minus = self.negate(a);
                let below = self.power(minus, b);
                let below = self.negate(below);
                let above = self.power(a, b);
                self.choose(a, true, below, above)
            }
            _ => self.intern(Node::Binary(f, a, b), 0.0),
        }
    }

    /// `then` where `gap < 0` (`strict`) or `gap <= 0`, else `otherwise`.
    pub fn choose(&mut self, gap: NodeId, strict: bool, then: NodeId, otherwise: NodeId) -> NodeId {
        if then == otherwise {
            return then;
        }
        if let Some(gap) = self.as_number(gap) {
            return if holds(gap, strict) { then } else { otherwise };
        }
        let node = Node::Choose { gap, strict, then, otherwise };
        self.intern(node, 0.0)
    }

    /// Takes in measured data; the number of its table, `None` when there are too many.
    pub fn measure(&mut self, table: Table) -> Option<u16> {
        let number = u16::try_from(self.tables.len()).ok()?;
        self.tables.push(Arc::new(table));
        Some(number)
    }

    /// All measured data, by their number.
    pub fn tables(&self) -> &[Arc<Table>] {
        &self.tables
    }

    /// The derivative `order` of measured data, read at `argument`.
    ///
    /// Where the argument holds the coordinate and data only, a derivative that steps from piece to piece becomes a
    /// choice, so that both sides of a break have their own ([`Graph::piece_tests`]).
    pub fn table(&mut self, table: u16, order: u8, argument: NodeId) -> NodeId {
        let Some(data) = self.tables.get(usize::from(table)).cloned() else { return NOT_A_NUMBER };
        if order > data.degree() && self.depends_on(argument).only_coordinate() {
            return ZERO;
        }
        if let Some(argument) = self.rounded(argument) {
            return self.rounded_node(argument.tabulated(&data, order));
        }
        if order > data.smoothness() && self.depends_on(argument).only_coordinate() {
            return self.by_pieces(&data, order, argument, 0..data.points().len() - 1);
        }
        self.intern(Node::Table { table, order, argument }, 0.0)
    }

    /// Polynomials piece by piece, found by halving.
    fn by_pieces(&mut self, data: &Table, order: u8, argument: NodeId, range: Range<usize>) -> NodeId {
        let left = data.points()[range.start];
        if range.len() == 1 {
            let left = self.number(left);
            let t = self.subtract(argument, left);
            let mut value = ZERO;
            for c in data.coefficients(order, range.start).into_iter().rev() {
                let (scaled, c) = (self.multiply(value, t), self.number(c));
                value = self.add(scaled, c);
            }
            return value;
        }
        let middle = range.start + range.len() / 2;
        let point = self.number(data.points()[middle]);
        let gap = self.subtract(argument, point);
        let below = self.by_pieces(data, order, argument, range.start..middle);
        let above = self.by_pieces(data, order, argument, middle..range.end);
        self.choose(gap, true, below, above)
    }

    /// Coefficient and rest; of a number the rest is 1.
    pub(super) fn term(&mut self, id: NodeId) -> (Coefficient, NodeId) {
        let (mut id, mut sign, mut under) = (id, false, Coefficient::ONE);
        let (coefficient, rest) = loop {
            match self.node(id) {
                Node::Negate(a) => {
                    sign = !sign;
                    id = a;
                }
                Node::Divide(a, b) => match (self.rounded(a), self.rounded(b)) {
                    (_, Some(d)) => {
                        under = under.times(Coefficient::from(d));
                        id = a;
                    }
                    (Some(n), _) if n.value != 1.0 => {
                        let rest = self.intern(Node::Divide(ONE, b), 0.0);
                        break (Coefficient::from(n), rest);
                    }
                    _ => break (Coefficient::ONE, id),
                },
                Node::Multiply(a, b) => match self.rounded(a) {
                    Some(n) => break (Coefficient::from(n), b),
                    None => break (Coefficient::ONE, id),
                },
                Node::Number(_) => {
                    let n = self.rounded(id).unwrap_or(Coefficient::ONE.n);
                    break (Coefficient::from(n), ONE);
                }
                _ => break (Coefficient::ONE, id),
            }
        };
        let coefficient = coefficient.over(under);
        (if sign { coefficient.negate() } else { coefficient }, rest)
    }

    /// The node (n/d) R.
    fn with_coefficient(&mut self, c: Coefficient, rest: NodeId) -> NodeId {
        if rest == ONE {
            return self.rounded_node(c.quotient());
        }
        if c.n.value == 0.0 && c.d.value != 0.0 {
            return ZERO;
        }
        let scaled = match (c.n.value, self.node(rest)) {
            (1.0, _) => rest,
            (-1.0, _) => self.intern(Node::Negate(rest), 0.0),
            (_, Node::Divide(ONE, under)) => {
                let n = self.rounded_node(c.n);
                self.intern(Node::Divide(n, under), 0.0)
            }
            _ => {
                let n = self.rounded_node(c.n);
                self.intern(Node::Multiply(n, rest), 0.0)
            }
        };
        if c.d.value == 1.0 {
            return scaled;
        }
        let d = self.rounded_node(c.d);
        self.intern(Node::Divide(scaled, d), 0.0)
    }

    /// c a b^sign for products a and b without coefficients.
    fn product(&mut self, c: Coefficient, a: NodeId, b: NodeId, sign: i32) -> NodeId {
        if a == ONE && b == ONE {
            return self.rounded_node(c.quotient());
        }
        let mut factors = Factors::new();
        if !(self.collect(a, 1, &mut factors) && self.collect(b, sign, &mut factors)) {
            let node = if sign > 0 { Node::Multiply(a.min(b), a.max(b)) } else { Node::Divide(a, b) };
            let rest = self.intern(node, 0.0);
            return self.with_coefficient(c, rest);
        }
        self.assemble(c, &factors)
    }

    /// Adds the factors of a product; false where there are too many.
    fn collect(&self, id: NodeId, sign: i32, factors: &mut Factors) -> bool {
        let mut open = vec![(id, sign)];
        for _ in 0..2 * LONGEST {
            let Some((id, sign)) = open.pop() else {
                factors.retain(|_, k| *k != 0);
                return factors.len() <= LONGEST;
            };
            let (base, exponent) = match self.node(id) {
                Node::Multiply(a, b) => {
                    open.extend([(a, sign), (b, sign)]);
                    continue;
                }
                Node::Divide(a, b) => {
                    open.extend([(a, sign), (b, -sign)]);
                    continue;
                }
                Node::Power(base, k) => match self.as_number(k) {
                    Some(k) if k.fract() == 0.0 && k.abs() <= MOST_REPEATED => (base, k as i32),
                    _ => (id, 1),
                },
                _ if id == ONE => continue,
                _ => (id, 1),
            };
            *factors.entry(base).or_insert(0) += sign * exponent;
        }
        false
    }

    fn assemble(&mut self, c: Coefficient, factors: &Factors) -> NodeId {
        let mut sides = [None, None];
        for (base, k) in factors {
            let factor = if k.abs() == 1 {
                *base
            } else {
                let exponent = self.exact(f64::from(k.abs()));
                self.intern(Node::Power(*base, exponent), 0.0)
            };
            let side = &mut sides[usize::from(*k < 0)];
            *side = Some(match *side {
                None => factor,
                Some(chain) => self.intern(Node::Multiply(chain, factor), 0.0),
            });
        }
        let rest = match sides {
            [over, None] => over.unwrap_or(ONE),
            [over, Some(under)] => {
                let over = over.unwrap_or(ONE);
                self.intern(Node::Divide(over, under), 0.0)
            }
        };
        self.with_coefficient(c, rest)
    }

    /// Terms of a sum, sorted by rest, each rest once; `None` where there are too many.
    pub(super) fn collect_terms(&mut self, parts: &[(Coefficient, NodeId)]) -> Option<BTreeMap<NodeId, Coefficient>> {
        let mut terms: BTreeMap<NodeId, Coefficient> = BTreeMap::new();
        let mut open = parts.to_vec();
        for _ in 0..2 * LONGEST {
            let Some((c, id)) = open.pop() else {
                terms.retain(|_, c| c.n.value != 0.0);
                return (terms.len() <= LONGEST).then_some(terms);
            };
            if let Node::Add(a, b) = self.node(id) {
                open.extend([(c, a), (c, b)]);
                continue;
            }
            let (inner, rest) = self.term(id);
            let coefficient = c.times(inner);
            let signed = [Coefficient::ONE, Coefficient::ONE.negate()].contains(&coefficient);
            if signed && let Node::Add(..) = self.node(rest) {
                open.push((coefficient, rest));
                continue;
            }
            terms.entry(rest).and_modify(|sum| *sum = sum.plus(coefficient)).or_insert(coefficient);
        }
        None
    }

    fn sum(&mut self, parts: &[(Coefficient, NodeId)]) -> NodeId {
        let Some(terms) = self.collect_terms(parts) else {
            // Too long to sort: a plain chain.
            return parts.iter().fold(ZERO, |sum, (c, id)| {
                let term = if c.n.value < 0.0 { self.intern(Node::Negate(*id), 0.0) } else { *id };
                if sum == ZERO { term } else { self.intern(Node::Add(sum.min(term), sum.max(term)), 0.0) }
            });
        };
        let mut sum = None;
        for (rest, c) in terms {
            let term = self.with_coefficient(c, rest);
            sum = Some(match sum {
                None => term,
                Some(sum) => self.intern(Node::Add(sum, term), 0.0),
            });
        }
        sum.unwrap_or(ZERO)
    }

    /// The terms of a sum, as coefficient and rest; of a number the rest is the node 1. A number in front of a sum is
    /// multiplied out. Together: the sum of coefficient times rest.
    pub fn terms(&mut self, id: NodeId) -> Vec<(f64, NodeId)> {
        let mut terms: BTreeMap<NodeId, f64> = BTreeMap::new();
        let mut open = vec![(1.0, id)];
        while let Some((factor, id)) = open.pop() {
            if let Node::Add(a, b) = self.node(id) {
                open.extend([(factor, a), (factor, b)]);
                continue;
            }
            let (c, rest) = self.term(id);
            let c = factor * c.value();
            if matches!(self.node(rest), Node::Add(..)) {
                open.push((c, rest));
            } else {
                *terms.entry(rest).or_insert(0.0) += c;
            }
        }
        terms.retain(|_, c| *c != 0.0);
        terms.into_iter().map(|(rest, c)| (c, rest)).collect()
    }

    /// The coefficient and the factors of a product with their exponents, divisors with negative ones.
    pub fn factors(&mut self, id: NodeId) -> (f64, Vec<(NodeId, i32)>) {
        let (c, rest) = self.term(id);
        let mut factors = Factors::new();
        if self.collect(rest, 1, &mut factors) {
            (c.value(), factors.into_iter().collect())
        } else {
            (1.0, vec![(id, 1)])
        }
    }

    /// The number r with a = r b, if there is one but for rounding: whether a condition speaks of a carried flux,
    /// or of a multiple of it.
    pub fn ratio(&mut self, a: NodeId, b: NodeId) -> Option<f64> {
        let (left, right) = (self.terms(a), self.terms(b));
        let ratio = left.first()?.0 / right.first()?.0;
        // Coefficients are products of a few rounded numbers, multiplied in any order.
        let close = |p: f64, q: f64| (p - q).abs() <= 16.0 * f64::EPSILON * p.abs().max(q.abs());
        let same =
            left.len() == right.len() && left.iter().zip(&right).all(|(l, r)| l.1 == r.1 && close(l.0, ratio * r.0));
        (same && ratio.is_finite()).then_some(ratio)
    }
}
