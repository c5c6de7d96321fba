//! Interpolation and differentiation of the polynomial through values at any distinct nodes.

use nalgebra::{DMatrix, DVector};

use crate::error::{Error, Result};

/// Barycentric weights 1 / prod_(k != j) (s_j - s_k), scaled so that the largest is 1 in size.
///
/// Error: relative, about n ulp, with the nodes taken as exact.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or one is not finite.
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
    check(nodes)?;
    let n = nodes.len();
    // Products as mantissa and binary exponent: they leave the range of f64 from some hundred nodes on.
    let mut mantissas = vec![1.0; n];
    let mut exponents = vec![0i64; n];
    for j in 0..n {
        let mut product = 1.0;
        for k in (0..n).filter(|k| *k != j) {
            let (mantissa, exponent) = libm::frexp(product * (nodes[j] - nodes[k]));
            product = mantissa;
            exponents[j] -= i64::from(exponent);
        }
        let (mantissa, exponent) = libm::frexp(1.0 / product);
        mantissas[j] = mantissa;
        exponents[j] += i64::from(exponent);
    }
    let top = exponents.iter().copied().max().unwrap_or(0);
    let scaled = DVector::from_fn(n, |j, _| libm::scalbn(mantissas[j], (exponents[j] - top).max(-2000) as i32));
    let size = scaled.amax();
    Ok(scaled / size)
}

/// Values at the points `to` of the polynomial through values at the nodes `from`: a (to x from) matrix.
///
/// Barycentric formula of the second kind; a point that is a node gives a unit row, exactly. Rows sum to 1 to
/// rounding. Stable for points within the nodes' range when the nodes cluster like a rule's; equispaced
/// nodes beyond a few tens are ill-conditioned in themselves.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or a node or point is not finite.
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
    if let Some(point) = to.iter().find(|point| !point.is_finite()) {
        return Err(out_of_range("point", *point, "the finite numbers"));
    }
    let mut matrix = DMatrix::zeros(to.len(), from.len());
    for (i, point) in to.iter().enumerate() {
        let quotients = DVector::from_fn(from.len(), |j, _| weights[j] / (point - from[j]));
        // Also a point so close that the quotient overflows counts as a hit.
        match quotients.iter().position(|q| !q.is_finite()) {
            Some(hit) => matrix[(i, hit)] = 1.0,
            None => matrix.set_row(i, &(&quotients / quotients.sum()).transpose()),
        }
    }
    Ok(matrix)
}

/// The derivative of the given order at the nodes themselves: an n x n matrix.
///
/// Off the diagonal D^(m)_ij = m / (s_i - s_j) (l_j / l_i D^(m-1)_ii - D^(m-1)_ij), l the barycentric
/// weights; on it the negative sum of the row, so that constants have derivative 0 to rounding. Order 0 is the
/// identity.
///
/// Error: each off-diagonal entry of order 1 is right to about 2n ulp. The derivative of values v
/// carries the rounding of v times the norm of the matrix, which grows like n^(2m): that is the nature of
/// differentiation, and why the solver integrates.
///
/// # Errors
/// [`Error::Argument`] if there are no nodes, or two coincide, or one is not finite.
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
    let weights = barycentric_weights(nodes)?;
    let n = nodes.len();
    let mut matrix = DMatrix::identity(n, n);
    for m in 1..=order {
        for i in 0..n {
            let diagonal = matrix[(i, i)];
            let mut sum = 0.0;
            for j in (0..n).filter(|j| *j != i) {
                let ratio = weights[j] / weights[i];
                let entry = m as f64 / (nodes[i] - nodes[j]) * (ratio * diagonal - matrix[(i, j)]);
                matrix[(i, j)] = entry;
                sum += entry;
            }
            matrix[(i, i)] = -sum;
        }
    }
    Ok(matrix)
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
    Ok(())
}

fn out_of_range(what: &'static str, value: f64, range: &'static str) -> Error {
    Error::Argument { what, value: value.to_string(), range }
}
