//! Numbers that formulas can be evaluated with: plain `f64`, and values with a bound for their error.

use super::graph::{Binary, Unary};
use super::table::Table;

/// What evaluation needs of a number.
pub trait Number: Copy {
    /// A value with a bound for its error.
    fn number(value: f64, error: f64) -> Self;
    /// The value.
    fn value(self) -> f64;
    /// -a
    fn negate(self) -> Self;
    /// a + b
    fn add(self, other: Self) -> Self;
    /// a b
    fn multiply(self, other: Self) -> Self;
    /// a / b
    fn divide(self, other: Self) -> Self;
    /// a^b
    fn power(self, other: Self) -> Self;
    /// f(a)
    fn unary(self, f: Unary) -> Self;
    /// f(a, b)
    fn binary(self, f: Binary, other: Self) -> Self;
    /// The derivative `order` of measured data.
    fn tabulated(self, table: &Table, order: u8) -> Self;
    /// `then` if `self < 0` (`strict`) or `self <= 0`, else `otherwise`.
    fn choose(self, strict: bool, then: Self, otherwise: Self) -> Self;
}

/// Whether the test `gap < 0` (`strict`) or `gap <= 0` holds.
pub(super) fn holds(gap: f64, strict: bool) -> bool {
    if strict { gap < 0.0 } else { gap <= 0.0 }
}

/// The exponent of a power that is done by repeated multiplication: an integer, small enough to be as
/// accurate as the library's power.
pub(super) fn small_integer(exponent: f64) -> Option<i32> {
    (exponent.fract() == 0.0 && exponent.abs() <= 8.0).then_some(exponent as i32)
}

/// a^n, |n| <= 8.
pub(super) fn powi(a: f64, n: i32) -> f64 {
    let (mut product, mut square, mut rest) = (1.0, a, n.unsigned_abs());
    while rest > 0 {
        if rest & 1 == 1 {
            product *= square;
        }
        square *= square;
        rest >>= 1;
    }
    if n < 0 { 1.0 / product } else { product }
}

pub(super) fn unary(f: Unary, a: f64) -> f64 {
    match f {
        Unary::Sqrt => a.sqrt(),
        Unary::Exp => a.exp(),
        Unary::Ln => a.ln(),
        Unary::Log10 => a.log10(),
        Unary::Sin => a.sin(),
        Unary::Cos => a.cos(),
        Unary::Tan => a.tan(),
        Unary::Asin => a.asin(),
        Unary::Acos => a.acos(),
        Unary::Atan => a.atan(),
        Unary::Sinh => a.sinh(),
        Unary::Cosh => a.cosh(),
        Unary::Tanh => a.tanh(),
        // The standard library's asinh, acosh and atanh lose digits near zero; libm's do not.
        Unary::Asinh => libm::asinh(a),
        Unary::Acosh => libm::acosh(a),
        Unary::Atanh => libm::atanh(a),
        Unary::Abs => a.abs(),
        Unary::Sign if a == 0.0 => 0.0,
        Unary::Sign => a.signum(),
        Unary::Erf => libm::erf(a),
        Unary::Erfc => libm::erfc(a),
    }
}

pub(super) fn binary(f: Binary, a: f64, b: f64) -> f64 {
    match f {
        // A zero has no sign here: atan2(0, -1) is pi, however the zero came about.
        Binary::Atan2 => (a + 0.0).atan2(b + 0.0),
        // Not f64::min, which would hide a NaN.
        Binary::Min if a <= b => a,
        Binary::Max if a >= b => a,
        Binary::Min | Binary::Max if a.is_nan() => a,
        Binary::Min | Binary::Max => b,
        Binary::SignedPower if a == 0.0 && b > 0.0 => 0.0,
        Binary::SignedPower => a.abs().power(b).copysign(a),
    }
}

impl Number for f64 {
    fn number(value: f64, _: f64) -> Self {
        value
    }
    fn value(self) -> f64 {
        self
    }
    fn negate(self) -> Self {
        -self
    }
    fn add(self, other: Self) -> Self {
        self + other
    }
    fn multiply(self, other: Self) -> Self {
        self * other
    }
    fn divide(self, other: Self) -> Self {
        self / other
    }
    fn power(self, other: Self) -> Self {
        match small_integer(other) {
            Some(n) => powi(self, n),
            None => self.powf(other),
        }
    }
    fn unary(self, f: Unary) -> Self {
        unary(f, self)
    }
    fn binary(self, f: Binary, other: Self) -> Self {
        binary(f, self, other)
    }
    fn tabulated(self, table: &Table, order: u8) -> Self {
        table.value(order, self)
    }
    fn choose(self, strict: bool, then: Self, otherwise: Self) -> Self {
        if holds(self, strict) { then } else { otherwise }
    }
}

