//! Syntax trees to graph nodes: names, units, dimensions.
//!
//! Equations are lowered with every derivative of an expression kept ([`Graph::derivative`]), so that fluxes can be found
//! ([`super::carry`]). Conditions and reports are lowered afterwards, once more from the syntax: wherever a part of
//! them is a carried flux, or a multiple of it, the flux stands in; what is left is expanded.

use super::absolute::Absolute;
use super::call::FUNCTIONS;
use super::fault::{Faults, nearest};
use super::functional::Functional;
use super::measured::{Declaration, Taken};
use super::nature::{self, CONSTANTS, Constant};
use super::path::FoldNames;
use super::reach::Reach;
use super::reduce::Reduction;
use super::source::Located;
use crate::formula::graph::{Graph, NodeId};
use crate::formula::number::Rounded;
use crate::formula::syntax::{Expression, Kind, Span};
use crate::unit::{Dimension, Unit};
use std::cell::Cell;
use std::collections::{HashMap, HashSet};
use std::ops::Range;
use std::sync::Arc;

/// A lowered expression.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Typed {
    pub node: NodeId,
    /// `None` for a literal 0, which fits every dimension.
    pub dimension: Option<Dimension>,
    /// How many times an absolute temperature is in it.
    pub absolute: Absolute,
}

/// A formula of the sheet.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Formula {
    pub at: Located,
    pub tree: Expression,
}

/// The stretch that a datum by pieces covers, where it has no `else`.
#[derive(Debug, Clone)]
pub(super) struct Cover {
    pub name: String,
    pub ends: [f64; 2],
    /// Places of the first and the last limit.
    pub places: [Range<usize>; 2],
}

impl Cover {
    pub const HINT: &str = "fill it, or write else = \"value\"";
}

