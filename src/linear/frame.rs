//! The chains between kept points, and what closes them.

use super::chain::Chain;
use super::closure::{self, Closed};
use super::condition::{LinearCondition, linear_condition};
use super::element::width;
use super::nudge::Perturbation;
use crate::error::{Error, Result};
use crate::mesh::Mesh;
use crate::model::{Layout, Model, Place, Side};
use nalgebra::{DMatrix, DVector};

/// How each point of the model is treated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Treatment {
    /// All states continuous, no condition: an ordinary joint of two elements.
    Plain,
    /// As many conditions at this point alone as continuities given up: a link of its own.
    Local,
    /// Its states stay in the closing system.
    Kept,
}

/// The chains between kept points, and the rows of the closing system.
pub(super) struct Frame {
    layout: Layout,
    /// Expected sizes of the states, divided by the common scale, on each element.
    ends: Vec<Vec<f64>>,
    treatments: Vec<Treatment>,
    /// Links to insert at local points.
    local: Vec<Option<Vec<f64>>>,
    /// Rows `[left state | right state | constants | 1]` that tie both sides of each kept inner point.
    joints: Vec<(usize, Vec<f64>)>,
    /// Conditions of the closing system: index, and coefficients per place, constants, 1.
    conditions: Vec<(usize, LinearCondition)>,
    chains: Vec<Chain>,
    /// Positions on its chain of the left state of each element, in order: chain, position.
    elements: Vec<(usize, usize)>,
    /// Kept points, both ends included.
    kept: Vec<usize>,
}

impl Frame {
    /// `ends` holds expected sizes of the states, divided by the common scale, on each element.
    pub fn new(
        model: &dyn Model,
        mesh: &Mesh,
        scale: &[f64],
        ends: Vec<Vec<f64>>,
        perturbation: &Perturbation,
    ) -> Result<Self> {
        let layout = model.layout().clone();
        let points = model.points().len();
        let conditions = model.conditions();
        let needed = layout.states() + layout.constants() + model.releases().len();
        if conditions.len() != needed {
            return Err(Error::ConditionCount { found: conditions.len(), needed });
        }
        let mut balance = vec![0isize; points];
        let mut kept = vec![false; points];
        let mut special = vec![false; points];
        (kept[0], kept[points - 1]) = (true, true);
        model.releases().iter().for_each(|r| (balance[r.point] -= 1, special[r.point] = true).0);
        for condition in conditions {
            let mut at: Vec<usize> = condition.places.iter().map(|p| p.point).collect();
            at.sort_unstable();
            at.dedup();
            if let [point] = at[..] {
                balance[point] += 1;
            } else {
                at.iter().for_each(|p| kept[*p] = true);
            }
            at.iter().for_each(|p| special[*p] = true);
        }
        let treatments: Vec<Treatment> = (0..points)
            .map(|p| match (kept[p] || balance[p] != 0, special[p]) {
                (true, _) => Treatment::Kept,
                (false, true) => Treatment::Local,
                (false, false) => Treatment::Plain,
            })
            .map(|t| if layout.states() == 0 && t == Treatment::Local { Treatment::Kept } else { t })
            .collect();
        let treatments: Vec<Treatment> = treatments
            .into_iter()
            .enumerate()
            .map(|(p, t)| if p == 0 || p + 1 == points { Treatment::Kept } else { t })
            .collect();
        let mut frame = Self {
            local: vec![None; points],
            joints: Vec::new(),
            conditions: Vec::new(),
            chains: vec![Chain::new(layout.states(), layout.constants())],
            elements: Vec::new(),
            kept: (0..points).filter(|p| treatments[*p] == Treatment::Kept).collect(),
            treatments,
            ends,
            layout,
        };
        frame.lay_out(model, mesh, scale, perturbation)?;
        Ok(frame)
    }