/// A value and a bound for its error, carried through every operation: the errors of the operands times the
/// derivatives, and the rounding of the operation itself (running error analysis: Higham, Accuracy and
/// Stability of Numerical Algorithms, 2nd ed., section 3.3).
///
/// For sums, products, quotients, square roots and exponentials the bound is strict up to the rounding of the
/// bound itself; for other functions it is of first order in the errors of the operands.
///
/// ```
/// use spanwise::formula::number::{Number, Rounded};
/// let difference = Rounded::number(0.1, 1e-17).add(Rounded::number(-0.1 + 1e-12, 1e-17));
/// assert!(difference.error >= 2e-17 && difference.error < 3e-17);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rounded {
    /// The value.
    pub value: f64,
    /// |true value - value| is at most this.
    pub error: f64,
}

/// Half a unit in the last place of 1.
const HALF_ULP: f64 = f64::EPSILON / 2.0;
/// What the library's functions may be off, relative: one unit in the last place and a half.
const FUNCTION: f64 = 3.0 * HALF_ULP;

impl Rounded {
    /// A number as read from decimal digits: right to half a unit in the last place; exact if it is a small
    /// multiple of a small power of two, as 2 and 0.5.
    pub fn from_decimal(value: f64) -> Self {
        let scaled = value * f64::from(1 << 20);
        let exact = value == 0.0 || (scaled.fract() == 0.0 && scaled.abs() < 1e15);
        Self::new(value, if exact { 0.0 } else { value.abs() * HALF_ULP })
    }

    /// Exactly this value.
    pub fn exact(value: f64) -> Self {
        Self { value, error: 0.0 }
    }

    /// A bound that is not a number (inf - inf, 0 * inf) is no bound.
    fn new(value: f64, error: f64) -> Self {
        let error = if error.is_nan() { f64::INFINITY } else { error };
        Self { value, error }
    }

    fn function(value: f64, error: f64) -> Self {
        Self::new(value, error + FUNCTION * value.abs())
    }
}

/// a b, but 0 where one factor is an exact zero, whatever the other.
fn scaled(a: f64, b: f64) -> f64 {
    if a == 0.0 || b == 0.0 { 0.0 } else { a * b }
}

impl Number for Rounded {
    fn number(value: f64, error: f64) -> Self {
        Self { value, error }
    }

    fn value(self) -> f64 {
        self.value
    }

    fn negate(self) -> Self {
        Self::new(-self.value, self.error)
    }

    fn add(self, other: Self) -> Self {
        let (a, b) = (self.value, other.value);
        let sum = a + b;
        // The rounding error itself (Knuth's two-sum).
        let back = sum - a;
        let rounding = (a - (sum - back)) + (b - back);
        Self::new(sum, self.error + other.error + rounding.abs())
    }

    fn multiply(self, other: Self) -> Self {
        let (a, b) = (self.value, other.value);
        let product = a * b;
        let rounding = a.mul_add(b, -product).abs();
        let spread = scaled(a.abs() + self.error, other.error) + scaled(b.abs(), self.error);
        Self::new(product, spread + rounding)
    }

    fn divide(self, other: Self) -> Self {
        let (a, b) = (self.value, other.value);
        let quotient = a / b;
        if other.error >= b.abs() {
            return Self::new(quotient, f64::INFINITY);
        }
        let rounding = ((-quotient).mul_add(b, a) / b).abs();
        let spread = (self.error + scaled(quotient.abs(), other.error)) / (b.abs() - other.error);
        Self::new(quotient, spread + rounding)
    }

