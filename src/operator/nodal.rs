//! Interpolation and differentiation of the polynomial through values at any distinct nodes.

use nalgebra::{DMatrix, DVector};

use crate::error::{Error, Result};

/// Barycentric weights 1 / prod_(k != j) (s_j - s_k), scaled so that the largest is 1 in size.
///
/// Error: relative, about n ulp, with the nodes taken as exact.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or one is not finite, or the result overflows.
///
/// # Example
/// ```
/// let weights = spanwise::operator::barycentric_weights(&[-1.0, 0.0, 1.0])?;
/// assert_eq!(weights.as_slice(), [0.5, -1.0, 0.5]);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Berrut & Trefethen, SIAM Review 46 (2004), eq. 3.2.
pub fn barycentric_weights(nodes: &[f64]) -> Result<DVector<f64>> {
    let weights = Scaled::weights(nodes)?;
    let top = weights.iter().map(|w| w.exponent).max().unwrap_or(0);
    let scaled = DVector::from_iterator(nodes.len(), weights.iter().map(|w| w.over(top)));
    let size = scaled.amax();
    Ok(scaled / size)
}

/// A number as mantissa and binary exponent: barycentric weights leave the range of `f64` from some hundred nodes on.
#[derive(Debug, Clone, Copy)]
struct Scaled {
    mantissa: f64,
    exponent: i64,
}

impl Scaled {
    fn new(value: f64, exponent: i64) -> Self {
        let (mantissa, shift) = libm::frexp(value);
        Self { mantissa, exponent: exponent + i64::from(shift) }
    }

    /// Barycentric weights, unscaled.
    fn weights(nodes: &[f64]) -> Result<Vec<Self>> {
        check(nodes)?;
        let weight = |j: usize| {
            let others = (0..nodes.len()).filter(|k| *k != j);
            let product = others.fold(Self::new(1.0, 0), |product, k| {
                Self::new(product.mantissa * (nodes[j] - nodes[k]), product.exponent)
            });
            Self::new(1.0 / product.mantissa, -product.exponent)
        };
        Ok((0..nodes.len()).map(weight).collect())
    }

    /// Value divided by 2^exponent.
    fn over(self, exponent: i64) -> f64 {
        let shift = (self.exponent - exponent).clamp(-5000, 5000);
        libm::scalbn(self.mantissa, shift as i32)
    }

    fn divided_by(self, other: Self) -> f64 {
        Self::new(self.mantissa / other.mantissa, self.exponent).over(other.exponent)
    }
}

/// Values at the points `to` of the polynomial through values at the nodes `from`: a (to x from) matrix.
///
/// Barycentric formula of the second kind; a point that is a node gives a unit row, exactly. Rows sum to 1 to
/// rounding. Stable for points within the nodes' range when the nodes cluster like a rule's; equispaced
/// nodes beyond a few tens are ill-conditioned in themselves.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or a node or point is not finite,
/// or the result overflows.
///
/// # Example
/// ```
/// let matrix = spanwise::operator::interpolation(&[-1.0, 0.0, 1.0], &[0.5])?;
/// for (entry, exact) in matrix.iter().zip([-0.125, 0.75, 0.375]) {
///     assert!((entry - exact).abs() < 1e-15);
/// }
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Berrut & Trefethen, SIAM Review 46 (2004), eq. 4.2; Higham, IMA J. Numer. Anal. 24 (2004).
pub fn interpolation(from: &[f64], to: &[f64]) -> Result<DMatrix<f64>> {
    let weights = barycentric_weights(from)?;
    finite(to)?;
    let mut matrix = DMatrix::zeros(to.len(), from.len());
    for (i, point) in to.iter().enumerate() {
        let quotients = DVector::from_fn(from.len(), |j, _| weights[j] / (point - from[j]));
        // Also a point so close that the quotient overflows counts as a hit.
        match quotients.iter().position(|q| !q.is_finite()) {
            Some(hit) => matrix[(i, hit)] = 1.0,
            None => matrix.set_row(i, &(&quotients / quotients.sum()).transpose()),
        }
    }
    representable(matrix, from.len())
}

