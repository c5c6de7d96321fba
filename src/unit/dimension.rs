//! Exponents of the seven SI base units, as exact fractions.

use std::fmt;
use thiserror::Error;

/// An exponent that is too large, or too fine a fraction, for a [`Dimension`].
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[error("the exponent of a unit is out of range")]
pub struct ExponentRange;

/// A reduced fraction with positive denominator.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Exponent {
    numerator: i16,
    denominator: i16,
}

impl Default for Exponent {
    fn default() -> Self {
        Self::ZERO
    }
}

impl Exponent {
    const ZERO: Self = Self::whole(0);

    const fn whole(n: i8) -> Self {
        Self { numerator: n as i16, denominator: 1 }
    }

    /// The fraction numerator / denominator in lowest terms.
    ///
    /// # Errors
    /// [`ExponentRange`] for a denominator of zero or a part beyond 16 bits after reduction.
    pub fn new(numerator: i64, denominator: i64) -> Result<Self, ExponentRange> {
        if denominator == 0 || numerator == i64::MIN || denominator == i64::MIN {
            return Err(ExponentRange);
        }
        let shared = gcd(numerator.unsigned_abs(), denominator.unsigned_abs()) as i64;
        let sign = denominator.signum();
        let part = |n: i64| i16::try_from(sign * n / shared).map_err(|_| ExponentRange);
        Ok(Self { numerator: part(numerator)?, denominator: part(denominator)? })
    }

    /// The fraction with the smallest denominator (at most 1000) that equals a number within its rounding:
    /// 0.42 gives 21/50, 2.0/3.0 gives 2/3; `None` if there is none.
    pub fn from_f64(value: f64) -> Option<Self> {
        if !value.is_finite() || value.abs() > f64::from(i16::MAX) {
            return None;
        }
        // Continued fraction; four roundings of slack, for an exponent may itself be computed (n/(n + 1)).
        let slack = 4.0 * f64::EPSILON * value.abs();
        let (mut p0, mut q0, mut p1, mut q1) = (1i64, 0i64, value.floor() as i64, 1i64);
        let mut rest = value - value.floor();
        for _ in 0..40 {
            if (value - p1 as f64 / q1 as f64).abs() <= slack {
                return Self::new(p1, q1).ok();
            }
            if rest <= 0.0 {
                return None;
            }
            let inverse = 1.0 / rest;
            let digit = inverse.floor();
            rest = inverse - digit;
            if digit > 1000.0 {
                return None;
            }
            let digit = digit as i64;
            (p0, q0, p1, q1) = (p1, q1, digit * p1 + p0, digit * q1 + q0);
            if q1 > 1000 {
                return None;
            }
        }
        None
    }

    /// The numerator, with the sign.
    pub fn numerator(self) -> i16 {
        self.numerator
    }

    /// The denominator, positive.
    pub fn denominator(self) -> i16 {
        self.denominator
    }

    /// As a floating-point number.
    pub fn value(self) -> f64 {
        f64::from(self.numerator) / f64::from(self.denominator)
    }

    fn plus(self, other: Self) -> Result<Self, ExponentRange> {
        let [a, b, c, d] = [self.numerator, self.denominator, other.numerator, other.denominator].map(i64::from);
        Self::new(a * d + c * b, b * d)
    }

    pub(crate) fn times(self, other: Self) -> Result<Self, ExponentRange> {
        let [a, b, c, d] = [self.numerator, self.denominator, other.numerator, other.denominator].map(i64::from);
        Self::new(a * c, b * d)
    }

    fn negated(self) -> Result<Self, ExponentRange> {
        Self::new(-i64::from(self.numerator), i64::from(self.denominator))
    }
}

/// `2`, `0.42`, `(1/3)`: as it is written behind `^`.
impl fmt::Display for Exponent {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut rest = self.denominator;
        for prime in [2, 5] {
            while rest % prime == 0 {
                rest /= prime;
            }
        }
        match (self.denominator, rest) {
            (1, _) => write!(f, "{}", self.numerator),
            (_, 1) => write!(f, "{}", self.value()),
            _ => write!(f, "({}/{})", self.numerator, self.denominator),
        }
    }
}

pub(crate) fn gcd(a: u64, b: u64) -> u64 {
    if b == 0 { a.max(1) } else { gcd(b, a % b) }
}

const SYMBOLS: [&str; 7] = ["kg", "m", "s", "A", "K", "mol", "cd"];

