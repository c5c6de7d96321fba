//! The problem as the solver sees it: unknowns, orders, equations, conditions, and their derivatives.
//!
//! Unknown functions u_1..u_d of orders m_1..m_d, unknown constants p, equations
//! F_i(x, u, u', ..., u^(m), p) = 0 and conditions g(values at points, p) = 0. The sheet and the Rust
//! closures of [`crate::problem`] both enter through the trait [`Model`].

mod held;

use crate::error::Result;
pub use crate::mesh::Side;
pub use held::Held;

/// Where the derivatives of the unknowns lie in flat arrays.
///
/// The *jets* of a point are u_i^(k), k = 0..=m_i, unknown after unknown; its *state* is the same without
/// the highest derivative, k = 0..m_i.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Layout {
    orders: Vec<usize>,
    jets: Vec<usize>,
    states: Vec<usize>,
    constants: usize,
}

impl Layout {
    /// Layout for unknowns of the given orders (0: an algebraic unknown) and a number of unknown constants.
    pub fn new(orders: &[usize], constants: usize) -> Self {
        let (mut jets, mut states) = (vec![0], vec![0]);
        for (i, m) in orders.iter().enumerate() {
            jets.push(jets[i] + m + 1);
            states.push(states[i] + m);
        }
        Self { orders: orders.to_vec(), jets, states, constants }
    }

    /// Orders m_i.
    pub fn orders(&self) -> &[usize] {
        &self.orders
    }

    /// Number of unknown functions d, which is also the number of equations.
    pub fn unknowns(&self) -> usize {
        self.orders.len()
    }

    /// Number of unknown constants P.
    pub fn constants(&self) -> usize {
        self.constants
    }

    /// Number of jets J = sum of (m_i + 1).
    pub fn jets(&self) -> usize {
        self.jets[self.orders.len()]
    }

    /// Number of states M = sum of m_i: the order of the problem.
    pub fn states(&self) -> usize {
        self.states[self.orders.len()]
    }

    /// Index of u_i^(k) among the jets, k <= m_i.
    pub fn jet(&self, unknown: usize, order: usize) -> usize {
        debug_assert!(order <= self.orders[unknown]);
        self.jets[unknown] + order
    }

    /// Index of u_i^(k) among the states, k < m_i.
    pub fn state(&self, unknown: usize, order: usize) -> usize {
        debug_assert!(order < self.orders[unknown]);
        self.states[unknown] + order
    }
}

/// One of the points of a model (an end or a break) with a side.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Place {
    /// Index into [`Model::points`].
    pub point: usize,
    /// At the ends only the inner side exists; it is used whatever is given.
    pub side: Side,
}

/// A condition: its name and the places whose jets it ties.
#[derive(Debug, Clone, PartialEq)]
pub struct Condition {
    /// Name for messages.
    pub name: String,
    /// Places; empty for a condition among constants only.
    pub places: Vec<Place>,
}

/// A continuity given up at a break: u_i^(k) may jump there.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Release {
    /// Index into [`Model::points`], neither first nor last.
    pub point: usize,
    /// Unknown.
    pub unknown: usize,
    /// Derivative, below the unknown's order.
    pub order: usize,
}

/// The points at which equations are wanted, all inside one piece.
#[derive(Debug, Clone, Copy)]
pub struct Batch<'a> {
    /// The piece: between points\[piece\] and points\[piece + 1\]. Data that step are to be taken from it.
    pub piece: usize,
    /// Coordinates, n of them.
    pub x: &'a [f64],
    /// Jets: \[J\]\[n\], node index running fastest.
    pub jets: &'a [f64],
    /// Unknown constants.
    pub constants: &'a [f64],
}

/// Equations at n nodes: residuals and exact derivatives. Node index running fastest.
#[derive(Debug, Clone, Default)]
pub struct Linearised {
    /// F: \[d\]\[n\]
    pub residual: Vec<f64>,
    /// dF/du^(k): \[d\]\[J\]\[n\]
    pub jets: Vec<f64>,
    /// dF/dp: \[d\]\[P\]\[n\]
    pub constants: Vec<f64>,
}

