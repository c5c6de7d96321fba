//! The checked formula as a shared graph: simplification, total and partial derivatives.
//!
//! Nodes are interned: equal expressions have equal ids, so a carried flux is recognised by comparing ids.
//! Sums and products are kept in one form whatever the order they were written in (see `build`).
//!
//! Ids ascend from operands to results. Everything that walks a graph runs over ids, never by recursion, so a
//! deep formula cannot exhaust the stack.

/// Constructors.
/// Constructors.
mod build;
/// Derivatives.
mod calculus;
/// Evaluation at one point.
mod evaluate;

pub use evaluate::Inputs;

use super::number::Rounded;
use super::table::Table;
use std::collections::{BTreeSet, HashMap};
use std::sync::Arc;

/// Names a node of a [`Graph`].
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct NodeId(pub u32);

/// A node. Everything is in SI units; dimensions have been checked before.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Node {
    /// A number.
    Number(f64),
    /// The coordinate x.
    Coordinate,
    /// The k-th derivative of unknown function i at x.
    Jet {
        /// Index of the unknown function.
        unknown: u16,
        /// Order of the derivative.
        order: u8,
    },
    /// Unknown constant c, or a held one: see [`Graph::hold`].
    Constant(u16),
    /// A number that is known only from the solution (value at a point, integral, extreme): slot in a
    /// table that the owner of the graph keeps.
    Slot(u32),
    /// d/dx of an expression that is neither carried nor expanded yet.
    Derivative(NodeId),
    /// -a
    Negate(NodeId),
    /// a + b
    Add(NodeId, NodeId),
    /// a * b
    Multiply(NodeId, NodeId),
    /// a / b
    Divide(NodeId, NodeId),
    /// a ^ b
    Power(NodeId, NodeId),
    /// f(a)
    Unary(Unary, NodeId),
    /// f(a, b)
    Binary(Binary, NodeId, NodeId),
    /// A derivative of measured data: see [`Graph::table`].
    Table {
        /// Number of the table.
        table: u16,
        /// Order of the derivative, 0 for the values.
        order: u8,
        /// Where it is read.
        argument: NodeId,
    },
    /// `if(gap < 0, a, b)`; strictly less where `strict`, else `gap <= 0`.
    /// A test whose gap holds the coordinate and data only is decided once per piece of the mesh, at the
    /// piece's middle: its number in [`Graph::piece_tests`]; every other test is decided point by point.
    Choose {
        /// left side minus right side of the comparison
        gap: NodeId,
        /// `<` or `<=`
        strict: bool,
        /// value where the test holds
        then: NodeId,
        /// value elsewhere
        otherwise: NodeId,
    },
}

/// Functions of one argument.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Unary {
    Sqrt,
    Exp,
    Ln,
    Log10,
    Sin,
    Cos,
    Tan,
    Asin,
    Acos,
    Atan,
    Sinh,
    Cosh,
    Tanh,
    Asinh,
    Acosh,
    Atanh,
    Abs,
    Sign,
    Erf,
    Erfc,
}

/// Functions of two arguments.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Binary {
    Atan2,
    Min,
    Max,
    SignedPower,
}

/// With respect to what a partial derivative is taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Variable {
    /// The coordinate, unknowns held fixed.
    Coordinate,
    /// u_i^(k)
    Jet {
        /// Index of the unknown function.
        unknown: u16,
        /// Order of the derivative.
        order: u8,
    },
    /// Unknown or held constant.
    Constant(u16),
    /// A slot.
    Slot(u32),
}

/// What the value of a node depends on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Dependence {
    /// The coordinate.
    pub coordinate: bool,
    /// Unknown functions or their derivatives.
    pub jets: bool,
    /// Unknown constants.
    pub constants: bool,
    /// Slots.
    pub slots: bool,
    /// Held constants: data whose values may be changed.
    pub held: bool,
}

impl Dependence {
    fn or(self, other: Self) -> Self {
        Self {
            coordinate: self.coordinate || other.coordinate,
            jets: self.jets || other.jets,
            constants: self.constants || other.constants,
            slots: self.slots || other.slots,
            held: self.held || other.held,
        }
    }

    /// Anything that is known only from the solution.
    pub fn unknowns(self) -> bool {
        self.jets || self.constants || self.slots
    }

    /// Whether the value varies along the span.
    pub fn varies(self) -> bool {
        self.coordinate || self.jets
    }

