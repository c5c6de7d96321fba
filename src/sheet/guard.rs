//! Guards on the equations: each unknown determined, no step outside a flux, linear or not.

use super::assemble::{Assembler, Carrying};
use super::carry::{Carrier, Flux};
use super::condition::Placed;
use super::model::SheetModel;
use super::short;
use super::singular::Singular;
use crate::formula::graph::{Inputs, NodeId, Variable};
use crate::formula::syntax::{Expression, Kind};
use crate::model::{Batch, Linearised, Model};
use std::ops::Range;

/// What helps at a singular end.
const EXPAND: &str = "at an end of the span write the derivative out, (D/r^2)*(r^2*c')' as D*(c'' + 2*c'/r), or begin the span \
                      beside that point";

const HIDDEN: &str = "an equation for each unknown is needed, or a hidden constraint must be differentiated";

/// Determinants this small, in rows and columns scaled to 1, count as zero.
const VANISHING: f64 = 1e-13;

/// Sizes of rows, and of columns after the rows have been divided by theirs.
fn sizes(matrix: &[Vec<f64>]) -> [Vec<f64>; 2] {
    let size = |values: &mut dyn Iterator<Item = f64>| match values.fold(0.0f64, |m, v| m.max(v.abs())) {
        0.0 => 1.0,
        size => size,
    };
    let rows: Vec<f64> = matrix.iter().map(|r| size(&mut r.iter().copied())).collect();
    let column = |c: usize| size(&mut matrix.iter().zip(&rows).map(|(r, s)| r[c] / s));
    let columns = (0..matrix.len()).map(column).collect();
    [rows, columns]
}

/// Determinant after dividing rows and columns by their sizes.
fn determinant(matrix: &[Vec<f64>], [rows, columns]: &[Vec<f64>; 2]) -> f64 {
    let scaled = |(r, s): (&Vec<f64>, &f64)| r.iter().zip(columns).map(|(v, c)| v / s / c).collect();
    let mut m: Vec<Vec<f64>> = matrix.iter().zip(rows).map(scaled).collect();
    let mut product = 1.0;
    for k in 0..m.len() {
        let pivot = (k..m.len()).max_by(|a, b| m[*a][k].abs().total_cmp(&m[*b][k].abs())).unwrap_or(k);
        m.swap(k, pivot);
        let own = m[k][k];
        product *= own;
        if own == 0.0 {
            break;
        }
        let (above, below) = m.split_at_mut(k + 1);
        for row in below {
            let factor = row[k] / own;
            if factor == 0.0 {
                continue;
            }
            row.iter_mut().zip(&above[k]).for_each(|(r, a)| *r -= factor * a);
        }
    }
    product
}

/// What stands inside the first derivative of an expression in an equation, as written.
fn differentiated(equation: &Carrying) -> Option<String> {
    fn inside(tree: &Expression) -> Option<Range<usize>> {
        match &tree.kind {
            Kind::Prime(inner, _) => Some(inner.span.clone()),
            Kind::Negate(a) => inside(a),
            Kind::Binary(_, a, b) | Kind::If(_, a, b) => inside(a).or_else(|| inside(b)),
            Kind::Call { .. } | Kind::Number { .. } | Kind::Name(_) => None,
        }
    }
    let span = equation.tree.iter().find_map(inside)?;
    equation.at.text.get(span).map(str::to_owned)
}

