//! The small dense system of kept states, constants and conditions that closes the chain.

use crate::error::{Error, Result};
use crate::tolerance;
use nalgebra::{DMatrix, DVector};

/// What the closing system says about solvability.
#[derive(Debug, Clone)]
pub(crate) struct Closed {
    /// The solution; meaningless when `free` is not empty.
    pub solution: DVector<f64>,
    /// Ratio of largest to smallest singular value of the scaled system.
    pub condition: f64,
    /// Free motions: solutions of the homogeneous system, none for a regular one.
    pub free: Vec<DVector<f64>>,
    /// For each free motion the combination of rows that vanishes and what it makes of the right-hand
    /// side, relative.
    pub combinations: Vec<(DVector<f64>, f64)>,
}

/// Solves A x = b. `sizes` are the sizes that the unknowns are expected to have: rows are balanced by them
/// before the solve. Singular systems are recognised by the singular values of the matrix scaled by columns and rows
/// to largest entry 1, and analysed.
pub(crate) fn close(a: &DMatrix<f64>, b: &DVector<f64>, sizes: &DVector<f64>) -> Result<Closed> {
    let size = a.nrows();
    debug_assert_eq!(size, a.ncols());
    if size == 0 {
        let solution = DVector::zeros(0);
        return Ok(Closed { solution, condition: 1.0, free: Vec::new(), combinations: Vec::new() });
    }
    if !a.iter().chain(b.iter()).all(|v| v.is_finite()) {
        return Err(Error::NotFinite { what: "the closing system".into(), x: f64::NAN });
    }
    let (scaled, right, columns) = equilibrate(a.clone(), b.clone());
    let pivots = scaled.clone().col_piv_qr().r().diagonal().abs();
    let (first, last) = (pivots[0], pivots[size - 1]);
    let suspicious = last <= tolerance::SUSPICIOUS * first;
    let (condition, free, combinations) = if suspicious || size <= tolerance::SMALL_CLOSURE {
        analyse(&scaled, &right)?
    } else {
        (first / last, Vec::new(), Vec::new())
    };
    if !free.is_empty() {
        let free = free.into_iter().map(|f| f.component_div(&columns)).collect();
        return Ok(Closed { solution: DVector::zeros(size), condition, free, combinations });
    }
    let mut weighted = a.clone();
    for (mut column, s) in weighted.column_iter_mut().zip(sizes.iter()) {
        column *= *s;
    }
    let mut right = b.clone();
    for (mut row, b) in weighted.row_iter_mut().zip(right.iter_mut()) {
        let largest = row.amax();
        if largest > 0.0 {
            row /= largest;
            *b /= largest;
        }
    }
    let qr = weighted.clone().col_piv_qr();
    let mut solution = qr.solve(&right).ok_or_else(no_factor)?;
    // One step of refinement: cheap here, and it removes the growth of the triangular solve.
    if let Some(correction) = qr.solve(&(&right - &weighted * &solution)) {
        solution += correction;
    }
    solution.component_mul_assign(sizes);
    Ok(Closed { solution, condition, free, combinations })
}

/// Columns, then rows, to largest entry 1; the column scales.
fn equilibrate(mut a: DMatrix<f64>, mut b: DVector<f64>) -> (DMatrix<f64>, DVector<f64>, DVector<f64>) {
    let mut columns = DVector::from_element(a.ncols(), 1.0);
    for (mut column, scale) in a.column_iter_mut().zip(columns.iter_mut()) {
        let largest = column.amax();
        if largest > 0.0 {
            *scale = largest;
            column /= largest;
        }
    }
    for (mut row, b) in a.row_iter_mut().zip(b.iter_mut()) {
        let largest = row.amax();
        if largest > 0.0 {
            row /= largest;
            *b /= largest;
        }
    }
    (a, b, columns)
}

fn no_factor() -> Error {
    Error::Singular("the closing system has no unique solution".into())
}

type Analysis = (f64, Vec<DVector<f64>>, Vec<(DVector<f64>, f64)>);

/// Condition number, null vectors from both sides, and the right-hand side against the left ones.
fn analyse(a: &DMatrix<f64>, b: &DVector<f64>) -> Result<Analysis> {
    let size = a.nrows();
    // faer's decomposition, since nalgebra's gives up on some exactly singular matrices.
    let svd = faer::MatRef::from_column_major_slice(a.as_slice(), size, size).svd().map_err(|_| no_factor())?;
    let column = |matrix: faer::MatRef<'_, f64>, k: usize| DVector::from_fn(size, |r, _| matrix[(r, k)]);
    let values: Vec<f64> = svd.S().column_vector().iter().copied().collect();
    let (largest, smallest) = (values[0], values[size - 1]);
    let (mut free, mut combinations) = (Vec::new(), Vec::new());
    for (k, value) in values.iter().enumerate() {
        if *value <= tolerance::SINGULAR * largest {
            free.push(column(svd.V(), k));
            let left = column(svd.U(), k);
            let against = left.dot(b).abs() / b.amax().max(f64::MIN_POSITIVE);
            combinations.push((left, against));
        }
    }
    Ok((largest / smallest.max(f64::MIN_POSITIVE), free, combinations))
}
