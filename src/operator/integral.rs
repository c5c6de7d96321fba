//! Repeated integration of the polynomial through nodal values.

use nalgebra::DMatrix;

use super::nodal::{finite, interpolation};
use crate::error::Result;
use crate::legendre::{Rule, fill_values, to_modal};

/// The r-fold integral from -1 at the rule's own nodes, an n x n matrix Q_r.
///
/// (Q_r v)_i = integral from -1 to s_i of (s_i - t)^(r-1) / (r-1)! p(t) dt, p the polynomial of degree
/// n - 1 with p(s_j) = v_j; Q_0 is the identity. Exact in exact arithmetic; absolute error of each entry a few
/// 1e-16. Where the last node is s = 1 the last row of Q_1 is the weights, bit for bit; where the first
/// is s = -1 the first row is 0.
///
/// # Example
/// ```
/// use spanwise::{legendre::lobatto, operator::integration};
/// let rule = lobatto(6)?;
/// let q = integration(&rule, 2);
/// // twice integrated, 1 becomes (1+s)^2 / 2
/// let twice = q.column_sum();
/// for (s, value) in rule.nodes().iter().zip(twice.iter()) {
///     assert!((value - (1.0 + s).powi(2) / 2.0).abs() < 1e-15);
/// }
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Greengard, SIAM J. Numer. Anal. 28 (1991), in Legendre coefficients.
pub fn integration(rule: &Rule, r: usize) -> DMatrix<f64> {
    let n = rule.len();
    if r == 0 {
        return DMatrix::identity(n, n);
    }
    let ends: Vec<(f64, f64)> =
        rule.from_left().iter().zip(rule.from_right()).map(|(left, right)| (*left, *right)).collect();
    modes(&ends, n, r) * to_modal(rule)
}

/// The r-fold integral from -1 at any points: a (points x n) matrix, as [`integration`] otherwise.
///
/// For r = 0 it is [`interpolation`].
///
/// # Errors
/// [`crate::error::Error::Argument`] for a point that is not finite.
///
/// # Example
/// ```
/// use spanwise::{legendre::gauss, operator::integration_at};
/// let rule = gauss(4)?;
/// let q = integration_at(&rule, 1, &[1.0])?;
/// assert_eq!(q.as_slice(), rule.weights());
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn integration_at(rule: &Rule, r: usize, points: &[f64]) -> Result<DMatrix<f64>> {
    if r == 0 {
        // The sum over modes cancels here, by a factor near n.
        return interpolation(rule.nodes(), points);
    }
    finite(points)?;
    let ends: Vec<(f64, f64)> = points.iter().map(|s| (1.0 + s, 1.0 - s)).collect();
    Ok(modes(&ends, rule.len(), r) * to_modal(rule))
}

/// The r-fold integrals of P_0, ..., P_(n-1) at points given by their distances from the ends.
///
/// With J_r^k the r-fold integral of P_k, J_r^k = (J_(r-1)^(k+1) - J_(r-1)^(k-1)) / (2k+1), and
/// J_r^0 = (1+s)^r / r!.
fn modes(ends: &[(f64, f64)], n: usize, r: usize) -> DMatrix<f64> {
    let mut matrix = DMatrix::zeros(ends.len(), n);
    let mut row = vec![0.0; n + r];
    for (i, &(from_left, from_right)) in ends.iter().enumerate() {
        fill_values(from_left, from_right, &mut row);
        let mut constant = 1.0;
        for fold in 1..=r {
            constant *= from_left / fold as f64;
            let mut below = row[0];
            row[0] = constant;
            for k in 1..n + r - fold {
                let here = row[k];
                row[k] = (row[k + 1] - below) / (2 * k + 1) as f64;
                below = here;
            }
        }
        matrix.row_mut(i).copy_from_slice(&row[..n]);
    }
    matrix
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::legendre::{gauss, lobatto};

    #[test]
    fn end_rows() {
        let rule = lobatto(17).expect("n >= 2");
        let q = integration(&rule, 1);
        for j in 0..17 {
            assert_eq!(q[(16, j)], rule.weights()[j]);
            assert_eq!(q[(0, j)], 0.0);
        }
        let rule = gauss(17).expect("n >= 1");
        let q = integration_at(&rule, 1, &[-1.0, 1.0]).expect("finite");
        for j in 0..17 {
            assert_eq!(q[(1, j)], rule.weights()[j]);
            assert_eq!(q[(0, j)], 0.0);
        }
    }
}
