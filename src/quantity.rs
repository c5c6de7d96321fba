//! Asked numbers: values, extremes, places, integrals, each with its bar.

use crate::error::Result;
use crate::field::Field;
use crate::model::{Profile, Side};

/// A value and a bound for its error, in the same unit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Estimate {
    /// The value.
    pub value: f64,
    /// Bound meant to hold: |true - value| <= error.
    pub error: f64,
}

/// The largest or smallest value of a profile and where it is taken. The errors are those of rounding in
/// the evaluation on the field given; those of the field itself come in with `Solution::estimate`.
#[derive(Debug, Clone, PartialEq)]
pub struct Extreme {
    /// Where (the first place, if several share the value).
    pub place: Estimate,
    /// The value there.
    pub value: Estimate,
    /// Set if the place is a break and the value is a one-sided limit there.
    pub side: Option<Side>,
    /// Further places where the value is the same within rounding.
    pub ties: Vec<f64>,
}

/// Value of a profile at x; at a break from the side given.
pub fn value_at(field: &Field, profile: &dyn Profile, x: f64, side: Side) -> Result<Estimate> {
    let _ = (field, profile, x, side);
    todo!()
}

/// Largest value over [from, to], ends and one-sided limits at breaks included.
pub fn maximum(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Extreme> {
    let _ = (field, profile, from, to);
    todo!()
}

/// Smallest value, otherwise as [`maximum`].
pub fn minimum(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Extreme> {
    let _ = (field, profile, from, to);
    todo!()
}

/// Integral over [from, to] (to < from: negative).
pub fn integral(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Estimate> {
    let _ = (field, profile, from, to);
    todo!()
}

/// All places in [from, to] where the profile changes sign continuously, ascending.
pub fn roots(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Vec<Estimate>> {
    let _ = (field, profile, from, to);
    todo!()
}
