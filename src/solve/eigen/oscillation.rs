//! Counting by oscillation: Pruefer's angle for problems of second order.
//!
//! z_1' = g_11 z_1 + g_12 z_2, z_2' = (g_21 + lambda d) z_1 + g_22 z_2 with g_12 > 0 > d: the angle of (z_1, z_2) grows with
//! lambda, passes the multiples of pi upwards only, and falls to 0 as lambda falls to minus infinity. With
//! separated end conditions the number of eigenvalues up to lambda is the number of zeros of the solution that meets the
//! left condition, and one more if its angle at the right end is past that of the right condition (Coddington &
//! Levinson, Theory of Ordinary Differential Equations, 1955, ch. 8).

use super::Task;
use crate::error::{Error, Result};
use crate::legendre;
use crate::linear::Library;
use crate::linear::tables::Tables;
use crate::mesh::Element;
use crate::spectrum::pencil::Pencil;
use nalgebra::{DMatrix, DVector};

/// Nodes of an element of the march.
const NODES: usize = 24;
/// Relative size of the last coefficients at which an element is resolved well enough for an angle.
const TAIL: f64 = 1e-7;
/// Samples of each piece.
const SAMPLES: usize = 9;

/// A problem whose eigenvalues oscillation counts.
pub(super) struct Oscillator {
    /// Unknown and derivative that z_1 and z_2 are.
    states: [(usize, usize); 2],
    /// Sign that makes g_12 positive.
    sign: f64,
    /// Directions (z_1, sign z_2) of the end conditions.
    left: [f64; 2],
    right: [f64; 2],
}

impl Oscillator {
    /// Whether a pencil is such a problem.
    pub fn new(pencil: &Pencil<'_>, open: [bool; 2]) -> Option<Self> {
        let layout = &pencil.layout;
        let plain = !pencil.complex && pencil.degree == 1 && layout.constants() == 0 && open == [false; 2];
        if !plain || layout.states() != 2 || !pencil.model.releases().is_empty() {
            return None;
        }
        let list = layout.orders().iter().enumerate().flat_map(|(i, &m)| (0..m).map(move |k| (i, k)));
        let states: Vec<(usize, usize)> = list.collect();
        let mut matrices: Vec<[DMatrix<f64>; 2]> = Vec::new();
        let points = pencil.model.points();
        for piece in 0..points.len() - 1 {
            for k in 0..SAMPLES {
                let x = points[piece] + (points[piece + 1] - points[piece]) * (k as f64 + 0.137) / SAMPLES as f64;
                let at = [0.0, pencil.size].map(|parameter| companion(pencil, &states, piece, x, parameter));
                let [Some(first), Some(second)] = at else { return None };
                matrices.push([first.clone(), second - first]);
            }
        }
        [(0, 1), (1, 0)].into_iter().find_map(|(one, two)| {
            let sign = matrices[0][0][(one, two)].signum();
            let fits = matrices.iter().all(|[g, d]| {
                let size = d.amax();
                let only = (0..2).all(|r| (0..2).all(|c| (r, c) == (two, one) || d[(r, c)].abs() <= 1e-10 * size));
                only && sign * g[(one, two)] > 0.0 && sign * d[(two, one)] < 0.0
            });
            let direction = |point: usize| -> Option<[f64; 2]> {
                let mut tied = pencil.conditions.iter().filter(|t| t.places.len() == 1 && t.places[0].point == point);
                let (tied, None) = (tied.next()?, tied.next()) else { return None };
                if tied.powers[1].iter().chain(&tied.powers[2]).any(|v| v.norm() > 0.0) {
                    return None;
                }
                let at = |s: usize| tied.powers[0][layout.jet(states[s].0, states[s].1)].re;
                let (r1, r2) = (at(one), at(two));
                let all: f64 = tied.powers[0].iter().map(|v| v.norm()).sum();
                let known = (all - r1.abs() - r2.abs()).abs() <= 1e-14 * all && all > 0.0;
                let (z1, z2) = (r2, -sign * r1);
                known.then_some(if z1 < 0.0 { [-z1, -z2] } else { [z1, z2] })
            };
            let (left, right) = (direction(0)?, direction(points.len() - 1)?);
            fits.then(|| Self { states: [states[one], states[two]], sign, left, right })
        })
    }

