//! Instruction lists: evaluation over many nodes at once.
//!
//! Common parts are computed once; what does not vary along the span is computed once per run, not per node;
//! registers are reused as soon as their value is no longer needed.

use super::graph::{Binary, Graph, Node, NodeId, PieceTest, Unary};
use super::number::{Number, binary, holds, powi, small_integer, unary};
use super::table::Table;
use std::collections::{BTreeSet, HashMap};
use std::sync::Arc;

/// Nodes done at a time: a register stays in the first cache.
const CHUNK: usize = 128;

/// Where an operand comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Source {
    /// The same at all nodes.
    Uniform(usize),
    /// Computed at each node.
    Register(usize),
    Coordinate,
    /// Index into [`Tape::jets`].
    Jet(usize),
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Operation {
    Negate,
    Add,
    Subtract,
    Multiply,
    Divide,
    Powi(i32),
    Power,
    Unary(Unary),
    Binary(Binary),
    /// Index into the tape's measured data, order of the derivative.
    Table(u16, u8),
    /// gap, then, otherwise
    Choose(bool),
    /// then, otherwise; index into [`Tape::tests`]
    Piece(usize),
}

#[derive(Debug, Clone, Copy)]
struct Instruction {
    operation: Operation,
    /// Those not needed repeat the first.
    operands: [Source; 3],
    /// Uniform or register.
    to: usize,
}

/// A list of instructions that computes several nodes of a [`Graph`].
///
/// ```
/// use spanwise::formula::graph::Graph;
/// use spanwise::formula::tape::{Tape, TapeInputs, Workspace};
/// let mut g = Graph::default();
/// let (x, u) = (g.coordinate(), g.jet(0, 0));
/// let product = g.multiply(x, u);
/// let tape = Tape::compile(&g, &[product, x]);
/// let inputs = TapeInputs {
///     x: &[1.0, 2.0],
///     jets: &[5.0, 7.0],
///     constants: &[],
///     slots: &[],
///     tests: &[],
/// };
/// let mut out = [0.0; 4];
/// tape.run(&mut Workspace::default(), &inputs, &mut out);
/// assert_eq!(out, [5.0, 14.0, 1.0, 2.0]);
/// ```
#[derive(Debug, Clone)]
pub struct Tape {
    uniform: Vec<Instruction>,
    varying: Vec<Instruction>,
    outputs: Vec<Source>,
    /// Values and error bounds of the first uniforms; unknown constants and slots follow.
    numbers: Vec<(f64, f64)>,
    uniforms: usize,
    registers: usize,
    jets: Vec<(u16, u8)>,
    rows: Vec<usize>,
    constants: Vec<u16>,
    /// Value and error bound of each where a run gives none: held constants as written.
    defaults: Vec<(f64, f64)>,
    slots: Vec<u32>,
    tests: Vec<PieceTest>,
    /// All measured data of the graph.
    tables: Vec<Arc<Table>>,
}

/// Memory of a run; reuse it, and no run after the first allocates.
#[derive(Debug, Clone, Default)]
pub struct Workspace {
    uniforms: Vec<f64>,
    registers: Vec<f64>,
}

/// What a tape is run with at n nodes of one piece; see [`ScalarInputs`] for one node.
#[derive(Debug, Clone, Copy)]
pub struct TapeInputs<'a> {
    /// Coordinates, n of them.
    pub x: &'a [f64],
    /// Derivatives of the unknowns, \[rows\]\[n\], node index running fastest; rows as set by [`Tape::bind`], at
    /// first in the order of [`Tape::jets`].
    pub jets: &'a [f64],
    /// All unknown constants, then the held ones; without these, those have their values as written.
    pub constants: &'a [f64],
    /// All slots.
    pub slots: &'a [f64],
    /// Outcomes of [`Tape::tests`] in this piece ([`Graph::decide`]).
    pub tests: &'a [bool],
}

