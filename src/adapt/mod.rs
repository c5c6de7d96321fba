//! Where to put elements: seeds, indicators, refinement plans. Plans only, never solves.

/// Size of the unknowns and local characteristic exponents, from samples of the equations.
pub(crate) mod exponents;
/// First mesh: breaks, ladders towards layers, enough elements for oscillations.
pub(crate) mod seed;
/// What the Legendre coefficients of a solution say, and the next mesh.
pub(crate) mod refine;
