//! Text to syntax tree, with places.

use crate::unit::Unit;
use std::ops::Range;

/// Place in the text of one formula, in bytes.
pub type Span = Range<usize>;

/// A part of a formula and where it stands.
#[derive(Debug, Clone, PartialEq)]
pub struct Expression {
    /// What it is.
    pub kind: Kind,
    /// Where it stands in the formula's text.
    pub span: Span,
}

/// The kinds of expression.
#[derive(Debug, Clone, PartialEq)]
pub enum Kind {
    /// A number with its unit ("40 mm"), the plain value as written; `unit` is `None` for a pure number.
    Number {
        /// The value as written, before conversion.
        value: f64,
        /// The unit behind it.
        unit: Option<Unit>,
    },
    /// A declared name, `pi`, `inf`.
    Name(String),
    /// `-a`
    Negate(Box<Expression>),
    /// `a + b`, ...
    Binary(Operator, Box<Expression>, Box<Expression>),
    /// `a'`, `a''`: the order and what is differentiated.
    Prime(Box<Expression>, usize),
    /// `f(a, b)`: function, or a value at a point `y(0 m)`; primes between name and parenthesis
    /// (`y''(L)`) are counted in `primes`.
    Call {
        /// Name before the parenthesis.
        name: String,
        /// Where the name stands.
        name_span: Span,
        /// Primes behind the name.
        primes: usize,
        /// Arguments.
        arguments: Vec<Argument>,
    },
    /// `if(test, a, b)`
    If(Box<Test>, Box<Expression>, Box<Expression>),
}

/// An argument; `a-` and `a+` name a side of a point.
#[derive(Debug, Clone, PartialEq)]
pub struct Argument {
    /// The value.
    pub value: Expression,
    /// Side marked by a sign behind it.
    pub side: Option<Sign>,
}

/// Sign behind a point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sign {
    /// `a-`: from the left.
    Minus,
    /// `a+`: from the right.
    Plus,
}

/// Arithmetic with two operands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Operator {
    /// `+`
    Add,
    /// `-`
    Subtract,
    /// `*`
    Multiply,
    /// `/`
    Divide,
    /// `^`
    Power,
}

/// The condition of an `if`.
#[derive(Debug, Clone, PartialEq)]
pub enum Test {
    /// `a < b` and the like; a chain `b1 < x < b2` is the `And` of its links.
    Compare(Box<Expression>, Comparison, Box<Expression>),
    /// `p and q`
    And(Box<Test>, Box<Test>),
    /// `p or q`
    Or(Box<Test>, Box<Test>),
}

/// Comparison signs.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Comparison {
    /// `<`
    Less,
    /// `<=`
    LessEqual,
    /// `>`
    Greater,
    /// `>=`
    GreaterEqual,
}

/// What is wrong with a text, and where.
#[derive(Debug, Clone, PartialEq)]
pub struct SyntaxError {
    /// Where in the text.
    pub span: Span,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub hint: Option<String>,
}

/// Reads one expression: the whole text must be used.
pub fn parse(text: &str) -> Result<Expression, SyntaxError> {
    let _ = text;
    todo!()
}

/// Reads `left = right`.
pub fn parse_equation(text: &str) -> Result<(Expression, Expression), SyntaxError> {
    let _ = text;
    todo!()
}

/// Reads `expression in unit`; the split is at the last ` in ` outside brackets; no unit given: `None`.
pub fn parse_report(text: &str) -> Result<(Expression, Option<(Unit, Span)>), SyntaxError> {
    let _ = text;
    todo!()
}
