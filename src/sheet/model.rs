//! The sheet's problem as the engine sees it.

use crate::error::Result;
use crate::formula::graph::{Graph, NodeId, Variable};
use crate::formula::number::Rounded;
use crate::formula::tape::{ScalarInputs, Tape, TapeInputs, Workspace};
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release};
use std::sync::{Mutex, PoisonError};

/// Residuals and derivatives of all equations as one instruction list.
pub(super) struct Equations {
    tape: Tape,
    /// What each output is.
    outputs: Vec<Output>,
    /// Outcomes of the tests on data, for each piece.
    tests: Vec<Vec<bool>>,
    /// Memory of earlier runs.
    pool: Mutex<Vec<(Workspace, Vec<f64>)>>,
}

/// Unknown constants of a formula, then held ones.
fn constants(graph: &Graph, node: NodeId) -> impl Iterator<Item = u16> + use<> {
    graph.constants_of(node).into_iter().chain(graph.held_of(node))
}

#[derive(Debug, Clone, Copy)]
enum Output {
    Residual(usize),
    Jet(usize, usize),
    Constant(usize, usize),
}

impl Equations {
    pub fn new(graph: &mut Graph, equations: &[NodeId], layout: &Layout, points: &[f64]) -> Self {
        let (mut nodes, mut outputs) = (Vec::new(), Vec::new());
        for (e, equation) in equations.iter().enumerate() {
            nodes.push(*equation);
            outputs.push(Output::Residual(e));
            for (unknown, order) in graph.jets_of(*equation) {
                nodes.push(graph.partial(*equation, Variable::Jet { unknown, order }));
                outputs.push(Output::Jet(e, layout.jet(usize::from(unknown), usize::from(order))));
            }
            for constant in constants(graph, *equation) {
                nodes.push(graph.partial(*equation, Variable::Constant(constant)));
                outputs.push(Output::Constant(e, usize::from(constant)));
            }
        }
        let mut tape = Tape::compile(graph, &nodes);
        tape.bind(|unknown, order| layout.jet(usize::from(unknown), usize::from(order)));
        let tests = points.windows(2).map(|p| graph.decide(tape.tests(), 0.5 * (p[0] + p[1]))).collect();
        Self { tape, outputs, tests, pool: Mutex::new(Vec::new()) }
    }

    fn run(&self, layout: &Layout, batch: &Batch<'_>, out: &mut Linearised) {
        let lock = || self.pool.lock().unwrap_or_else(PoisonError::into_inner);
        let (mut work, mut values) = lock().pop().unwrap_or_default();
        let n = batch.x.len();
        values.clear();
        values.resize(self.outputs.len() * n, 0.0);
        let tests = &self.tests[batch.piece];
        let inputs = TapeInputs { x: batch.x, jets: batch.jets, constants: batch.constants, slots: &[], tests };
        self.tape.run(&mut work, &inputs, &mut values);
        for (output, values) in self.outputs.iter().zip(values.chunks_exact(n)) {
            let to = match *output {
                Output::Residual(e) => &mut out.residual[e * n..],
                Output::Jet(e, jet) => &mut out.jets[(e * layout.jets() + jet) * n..],
                Output::Constant(e, c) => &mut out.constants[(e * layout.constants() + c) * n..],
            };
            to[..n].copy_from_slice(values);
        }
        lock().push((work, values));
    }

