//! Small changes of all coefficients.

use crate::model::{Batch, ConditionValue, Linearised, Model};
use crate::tolerance;

/// A relative change of all coefficients, by which the sensitivity of the answer to the rounding of the
/// data is felt: every coefficient of an equation gets the factor 1 + size or 1 - size.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Perturbation {
    /// Relative size; 0 changes nothing.
    size: f64,
    /// Which signs: 0, 1, 2 alternate by a bit of the column's number, so that any two of eight neighbouring
    /// coefficients of an equation differ in one of the three; from 3 on by a hash that also differs from piece to piece.
    pattern: u32,
}

impl Perturbation {
    /// No change.
    pub const NONE: Self = Self { size: 0.0, pattern: 0 };
    /// Number of patterns that make a good sample.
    pub const PATTERNS: u32 = 4;

    /// A change of the usual size with one of the patterns.
    pub fn nudge(pattern: u32) -> Self {
        Self { size: tolerance::NUDGE, pattern }
    }

    fn sign(&self, piece: usize, row: usize, column: usize) -> f64 {
        let by_bits = self.pattern < 3;
        let parts = if by_bits { [0, row as u64, 0] } else { [piece as u64 + 1, row as u64, column as u64] };
        // splitmix64, one step per part
        let mut h = 2385 + u64::from(self.pattern);
        for part in parts {
            h = (h ^ part).wrapping_add(0x9E37_79B9_7F4A_7C15);
            h = (h ^ (h >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
            h = (h ^ (h >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
            h ^= h >> 31;
        }
        let bit = if by_bits { (column >> self.pattern) as u64 & 1 } else { 0 };
        if (h >> 63) ^ bit == 0 { 1.0 } else { -1.0 }
    }

    /// A coefficient changed by its size, or by as many times its known rounding error as the usual one is nudged.
    fn changed(&self, value: f64, bound: f64, sign: f64) -> f64 {
        let known = bound / (tolerance::ROUNDOFF * tolerance::DATA);
        value + sign * self.size * value.abs().max(known)
    }

    /// Changes the equations at the nodes of a batch.
    pub fn apply(&self, model: &dyn Model, batch: &Batch<'_>, equations: &mut Linearised) {
        if self.size == 0.0 {
            return;
        }
        let layout = model.layout();
        let (jets, constants, n) = (layout.jets(), layout.constants(), batch.x.len());
        let mut bounds = Linearised::default();
        bounds.reset(layout, n);
        if !model.equation_rounding(batch, &mut bounds) {
            bounds.reset(layout, n);
        }
        for row in 0..layout.unknowns() {
            let change = |values: &mut [f64], bounds: &[f64], column: usize| {
                let sign = self.sign(batch.piece, row, column);
                values.iter_mut().zip(bounds).for_each(|(v, b)| *v = self.changed(*v, *b, sign));
            };
            for jet in 0..jets {
                let at = (row * jets + jet) * n..(row * jets + jet + 1) * n;
                change(&mut equations.jets[at.clone()], &bounds.jets[at], jet);
            }
            for c in 0..constants {
                let at = (row * constants + c) * n..(row * constants + c + 1) * n;
                change(&mut equations.constants[at.clone()], &bounds.constants[at], jets + c);
            }
            let at = row * n..(row + 1) * n;
            change(&mut equations.residual[at.clone()], &bounds.residual[at], jets + constants);
        }
    }

    /// Changes a condition at the state it was evaluated at.
    pub fn apply_condition(
        &self,
        model: &dyn Model,
        index: usize,
        jets: &[f64],
        constants: &[f64],
        value: &mut ConditionValue,
    ) {
        if self.size == 0.0 {
            return;
        }
        let places = model.conditions()[index].places.len();
        let mut bounds = ConditionValue::default();
        bounds.reset(model.layout(), places);
        if !model.condition_rounding(index, jets, constants, &mut bounds) {
            bounds.reset(model.layout(), places);
        }
        let row = 1_000_000 + index;
        let entries = value.jets.iter_mut().chain(value.constants.iter_mut()).chain([&mut value.residual]);
        let known = bounds.jets.iter().chain(&bounds.constants).chain([&bounds.residual]);
        for (column, (entry, bound)) in entries.zip(known).enumerate() {
            *entry = self.changed(*entry, *bound, self.sign(0, row, column));
        }
    }
}
