//! Physical dimensions and units of measurement.

/// A unit as written, with its factor to SI and its dimension.
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
}

/// Exponents of the seven SI base units.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Dimension {
    // helper: fractions
}
