//! Syntax trees to graph nodes: names, units, dimensions.
//!
//! Equations are lowered with every derivative of an expression kept ([`Graph::derivative`]), so that fluxes can be found
//! ([`super::carry`]). Conditions and reports are lowered afterwards, once more from the syntax: wherever a part of
//! them is a carried flux, or a multiple of it, the flux stands in; what is left is expanded.

use super::fault::{Faults, nearest};
use super::functional::{Functional, Kind as Asked};
use super::source::Located;
use crate::formula::graph::{Binary, Graph, NodeId, Unary};
use crate::formula::syntax::{Argument, Comparison, Expression, Kind, Operator, Sign, Span, Test};
use crate::model::Side;
use crate::unit::{Dimension, Unit};
use std::collections::HashMap;
use std::ops::Range;

/// A lowered expression.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Typed {
    pub node: NodeId,
    /// `None` for a literal 0, which fits every dimension.
    pub dimension: Option<Dimension>,
    /// How many times an absolute temperature is in it: 1 for a temperature, 0 for a difference; not a number
    /// where that cannot be said.
    pub absolute: f64,
}

/// A formula of the sheet.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Formula {
    pub at: Located,
    pub tree: Expression,
}

/// What a declared name stands for.
#[derive(Debug, Clone)]
pub(super) enum Meaning {
    /// A datum or a named expression.
    Formula(Formula),
    /// A datum by pieces: limits and value of each, and the rest.
    Pieces(Vec<[Formula; 3]>, Option<Formula>),
    /// An unknown function.
    Function(u16),
    /// An unknown constant.
    Constant(u16),
    Coordinate,
    /// Declared, but a fault was already noted there.
    Faulty,
}

/// An unknown of the sheet.
#[derive(Debug, Clone)]
pub(super) struct Unknown {
    pub name: String,
    pub unit: Unit,
}

/// A flux that the solver carries.
#[derive(Debug, Clone, Copy)]
pub(super) struct Carried {
    /// What was written inside the derivative.
    pub written: NodeId,
    /// The carried unknown.
    pub unknown: u16,
}

#[derive(Debug, Clone, Copy)]
enum State {
    Busy,
    Done(Option<Typed>),
}

/// Everything that lowering needs and makes.
pub(super) struct Lowerer<'f> {
    pub graph: Graph,
    pub faults: &'f mut Faults,
    pub warnings: Vec<String>,
    pub meanings: HashMap<String, Meaning>,
    pub functions: Vec<Unknown>,
    pub constants: Vec<Unknown>,
    pub coordinate: String,
    pub coordinate_dimension: Option<Dimension>,
    pub functionals: Vec<Functional>,
    /// Set once the equations are done: what conditions and reports recognise.
    pub carried: Vec<Carried>,
    /// Whether values at points may be asked.
    pub scalars: bool,
    /// Limits of pieces, with their places: each must lie inside the span.
    pub limits: Vec<(NodeId, Range<usize>)>,
    states: [HashMap<String, State>; 2],
    stack: Vec<String>,
}

impl<'f> Lowerer<'f> {
    pub fn new(faults: &'f mut Faults) -> Self {
        Self {
            graph: Graph::default(),
            faults,
            warnings: Vec::new(),
            meanings: HashMap::new(),
            functions: Vec::new(),
            constants: Vec::new(),
            coordinate: String::new(),
            coordinate_dimension: None,
            functionals: Vec::new(),
            carried: Vec::new(),
            scalars: false,
            limits: Vec::new(),
            states: [HashMap::new(), HashMap::new()],
            stack: Vec::new(),
        }
    }

    /// Notes a fault at a part of a formula; always `None`.
    pub fn fault<T>(
        &mut self,
        code: &'static str,
        at: &Located,
        span: &Span,
        message: impl Into<String>,
        hint: &str,
    ) -> Option<T> {
        let hint = (!hint.is_empty()).then(|| hint.to_owned());
        self.faults.add(code, at.place(span), message, hint);
        None
    }

    fn plain(&self, node: NodeId, dimension: Dimension) -> Option<Typed> {
        Some(Typed { node, dimension: Some(dimension), absolute: 0.0 })
    }

