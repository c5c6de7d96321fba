//! Piecewise polynomial functions on a mesh: value, derivative, integral.

use crate::mesh::Mesh;

/// The unknown functions as piecewise polynomials, with the unknown constants.
#[derive(Debug, Clone)]
pub struct Field {
    /// The mesh it lives on.
    pub mesh: Mesh,
    /// Unknown constants.
    pub constants: Vec<f64>,
}