/// What a declared name stands for.
#[derive(Debug, Clone)]
pub(super) enum Meaning {
    /// A datum or a named expression.
    Formula(Formula),
    /// A datum by pieces: limits and value of each, and the rest.
    Pieces(Vec<[Formula; 3]>, Option<Formula>),
    /// Measured data.
    Measured(Arc<Declaration>),
    /// An unknown function.
    Function(u16),
    /// An unknown constant.
    Constant(u16),
    /// A datum that is held: the index of its constant, and its value as written.
    Held(u16, Formula),
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

fn unknown_count(unit: &Unit) -> Absolute {
    match unit.dimension {
        _ if unit.is_absolute() => Absolute::CELSIUS,
        Dimension::TEMPERATURE => Absolute::KELVIN,
        _ => Absolute::NONE,
    }
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
    /// Set once the orders are known.
    pub reduction: Reduction,
    /// Whether values at points may be asked.
    pub scalars: bool,
    /// Whether the report is being read.
    pub reporting: bool,
    /// Whether the sheet is an eigenproblem.
    pub eigen: bool,
    /// Limits of pieces, with their places: each must lie inside the span.
    pub limits: Vec<(NodeId, Range<usize>)>,
    /// Stretches covered by data by pieces: they must reach over the whole span.
    pub covers: Vec<Cover>,
    /// Tables made of measured data, by name; `None` where they are at fault.
    pub taken: HashMap<String, Option<Taken>>,
    /// What measured data are read at.
    pub reaches: Vec<Reach>,
    /// Constants of nature in use.
    pub nature: Vec<&'static Constant>,
    /// Whether a held datum decided about points, exponents or the like: with another value the sheet is another one.
    pub moves: Cell<bool>,
    /// What `fold(n)` stands for, where there is a path.
    pub folds: Option<FoldNames>,
    /// The constant whose value is the place where infinite ends are cut.
    pub far: Option<u16>,
    /// Names that were read as units somewhere.
    likened: HashSet<String>,
    /// Whether it has been said that the ends of the span lack their unit.
    pub misplaced: bool,
    /// Whether the graph has been found full.
    overfull: bool,
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
            reduction: Reduction::default(),
            scalars: false,
            reporting: false,
            folds: None,
            eigen: false,
            limits: Vec::new(),
            covers: Vec::new(),
            taken: HashMap::new(),
            reaches: Vec::new(),
            nature: Vec::new(),
            moves: Cell::new(false),
            far: None,
            likened: HashSet::new(),
            misplaced: false,
            overfull: false,
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

    /// Notes a warning once.
    pub fn warn(&mut self, warning: String) {
        if !self.warnings.contains(&warning) {
            self.warnings.push(warning);
        }
    }

    pub(super) fn plain(&self, node: NodeId, dimension: Dimension) -> Option<Typed> {
        Some(Typed { node, dimension: Some(dimension), absolute: Absolute::NONE })
    }

    /// The value of a node that depends on nothing, to decide something by.
    pub fn number_of(&self, node: NodeId) -> Option<f64> {
        if self.graph.depends_on(node).held {
            self.moves.set(true);
        }
        self.shown_number(node)
    }

    /// The same where nothing is decided by it.
    pub fn shown_number(&self, node: NodeId) -> Option<f64> {
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
            let message = "the formulas of this sheet grow too large when expanded";
            // Once: from here on everything does.
            return if std::mem::replace(&mut self.overfull, true) {
                None
            } else {
                self.fault("too large", at, &e.span, message, "")
            };
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
        // What equations could not hold is no flux of theirs; it has been noted as a fault all the same.
        let Some(written) = written.filter(|_| self.faults.len() == faults) else { return typed };
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
                Some(Typed { node: self.graph.negate(a.node), absolute: a.absolute.times(-1.0), ..a })
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
                self.balanced(at, (a, then), (b, otherwise))?;
                let absolute = then.absolute.either(otherwise.absolute);
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
            return Some(Typed { node, dimension, absolute: Absolute::NONE });
        };
        for symbol in unit.text.split(|c: char| !c.is_alphabetic()).filter(|s| !s.is_empty()) {
            // Once for each name, however many values are written in that unit.
            if self.meanings.contains_key(symbol) && self.likened.insert(symbol.to_owned()) {
                let text = at.text.get(e.span.clone()).unwrap_or("");
                let warning = format!("`{text}`: {symbol} is read as the unit, not as the name `{symbol}`");
                self.warn(warning);
            }
        }
        let node = self.graph.quantity(value, unit);
        let absolute = match unit.dimension {
            _ if unit.is_absolute() => Absolute::CELSIUS,
            Dimension::TEMPERATURE => Absolute::DATUM,
            _ => Absolute::NONE,
        };
        Some(Typed { node, dimension: Some(unit.dimension), absolute })
    }

    /// What a declared name stands for, `None` if it is at fault.
    pub fn named(&mut self, name: &str) -> Option<Typed> {
        let nowhere = Located::default();
        self.name(&nowhere, name, &(0..0))
    }

    /// A name, lowered once for the equations and once for the rest.
    fn name(&mut self, at: &Located, name: &str, span: &Span) -> Option<Typed> {
        let Some(meaning) = self.meanings.get(name).cloned() else {
            if name == "pi" {
                let node = self.graph.number_within(std::f64::consts::PI, 1.3e-16);
                return self.plain(node, Dimension::default());
            }
            if name == "inf" {
                let Some(far) = self.far else {
                    let hint = "write it as an end of the span first: x = [\"0 m\", \"inf\"]";
                    return self.fault(
                        "infinite",
                        at,
                        span,
                        "`inf` stands for an infinite end, and this span has none",
                        hint,
                    );
                };
                let node = self.graph.constant(far);
                return Some(Typed { node, dimension: None, absolute: Absolute::NONE });
            }
            if name.eq_ignore_ascii_case("nan") {
                return self.fault("not finite", at, span, "nan is not a number to calculate with", "");
            }
            if let Some(constant) = nature::named(name)
                && let Some((unit, value)) = constant.quantity()
            {
                if !self.nature.contains(&constant) {
                    self.nature.push(constant);
                }
                let node = self.graph.number_within(value.value, value.error);
                return self.plain(node, unit.dimension);
            }
            return self.undefined(at, name, span);
        };
        match meaning {
            Meaning::Faulty => None,
            Meaning::Coordinate => {
                let node = self.graph.coordinate();
                // Of a coordinate that is a temperature it is not known how its values are meant.
                let temperature = self.coordinate_dimension == Some(Dimension::TEMPERATURE);
                let absolute = if temperature { Absolute::UNCLEAR } else { Absolute::NONE };
                Some(Typed { node, dimension: self.coordinate_dimension, absolute })
            }
            Meaning::Function(index) => {
                let unit = &self.functions[usize::from(index)].unit;
                let (dimension, absolute) = (unit.dimension, unknown_count(unit));
                Some(Typed { node: self.graph.jet(index, 0), dimension: Some(dimension), absolute })
            }
            Meaning::Constant(index) => {
                let unit = &self.constants[usize::from(index)].unit;
                let (dimension, absolute) = (unit.dimension, unknown_count(unit));
                Some(Typed { node: self.graph.constant(index), dimension: Some(dimension), absolute })
            }
            meaning @ (Meaning::Formula(_) | Meaning::Pieces(..) | Meaning::Measured(_) | Meaning::Held(..)) => {
                self.defined(at, name, span, &meaning)
            }
        }
    }