impl Linearised {
    /// Sizes the arrays for n nodes and fills them with zeros.
    pub fn reset(&mut self, layout: &Layout, n: usize) {
        let d = layout.unknowns();
        for (array, len) in [
            (&mut self.residual, d * n),
            (&mut self.jets, d * layout.jets() * n),
            (&mut self.constants, d * layout.constants() * n),
        ] {
            array.clear();
            array.resize(len, 0.0);
        }
    }
}

/// A condition's residual and exact derivatives.
#[derive(Debug, Clone, Default)]
pub struct ConditionValue {
    /// g
    pub residual: f64,
    /// dg/d(jets) for each place: \[places\]\[J\]
    pub jets: Vec<f64>,
    /// dg/dp: \[P\]
    pub constants: Vec<f64>,
}

impl ConditionValue {
    /// Sizes the arrays and fills them with zeros.
    pub fn reset(&mut self, layout: &Layout, places: usize) {
        self.residual = 0.0;
        self.jets.clear();
        self.jets.resize(places * layout.jets(), 0.0);
        self.constants.clear();
        self.constants.resize(layout.constants(), 0.0);
    }
}

/// A problem along one coordinate.
///
/// The number of conditions must be `layout().states() + layout().constants() + releases().len()`.
pub trait Model: Sync {
    /// Unknowns, orders, constants.
    fn layout(&self) -> &Layout;
    /// Both ends and all breaks, ascending.
    fn points(&self) -> &[f64];
    /// Whether all equations and conditions are linear in unknowns and constants.
    fn linear(&self) -> bool;
    /// Equations at the nodes of a batch; `out` has been reset to the right size.
    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()>;
    /// All conditions.
    fn conditions(&self) -> &[Condition];
    /// One condition; `jets` holds the jets of its places, \[places\]\[J\]; `out` has been reset.
    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()>;
    /// Continuities given up (one entry also for each that a jump condition replaces).
    fn releases(&self) -> &[Release];
    /// Bounds for the rounding errors in what [`Model::equations`] gives at the nodes of a batch, in the same layout; false
    /// if nothing is known (then a few units in the last place are assumed). `out` has been reset.
    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        let _ = (batch, out);
        false
    }
    /// The same for a condition.
    fn condition_rounding(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> bool {
        let _ = (index, jets, constants, out);
        false
    }
    /// Whether an equation that is singular at an end of the span is known to be written out, (r k T')' as r k T'' + (r k)' T',
    /// so that it admits no false solutions as a flux carried through that end would.
    fn written_out(&self, equation: usize) -> bool {
        let _ = equation;
        false
    }
    /// Whether the equations are not to be asked at the ends of the span themselves: an infinite end, where the unknowns
    /// reach the limit of what the equations allow.
    fn open(&self) -> [bool; 2] {
        [false; 2]
    }
    /// Whether jets at x lie where the equations are meant to hold (`above`, `below` of a sheet).
    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        let _ = (x, jets, constants);
        true
    }
    /// Jets at x to start a nonlinear problem from; they need not meet the conditions.
    fn guess(&self, x: f64, piece: usize) -> Option<Vec<f64>> {
        let _ = (x, piece);
        None
    }
    /// Unknown constants to start from.
    fn guessed_constants(&self) -> Option<Vec<f64>> {
        None
    }
    /// Name of an unknown function, for messages.
    fn unknown_name(&self, unknown: usize) -> String {
        format!("u{}", unknown + 1)
    }
    /// Name of an equation, for messages.
    fn equation_name(&self, equation: usize) -> String {
        format!("equation {}", equation + 1)
    }
}

/// An expression along the span that can be evaluated on a solution.
pub trait Profile: Sync {
    /// Highest derivative of each unknown that [`Profile::value`] needs.
    fn tops(&self) -> &[usize];
    /// Value at a point. `jets` holds u_i^(k), k = 0..=tops\[i\], unknown after unknown.
    fn value(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64;
    /// Total derivative along the span. `jets` holds one derivative more of each unknown: k = 0..=tops\[i\] + 1.
    fn slope(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64;
}