/// What a tape is run with at one node.
#[derive(Debug, Clone, Copy)]
pub struct ScalarInputs<'a, T> {
    /// The coordinate.
    pub x: T,
    /// Derivatives of the unknowns, \[rows\].
    pub jets: &'a [T],
    /// All unknown constants, then the held ones; without these, those have their values as written.
    pub constants: &'a [T],
    /// All slots.
    pub slots: &'a [T],
    /// Outcomes of [`Tape::tests`] in this piece.
    pub tests: &'a [bool],
}

impl Tape {
    /// Compiles the nodes `outputs`. A [`Node::Derivative`] left in them counts as not a number: expand first.
    pub fn compile(graph: &Graph, outputs: &[NodeId]) -> Self {
        Compiler::new(graph).compile(outputs)
    }

    /// Derivatives of the unknowns that are read, as (unknown, order).
    pub fn jets(&self) -> &[(u16, u8)] {
        &self.jets
    }

    /// Constants that are read.
    pub fn constants(&self) -> &[u16] {
        &self.constants
    }

    /// Slots that are read.
    pub fn slots(&self) -> &[u32] {
        &self.slots
    }

    /// Tests to be decided per piece: [`Graph::piece_tests`] of the outputs.
    pub fn tests(&self) -> &[PieceTest] {
        &self.tests
    }

    /// Number of outputs.
    pub fn outputs(&self) -> usize {
        self.outputs.len()
    }

    /// Number of instructions, as a measure of the work.
    pub fn instructions(&self) -> usize {
        self.uniform.len() + self.varying.len()
    }

    /// Says in which row of the jets each u_i^(k) lies, as `|i, k| layout.jet(i, k)`.
    pub fn bind(&mut self, row: impl Fn(u16, u8) -> usize) {
        self.rows = self.jets.iter().map(|(i, k)| row(*i, *k)).collect();
    }

    /// Computes all outputs at the n nodes of `inputs` into `out`, \[outputs\]\[n\].
    ///
    /// # Panics
    /// If `out` or an input is shorter than the tape needs.
    pub fn run(&self, work: &mut Workspace, inputs: &TapeInputs<'_>, out: &mut [f64]) {
        let n = inputs.x.len();
        self.load(&mut work.uniforms, inputs.constants, inputs.slots, inputs.tests);
        work.registers.resize(self.registers * CHUNK, 0.0);
        for start in (0..n).step_by(CHUNK) {
            let nodes = start..n.min(start + CHUNK);
            let length = nodes.len();
            for instruction in &self.varying {
                let at = instruction.to * CHUNK;
                let (below, rest) = work.registers.split_at_mut(at);
                let (to, above) = rest.split_at_mut(CHUNK);
                // A register is never computed from itself.
                let register = |r: usize| match r * CHUNK {
                    from if from < at => &below[from..from + length],
                    from => &above[from - at - CHUNK..][..length],
                };
                let operands = instruction.operands.map(|source| match source {
                    Source::Uniform(u) => Operand::One(work.uniforms[u]),
                    Source::Register(r) => Operand::Each(register(r)),
                    Source::Coordinate => Operand::Each(&inputs.x[nodes.clone()]),
                    Source::Jet(j) => Operand::Each(self.row(inputs.jets, j, n, &nodes)),
                });
                step_all(instruction.operation, &operands, inputs.tests, &self.tables, &mut to[..length]);
            }
            for (k, source) in self.outputs.iter().enumerate() {
                let to = &mut out[k * n..][nodes.clone()];
                match *source {
                    Source::Uniform(u) => to.fill(work.uniforms[u]),
                    Source::Register(r) => {
                        to.copy_from_slice(&work.registers[r * CHUNK..][..length]);
                    }
                    Source::Coordinate => to.copy_from_slice(&inputs.x[nodes.clone()]),
                    Source::Jet(j) => to.copy_from_slice(self.row(inputs.jets, j, n, &nodes)),
                }
            }
        }
    }

