//! Piecewise polynomial functions on a mesh: value, derivative, integral.

use crate::legendre;
use crate::mesh::{Element, Mesh};
use crate::model::{Layout, Side};

/// The unknown functions as piecewise polynomials, with the unknown constants.
///
/// On each element u_i has degree n - 1 + m_i; the Legendre coefficients of u_i and of each of its
/// derivatives up to the m_i-th are kept, so that no derivative is taken numerically.
#[derive(Debug, Clone)]
pub struct Field {
    /// The mesh it lives on.
    pub mesh: Mesh,
    /// Unknowns and their orders.
    pub layout: Layout,
    /// Unknown constants.
    pub constants: Vec<f64>,
    /// For each element the series of all jets, in the order of the layout.
    series: Vec<Vec<Vec<f64>>>,
}

/// Legendre series of u, u', ..., u^(m), in this order, on an element from the series of v = u^(m) and the state at the
/// left end: u^(k)(s) = z_k + (h/2) * int_{-1}^s u^(k+1).
pub(crate) fn integrate_up(highest: Vec<f64>, state: &[f64], half: f64) -> Vec<Vec<f64>> {
    let mut levels = vec![highest];
    for z in state.iter().rev() {
        let mut up = legendre::integrate_series(&levels[levels.len() - 1]);
        up.iter_mut().for_each(|c| *c *= half);
        up[0] += z;
        levels.push(up);
    }
    levels.reverse();
    levels
}

impl Field {
    /// Builds a field from the series of all jets on each element.
    pub(crate) fn from_series(mesh: Mesh, layout: &Layout, constants: Vec<f64>, series: Vec<Vec<Vec<f64>>>) -> Self {
        Self { mesh, layout: layout.clone(), constants, series }
    }

    /// Index of the element that holds x; at a shared end `side` decides.
    pub fn locate(&self, x: f64, side: Side) -> usize {
        let elements = &self.mesh.elements;
        let index = match side {
            Side::Left => elements.partition_point(|e| e.right < x),
            Side::Right => elements.partition_point(|e| e.right <= x),
        };
        index.min(elements.len() - 1)
    }

    /// Index of an element that holds x and lies in the piece, looked for from `hint` on.
    pub(crate) fn locate_in(&self, x: f64, piece: usize, hint: usize) -> usize {
        let elements = &self.mesh.elements;
        let holds = |e: usize| elements.get(e).is_some_and(|e| e.piece == piece && e.left <= x && x <= e.right);
        if let Some(found) = [hint, hint + 1].into_iter().find(|e| holds(*e)) {
            return found;
        }
        let found = self.locate(x, Side::Left);
        if holds(found) { found } else { self.locate(x, Side::Right) }
    }

    /// self + t * (other - self), for a field on the same mesh.
    pub(crate) fn combined(&self, other: &Field, t: f64) -> Field {
        self.zip(other, |a, b| a + t * (b - a))
    }

    /// self + t * other, on the same mesh.
    pub(crate) fn plus(&self, other: &Field, t: f64) -> Field {
        self.zip(other, |a, b| a + t * b)
    }

    /// t * self
    pub(crate) fn scaled(&self, t: f64) -> Field {
        self.zip(self, |a, _| t * a)
    }

    /// self - other, for a field on the same mesh.
    pub(crate) fn minus(&self, other: &Field) -> Field {
        self.zip(other, |a, b| a - b)
    }

    /// Changes the sign of every other unknown function and constant: the conjugate of a doubled field.
    pub(crate) fn flip_odd(&mut self) {
        let odd: Vec<bool> =
            self.layout.orders().iter().enumerate().flat_map(|(i, m)| vec![i % 2 == 1; m + 1]).collect();
        for jets in &mut self.series {
            for (series, _) in jets.iter_mut().zip(&odd).filter(|(_, odd)| **odd) {
                series.iter_mut().for_each(|c| *c = -*c);
            }
        }
        self.constants.iter_mut().skip(1).step_by(2).for_each(|c| *c = -*c);
    }

    fn zip(&self, other: &Field, f: impl Fn(f64, f64) -> f64) -> Field {
        debug_assert_eq!(self.mesh, other.mesh);
        let mut result = self.clone();
        let ours = result.series.iter_mut().flatten().flatten().chain(&mut result.constants);
        let theirs = other.series.iter().flatten().flatten().chain(&other.constants);
        ours.zip(theirs).for_each(|(a, b)| *a = f(*a, *b));
        result
    }

    /// Legendre coefficients of u_i^(k), k <= m_i, on an element.
    pub fn series(&self, element: usize, unknown: usize, order: usize) -> &[f64] {
        &self.series[element][self.layout.jet(unknown, order)]
    }

