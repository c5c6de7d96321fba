//! Eigenproblems (A_0 + lambda A_1 + lambda^2 A_2)(u, p) = 0: what [`crate::solve`] needs to find, polish and count.
//!
//! [`pencil`] reads the coefficients of a model, [`dense`] makes matrices of them in the integrated basis and finds
//! candidates, [`block`] states one mode or an invariant subspace as a boundary-value problem, [`winding`]
//! counts.

pub(crate) mod block;
pub(crate) mod dense;
pub(crate) mod pencil;
pub(crate) mod pins;
pub(crate) mod winding;