    /// Bounds for the rounding in all outputs, node by node.
    fn rounding(&self, layout: &Layout, batch: &Batch<'_>, out: &mut Linearised) {
        let n = batch.x.len();
        let mut scratch = Vec::new();
        let mut values = vec![Rounded::exact(0.0); self.outputs.len()];
        let constants: Vec<Rounded> = batch.constants.iter().map(|c| Rounded::exact(*c)).collect();
        for node in 0..n {
            let jets: Vec<Rounded> = batch.jets.chunks_exact(n).map(|row| Rounded::exact(row[node])).collect();
            let x = Rounded { value: batch.x[node], error: 0.5 * f64::EPSILON * batch.x[node].abs() };
            let tests = &self.tests[batch.piece];
            let inputs = ScalarInputs { x, jets: &jets, constants: &constants, slots: &[], tests };
            self.tape.run_scalar(&mut scratch, &inputs, &mut values);
            for (output, value) in self.outputs.iter().zip(&values) {
                let to = match *output {
                    Output::Residual(e) => &mut out.residual[e * n + node],
                    Output::Jet(e, jet) => &mut out.jets[(e * layout.jets() + jet) * n + node],
                    Output::Constant(e, c) => &mut out.constants[(e * layout.constants() + c) * n + node],
                };
                *to = if value.error.is_finite() { value.error } else { 0.0 };
            }
        }
    }
}

/// A condition as a formula of the jets at its places: slot k holds the jet `reads[k]`.
pub(super) struct Tie {
    tape: Tape,
    /// Index of the place, and of the jet there.
    reads: Vec<(usize, usize)>,
    constants: Vec<usize>,
}

impl Tie {
    /// `reads` lists the unknown and order behind each slot of the formula, with the index of its place.
    pub fn new(graph: &mut Graph, formula: NodeId, reads: &[(usize, u16, u8)], layout: &Layout) -> Self {
        let mut nodes = vec![formula];
        for slot in 0..reads.len() {
            nodes.push(graph.partial(formula, Variable::Slot(slot as u32)));
        }
        let constants: Vec<usize> = constants(graph, formula).map(usize::from).collect();
        for constant in &constants {
            nodes.push(graph.partial(formula, Variable::Constant(*constant as u16)));
        }
        let reads = reads.iter().map(|(place, u, k)| (*place, layout.jet(usize::from(*u), usize::from(*k)))).collect();
        Self { tape: Tape::compile(graph, &nodes), reads, constants }
    }

    fn run(&self, layout: &Layout, jets: &[f64], constants: &[f64], out: &mut ConditionValue) {
        let slots: Vec<f64> = self.reads.iter().map(|(place, jet)| jets[place * layout.jets() + jet]).collect();
        let mut values = vec![0.0; self.tape.outputs()];
        let inputs = TapeInputs { x: &[f64::NAN], jets: &[], constants, slots: &slots, tests: &[] };
        self.tape.run(&mut Workspace::default(), &inputs, &mut values);
        out.residual = values[0];
        for ((place, jet), value) in self.reads.iter().zip(&values[1..]) {
            out.jets[place * layout.jets() + jet] += value;
        }
        for (constant, value) in self.constants.iter().zip(&values[1 + self.reads.len()..]) {
            out.constants[*constant] = *value;
        }
    }
}

impl Tie {
    /// Bounds for the rounding in all outputs.
    fn rounding(&self, layout: &Layout, jets: &[f64], constants: &[f64], out: &mut ConditionValue) {
        let exact = |values: &[f64]| values.iter().map(|v| Rounded::exact(*v)).collect::<Vec<Rounded>>();
        let slots: Vec<f64> = self.reads.iter().map(|(place, jet)| jets[place * layout.jets() + jet]).collect();
        let mut values = vec![Rounded::exact(0.0); self.tape.outputs()];
        let (slots, constants) = (exact(&slots), exact(constants));
        let inputs =
            ScalarInputs { x: Rounded::exact(f64::NAN), jets: &[], constants: &constants, slots: &slots, tests: &[] };
        self.tape.run_scalar(&mut Vec::new(), &inputs, &mut values);
        let bound = |v: &Rounded| if v.error.is_finite() { v.error } else { 0.0 };
        out.residual = bound(&values[0]);
        for ((place, jet), value) in self.reads.iter().zip(&values[1..]) {
            out.jets[place * layout.jets() + jet] += bound(value);
        }
        for (constant, value) in self.constants.iter().zip(&values[1 + self.reads.len()..]) {
            out.constants[*constant] = bound(value);
        }
    }
}

