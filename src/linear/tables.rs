//! Tables on [-1, 1] for each number of nodes, made once and shared.

use crate::error::Result;
use crate::legendre::{End, Kind};
use crate::mesh::Element;
use crate::model::Model;
use crate::{legendre, operator};
use std::collections::HashMap;
use std::sync::Arc;

/// Nodes, weights and operators for n Legendre-Gauss-Lobatto nodes, or Gauss nodes at a singular end. Matrices are n x n, column-major.
#[derive(Debug)]
pub(crate) struct Tables {
    /// Number of nodes.
    pub n: usize,
    /// Nodes.
    pub nodes: Vec<f64>,
    /// Q_r for r = 1, 2, ...: r-fold integrals from -1, at the nodes.
    pub integrals: Vec<Vec<f64>>,
    /// The same at s = 1.
    pub ends: Vec<Vec<f64>>,
    /// Nodal values to Legendre coefficients.
    modal: Vec<f64>,
}

impl Tables {
    /// Tables for the nodes of a rule, with Q_1..Q_depth.
    pub fn of(rule: &legendre::Rule, depth: usize) -> Result<Self> {
        let n = rule.len();
        let mut ends = Vec::with_capacity(depth);
        for r in 1..=depth {
            ends.push(operator::integration_at(rule, r, &[1.0])?.as_slice().to_vec());
        }
        let integrals = (1..=depth).map(|r| operator::integration(rule, r).as_slice().to_vec()).collect();
        let modal = legendre::to_modal(rule).as_slice().to_vec();
        Ok(Self { n, nodes: rule.nodes().to_vec(), integrals, ends, modal })
    }

    /// Legendre coefficients of the interpolant of nodal values.
    pub fn modal(&self, values: &[f64]) -> Vec<f64> {
        let mut coefficients = vec![0.0; self.n];
        for (column, v) in self.modal.chunks_exact(self.n).zip(values) {
            for (c, m) in coefficients.iter_mut().zip(column) {
                *c += m * v;
            }
        }
        coefficients
    }
}

/// The tables made so far.
#[derive(Debug)]
pub(crate) struct Library {
    depth: usize,
    /// Nodes of elements that are not open.
    kind: Kind,
    tables: HashMap<(usize, bool), Arc<Tables>>,
}

impl Library {
    /// Tables with Q_1..Q_depth for Lobatto nodes.
    pub fn new(depth: usize) -> Self {
        Self { depth, kind: Kind::Lobatto, tables: HashMap::new() }
    }

    /// Tables for a model: Radau nodes that face away from the conditions where these all stand at one end.
    ///
    /// Lobatto nodes treat both directions alike and hand a fast decaying mode on undamped over elements much longer than
    /// its length of decay, and with it the rounding. Of a boundary problem both ends hold such modes; in an
    /// initial-value problem nothing does, and the damping of Radau nodes is wanted (Hairer & Wanner, Solving Ordinary
    /// Differential Equations II, IV.5).
    pub fn suited(model: &dyn Model) -> Self {
        let last = model.points().len() - 1;
        let all_at = |point: usize| {
            let mut places = model.conditions().iter().flat_map(|c| &c.places);
            !model.conditions().is_empty() && places.all(|p| p.point == point)
        };
        let kind = match (all_at(0), all_at(last)) {
            (true, _) => Kind::Radau(End::Right),
            (_, true) => Kind::Radau(End::Left),
            _ => Kind::Lobatto,
        };
        Self { kind, ..Self::new(model.layout().orders().iter().copied().max().unwrap_or(0)) }
    }

    /// Whether elements that are not open have Lobatto nodes.
    pub fn lobatto(&self) -> bool {
        self.kind == Kind::Lobatto
    }

    /// Tables for the nodes of an element.
    pub fn get(&mut self, element: &Element) -> Result<Arc<Tables>> {
        let key = (element.nodes, element.open.is_some());
        if let Some(tables) = self.tables.get(&key) {
            return Ok(Arc::clone(tables));
        }
        let n = element.nodes;
        let rule = match self.kind {
            _ if key.1 => legendre::gauss(n)?,
            Kind::Radau(end) => legendre::radau(n, end)?,
            _ => legendre::lobatto(n)?,
        };
        let tables = Arc::new(Tables::of(&rule, self.depth)?);
        self.tables.insert(key, Arc::clone(&tables));
        Ok(tables)
    }
}