    /// On the coordinate and nothing else: data that vary along the span.
    pub fn only_coordinate(self) -> bool {
        self.coordinate && !self.unknowns()
    }
}

/// A test on data that vary along the span: decided once per piece.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct PieceTest {
    /// The test is `gap < 0` or `gap <= 0`; the gap holds the coordinate and data only.
    pub gap: NodeId,
    /// `<`
    pub strict: bool,
}

/// Most nodes of a graph: beyond it every new node is not a number, and [`Graph::is_full`] says so.
pub const MOST_NODES: usize = 1_000_000;

/// What is known of a node besides its operands.
#[derive(Debug, Clone, Copy)]
struct Facts {
    dependence: Dependence,
    /// Holds abs, min, max, sign, a signed power, measured data or a choice that unknowns decide.
    kink: bool,
    /// Holds a [`Node::Derivative`].
    open: bool,
    /// Bound for the error of a number.
    error: f64,
}

/// An arena of interned nodes.
///
/// ```
/// use spanwise::formula::graph::{Graph, Variable};
/// let mut g = Graph::default();
/// let (x, u) = (g.coordinate(), g.jet(0, 0));
/// let product = g.multiply(x, u);
/// let slope = g.total(product);
/// // (x u)' = u + x u'
/// let du = g.jet(0, 1);
/// let expected = g.multiply(du, x);
/// let expected = g.add(expected, u);
/// assert_eq!(slope, expected);
/// assert_eq!(g.partial(slope, Variable::Jet { unknown: 0, order: 1 }), x);
/// ```
#[derive(Debug, Clone)]
pub struct Graph {
    nodes: Vec<Node>,
    facts: Vec<Facts>,
    index: HashMap<Key, NodeId>,
    partials: HashMap<(NodeId, Variable), NodeId>,
    totals: HashMap<NodeId, NodeId>,
    /// Index of the first held constant, and the values that they have.
    held: (u16, Vec<Rounded>),
    /// Measured data.
    tables: Vec<Arc<Table>>,
    limit: usize,
    full: bool,
}

/// A node for hashing: numbers by their bits, with their error.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
struct Key(u32, u64, u64);

impl Key {
    fn new(node: Node, error: f64) -> Self {
        let pair = |a: NodeId, b: NodeId| (u64::from(a.0) << 32) | u64::from(b.0);
        match node {
            Node::Number(v) => Self(0, v.to_bits(), error.to_bits()),
            Node::Coordinate => Self(1, 0, 0),
            Node::Jet { unknown, order } => Self(2, unknown.into(), order.into()),
            Node::Constant(c) => Self(3, c.into(), 0),
            Node::Slot(s) => Self(4, s.into(), 0),
            Node::Derivative(a) => Self(5, a.0.into(), 0),
            Node::Negate(a) => Self(6, a.0.into(), 0),
            Node::Add(a, b) => Self(7, pair(a, b), 0),
            Node::Multiply(a, b) => Self(8, pair(a, b), 0),
            Node::Divide(a, b) => Self(9, pair(a, b), 0),
            Node::Power(a, b) => Self(10, pair(a, b), 0),
            Node::Unary(f, a) => Self(11, f as u64, a.0.into()),
            Node::Binary(f, a, b) => Self(12, f as u64, pair(a, b)),
            Node::Choose { gap, strict, then, otherwise } => {
                Self(13 + u32::from(strict), gap.0.into(), pair(then, otherwise))
            }
            Node::Table { table, order, argument } => {
                Self(15, (u64::from(table) << 8) | u64::from(order), argument.0.into())
            }
        }
    }
}

impl Node {
    /// The nodes that a node is made of, left to right.
    pub fn operands(self) -> impl Iterator<Item = NodeId> {
        let list = match self {
            Self::Number(_) | Self::Coordinate | Self::Jet { .. } | Self::Constant(_) | Self::Slot(_) => [None; 3],
            Self::Derivative(a) | Self::Negate(a) | Self::Unary(_, a) | Self::Table { argument: a, .. } => {
                [Some(a), None, None]
            }
            Self::Add(a, b) | Self::Multiply(a, b) | Self::Divide(a, b) | Self::Power(a, b) | Self::Binary(_, a, b) => {
                [Some(a), Some(b), None]
            }
            Self::Choose { gap, then, otherwise, .. } => [Some(gap), Some(then), Some(otherwise)],
        };
        list.into_iter().flatten()
    }
}