impl Assembler<'_, '_> {
    /// For each unknown an equation for its highest derivative.
    pub(super) fn owners(
        &mut self,
        equations: &[Carrying],
        nodes: &[NodeId],
        orders: &[u8],
    ) -> Option<Vec<Option<usize>>> {
        let has: Vec<Vec<bool>> = nodes
            .iter()
            .map(|n| {
                let jets = self.lowerer.graph.jets_of(*n);
                orders.iter().enumerate().map(|(u, m)| jets.contains(&(u as u16, *m))).collect()
            })
            .collect();
        let mut owner: Vec<Option<usize>> = vec![None; orders.len()];
        fn assign(e: usize, has: &[Vec<bool>], owner: &mut [Option<usize>], seen: &mut [bool]) -> bool {
            for u in 0..owner.len() {
                if has[e][u] && !seen[u] {
                    seen[u] = true;
                    if owner[u].is_none_or(|other| assign(other, has, owner, seen)) {
                        owner[u] = Some(e);
                        return true;
                    }
                }
            }
            false
        }
        let idle: Vec<usize> =
            (0..nodes.len()).filter(|e| !assign(*e, &has, &mut owner, &mut vec![false; orders.len()])).collect();
        let Some(first) = idle.first() else { return Some(owner) };
        let place = self.written_for(equations, nodes, *first);
        let missing = owner.iter().position(Option::is_none).and_then(|u| self.lowerer.functions.get(u));
        let name = missing.map_or("an unknown".into(), |u| format!("`{}`", u.name));
        let message = format!("the equations do not determine the highest derivative of {name}");
        self.lowerer.faults.add("equation count", place, message, Some(HIDDEN.into()));
        None
    }

    /// Place of an equation of the sheet; for the definition of a flux that of the equation that first holds it.
    pub(super) fn written_for(&self, equations: &[Carrying], nodes: &[NodeId], e: usize) -> Range<usize> {
        if let Some(own) = equations.get(e) {
            return own.at.span.clone();
        }
        let flux = (self.lowerer.functions.len() + e - equations.len()) as u16;
        let holds = |q: &&NodeId| self.lowerer.graph.jets_of(**q).iter().any(|(u, k)| *u == flux && *k > 0);
        match nodes.iter().position(|q| holds(&q)) {
            Some(outer) if outer != e => self.written_for(equations, nodes, outer),
            _ => equations.first().map_or(0..0, |q| q.at.span.clone()),
        }
    }

    /// Refuses equations whose highest derivatives are not determined at a point, or nowhere.
    pub(super) fn check_regular(
        &mut self,
        model: &SheetModel,
        equations: &[Carrying],
        nodes: &[NodeId],
        singular: &[Singular],
    ) -> Option<()> {
        let layout = model.layout();
        let (points, d) = (model.points(), layout.unknowns());
        let jets = vec![1.0; 3 * layout.jets()];
        let constants = vec![1.0; self.lowerer.constants.len()];
        let mut out = Linearised::default();
        for piece in 0..points.len() - 1 {
            let [a, b] = [points[piece], points[piece + 1]];
            let x = [a, a + 0.385 * (b - a), b];
            out.reset(layout, 3);
            model.equations(&Batch { piece, x: &x, jets: &jets, constants: &constants }, &mut out).ok()?;
            let matrix = |node: usize| {
                let entry = |e: usize, u: usize| {
                    let top = layout.jet(u, layout.orders()[u]);
                    out.jets[(e * layout.jets() + top) * 3 + node]
                };
                (0..d).map(|e| (0..d).map(|u| entry(e, u)).collect::<Vec<f64>>()).collect::<Vec<_>>()
            };
            let middle = matrix(1);
            if middle.iter().flatten().any(|v| !v.is_finite()) {
                continue;
            }
            let sizes = sizes(&middle);
            let whole = determinant(&middle, &sizes);
            if whole.abs() <= VANISHING {
                let place = equations.first().map_or(0..0, |q| q.at.span.clone());
                let message = "the equations do not determine all highest derivatives: they depend on each other";
                self.lowerer.faults.add("equation count", place, message, Some(HIDDEN.into()));
                return None;
            }
            for (node, x) in [(0, a), (2, b)] {
                let end = usize::from(node == 2);
                if singular.iter().any(|s| s.end == end) && piece == end * (points.len() - 2) {
                    continue;
                }
                let here = matrix(node);
                let open = here.iter().flatten().any(|v| !v.is_finite());
                if !open && determinant(&here, &sizes).abs() > VANISHING * whole.abs() {
                    continue;
                }
                // The first row in which the highest derivatives vanish or blow up.
                let gone =
                    |(row, size): (&Vec<f64>, &f64)| row.iter().all(|v| v.is_nan() || v.abs() <= VANISHING * size);
                let row = here.iter().zip(&sizes[0]).position(gone);
                let row = row.or_else(|| here.iter().position(|r| r.iter().any(|v| !v.is_finite()))).unwrap_or(0);
                let place = self.written_for(equations, nodes, row);
                let unit = self.coordinate_unit();
                let message = format!(
                    "at {} = {} {} the factor of the highest derivative vanishes or is not finite: singular points are \
                     not part of this version",
                    self.lowerer.coordinate,
                    short(unit.from_si(x)),
                    unit.text
                );
                self.lowerer.faults.add("not yet", place, message, Some(EXPAND.into()));
                return None;
            }
        }
        Some(())
    }