    fn row<'a>(&self, jets: &'a [f64], jet: usize, n: usize, nodes: &std::ops::Range<usize>) -> &'a [f64] {
        &jets[self.rows[jet] * n..][nodes.clone()]
    }

    /// Numbers, constants, slots and what is computed from them.
    fn load<T: Number>(&self, uniforms: &mut Vec<T>, constants: &[T], slots: &[T], tests: &[bool]) {
        uniforms.clear();
        uniforms.extend(self.numbers.iter().map(|(value, error)| T::number(*value, *error)));
        let given = self.constants.iter().map(|c| constants.get(usize::from(*c)).copied());
        let defaults = self.defaults.iter().map(|(value, error)| T::number(*value, *error));
        uniforms.extend(given.zip(defaults).map(|(given, default)| given.unwrap_or(default)));
        uniforms.extend(self.slots.iter().map(|s| slots[*s as usize]));
        uniforms.resize(self.uniforms, T::number(0.0, 0.0));
        for instruction in &self.uniform {
            let operands = instruction.operands.map(|source| match source {
                Source::Uniform(u) => uniforms[u],
                // A uniform is computed from uniforms only.
                _ => T::number(f64::NAN, f64::INFINITY),
            });
            uniforms[instruction.to] = step(instruction.operation, operands, tests, &self.tables);
        }
    }

    /// Computes all outputs at one node, with any kind of number; `scratch` is memory to be reused.
    ///
    /// # Panics
    /// If `out` or an input is shorter than the tape needs.
    pub fn run_scalar<T: Number>(&self, scratch: &mut Vec<T>, inputs: &ScalarInputs<'_, T>, out: &mut [T]) {
        self.load(scratch, inputs.constants, inputs.slots, inputs.tests);
        scratch.resize(self.uniforms + self.registers, T::number(0.0, 0.0));
        let fetch = |scratch: &[T], source: Source| match source {
            Source::Uniform(u) => scratch[u],
            Source::Register(r) => scratch[self.uniforms + r],
            Source::Coordinate => inputs.x,
            Source::Jet(j) => inputs.jets[self.rows[j]],
        };
        for instruction in &self.varying {
            let operands = instruction.operands.map(|source| fetch(scratch, source));
            scratch[self.uniforms + instruction.to] = step(instruction.operation, operands, inputs.tests, &self.tables);
        }
        for (to, source) in out[..self.outputs.len()].iter_mut().zip(&self.outputs) {
            *to = fetch(scratch, *source);
        }
    }
}

fn step<T: Number>(operation: Operation, [a, b, c]: [T; 3], tests: &[bool], tables: &[Arc<Table>]) -> T {
    match operation {
        Operation::Negate => a.negate(),
        Operation::Add => a.add(b),
        Operation::Subtract => a.add(b.negate()),
        Operation::Multiply => a.multiply(b),
        Operation::Divide => a.divide(b),
        Operation::Powi(n) => a.power(T::number(f64::from(n), 0.0)),
        Operation::Power => a.power(b),
        Operation::Unary(f) => a.unary(f),
        Operation::Binary(f) => a.binary(f, b),
        Operation::Table(table, order) => a.tabulated(&tables[usize::from(table)], order),
        Operation::Choose(strict) => a.choose(strict, b, c),
        Operation::Piece(k) => {
            if tests[k] {
                a
            } else {
                b
            }
        }
    }
}

/// An operand at all nodes of a chunk.
#[derive(Clone, Copy)]
enum Operand<'a> {
    One(f64),
    Each(&'a [f64]),
}

impl Operand<'_> {
    fn at(&self, i: usize) -> f64 {
        match self {
            Self::One(v) => *v,
            Self::Each(list) => list[i],
        }
    }
}

