//! How often an absolute temperature is in an expression.
//!
//! A value in degC or degF is absolute, a value in K may be either: `T(0 m) = 300 K` names a temperature,
//! `T(0 m) - T(L) = 5 K` a difference. In a sound sum the count comes to 1 (a temperature) or 0 (a difference); an
//! equation must come to 0. Otherwise 273.15 K slip in without a sign.

/// Signed count of absolute temperatures.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Absolute {
    /// Of values in degC or degF; not a number where that cannot be said.
    fixed: f64,
    /// Of unknowns declared in K: all of them are temperatures, or all differences.
    kelvin: f64,
    /// Of data in K, each on its own a temperature or a difference: least and most.
    free: [f64; 2],
}

impl Absolute {
    /// No temperature, or one that is no longer one: a power, a product.
    pub const NONE: Self = Self { fixed: 0.0, kelvin: 0.0, free: [0.0; 2] };
    /// A value in degC or degF.
    pub const CELSIUS: Self = Self { fixed: 1.0, ..Self::NONE };
    /// An unknown declared in K.
    pub const KELVIN: Self = Self { kelvin: 1.0, ..Self::NONE };
    /// A datum in K.
    pub const DATUM: Self = Self { free: [0.0, 1.0], ..Self::NONE };
    /// Where it cannot be said.
    pub const UNCLEAR: Self = Self { fixed: f64::NAN, ..Self::NONE };

    pub fn plus(self, other: Self) -> Self {
        Self {
            fixed: self.fixed + other.fixed,
            kelvin: self.kelvin + other.kelvin,
            free: [self.free[0] + other.free[0], self.free[1] + other.free[1]],
        }
    }

    /// Of the expression times a pure number.
    pub fn times(self, c: f64) -> Self {
        let [low, high] = self.free.map(|f| c * f);
        Self { fixed: c * self.fixed, kelvin: c * self.kelvin, free: [low.min(high), low.max(high)] }
    }

    pub fn minus(self, other: Self) -> Self {
        self.plus(other.times(-1.0))
    }

    /// Of a product with something that is no pure number.
    pub fn in_product(self) -> Self {
        if self == Self::NONE { Self::NONE } else { Self::UNCLEAR }
    }

    /// Of a value that may be one or the other.
    pub fn either(self, other: Self) -> Self {
        if self == other { self } else { Self::UNCLEAR }
    }

    /// Whether it is a temperature by its units alone: may be printed in degC.
    pub fn is_temperature(self) -> bool {
        (self.fixed - 1.0).abs() <= 1e-9
    }

    /// Whether no temperature is in it by its units alone.
    pub fn is_difference(self) -> bool {
        self.fixed.abs() <= 1e-9
    }

    /// Distance of the count from [-reach, reach], whatever the values in K are; 0 where it cannot be said.
    fn beyond(self, reach: f64) -> f64 {
        let outside = |s: f64| {
            let base = self.fixed + s * self.kelvin;
            (base + self.free[0] - reach).max(-reach - base - self.free[1]).max(0.0)
        };
        let beyond = outside(0.0).min(outside(1.0));
        if beyond.is_nan() { 0.0 } else { beyond }
    }

    /// Whether left minus right of an equation can come to 0.
    pub fn balances(self) -> bool {
        self.fixed.is_nan() || self.beyond(0.0) <= 1e-9
    }

    /// Whether a sum is neither a temperature nor a difference: `20 degC + 5 degC`.
    pub fn adds_up(self) -> bool {
        !self.fixed.is_nan() && self.beyond(1.0) > 1e-9
    }

    /// In words.
    pub fn describe(self) -> &'static str {
        match self {
            _ if self.is_temperature() => "an absolute temperature",
            _ if self.is_difference() => "a difference of temperatures",
            _ => "a sum of absolute temperatures",
        }
    }
}

#[cfg(test)]
mod tests {
    use super::Absolute as A;

    #[test]
    fn counts_come_to_a_temperature_or_a_difference() {
        let (t, u, d) = (A::CELSIUS, A::KELVIN, A::DATUM);
        assert!(t.minus(t).balances() && t.minus(d).balances() && u.minus(t).balances());
        assert!(t.plus(d).minus(t).balances(), "20 degC + 5 K = T");
        assert!(!t.minus(t).minus(t).balances(), "T - T = 5 degC");
        assert!(!u.minus(u).minus(t).balances(), "the same for an unknown in K");
        assert!(u.minus(t.minus(t)).balances(), "an excess temperature");
        assert!(t.plus(t).times(0.5).minus(t).balances(), "a mean");
        assert!(!t.minus(A::NONE).balances(), "T = 0");
        assert!(t.plus(t).adds_up() && !t.minus(t).adds_up() && !t.plus(u).adds_up());
        assert!(!t.times(-1.0).adds_up() && !A::UNCLEAR.adds_up() && A::UNCLEAR.balances());
    }
}
