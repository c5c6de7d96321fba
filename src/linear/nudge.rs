//! Small changes of all coefficients.

use crate::model::{ConditionValue, Layout, Linearised};
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

    fn factor(&self, piece: usize, row: usize, column: usize) -> f64 {
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
        if (h >> 63) ^ bit == 0 { 1.0 + self.size } else { 1.0 - self.size }
    }

    pub fn apply(&self, piece: usize, layout: &Layout, n: usize, equations: &mut Linearised) {
        if self.size == 0.0 {
            return;
        }
        let (jets, constants) = (layout.jets(), layout.constants());
        for row in 0..layout.unknowns() {
            let multiply = |values: &mut [f64], column: usize| {
                let factor = self.factor(piece, row, column);
                values.iter_mut().for_each(|v| *v *= factor);
            };
            for jet in 0..jets {
                multiply(&mut equations.jets[(row * jets + jet) * n..][..n], jet);
            }
            for c in 0..constants {
                multiply(&mut equations.constants[(row * constants + c) * n..][..n], jets + c);
            }
            multiply(&mut equations.residual[row * n..][..n], jets + constants);
        }
    }

    pub fn apply_condition(&self, index: usize, value: &mut ConditionValue) {
        if self.size == 0.0 {
            return;
        }
        let row = 1_000_000 + index;
        let entries = value.jets.iter_mut().chain(value.constants.iter_mut()).chain([&mut value.residual]);
        for (column, entry) in entries.enumerate() {
            *entry *= self.factor(0, row, column);
        }
    }
}