/// The same as [`step`] for each node of a chunk.
fn step_all(operation: Operation, [a, b, c]: &[Operand<'_>; 3], tests: &[bool], tables: &[Arc<Table>], to: &mut [f64]) {
    match operation {
        Operation::Negate => map(to, a, |a| -a),
        Operation::Add => zip(to, a, b, |a, b| a + b),
        Operation::Subtract => zip(to, a, b, |a, b| a - b),
        Operation::Multiply => zip(to, a, b, |a, b| a * b),
        Operation::Divide => zip(to, a, b, |a, b| a / b),
        Operation::Powi(2) => map(to, a, |a| a * a),
        Operation::Powi(n) => map(to, a, |a| powi(a, n)),
        Operation::Power => zip(to, a, b, |a, b| a.power(b)),
        Operation::Unary(Unary::Sqrt) => map(to, a, f64::sqrt),
        Operation::Unary(f) => map(to, a, |a| unary(f, a)),
        Operation::Binary(f) => zip(to, a, b, |a, b| binary(f, a, b)),
        Operation::Table(table, order) => {
            let table = &tables[usize::from(table)];
            map(to, a, |a| table.value(order, a));
        }
        Operation::Choose(strict) => {
            for (i, to) in to.iter_mut().enumerate() {
                *to = if holds(a.at(i), strict) { b.at(i) } else { c.at(i) };
            }
        }
        Operation::Piece(k) => map(to, if tests[k] { a } else { b }, |a| a),
    }
}

fn map(to: &mut [f64], a: &Operand<'_>, f: impl Fn(f64) -> f64) {
    match a {
        Operand::One(a) => to.fill(f(*a)),
        Operand::Each(a) => to.iter_mut().zip(*a).for_each(|(to, a)| *to = f(*a)),
    }
}

fn zip(to: &mut [f64], a: &Operand<'_>, b: &Operand<'_>, f: impl Fn(f64, f64) -> f64) {
    match (a, b) {
        (Operand::One(a), b) => map(to, b, |b| f(*a, b)),
        (a, Operand::One(b)) => map(to, a, |a| f(a, *b)),
        (Operand::Each(a), Operand::Each(b)) => {
            for ((to, a), b) in to.iter_mut().zip(*a).zip(*b) {
                *to = f(*a, *b);
            }
        }
    }
}

/// A node as an operation on nodes; `None` for what is read, not computed.
type Lowered = Option<(Operation, Vec<NodeId>)>;

struct Compiler<'a> {
    graph: &'a Graph,
    tape: Tape,
    places: HashMap<NodeId, Source>,
}

impl<'a> Compiler<'a> {
    fn new(graph: &'a Graph) -> Self {
        let tape = Tape {
            uniform: Vec::new(),
            varying: Vec::new(),
            outputs: Vec::new(),
            numbers: Vec::new(),
            uniforms: 0,
            registers: 0,
            jets: Vec::new(),
            rows: Vec::new(),
            constants: Vec::new(),
            defaults: Vec::new(),
            slots: Vec::new(),
            tests: Vec::new(),
            tables: graph.tables().to_vec(),
        };
        Self { graph, tape, places: HashMap::new() }
    }

    fn compile(mut self, outputs: &[NodeId]) -> Tape {
        self.tape.tests = self.graph.piece_tests(outputs);
        let nodes = self.needed(outputs);
        self.inputs(&nodes);
        let steps: Vec<(NodeId, Operation, Vec<NodeId>)> =
            nodes.into_iter().filter_map(|id| self.lower(id).map(|(operation, from)| (id, operation, from))).collect();
        let mut last_use: HashMap<NodeId, usize> = HashMap::new();
        for (i, (_, _, from)) in steps.iter().enumerate() {
            last_use.extend(from.iter().map(|id| (*id, i)));
        }
        last_use.extend(outputs.iter().map(|id| (*id, usize::MAX)));

        let mut free: Vec<usize> = Vec::new();
        for (i, (id, operation, from)) in steps.iter().enumerate() {
            let sources: Vec<Source> = from.iter().map(|id| self.places[id]).collect();
            let first = sources[0];
            let uniform = sources.iter().all(|s| matches!(s, Source::Uniform(_)));
            let to = if uniform {
                self.tape.uniforms += 1;
                self.tape.uniforms - 1
            } else {
                free.pop().unwrap_or_else(|| {
                    self.tape.registers += 1;
                    self.tape.registers - 1
                })
            };
            let instruction = Instruction {
                operation: *operation,
                operands: std::array::from_fn(|k| sources.get(k).copied().unwrap_or(first)),
                to,
            };
            if uniform {
                self.tape.uniform.push(instruction);
                self.places.insert(*id, Source::Uniform(to));
            } else {
                self.tape.varying.push(instruction);
                self.places.insert(*id, Source::Register(to));
            }
            // Freed only now: a register is never computed from itself.
            let mut done: Vec<NodeId> = from.clone();
            done.sort_unstable();
            done.dedup();
            for id in done {
                if last_use.get(&id) == Some(&i)
                    && let Source::Register(r) = self.places[&id]
                {
                    free.push(r);
                }
            }
        }
        self.tape.outputs = outputs.iter().map(|id| self.places[id]).collect();
        self.tape.rows = (0..self.tape.jets.len()).collect();
        self.tape
    }

