//! Conversion factors as exact fractions, applied with a single rounding.
//!
//! 160 mm must become the double nearest to 0.16, not 160 times the double nearest to 0.001.

use super::dimension::Exponent;

/// num/den * pi^k * loose; `loose` is 1 unless a part does not fit an exact fraction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Scale {
    num: u128,
    den: u128,
    pi: i32,
    loose: f64,
}

fn gcd(mut a: u128, mut b: u128) -> u128 {
    while b != 0 {
        (a, b) = (b, a % b);
    }
    a.max(1)
}

impl Scale {
    pub(super) const ONE: Self = Self::ratio(1, 1);

    pub(super) const fn ratio(num: u128, den: u128) -> Self {
        Self { num, den, pi: 0, loose: 1.0 }
    }

    pub(super) const fn with_pi(num: u128, den: u128) -> Self {
        Self { num, den, pi: 1, loose: 1.0 }
    }

    pub(super) fn ten_to(power: i32) -> Self {
        let size = 10u128.pow(power.unsigned_abs());
        if power >= 0 { Self::ratio(size, 1) } else { Self::ratio(1, size) }
    }

    pub(super) fn times(self, other: Self) -> Self {
        let (g, h) = (gcd(self.num, other.den), gcd(other.num, self.den));
        let exact = (self.num / g).checked_mul(other.num / h).zip((self.den / h).checked_mul(other.den / g));
        let (num, den, spill) = match exact {
            Some((num, den)) => (num, den, 1.0),
            None => (1, 1, self.fraction() * other.fraction()),
        };
        Self { num, den, pi: self.pi.saturating_add(other.pi), loose: self.loose * other.loose * spill }
    }

    pub(super) fn inverse(self) -> Self {
        Self { num: self.den, den: self.num, pi: -self.pi, loose: 1.0 / self.loose }
    }

    pub(super) fn power(self, exponent: Exponent) -> Self {
        if exponent.denominator() != 1 || exponent.numerator().unsigned_abs() > 200 {
            return Self { loose: self.factor().powf(exponent.value()), ..Self::ONE };
        }
        let base = if exponent.numerator() < 0 { self.inverse() } else { self };
        (0..exponent.numerator().unsigned_abs()).fold(Self::ONE, |product, _| product.times(base))
    }

    /// num/den, rounded.
    fn fraction(self) -> f64 {
        Double::from_integer(self.num).over(Double::from_integer(self.den)).hi
    }

    fn double(self) -> Double {
        // pi to 32 digits: the double nearest to it and the double nearest to the rest (Abramowitz & Stegun, table 1.1).
        const PI: Double = Double { hi: std::f64::consts::PI, lo: 1.224_646_799_147_353_2e-16 };
        let mut product = Double::from_integer(self.num).over(Double::from_integer(self.den));
        for _ in 0..self.pi.unsigned_abs().min(1000) {
            product = if self.pi > 0 { product.times(PI) } else { product.over(PI) };
        }
        product.times(Double::from(self.loose))
    }

    /// The factor, rounded once.
    pub(super) fn factor(self) -> f64 {
        self.double().hi
    }

    /// value * factor + offset, rounded once.
    pub(super) fn apply(self, value: f64, offset: Self) -> f64 {
        let exact = Double::from(value).times(self.double()).plus(offset.shift());
        exact.or(value * self.factor() + offset.shift().hi)
    }

    /// (value - offset) / factor, rounded once.
    pub(super) fn undo(self, value: f64, offset: Self) -> f64 {
        let shift = offset.shift();
        let minus = Double { hi: -shift.hi, lo: -shift.lo };
        let exact = Double::from(value).plus(minus).over(self.double());
        exact.or((value - shift.hi) / self.factor())
    }

    /// As an offset: a numerator of zero stands for none.
    fn shift(self) -> Double {
        if self.num == 0 { Double::from(0.0) } else { self.double() }
    }
}

/// An unevaluated sum hi + lo of two doubles, about 32 digits (Dekker, Numer. Math. 18 (1971) 224-242).
#[derive(Debug, Clone, Copy)]
struct Double {
    hi: f64,
    lo: f64,
}

impl From<f64> for Double {
    fn from(hi: f64) -> Self {
        Self { hi, lo: 0.0 }
    }
}

impl Double {
    fn from_integer(n: u128) -> Self {
        let hi = n as f64;
        // hi may lie above n by rounding.
        let back = hi as u128;
        let lo = if back > n { -((back - n) as f64) } else { (n - back) as f64 };
        Self { hi, lo }
    }

    fn renormal(hi: f64, lo: f64) -> Self {
        let sum = hi + lo;
        Self { hi: sum, lo: lo - (sum - hi) }
    }

    fn plus(self, other: Self) -> Self {
        let sum = self.hi + other.hi;
        let back = sum - self.hi;
        let error = (self.hi - (sum - back)) + (other.hi - back);
        Self::renormal(sum, error + self.lo + other.lo)
    }

    fn times(self, other: Self) -> Self {
        let product = self.hi * other.hi;
        let error = self.hi.mul_add(other.hi, -product);
        Self::renormal(product, error + self.hi * other.lo + self.lo * other.hi)
    }

    fn over(self, other: Self) -> Self {
        let quotient = self.hi / other.hi;
        let rest = (-quotient).mul_add(other.hi, self.hi) + self.lo - quotient * other.lo;
        Self::renormal(quotient, rest / other.hi)
    }

    /// The rounded value; the plain one where the error terms overflowed.
    fn or(self, plain: f64) -> f64 {
        if self.hi.is_finite() { self.hi } else { plain }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn fractions_too_long_go_over_into_a_plain_factor() {
        let tiny = Scale::ten_to(-30);
        let product = tiny.times(tiny).times(tiny);
        assert!((product.factor() / 1e-90 - 1.0).abs() < 1e-15);
        let back = product.times(Scale::ten_to(30)).times(Scale::ten_to(30));
        assert!((back.factor() / 1e-30 - 1.0).abs() < 1e-15);
    }

    #[test]
    fn fractional_powers() {
        let e = Exponent::new(1, 2).expect("in range");
        assert_eq!(Scale::ratio(3600, 1).power(e).factor(), 60.0);
        let e = Exponent::new(-3, 1).expect("in range");
        assert_eq!(Scale::ratio(2, 3).power(e), Scale::ratio(27, 8));
    }

    #[test]
    fn half_a_turn_is_pi() {
        let degree = Scale::with_pi(1, 180);
        let none = Scale::ratio(0, 1);
        assert_eq!(degree.apply(180.0, none), std::f64::consts::PI);
        assert_eq!(degree.undo(std::f64::consts::FRAC_PI_2, none), 90.0);
    }
}