const ZERO: NodeId = NodeId(0);
const ONE: NodeId = NodeId(1);
const NOT_A_NUMBER: NodeId = NodeId(2);

impl Default for Graph {
    fn default() -> Self {
        let mut graph = Self {
            nodes: Vec::new(),
            facts: Vec::new(),
            index: HashMap::new(),
            partials: HashMap::new(),
            totals: HashMap::new(),
            held: (u16::MAX, Vec::new()),
            tables: Vec::new(),
            limit: MOST_NODES,
            full: false,
        };
        for (value, id) in [(0.0, ZERO), (1.0, ONE), (f64::NAN, NOT_A_NUMBER)] {
            let made = graph.intern(Node::Number(value), 0.0);
            debug_assert_eq!(made, id);
        }
        graph
    }
}

impl Graph {
    /// The node of an id.
    pub fn node(&self, id: NodeId) -> Node {
        self.nodes[id.0 as usize]
    }

    /// Number of nodes made so far.
    pub fn len(&self) -> usize {
        self.nodes.len()
    }

    /// Never: a graph begins with the numbers 0 and 1.
    pub fn is_empty(&self) -> bool {
        self.nodes.is_empty()
    }

    /// Whether [`MOST_NODES`] was reached; nodes made since are not numbers.
    pub fn is_full(&self) -> bool {
        self.full
    }

    /// From the index `first` on, `count` constants are held: data with values that may be changed later. They are not
    /// unknown, yet derivatives by them exist and tapes read their values. To be called before any node of them is made.
    pub fn hold(&mut self, first: u16, count: usize) {
        self.held = (first, vec![Rounded { value: f64::NAN, error: 0.0 }; count]);
    }

    /// Gives a held constant the value that it has as written.
    pub fn set_held(&mut self, constant: u16, value: Rounded) {
        if let Some(index) = constant.checked_sub(self.held.0)
            && let Some(held) = self.held.1.get_mut(usize::from(index))
        {
            *held = value;
        }
    }

    /// The value of a held constant as written; `None` for an unknown one.
    pub fn held(&self, constant: u16) -> Option<Rounded> {
        constant.checked_sub(self.held.0).and_then(|k| self.held.1.get(usize::from(k))).copied()
    }

    fn facts(&self, id: NodeId) -> Facts {
        self.facts[id.0 as usize]
    }

    /// The number that a node is, if it is one.
    pub fn as_number(&self, id: NodeId) -> Option<f64> {
        self.rounded(id).map(|r| r.value)
    }

    /// The number that a node is, with a bound for its error: of the decimal digits it came from and of the
    /// arithmetic with which it was folded from others.
    pub fn rounded(&self, id: NodeId) -> Option<Rounded> {
        match self.node(id) {
            Node::Number(value) => Some(Rounded { value, error: self.facts(id).error }),
            _ => None,
        }
    }

    /// What the value of a node depends on.
    pub fn depends_on(&self, id: NodeId) -> Dependence {
        self.facts(id).dependence
    }

    /// Whether unknowns decide anything not smooth: abs, min, max, sign, a signed power, measured data, a choice. Partial
    /// derivatives alone do not show it: sign(u) has the derivative 0.
    pub fn has_kink_in_unknowns(&self, id: NodeId) -> bool {
        self.facts(id).kink
    }

    /// Whether a [`Node::Derivative`] is left, to be carried as a flux or expanded.
    pub fn has_derivative(&self, id: NodeId) -> bool {
        self.facts(id).open
    }

    /// All nodes that the given ones are made of, themselves included, operands first.
    pub fn reach(&self, roots: &[NodeId]) -> Vec<NodeId> {
        self.reach_where(roots, |_| true)
    }

    /// The same, without entering nodes that are not `wanted`.
    fn reach_where(&self, roots: &[NodeId], wanted: impl Fn(NodeId) -> bool) -> Vec<NodeId> {
        let mut open: BTreeSet<NodeId> = roots.iter().copied().filter(|id| wanted(*id)).collect();
        let mut found = Vec::new();
        while let Some(id) = open.pop_last() {
            found.push(id);
            open.extend(self.node(id).operands().filter(|id| wanted(*id)));
        }
        found.reverse();
        found
    }