    /// Everything that must be read or computed, operands first.
    fn needed(&self, outputs: &[NodeId]) -> Vec<NodeId> {
        let mut open: BTreeSet<NodeId> = outputs.iter().copied().collect();
        let mut found = Vec::new();
        while let Some(id) = open.pop_last() {
            found.push(id);
            if let Some((_, from)) = self.lower(id) {
                open.extend(from);
            }
        }
        found.reverse();
        found
    }

    /// Gives everything that is read its place.
    fn inputs(&mut self, nodes: &[NodeId]) {
        let missing = (f64::NAN, f64::INFINITY);
        for id in nodes {
            match self.graph.node(*id) {
                Node::Number(_) | Node::Derivative(_) => {
                    let number = self.graph.rounded(*id).map_or(missing, |r| (r.value, r.error));
                    self.places.insert(*id, Source::Uniform(self.tape.numbers.len()));
                    self.tape.numbers.push(number);
                }
                Node::Coordinate => {
                    self.places.insert(*id, Source::Coordinate);
                }
                Node::Jet { unknown, order } => {
                    self.places.insert(*id, Source::Jet(self.tape.jets.len()));
                    self.tape.jets.push((unknown, order));
                }
                _ => {}
            }
        }
        self.tape.uniforms = self.tape.numbers.len();
        for id in nodes {
            if let Node::Constant(c) = self.graph.node(*id) {
                self.tape.constants.push(c);
                self.tape.defaults.push(self.graph.held(c).map_or(missing, |held| (held.value, held.error)));
                self.places.insert(*id, Source::Uniform(self.tape.uniforms));
                self.tape.uniforms += 1;
            }
        }
        for id in nodes {
            if let Node::Slot(s) = self.graph.node(*id) {
                self.tape.slots.push(s);
                self.places.insert(*id, Source::Uniform(self.tape.uniforms));
                self.tape.uniforms += 1;
            }
        }
    }

    fn lower(&self, id: NodeId) -> Lowered {
        let node = self.graph.node(id);
        let negated = |id| match self.graph.node(id) {
            Node::Negate(a) => Some(a),
            _ => None,
        };
        Some(match node {
            Node::Number(_)
            | Node::Coordinate
            | Node::Jet { .. }
            | Node::Constant(_)
            | Node::Slot(_)
            | Node::Derivative(_) => return None,
            Node::Negate(a) => (Operation::Negate, vec![a]),
            Node::Add(a, b) => match (negated(a), negated(b)) {
                (_, Some(b)) => (Operation::Subtract, vec![a, b]),
                (Some(a), None) => (Operation::Subtract, vec![b, a]),
                (None, None) => (Operation::Add, vec![a, b]),
            },
            Node::Multiply(a, b) => (Operation::Multiply, vec![a, b]),
            Node::Divide(a, b) => (Operation::Divide, vec![a, b]),
            Node::Power(a, b) => match self.graph.as_number(b).and_then(small_integer) {
                Some(n) => (Operation::Powi(n), vec![a]),
                None => (Operation::Power, vec![a, b]),
            },
            Node::Unary(f, a) => (Operation::Unary(f), vec![a]),
            Node::Binary(f, a, b) => (Operation::Binary(f), vec![a, b]),
            Node::Table { table, order, argument } => (Operation::Table(table, order), vec![argument]),
            Node::Choose { gap, strict, then, otherwise } => match self.graph.piece_test(node) {
                Some(test) => {
                    // All piece tests have been collected before.
                    let k = self.tape.tests.binary_search(&test).unwrap_or_default();
                    (Operation::Piece(k), vec![then, otherwise])
                }
                None => (Operation::Choose(strict), vec![gap, then, otherwise]),
            },
        })
    }
}

#[cfg(test)]
mod tests;
