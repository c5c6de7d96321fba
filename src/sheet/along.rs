//! An expression along the span as the engine evaluates it.

use crate::formula::graph::{Graph, NodeId};
use crate::formula::number::Rounded;
use crate::formula::tape::{ScalarInputs, Tape};
use crate::model::Profile;
use std::sync::Arc;

/// An expression of the coordinate, the unknowns and numbers known from the solution.
#[derive(Debug, Clone)]
pub(crate) struct Along {
    tops: Vec<usize>,
    value: Arc<Compiled>,
    slope: Arc<Compiled>,
    slots: Vec<f64>,
}

#[derive(Debug)]
struct Compiled {
    tape: Tape,
    /// Outcomes of the tests on data, for each piece.
    tests: Vec<Vec<bool>>,
}

/// First row of each unknown when `top + 1` derivatives of each are kept.
fn rows(tops: &[usize]) -> Vec<usize> {
    let mut rows = vec![0];
    tops.iter().for_each(|top| rows.push(rows[rows.len() - 1] + top + 1));
    rows
}

fn compile(graph: &Graph, node: NodeId, tops: &[usize], points: &[f64]) -> Arc<Compiled> {
    let mut tape = Tape::compile(graph, &[node]);
    let rows = rows(tops);
    tape.bind(|unknown, order| rows[usize::from(unknown)] + usize::from(order));
    let tests = points.windows(2).map(|p| graph.decide(tape.tests(), 0.5 * (p[0] + p[1]))).collect();
    Arc::new(Compiled { tape, tests })
}

impl Along {
    /// Compiles an expression and its total derivative.
    pub fn new(graph: &mut Graph, expression: NodeId, unknowns: usize, points: &[f64]) -> Self {
        let expression = graph.expand(expression);
        let slope = graph.total(expression);
        let mut tops = vec![0usize; unknowns];
        for (unknown, order) in graph.jets_of(expression) {
            let top = &mut tops[usize::from(unknown)];
            *top = (*top).max(usize::from(order));
        }
        let beyond: Vec<usize> = tops.iter().map(|t| t + 1).collect();
        let value = compile(graph, expression, &tops, points);
        let slope = compile(graph, slope, &beyond, points);
        Self { tops, value, slope, slots: Vec::new() }
    }

    /// Puts in the numbers known from the solution.
    pub fn fill(&mut self, slots: &[Rounded]) {
        self.slots = slots.iter().map(|s| s.value).collect();
    }

    fn run(&self, compiled: &Compiled, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        let mut out = [f64::NAN];
        let tests = compiled.tests.get(piece).map_or(&[][..], Vec::as_slice);
        let inputs = ScalarInputs { x, jets, constants, slots: &self.slots, tests };
        compiled.tape.run_scalar(&mut Vec::new(), &inputs, &mut out);
        out[0]
    }
}

impl Profile for Along {
    fn tops(&self) -> &[usize] {
        &self.tops
    }

    fn value(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        self.run(&self.value, x, piece, jets, constants)
    }

    fn slope(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        self.run(&self.slope, x, piece, jets, constants)
    }
}