    /// Refuses a datum that steps and multiplies the highest derivative outside a flux.
    pub(super) fn check_steps(&mut self, equation: &Carrying, fluxes: &[Flux], points: &[f64]) {
        let carrier = Carrier { graph: &mut self.lowerer.graph, fluxes: Vec::new(), next: 0 };
        let mut orders: Vec<(u16, u8)> = carrier.orders(&[equation.written]).into_iter().collect();
        orders.sort_unstable();
        let jets = self.lowerer.graph.jets_of(equation.main);
        for (unknown, order) in orders {
            let Some(declared) = self.lowerer.functions.get(usize::from(unknown)).cloned() else { continue };
            let smooth = format!("{}{}", declared.name, "'".repeat(usize::from(order).saturating_sub(1)));
            if order == 0 || self.source.smooth.iter().any(|s| s.text.trim() == smooth) {
                continue;
            }
            // Of first order the unknown itself is what is continuous, whatever the factor does.
            if order > 1 && jets.contains(&(unknown, order)) {
                let factor = self.lowerer.graph.partial(equation.main, Variable::Jet { unknown, order });
                if let Some(k) = (1..points.len() - 1).find(|k| self.steps(factor, points, *k)) {
                    return self.stepped(equation, factor, [&smooth, &smooth], points, k);
                }
            }
            // A factor outside a flux: it may step only if the flux holds its reciprocal, as in (1/A)*(A*k*T')'.
            for flux in fluxes {
                let Some(top) = jets.iter().filter(|(u, _)| *u == flux.unknown).map(|(_, k)| *k).max() else {
                    continue;
                };
                let own = self.lowerer.graph.jets_of(flux.defined).into_iter().filter(|(u, _)| *u == unknown);
                let Some(inner) = own.map(|(_, k)| k).max().filter(|_| top > 0) else { continue };
                let outside = Variable::Jet { unknown: flux.unknown, order: top };
                let whole = self.lowerer.graph.partial(equation.main, outside);
                let inside = self.lowerer.graph.partial(flux.defined, Variable::Jet { unknown, order: inner });
                let (_, inside) = self.lowerer.graph.factors(inside);
                let (_, outside) = self.lowerer.graph.factors(whole);
                for (factor, exponent) in outside {
                    let undone = inside.iter().any(|(f, e)| *f == factor && e * exponent < 0);
                    let step = (1..points.len() - 1).find(|k| self.steps(factor, points, *k));
                    if let Some(k) = step.filter(|_| !undone) {
                        let text = differentiated(equation).unwrap_or_else(|| smooth.clone());
                        return self.stepped(equation, whole, [&text, &smooth], points, k);
                    }
                }
            }
        }
    }

    /// Whether a factor has two values at a break.
    fn steps(&mut self, factor: NodeId, points: &[f64], k: usize) -> bool {
        let [left, right] = [(k - 1, k), (k, k + 1)].map(|(a, b)| {
            let node = self.lowerer.graph.in_piece(factor, 0.5 * (points[a] + points[b]));
            let inputs = Inputs { jets: &|_, _| 1.0, ..Inputs::at(points[k]) };
            self.lowerer.graph.evaluate::<f64>(node, &inputs)
        });
        (left - right).abs() > 1e-12 * left.abs().max(right.abs())
    }