    /// Continuity rows and conditions, sorted into local links and the closing system.
    fn lay_out(&mut self, model: &dyn Model, mesh: &Mesh, scale: &[f64], perturbation: &Perturbation) -> Result<()> {
        let layout = self.layout.clone();
        let (m, width) = (layout.states(), width(&layout));
        let joint = |point: usize| -> Vec<f64> {
            let mut rows = Vec::with_capacity(m * width);
            for (i, &order) in layout.orders().iter().enumerate() {
                for k in 0..order {
                    if model.releases().iter().any(|r| (r.point, r.unknown, r.order) == (point, i, k)) {
                        continue;
                    }
                    let state = layout.state(i, k);
                    let mut row = vec![0.0; width];
                    (row[state], row[m + state]) = (1.0, -1.0);
                    rows.extend(row);
                }
            }
            rows
        };
        for point in 1..self.treatments.len() - 1 {
            match self.treatments[point] {
                Treatment::Plain => {}
                Treatment::Local => self.local[point] = Some(joint(point)),
                Treatment::Kept => self.joints.push((point, joint(point))),
            }
        }
        for (index, condition) in model.conditions().iter().enumerate() {
            let LinearCondition { places, tail } = linear_condition(model, index, scale, perturbation)?;
            let local = condition.places.first().and_then(|p| self.local[p.point].as_mut());
            if let Some(rows) = local {
                let mut row = vec![0.0; width];
                for (place, coefficients) in &places {
                    let first = if place.side == Side::Left { 0 } else { m };
                    row[first..first + m].iter_mut().zip(coefficients).for_each(|(r, c)| *r += c);
                }
                row[2 * m..].copy_from_slice(&tail);
                rows.extend(row);
            } else {
                self.conditions.push((index, LinearCondition { places, tail }));
            }
        }
        for (point, rows) in self.local.iter_mut().enumerate() {
            let Some(rows) = rows else { continue };
            let after = mesh.elements.partition_point(|e| e.piece < point);
            let weights: Vec<f64> = self.ends[after - 1].iter().chain(&self.ends[after]).copied().collect();
            for row in rows.chunks_exact_mut(width) {
                let size = row.iter().zip(&weights).fold(0.0f64, |s, (a, w)| s.max((a * w).abs()));
                if size > 0.0 {
                    row.iter_mut().for_each(|a| *a /= size);
                }
            }
        }
        Ok(())
    }

    /// Takes in the condensed rows of the next element.
    pub fn push(&mut self, rows: &[f64]) {
        let chain = self.chains.len() - 1;
        self.elements.push((chain, self.chains[chain].len() - 1));
        self.chains[chain].push(rows);
    }

    /// The last element ended at this inner point.
    pub fn pass_point(&mut self, point: usize) {
        match self.treatments[point] {
            Treatment::Plain => {}
            Treatment::Local => {
                if let (Some(link), Some(chain)) = (&self.local[point], self.chains.last_mut()) {
                    chain.push(link);
                }
            }
            Treatment::Kept => self.chains.push(Chain::new(self.layout.states(), self.layout.constants())),
        }
    }

    /// First column of the state on the inner side of chain `chain`: at its left or right end.
    fn column(&self, chain: usize, side: Side) -> usize {
        (2 * chain + usize::from(side == Side::Left)) * self.layout.states()
    }

    /// Column of a place in the closing system.
    fn place_column(&self, place: &Place) -> usize {
        let index = self.kept.partition_point(|k| *k < place.point);
        let last = self.kept.len() - 1;
        match (index, place.side) {
            (0, _) => self.column(0, Side::Right),
            (i, _) if i == last => self.column(last - 1, Side::Left),
            (i, Side::Left) => self.column(i - 1, Side::Left),
            (i, Side::Right) => self.column(i, Side::Right),
        }
    }

