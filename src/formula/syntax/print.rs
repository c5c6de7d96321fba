//! Trees to text, with no more parentheses than needed; reading the text gives the same tree.

use super::{Argument, Comparison, Expression, Kind, Operator, Sign, Test};
use std::fmt::{Display, Formatter, Result};

impl Operator {
    /// The sign as written.
    pub fn sign(self) -> &'static str {
        match self {
            Self::Add => "+",
            Self::Subtract => "-",
            Self::Multiply => "*",
            Self::Divide => "/",
            Self::Power => "^",
        }
    }

    fn binding(self) -> u8 {
        match self {
            Self::Add | Self::Subtract => 1,
            Self::Multiply | Self::Divide => 2,
            Self::Power => 4,
        }
    }
}

impl Comparison {
    /// The sign as written.
    pub fn sign(self) -> &'static str {
        match self {
            Self::Less => "<",
            Self::LessEqual => "<=",
            Self::Greater => ">",
            Self::GreaterEqual => ">=",
        }
    }
}

const SIGN: u8 = 3;
const PRIMARY: u8 = 5;

fn binding(kind: &Kind) -> u8 {
    match kind {
        Kind::Binary(operator, ..) => operator.binding(),
        Kind::Negate(_) => SIGN,
        Kind::Number { value, .. } if value.is_sign_negative() => SIGN,
        // As the base of a power, a number with unit needs parentheses.
        Kind::Number { unit: Some(_), .. } => 4,
        _ => PRIMARY,
    }
}

/// Writes a part, in parentheses unless it binds at least as strongly as `floor`.
fn part(f: &mut Formatter<'_>, e: &Expression, floor: u8) -> Result {
    if binding(&e.kind) < floor { write!(f, "({e})") } else { write!(f, "{e}") }
}

impl Display for Expression {
    fn fmt(&self, f: &mut Formatter<'_>) -> Result {
        match &self.kind {
            Kind::Number { value, unit, .. } => {
                let digits = format!("{value:?}");
                f.write_str(digits.strip_suffix(".0").unwrap_or(&digits))?;
                match unit {
                    // A 1 in front would be a second number.
                    Some(u) if u.text.starts_with('1') && !u.text.starts_with("1/") => write!(f, " [{}]", u.text),
                    Some(u) => write!(f, " {}", u.text),
                    None => Ok(()),
                }
            }
            Kind::Name(name) => f.write_str(name),
            Kind::Negate(a) => {
                f.write_str("-")?;
                // -(5 degC) is not -5 degC.
                let absolute = matches!(&a.kind, Kind::Number { unit: Some(u), .. } if u.is_absolute());
                part(f, a, if absolute { PRIMARY } else { SIGN })
            }
            Kind::Binary(Operator::Power, a, b) => {
                part(f, a, PRIMARY)?;
                f.write_str("^")?;
                part(f, b, SIGN)
            }
            Kind::Binary(operator, a, b) => {
                part(f, a, operator.binding())?;
                // Blanks, lest a unit in front reach over the sign.
                write!(f, " {} ", operator.sign())?;
                part(f, b, operator.binding() + 1)
            }
            Kind::Prime(a, order) => {
                let bare = matches!(a.kind, Kind::Name(_) | Kind::If(..) | Kind::Call { .. });
                part(f, a, if bare { 0 } else { u8::MAX })?;
                f.write_str(&"'".repeat(*order))
            }
            Kind::Call { name, primes, arguments, .. } => {
                write!(f, "{name}{}(", "'".repeat(*primes))?;
                for (i, argument) in arguments.iter().enumerate() {
                    let comma = if i == 0 { "" } else { ", " };
                    write!(f, "{comma}{argument}")?;
                }
                f.write_str(")")
            }
            Kind::If(test, a, b) => write!(f, "if({test}, {a}, {b})"),
        }
    }
}

impl Display for Argument {
    fn fmt(&self, f: &mut Formatter<'_>) -> Result {
        let side = match self.side {
            Some(Sign::Minus) => "-",
            Some(Sign::Plus) => "+",
            None => "",
        };
        write!(f, "{}{side}", self.value)
    }
}

impl Display for Test {
    fn fmt(&self, f: &mut Formatter<'_>) -> Result {
        match self {
            Self::Compare(a, sign, b) => write!(f, "{a} {} {b}", sign.sign()),
            Self::And(p, q) => {
                for (i, side) in [p, q].into_iter().enumerate() {
                    let word = if i == 0 { "" } else { " and " };
                    match **side {
                        Self::Or(..) => write!(f, "{word}({side})")?,
                        Self::And(..) if i == 1 => write!(f, "{word}({side})")?,
                        _ => write!(f, "{word}{side}")?,
                    }
                }
                Ok(())
            }
            Self::Or(p, q) => match **q {
                Self::Or(..) => write!(f, "{p} or ({q})"),
                _ => write!(f, "{p} or {q}"),
            },
        }
    }
}
