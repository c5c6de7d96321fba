//! Text to syntax tree, with places.
//!
//! From weakest to strongest: `+ -`, `* /`, unary minus, `^` (from the right: a^b^c is a^(b^c)), primes. So -x^2
//! is -(x^2) and 2^-x*y is (2^(-x))*y.

/// Text to tokens.
mod lexer;
/// Tokens to trees.
mod parser;
/// Trees to text.
mod print;

use crate::unit::{Unit, UnitError};
use parser::Parser;
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
    /// The minus of `-5 degC` belongs to the number; that of `-5 m` is a [`Kind::Negate`].
    Number {
        /// The value as written, before conversion.
        value: f64,
        /// The unit behind it.
        unit: Option<Unit>,
        /// Where the unit stands (without the brackets of `[kN*m]`).
        unit_span: Option<Span>,
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
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("{message}")]
pub struct SyntaxError {
    /// Where in the text.
    pub span: Span,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub hint: Option<String>,
}

impl SyntaxError {
    fn new(span: Span, message: impl Into<String>, hint: Option<&str>) -> Self {
        Self { span, message: message.into(), hint: hint.map(Into::into) }
    }

    /// An error of a unit that begins at byte `start` of the formula.
    fn in_unit(start: usize, error: UnitError) -> Self {
        Self { span: start + error.span.start..start + error.span.end, message: error.message, hint: error.hint }
    }
}

/// Longest formula read, in bytes.
pub const LONGEST: usize = 1 << 20;

/// Most brackets, signs and powers within each other.
pub const DEEPEST: usize = 200;

/// Deepest tree: a sum of as many terms is this deep too. Whoever walks a tree by recursion may rely on it.
pub const DEEPEST_TREE: usize = 500;

/// Reads one expression: the whole text must be used.
///
/// # Errors
/// [`SyntaxError`] at the first place that does not fit.
///
/// ```
/// use spanwise::formula::syntax::parse;
/// assert_eq!(parse("12 kN/m*x - -x^2")?.to_string(), "12 kN/m * x - -x^2");
/// assert_eq!(parse("2x").unwrap_err().hint.as_deref(), Some("write 2*x"));
/// # Ok::<(), spanwise::formula::syntax::SyntaxError>(())
/// ```
pub fn parse(text: &str) -> Result<Expression, SyntaxError> {
    Parser::new(text)?.formula()
}

/// Reads `left = right`.
///
/// # Errors
/// [`SyntaxError`] as for [`parse`], and where there is not exactly one `=`.
pub fn parse_equation(text: &str) -> Result<(Expression, Expression), SyntaxError> {
    Parser::new(text)?.equation()
}

/// Reads `expression in unit`; the split is at the last ` in ` outside brackets; no unit given: `None`.
///
/// # Errors
/// [`SyntaxError`] as for [`parse`], and for a unit that cannot be read.
pub fn parse_report(text: &str) -> Result<(Expression, Option<(Unit, Span)>), SyntaxError> {
    let Some((left, right)) = split_in(text) else {
        return Ok((parse(text)?, None));
    };
    match Unit::parse(&text[right.clone()], true) {
        Ok(unit) => Ok((parse(&text[..left])?, Some((unit, right)))),
        // `3 in + h`: this `in` is an inch.
        Err(error) => match parse(text) {
            Ok(expression) => Ok((expression, None)),
            Err(_) => Err(SyntaxError::in_unit(right.start, error)),
        },
    }
}

/// End of the expression and place of the unit, around the last ` in ` outside brackets.
fn split_in(text: &str) -> Option<(usize, Span)> {
    let bytes = text.as_bytes();
    let mut depth = 0usize;
    let mut found = None;
    for (i, byte) in bytes.iter().enumerate() {
        match byte {
            b'(' | b'[' => depth += 1,
            b')' | b']' => depth = depth.saturating_sub(1),
            _ if depth > 0 || !byte.is_ascii_whitespace() => {}
            _ => {
                let word = bytes.get(i + 1..i + 3) == Some(b"in");
                if word && bytes.get(i + 3).is_some_and(u8::is_ascii_whitespace) {
                    found = Some(i);
                }
            }
        }
    }
    let left = found?;
    let rest = &text[left + 4..];
    let start = text.len() - rest.trim_start().len();
    let end = text.trim_end().len();
    Some((left, start..end.max(start)))
}

/// The name that a text spells, in the form in which names stand in a tree, if it is one: letters (Greek too),
/// digits and `_`, not beginning with a digit, and none of the words `if and or in pi inf`.
///
/// The micro sign becomes the Greek letter mu and the ohm sign omega, for they look alike.
pub fn name(text: &str) -> Option<String> {
    let mut chars = text.chars();
    let good = chars.next().is_some_and(lexer::starts_name) && chars.all(lexer::continues_name);
    let reserved = ["if", "and", "or", "in", "pi", "inf"].contains(&text);
    (good && !reserved).then(|| lexer::normal(text))
}

#[cfg(test)]
mod tests;