/// Exponents of the seven SI base units.
///
/// ```
/// use spanwise::unit::Dimension;
/// let force = Dimension::MASS.mul(Dimension::LENGTH)?.div(Dimension::TIME.powi(2)?)?;
/// assert_eq!(force.to_string(), "kg m/s^2");
/// assert_eq!(force.describe(), "N (force)");
/// # Ok::<(), spanwise::unit::ExponentRange>(())
/// ```
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Dimension {
    exponents: [Exponent; 7],
}

impl Dimension {
    /// Of a pure number.
    pub const NONE: Self = Self::whole([0; 7]);
    /// kg
    pub const MASS: Self = Self::whole([1, 0, 0, 0, 0, 0, 0]);
    /// m
    pub const LENGTH: Self = Self::whole([0, 1, 0, 0, 0, 0, 0]);
    /// s
    pub const TIME: Self = Self::whole([0, 0, 1, 0, 0, 0, 0]);
    /// A
    pub const CURRENT: Self = Self::whole([0, 0, 0, 1, 0, 0, 0]);
    /// K
    pub const TEMPERATURE: Self = Self::whole([0, 0, 0, 0, 1, 0, 0]);
    /// mol
    pub const AMOUNT: Self = Self::whole([0, 0, 0, 0, 0, 1, 0]);
    /// cd
    pub const LUMINOUS_INTENSITY: Self = Self::whole([0, 0, 0, 0, 0, 0, 1]);

    pub(crate) const fn whole(n: [i8; 7]) -> Self {
        let mut exponents = [Exponent::ZERO; 7];
        let mut i = 0;
        while i < 7 {
            exponents[i] = Exponent::whole(n[i]);
            i += 1;
        }
        Self { exponents }
    }

    /// Exponents of kg, m, s, A, K, mol, cd.
    pub fn exponents(&self) -> &[Exponent; 7] {
        &self.exponents
    }

    /// Whether this is the dimension of a pure number.
    pub fn is_none(self) -> bool {
        self == Self::NONE
    }

    fn combine(
        self,
        other: Self,
        f: impl Fn(Exponent, Exponent) -> Result<Exponent, ExponentRange>,
    ) -> Result<Self, ExponentRange> {
        let mut exponents = self.exponents;
        for (a, b) in exponents.iter_mut().zip(other.exponents) {
            *a = f(*a, b)?;
        }
        Ok(Self { exponents })
    }

    /// Dimension of a product.
    ///
    /// # Errors
    /// [`ExponentRange`] if an exponent leaves the range of [`Exponent`]; the same for all below.
    // Named like the operator on purpose; the operator itself could not report the error.
    #[allow(clippy::should_implement_trait)]
    pub fn mul(self, other: Self) -> Result<Self, ExponentRange> {
        self.combine(other, Exponent::plus)
    }

    /// Dimension of a quotient.
    #[allow(clippy::should_implement_trait, missing_docs)]
    pub fn div(self, other: Self) -> Result<Self, ExponentRange> {
        self.combine(other, |a, b| a.plus(b.negated()?))
    }

    /// Dimension of an integer power.
    pub fn powi(self, n: i32) -> Result<Self, ExponentRange> {
        self.powr(n, 1)
    }

    /// Dimension of a power with a fraction as exponent.
    pub fn powr(self, numerator: i32, denominator: i32) -> Result<Self, ExponentRange> {
        self.power(Exponent::new(numerator.into(), denominator.into())?)
    }

    /// Dimension of a power.
    pub fn power(self, exponent: Exponent) -> Result<Self, ExponentRange> {
        self.combine(self, |a, _| a.times(exponent))
    }

    /// Dimension of a power whose exponent is a computed number, taken as the fraction it stands for
    /// ([`Exponent::from_f64`]).
    pub fn powf(self, exponent: f64) -> Result<Self, ExponentRange> {
        if self.is_none() {
            return Ok(self);
        }
        self.power(Exponent::from_f64(exponent).ok_or(ExponentRange)?)
    }

    /// The dimension for people: usual unit and what it measures where there is a name,
    /// `N/m (force per length)`, else the base units.
    pub fn describe(self) -> String {
        if self.is_none() {
            return "1 (pure number)".into();
        }
        match self.usual() {
            Some((unit, "")) => unit.into(),
            Some((unit, name)) => format!("{unit} ({name})"),
            None => self.to_string(),
        }
    }

    /// The usual coherent SI unit: `N/m`, else base units.
    pub fn usual_unit(self) -> String {
        self.usual().map_or_else(|| self.to_string(), |(unit, _)| unit.into())
    }

    fn usual(self) -> Option<(&'static str, &'static str)> {
        USUAL.iter().find(|(n, _, _)| Self::whole(*n) == self).map(|(_, unit, name)| (*unit, *name))
    }
}

