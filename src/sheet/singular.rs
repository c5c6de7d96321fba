//! Ends of the span at which an equation is singular: the centre of a disc, rod or sphere, the tip of a cone.
//!
//! A flux carried through such an end admits false solutions: r k T' vanishes at r = 0 whatever T does. There the equation
//! is solved written out, r k T'' + (r k)' T', and what a smooth solution must meet follows from the equation itself: at
//! the end the factors of its highest derivatives vanish, and what is left is a relation between lower ones (T'(0) = 0).
//! Where all of it vanishes, the same is said by its derivative along the span (L'Hopital): a cone's tip, with factors
//! x^4, x^3, x^2, gives two relations that way.

use super::assemble::{Assembler, Carrying};
use super::condition::Read;
use super::functional::{Functional, Kind as Asked};
use super::short;
use crate::formula::graph::{Graph, Inputs, Node, NodeId, Variable};
use nalgebra::DMatrix;
use std::collections::{BTreeMap, HashMap};

/// Most powers of the distance by which an equation is multiplied, and most derivatives that are taken of it.
const MOST: usize = 10;
/// Coefficients below this share of what they are inside the span count as zero.
const ZERO: f64 = 1e-12;
/// How far from the end its piece is told, and inside means inside: shares of the span.
const BESIDE: f64 = 1e-6;
const INSIDE: f64 = 0.371;

/// An equation that is singular at an end of the span.
#[derive(Debug, Clone)]
pub(super) struct Singular {
    pub equation: usize,
    /// 0 or 1.
    pub end: usize,
    /// Multiplied so that it is finite there.
    cleared: NodeId,
}

/// A flux that is not carried, or a derivative of it: continuous all the same where data step.
#[derive(Debug, Clone, Copy)]
pub(super) struct Expanded {
    pub equation: usize,
    /// Written out.
    pub flux: NodeId,
    /// The derivative that jumps so that the flux does not.
    pub unknown: u16,
    pub order: u8,
}

/// Values of everything unknown that stand for any state.
fn state(seed: f64) -> impl Fn(f64) -> f64 {
    move |k: f64| (seed * (k + 1.385) * 7.3).sin() + 1.7
}

/// The value of a node at a place for one such state, `None` if it is not finite.
fn value(graph: &Graph, node: NodeId, x: f64, seed: f64) -> Option<f64> {
    let state = state(seed);
    let many: Vec<f64> = (0..64).map(|k| state(f64::from(k) + 0.5)).collect();
    let jets = |u: u16, k: u8| state(f64::from(u) * 3.1 + f64::from(k));
    // Held constants have their own values, behind the unknown ones.
    let known = graph.constants_of(node).last().map_or(0, |c| usize::from(*c) + 1);
    let inputs = Inputs { jets: &jets, constants: &many[..known.min(64)], slots: &many, ..Inputs::at(x) };
    Some(graph.evaluate::<f64>(node, &inputs)).filter(|v| v.is_finite())
}

/// Largest order of each unknown.
fn tops(graph: &Graph, node: NodeId) -> BTreeMap<u16, u8> {
    let mut tops = BTreeMap::new();
    for (unknown, order) in graph.jets_of(node) {
        let at = tops.entry(unknown).or_insert(order);
        *at = order.max(*at);
    }
    tops
}

/// Multiplies every term of a sum, sums inside products included, so that divisors cancel.
fn multiplied(graph: &mut Graph, e: NodeId, by: NodeId, depth: usize) -> NodeId {
    let mut sum = graph.number(0.0);
    for (number, term) in graph.terms(e) {
        let (own, factors) = graph.factors(term);
        let inner = factors.iter().position(|(f, k)| *k == 1 && matches!(graph.node(*f), Node::Add(..)));
        let number = graph.number(number);
        let part = match inner.filter(|_| depth < MOST) {
            Some(inner) => {
                let mut rest = graph.number(own);
                for (k, (factor, exponent)) in factors.iter().enumerate() {
                    if k != inner {
                        let exponent = graph.number(f64::from(*exponent));
                        let power = graph.power(*factor, exponent);
                        rest = graph.multiply(rest, power);
                    }
                }
                let by = graph.multiply(by, rest);
                multiplied(graph, factors[inner].0, by, depth + 1)
            }
            None => graph.multiply(term, by),
        };
        let part = graph.multiply(number, part);
        sum = graph.add(sum, part);
    }
    sum
}