    pub fn close(&self, model: &dyn Model) -> Result<Closed> {
        let (m, constants) = (self.layout.states(), self.layout.constants());
        let size = 2 * m * self.chains.len() + constants;
        let (mut a, mut b) = (DMatrix::zeros(size, size), DVector::zeros(size));
        let mut next = 0;
        let mut add = |parts: &[(usize, &[f64])], tail: &[f64]| -> Result<()> {
            if next == size {
                return Err(Error::ConditionCount { found: size + 1, needed: size });
            }
            for (column, values) in parts {
                values.iter().enumerate().for_each(|(k, v)| a[(next, column + k)] += v);
            }
            tail[..constants].iter().enumerate().for_each(|(c, v)| a[(next, 2 * m * self.chains.len() + c)] = *v);
            b[next] = -tail[constants];
            next += 1;
            Ok(())
        };
        let width = width(&self.layout);
        for (index, chain) in self.chains.iter().enumerate() {
            let (left, right) = (self.column(index, Side::Right), self.column(index, Side::Left));
            for row in chain.reduced().unwrap_or(&[]).chunks_exact(width) {
                add(&[(left, &row[..m]), (right, &row[m..2 * m])], &row[2 * m..])?;
            }
        }
        for (point, rows) in &self.joints {
            let left = self.place_column(&Place { point: *point, side: Side::Left });
            let right = self.place_column(&Place { point: *point, side: Side::Right });
            for row in rows.chunks_exact(width) {
                add(&[(left, &row[..m]), (right, &row[m..2 * m])], &row[2 * m..])?;
            }
        }
        for (_, LinearCondition { places, tail }) in &self.conditions {
            let parts: Vec<(usize, &[f64])> =
                places.iter().map(|(place, c)| (self.place_column(place), c.as_slice())).collect();
            add(&parts, tail)?;
        }
        if next != size {
            return Err(Error::ConditionCount {
                found: model.conditions().len(),
                needed: model.conditions().len() + size - next,
            });
        }
        let mut sizes = DVector::from_element(size, 1.0);
        let last_elements = self.elements.windows(2).enumerate().filter(|(_, w)| w[0].0 != w[1].0).map(|(e, _)| e);
        let mut first = 0;
        for (chain, last) in last_elements.chain([self.elements.len() - 1]).enumerate() {
            for (side, element) in [(Side::Right, first), (Side::Left, last)] {
                sizes.rows_mut(self.column(chain, side), m).copy_from_slice(&self.ends[element]);
            }
            first = last + 1;
        }
        closure::close(&a, &b, &sizes)
    }

    /// States at both ends of each element, and the constants.
    #[allow(clippy::type_complexity)]
    pub fn states(&self, values: &DVector<f64>, unit: f64) -> Result<(Vec<[Vec<f64>; 2]>, Vec<f64>)> {
        let m = self.layout.states();
        let values = values.as_slice();
        let constants = values[2 * m * self.chains.len()..].to_vec();
        let mut all = Vec::with_capacity(self.chains.len());
        for (index, chain) in self.chains.iter().enumerate() {
            let at = |side| &values[self.column(index, side)..][..m];
            all.push(chain.states(at(Side::Right), at(Side::Left), &constants, unit)?);
        }
        let pairs = self.elements.iter().map(|(c, p)| [all[*c][*p].clone(), all[*c][*p + 1].clone()]).collect();
        Ok((pairs, constants))
    }

    /// Which conditions take part in each vanishing combination of rows.
    pub fn contradictions(&self, model: &dyn Model, closed: &Closed) -> Vec<(Vec<String>, f64)> {
        let first = closed.solution.len() - self.conditions.len();
        closed
            .combinations
            .iter()
            .map(|(weights, against)| {
                let largest = weights.amax();
                let mut names: Vec<String> = self
                    .conditions
                    .iter()
                    .enumerate()
                    .filter(|(row, _)| weights[first + row].abs() > 1e-6 * largest)
                    .map(|(_, (index, _))| model.conditions()[*index].name.clone())
                    .collect();
                names.dedup();
                (names, *against)
            })
            .collect()
    }
}