    /// Derivatives of unknown functions in a node, as (unknown, order); what stands inside a
    /// [`Node::Derivative`] counts as it stands there.
    pub fn jets_of(&self, id: NodeId) -> BTreeSet<(u16, u8)> {
        self.reach_where(&[id], |id| self.depends_on(id).jets)
            .into_iter()
            .filter_map(|id| match self.node(id) {
                Node::Jet { unknown, order } => Some((unknown, order)),
                _ => None,
            })
            .collect()
    }

    /// Unknown constants in a node.
    pub fn constants_of(&self, id: NodeId) -> BTreeSet<u16> {
        self.constants_where(id, |d| d.constants).filter(|c| self.held(*c).is_none()).collect()
    }

    /// Held constants in a node.
    pub fn held_of(&self, id: NodeId) -> BTreeSet<u16> {
        self.constants_where(id, |d| d.held).filter(|c| self.held(*c).is_some()).collect()
    }

    fn constants_where(&self, id: NodeId, wanted: impl Fn(Dependence) -> bool) -> impl Iterator<Item = u16> {
        self.reach_where(&[id], |id| wanted(self.depends_on(id))).into_iter().filter_map(|id| match self.node(id) {
            Node::Constant(c) => Some(c),
            _ => None,
        })
    }

    /// Slots in a node.
    pub fn slots_of(&self, id: NodeId) -> BTreeSet<u32> {
        self.reach_where(&[id], |id| self.depends_on(id).slots)
            .into_iter()
            .filter_map(|id| match self.node(id) {
                Node::Slot(s) => Some(s),
                _ => None,
            })
            .collect()
    }

    /// The tests that are decided once per piece, at its middle.
    ///
    /// **Every gap listed needs a break wherever it changes sign.** `abs`, `sign`, `min`, `max` and
    /// `signed_power` of data are kept as choices and are therefore listed too: their kinks want a break as much
    /// as the step of an `if`.
    pub fn piece_tests(&self, outputs: &[NodeId]) -> Vec<PieceTest> {
        let nodes = self.reach(outputs).into_iter();
        let tests: BTreeSet<PieceTest> = nodes.filter_map(|id| self.piece_test(self.node(id))).collect();
        tests.into_iter().collect()
    }

    /// The test of a choice that is decided once per piece.
    pub(super) fn piece_test(&self, node: Node) -> Option<PieceTest> {
        match node {
            Node::Choose { gap, strict, .. } if self.depends_on(gap).only_coordinate() => {
                Some(PieceTest { gap, strict })
            }
            _ => None,
        }
    }

    fn intern(&mut self, node: Node, error: f64) -> NodeId {
        let node = match node {
            // One zero and one NaN.
            Node::Number(0.0) => Node::Number(0.0),
            Node::Number(v) if v.is_nan() => Node::Number(f64::NAN),
            node => node,
        };
        let key = Key::new(node, error);
        if let Some(id) = self.index.get(&key) {
            return *id;
        }
        if self.nodes.len() >= self.limit {
            self.full = true;
            return NOT_A_NUMBER;
        }
        let id = NodeId(self.nodes.len() as u32);
        let facts = self.facts_of(node, error);
        self.nodes.push(node);
        self.facts.push(facts);
        self.index.insert(key, id);
        id
    }

    fn facts_of(&self, node: Node, error: f64) -> Facts {
        let mut facts =
            Facts { dependence: Dependence::default(), kink: false, open: matches!(node, Node::Derivative(_)), error };
        for id in node.operands() {
            let part = self.facts(id);
            facts.dependence = facts.dependence.or(part.dependence);
            facts.kink |= part.kink;
            facts.open |= part.open;
        }
        let own = &mut facts.dependence;
        match node {
            Node::Coordinate => own.coordinate = true,
            Node::Jet { .. } => own.jets = true,
            Node::Constant(c) if self.held(c).is_some() => own.held = true,
            Node::Constant(_) => own.constants = true,
            Node::Slot(_) => own.slots = true,
            Node::Unary(Unary::Abs | Unary::Sign, _)
            | Node::Binary(Binary::Min | Binary::Max | Binary::SignedPower, ..)
            | Node::Table { .. } => {
                facts.kink |= own.unknowns();
            }
            Node::Choose { gap, .. } => facts.kink |= self.depends_on(gap).unknowns(),
            _ => {}
        }
        facts
    }
}

#[cfg(test)]
mod tests;