impl Assembler<'_, '_> {
    /// The ends at which an equation, written out, is singular.
    pub(super) fn singular(&mut self, equation: usize, written: NodeId, span: [f64; 2]) -> Vec<Singular> {
        let graph = &mut self.lowerer.graph;
        let whole = graph.expand(written);
        let length = span[1] - span[0];
        let mut found = Vec::new();
        for (end, x) in span.into_iter().enumerate() {
            let inward = if end == 0 { length } else { -length };
            let here = graph.in_piece(whole, x + BESIDE * inward);
            let Some(cleared) = cleared(graph, here, x) else { continue };
            let tops = tops(graph, cleared);
            let highest = tops.values().copied().max().unwrap_or(0);
            let vanishes = tops.iter().all(|(unknown, order)| {
                let factor = graph.partial(cleared, Variable::Jet { unknown: *unknown, order: *order });
                let (at, inside) = (value(graph, factor, x, 0.9), value(graph, factor, x + INSIDE * inward, 0.9));
                matches!((at, inside), (Some(at), Some(inside)) if at.abs() <= ZERO * inside.abs())
            });
            if highest > 0 && vanishes {
                found.push(Singular { equation, end, cleared });
            }
        }
        found
    }

    /// The fluxes of an equation that is solved written out, with their derivatives below the order.
    pub(super) fn expanded(&mut self, equation: usize, written: NodeId) -> Vec<Expanded> {
        let graph = &mut self.lowerer.graph;
        let mut fluxes = Vec::new();
        let parts = graph.reach(&[written]);
        for part in parts {
            let Node::Derivative(inner) = graph.node(part) else { continue };
            let flux = graph.expand(inner);
            let tops = tops(graph, flux);
            // A bare unknown or derivative is continuous by itself.
            let (_, factors) = graph.factors(flux);
            let bare = matches!(factors[..], [(f, 1)] if matches!(graph.node(f), Node::Jet { .. }));
            if let Some((unknown, order)) = tops.into_iter().next().filter(|_| !bare) {
                fluxes.push(Expanded { equation, flux, unknown, order });
            }
        }
        fluxes
    }

    /// What a smooth solution meets at a singular end, from the equation itself.
    fn relations(&mut self, singular: &Singular, span: [f64; 2]) -> Vec<NodeId> {
        let graph = &mut self.lowerer.graph;
        let length = span[1] - span[0];
        let x = span[singular.end];
        let own = tops(graph, singular.cleared);
        let mut relations = Vec::new();
        let mut node = singular.cleared;
        for _ in 0..MOST + 4 {
            let mut sizes: Vec<((u16, u8), f64)> = Vec::new();
            for (unknown, order) in graph.jets_of(node) {
                let factor = graph.partial(node, Variable::Jet { unknown, order });
                let Some(at) = value(graph, factor, x, 0.9) else { return relations };
                sizes.push(((unknown, order), at.abs() / length.powi(i32::from(order))));
            }
            let largest = sizes.iter().map(|s| s.1).fold(0.0, f64::max);
            let above = |u: &u16, k: &u8| own.get(u).is_none_or(|m| k >= m);
            let counts = |s: &&((u16, u8), f64)| s.1 > ZERO * largest && s.1 > 0.0;
            if sizes.iter().filter(counts).any(|((u, k), _)| above(u, k)) {
                break;
            }
            if largest > 0.0 {
                let mut map = HashMap::new();
                let zero = graph.number(0.0);
                for ((unknown, order), _) in sizes.iter().filter(|s| !counts(s)) {
                    let jet = graph.jet(*unknown, *order);
                    map.insert(jet, zero);
                }
                relations.push(graph.substitute(node, &map));
            }
            node = graph.total(node);
        }
        relations
    }