    /// Number of eigenvalues up to a parameter. The solution is marched from element to element by collocation of z' = G z
    /// and made of size 1 again after each, so that no growth is too large: only its angle counts.
    pub fn count(&self, task: &Task<'_>, parameter: f64) -> Result<usize> {
        let span = task.pencil.length();
        let mut library = Library::new(1);
        let mut z = [self.left[0], self.sign * self.left[1]];
        if z[0] == 0.0 {
            z[1] = self.sign;
        }
        let (mut zeros, mut before) = (0, 0.0f64);
        let mut ahead: Vec<Element> = task.mesh(parameter, 0)?.elements.into_iter().rev().collect();
        while let Some(element) = ahead.pop() {
            task.tick(0)?;
            let element = Element { nodes: NODES, open: None, ..element };
            let tables = library.get(&element)?;
            let step = self.step(&task.pencil, &element, &tables, parameter, z)?;
            if step.tail > TAIL && element.length() > 1e-5 * span {
                let [left, right] = element.halves();
                ahead.extend([right, left]);
                continue;
            }
            let count = 6 * NODES;
            for k in 1..count {
                let s = -(std::f64::consts::PI * k as f64 / count as f64).cos();
                let value = legendre::series(&step.first, s);
                zeros += usize::from(value * before < 0.0);
                // Sizes do not matter, and products must not underflow.
                before = if value == 0.0 { before } else { value.signum() };
            }
            let size = step.end[0].abs().max(step.end[1].abs());
            z = step.end.map(|v| v / size);
            if !z.iter().all(|v| v.is_finite()) {
                return Err(Error::NotFinite { what: "the solution of the count".into(), x: element.left });
            }
        }
        let [mut w1, mut w2] = [z[0], self.sign * z[1]];
        if w1 < 0.0 {
            (w1, w2) = (-w1, -w2);
        }
        // Angle in (0, pi] against that of the condition, by their cotangents.
        let past = w1 == 0.0 || (self.right[0] != 0.0 && w2 / w1 <= self.right[1] / self.right[0]);
        Ok(zeros + usize::from(past))
    }

    /// z over one element from z at its left end: slopes v_i at the nodes with z_i = z_i(left) + (h/2) Q v_i.
    fn step(
        &self,
        pencil: &Pencil<'_>,
        element: &Element,
        tables: &Tables,
        parameter: f64,
        start: [f64; 2],
    ) -> Result<Step> {
        let (n, half) = (tables.n, 0.5 * element.length());
        let undetermined = || Error::SingularPoint { x: element.left };
        let mut matrix = DMatrix::<f64>::identity(2 * n, 2 * n);
        let mut right = DVector::<f64>::zeros(2 * n);
        for (j, s) in tables.nodes.iter().enumerate() {
            let x = element.coordinate(*s);
            let g = companion(pencil, &self.states, element.piece, x, parameter).ok_or_else(undetermined)?;
            for (i, k) in [(0, 0), (0, 1), (1, 0), (1, 1)] {
                right[i * n + j] += g[(i, k)] * start[k];
                for l in 0..n {
                    matrix[(i * n + j, k * n + l)] -= g[(i, k)] * half * tables.integrals[0][l * n + j];
                }
            }
        }
        let slopes = matrix.lu().solve(&right).ok_or_else(undetermined)?;
        let part = |i: usize| &slopes.as_slice()[i * n..(i + 1) * n];
        let end = [0, 1].map(|i| {
            let sum: f64 = part(i).iter().zip(&tables.ends[0]).map(|(v, q)| v * q).sum();
            start[i] + half * sum
        });
        let tail = |i: usize| {
            let modal = tables.modal(part(i));
            let largest = modal.iter().fold(0.0f64, |s, c| s.max(c.abs()));
            let last = modal[n - 1].abs().max(modal[n - 2].abs());
            // A slope too small to move anything need not be resolved.
            let size = largest.max(1e-8 * start[i].abs().max(end[i].abs()) / half);
            if size > 0.0 { last / size } else { 0.0 }
        };
        let mut first = legendre::integrate_series(&tables.modal(part(0)));
        first.iter_mut().for_each(|c| *c *= half);
        first[0] += start[0];
        Ok(Step { first, end, tail: tail(0).max(tail(1)) })
    }
}

/// The solution on one element.
struct Step {
    /// Legendre series of z_1.
    first: Vec<f64>,
    end: [f64; 2],
    /// Relative size of the last coefficients.
    tail: f64,
}

/// Matrix of z' = G z at a point; none where the highest derivatives are not determined.
fn companion(
    pencil: &Pencil<'_>,
    states: &[(usize, usize)],
    piece: usize,
    x: f64,
    parameter: f64,
) -> Option<DMatrix<f64>> {
    let layout = &pencil.layout;
    let (d, columns) = (layout.unknowns(), pencil.columns());
    let powers = pencil.equations(piece, &[x]).ok()?;
    let entry = |e: usize, i: usize, k: usize| {
        let at = e * columns + layout.jet(i, k);
        powers[0][at].re + parameter * powers[1][at].re
    };
    let leading = DMatrix::from_fn(d, d, |e, i| entry(e, i, layout.orders()[i]));
    let lower = DMatrix::from_fn(d, states.len(), |e, s| -entry(e, states[s].0, states[s].1));
    let highest = leading.full_piv_lu().solve(&lower)?;
    let result = DMatrix::from_fn(states.len(), states.len(), |r, c| {
        let (i, k) = states[r];
        if k + 1 < layout.orders()[i] { f64::from(u8::from(states[c] == (i, k + 1))) } else { highest[(i, c)] }
    });
    result.iter().all(|v| v.is_finite()).then_some(result)
}