/// Exponents of kg, m, s, A, K, mol, cd; usual unit; what it measures.
/// Coherent derived units after The International System of Units (SI Brochure, 9th ed.), tables 4 to 6.
#[rustfmt::skip]
const USUAL: &[([i8; 7], &str, &str)] = &[
    ([0, 1, 0, 0, 0, 0, 0], "m", "length"),
    ([0, 2, 0, 0, 0, 0, 0], "m^2", "area"),
    ([0, 3, 0, 0, 0, 0, 0], "m^3", "volume"),
    ([0, 4, 0, 0, 0, 0, 0], "m^4", "second moment of area"),
    ([0, -1, 0, 0, 0, 0, 0], "1/m", "per length"),
    ([1, 0, 0, 0, 0, 0, 0], "kg", "mass"),
    ([0, 0, 1, 0, 0, 0, 0], "s", "time"),
    ([0, 0, 0, 1, 0, 0, 0], "A", "electric current"),
    ([0, 0, 0, 0, 1, 0, 0], "K", "temperature"),
    ([0, 0, 0, 0, 0, 1, 0], "mol", "amount of substance"),
    ([0, 0, 0, 0, 0, 0, 1], "cd", "luminous intensity"),
    ([0, 0, -1, 0, 0, 0, 0], "1/s", "frequency or rate"),
    ([0, 1, -1, 0, 0, 0, 0], "m/s", "velocity"),
    ([0, 1, -2, 0, 0, 0, 0], "m/s^2", "acceleration"),
    ([0, 2, -1, 0, 0, 0, 0], "m^2/s", "diffusivity or kinematic viscosity"),
    ([0, 3, -1, 0, 0, 0, 0], "m^3/s", "volume flow"),
    ([1, 0, -1, 0, 0, 0, 0], "kg/s", "mass flow"),
    ([1, -3, 0, 0, 0, 0, 0], "kg/m^3", "density"),
    ([1, -1, 0, 0, 0, 0, 0], "kg/m", "mass per length"),
    ([1, 1, -2, 0, 0, 0, 0], "N", "force"),
    ([1, 0, -2, 0, 0, 0, 0], "N/m", "force per length"),
    ([1, -1, -2, 0, 0, 0, 0], "Pa", "pressure or stress"),
    ([1, -2, -2, 0, 0, 0, 0], "N/m^3", "force per volume"),
    ([1, 2, -2, 0, 0, 0, 0], "N m", "moment or energy"),
    ([1, 3, -2, 0, 0, 0, 0], "N m^2", "bending stiffness"),
    ([1, 2, -3, 0, 0, 0, 0], "W", "power"),
    ([1, 1, -3, 0, 0, 0, 0], "W/m", "power per length"),
    ([1, 0, -3, 0, 0, 0, 0], "W/m^2", "heat flux"),
    ([1, -1, -3, 0, 0, 0, 0], "W/m^3", "power per volume"),
    ([1, 1, -3, 0, -1, 0, 0], "W/(m K)", "thermal conductivity"),
    ([1, 0, -3, 0, -1, 0, 0], "W/(m^2 K)", "heat transfer coefficient"),
    ([1, 2, -3, 0, -1, 0, 0], "W/K", "thermal conductance"),
    ([0, 2, -2, 0, -1, 0, 0], "J/(kg K)", "specific heat capacity"),
    ([1, 2, -2, 0, -1, 0, 0], "J/K", "heat capacity"),
    ([0, 2, -2, 0, 0, 0, 0], "J/kg", "specific energy"),
    ([0, 0, 0, 0, -1, 0, 0], "1/K", "per temperature"),
    ([0, -1, 0, 0, 1, 0, 0], "K/m", "temperature gradient"),
    ([1, -1, -1, 0, 0, 0, 0], "Pa s", "dynamic viscosity"),
    ([0, -3, 0, 0, 0, 1, 0], "mol/m^3", "concentration"),
    ([0, -2, -1, 0, 0, 1, 0], "mol/(m^2 s)", "molar flux"),
    ([1, 2, -2, 0, 0, -1, 0], "J/mol", "molar energy"),
    ([1, 2, -2, 0, -1, -1, 0], "J/(mol K)", "molar heat capacity"),
    ([0, 0, 1, 1, 0, 0, 0], "C", "electric charge"),
    ([1, 2, -3, -1, 0, 0, 0], "V", "electric potential"),
    ([1, 1, -3, -1, 0, 0, 0], "V/m", "electric field"),
    ([1, 2, -3, -2, 0, 0, 0], "Ω", "electric resistance"),
    ([-1, -2, 3, 2, 0, 0, 0], "S", "electric conductance"),
    ([-1, -3, 3, 2, 0, 0, 0], "S/m", "electric conductivity"),
    ([-1, -2, 4, 2, 0, 0, 0], "F", "capacitance"),
    ([1, 2, -2, -2, 0, 0, 0], "H", "inductance"),
    ([1, 0, -2, -1, 0, 0, 0], "T", "magnetic flux density"),
    ([1, 2, -2, -1, 0, 0, 0], "Wb", "magnetic flux"),
];

