//! Tables on [-1, 1] for each number of nodes, made once and shared.

use crate::error::Result;
use crate::mesh::Element;
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
    fn new(n: usize, depth: usize, open: bool) -> Result<Self> {
        let rule = if open { legendre::gauss(n)? } else { legendre::lobatto(n)? };
        let mut ends = Vec::with_capacity(depth);
        for r in 1..=depth {
            ends.push(operator::integration_at(&rule, r, &[1.0])?.as_slice().to_vec());
        }
        let integrals = (1..=depth).map(|r| operator::integration(&rule, r).as_slice().to_vec()).collect();
        let modal = legendre::to_modal(&rule).as_slice().to_vec();
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
    tables: HashMap<(usize, bool), Arc<Tables>>,
}

impl Library {
    /// Tables with Q_1..Q_depth.
    pub fn new(depth: usize) -> Self {
        Self { depth, tables: HashMap::new() }
    }

    /// Tables for the nodes of an element.
    pub fn get(&mut self, element: &Element) -> Result<Arc<Tables>> {
        let key = (element.nodes, element.open.is_some());
        if let Some(tables) = self.tables.get(&key) {
            return Ok(Arc::clone(tables));
        }
        let tables = Arc::new(Tables::new(element.nodes, self.depth, key.1)?);
        self.tables.insert(key, Arc::clone(&tables));
        Ok(tables)
    }
}
