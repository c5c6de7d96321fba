//! Boundary-value problems along one coordinate, to spectral accuracy, every number with an error bar.
//!
//! The modules stand in reading order: a module imports only modules listed above it
//! (`tests/import_order.rs` holds that).
#![warn(missing_docs)]
#![forbid(unsafe_code)]

/// What can go wrong, one variant per cause, each carrying its numbers.
pub mod error;
/// Every numerical tolerance of the crate, named once, with the reason for its size.
pub mod tolerance;

/// Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients.
pub mod legendre;
/// Matrices on the reference interval [-1, 1]: differentiation, integration, interpolation, mass.
pub mod operator;

/// Piecewise polynomial functions on a mesh: value, derivative, integral.
pub mod field;
/// Elements along the span and the breaks between them.
pub mod mesh;

/// Where to put elements: seeds, indicators, refinement plans. Plans only, never solves.
pub mod adapt;
/// What the answer rests on: error bars, residual, decay, balance, the second route.
pub mod evidence;
/// Linear algebra of one pass: condense an element, chain the elements, close with the conditions.
pub mod linear;
/// The problem as the solver sees it: unknowns, orders, equations, conditions, and their derivatives.
pub mod model;
/// Problems from Rust closures.
pub mod problem;
/// Asked numbers: values, extremes, places, integrals, each with its bar.
pub mod quantity;
/// Drivers: from a model to a solution.
pub mod solve;

/// The command line: arguments, streams, colours, progress, exit codes.
#[cfg(feature = "cli")]
pub mod cli;
/// Formulas: text, tree, derivative, fast evaluation.
#[cfg(feature = "sheet")]
pub mod formula;
/// Results as text, JSON, page, tables and plots. Pure functions; display units are applied here only.
#[cfg(feature = "record")]
pub mod record;
/// The calculation sheet: from a file to a located, checked model in SI units.
#[cfg(feature = "sheet")]
pub mod sheet;
/// Physical dimensions and units of measurement.
#[cfg(feature = "sheet")]
pub mod unit;
