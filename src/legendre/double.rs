//! Double-double numbers: a value as the unevaluated sum of two `f64`, some 31 digits.
//!
//! Just enough for the last step of a node's Newton iteration, so that angles and weights come out rounded
//! from numbers that are exact for every practical purpose. Sums and products without error after
//! Dekker (Numer. Math. 18, 1971) and Knuth (TAOCP vol. 2, 4.2.2).

use std::ops::{Add, Div, Mul, Neg, Sub};

/// `hi + lo`, with `|lo|` at most half an ulp of `hi`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Double {
    pub(crate) hi: f64,
    pub(crate) lo: f64,
}

/// Pi to 32 digits.
pub(crate) const PI: Double = Double { hi: std::f64::consts::PI, lo: 1.224_646_799_147_353_2e-16 };

/// a + b without error.
fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let bb = sum - a;
    (sum, (a - (sum - bb)) + (b - bb))
}

/// a + b without error where |a| >= |b|.
fn quick_two_sum(a: f64, b: f64) -> Double {
    let hi = a + b;
    Double { hi, lo: b - (hi - a) }
}

/// a in two halves of 26 bits, whose products are exact. Fails near overflow only, which angles and
/// Legendre values never come near.
fn split(a: f64) -> (f64, f64) {
    const SHIFT: f64 = 134_217_729.0; // 2^27 + 1
    let scaled = SHIFT * a;
    let hi = scaled - (scaled - a);
    (hi, a - hi)
}

/// a * b without error. By splitting, not `mul_add`: without a fused unit at compile time that is a call.
fn two_product(a: f64, b: f64) -> (f64, f64) {
    let product = a * b;
    let ((ah, al), (bh, bl)) = (split(a), split(b));
    (product, ((ah * bh - product) + ah * bl + al * bh) + al * bl)
}

impl Double {
    pub(crate) fn sqrt(self) -> Self {
        if self.hi <= 0.0 {
            return Self::from(0.0);
        }
        let root = self.hi.sqrt();
        let (square, error) = two_product(root, root);
        let rest = (self - Self { hi: square, lo: error }).hi;
        quick_two_sum(root, rest / (2.0 * root))
    }

    /// 1 - cos(self) for angles in [0, pi], to about 1e-24 relative.
    ///
    /// Taylor series of a sixteenth of the angle, then four doublings
    /// 1 - cos 2t = 2 (1 - cos t) (2 - (1 - cos t)), none of which cancels.
    pub(crate) fn versine(self) -> Self {
        let t = self * 0.0625;
        let square = t * t;
        // 1 - t^2/(3 4) (1 - t^2/(5 6) (1 - ...)). The terms from t^6 on are below 3e-9: plain numbers do.
        let mut tail = 1.0;
        for k in (4..=10).rev() {
            tail = 1.0 - square.hi * tail / f64::from(2 * k * (2 * k - 1));
        }
        let mut sum = Self::from(tail);
        for divisor in [30.0, 12.0] {
            sum = Self::from(1.0) - square * sum / divisor;
        }
        let mut versine = square * sum * 0.5;
        for _ in 0..4 {
            versine = versine * (Self::from(2.0) - versine) * 2.0;
        }
        versine
    }
}

impl From<f64> for Double {
    fn from(hi: f64) -> Self {
        Self { hi, lo: 0.0 }
    }
}

impl Neg for Double {
    type Output = Self;
    fn neg(self) -> Self {
        Self { hi: -self.hi, lo: -self.lo }
    }
}

impl Add for Double {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        let (hi, e) = two_sum(self.hi, other.hi);
        let (lo, f) = two_sum(self.lo, other.lo);
        let sum = quick_two_sum(hi, e + lo);
        quick_two_sum(sum.hi, sum.lo + f)
    }
}

impl Sub for Double {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        self + -other
    }
}

impl Mul for Double {
    type Output = Self;
    fn mul(self, other: Self) -> Self {
        let (hi, error) = two_product(self.hi, other.hi);
        quick_two_sum(hi, error + (self.hi * other.lo + self.lo * other.hi))
    }
}

impl Mul<f64> for Double {
    type Output = Self;
    fn mul(self, other: f64) -> Self {
        let (hi, error) = two_product(self.hi, other);
        quick_two_sum(hi, error + self.lo * other)
    }
}

impl Div<f64> for Double {
    type Output = Self;
    fn div(self, other: f64) -> Self {
        let quotient = self.hi / other;
        let (product, error) = two_product(quotient, other);
        let rest = ((self.hi - product) - error) + self.lo;
        quick_two_sum(quotient, rest / other)
    }
}

impl Div for Double {
    type Output = Self;
    fn div(self, other: Self) -> Self {
        let first = self.hi / other.hi;
        let rest = self - other * first;
        let second = rest.hi / other.hi;
        let rest = rest - other * second;
        let sum = quick_two_sum(first, second);
        quick_two_sum(sum.hi, sum.lo + rest.hi / other.hi)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_third_times_three_is_one() {
        let third = Double::from(1.0) / 3.0;
        let one = third * 3.0 - Double::from(1.0);
        assert!(one.hi.abs() < 1e-31, "{one:?}");
        let third = Double::from(1.0) / Double::from(3.0);
        assert!((third * 3.0 - Double::from(1.0)).hi.abs() < 1e-31);
    }

    #[test]
    fn root_of_two_squared_is_two() {
        let root = Double::from(2.0).sqrt();
        assert!((root * root - Double::from(2.0)).hi.abs() < 1e-30);
    }

    #[test]
    fn versine_of_known_angles() {
        // 1 - cos(pi/3) = 1/2, 1 - cos(pi/2) = 1, 1 - cos(pi) = 2
        for (part, value) in [(3.0, 0.5), (2.0, 1.0), (1.0, 2.0)] {
            let error = (PI / part).versine() - Double::from(value);
            assert!(error.hi.abs() < 1e-22, "pi/{part}: {error:?}");
        }
        // 1 - cos(0.001), mpmath 1.3 with 40 digits: 4.999999583333347222221974206350954e-7
        let value = Double::from(1e-3).versine();
        let (hi, lo) = (4.999999583333347e-7, 0.0);
        assert!((value - Double { hi, lo }).hi.abs() < 1e-22);
    }
}