    /// A held datum as the constant that it is.
    fn hold(&mut self, name: &str, constant: u16, formula: &Formula) -> Option<Typed> {
        let Formula { at, tree } = formula;
        let typed = self.lower(at, tree)?;
        let Some(value) = self.shown_number(typed.node) else {
            let message = format!("`{name}` is no plain datum: it varies along the span or holds unknowns");
            return self.fault("held", at, &tree.span, message, "what is to be changed must be one number");
        };
        let rounded = self.graph.rounded(typed.node).unwrap_or_else(|| Rounded::exact(value));
        self.graph.set_held(constant, rounded);
        Some(Typed { node: self.graph.constant(constant), ..typed })
    }

    /// Notes a name that is not defined, once however often it is used.
    pub(super) fn undefined<T>(&mut self, at: &Located, name: &str, span: &Span) -> Option<T> {
        if self.faults.is_full() {
            return self.fault("unknown name", at, span, format!("`{name}` is not defined"), "");
        }
        let sound = self.meanings.iter().filter(|(_, meaning)| !matches!(meaning, Meaning::Faulty));
        let known = sound.map(|(name, _)| name.as_str()).chain(FUNCTIONS.iter().copied());
        let known = known.chain(CONSTANTS.iter().map(|c| c.name));
        let near = nearest(name, known).map(|k| format!("did you mean `{k}`?"));
        let unit = || {
            let unit = Unit::parse(name, false).ok()?;
            let unit = unit.text;
            let behind = at.text.get(..span.start).is_some_and(|before| before.trim_end().ends_with('*'));
            Some(match behind {
                true => format!("as a unit it belongs behind a number: `12 kN {unit}` or `12 [kN*{unit}]`"),
                false => format!("as a unit it belongs behind a number: `12 {unit}`"),
            })
        };
        let hint = near.or_else(unit).unwrap_or_default();
        self.meanings.insert(name.to_owned(), Meaning::Faulty);
        self.fault("unknown name", at, span, format!("`{name}` is not defined"), &hint)
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
            // What was at fault in the equations is not tried again.
            None if matches!(self.states[0].get(name), Some(State::Done(None))) => return None,
            None => {}
        }
        if self.stack.len() >= 200 {
            return self.fault("too deep", at, span, "names are defined by way of more than 200 others", "");
        }
        self.states[phase].insert(name.to_owned(), State::Busy);
        self.stack.push(name.to_owned());
        let typed = match meaning {
            Meaning::Formula(formula) => self.lower(&formula.at, &formula.tree),
            Meaning::Held(constant, formula) => self.hold(name, *constant, formula),
            Meaning::Pieces(pieces, otherwise) => self.pieces(name, pieces, otherwise.as_ref()),
            Meaning::Measured(declared) => self.measured(name, declared),
            _ => None,
        };
        self.stack.pop();
        self.states[phase].insert(name.to_owned(), State::Done(typed));
        typed
    }
}