    /// Puts in what regularity demands at singular ends, in place of conditions that say no more than that; and the
    /// continuity of fluxes that are not carried.
    pub(super) fn regularity(
        &mut self,
        reads: Vec<Read>,
        equations: &[Carrying],
        singular: &[Singular],
        expanded: &[Expanded],
        points: &[f64],
    ) -> Option<Vec<Read>> {
        let span = [points[0], points[points.len() - 1]];
        let mut kept = reads;
        for end in 0..2 {
            let mut relations = Vec::new();
            for own in singular.iter().filter(|s| s.end == end) {
                relations.extend(self.relations(own, span));
            }
            kept = self.regular_end(kept, &relations, equations, singular, span, end)?;
        }
        for flux in expanded {
            for k in 1..points.len() - 1 {
                kept.extend(self.continuity(flux, &equations[flux.equation], &kept, points, k));
            }
        }
        Some(kept)
    }

    fn regular_end(
        &mut self,
        reads: Vec<Read>,
        relations: &[NodeId],
        equations: &[Carrying],
        singular: &[Singular],
        span: [f64; 2],
        end: usize,
    ) -> Option<Vec<Read>> {
        let x = span[end];
        let length = span[1] - span[0];
        let small = 1e-12 * length.max(x.abs());
        let (mut kept, mut stated, mut rows) = (Vec::new(), None, Vec::new());
        let mut named = Vec::new();
        for read in reads {
            if let Some(point) = read.regular {
                let here = self.lowerer.number_of(point).is_some_and(|p| (p - x).abs() <= small);
                if !here {
                    kept.push(read);
                } else if singular.iter().any(|s| s.end == end) {
                    stated.get_or_insert(read);
                } else {
                    let message =
                        format!("`{}` says nothing: the equations are not singular there", read.at.text.trim());
                    let hint = "give a condition on a value, slope or flux";
                    self.lowerer.faults.add("singular end", read.at.span.clone(), message, Some(hint.into()));
                    return None;
                }
                continue;
            }
            let Some(row) = self.row_at(&read, x, small).filter(|_| !relations.is_empty()) else {
                kept.push(read);
                continue;
            };
            let trivial = row.values().all(|v| *v == 0.0);
            if trivial {
                let node = read.node.unwrap_or(NodeId(0));
                if self.rest_at(node, x).is_some_and(|v| v.abs() > 1e-9) {
                    let message = format!("`{}` cannot be met: nothing in it varies at this end", read.at.text.trim());
                    let hint = "a flux vanishes there by itself; say so with 0 on the right, or with regular(u, point)";
                    self.lowerer.faults.add("singular end", read.at.span.clone(), message, Some(hint.into()));
                    return None;
                }
                stated.get_or_insert(read);
            } else {
                rows.push(row);
                named.push(read.name.clone());
                kept.push(read);
            }
        }
        let mut missing = Vec::new();
        for relation in relations {
            let row = self.coefficients(*relation, x);
            let before = rank(&rows, length);
            rows.push(row);
            if rank(&rows, length) == before {
                rows.pop();
            } else {
                missing.push(*relation);
            }
        }
        let Some(stated) = stated else {
            if missing.is_empty() {
                return Some(kept);
            }
            let place = singular.iter().find(|s| s.end == end).map_or(0..0, |s| equations[s.equation].at.span.clone());
            let unit = self.coordinate_unit();
            let shown = format!("{} {}", short(unit.from_si(x)), unit.text);
            let shown = shown.trim_end_matches(" 1").to_owned();
            let forced: Vec<String> = missing.iter().map(|r| self.forced(*r, x, &shown)).collect();
            let message = format!(
                "at the singular end {} = {shown} this equation itself forces {}, which no condition says",
                self.lowerer.coordinate,
                forced.join(" and ")
            );
            let unknown = self.lowerer.functions.first().map_or("u", |f| f.name.as_str());
            let beside = match named.is_empty() {
                true => String::new(),
                false => {
                    format!(" in place of {}", named.iter().map(|n| format!("\"{n}\"")).collect::<Vec<_>>().join(", "))
                }
            };
            let hint = format!("write regular({unknown}, {shown}){beside}");
            self.lowerer.faults.add("singular end", place, message, Some(hint));
            return None;
        };
        for relation in missing {
            let node = self.at_point(relation, x, &stated);
            kept.push(Read { node: Some(node), release: None, regular: None, ..stated.clone() });
        }
        Some(kept)
    }

