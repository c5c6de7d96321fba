//! Mass matrices: inner products of polynomials given by nodal values.

use nalgebra::{DMatrix, DVector};

use crate::legendre::{Kind, Rule};

/// The exact mass matrix M_ij = integral of l_i l_j over [-1, 1] of the Lagrange basis, n x n.
///
/// For Gauss and Radau nodes it is diag(w). For Lobatto nodes the highest mode's discrete norm is wrong
/// by a known factor, which makes M = diag(w) - z z^T / (2n-1), z_j = (-1)^j sqrt(w_j); relative error of
/// each entry a few 1e-16.
///
/// # Example
/// ```
/// use spanwise::{legendre::lobatto, operator::mass};
/// let m = mass(&lobatto(2)?); // linear functions: [[2, 1], [1, 2]] / 3
/// assert!((m[(0, 0)] - 2.0 / 3.0).abs() < 1e-15 && (m[(0, 1)] - 1.0 / 3.0).abs() < 1e-15);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: V^-T diag(2/(2k+1)) V^-1 with V_jk = P_k(s_j), written out.
pub fn mass(rule: &Rule) -> DMatrix<f64> {
    let mut matrix = lumped(rule);
    if rule.kind() == Kind::Lobatto {
        let n = rule.len();
        let z = DVector::from_iterator(
            n,
            rule.weights().iter().enumerate().map(|(j, w)| if j % 2 == 0 { w.sqrt() } else { -w.sqrt() }),
        );
        matrix.ger(-1.0 / (2 * n - 1) as f64, &z, &z, 1.0);
    }
    matrix
}

/// The lumped mass matrix diag(w), n x n: [`mass`] with the rule's own quadrature.
///
/// # Example
/// ```
/// use spanwise::{legendre::lobatto, operator::lumped};
/// assert_eq!(lumped(&lobatto(2)?).as_slice(), [1.0, 0.0, 0.0, 1.0]);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn lumped(rule: &Rule) -> DMatrix<f64> {
    DMatrix::from_diagonal(&DVector::from_column_slice(rule.weights()))
}