    /// The value of a node that depends on nothing.
    pub fn number_of(&self, node: NodeId) -> Option<f64> {
        let free = self.graph.depends_on(node);
        if free.varies() || free.unknowns() || self.graph.has_derivative(node) {
            return None;
        }
        let here = crate::formula::graph::Inputs::at(f64::NAN);
        Some(self.graph.evaluate::<f64>(node, &here))
    }

    /// Lowers an expression.
    pub fn lower(&mut self, at: &Located, e: &Expression) -> Option<Typed> {
        let typed = self.lower_parts(at, e)?;
        if self.graph.is_full() {
            return self.fault("too large", at, &e.span, "the formulas of this sheet grow too large when expanded", "");
        }
        if self.scalars && !self.carried.is_empty() && !matches!(e.kind, Kind::Name(_)) {
            return Some(self.recognise(at, e, typed));
        }
        Some(typed)
    }

    /// The carried flux in place of what was written for it.
    fn recognise(&mut self, at: &Located, e: &Expression, typed: Typed) -> Typed {
        let depends = self.graph.depends_on(typed.node);
        if !depends.jets || depends.slots {
            return typed;
        }
        // What the equations would have made of this text.
        self.scalars = false;
        let faults = self.faults.len();
        let written = self.lower_parts(at, e);
        self.scalars = true;
        debug_assert_eq!(faults, self.faults.len());
        let Some(written) = written else { return typed };
        for k in 0..self.carried.len() {
            let Carried { written: flux, unknown } = self.carried[k];
            if let Some(ratio) = self.graph.ratio(written.node, flux) {
                let jet = self.graph.jet(unknown, 0);
                let factor = self.graph.number_within(ratio, 2.0 * f64::EPSILON * ratio.abs());
                let factor = if ratio == 1.0 || ratio == -1.0 { self.graph.number(ratio) } else { factor };
                return Typed { node: self.graph.multiply(factor, jet), ..typed };
            }
        }
        typed
    }

    fn lower_parts(&mut self, at: &Located, e: &Expression) -> Option<Typed> {
        match &e.kind {
            Kind::Number { value, unit, .. } => self.number(at, e, *value, unit.as_ref()),
            Kind::Name(name) => self.name(at, name, &e.span),
            Kind::Negate(a) => {
                let a = self.lower(at, a)?;
                Some(Typed { node: self.graph.negate(a.node), absolute: -a.absolute, ..a })
            }
            Kind::Binary(operator, a, b) => self.binary(at, e, *operator, a, b),
            Kind::Prime(a, order) => {
                let a = self.lower(at, a)?;
                self.primed(at, &e.span, a, *order)
            }
            Kind::If(test, a, b) => {
                let (then, otherwise) = (self.lower(at, a), self.lower(at, b));
                let (then, otherwise) = (then?, otherwise?);
                let dimension = self.same(at, e, (a, then), (b, otherwise))?;
                let node = self.choose(at, test, then.node, otherwise.node)?;
                let absolute = if then.absolute == otherwise.absolute { then.absolute } else { f64::NAN };
                Some(Typed { node, dimension, absolute })
            }
            Kind::Call { name, name_span, primes, arguments } => self.call(at, e, name, name_span, *primes, arguments),
        }
    }

    fn number(&mut self, at: &Located, e: &Expression, value: f64, unit: Option<&Unit>) -> Option<Typed> {
        if !value.is_finite() {
            return self.fault("not finite", at, &e.span, "this number is too large to calculate with", "");
        }
        let Some(unit) = unit else {
            let node = self.graph.number(value);
            let dimension = (value != 0.0).then(Dimension::default);
            return Some(Typed { node, dimension, absolute: 0.0 });
        };
        for symbol in unit.text.split(|c: char| !c.is_alphabetic()).filter(|s| !s.is_empty()) {
            if self.meanings.contains_key(symbol) {
                let text = at.text.get(e.span.clone()).unwrap_or("");
                let warning = format!("`{text}`: {symbol} is read as the unit, not as the name `{symbol}`");
                if !self.warnings.contains(&warning) {
                    self.warnings.push(warning);
                }
            }
        }
        let node = self.graph.quantity(value, unit);
        Some(Typed { node, dimension: Some(unit.dimension), absolute: f64::from(u8::from(unit.is_absolute())) })
    }