    /// A value at a point as a node of its own.
    fn at_point(&mut self, expression: NodeId, x: f64, read: &Read) -> NodeId {
        let point = self.lowerer.graph.number(x);
        self.lowerer.functionals.push(Functional {
            kind: Asked::Value,
            expression,
            points: vec![point],
            point_places: vec![read.at.span.clone()],
            side: None,
            place: read.at.span.clone(),
            text: read.at.text.clone(),
            dimension: None,
            unit: None,
            reported: false,
        });
        let index = self.lowerer.functionals.len() - 1;
        self.lowerer.graph.slot(index as u32)
    }

    /// In words, as far as that is short: `T'(0 m) = 0`.
    fn forced(&mut self, relation: NodeId, x: f64, shown: &str) -> String {
        let row = self.coefficients(relation, x);
        let rest = self.rest_at_zero(relation, x);
        let mut terms: Vec<(&(u16, u8), &f64)> = row.iter().filter(|(_, v)| **v != 0.0).collect();
        terms.sort_by_key(|term| std::cmp::Reverse(term.0.1));
        match (&terms[..], rest) {
            ([((unknown, order), _)], Some(0.0)) => {
                let name = self.lowerer.functions.get(usize::from(*unknown)).map_or("u", |f| f.name.as_str());
                format!("{name}{}({shown}) = 0", "'".repeat(usize::from(*order)))
            }
            _ => "a relation between values there".into(),
        }
    }

    /// What a condition is made of where all its points are this end: how it changes with each jet.
    fn row_at(&mut self, read: &Read, x: f64, small: f64) -> Option<BTreeMap<(u16, u8), f64>> {
        let node = read.node.filter(|_| read.release.is_none())?;
        let slots = self.lowerer.all_slots(&[node]);
        let mut row = BTreeMap::new();
        if slots.is_empty() {
            return None;
        }
        for slot in slots {
            let functional = self.lowerer.functionals[slot as usize].clone();
            let [point] = functional.points[..] else { return None };
            let here = self.lowerer.number_of(point).is_some_and(|p| (p - x).abs() <= small);
            if !here || functional.kind != Asked::Value || self.lowerer.graph.depends_on(functional.expression).slots {
                return None;
            }
            let weight = self.lowerer.graph.partial(node, Variable::Slot(slot));
            let weight = value(&self.lowerer.graph, weight, x, 0.9)?;
            for (jet, factor) in self.coefficients(functional.expression, x) {
                *row.entry(jet).or_insert(0.0) += weight * factor;
            }
        }
        Some(row)
    }

    fn coefficients(&mut self, expression: NodeId, x: f64) -> BTreeMap<(u16, u8), f64> {
        let graph = &mut self.lowerer.graph;
        let expression = graph.expand(expression);
        let mut row = BTreeMap::new();
        for (unknown, order) in graph.jets_of(expression) {
            let factor = graph.partial(expression, Variable::Jet { unknown, order });
            // What is not finite there is certainly not nothing.
            row.insert((unknown, order), value(graph, factor, x, 0.9).unwrap_or(1.0));
        }
        row
    }

    /// Value of a condition in which nothing varies.
    fn rest_at(&mut self, node: NodeId, x: f64) -> Option<f64> {
        let mut map = HashMap::new();
        for slot in self.lowerer.all_slots(&[node]) {
            let expression = self.lowerer.functionals[slot as usize].expression;
            let value = self.rest_at_zero(expression, x)?;
            let (slot, number) = (self.lowerer.graph.slot(slot), self.lowerer.graph.number(value));
            map.insert(slot, number);
        }
        let node = self.lowerer.graph.substitute(node, &map);
        value(&self.lowerer.graph, node, x, 0.9)
    }

    fn rest_at_zero(&mut self, expression: NodeId, x: f64) -> Option<f64> {
        let graph = &mut self.lowerer.graph;
        let expression = graph.expand(expression);
        let zero = graph.number(0.0);
        let jets: HashMap<NodeId, NodeId> =
            graph.jets_of(expression).into_iter().map(|(unknown, order)| (graph.jet(unknown, order), zero)).collect();
        let rest = graph.substitute(expression, &jets);
        value(graph, rest, x, 0.9)
    }

