//! Linear functionals that fix the scale of a mode, or the basis of an invariant subspace.

use super::pencil::Pencil;
use crate::field::Field;
use crate::model::Side;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// Where a new point would have to be made, a pin must be this much better than one at an end of the span.
const PREFERENCE: f64 = 4.0;
/// Samples inside the span.
const SAMPLES: usize = 24;

/// The functional weight * u_i^(k)(x).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Pin {
    /// Where.
    pub x: f64,
    /// Side at a break.
    pub side: Side,
    /// Unknown.
    pub unknown: usize,
    /// Derivative, below the order of the unknown.
    pub order: usize,
    /// 1 / size of it.
    pub weight: f64,
}

impl Pin {
    /// The functional of a field in the layout of the pencil.
    pub fn of(&self, field: &Field) -> f64 {
        self.weight * field.value(self.unknown, self.order, self.x, self.side)
    }

    fn of_pair(&self, pair: &[Field; 2]) -> Complex64 {
        Complex64::new(self.of(&pair[0]), self.of(&pair[1]))
    }
}

/// As many pins as there are vectors, chosen so that they tell the vectors apart as well as any can: pivots
/// of the matrix of all states at many places.
pub(crate) fn choose(pencil: &Pencil<'_>, scale: &[f64], vectors: &[[Field; 2]]) -> Vec<Pin> {
    let points = pencil.model.points();
    let [from, to] = [points[0], points[points.len() - 1]];
    let mut pins: Vec<(Pin, bool)> = Vec::new();
    let sizes = sizes(pencil, scale, vectors);
    let mut offer = |x: f64, side: Side, old: bool| {
        for (i, &m) in pencil.layout.orders().iter().enumerate() {
            for order in 0..m {
                let weight = 1.0 / sizes[pencil.layout.state(i, order)];
                if weight.is_finite() {
                    pins.push((Pin { x, side, unknown: i, order, weight }, old));
                }
            }
        }
    };
    offer(from, Side::Right, true);
    offer(to, Side::Left, true);
    for k in 1..SAMPLES {
        // Never in the middle, where symmetric modes vanish, and never on a break.
        let x = from + (to - from) * (k as f64 + 0.137) / (SAMPLES as f64 + 0.274);
        if points.iter().all(|p| (p - x).abs() > 1e-6 * (to - from)) {
            offer(x, Side::Right, false);
        }
    }
    let mut matrix = DMatrix::from_fn(pins.len(), vectors.len(), |r, c| pins[r].0.of_pair(&vectors[c]));
    for mut column in matrix.column_iter_mut() {
        let norm = column.norm();
        if norm > 0.0 {
            column.unscale_mut(norm);
        }
    }
    let mut matrix = matrix.qr().q();
    let mut chosen = Vec::with_capacity(vectors.len());
    for _ in 0..vectors.len() {
        let value = |r: usize| matrix.row(r).norm() * if pins[r].1 { PREFERENCE } else { 1.0 };
        let Some(best) = (0..pins.len()).max_by(|a, b| value(*a).total_cmp(&value(*b))) else { break };
        chosen.push(pins[best].0);
        let norm = matrix.row(best).norm();
        if norm == 0.0 {
            break;
        }
        let direction = matrix.row(best).unscale(norm);
        let along: Vec<Complex64> = (0..pins.len()).map(|r| direction.dotc(&matrix.row(r))).collect();
        for (r, along) in along.into_iter().enumerate() {
            let less = &direction * along;
            let mut row = matrix.row_mut(r);
            row -= less;
        }
    }
    chosen
}

/// Size of each state over the vectors, balanced so that derivatives of a rigid motion, which are rounding, do not
/// count.
fn sizes(pencil: &Pencil<'_>, scale: &[f64], vectors: &[[Field; 2]]) -> Vec<f64> {
    let layout = &pencil.layout;
    let length = pencil.length();
    let size = |i: usize, k: usize| vectors.iter().flatten().map(|f| f.size(i, k)).fold(0.0, f64::max);
    // What a unit of each unknown is worth: its part in the largest one.
    let largest = (0..layout.unknowns()).map(|i| size(i, 0) / scale[i]).fold(0.0, f64::max);
    let mut sizes = Vec::with_capacity(layout.states());
    for (i, &m) in layout.orders().iter().enumerate() {
        let own = size(i, 0).max(1e-3 * largest * scale[i]);
        for k in 0..m {
            sizes.push(size(i, k).max(own / length.powi(k as i32)));
        }
    }
    sizes
}

/// The matrix of all pins on all vectors.
pub(crate) fn matrix(pins: &[Pin], vectors: &[[Field; 2]]) -> DMatrix<Complex64> {
    DMatrix::from_fn(pins.len(), vectors.len(), |r, c| pins[r].of_pair(&vectors[c]))
}
