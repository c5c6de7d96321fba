//! Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients.
//!
//! P_k is the Legendre polynomial of degree k with P_k(1) = 1. A polynomial of degree n - 1 is held either
//! by its *nodal* values at the n nodes of a [`Rule`] or by its *modal* coefficients c_k in
//! sum_k c_k P_k; [`to_modal`] and [`to_nodal`] lead from one to the other.

mod bessel;
mod double;
mod expansion;
mod rule;
mod series;
mod transform;
mod zeros;

pub use rule::{End, Kind, Rule, gauss, lobatto, radau};
pub(crate) use series::fill_values;
pub use series::{differentiate_series, integrate_series, series, series_with_slope, values};
pub use transform::{to_modal, to_nodal};