    fn power(self, other: Self) -> Self {
        let (a, b) = (self.value, other.value);
        let value = a.power(b);
        let rounding = match small_integer(b) {
            Some(n) => f64::from(n.abs()) * HALF_ULP,
            None => FUNCTION,
        };
        let near = if self.error >= a.abs() {
            // The base may be zero.
            if b > 0.0 { (a.abs() + self.error).powf(b) } else { f64::INFINITY }
        } else {
            scaled(self.error, (value * b / a).abs())
        };
        let base = if self.error == 0.0 { 0.0 } else { near };
        let exponent = scaled(other.error, (value * a.abs().ln()).abs());
        Self::new(value, base + exponent + rounding * value.abs())
    }

    fn unary(self, f: Unary) -> Self {
        let (a, e) = (self.value, self.error);
        let value = unary(f, a);
        let spread = if e == 0.0 {
            0.0
        } else {
            let slope = match f {
                Unary::Sqrt if a < e => return Self::function(value, (a.max(0.0) + e).sqrt()),
                Unary::Sqrt => 1.0 / (value + (a - e).sqrt()),
                Unary::Exp => return Self::function(value, value * e.exp_m1()),
                Unary::Ln if a > e => 1.0 / (a - e),
                Unary::Log10 if a > e => 1.0 / ((a - e) * std::f64::consts::LN_10),
                Unary::Ln | Unary::Log10 => f64::INFINITY,
                Unary::Sin => a.cos().abs() + e / 2.0,
                Unary::Cos => a.sin().abs() + e / 2.0,
                Unary::Tan => 1.0 + value * value,
                // At the ends of their range: |asin a - asin b| <= pi sqrt(|a - b|/2).
                Unary::Asin | Unary::Acos => {
                    (1.0 / ((1.0 - a) * (1.0 + a)).sqrt()).min(std::f64::consts::PI * (0.5 / e).sqrt())
                }
                Unary::Acosh => (1.0 / ((a - 1.0) * (a + 1.0)).sqrt()).min((2.0 / e).sqrt()),
                Unary::Atan => 1.0 / (1.0 + a * a),
                Unary::Sinh => a.cosh(),
                Unary::Cosh => a.sinh().abs() + e / 2.0,
                Unary::Tanh => 1.0 / a.cosh().powi(2),
                Unary::Asinh => 1.0 / (1.0 + a * a).sqrt(),
                Unary::Atanh => 1.0 / ((1.0 - a) * (1.0 + a)).abs(),
                Unary::Abs => 1.0,
                Unary::Sign if a.abs() <= e => 2.0 / e,
                Unary::Sign => 0.0,
                Unary::Erf | Unary::Erfc => std::f64::consts::FRAC_2_SQRT_PI * (-a * a).exp(),
            };
            e * slope
        };
        match f {
            Unary::Abs | Unary::Sign => Self::new(value, spread),
            _ => Self::function(value, spread),
        }
    }

    fn binary(self, f: Binary, other: Self) -> Self {
        let (a, b) = (self, other);
        let value = binary(f, a.value, b.value);
        match f {
            Binary::Atan2 => {
                let square = a.value * a.value + b.value * b.value;
                let spread = scaled(a.value.abs(), b.error) + scaled(b.value.abs(), a.error);
                let spread = if a.value.abs() <= a.error && b.value - b.error <= 0.0 {
                    // On the negative axis the angle steps from -pi to pi.
                    if spread == 0.0 { 0.0 } else { std::f64::consts::TAU }
                } else {
                    spread / square
                };
                Self::function(value, spread)
            }
            Binary::Min | Binary::Max => Self::new(value, a.error.max(b.error)),
            Binary::SignedPower => {
                let size = a.unary(Unary::Abs).power(b);
                // Where the sign is not certain, the power of the error bounds both sides.
                let error = if a.error >= a.value.abs() { size.error + value.abs() } else { size.error };
                Self::new(value, error)
            }
        }
    }

    fn tabulated(self, table: &Table, order: u8) -> Self {
        Self::new(table.value(order, self.value), table.rounding(order, self.value, self.error))
    }

    fn choose(self, strict: bool, then: Self, otherwise: Self) -> Self {
        let (taken, left) = if holds(self.value, strict) { (then, otherwise) } else { (otherwise, then) };
        if self.value.is_nan() {
            // What is not a number decides nothing.
            return Self::new(taken.value, f64::INFINITY);
        }
        if self.value.abs() > self.error || self.error == 0.0 {
            return taken;
        }
        let apart = (taken.value - left.value).abs() + left.error;
        Self::new(taken.value, taken.error.max(apart))
    }
}

#[cfg(test)]
mod tests;