#[cfg(test)]
pub(super) fn usual_units() -> impl Iterator<Item = (&'static str, Dimension)> {
    USUAL.iter().map(|(n, unit, _)| (*unit, Dimension::whole(*n)))
}

/// Base units, `kg m/s^2`; `1` for a pure number.
impl fmt::Display for Dimension {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let list = |positive: bool| -> Vec<String> {
            SYMBOLS
                .iter()
                .zip(self.exponents)
                .filter(|(_, e)| e.numerator != 0 && (e.numerator > 0) == positive)
                .map(|(symbol, e)| {
                    let e = if positive { Ok(e) } else { e.negated() };
                    match e {
                        Ok(e) if e == Exponent::whole(1) => (*symbol).into(),
                        Ok(e) => format!("{symbol}^{e}"),
                        // -(-32768) does not fit; such an exponent is only ever shown in a message.
                        Err(_) => format!("{symbol}^32768"),
                    }
                })
                .collect()
        };
        let (over, under) = (list(true), list(false));
        let over = if over.is_empty() { "1".into() } else { over.join(" ") };
        match under.len() {
            0 => write!(f, "{over}"),
            1 => write!(f, "{over}/{}", under[0]),
            _ => write!(f, "{over}/({})", under.join(" ")),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exponents_are_exact_fractions() {
        for (value, fraction) in [
            (0.42, (21, 50)),
            (2.0 / 3.0, (2, 3)),
            (-0.5, (-1, 2)),
            (7.0, (7, 1)),
            (-3.0, (-3, 1)),
            (0.0, (0, 1)),
            (1.0 / 1.42, (50, 71)),
            (0.001, (1, 1000)),
            (123.456, (15432, 125)),
        ] {
            let e = Exponent::from_f64(value).expect("a fraction");
            assert_eq!((e.numerator, e.denominator), fraction, "{value}");
        }
        for value in [std::f64::consts::PI, f64::NAN, f64::INFINITY, 1e9, 1e-9] {
            assert_eq!(Exponent::from_f64(value), None, "{value}");
        }
        assert_eq!(Exponent::new(1, 0), Err(ExponentRange));
        assert_eq!(Exponent::new(40_000, 1), Err(ExponentRange));
        assert_eq!(Exponent::new(40_000, -2), Exponent::new(-20_000, 1));
    }

    #[test]
    fn powers_undo_each_other_and_overflow_is_an_error() {
        let e = Exponent::new(21, 50).expect("in range");
        let d = Dimension::TIME.power(e).expect("in range");
        assert_eq!(d.to_string(), "s^0.42");
        assert_eq!(d.powr(50, 21), Ok(Dimension::TIME));
        assert_eq!(Dimension::MASS.powi(30_000).and_then(|d| d.powi(2)), Err(ExponentRange));
        assert_eq!(Dimension::MASS.powf(std::f64::consts::E), Err(ExponentRange));
        assert_eq!(Dimension::NONE.powf(std::f64::consts::E), Ok(Dimension::NONE));
    }

    #[test]
    fn prints_base_units_and_names() {
        let cases = [
            ([0; 7], "1", "1 (pure number)"),
            ([1, 0, -2, 0, 0, 0, 0], "kg/s^2", "N/m (force per length)"),
            ([1, 1, -3, 0, -1, 0, 0], "kg m/(s^3 K)", "W/(m K) (thermal conductivity)"),
            ([0, 0, 0, 0, -1, 0, 0], "1/K", "1/K (per temperature)"),
            ([2, 0, 0, 0, 0, 0, -1], "kg^2/cd", "kg^2/cd"),
        ];
        for (n, display, describe) in cases {
            let d = Dimension::whole(n);
            assert_eq!(d.to_string(), display);
            assert_eq!(d.describe(), describe);
        }
        let third = Dimension::LENGTH.powr(-1, 3).expect("in range");
        assert_eq!(third.to_string(), "1/m^(1/3)");
    }
}
