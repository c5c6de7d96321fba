//! Unit texts: `kN m`, `W/(m K)`, `Pa s^0.42`.
//!
//! Grammar: factors joined by a blank, `·` or `/`; a factor is a symbol or a group in parentheses, with
//! `^number` behind it. `/` takes the next factor only: `a/b c` is (a/b) c.

use super::Unit;
use super::dimension::{Dimension, Exponent, ExponentRange};
use super::scale::Scale;
use super::suggest::suggest;
use super::table::{NO_OFFSET, lookup};
use std::ops::Range;

/// What is wrong with a unit, and where.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("{message}")]
pub struct UnitError {
    /// Where in the text, in bytes.
    pub span: Range<usize>,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub hint: Option<String>,
}

/// Groups within groups; more is a slip.
const DEEPEST: usize = 20;

/// Longest unit at the start of `text`, with the number of bytes it takes; `None` if there is none.
///
/// This is how a unit is read behind a number: it reaches as far as it can, `9.81 m/s^2*x` is (9.81 m/s^2) x,
/// and stops before anything that is no unit, `3 m/width` is (3 m) / width.
///
/// # Errors
/// [`UnitError`] where the text is plainly meant as a unit but none: degC in a product, an exponent out of range.
///
/// ```
/// let (unit, used) = spanwise::unit::scan("m/s^2*x")?.expect("a unit");
/// assert_eq!((unit.text.as_str(), used), ("m/s^2", 5));
/// # Ok::<(), spanwise::unit::UnitError>(())
/// ```
pub fn scan(text: &str) -> Result<Option<(Unit, usize)>, UnitError> {
    let mut reader = Reader { text, at: 0, whole: false, star: false };
    if text.starts_with('1') && !text[1..].starts_with('/') {
        return Ok(None);
    }
    match reader.product(0) {
        // Of `1/x` no more than the 1 was a unit: then it is a number of the formula.
        Ok(parts) if parts.text == "1" => Ok(None),
        Ok(parts) => Ok(Some((parts.unit(reader.at)?, reader.at))),
        Err(Stop::NoUnit(_)) => Ok(None),
        Err(Stop::Fault(error)) => Err(*error),
    }
}

pub(super) fn whole(text: &str, star: bool) -> Result<Unit, UnitError> {
    let mut reader = Reader { text, at: 0, whole: true, star };
    reader.blanks();
    if reader.rest().is_empty() {
        return Err(UnitError {
            span: 0..text.len(),
            message: "a unit is missing".into(),
            hint: Some("the unit of a pure number is 1".into()),
        });
    }
    match reader.product(0) {
        Ok(parts) => parts.unit(text.len()),
        Err(Stop::NoUnit(error) | Stop::Fault(error)) => Err(*error),
    }
}

/// Why reading ended.
enum Stop {
    /// What stands here is no unit; behind a number it may be something else.
    NoUnit(Box<UnitError>),
    /// It is meant as a unit, and wrong.
    Fault(Box<UnitError>),
}

fn no_unit(span: Range<usize>, message: impl Into<String>, hint: Option<String>) -> Stop {
    Stop::NoUnit(Box::new(UnitError { span, message: message.into(), hint }))
}

fn fault(span: Range<usize>, message: impl Into<String>, hint: Option<String>) -> Stop {
    Stop::Fault(Box::new(UnitError { span, message: message.into(), hint }))
}

/// A unit being put together.
struct Parts {
    text: String,
    scale: Scale,
    shift: Scale,
    dimension: Dimension,
}

impl Parts {
    /// The whole, which took `used` bytes.
    fn unit(self, used: usize) -> Result<Unit, UnitError> {
        let unit = Unit::new(self.text, self.scale, self.shift, self.dimension);
        if unit.factor.is_normal() {
            return Ok(unit);
        }
        let message = "this unit is too small or too large to calculate with".into();
        Err(UnitError { span: 0..used, message, hint: None })
    }

    fn absolute(&self) -> bool {
        self.shift != NO_OFFSET
    }
}

struct Reader<'a> {
    text: &'a str,
    at: usize,
    /// The whole text must be a unit, in which blanks may stand around signs.
    whole: bool,
    /// `*` joins.
    star: bool,
}

#[derive(Clone, Copy, PartialEq)]
enum Join {
    Times,
    Over,
}