    /// u_i^(k), k = 0..=tops\[i\], at the reference coordinate s of an element, unknown after unknown.
    /// Derivatives above the order m_i are those of the polynomial.
    pub fn jets(&self, element: usize, s: f64, tops: &[usize]) -> Vec<f64> {
        let mut jets = Vec::with_capacity(tops.iter().map(|t| t + 1).sum());
        self.for_jets(element, tops, |series| jets.push(legendre::series(series, s)));
        jets
    }

    /// Size of the error to be expected in each of the jets of [`Field::jets`] from their evaluation and representation: a
    /// small multiple of the unit roundoff times the sum of the sizes of the coefficients, and the last coefficients, beyond
    /// which the series is cut (in stiff regions they also tell of what rounding does between the nodes).
    pub fn noise(&self, element: usize, tops: &[usize]) -> Vec<f64> {
        let mut noise = Vec::with_capacity(tops.iter().map(|t| t + 1).sum());
        self.for_jets(element, tops, |series| {
            let sum: f64 = series.iter().map(|c| c.abs()).sum();
            let last: f64 = series.iter().rev().take(4).map(|c| c.abs()).sum();
            // A constant or a straight line is all there is, not a series that is cut.
            let cut = if series.len() > 8 { last } else { 0.0 };
            noise.push(crate::tolerance::EVALUATION * sum + cut);
        });
        noise
    }

    /// Calls `visit` with the series of each wanted jet in turn.
    fn for_jets(&self, element: usize, tops: &[usize], mut visit: impl FnMut(&[f64])) {
        let scale = 2.0 / self.mesh.elements[element].length();
        for (i, (&top, &m)) in tops.iter().zip(self.layout.orders()).enumerate() {
            for k in 0..=top.min(m) {
                visit(self.series(element, i, k));
            }
            let mut beyond: Option<Vec<f64>> = None;
            for _ in m..top {
                let mut next = legendre::differentiate_series(beyond.as_deref().unwrap_or(self.series(element, i, m)));
                next.iter_mut().for_each(|c| *c *= scale);
                visit(&next);
                beyond = Some(next);
            }
        }
    }

    /// u_i^(k) at x; at a shared end from the side given.
    pub fn value(&self, unknown: usize, order: usize, x: f64, side: Side) -> f64 {
        let element = self.locate(x, side);
        let mut tops = vec![0; self.layout.unknowns()];
        tops[unknown] = order;
        let s = self.mesh.elements[element].reference(x);
        self.jets(element, s, &tops)[unknown + order]
    }

    /// Sizes of the unknowns on an interval inside the span: for each u_i the largest |u_i^(k)| (h/2)^k, k below its
    /// order (u_i itself for order 0), seen at three points.
    pub(crate) fn local_sizes(&self, left: f64, right: f64) -> Vec<f64> {
        let half = 0.5 * (right - left);
        let mut sizes = vec![0.0f64; self.layout.unknowns()];
        let tops: Vec<usize> = self.layout.orders().iter().map(|m| m.max(&1) - 1).collect();
        for (x, side) in [(left, Side::Right), (0.5 * (left + right), Side::Right), (right, Side::Left)] {
            let element = self.locate(x, side);
            let jets = self.jets(element, self.element(element).reference(x), &tops);
            let mut at = 0;
            for (size, top) in sizes.iter_mut().zip(&tops) {
                for k in 0..=*top {
                    *size = size.max(jets[at].abs() * half.powi(k as i32));
                    at += 1;
                }
            }
        }
        sizes
    }

    /// Sizes of all states on an interval inside the span, seen at three points.
    pub(crate) fn local_states(&self, left: f64, right: f64) -> Vec<f64> {
        let mut sizes = vec![0.0f64; self.layout.states()];
        for (x, side) in [(left, Side::Right), (0.5 * (left + right), Side::Right), (right, Side::Left)] {
            let element = self.locate(x, side);
            let jets = self.jets(element, self.element(element).reference(x), self.layout.orders());
            for (i, &m) in self.layout.orders().iter().enumerate() {
                for k in 0..m {
                    let size = &mut sizes[self.layout.state(i, k)];
                    *size = size.max(jets[self.layout.jet(i, k)].abs());
                }
            }
        }
        sizes
    }

    /// Bound of |u_i^(k)| on the span, k <= m_i: largest sum of coefficient sizes on any element.
    pub fn size(&self, unknown: usize, order: usize) -> f64 {
        let sizes = (0..self.series.len()).map(|e| self.series(e, unknown, order).iter().map(|c| c.abs()).sum::<f64>());
        sizes.fold(0.0, f64::max)
    }

    /// The element behind an index.
    pub fn element(&self, index: usize) -> &Element {
        &self.mesh.elements[index]
    }
}
