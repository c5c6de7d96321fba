//! Derivatives, by transformation of the graph: linear in its size, for shared parts are done once.

use super::{Binary, Graph, NOT_A_NUMBER, Node, NodeId, ONE, Unary, Variable, ZERO};
use std::collections::HashMap;

impl Graph {
    /// Partial derivative. Every [`Node::Derivative`] is expanded first.
    ///
    /// abs, sign, min, max and choices are differentiated branch by branch: see
    /// [`Graph::has_kink_in_unknowns`].
    pub fn partial(&mut self, id: NodeId, variable: Variable) -> NodeId {
        let id = self.expand(id);
        let open = |g: &Self, id: NodeId| {
            let d = g.depends_on(id);
            let depends = match variable {
                Variable::Coordinate => d.coordinate,
                Variable::Jet { .. } => d.jets,
                Variable::Constant(_) => d.constants || d.held,
                Variable::Slot(_) => d.slots,
            };
            depends && !g.partials.contains_key(&(id, variable))
        };
        for part in self.reach_where(&[id], |id| open(self, id)) {
            let slope = match (self.node(part), variable) {
                (Node::Coordinate, Variable::Coordinate) => ONE,
                (Node::Jet { unknown, order }, variable) if variable == (Variable::Jet { unknown, order }) => ONE,
                (Node::Constant(a), Variable::Constant(b)) if a == b => ONE,
                (Node::Slot(a), Variable::Slot(b)) if a == b => ONE,
                (node, _) => self.chain_rule(node, |g, a| g.partials.get(&(a, variable)).copied().unwrap_or(ZERO)),
            };
            self.partials.insert((part, variable), slope);
        }
        self.partials.get(&(id, variable)).copied().unwrap_or(ZERO)
    }

    /// Total derivative along the span: u^(k) goes over into u^(k+1), constants and slots into 0; a
    /// [`Node::Derivative`] into the derivative of itself.
    pub fn total(&mut self, id: NodeId) -> NodeId {
        let parts = self.reach_where(&[id], |id| self.depends_on(id).varies() && !self.totals.contains_key(&id));
        for part in parts {
            let slope = match self.node(part) {
                Node::Coordinate => ONE,
                Node::Jet { unknown, order } => self.next_jet(unknown, order),
                Node::Derivative(_) => self.intern(Node::Derivative(part), 0.0),
                node => self.chain_rule(node, |g, a| g.totals.get(&a).copied().unwrap_or(ZERO)),
            };
            self.totals.insert(part, slope);
        }
        self.totals.get(&id).copied().unwrap_or(ZERO)
    }

    /// Derivative of a node by those of its operands.
    fn chain_rule(&mut self, node: Node, slope: impl Fn(&Self, NodeId) -> NodeId) -> NodeId {
        match node {
            Node::Number(_) | Node::Coordinate | Node::Jet { .. } | Node::Constant(_) | Node::Slot(_) => ZERO,
            // Expanded, or handled by the caller.
            Node::Derivative(_) => NOT_A_NUMBER,
            Node::Negate(a) => {
                let da = slope(self, a);
                self.negate(da)
            }
            Node::Add(a, b) => {
                let (da, db) = (slope(self, a), slope(self, b));
                self.add(da, db)
            }
            Node::Multiply(a, b) => {
                let (da, db) = (slope(self, a), slope(self, b));
                let (left, right) = (self.multiply(da, b), self.multiply(a, db));
                self.add(left, right)
            }
            Node::Divide(a, b) => {
                // a'/b - a b'/b^2
                let (da, db) = (slope(self, a), slope(self, b));
                let first = self.divide(da, b);
                let square = self.multiply(b, b);
                let second = self.multiply(a, db);
                let second = self.divide(second, square);
                self.subtract(first, second)
            }
            Node::Power(a, b) => self.power_rule(a, b, slope(self, a), slope(self, b)),
            Node::Unary(f, a) => {
                let da = slope(self, a);
                if da == ZERO {
                    return ZERO;
                }
                self.outer_slope(f, a, da)
            }
            Node::Binary(f, a, b) => {
                let (da, db) = (slope(self, a), slope(self, b));
                self.binary_slope(f, [a, b], [da, db])
            }
            Node::Table { table, order, argument } => {
                let inner = slope(self, argument);
                if inner == ZERO {
                    return ZERO;
                }
                let outer = self.table(table, order.saturating_add(1), argument);
                self.multiply(outer, inner)
            }
            Node::Choose { gap, strict, then, otherwise } => {
                let (then, otherwise) = (slope(self, then), slope(self, otherwise));
                self.choose(gap, strict, then, otherwise)
            }
        }
    }

