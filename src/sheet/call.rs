//! Calls: functions, values at points, numbers asked of the solution.

use super::absolute::Absolute;
use super::functional::{Functional, Kind as Asked};
use super::lower::{Lowerer, Typed};
use super::source::Located;
use crate::formula::graph::{Binary, NodeId, Unary};
use crate::formula::syntax::{Argument, Expression, Kind, Sign, Span};
use crate::model::Side;
use crate::unit::Dimension;
use std::ops::Range;

/// Names of all functions, for suggestions.
pub(super) const FUNCTIONS: [&str; 37] = [
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
    "fold",
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
    pub(super) fn call(
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
                Some(Typed { node: self.graph.unary(Unary::Sqrt, a.1.node), dimension, absolute: Absolute::NONE })
            }
            ("abs", _) => {
                let [a] = self.arguments(at, e, name, arguments)?;
                Some(Typed { node: self.graph.unary(Unary::Abs, a.1.node), ..a.1 })
            }
            // Real and imaginary part and the like where everything is real; complex eigenvalues have a way of their own.
            ("re" | "im" | "conj" | "arg", 1) if self.eigen => {
                let [a] = self.arguments(at, e, name, arguments)?;
                let zero = self.graph.number(0.0);
                let nothing = self.graph.multiply(zero, a.1.node);
                match name {
                    "im" => Some(Typed { node: nothing, ..a.1 }),
                    "arg" => {
                        let node = self.graph.binary(Binary::Atan2, nothing, a.1.node);
                        self.plain(node, Dimension::default())
                    }
                    _ => Some(a.1),
                }
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
                self.balanced(at, a, b)?;
                let absolute = a.1.absolute.either(b.1.absolute);
                Some(Typed { node, dimension, absolute })
            }
            ("min" | "max" | "argmin" | "argmax" | "integral" | "mean" | "norm" | "root" | "at" | "jump", _) => {
                self.asked(at, e, name, arguments)
            }
            ("release", _) => self.fault("release", at, &e.span, "`release` stands alone, as a condition", ""),
            ("regular", _) => self.fault("regular", at, &e.span, "`regular` stands alone, as a condition", ""),
            ("fold", _) => self.fold(at, e, name_span, arguments),
            _ => self.undefined(at, name, name_span),
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
        let message = format!("{what} cannot stand here: it is known only from the solution");
        self.fault("nonlocal", at, span, message, hint)
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
            vec![(point, at.place(&argument.value.span))],
            side,
            at.place(&e.span),
            name_span.start..name_span.end + primes,
            typed.dimension,
            at,
        ))
    }

    /// A point of the span with its side.
    pub fn point(&mut self, at: &Located, argument: &Argument) -> Option<(NodeId, Option<Side>)> {
        let point = self.lower(at, &argument.value)?;
        self.expect_place(at, &argument.value, point)?;
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
            places.push((point, at.place(&argument.value.span)));
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
        points: Vec<(NodeId, Range<usize>)>,
        side: Option<Side>,
        place: Range<usize>,
        text: Span,
        dimension: Option<Dimension>,
        at: &Located,
    ) -> Typed {
        let keeps = matches!(kind, Asked::Value | Asked::Maximum | Asked::Minimum | Asked::Mean);
        let absolute = match kind {
            Asked::Integral => expression.absolute.in_product(),
            _ if keeps => expression.absolute,
            _ => Absolute::NONE,
        };
        let text = at.text.get(text).unwrap_or("").to_owned();
        let (points, point_places) = points.into_iter().unzip();
        let functional = Functional {
            kind,
            expression: expression.node,
            points,
            point_places,
            side,
            place,
            text,
            dimension: expression.dimension,
            unit: None,
            reported: self.reporting,
        };
        let same = |f: &Functional| {
            (f.kind, f.expression, &f.points, f.side)
                == (functional.kind, functional.expression, &functional.points, functional.side)
        };
        let index = match self.functionals.iter().position(same) {
            Some(index) => {
                self.functionals[index].reported |= self.reporting;
                index
            }
            None => {
                self.functionals.push(functional);
                self.functionals.len() - 1
            }
        };
        Typed { node: self.graph.slot(index as u32), dimension, absolute }
    }
}
