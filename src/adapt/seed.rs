//! First mesh: breaks, ladders towards layers, enough elements for oscillations.
//!
//! A symmetric collocation scheme spreads an unresolved layer over the whole span, and bisection alone then
//! needs thousands of elements. The characteristic exponents tell beforehand where layers can lie: a fast
//! decaying mode at the left end of a piece, a growing one at its right end, and inside where exponents
//! change sign or size.

use super::exponents::exponents;
use crate::error::Result;
use crate::mesh::{Element, Mesh};
use crate::model::Model;
use num_complex::Complex64;

/// Nodes of a fresh element.
const NODES: usize = 16;
/// Exponent times length beyond which an end gets a ladder.
const LAYER: f64 = 8.0;
/// First rung of a ladder, in units of 1/|exponent|.
const RUNG: f64 = 4.0;
/// Phase that one element of up to 32 nodes resolves with ease.
const PHASE: f64 = 16.0;
/// Largest number of samples in a piece.
const SAMPLES: usize = 400;

/// What the exponents say at a sample point.
#[derive(Debug, Clone, Copy)]
struct Rates {
    x: f64,
    /// Fastest decay to the right, 1/length.
    decay: f64,
    /// Fastest growth to the right.
    growth: f64,
    /// Fastest oscillation.
    phase: f64,
}

impl Rates {
    fn new(x: f64, exponents: &[Complex64]) -> Self {
        let largest = |f: &dyn Fn(&Complex64) -> f64| exponents.iter().map(f).fold(0.0, f64::max);
        Self { x, decay: largest(&|e| -e.re), growth: largest(&|e| e.re), phase: largest(&|e| e.im.abs()) }
    }

    fn largest(&self) -> f64 {
        self.decay.max(self.growth).max(self.phase)
    }

    /// Whether a layer may lie between two samples: rates that change sign or size there.
    fn differs(&self, other: &Rates) -> bool {
        let apart = |a: f64, b: f64, floor: f64| a.max(b) > floor && a.max(b) > 4.0 * a.min(b);
        let floor = RUNG / (other.x - self.x).abs();
        apart(self.decay, other.decay, floor)
            || apart(self.growth, other.growth, floor)
            || apart(self.phase, other.phase, floor)
    }
}

/// Seeds a mesh for a model whose unknowns have the sizes `scale`.
pub(crate) fn seed(model: &dyn Model, scale: &[f64], open: [bool; 2], most: usize) -> Result<Mesh> {
    let points = model.points();
    let mut elements = Vec::new();
    for piece in 0..points.len() - 1 {
        let ends = [open[0] && piece == 0, open[1] && piece + 2 == points.len()];
        let edges = piece_edges(model, scale, piece, ends, most)?;
        elements.extend(edges.windows(2).map(|e| Element { left: e[0], right: e[1], nodes: NODES, piece, open: None }));
    }
    Ok(Mesh { elements }.opened(open))
}

/// Element ends within one piece, both ends of the piece included.
fn piece_edges(model: &dyn Model, scale: &[f64], piece: usize, open: [bool; 2], most: usize) -> Result<Vec<f64>> {
    let (a, b) = (model.points()[piece], model.points()[piece + 1]);
    let length = b - a;
    let rates_at =
        |x: f64| -> Result<Option<Rates>> { Ok(exponents(model, scale, piece, x, length)?.map(|e| Rates::new(x, &e))) };
    // With many pieces few samples each suffice.
    let first = if model.points().len() > 100 { 2 } else { 16 };
    let mut samples = Vec::new();
    for k in 0..=first {
        // At a singular end there are no exponents.
        if (k == 0 && open[0]) || (k == first && open[1]) {
            continue;
        }
        let x = if k == first { b } else { a + length * k as f64 / first as f64 };
        samples.extend(rates_at(x)?);
    }
    let mut edges = vec![a, b];
    let mut queue: Vec<(Rates, Rates)> = samples.windows(2).map(|s| (s[0], s[1])).collect();
    while let Some((left, right)) = queue.pop() {
        if samples.len() >= SAMPLES || !left.differs(&right) || right.x - left.x < 1e-13 * length {
            continue;
        }
        edges.extend([left.x, right.x]);
        let middle = 0.5 * (left.x + right.x);
        edges.push(middle);
        if let Some(rates) = rates_at(middle)? {
            samples.push(rates);
            queue.extend([(left, rates), (rates, right)]);
        }
    }
    samples.sort_by(|p, q| p.x.total_cmp(&q.x));
    if let (Some(left), Some(right)) = (samples.first(), samples.last()) {
        if !open[0] {
            ladder(left.decay, length, |step| edges.push(a + step));
        }
        if !open[1] {
            ladder(right.growth, length, |step| edges.push(b - step));
        }
    }
    tidy(&mut edges, length);
    oscillations(&mut edges, &samples, most);
    Ok(edges)
}

/// Distances from an end: RUNG/rate, then twice, four times, ... as long as it makes sense.
fn ladder(rate: f64, length: f64, mut rung: impl FnMut(f64)) {
    if rate * length <= LAYER {
        return;
    }
    let mut step = RUNG / rate;
    while step < 0.6 * length && step > 1e-14 * length {
        rung(step);
        step *= 2.0;
    }
}

/// Ascending, without elements so short beside their neighbours that they serve nothing.
fn tidy(edges: &mut Vec<f64>, length: f64) {
    edges.sort_by(f64::total_cmp);
    edges.dedup_by(|b, a| *b - *a <= 1e-14 * length);
    let mut k = 1;
    while k + 1 < edges.len() {
        let (before, after) = (edges[k] - edges[k - 1], edges[k + 1] - edges[k]);
        let widest = if k + 2 < edges.len() { edges[k + 2] - edges[k + 1] } else { 0.0 };
        let narrow = after < 0.2 * before.min(widest) && k + 2 < edges.len();
        if narrow {
            edges.remove(k);
        } else {
            k += 1;
        }
    }
}

/// Splits elements that hold too much phase, as long as the mesh stays below `most` elements.
fn oscillations(edges: &mut Vec<f64>, samples: &[Rates], most: usize) {
    let mut finer = Vec::with_capacity(edges.len());
    for ends in edges.windows(2) {
        finer.push(ends[0]);
        let inside = samples.iter().filter(|s| s.x >= ends[0] && s.x <= ends[1] && s.phase >= 0.3 * s.largest());
        let phase = inside.map(|s| s.phase).fold(0.0, f64::max) * (ends[1] - ends[0]);
        let parts = (phase / PHASE).ceil().clamp(1.0, most as f64) as usize;
        finer.extend((1..parts).map(|k| ends[0] + (ends[1] - ends[0]) * k as f64 / parts as f64));
    }
    finer.extend(edges.last());
    *edges = finer;
}