    /// (a^b)' = b a^(b-1) a' + a^b ln(a) b'
    fn power_rule(&mut self, a: NodeId, b: NodeId, da: NodeId, db: NodeId) -> NodeId {
        let one_less = self.subtract(b, ONE);
        let lower = self.power(a, one_less);
        let lower = self.multiply(b, lower);
        let first = self.multiply(lower, da);
        if db == ZERO {
            return first;
        }
        let (value, log) = (self.power(a, b), self.unary(Unary::Ln, a));
        let second = self.multiply(value, log);
        let second = self.multiply(second, db);
        self.add(first, second)
    }

    /// f'(a) a'
    fn outer_slope(&mut self, f: Unary, a: NodeId, da: NodeId) -> NodeId {
        let two = self.exact(2.0);
        // 1 + s a^2, by factors where it may vanish.
        let one_plus_square = |g: &mut Self, a| {
            let square = g.multiply(a, a);
            g.add(ONE, square)
        };
        let one_minus_square = |g: &mut Self, a| {
            let (minus, plus) = (g.subtract(ONE, a), g.add(ONE, a));
            g.multiply(minus, plus)
        };
        match f {
            Unary::Sqrt => {
                let root = self.unary(f, a);
                let root = self.multiply(two, root);
                self.divide(da, root)
            }
            Unary::Exp => {
                let value = self.unary(f, a);
                self.multiply(value, da)
            }
            Unary::Ln => self.divide(da, a),
            Unary::Log10 => {
                let log = self.number(std::f64::consts::LN_10);
                let under = self.multiply(log, a);
                self.divide(da, under)
            }
            Unary::Sin => {
                let value = self.unary(Unary::Cos, a);
                self.multiply(value, da)
            }
            Unary::Cos => {
                let value = self.unary(Unary::Sin, a);
                let slope = self.multiply(value, da);
                self.negate(slope)
            }
            Unary::Tan => {
                let cosine = self.unary(Unary::Cos, a);
                let square = self.multiply(cosine, cosine);
                self.divide(da, square)
            }
            Unary::Asin | Unary::Acos => {
                let under = one_minus_square(self, a);
                let under = self.unary(Unary::Sqrt, under);
                let slope = self.divide(da, under);
                if f == Unary::Asin { slope } else { self.negate(slope) }
            }
            Unary::Atan => {
                let under = one_plus_square(self, a);
                self.divide(da, under)
            }
            Unary::Sinh => {
                let value = self.unary(Unary::Cosh, a);
                self.multiply(value, da)
            }
            Unary::Cosh => {
                let value = self.unary(Unary::Sinh, a);
                self.multiply(value, da)
            }
            Unary::Tanh => {
                // 1 - tanh^2 would cancel for large a.
                let cosine = self.unary(Unary::Cosh, a);
                let square = self.multiply(cosine, cosine);
                self.divide(da, square)
            }
            Unary::Asinh => {
                let under = one_plus_square(self, a);
                let under = self.unary(Unary::Sqrt, under);
                self.divide(da, under)
            }
            Unary::Acosh => {
                let (minus, plus) = (self.subtract(a, ONE), self.add(a, ONE));
                let (minus, plus) = (self.unary(Unary::Sqrt, minus), self.unary(Unary::Sqrt, plus));
                let under = self.multiply(minus, plus);
                self.divide(da, under)
            }
            Unary::Atanh => {
                let under = one_minus_square(self, a);
                self.divide(da, under)
            }
            Unary::Abs => {
                let sign = self.unary(Unary::Sign, a);
                self.multiply(sign, da)
            }
            Unary::Sign => ZERO,
            Unary::Erf | Unary::Erfc => {
                let square = self.multiply(a, a);
                let square = self.negate(square);
                let bell = self.unary(Unary::Exp, square);
                let factor = std::f64::consts::FRAC_2_SQRT_PI;
                let factor = self.number(if f == Unary::Erf { factor } else { -factor });
                let bell = self.multiply(factor, bell);
                self.multiply(bell, da)
            }
        }
    }

    fn binary_slope(&mut self, f: Binary, [a, b]: [NodeId; 2], [da, db]: [NodeId; 2]) -> NodeId {
        match f {
            Binary::Atan2 => {
                // (b a' - a b')/(a^2 + b^2)
                let (left, right) = (self.multiply(b, da), self.multiply(a, db));
                let over = self.subtract(left, right);
                let (aa, bb) = (self.multiply(a, a), self.multiply(b, b));
                let under = self.add(aa, bb);
                self.divide(over, under)
            }
            Binary::Min | Binary::Max => {
                let gap = self.subtract(a, b);
                let (least, most) = if f == Binary::Min { (da, db) } else { (db, da) };
                self.choose(gap, false, least, most)
            }
            Binary::SignedPower => {
                // b |a|^(b-1) a' + sign(a)|a|^b ln|a| b'
                let size = self.unary(Unary::Abs, a);
                let one_less = self.subtract(b, ONE);
                let lower = self.power(size, one_less);
                let lower = self.multiply(b, lower);
                let first = self.multiply(lower, da);
                if db == ZERO {
                    return first;
                }
                let (value, log) = (self.binary(f, a, b), self.unary(Unary::Ln, size));
                let second = self.multiply(value, log);
                let second = self.multiply(second, db);
                self.add(first, second)
            }
        }
    }