    /// The continuity of a flux that is not carried, at a point where its data step; nothing where the sheet gives it up.
    fn continuity(
        &mut self,
        flux: &Expanded,
        equation: &Carrying,
        reads: &[Read],
        points: &[f64],
        k: usize,
    ) -> Option<Read> {
        let sides = [0.5 * (points[k - 1] + points[k]), 0.5 * (points[k] + points[k + 1])];
        let values = sides.map(|middle| {
            let node = self.lowerer.graph.in_piece(flux.flux, middle);
            value(&self.lowerer.graph, node, points[k], 0.9)
        });
        let same = matches!(values, [Some(a), Some(b)] if (a - b).abs() <= 1e-12 * a.abs().max(b.abs()));
        let given_up = reads.iter().any(|read| {
            read.release.as_ref().is_some_and(|(what, point, _)| {
                let near =
                    self.lowerer.number_of(*point).is_some_and(|x| (x - points[k]).abs() <= 1e-12 * points[k].abs());
                near && self.ratio_to(*what, flux.flux).is_some()
            })
        });
        if same || given_up {
            return None;
        }
        let point = self.lowerer.graph.number(points[k]);
        let name = equation.name.clone();
        let read = Read { name, at: equation.at.clone(), node: None, release: None, regular: None };
        let slot = self.at_point(flux.flux, points[k], &read);
        if let Some(functional) = self.lowerer.functionals.last_mut() {
            functional.kind = Asked::Jump;
        }
        let jet = self.lowerer.graph.jet(flux.unknown, flux.order);
        Some(Read { node: Some(slot), release: Some((jet, point, "the flux".into())), ..read })
    }

    fn ratio_to(&mut self, what: NodeId, flux: NodeId) -> Option<f64> {
        let what = self.lowerer.graph.expand(what);
        self.lowerer.graph.ratio(what, flux)
    }

    /// The state that jumps where the continuity of a flux that is not carried is given up.
    pub(super) fn behind_flux(&mut self, what: NodeId, expanded: &[Expanded]) -> Option<(u16, u8)> {
        expanded.iter().find(|e| self.ratio_to(what, e.flux).is_some()).map(|e| (e.unknown, e.order))
    }
}

/// An expression times the smallest power of the distance from a point with which it is finite there.
fn cleared(graph: &mut Graph, e: NodeId, x: f64) -> Option<NodeId> {
    let (coordinate, at) = (graph.coordinate(), graph.number(x));
    let distance = graph.subtract(coordinate, at);
    let mut node = e;
    for _ in 0..=MOST {
        let finite = |graph: &mut Graph, node: NodeId| {
            let jets: Vec<(u16, u8)> = graph.jets_of(node).into_iter().collect();
            let partials: Vec<NodeId> = jets
                .into_iter()
                .map(|(unknown, order)| graph.partial(node, Variable::Jet { unknown, order }))
                .chain([node])
                .collect();
            partials.into_iter().all(|p| value(graph, p, x, 0.9).is_some())
        };
        if finite(graph, node) {
            return Some(node);
        }
        node = multiplied(graph, node, distance, 0);
    }
    None
}

/// Rank of some rows, jets counted over the length of the span.
fn rank(rows: &[BTreeMap<(u16, u8), f64>], length: f64) -> usize {
    let mut columns: Vec<(u16, u8)> = rows.iter().flat_map(|r| r.keys().copied()).collect();
    columns.sort_unstable();
    columns.dedup();
    if rows.is_empty() || columns.is_empty() {
        return 0;
    }
    let mut matrix = DMatrix::from_fn(rows.len(), columns.len(), |r, c| {
        rows[r].get(&columns[c]).map_or(0.0, |v| v / length.powi(i32::from(columns[c].1)))
    });
    for mut row in matrix.row_iter_mut() {
        let size = row.amax();
        if size > 0.0 {
            row /= size;
        }
    }
    matrix.rank(1e-9)
}