    /// Notes that a part of a factor steps outside of what is differentiated, `inner`, and how to insist.
    fn stepped(&mut self, equation: &Carrying, factor: NodeId, [inner, smooth]: [&str; 2], points: &[f64], k: usize) {
        let unit = self.coordinate_unit();
        let place = format!("{} {}", short(unit.from_si(points[k])), unit.text);
        let (name, span) =
            self.stepping_name(equation, points, k).unwrap_or(("a factor".into(), 0..equation.at.text.len()));
        let node = self.lowerer.named(&name).map(|t| t.node);
        let (_, factors) = self.lowerer.graph.factors(factor);
        let divides = factors.iter().any(|(f, exponent)| Some(*f) == node && *exponent < 0);
        let (inner, name) = (inner.trim(), name.as_str());
        let within = if divides { format!("{inner}/{name}") } else { format!("{name}*{inner}") };
        let message = format!("`{name}` steps at {place} but stands outside the derivative: write ({within})'");
        let hint = format!("if {smooth} itself is continuous there, say so in [span]: smooth = [\"{smooth}\"]");
        let at = equation.at.clone();
        self.lowerer.fault::<()>("stepped datum", &at, &span, message, &hint);
    }

    /// The datum outside all derivatives of an equation that steps at a point, and where it stands.
    fn stepping_name(&mut self, equation: &Carrying, points: &[f64], k: usize) -> Option<(String, Range<usize>)> {
        fn names(tree: &Expression, found: &mut Vec<(String, Range<usize>)>) {
            match &tree.kind {
                Kind::Name(name) => found.push((name.clone(), tree.span.clone())),
                Kind::Negate(a) => names(a, found),
                Kind::Binary(_, a, b) | Kind::If(_, a, b) => {
                    names(a, found);
                    names(b, found);
                }
                Kind::Call { arguments, .. } => arguments.iter().for_each(|a| names(&a.value, found)),
                Kind::Number { .. } | Kind::Prime(..) => {}
            }
        }
        let mut found = Vec::new();
        equation.tree.iter().for_each(|tree| names(tree, &mut found));
        found.into_iter().find(|(name, _)| {
            let Some(typed) = self.lowerer.named(name) else { return false };
            self.lowerer.graph.depends_on(typed.node).only_coordinate() && self.steps(typed.node, points, k)
        })
    }

    /// Linear by the derivatives: free of unknowns, or the same at several states.
    pub(super) fn linear(&mut self, equations: &[NodeId], placed: &[Placed], [from, to]: [f64; 2]) -> bool {
        let graph = &mut self.lowerer.graph;
        let all: Vec<NodeId> = equations.iter().copied().chain(placed.iter().map(|p| p.formula)).collect();
        all.into_iter().all(|node| {
            if graph.is_linear(node) {
                return true;
            }
            if graph.has_kink_in_unknowns(node) {
                return false;
            }
            let mut variables: Vec<Variable> =
                graph.jets_of(node).into_iter().map(|(unknown, order)| Variable::Jet { unknown, order }).collect();
            variables.extend(graph.constants_of(node).into_iter().map(Variable::Constant));
            variables.extend(graph.slots_of(node).into_iter().map(Variable::Slot));
            let last = |k: Option<u32>| k.map_or(0, |k| k as usize + 1);
            let constants = graph.constants_of(node).last().map(|c| u32::from(*c));
            let count = last(constants).max(last(graph.slots_of(node).last().copied()));
            variables.into_iter().all(|variable| {
                let slope = graph.partial(node, variable);
                let at = |part: f64, seed: f64| {
                    let state = move |k: f64| (seed * (k + 1.385) * 7.3).sin() + 1.7;
                    let many: Vec<f64> = (0..count).map(|k| state(k as f64 + 0.5)).collect();
                    let jets = move |u: u16, k: u8| state(f64::from(u) * 3.1 + f64::from(k));
                    let x = from + part * (to - from);
                    let inputs = Inputs { jets: &jets, constants: &many, slots: &many, ..Inputs::at(x) };
                    graph.evaluate::<f64>(slope, &inputs)
                };
                [0.0385, 0.385, 0.871].into_iter().all(|part| {
                    let values = [0.9, 1.7, 2.6].map(|seed| at(part, seed));
                    values.iter().all(|v| (v - values[0]).abs() <= 1e-11 * values[0].abs().max(v.abs()))
                })
            })
        })
    }
}