impl<'a> Reader<'a> {
    fn rest(&self) -> &'a str {
        &self.text[self.at..]
    }

    fn peek(&self) -> Option<char> {
        self.rest().chars().next()
    }

    fn blanks(&mut self) -> bool {
        let rest = self.rest();
        let trimmed = rest.trim_start();
        self.at += rest.len() - trimmed.len();
        rest.len() != trimmed.len()
    }

    fn product(&mut self, depth: usize) -> Result<Parts, Stop> {
        let start = self.at;
        let mut parts = self.factor(depth, true)?;
        loop {
            let before = self.at;
            let Some(join) = self.join() else {
                self.at = before;
                if self.whole {
                    self.blanks();
                    let closed = depth > 0 && self.peek() == Some(')');
                    if !self.rest().is_empty() && !closed {
                        return Err(self.stray());
                    }
                }
                return Ok(parts);
            };
            let factor_start = self.at;
            let factor = match self.factor(depth, false) {
                Ok(factor) => factor,
                Err(Stop::NoUnit(_)) if !self.whole && depth == 0 => {
                    self.at = before;
                    return Ok(parts);
                }
                Err(stop) => return Err(stop),
            };
            let slip = parts.text.ends_with("deg") && ["C", "F"].contains(&factor.text.as_str());
            if slip && join == Join::Times {
                let unit = format!("deg{}", factor.text);
                return Err(fault(
                    start..self.at,
                    format!("this reads as degree times {}", factor.text),
                    Some(format!("write {unit} for the temperature")),
                ));
            }
            for (part, place) in [(&parts, start..before), (&factor, factor_start..self.at)] {
                if part.absolute() {
                    return Err(absolute_in_product(&part.text, place));
                }
            }
            parts = Self::joined(parts, join, factor)
                .map_err(|_| fault(start..self.at, ExponentRange.to_string(), None))?;
        }
    }

    fn joined(a: Parts, join: Join, b: Parts) -> Result<Parts, ExponentRange> {
        let (sign, scale, dimension) = match join {
            Join::Times => (' ', a.scale.times(b.scale), a.dimension.mul(b.dimension)?),
            Join::Over => ('/', a.scale.times(b.scale.inverse()), a.dimension.div(b.dimension)?),
        };
        Ok(Parts { text: format!("{}{sign}{}", a.text, b.text), scale, shift: NO_OFFSET, dimension })
    }

    /// The sign between two factors.
    fn join(&mut self) -> Option<Join> {
        let blank = self.blanks();
        let before = self.at;
        let sign = match self.peek()? {
            '·' | '⋅' => Some(Join::Times),
            '*' if self.star => Some(Join::Times),
            '/' if self.whole || !blank => Some(Join::Over),
            _ => None,
        };
        if let (Some(sign), Some(c)) = (sign, self.peek()) {
            self.at += c.len_utf8();
            if self.blanks() && sign == Join::Over && !self.whole {
                self.at = before;
                return None;
            }
            return Some(sign);
        }
        // A blank joins only what can begin a factor.
        (blank && self.peek().is_some_and(|c| symbol_char(c) || c == '(')).then_some(Join::Times)
    }

    fn factor(&mut self, depth: usize, first: bool) -> Result<Parts, Stop> {
        let start = self.at;
        let mut parts = match self.peek() {
            Some('(') => self.group(depth)?,
            Some(c) if symbol_char(c) => self.symbol(first)?,
            _ => return Err(self.stray()),
        };
        let before = self.at;
        if self.peek() == Some('^') {
            let name = start..self.at;
            match self.exponent() {
                Ok((exponent, text)) => {
                    if parts.absolute() {
                        return Err(absolute_in_product(&parts.text, name));
                    }
                    parts.dimension = parts
                        .dimension
                        .power(exponent)
                        .map_err(|_| fault(before..self.at, ExponentRange.to_string(), None))?;
                    parts.scale = parts.scale.power(exponent);
                    parts.text = format!("{}^{text}", parts.text);
                }
                Err(Stop::NoUnit(_)) if !self.whole && depth == 0 => self.at = before,
                Err(stop) => return Err(stop),
            }
        }
        Ok(parts)
    }

    fn group(&mut self, depth: usize) -> Result<Parts, Stop> {
        let open = self.at;
        if depth == DEEPEST {
            return Err(fault(open..open + 1, "too many parentheses", None));
        }
        self.at += 1;
        self.blanks();
        let mut parts = self.product(depth + 1)?;
        self.blanks();
        if self.peek() != Some(')') {
            return Err(no_unit(open..open + 1, "this parenthesis is not closed", None));
        }
        self.at += 1;
        if parts.absolute() {
            let place = open + 1..self.at - 1;
            return Err(absolute_in_product(&parts.text, place));
        }
        parts.text = format!("({})", parts.text);
        Ok(parts)
    }

    fn symbol(&mut self, first: bool) -> Result<Parts, Stop> {
        let rest = self.rest();
        let symbol = &rest[..rest.find(|c| !symbol_char(c)).unwrap_or(rest.len())];
        let span = self.at..self.at + symbol.len();
        if symbol == "1" && first {
            self.at = span.end;
            return Ok(Parts { text: symbol.into(), scale: Scale::ONE, shift: NO_OFFSET, dimension: Dimension::NONE });
        }
        let Some((unit, power)) = lookup(symbol) else {
            // Behind a number this is no fault yet.
            let hint = self.whole.then(|| suggest(symbol)).flatten();
            return Err(no_unit(span, format!("`{symbol}` is not a unit"), hint));
        };
        self.at = span.end;
        Ok(Parts {
            text: symbol.into(),
            scale: unit.prefixed_scale(power),
            shift: unit.offset,
            dimension: unit.dimension,
        })
    }

    /// `^2`, `^-1`, `^0.42`, `^(1/2)`
    fn exponent(&mut self) -> Result<(Exponent, String), Stop> {
        let caret = self.at;
        self.at += 1;
        let start = self.at;
        let wrong = |at: usize| {
            no_unit(
                caret..at.max(caret + 1),
                "a number is missing behind ^",
                Some("write m^2, s^-1, s^0.42 or m^(1/2)".into()),
            )
        };
        let bracket = self.peek() == Some('(');
        if bracket {
            self.at += 1;
        }
        let over = self.decimal().ok_or_else(|| wrong(self.at))?;
        let mut under = Ok((1, 1));
        if bracket {
            if self.peek() == Some('/') {
                self.at += 1;
                under = self.decimal().ok_or_else(|| wrong(self.at))?;
            }
            if self.peek() != Some(')') {
                return Err(wrong(self.at));
            }
            self.at += 1;
        }
        if self.peek().is_some_and(|c| symbol_char(c) || c == '.') {
            return Err(wrong(self.at));
        }
        let value = over.and_then(|(num, den)| {
            let (under_num, under_den) = under?;
            Exponent::new(num, den)?.times(Exponent::new(under_den, under_num)?)
        });
        let value = value.map_err(|range| fault(caret..self.at, range.to_string(), None))?;
        Ok((value, self.text[start..self.at].into()))
    }

    /// A signed decimal number as a fraction; `None` if there is none.
    fn decimal(&mut self) -> Option<Result<(i64, i64), ExponentRange>> {
        let sign = match self.peek() {
            Some('-' | '−') => -1,
            _ => 1,
        };
        if let Some(c) = self.peek().filter(|c| "+-−".contains(*c)) {
            self.at += c.len_utf8();
        }
        let (mut num, mut den, mut digits, mut point) = (0i64, 1i64, 0, false);
        let mut range = Ok(());
        while let Some(c) = self.peek() {
            if let Some(digit) = c.to_digit(10) {
                digits += 1;
                if num > 1_000_000_000 || den > 1_000_000_000 {
                    range = Err(ExponentRange);
                } else {
                    num = 10 * num + i64::from(digit);
                    den *= if point { 10 } else { 1 };
                }
            } else if c == '.' && !point {
                point = true;
            } else {
                break;
            }
            self.at += c.len_utf8();
        }
        (digits > 0).then(|| range.map(|()| (sign * num, den)))
    }

    fn stray(&self) -> Stop {
        let found = self.peek();
        let span = self.at..self.at + found.map_or(0, char::len_utf8);
        let message = match found {
            Some(c) => format!("`{c}` cannot stand here in a unit"),
            None => "a unit is missing at the end".into(),
        };
        let hint = match found {
            Some('*') if self.text[..self.at].ends_with('*') => Some("a power is written with ^".into()),
            Some('*') => Some("join units by a blank: kN m".into()),
            Some('²') => Some("write ^2".into()),
            Some('³') => Some("write ^3".into()),
            Some('⁻') => Some("write ^-1".into()),
            Some(c @ ('℃' | '℉')) => suggest(c.encode_utf8(&mut [0; 4])),
            Some('°') => Some("write deg for an angle, degC for a temperature".into()),
            Some('0'..='9') => Some("a power is written with ^: m^2".into()),
            _ => None,
        };
        no_unit(span, message, hint)
    }
}

fn absolute_in_product(text: &str, span: Range<usize>) -> Stop {
    fault(
        span,
        format!("{text} is an absolute temperature and stands alone only"),
        Some("write K for differences of temperature: W/(m K)".into()),
    )
}

/// Letters, signs and digits of which symbols consist; digits only so that `mm2` is seen as one word.
fn symbol_char(c: char) -> bool {
    c.is_alphanumeric() || matches!(c, '_' | '%' | '°')
}
