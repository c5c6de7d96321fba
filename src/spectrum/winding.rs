//! Argument principle: how often the determinant of the pencil turns round zero along a closed contour.
//!
//! The determinant is that of the matrices of [`super::dense`] on a mesh; only its argument is made, from the pivots
//! of an elimination element by element, so that nothing over- or underflows.

use super::dense::{Dense, Row};
use super::pencil::POWERS;
use num_complex::Complex64;
use std::f64::consts::PI;

/// Points of the first sampling.
const FIRST: usize = 24;
/// Most determinants of one contour.
const MOST: usize = 1500;
/// Largest turn between two neighbouring points.
const TURN: f64 = 0.9;

/// The pencil's matrices, sorted for elimination.
pub(crate) struct Determinant {
    /// For each element its rows and the columns that only they have.
    elements: Vec<Part>,
    /// Rows that no element owns.
    rest: Vec<Row>,
    /// Columns kept.
    kept: usize,
}

struct Part {
    rows: Vec<Row>,
    own: usize,
    /// Kept columns that occur, in order: the columns behind the own ones.
    others: Vec<usize>,
}

impl Determinant {
    /// Sorts rows and columns. A condition that holds a highest derivative joins everything into one part.
    pub fn new(dense: &Dense<'_>) -> Self {
        let (inner, size) = dense.inner_columns();
        let kept_before = |c: usize| inner.iter().take_while(|r| r.end <= c).map(|r| r.len()).sum::<usize>();
        let owner = |row: &Row| inner.iter().position(|r| row.iter().any(|(c, _)| r.contains(c)));
        let counted = |e: usize| dense.rows_of_element(e);
        let mut parts: Vec<Vec<Row>> = vec![Vec::new(); inner.len()];
        let mut rest = Vec::new();
        let mut simple = true;
        for (index, row) in dense.rows().iter().enumerate() {
            let mut owners = inner.iter().filter(|r| row.iter().any(|(c, _)| r.contains(c)));
            match (owner(row), owners.next().is_some(), owners.next().is_some()) {
                (Some(e), true, false) if counted(e).contains(&index) => parts[e].push(row.clone()),
                (None, ..) => rest.push(row.clone()),
                _ => simple = false,
            }
        }
        if !simple {
            let rows = dense.rows().to_vec();
            let whole = Part { rows, own: size, others: Vec::new() };
            return Self { elements: vec![whole], rest: Vec::new(), kept: 0 };
        }
        let kept = size - inner.iter().map(|r| r.len()).sum::<usize>();
        let moved = |c: usize| c - kept_before(c);
        let elements = parts
            .into_iter()
            .zip(&inner)
            .map(|(rows, range)| {
                let mut others: Vec<usize> =
                    rows.iter().flatten().map(|(c, _)| *c).filter(|c| !range.contains(c)).map(moved).collect();
                others.sort_unstable();
                others.dedup();
                let place = |c: usize| {
                    if range.contains(&c) {
                        c - range.start
                    } else {
                        range.len() + others.partition_point(|o| *o < moved(c))
                    }
                };
                let rows = rows.into_iter().map(|row| row.into_iter().map(|(c, a)| (place(c), a)).collect()).collect();
                Part { rows, own: range.len(), others }
            })
            .collect();
        let rest = rest.into_iter().map(|row| row.into_iter().map(|(c, a)| (moved(c), a)).collect()).collect();
        Self { elements, rest, kept }
    }

    /// exp(i arg det A(lambda)), or zero where a pivot vanishes.
    pub fn phase(&self, lambda: Complex64) -> Complex64 {
        let value = |a: &[Complex64; POWERS]| a[0] + lambda * (a[1] + lambda * a[2]);
        let mut phase = Complex64::ONE;
        let mut closing: Vec<Vec<Complex64>> = Vec::with_capacity(self.kept);
        for part in &self.elements {
            let width = part.own + part.others.len();
            let mut matrix: Vec<Vec<Complex64>> = part
                .rows
                .iter()
                .map(|row| {
                    let mut full = vec![Complex64::ZERO; width];
                    row.iter().for_each(|(c, a)| full[*c] += value(a));
                    full
                })
                .collect();
            phase *= eliminate(&mut matrix, part.own);
            for row in matrix.drain(part.own..) {
                let mut full = vec![Complex64::ZERO; self.kept];
                part.others.iter().zip(&row[part.own..]).for_each(|(c, v)| full[*c] = *v);
                closing.push(full);
            }
        }
        for row in &self.rest {
            let mut full = vec![Complex64::ZERO; self.kept];
            row.iter().for_each(|(c, a)| full[*c] += value(a));
            closing.push(full);
        }
        let last = closing.len();
        phase * eliminate(&mut closing, last)
    }

    /// Number of zeros inside a closed contour, given by points in order for t in [0, 1]; `None` if it runs too near to one
    /// or cannot be followed.
    pub fn winding(&self, contour: &dyn Fn(f64) -> Complex64, budget: &mut dyn FnMut() -> bool) -> Option<i64> {
        let at = |t: f64| self.phase(contour(t));
        let mut samples: Vec<(f64, Complex64)> =
            (0..FIRST).map(|k| k as f64 / FIRST as f64).map(|t| (t, at(t))).collect();
        samples.push((1.0, samples[0].1));
        let mut made = FIRST;
        let mut total = 0.0;
        let mut stack: Vec<((f64, Complex64), (f64, Complex64))> = samples.windows(2).map(|s| (s[0], s[1])).collect();
        while let Some((a, b)) = stack.pop() {
            if made >= MOST || b.0 - a.0 < 1e-9 || !budget() {
                return None;
            }
            let middle = (0.5 * (a.0 + b.0), at(0.5 * (a.0 + b.0)));
            made += 1;
            if middle.1.norm() < 0.5 {
                return None;
            }
            let turn = |p: Complex64, q: Complex64| (q * p.conj()).arg();
            let (first, second, whole) = (turn(a.1, middle.1), turn(middle.1, b.1), turn(a.1, b.1));
            // Halves that do not add up to the whole, or that turn much, are looked at more closely.
            if first.abs() < TURN && second.abs() < TURN && (first + second - whole).abs() < 1e-6 {
                total += first + second;
            } else {
                stack.extend([(a, middle), (middle, b)]);
            }
        }
        let turns = total / (2.0 * PI);
        ((turns - turns.round()).abs() < 1e-3).then_some(turns.round() as i64)
    }
}

/// Eliminates the leading columns with row pivoting; the phase of the product of pivots with the sign of the
/// exchanges.
fn eliminate(matrix: &mut [Vec<Complex64>], columns: usize) -> Complex64 {
    let mut phase = Complex64::ONE;
    for c in 0..columns {
        let size = |v: &Complex64| v.re.abs() + v.im.abs();
        let Some(best) = (c..matrix.len()).max_by(|a, b| size(&matrix[*a][c]).total_cmp(&size(&matrix[*b][c]))) else {
            return Complex64::ZERO;
        };
        if best != c {
            matrix.swap(best, c);
            phase = -phase;
        }
        let pivot = matrix[c][c];
        let norm = pivot.norm();
        if norm == 0.0 || !norm.is_finite() {
            return Complex64::ZERO;
        }
        phase *= pivot / norm;
        let (above, below) = matrix.split_at_mut(c + 1);
        let source = &above[c][c + 1..];
        for row in below {
            if row[c] == Complex64::ZERO {
                continue;
            }
            let factor = row[c] / pivot;
            row[c + 1..].iter_mut().zip(source).for_each(|(v, s)| *v -= factor * s);
        }
    }
    phase / phase.norm()
}