    /// A name, lowered once for the equations and once for the rest.
    fn name(&mut self, at: &Located, name: &str, span: &Span) -> Option<Typed> {
        let Some(meaning) = self.meanings.get(name).cloned() else {
            if name == "pi" {
                let node = self.graph.number_within(std::f64::consts::PI, 1.3e-16);
                return self.plain(node, Dimension::default());
            }
            if name == "inf" {
                return self.fault("not yet", at, span, "`inf`: infinite spans are not part of this version", "");
            }
            let known = self.meanings.keys().map(String::as_str).chain(FUNCTIONS.iter().copied());
            let hint = nearest(name, known).map(|k| format!("did you mean `{k}`?")).unwrap_or_default();
            return self.fault("unknown name", at, span, format!("`{name}` is not defined"), &hint);
        };
        match meaning {
            Meaning::Faulty => None,
            Meaning::Coordinate => {
                let node = self.graph.coordinate();
                Some(Typed { node, dimension: Some(self.coordinate_dimension?), absolute: 0.0 })
            }
            Meaning::Function(index) => {
                let unit = &self.functions[usize::from(index)].unit;
                let (dimension, absolute) = (unit.dimension, f64::from(u8::from(unit.is_absolute())));
                Some(Typed { node: self.graph.jet(index, 0), dimension: Some(dimension), absolute })
            }
            Meaning::Constant(index) => {
                let unit = &self.constants[usize::from(index)].unit;
                let (dimension, absolute) = (unit.dimension, f64::from(u8::from(unit.is_absolute())));
                Some(Typed { node: self.graph.constant(index), dimension: Some(dimension), absolute })
            }
            meaning @ (Meaning::Formula(_) | Meaning::Pieces(..)) => self.defined(at, name, span, &meaning),
        }
    }

    fn defined(&mut self, at: &Located, name: &str, span: &Span, meaning: &Meaning) -> Option<Typed> {
        let phase = usize::from(self.scalars);
        match self.states[phase].get(name) {
            Some(State::Done(typed)) => return *typed,
            Some(State::Busy) => {
                let start = self.stack.iter().position(|n| n == name).unwrap_or(0);
                let circle = self.stack[start..].iter().map(|n| format!("`{n}`")).collect::<Vec<_>>();
                let message = format!("{} is defined by way of itself: {} -> `{name}`", circle[0], circle.join(" -> "));
                return self.fault("cyclic names", at, span, message, "");
            }
            None => {}
        }
        if self.stack.len() >= 200 {
            return self.fault("too deep", at, span, "names are defined by way of more than 200 others", "");
        }
        self.states[phase].insert(name.to_owned(), State::Busy);
        self.stack.push(name.to_owned());
        let typed = match meaning {
            Meaning::Formula(formula) => self.lower(&formula.at, &formula.tree),
            Meaning::Pieces(pieces, otherwise) => self.pieces(name, pieces, otherwise.as_ref()),
            _ => None,
        };
        self.stack.pop();
        self.states[phase].insert(name.to_owned(), State::Done(typed));
        typed
    }