    /// The same expression with every [`Node::Derivative`] taken.
    pub fn expand(&mut self, id: NodeId) -> NodeId {
        let mut made: HashMap<NodeId, NodeId> = HashMap::new();
        for part in self.reach_where(&[id], |id| self.has_derivative(id)) {
            let node = self.node(part);
            let new = match node {
                Node::Derivative(a) => {
                    let a = made.get(&a).copied().unwrap_or(a);
                    self.total(a)
                }
                node => self.rebuild(node, &made),
            };
            made.insert(part, new);
        }
        made.get(&id).copied().unwrap_or(id)
    }

    /// The expression with every node that is a key of `map` replaced by its value, outermost first; what is put
    /// in is not searched again.
    pub fn substitute(&mut self, id: NodeId, map: &HashMap<NodeId, NodeId>) -> NodeId {
        let mut made: HashMap<NodeId, NodeId> = HashMap::new();
        for part in self.reach_where(&[id], |_| true) {
            let new = match map.get(&part) {
                Some(new) => *new,
                None if self.node(part).operands().all(|a| made.get(&a) == Some(&a)) => part,
                None => self.rebuild(self.node(part), &made),
            };
            made.insert(part, new);
        }
        made.get(&id).copied().unwrap_or(id)
    }

    /// The expression as it is in one piece, `middle` being a coordinate inside: every choice on data is replaced by
    /// the branch taken there ([`Graph::piece_tests`]), so that data by pieces become plain numbers.
    pub fn in_piece(&mut self, id: NodeId, middle: f64) -> NodeId {
        let mut made: HashMap<NodeId, NodeId> = HashMap::new();
        for part in self.reach(&[id]) {
            let node = self.node(part);
            let new = match (self.piece_test(node), node) {
                (Some(test), Node::Choose { then, otherwise, .. }) => {
                    let taken = if self.decide(&[test], middle)[0] { then } else { otherwise };
                    made.get(&taken).copied().unwrap_or(taken)
                }
                _ if node.operands().all(|a| made.get(&a) == Some(&a)) => part,
                _ => self.rebuild(node, &made),
            };
            made.insert(part, new);
        }
        made.get(&id).copied().unwrap_or(id)
    }

    /// A node over new operands; operands without a new form stay.
    fn rebuild(&mut self, node: Node, made: &HashMap<NodeId, NodeId>) -> NodeId {
        let new = |a: NodeId| made.get(&a).copied().unwrap_or(a);
        match node {
            Node::Number(_) | Node::Coordinate | Node::Jet { .. } | Node::Constant(_) | Node::Slot(_) => {
                self.intern(node, 0.0)
            }
            Node::Derivative(a) => self.derivative(new(a)),
            Node::Negate(a) => self.negate(new(a)),
            Node::Add(a, b) => self.add(new(a), new(b)),
            Node::Multiply(a, b) => self.multiply(new(a), new(b)),
            Node::Divide(a, b) => self.divide(new(a), new(b)),
            Node::Power(a, b) => self.power(new(a), new(b)),
            Node::Unary(f, a) => self.unary(f, new(a)),
            Node::Binary(f, a, b) => self.binary(f, new(a), new(b)),
            Node::Table { table, order, argument } => self.table(table, order, new(argument)),
            Node::Choose { gap, strict, then, otherwise } => self.choose(new(gap), strict, new(then), new(otherwise)),
        }
    }

    /// Whether the value is linear (affine) in unknowns, unknown constants and slots: exact partial derivatives
    /// free of them, and nothing that they decide.
    pub fn is_linear(&mut self, id: NodeId) -> bool {
        let id = self.expand(id);
        if self.has_kink_in_unknowns(id) {
            return false;
        }
        let jets = self.jets_of(id).into_iter();
        let mut variables: Vec<Variable> = jets.map(|(unknown, order)| Variable::Jet { unknown, order }).collect();
        variables.extend(self.constants_of(id).into_iter().map(Variable::Constant));
        variables.extend(self.slots_of(id).into_iter().map(Variable::Slot));
        variables.into_iter().all(|v| {
            let slope = self.partial(id, v);
            !self.depends_on(slope).unknowns()
        })
    }
}
