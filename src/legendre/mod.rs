//! Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients.
//!
//! P_k is the Legendre polynomial of degree k with P_k(1) = 1. A polynomial of degree n - 1 is held either
//! by its *nodal* values at the n nodes of a [`Rule`] or by its *modal* coefficients c_k in
//! sum_k c_k P_k; [`to_modal`] and [`to_nodal`] lead from one to the other.

/// Double-double numbers.
mod double;
/// Inner nodes seen from an end.
mod zero;

/// Short rules: Newton's iteration.
mod newton;

/// Zeros of the Bessel functions J_0 and J_1.
mod bessel;
/// Long rules: expansions, at constant cost per node.
mod expansion;

/// The rules.
mod rule;
/// Sums of Legendre polynomials.
mod series;
/// Nodal values to modal coefficients and back.
mod transform;

pub use rule::{End, Kind, Rule, gauss, lobatto, radau};
pub(crate) use series::fill_values;
pub use series::{differentiate_series, integrate_series, series, series_with_slope, values};
pub use transform::{to_modal, to_nodal};
