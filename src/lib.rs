//! Boundary-value problems along one coordinate, to spectral accuracy, every number with an error bar.
//!
//! The modules stand in reading order: a module imports only modules listed above it
//! (`tests/import_order.rs` holds that).
#![warn(missing_docs)]
#![forbid(unsafe_code)]

// What can go wrong, one variant per cause, each carrying its numbers.
pub mod error;
// Every numerical tolerance of the crate, named once, with the reason for its size.
pub mod tolerance;

// Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients.
pub mod legendre;
// Matrices on the reference interval [-1, 1]: differentiation, integration, interpolation, mass.
pub mod operator;

// Elements along the span and the breaks between them.
pub mod mesh;
// The problem as the solver sees it: unknowns, orders, equations, conditions, and their derivatives.
pub mod model;
// Piecewise polynomial functions on a mesh: value, derivative, size, noise.
pub mod field;
// Asked numbers on a field: values, extremes, places, integrals, each with the rounding of its evaluation.
pub mod quantity;

// Linear algebra of one pass: condense an element, chain the elements, close with the conditions.
pub(crate) mod linear;
// Damped Newton iteration: a nonlinear model as a sequence of linear ones.
pub(crate) mod newton;
// Where to put elements: seeds, indicators, refinement plans. Plans only, never solves.
pub(crate) mod adapt;
// Eigenproblems: the pencil, its dense form, blocks of modes as boundary-value problems, counts.
pub(crate) mod spectrum;
// What the answer rests on: error bars, residual, second route, explanations of singular problems.
pub mod evidence;
// Drivers: from a model to a solution.
pub mod solve;
// Problems from Rust closures.
pub mod problem;

// Physical dimensions and units of measurement.
#[cfg(feature = "sheet")]
pub mod unit;
// Formulas: text, tree, derivative, fast evaluation.
#[cfg(feature = "sheet")]
pub mod formula;
// The calculation sheet: from a file to a located, checked model in SI units.
#[cfg(feature = "sheet")]
pub mod sheet;
// Results as text, JSON, page, tables and plots. Pure functions; display units are applied here only.
#[cfg(feature = "record")]
pub mod record;
// The command line: arguments, streams, colours, progress, exit codes.
#[cfg(feature = "cli")]
pub mod cli;
