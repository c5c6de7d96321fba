//! Physical dimensions and units of measurement.

/// Exponents of the base units.
mod dimension;
/// Unit texts.
mod read;
/// Exact conversion factors.
mod scale;
/// Near misses.
mod suggest;
/// Symbols and prefixes.
mod table;

pub use dimension::{Dimension, Exponent, ExponentRange};
pub use read::{UnitError, scan};
pub use suggest::{mistaken, suggest};

use scale::Scale;

/// A unit as written, with its factor to SI and its dimension.
///
/// ```
/// use spanwise::unit::Unit;
/// let unit = Unit::parse("kN*m", true)?;
/// assert_eq!(unit.text, "kN m");
/// assert_eq!(unit.to_si(2.5), 2500.0);
/// assert_eq!(Unit::parse("degC", true)?.to_si(20.0), 293.15);
/// # Ok::<(), spanwise::unit::UnitError>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Unit {
    /// As written, cleaned up for print: `kN m`, `W/(m K)`.
    pub text: String,
    /// SI value of one unit.
    pub factor: f64,
    /// SI value of the unit's zero: 273.15 for degC, else 0.
    pub offset: f64,
    /// Its dimension.
    pub dimension: Dimension,
    scale: Scale,
    shift: Scale,
}

impl Unit {
    fn new(text: String, scale: Scale, shift: Scale, dimension: Dimension) -> Self {
        Self { text, factor: scale.factor(), offset: Scale::ONE.apply(0.0, shift), dimension, scale, shift }
    }

    /// The coherent SI unit of a dimension under its usual name: `N/m` for kg/s^2, `1` for a pure number.
    pub fn si(dimension: Dimension) -> Self {
        Self::new(dimension.usual_unit(), Scale::ONE, table::NO_OFFSET, dimension)
    }

    /// Reads a whole text as a unit; `explicit_star` allows `*` between symbols and blanks around signs, as in
    /// `unit = "kN*m"`.
    ///
    /// # Errors
    /// [`UnitError`] with the place in the text, and a hint where what was meant can be guessed.
    pub fn parse(text: &str, explicit_star: bool) -> Result<Self, UnitError> {
        read::whole(text, explicit_star)
    }

    /// Whether the unit's zero is not that of its SI unit: degC, degF.
    pub fn is_absolute(&self) -> bool {
        self.shift != table::NO_OFFSET
    }

    /// `value` in this unit, in SI: value * factor + offset, rounded once.
    pub fn to_si(&self, value: f64) -> f64 {
        self.scale.apply(value, self.shift)
    }

    /// An SI value in this unit: (value - offset) / factor, rounded once.
    pub fn from_si(&self, value: f64) -> f64 {
        self.scale.undo(value, self.shift)
    }

    /// An SI difference, such as an error bar, in this unit: the offset plays no part.
    pub fn difference_from_si(&self, difference: f64) -> f64 {
        self.scale.undo(difference, table::NO_OFFSET)
    }
}

#[cfg(test)]
mod tests;
