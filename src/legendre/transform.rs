//! From values at the nodes to Legendre coefficients, and back.

use nalgebra::DMatrix;

use super::{Kind, Rule, fill_values};

/// Values at the rule's nodes from Legendre coefficients: the n x n matrix P_k(s_j), row j, column k.
///
/// Absolute error of column k below (2 + sqrt(k)) eps, as [`values`](super::values), at the exact nodes.
///
/// # Example
/// ```
/// use spanwise::legendre::{lobatto, to_nodal};
/// let matrix = to_nodal(&lobatto(3)?);
/// assert_eq!(matrix.column(2).as_slice(), [1.0, -0.5, 1.0]); // P_2 at -1, 0, 1
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn to_nodal(rule: &Rule) -> DMatrix<f64> {
    values_at_nodes(rule, rule.len())
}

/// P_k(s_j), row j, column k, k < columns.
pub(crate) fn values_at_nodes(rule: &Rule, columns: usize) -> DMatrix<f64> {
    let mut matrix = DMatrix::zeros(rule.len(), columns);
    let mut row = vec![0.0; columns];
    for j in 0..rule.len() {
        fill_values(rule.from_left()[j], rule.from_right()[j], &mut row);
        matrix.row_mut(j).copy_from_slice(&row);
    }
    matrix
}

/// Legendre coefficients of the interpolant through values at the rule's nodes, an n x n matrix.
///
/// Entry (k, j) is w_j P_k(s_j) / g_k, where g_k = sum_j w_j P_k(s_j)^2 is 2/(2k+1), but 2/(n-1) for the
/// highest coefficient on Lobatto nodes, whose square the rule does not integrate exactly. The inverse of
/// [`to_nodal`]: the round trip returns values to about 1e-15 of the largest.
///
/// # Example
/// ```
/// use nalgebra::DVector;
/// use spanwise::legendre::{lobatto, to_modal};
/// let rule = lobatto(3)?;
/// let values = DVector::from_iterator(3, rule.nodes().iter().map(|s| s * s));
/// let c = to_modal(&rule) * values; // s^2 = (P_0 + 2 P_2) / 3
/// assert!((c[0] - 1.0 / 3.0).abs() < 1e-15 && c[1].abs() < 1e-15 && (c[2] - 2.0 / 3.0).abs() < 1e-15);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: discrete orthogonality; Canuto, Hussaini, Quarteroni & Zang, Spectral Methods (2006), 2.3
/// (from memory).
pub fn to_modal(rule: &Rule) -> DMatrix<f64> {
    let n = rule.len();
    let mut matrix = to_nodal(rule).transpose();
    for k in 0..n {
        let inverse_norm =
            if k + 1 == n && rule.kind() == Kind::Lobatto { (n - 1) as f64 / 2.0 } else { (2 * k + 1) as f64 / 2.0 };
        for (entry, w) in matrix.row_mut(k).iter_mut().zip(rule.weights()) {
            *entry *= w * inverse_norm;
        }
    }
    matrix
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::legendre::{End, gauss, lobatto, radau};

    #[test]
    fn round_trip() {
        for n in [2, 3, 5, 16, 33, 64, 200] {
            let rules = [gauss(n), lobatto(n), radau(n, End::Left), radau(n, End::Right)];
            for rule in rules.map(|rule| rule.expect("n >= 2")) {
                let product = to_nodal(&rule) * to_modal(&rule);
                let error = (product - DMatrix::identity(n, n)).amax();
                assert!(error < 1e-14, "{:?} {n}: {error:e}", rule.kind());
            }
        }
    }
}
