//! Formulas: text, tree, derivative, fast evaluation.
//!
//! A formula passes three forms: text, a syntax tree whose every part knows its place in the text
//! ([`syntax`]), and nodes of a [`graph`] in SI units, from which
//! derivatives are taken and a [`tape`] is compiled.

// The checked formula as a shared graph: simplification, total and partial derivatives.
pub mod graph;
// What formulas are evaluated with: plain numbers, and numbers with a running error bound.
pub mod number;
/// Random formulas for tests.
#[cfg(test)]
pub(crate) mod random;
// Text to syntax tree, with places.
pub mod syntax;
// Measured data: values between points.
pub mod table;
// Instruction lists: evaluation over many nodes at once.
pub mod tape;
