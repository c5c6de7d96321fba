//! Conditions: values at points tied to each other, jumps, releases.

use super::functional::Kind as Asked;
use super::lower::{Formula, Lowerer, Typed};
use super::model::place_of;
use super::source::Located;
use crate::formula::graph::{Graph, Inputs, Node, NodeId};
use crate::formula::syntax::{self, Expression, Kind};
use crate::model::{Place, Side};
use std::collections::{BTreeSet, HashMap};

/// A condition as read.
#[derive(Debug, Clone)]
pub(super) struct Read {
    pub name: String,
    pub at: Located,
    /// Left minus right; `None` for a release.
    pub node: Option<NodeId>,
    /// A continuity given up: what may jump, and where.
    pub release: Option<(NodeId, NodeId, String)>,
    /// The end at which it only says that the solution is smooth.
    pub regular: Option<NodeId>,
}

/// A condition with its points found.
pub(super) struct Placed {
    pub name: String,
    pub places: Vec<Place>,
    /// Formula of slots and constants.
    pub formula: NodeId,
    /// The place, unknown and order behind each slot.
    pub reads: Vec<(usize, u16, u8)>,
}

/// An integral in a condition: it is carried as an unknown I of order 1 with I' = integrand inside the stretch.
#[derive(Debug, Clone, Copy)]
pub(super) struct Running {
    pub unknown: u16,
    pub integrand: NodeId,
    pub ends: Option<[NodeId; 2]>,
}

/// What is found at a single place.
pub(super) enum Refusal {
    /// A value without side where there are two.
    TwoValues,
    /// A derivative above the order of its unknown.
    TooHigh,
}