/// A start for a nonlinear problem.
pub(super) struct Guess {
    /// All jets in the order of the layout.
    pub tape: Tape,
    /// Outcomes of the tests on data, for each piece.
    pub tests: Vec<Vec<bool>>,
    /// Unknown constants.
    pub constants: Vec<f64>,
}

impl Guess {
    /// The jets at a point.
    pub fn jets(&self, x: f64, piece: usize) -> Vec<f64> {
        let mut jets = vec![0.0; self.tape.outputs()];
        let tests = &self.tests[piece];
        let inputs = ScalarInputs { x, jets: &[], constants: &[], slots: &[], tests };
        self.tape.run_scalar(&mut Vec::new(), &inputs, &mut jets);
        jets
    }
}

/// The problem of a sheet, in SI units.
pub struct SheetModel {
    pub(super) layout: Layout,
    pub(super) points: Vec<f64>,
    pub(super) linear: bool,
    pub(super) equations: Equations,
    pub(super) conditions: Vec<Condition>,
    pub(super) ties: Vec<Tie>,
    pub(super) releases: Vec<Release>,
    pub(super) unknown_names: Vec<String>,
    pub(super) equation_names: Vec<String>,
    /// Infinite ends.
    pub(super) infinite: [bool; 2],
    /// Equations that are singular at an end and written out.
    pub(super) written_out: Vec<usize>,
    /// Limits of unknowns: index, lower and upper bound, both exclusive.
    pub(super) limits: Vec<(usize, f64, f64)>,
    /// The same for unknown constants.
    pub(super) constant_limits: Vec<(usize, f64, f64)>,
    /// Where to start a nonlinear problem.
    pub(super) guess: Option<Guess>,
}

impl std::fmt::Debug for SheetModel {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("SheetModel")
            .field("layout", &self.layout)
            .field("points", &self.points)
            .field("conditions", &self.conditions)
            .finish_non_exhaustive()
    }
}

/// The place's point and side as the engine counts them.
pub(super) fn place_of(points: &[f64], place: &Place) -> (f64, usize) {
    let last = points.len() - 1;
    let piece = match (place.point, place.side) {
        (0, _) => 0,
        (p, _) if p == last => last - 1,
        (p, crate::model::Side::Left) => p - 1,
        (p, crate::model::Side::Right) => p,
    };
    (points[place.point], piece)
}

impl Model for SheetModel {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        &self.points
    }

    fn linear(&self) -> bool {
        self.linear
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.equations.run(&self.layout, batch, out);
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        self.ties[index].run(&self.layout, jets, constants, out);
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &self.releases
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        self.equations.rounding(&self.layout, batch, out);
        true
    }

    fn condition_rounding(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> bool {
        self.ties[index].rounding(&self.layout, jets, constants, out);
        true
    }

    fn open(&self) -> [bool; 2] {
        self.infinite
    }

    fn written_out(&self, equation: usize) -> bool {
        self.written_out.contains(&equation)
    }

    fn admissible(&self, _x: f64, jets: &[f64], constants: &[f64]) -> bool {
        let inside = |value: f64, low: f64, high: f64| value > low && value < high;
        self.limits.iter().all(|(u, low, high)| inside(jets[self.layout.jet(*u, 0)], *low, *high))
            && self.constant_limits.iter().all(|(c, low, high)| inside(constants[*c], *low, *high))
    }

    fn guess(&self, x: f64, piece: usize) -> Option<Vec<f64>> {
        self.guess.as_ref().map(|g| g.jets(x, piece))
    }

    fn guessed_constants(&self) -> Option<Vec<f64>> {
        self.guess.as_ref().map(|g| g.constants.clone())
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.unknown_names[unknown].clone()
    }

    fn equation_name(&self, equation: usize) -> String {
        self.equation_names[equation].clone()
    }
}
