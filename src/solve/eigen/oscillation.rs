//! Counting by oscillation: Pruefer's angle for problems of second order.
//!
//! z_1' = g_11 z_1 + g_12 z_2, z_2' = (g_21 + lambda d) z_1 + g_22 z_2 with g_12 > 0 > d: the angle of (z_1, z_2) grows with
//! lambda, passes the multiples of pi upwards only, and falls to 0 as lambda falls to minus infinity. With
//! separated end conditions the number of eigenvalues up to lambda is the number of zeros of the solution that meets the
//! left condition, and one more if its angle at the right end is past that of the right condition (Coddington &
//! Levinson, Theory of Ordinary Differential Equations, 1955, ch. 8).

use super::Task;
use crate::error::{Error, Result};
use crate::field::Field;
use crate::model::{Batch, Condition, ConditionValue, Held, Layout, Linearised, Model, Place, Release, Side};
use crate::solve::{Settings, boundary};
use crate::spectrum::pencil::Pencil;
use nalgebra::DMatrix;

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

    /// Number of eigenvalues up to a parameter.
    pub fn count(&self, task: &Task<'_>, parameter: f64) -> Result<usize> {
        let held = Held::new(task.pencil.model, vec![parameter], true);
        let [z1, z2] = if self.left[0] == 0.0 { [0.0, 1.0] } else { self.left };
        let place = vec![Place { point: 0, side: Side::Right }];
        let conditions = (0..2).map(|_| Condition { name: "start".into(), places: place.clone() }).collect();
        let march = March { held: &held, states: self.states, start: [z1, self.sign * z2], conditions };
        let settings = Settings { relative: 1e-8, ..*task.settings };
        let field = boundary(&march, &settings)?.field;
        let zeros = self.zeros(&field)?;
        let end = field.mesh.span()[1];
        let [mut w1, mut w2] = self.states.map(|(i, k)| field.value(i, k, end, Side::Left));
        w2 *= self.sign;
        if w1 < 0.0 {
            (w1, w2) = (-w1, -w2);
        }
        // Angle in (0, pi] against that of the condition, by their cotangents.
        let past = if self.right[0] == 0.0 { w1 == 0.0 } else { w1 == 0.0 || w2 / w1 <= self.right[1] / self.right[0] };
        Ok(zeros + usize::from(past))
    }

    /// Changes of sign of z_1 inside the span.
    fn zeros(&self, field: &Field) -> Result<usize> {
        let (mut zeros, mut before) = (0, 0.0f64);
        let mut tops = vec![0; field.layout.unknowns()];
        tops[self.states[0].0] = self.states[0].1;
        let index = self.states[0].0 + self.states[0].1;
        for e in 0..field.mesh.elements.len() {
            let count = 6 * field.element(e).nodes;
            for k in 1..count {
                let s = -(std::f64::consts::PI * k as f64 / count as f64).cos();
                let value = field.jets(e, s, &tops)[index];
                if !value.is_finite() {
                    return Err(Error::NotFinite {
                        what: "the solution of the count".into(),
                        x: field.element(e).left,
                    });
                }
                zeros += usize::from(value * before.signum() < 0.0 && before != 0.0);
                before = if value == 0.0 { before } else { value };
            }
        }
        Ok(zeros)
    }
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

/// The equations of a model with the state given at the left end.
struct March<'a> {
    held: &'a Held<'a>,
    states: [(usize, usize); 2],
    start: [f64; 2],
    conditions: Vec<Condition>,
}

impl Model for March<'_> {
    fn layout(&self) -> &Layout {
        self.held.layout()
    }

    fn points(&self) -> &[f64] {
        self.held.points()
    }

    fn linear(&self) -> bool {
        true
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.held.equations(batch, out)
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], _constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let (i, k) = self.states[index];
        let jet = self.layout().jet(i, k);
        out.residual = jets[jet] - self.start[index];
        out.jets[jet] = 1.0;
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &[]
    }
}
