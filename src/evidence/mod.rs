//! What the answer rests on: error bars, residual, decay, balance, the second route.

/// Error bars from companion solutions.
pub(crate) mod bars;
/// Residual on a finer Gauss grid.
pub mod residual;
/// Second route: nodal values, differentiation matrices, one dense factorisation.
pub mod nodal;
/// Free motions and contradictions of a singular problem, in words.
pub(crate) mod singular;
