//! Matrices on the reference interval [-1, 1]: differentiation, integration, interpolation, mass.
//!
//! They act on the values of a polynomial at nodes. Rows belong to the points where the result is taken,
//! columns to the nodes of the argument.

mod integral;
mod mass;
mod nodal;

pub use integral::{integration, integration_at};
pub use mass::{lumped, mass};
pub use nodal::{barycentric_weights, differentiation, differentiation_between, interpolation};