    /// Values by stretches of the span as nested choices on the coordinate.
    fn pieces(&mut self, name: &str, pieces: &[[Formula; 3]], otherwise: Option<&Formula>) -> Option<Typed> {
        let coordinate = self.graph.coordinate();
        let rest = otherwise.map(|f| self.lower(&f.at, &f.tree));
        let mut parts = Vec::new();
        for [from, to, value] in pieces {
            let limits = [from, to].map(|f| {
                let limit = self.lower(&f.at, &f.tree)?;
                self.expect(&f.at, &f.tree, limit, self.coordinate_dimension)?;
                match self.number_of(limit.node) {
                    Some(x) => {
                        let place = f.at.place(&f.tree.span);
                        self.limits.push((limit.node, place));
                        Some((limit.node, x))
                    }
                    None => self.fault("piece", &f.at, &f.tree.span, "a limit of a piece must be a datum", ""),
                }
            });
            let value = self.lower(&value.at, &value.tree).map(|t| (value, t));
            parts.push((limits, value, from));
        }
        let mut sorted: Vec<(f64, f64, &Formula)> = Vec::new();
        for (limits, _, from) in &parts {
            if let [Some((_, a)), Some((_, b))] = limits {
                if a >= b {
                    let message = format!("a piece of `{name}` runs backwards");
                    self.faults.add(
                        "piece",
                        from.at.span.clone(),
                        message,
                        Some("write the smaller limit first".into()),
                    );
                }
                sorted.push((*a, *b, *from));
            }
        }
        sorted.sort_by(|p, q| p.0.total_cmp(&q.0));
        for pair in sorted.windows(2) {
            let ((_, end, _), (start, _, from)) = (pair[0], pair[1]);
            let small = 1e-12 * (end.abs() + start.abs());
            if start < end - small {
                let message = format!("pieces of `{name}` overlap");
                self.faults.add(
                    "piece",
                    from.at.span.clone(),
                    message,
                    Some("each place may lie in one piece only".into()),
                );
            } else if start > end + small && otherwise.is_none() {
                let message = format!("`{name}` has a gap between two pieces");
                self.faults.add(
                    "piece",
                    from.at.span.clone(),
                    message,
                    Some("fill it, or write else = \"value\"".into()),
                );
            }
        }
        let mut dimension: Option<Option<Dimension>> = None;
        let mut first: Option<(&Formula, Typed)> = None;
        if let (Some(formula), Some(rest)) = (otherwise, rest) {
            let rest = rest?;
            first = Some((formula, rest));
            dimension = Some(rest.dimension);
        }
        let mut absolute = first.map(|(_, t)| t.absolute);
        let mut node = first.map(|(_, t)| t.node);
        for (limits, value, _) in parts.into_iter().rev() {
            let [Some((a, _)), Some((b, _))] = limits else { return None };
            let (formula, value) = value?;
            dimension = Some(match (dimension.flatten(), value.dimension) {
                (Some(d), Some(own)) if d != own => {
                    let hint = first.map(|(f, _)| format!("the others are like `{}`", f.at.text)).unwrap_or_default();
                    let message =
                        format!("this piece of `{name}` is {} but another is {}", own.describe(), d.describe());
                    return self.fault("dimension", &formula.at, &formula.tree.span, message, &hint);
                }
                (d, own) => d.or(own),
            });
            first = first.or(Some((formula, value)));
            if absolute.is_some_and(|a| a != value.absolute) {
                absolute = Some(f64::NAN);
            }
            absolute = absolute.or(Some(value.absolute));
            node = Some(match node {
                // The last piece of a gapless list holds everywhere: its limits are checked, not tested.
                None => value.node,
                Some(rest) => {
                    let (below, above) = (self.graph.subtract(coordinate, a), self.graph.subtract(coordinate, b));
                    let inside = self.graph.choose(above, true, value.node, rest);
                    self.graph.choose(below, true, rest, inside)
                }
            });
        }
        Some(Typed { node: node?, dimension: dimension?, absolute: absolute? })
    }

