//! A chain of links between neighbouring states, reduced to one link between its two ends.

use super::householder::eliminate;
use crate::error::{Error, Result};
use crate::tolerance;

/// A chain of states z_0, z_1, ..., each two neighbours tied by M rows
/// `[z_j | z_(j+1) | constants | 1]` whose product is zero.
///
/// Reduction: the rows that hold z_j are rotated so that only M of them keep it; these are stored for
/// back-substitution, the other M tie z_0 to z_(j+1). Cost O(M^3) a link.
pub(crate) struct Chain {
    states: usize,
    /// constants + 1
    tail: usize,
    /// M rows `[z_0 | z_last | constants | 1]`
    reduced: Option<Vec<f64>>,
    /// For each eliminated z_j: M rows `[z_j (upper triangular) | z_0 | z_(j+1) | constants | 1]`
    steps: Vec<Vec<f64>>,
}

impl Chain {
    /// An empty chain.
    pub fn new(states: usize, constants: usize) -> Self {
        Self { states, tail: constants + 1, reduced: None, steps: Vec::new() }
    }

    /// Number of states on the chain, both ends included.
    pub fn len(&self) -> usize {
        if self.reduced.is_some() { self.steps.len() + 2 } else { 1 }
    }

    /// Appends a link.
    pub fn push(&mut self, link: &[f64]) {
        let (m, tail) = (self.states, self.tail);
        let Some(reduced) = &mut self.reduced else {
            self.reduced = Some(link.to_vec());
            return;
        };
        let (width, columns) = (2 * m + tail, 3 * m + tail);
        let mut stack = vec![0.0; 2 * m * columns];
        let (upper, lower) = stack.split_at_mut(m * columns);
        if m > 0 {
            for (row, old) in upper.chunks_exact_mut(columns).zip(reduced.chunks_exact(width)) {
                row[..m].copy_from_slice(&old[m..2 * m]);
                row[m..2 * m].copy_from_slice(&old[..m]);
                row[3 * m..].copy_from_slice(&old[2 * m..]);
            }
            for (row, new) in lower.chunks_exact_mut(columns).zip(link.chunks_exact(width)) {
                row[..m].copy_from_slice(&new[..m]);
                row[2 * m..].copy_from_slice(&new[m..]);
            }
            eliminate(&mut stack, columns, m);
            for (row, kept) in reduced.chunks_exact_mut(width).zip(stack[m * columns..].chunks_exact(columns)) {
                row.copy_from_slice(&kept[m..]);
            }
            stack.truncate(m * columns);
        }
        self.steps.push(stack);
    }

    /// The M rows `[z_0 | z_last | constants | 1]`; `None` for an empty chain.
    pub fn reduced(&self) -> Option<&[f64]> {
        self.reduced.as_deref()
    }

    /// All states from those at both ends. `unit` is 1 for the solution, 0 for a free motion.
    pub fn states(&self, first: &[f64], last: &[f64], constants: &[f64], unit: f64) -> Result<Vec<Vec<f64>>> {
        let (m, columns) = (self.states, 3 * self.states + self.tail);
        let mut states = vec![Vec::new(); self.len()];
        let count = states.len();
        states[count - 1] = last.to_vec();
        states[0] = first.to_vec();
        for (j, step) in self.steps.iter().enumerate().rev() {
            let next = &states[j + 2];
            let known: Vec<f64> =
                first.iter().chain(next).chain(constants).copied().chain(std::iter::once(unit)).collect();
            let mut state = vec![0.0; m];
            for r in (0..m).rev() {
                let row = &step[r * columns..(r + 1) * columns];
                let mut sum: f64 = row[m..].iter().zip(&known).map(|(a, z)| a * z).sum();
                sum += row[r + 1..m].iter().zip(&state[r + 1..]).map(|(a, z)| a * z).sum::<f64>();
                let size = (0..=r).map(|q| step[q * columns + r].abs()).fold(0.0, f64::max);
                if row[r].abs() <= tolerance::PIVOT * size || size == 0.0 {
                    return Err(Error::Singular(
                        "the problem has no unique solution: a state inside the span is tied to nothing".into(),
                    ));
                }
                state[r] = -sum / row[r];
            }
            states[j + 1] = state;
        }
        Ok(states)
    }
}

#[cfg(test)]
mod tests {
    use super::Chain;

    /// Ascher & Mattheij's stumbling block for row-pivoted elimination (see Wright 1993): y' = A y with
    /// A = [[-1/6, 1], [1, -1/6]] over 60 units, y(0) + y(60) = b, 200 steps.
    #[test]
    fn stays_stable_where_row_pivoted_elimination_does_not() {
        let (steps, length) = (200, 60.0);
        let h: f64 = length / steps as f64;
        // exp(A h) = exp(-h/6) [[cosh h, sinh h], [sinh h, cosh h]]
        let (c, s) = ((-h / 6.0).exp() * h.cosh(), (-h / 6.0).exp() * h.sinh());
        let mut chain = Chain::new(2, 0);
        for _ in 0..steps {
            chain.push(&[-c, -s, 1.0, 0.0, 0.0, -s, -c, 0.0, 1.0, 0.0]);
        }
        // Exact: u = y1 + y2 grows with 5/6, w = y1 - y2 decays with 7/6.
        let (grow, decay) = ((5.0 / 6.0 * length).exp(), (-7.0 / 6.0 * length).exp());
        let rows = chain.reduced().expect("links were pushed").to_vec();
        let matrix = nalgebra::Matrix4::new(
            rows[0], rows[1], rows[2], rows[3], rows[5], rows[6], rows[7], rows[8], 1.0, 0.0, 1.0, 0.0, 0.0, 1.0, 0.0,
            1.0,
        );
        let ends = matrix.lu().solve(&nalgebra::Vector4::new(0.0, 0.0, 1.5, 0.5)).expect("regular");
        let (u, w) = (2.0 / (1.0 + grow), 1.0 / (1.0 + decay));
        let states = chain.states(&[ends[0], ends[1]], &[ends[2], ends[3]], &[], 1.0).expect("regular");
        for (j, state) in states.iter().enumerate() {
            let x = h * j as f64;
            let (u, w) = (u * (5.0 / 6.0 * x).exp(), w * (-7.0 / 6.0 * x).exp());
            assert!((state[0] - 0.5 * (u + w)).abs() < 1e-13, "at {x}");
            assert!((state[1] - 0.5 * (u - w)).abs() < 1e-13, "at {x}");
        }
    }
}
