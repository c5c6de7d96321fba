//! Orthogonal elimination on small dense row blocks.

/// Eliminates the leading `pivots` columns of a row-major matrix by Householder reflections applied to all
/// columns: afterwards they are upper triangular. Backward stable column by column, whatever the scaling of the
/// columns (Golub & Van Loan, Matrix Computations, sec. 5.2).
pub(crate) fn eliminate(matrix: &mut [f64], columns: usize, pivots: usize) {
    let rows = matrix.len() / columns;
    let mut projection = vec![0.0; columns];
    for p in 0..pivots.min(rows) {
        let size = (p..rows).map(|r| matrix[r * columns + p].abs()).fold(0.0, f64::max);
        if size == 0.0 {
            continue;
        }
        let norm = size * (p..rows).map(|r| (matrix[r * columns + p] / size).powi(2)).sum::<f64>().sqrt();
        let head = matrix[p * columns + p];
        let norm = if head > 0.0 { -norm } else { norm };
        // Reflector w = (x - norm*e)/(head - norm), w_0 = 1, factor 2/w'w = (norm - head)/norm.
        let divisor = head - norm;
        let factor = -divisor / norm;
        projection[p + 1..].copy_from_slice(&matrix[p * columns + p + 1..(p + 1) * columns]);
        for r in p + 1..rows {
            let row = &mut matrix[r * columns..(r + 1) * columns];
            row[p] /= divisor;
            let w = row[p];
            if w != 0.0 {
                projection[p + 1..].iter_mut().zip(&row[p + 1..]).for_each(|(s, a)| *s += w * a);
            }
        }
        matrix[p * columns + p] = norm;
        for r in p..rows {
            let row = &mut matrix[r * columns..(r + 1) * columns];
            let w = if r == p { 1.0 } else { std::mem::replace(&mut row[p], 0.0) };
            if w != 0.0 {
                let w = w * factor;
                row[p + 1..].iter_mut().zip(&projection[p + 1..]).for_each(|(a, s)| *a -= w * s);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::eliminate;

    #[test]
    fn keeps_lengths_and_clears_below_the_diagonal() {
        let original: Vec<f64> = (0..24).map(|k| ((k * k * 7 + 3 * k) % 11) as f64 - 4.385).collect();
        let mut matrix = original.clone();
        eliminate(&mut matrix, 6, 3);
        for column in 0..6 {
            let length = |m: &[f64]| (0..4).map(|r| m[r * 6 + column].powi(2)).sum::<f64>().sqrt();
            assert!((length(&matrix) - length(&original)).abs() <= 8.0 * f64::EPSILON * length(&original));
        }
        for (row, column) in [(1, 0), (2, 0), (3, 0), (2, 1), (3, 1), (3, 2)] {
            assert_eq!(matrix[row * 6 + column], 0.0);
        }
        // Inner products between columns are kept as well: the transformation is orthogonal.
        let product = |m: &[f64], a: usize, b: usize| (0..4).map(|r| m[r * 6 + a] * m[r * 6 + b]).sum::<f64>();
        assert!((product(&matrix, 1, 5) - product(&original, 1, 5)).abs() < 1e-13);
    }
}