impl Lowerer<'_> {
    /// Reads one condition.
    pub fn condition(&mut self, name: &str, at: &Located) -> Option<Read> {
        let read = |node, release| Read { name: name.to_owned(), at: at.clone(), node, release, regular: None };
        let alone = if at.text.contains('=') { None } else { syntax::parse(&at.text).ok() };
        if let Some(Expression { kind: Kind::Call { name: function, arguments, .. }, span }) = &alone
            && function == "regular"
        {
            let [what, point] = &arguments[..] else {
                return self.fault("arguments", at, span, "write regular(unknown, end)", "");
            };
            self.lower(at, &what.value)?;
            let point = self.point(at, point)?;
            return Some(Read { regular: Some(point.0), ..read(None, None) });
        }
        if let Some(Expression { kind: Kind::Call { name: function, arguments, .. }, span }) = alone
            && function == "release"
        {
            let [what, point] = &arguments[..] else {
                return self.fault("arguments", at, &span, "write release(expression, point)", "");
            };
            let typed = self.lower(at, &what.value);
            let point = self.point(at, point);
            let text = at.text.get(what.value.span.clone()).unwrap_or("").to_owned();
            return Some(read(None, Some((typed?.node, point?.0, text))));
        }
        let (left, right) = match syntax::parse_equation(&at.text) {
            Ok(sides) => sides,
            Err(error) => {
                return self.fault("syntax", at, &error.span.clone(), error.message, &error.hint.unwrap_or_default());
            }
        };
        let (a, b) = (self.lower(at, &left), self.lower(at, &right));
        let (a, b) = (a?, b?);
        let ok = [self.scalar(at, &left, a), self.scalar(at, &right, b)];
        self.equal(at, (&left, a), (&right, b))?;
        if ok.contains(&None) {
            return None;
        }
        let node = self.graph.subtract(a.node, b.node);
        let depends = self.graph.depends_on(node);
        if !depends.slots && !depends.constants {
            let span = 0..at.text.len();
            return self.fault(
                "condition",
                at,
                &span,
                "this condition holds no unknown: it says nothing about the solution",
                "",
            );
        }
        let release = self.jumping(at, &left).or_else(|| self.jumping(at, &right));
        Some(read(Some(node), release))
    }

    /// Both sides of an equation must measure the same.
    pub fn equal(&mut self, at: &Located, a: (&Expression, Typed), b: (&Expression, Typed)) -> Option<()> {
        match (a.1.dimension, b.1.dimension) {
            (Some(p), Some(q)) if p != q => {
                self.faults.unequal.push((p, q));
                let text = |e: &Expression| at.text.get(e.span.clone()).unwrap_or("").trim().to_owned();
                let (left, right) = (text(a.0), text(b.0));
                let message = format!("`{left}` is {} but `{right}` is {}", p.describe(), q.describe());
                let bare = |e: &Expression| matches!(e.kind, Kind::Number { unit: None, .. });
                let hint = match (bare(a.0), bare(b.0)) {
                    (true, _) => format!("give `{left}` a unit"),
                    (_, true) => format!("give `{right}` a unit"),
                    _ => "both sides must measure the same".to_owned(),
                };
                self.fault("dimension", at, &(a.0.span.start..b.0.span.end), message, &hint)
            }
            _ => self.balanced(at, a, b),
        }
    }

    /// A side that is just `jump(e, a)`, maybe with a sign or factor, replaces the continuity of e at a.
    fn jumping(&mut self, at: &Located, e: &Expression) -> Option<(NodeId, NodeId, String)> {
        match &e.kind {
            Kind::Call { name, arguments, .. } if name == "jump" && !self.meanings.contains_key("jump") => {
                let [what, point] = &arguments[..] else { return None };
                let typed = self.lower(at, &what.value)?;
                let point = self.point(at, point)?;
                let text = at.text.get(what.value.span.clone()).unwrap_or("").to_owned();
                Some((typed.node, point.0, text))
            }
            Kind::Negate(a) => self.jumping(at, a),
            Kind::Binary(_, a, b) => self.jumping(at, a).or_else(|| self.jumping(at, b)),
            _ => None,
        }
    }

    /// The state that an expression is a multiple of: unknown and order.
    pub fn state_of(&mut self, node: NodeId) -> Option<(u16, u8)> {
        let (_, factors) = self.graph.factors(node);
        match factors[..] {
            [(factor, 1)] => match self.graph.node(factor) {
                Node::Jet { unknown, order } => Some((unknown, order)),
                _ => None,
            },
            _ => None,
        }
    }

    /// Writes a condition in terms of jets at places.
    pub fn place(
        &mut self,
        read: &Read,
        node: NodeId,
        points: &[f64],
        orders: &[u8],
        released: &dyn Fn(usize, u16, u8) -> bool,
        running: &[(usize, Running)],
    ) -> Option<Placed> {
        let mut placed = Placed { name: read.name.clone(), places: Vec::new(), formula: node, reads: Vec::new() };
        // What each number asked is in terms of the jets at places. Inner ones were lowered first: ascending order
        // is an order of dependence.
        let mut made = HashMap::new();
        for slot in self.all_slots(&[node]) {
            let own = self.graph.slot(slot);
            match self.place_slot(&mut placed, slot, &made, points, orders, released, running) {
                Ok(node) => {
                    made.insert(own, node);
                }
                Err((message, hint)) => {
                    let place = self.functionals[slot as usize].place.clone();
                    self.faults.add("condition", place, message, hint.map(str::to_owned));
                    return None;
                }
            }
        }
        placed.formula = self.graph.substitute(node, &made);
        Some(placed)
    }

    /// The numbers asked in some expressions, and those inside them, ascending.
    pub fn all_slots(&self, nodes: &[NodeId]) -> BTreeSet<u32> {
        let mut all = BTreeSet::new();
        let mut queue = nodes.to_vec();
        while let Some(node) = queue.pop() {
            for slot in self.graph.slots_of(node) {
                if all.insert(slot) {
                    let functional = &self.functionals[slot as usize];
                    queue.push(functional.expression);
                    queue.extend(&functional.points);
                }
            }
        }
        all
    }

    /// A number asked in a condition, in terms of the jets at places; `made` holds the numbers inside it.
    #[allow(clippy::too_many_arguments)]
    fn place_slot(
        &mut self,
        placed: &mut Placed,
        slot: u32,
        made: &HashMap<NodeId, NodeId>,
        points: &[f64],
        orders: &[u8],
        released: &dyn Fn(usize, u16, u8) -> bool,
        running: &[(usize, Running)],
    ) -> Result<NodeId, (String, Option<&'static str>)> {
        let functional = self.functionals[slot as usize].clone();
        let values: Vec<f64> = functional.points.iter().filter_map(|p| self.number_of(*p)).collect();
        if values.len() != functional.points.len() {
            return Err(("a point of a condition must be a datum".into(), None));
        }
        let nearest = |x: f64| {
            let distance = |k: &usize| (points[*k] - x).abs();
            (0..points.len()).min_by(|p, q| distance(p).total_cmp(&distance(q))).unwrap_or(0)
        };
        let expression = functional.expression;
        let mut side_at = |lowerer: &mut Self, expression, point, side| {
            lowerer.at_place(placed, expression, point, side, made, points, orders, released)
        };
        let found = match functional.kind {
            Asked::Value => side_at(self, expression, nearest(values[0]), functional.side),
            Asked::Jump => {
                let point = nearest(values[0]);
                let left = side_at(self, expression, point, Some(Side::Left));
                let right = side_at(self, expression, point, Some(Side::Right));
                left.and_then(|l| right.map(|r| self.graph.subtract(r, l)))
            }
            Asked::Integral | Asked::Mean => {
                if self.graph.depends_on(expression).slots {
                    let message = "an integral of a condition cannot hold values at points";
                    return Err((message.into(), Some("take them out of the integral: integral(y) - y(L)*L")));
                }
                let run = running.iter().find(|(s, _)| *s == slot as usize).map(|(_, r)| *r);
                let run = run.ok_or_else(|| ("this integral is not understood".to_owned(), None))?;
                let ends = match values[..] {
                    [from, to] => [nearest(from.min(to)), nearest(from.max(to))],
                    _ => [0, points.len() - 1],
                };
                let jet = self.graph.jet(run.unknown, 0);
                let from = side_at(self, jet, ends[0], Some(Side::Right));
                let to = side_at(self, jet, ends[1], Some(Side::Left));
                let sum = from.and_then(|f| to.map(|t| self.graph.subtract(t, f)));
                // From right to left the integral counts negative.
                let backwards = matches!(values[..], [from, to] if to < from);
                let sum = sum.map(|s| if backwards { self.graph.negate(s) } else { s });
                match functional.kind {
                    Asked::Mean => {
                        let length = match functional.points[..] {
                            [from, to] => self.graph.subtract(to, from),
                            _ => self.graph.number(points[points.len() - 1] - points[0]),
                        };
                        if self.number_of(length) == Some(0.0) {
                            return Err(("the stretch of this mean has no length".into(), None));
                        }
                        sum.map(|s| self.graph.divide(s, length))
                    }
                    _ => sum,
                }
            }
            _ => {
                let message =
                    "a condition may hold values at points, jumps, integrals and means, not extremes or places";
                return Err((message.into(), None));
            }
        };
        let text = &functional.text;
        found.map_err(|refusal| match refusal {
            Refusal::TwoValues => (
                format!("`{text}` has two values at this point"),
                Some("mark the side: (a-) from the left, (a+) from the right"),
            ),
            Refusal::TooHigh => (
                format!("`{text}` holds a derivative above the order of the problem"),
                Some("use the equation to express it by lower ones"),
            ),
        })
    }

    #[allow(clippy::too_many_arguments)]
    fn at_place(
        &mut self,
        placed: &mut Placed,
        expression: NodeId,
        point: usize,
        side: Option<Side>,
        made: &HashMap<NodeId, NodeId>,
        points: &[f64],
        orders: &[u8],
        released: &dyn Fn(usize, u16, u8) -> bool,
    ) -> Result<NodeId, Refusal> {
        let inner = point > 0 && point + 1 < points.len();
        let mut expression = self.reduction.reduce(&mut self.graph, expression);
        let top = |graph: &Graph, e, above: u8| {
            graph.jets_of(e).iter().any(|(u, k)| *k >= orders[usize::from(*u)].saturating_add(above))
        };
        if top(&self.graph, expression, 1) {
            return Err(Refusal::TooHigh);
        }
        let at_side = |side| place_of(points, &Place { point, side });
        if side.is_none() && inner {
            // The highest derivatives may step wherever data do: only states have one value.
            expression = self.reduction.lowest(&mut self.graph, expression);
            let jumps = self.graph.jets_of(expression).iter().any(|(u, k)| released(point, *u, *k));
            let [left, right] = [Side::Left, Side::Right].map(|side| {
                let (_, piece) = at_side(side);
                self.graph.in_piece(expression, 0.5 * (points[piece] + points[piece + 1]))
            });
            let steps = left != right && !self.same_value(left, right, points[point]);
            if steps || jumps || top(&self.graph, expression, 0) {
                return Err(Refusal::TwoValues);
            }
        }
        let jets = self.graph.jets_of(expression);
        let side = side.unwrap_or(Side::Left);
        let (x, piece) = at_side(side);
        let expression = self.graph.in_piece(expression, 0.5 * (points[piece] + points[piece + 1]));
        let place = Place { point, side };
        let index = placed.places.iter().position(|p| *p == place).unwrap_or_else(|| {
            placed.places.push(place);
            placed.places.len() - 1
        });
        let mut map = made.clone();
        let (coordinate, value) = (self.graph.coordinate(), self.graph.number(x));
        map.insert(coordinate, value);
        for (unknown, order) in jets {
            let read = (index, unknown, order);
            let slot = placed.reads.iter().position(|r| *r == read).unwrap_or_else(|| {
                placed.reads.push(read);
                placed.reads.len() - 1
            });
            let (jet, slot) = (self.graph.jet(unknown, order), self.graph.slot(slot as u32));
            map.insert(jet, slot);
        }
        Ok(self.graph.substitute(expression, &map))
    }

    /// Whether two branches agree at a point for any state: data that only bend there.
    fn same_value(&self, left: NodeId, right: NodeId, x: f64) -> bool {
        let count = |node| self.graph.slots_of(node).last().map_or(0, |s| *s as usize + 1);
        let constants = self.constants.len();
        [0.9f64, 2.6].into_iter().all(|seed| {
            let state = move |k: f64| (seed * (k + 1.385) * 7.3).sin() + 1.7;
            let many: Vec<f64> = (0..count(left).max(count(right)).max(constants)).map(|k| state(k as f64)).collect();
            let jets = move |u: u16, k: u8| state(f64::from(u) * 3.1 + f64::from(k));
            let inputs = Inputs { jets: &jets, constants: &many, slots: &many, ..Inputs::at(x) };
            let [a, b] = [left, right].map(|node| self.graph.evaluate::<f64>(node, &inputs));
            (a - b).abs() <= 1e-12 * a.abs().max(b.abs())
        })
    }

    /// Parses a formula, noting what is wrong with it.
    pub fn parse(&mut self, at: &Located) -> Option<Formula> {
        match syntax::parse(&at.text) {
            Ok(tree) => Some(Formula { at: at.clone(), tree }),
            Err(error) => self.fault("syntax", at, &error.span.clone(), error.message, &error.hint.unwrap_or_default()),
        }
    }
}