/// The derivative of the given order at the nodes themselves: an n x n matrix.
///
/// Off the diagonal D^(m)_ij = m / (s_i - s_j) (l_j / l_i D^(m-1)_ii - D^(m-1)_ij), l the barycentric
/// weights; on it the negative sum of the row, so that constants have derivative 0 to rounding. Order 0 is the
/// identity.
///
/// Error: each off-diagonal entry of order 1 is right to about 2n ulp. The derivative of values of size 1 with
/// rounding is wrong by up to eps n^(2m) on a rule's nodes (the matrix norm is near n^2 for order 1): that is the
/// nature of differentiation, and why the solver integrates.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or one is not finite, or the result overflows.
///
/// # Example
/// ```
/// let d = spanwise::operator::differentiation(&[-1.0, 0.0, 1.0], 1)?;
/// assert_eq!(d.row(1).iter().copied().collect::<Vec<_>>(), [-0.5, 0.0, 0.5]);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Welfert, SIAM J. Numer. Anal. 34 (1997); Baltensperger & Trummer, SIAM J. Sci. Comput. 24 (2003)
/// for the negative sum.
pub fn differentiation(nodes: &[f64], order: usize) -> Result<DMatrix<f64>> {
    let weights = Scaled::weights(nodes)?;
    let n = nodes.len();
    let mut matrix = DMatrix::identity(n, n);
    for m in 1..=order {
        for i in 0..n {
            let diagonal = matrix[(i, i)];
            let mut sum = 0.0;
            for j in (0..n).filter(|j| *j != i) {
                let ratio = weights[j].divided_by(weights[i]);
                let entry = m as f64 / (nodes[i] - nodes[j]) * (ratio * diagonal - matrix[(i, j)]);
                matrix[(i, j)] = entry;
                sum += entry;
            }
            matrix[(i, i)] = -sum;
        }
    }
    representable(matrix, n)
}

/// The derivative of the given order at the points `to` of the polynomial through values at the nodes
/// `from`: a (to x from) matrix, [`interpolation`] after [`differentiation`].
///
/// # Errors
/// [`Error::Argument`] as in both.
///
/// # Example
/// ```
/// let matrix = spanwise::operator::differentiation_between(&[-1.0, 0.0, 1.0], &[0.5], 2)?;
/// assert!((matrix[(0, 1)] + 2.0).abs() < 1e-15); // second difference 1, -2, 1
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn differentiation_between(from: &[f64], to: &[f64], order: usize) -> Result<DMatrix<f64>> {
    Ok(interpolation(from, to)? * differentiation(from, order)?)
}

/// Refuses points that are not finite.
pub(super) fn finite(points: &[f64]) -> Result<()> {
    match points.iter().find(|point| !point.is_finite()) {
        Some(point) => Err(out_of_range("point", *point, "the finite numbers")),
        None => Ok(()),
    }
}

fn check(nodes: &[f64]) -> Result<()> {
    if nodes.is_empty() {
        return Err(Error::Argument { what: "number of nodes", value: "0".into(), range: "at least 1" });
    }
    if let Some(node) = nodes.iter().find(|node| !node.is_finite()) {
        return Err(out_of_range("node", *node, "the finite numbers"));
    }
    let mut sorted = nodes.to_vec();
    sorted.sort_by(f64::total_cmp);
    if let Some(pair) = sorted.windows(2).find(|pair| pair[0] == pair[1]) {
        return Err(out_of_range("node", pair[0], "the numbers given once"));
    }
    let span = sorted[sorted.len() - 1] - sorted[0];
    if !span.is_finite() {
        return Err(out_of_range("span of the nodes", span, "the finite numbers"));
    }
    Ok(())
}

/// Nodes may lie so badly (some thousand equidistant ones) that entries exceed the range of `f64`.
fn representable(matrix: DMatrix<f64>, nodes: usize) -> Result<DMatrix<f64>> {
    if matrix.iter().all(|entry| entry.is_finite()) {
        return Ok(matrix);
    }
    let range = "those whose matrix double precision can hold";
    Err(Error::Argument { what: "nodes", value: format!("{nodes} nodes"), range })
}

fn out_of_range(what: &'static str, value: f64, range: &'static str) -> Error {
    Error::Argument { what, value: value.to_string(), range }
}
