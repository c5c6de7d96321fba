//! Inner nodes of a rule, as seen from one end at angle 0: x = cos(angle).

use super::double::Double;

/// Which ends of the interval are nodes themselves, seen from the end the angle is counted from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Ends {
    pub(crate) near: bool,
    pub(crate) far: bool,
}

/// An inner node.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Zero {
    /// Angle from the near end.
    pub(crate) angle: Double,
    /// Distance 1 - cos(angle) from the near end.
    pub(crate) distance: Double,
    /// Quadrature weight.
    pub(crate) weight: Double,
}