    /// The common dimension of two parts, or a fault that names both.
    fn same(
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

    fn binary(
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

    fn product(
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

    fn power(
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
    fn primed(&mut self, at: &Located, span: &Span, a: Typed, order: usize) -> Option<Typed> {
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

    fn choose(&mut self, at: &Located, test: &Test, then: NodeId, otherwise: NodeId) -> Option<NodeId> {
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

/// Names of all functions, for suggestions.
pub(super) const FUNCTIONS: [&str; 36] = [
    "sqrt",
    "exp",
    "ln",
    "log10",
    "sin",
    "cos",
    "tan",
    "asin",
    "acos",
    "atan",
    "atan2",
    "sinh",
    "cosh",
    "tanh",
    "asinh",
    "acosh",
    "atanh",
    "abs",
    "sign",
    "min",
    "max",
    "erf",
    "erfc",
    "signed_power",
    "argmax",
    "argmin",
    "integral",
    "mean",
    "norm",
    "root",
    "at",
    "jump",
    "release",
    "if",
    "pi",
    "inf",
];

/// Functions of one pure number.
pub(super) fn pure_function(name: &str) -> Option<Unary> {
    Some(match name {
        "exp" => Unary::Exp,
        "ln" => Unary::Ln,
        "log10" => Unary::Log10,
        "sin" => Unary::Sin,
        "cos" => Unary::Cos,
        "tan" => Unary::Tan,
        "asin" => Unary::Asin,
        "acos" => Unary::Acos,
        "atan" => Unary::Atan,
        "sinh" => Unary::Sinh,
        "cosh" => Unary::Cosh,
        "tanh" => Unary::Tanh,
        "asinh" => Unary::Asinh,
        "acosh" => Unary::Acosh,
        "atanh" => Unary::Atanh,
        "erf" => Unary::Erf,
        "erfc" => Unary::Erfc,
        _ => return None,
    })
}

impl Lowerer<'_> {
    fn call(
        &mut self,
        at: &Located,
        e: &Expression,
        name: &str,
        name_span: &Span,
        primes: usize,
        arguments: &[Argument],
    ) -> Option<Typed> {
        if self.meanings.contains_key(name) {
            return self.value(at, e, name, name_span, primes, arguments);
        }
        if primes > 0 && FUNCTIONS.contains(&name) {
            return self.fault(
                "derivative",
                at,
                name_span,
                format!("`{name}` is a function"),
                "write (expression)' for a derivative",
            );
        }
        if let Some(function) = pure_function(name) {
            let [a] = self.arguments(at, e, name, arguments)?;
            self.expect(at, a.0, a.1, Some(Dimension::default()))?;
            let node = self.graph.unary(function, a.1.node);
            return self.plain(node, Dimension::default());
        }
        match (name, arguments.len()) {
            ("sqrt", _) => {
                let [a] = self.arguments(at, e, name, arguments)?;
                let dimension = match a.1.dimension.map(|d| d.powr(1, 2)) {
                    Some(Err(_)) => {
                        return self.fault("dimension", at, &e.span, "this root of a unit cannot be kept", "");
                    }
                    Some(Ok(dimension)) => Some(dimension),
                    None => None,
                };
                Some(Typed { node: self.graph.unary(Unary::Sqrt, a.1.node), dimension, absolute: 0.0 })
            }
            ("abs", _) => {
                let [a] = self.arguments(at, e, name, arguments)?;
                Some(Typed { node: self.graph.unary(Unary::Abs, a.1.node), ..a.1 })
            }
            ("sign", _) => {
                let [a] = self.arguments(at, e, name, arguments)?;
                let node = self.graph.unary(Unary::Sign, a.1.node);
                self.plain(node, Dimension::default())
            }
            ("signed_power", _) => {
                let [a, n] = self.arguments(at, e, name, arguments)?;
                let powered = self.power(at, e, a, n)?;
                Some(Typed { node: self.graph.binary(Binary::SignedPower, a.1.node, n.1.node), ..powered })
            }
            ("atan2", _) => {
                let [a, b] = self.arguments(at, e, name, arguments)?;
                self.same(at, e, a, b)?;
                let node = self.graph.binary(Binary::Atan2, a.1.node, b.1.node);
                self.plain(node, Dimension::default())
            }
            // Of two plain values; of one, or with the ends of a stretch, the extreme along the span.
            ("min" | "max", 2) => {
                let [a, b] = self.arguments(at, e, name, arguments)?;
                let dimension = self.same(at, e, a, b)?;
                let function = if name == "min" { Binary::Min } else { Binary::Max };
                let node = self.graph.binary(function, a.1.node, b.1.node);
                let absolute = if a.1.absolute == b.1.absolute { a.1.absolute } else { f64::NAN };
                Some(Typed { node, dimension, absolute })
            }
            ("min" | "max" | "argmin" | "argmax" | "integral" | "mean" | "norm" | "root" | "at" | "jump", _) => {
                self.asked(at, e, name, arguments)
            }
            ("release", _) => self.fault("release", at, &e.span, "`release` stands alone, as a condition", ""),
            ("regular", _) => {
                self.fault("not yet", at, name_span, "`regular`: singular ends are not part of this version", "")
            }
            ("fold", _) => self.fault("not yet", at, name_span, "`fold`: paths are not part of this version", ""),
            _ => {
                let known = self.meanings.keys().map(String::as_str).chain(FUNCTIONS.iter().copied());
                let hint = nearest(name, known).map(|k| format!("did you mean `{k}`?")).unwrap_or_default();
                self.fault("unknown name", at, name_span, format!("`{name}` is not defined"), &hint)
            }
        }
    }

    /// A fixed number of plain arguments.
    fn arguments<'e, const N: usize>(
        &mut self,
        at: &Located,
        e: &Expression,
        name: &str,
        arguments: &'e [Argument],
    ) -> Option<[(&'e Expression, Typed); N]> {
        if arguments.len() != N {
            let s = if N == 1 { "" } else { "s" };
            let message = format!("`{name}` takes {N} argument{s}, {} given", arguments.len());
            return self.fault("arguments", at, &e.span, message, "");
        }
        let mut lowered = Vec::with_capacity(N);
        for argument in arguments {
            if argument.side.is_some() {
                return self.fault("arguments", at, &argument.value.span, "a side (- or +) belongs to a point", "");
            }
            lowered.push(self.lower(at, &argument.value).map(|t| (&argument.value, t)));
        }
        let lowered: Option<Vec<_>> = lowered.into_iter().collect();
        lowered?.try_into().ok()
    }

    /// Refuses in equations what is known only from the solution.
    fn only_asked(&mut self, at: &Located, span: &Span, what: &str) -> Option<()> {
        if self.scalars {
            return Some(());
        }
        let hint = "make it an unknown constant (constant = true) and give its value in a condition";
        self.fault("nonlocal", at, span, format!("{what} cannot stand in an equation"), hint)
    }

    /// `name''(point)`
    fn value(
        &mut self,
        at: &Located,
        e: &Expression,
        name: &str,
        name_span: &Span,
        primes: usize,
        arguments: &[Argument],
    ) -> Option<Typed> {
        self.only_asked(at, &e.span, "a value at a point")?;
        let named = Expression { kind: Kind::Name(name.to_owned()), span: name_span.clone() };
        let expression = if primes > 0 {
            Expression { kind: Kind::Prime(Box::new(named), primes), span: name_span.clone() }
        } else {
            named
        };
        let typed = self.lower(at, &expression);
        let [argument] = arguments else {
            return self.fault("arguments", at, &e.span, format!("`{name}` is taken at one point: {name}(0 m)"), "");
        };
        let point = self.point(at, argument);
        let (typed, (point, side)) = (typed?, point?);
        Some(self.functional(
            Asked::Value,
            typed,
            vec![point],
            side,
            at.place(&e.span),
            name_span.clone(),
            typed.dimension,
            at,
        ))
    }

    /// A point of the span with its side.
    pub fn point(&mut self, at: &Located, argument: &Argument) -> Option<(NodeId, Option<Side>)> {
        let point = self.lower(at, &argument.value)?;
        self.expect(at, &argument.value, point, self.coordinate_dimension)?;
        self.scalar(at, &argument.value, point)?;
        let side = argument.side.map(|s| if s == Sign::Minus { Side::Left } else { Side::Right });
        Some((point.node, side))
    }

    /// Refuses an expression that varies along the span.
    pub fn scalar(&mut self, at: &Located, e: &Expression, typed: Typed) -> Option<()> {
        if !self.graph.depends_on(typed.node).varies() {
            return Some(());
        }
        let bare = self.bare_part(at, e);
        let text = at.text.get(bare.span.clone()).unwrap_or("").trim().to_owned();
        let hint = format!("write its value at a point: {text}(...)");
        self.fault("varies", at, &bare.span, format!("`{text}` varies along the span"), &hint)
    }

    /// The smallest part of an expression that varies.
    fn bare_part<'e>(&mut self, at: &Located, e: &'e Expression) -> &'e Expression {
        let parts: Vec<&Expression> = match &e.kind {
            Kind::Negate(a) => vec![a],
            Kind::Binary(_, a, b) => vec![a, b],
            Kind::If(_, a, b) => vec![a, b],
            Kind::Call { arguments, .. } => arguments.iter().map(|a| &a.value).collect(),
            Kind::Number { .. } | Kind::Name(_) | Kind::Prime(..) => Vec::new(),
        };
        for part in parts {
            let varies = self.lower(at, part).is_some_and(|t| self.graph.depends_on(t.node).varies());
            if varies {
                return self.bare_part(at, part);
            }
        }
        e
    }

    /// max, argmax, integral, ... along the span, `at` and `jump`.
    fn asked(&mut self, at: &Located, e: &Expression, name: &str, arguments: &[Argument]) -> Option<Typed> {
        self.only_asked(at, &e.span, &format!("`{name}`"))?;
        let Some((first, rest)) = arguments.split_first() else {
            return self.fault("arguments", at, &e.span, format!("`{name}` needs an expression"), "");
        };
        let typed = self.lower(at, &first.value);
        let stretch = |counts: &[usize]| counts.contains(&rest.len());
        let fits = match name {
            "at" | "jump" => stretch(&[1]),
            "root" => stretch(&[1, 3]),
            _ => stretch(&[0, 2]),
        };
        if !fits {
            let form = match name {
                "at" => "at(expression, point)",
                "jump" => "jump(expression, point)",
                "root" => "root(expression, n) or root(expression, n, from, to)",
                _ => "of an expression, or of an expression from one point to another",
            };
            return self.fault(
                "arguments",
                at,
                &e.span,
                format!("`{name}` is not written with {} arguments", arguments.len()),
                form,
            );
        }
        let typed = typed?;
        let mut kind = match name {
            "max" => Asked::Maximum,
            "min" => Asked::Minimum,
            "argmax" => Asked::PlaceOfMaximum,
            "argmin" => Asked::PlaceOfMinimum,
            "integral" => Asked::Integral,
            "mean" => Asked::Mean,
            "norm" => Asked::Norm,
            "jump" => Asked::Jump,
            _ => Asked::Value,
        };
        let mut points = rest;
        if name == "root" {
            let n = self.lower(at, &rest[0].value)?;
            let count = self.number_of(n.node).filter(|n| *n >= 1.0 && n.fract() == 0.0 && *n < 1e6);
            let Some(count) = count else {
                return self.fault("arguments", at, &rest[0].value.span, "roots are counted 1, 2, 3, ...", "");
            };
            kind = Asked::Root(count as usize);
            points = &rest[1..];
        }
        let mut places = Vec::new();
        let mut side = None;
        for argument in points {
            let (point, own) = self.point(at, argument)?;
            places.push(point);
            side = side.or(own);
        }
        let x = self.coordinate_dimension;
        let dimension = match kind {
            Asked::PlaceOfMaximum | Asked::PlaceOfMinimum | Asked::Root(_) => x,
            Asked::Integral => self.product(at, e, typed.dimension, x, false)?,
            Asked::Norm => match (typed.dimension, x) {
                (Some(d), Some(x)) => Some(d.powi(2).and_then(|d| d.mul(x)).and_then(|d| d.powr(1, 2)).ok()?),
                _ => None,
            },
            _ => typed.dimension,
        };
        Some(self.functional(kind, typed, places, side, at.place(&e.span), first.value.span.clone(), dimension, at))
    }

    #[allow(clippy::too_many_arguments)]
    fn functional(
        &mut self,
        kind: Asked,
        expression: Typed,
        points: Vec<NodeId>,
        side: Option<Side>,
        place: Range<usize>,
        text: Span,
        dimension: Option<Dimension>,
        at: &Located,
    ) -> Typed {
        let keeps = matches!(kind, Asked::Value | Asked::Maximum | Asked::Minimum | Asked::Mean);
        let absolute = if keeps { expression.absolute } else { 0.0 };
        let text = at.text.get(text).unwrap_or("").to_owned();
        let functional = Functional { kind, expression: expression.node, points, side, place, text };
        let same = |f: &Functional| {
            (f.kind, f.expression, &f.points, f.side)
                == (functional.kind, functional.expression, &functional.points, functional.side)
        };
        let index = self.functionals.iter().position(same).unwrap_or_else(|| {
            self.functionals.push(functional);
            self.functionals.len() - 1
        });
        Typed { node: self.graph.slot(index as u32), dimension, absolute }
    }
}
