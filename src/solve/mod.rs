//! Drivers: from a model to a solution.

use crate::error::Result;
use crate::field::Field;
use crate::model::Model;
use crate::quantity::Estimate;

/// Called between passes and now and then within; returning false stops the solve with `Error::Interrupted`.
pub type Watch<'a> = &'a (dyn Fn(Progress) -> bool + Sync);

/// How far a solve has come.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Progress {
    /// Pass, from 1.
    pub pass: usize,
    /// Elements of the mesh at hand.
    pub elements: usize,
    /// Elements done in this pass.
    pub done: usize,
}

/// What is asked of a solve.
#[derive(Clone, Copy)]
pub struct Settings<'a> {
    /// Error allowed, relative.
    pub relative: f64,
    /// Largest number of elements.
    pub most_elements: usize,
    /// Progress and interruption.
    pub watch: Option<Watch<'a>>,
}

/// A solution with everything that its error bars rest on.
pub struct Solution {
    /// The answer: the enriched solution (n + 4 nodes an element).
    pub field: Field,
}

impl Solution {
    /// A number made from the solution, with its bar: `number` is evaluated on the answer and on the
    /// companion solutions (fewer nodes, perturbed data), and returns the value with the rounding error that
    /// its own arithmetic may have added.
    pub fn estimate(&self, number: impl Fn(&Field) -> Result<Estimate>) -> Result<Estimate> {
        let _ = number;
        todo!()
    }
}

/// Solves a boundary-value problem.
pub fn boundary(model: &dyn Model, settings: &Settings<'_>) -> Result<Solution> {
    let _ = (model, settings);
    todo!()
}
