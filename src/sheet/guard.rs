//! Guards on the equations: each unknown determined, no step outside a flux, linear or not.

use super::assemble::{Assembler, Carrying};
use super::carry::Carrier;
use super::condition::Placed;
use super::short;
use crate::formula::graph::{Inputs, NodeId, Variable};
use crate::formula::syntax::{Expression, Kind};

impl Assembler<'_, '_> {
    /// Every unknown needs an equation for its highest derivative; stepped factors belong into fluxes.
    pub(super) fn check_equations(
        &mut self,
        equations: &[Carrying],
        nodes: &[NodeId],
        orders: &[u8],
        points: &[f64],
    ) -> Option<()> {
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
        for e in 0..nodes.len() {
            if !assign(e, &has, &mut owner, &mut vec![false; orders.len()]) {
                let place = equations.get(e).map_or(0..0, |q| q.at.span.clone());
                let missing = owner.iter().position(Option::is_none).and_then(|u| self.lowerer.functions.get(u));
                let name = missing.map_or("an unknown".into(), |u| format!("`{}`", u.name));
                let message = format!("the equations do not determine the highest derivative of {name}");
                let hint = "an equation for each unknown is needed, or a hidden constraint must be differentiated";
                self.lowerer.faults.add("equation count", place, message, Some(hint.into()));
                return None;
            }
        }
        for equation in equations {
            self.check_steps(equation, points);
        }
        self.lowerer.faults.is_empty().then_some(())
    }

    /// Refuses a datum that steps and multiplies the highest derivative outside a flux.
    pub(super) fn check_steps(&mut self, equation: &Carrying, points: &[f64]) {
        let carrier = Carrier { graph: &mut self.lowerer.graph, fluxes: Vec::new(), next: 0 };
        let mut orders: Vec<(u16, u8)> = carrier.orders(&[equation.written]).into_iter().collect();
        orders.sort_unstable();
        for (unknown, order) in orders {
            // Of first order the unknown itself is what is continuous, whatever the factor does.
            if order < 2 || !self.lowerer.graph.jets_of(equation.main).contains(&(unknown, order)) {
                continue;
            }
            let Some(declared) = self.lowerer.functions.get(usize::from(unknown)).cloned() else { continue };
            let smooth = format!("{}{}", declared.name, "'".repeat(usize::from(order) - 1));
            if self.source.smooth.iter().any(|s| s.text.trim() == smooth) {
                continue;
            }
            let factor = self.lowerer.graph.partial(equation.main, Variable::Jet { unknown, order });
            for k in 1..points.len() - 1 {
                let [left, right] = [(k - 1, k), (k, k + 1)].map(|(a, b)| 0.5 * (points[a] + points[b]));
                let [left, right] = [left, right].map(|m| self.lowerer.graph.in_piece(factor, m));
                let at = |node| {
                    let inputs = Inputs { jets: &|_, _| 1.0, ..Inputs::at(points[k]) };
                    self.lowerer.graph.evaluate::<f64>(node, &inputs)
                };
                let (a, b) = (at(left), at(right));
                if (a - b).abs() > 1e-12 * a.abs().max(b.abs()) {
                    let unit = self.coordinate_unit();
                    let place = format!("{} {}", short(unit.from_si(points[k])), unit.text);
                    let name = self.stepping_name(equation, points, k).unwrap_or_else(|| "a factor".into());
                    let inner = format!("{name}*{smooth}");
                    let message =
                        format!("`{name}` steps at {place} but stands outside the derivative: write ({inner})'");
                    let hint =
                        format!("if {smooth} itself is continuous there, say so in [span]: smooth = [\"{smooth}\"]");
                    let at = equation.at.clone();
                    self.lowerer.fault::<()>("stepped datum", &at, &(0..at.text.len()), message, &hint);
                    return;
                }
            }
        }
    }

    /// The datum in an equation that steps at a point.
    pub(super) fn stepping_name(&mut self, equation: &Carrying, points: &[f64], k: usize) -> Option<String> {
        fn names(tree: &Expression, found: &mut Vec<String>) {
            match &tree.kind {
                Kind::Name(name) => found.push(name.clone()),
                Kind::Negate(a) | Kind::Prime(a, _) => names(a, found),
                Kind::Binary(_, a, b) => {
                    names(a, found);
                    names(b, found);
                }
                Kind::If(_, a, b) => {
                    names(a, found);
                    names(b, found);
                }
                Kind::Call { arguments, .. } => arguments.iter().for_each(|a| names(&a.value, found)),
                Kind::Number { .. } => {}
            }
        }
        let mut found = Vec::new();
        equation.tree.iter().for_each(|tree| names(tree, &mut found));
        found.into_iter().find(|name| {
            let named = Expression { kind: Kind::Name(name.clone()), span: 0..0 };
            let Some(typed) = self.lowerer.lower(&equation.at, &named) else { return false };
            let own = self.lowerer.graph.depends_on(typed.node).only_coordinate();
            let branch = |graph: &mut crate::formula::graph::Graph, a: usize| {
                graph.in_piece(typed.node, 0.5 * (points[a] + points[a + 1]))
            };
            own && branch(&mut self.lowerer.graph, k - 1) != branch(&mut self.lowerer.graph, k)
        })
    }

    /// Linear by the derivatives: free of unknowns, or the same at several states.
    pub(super) fn linear(&mut self, equations: &[NodeId], placed: &[Placed]) -> bool {
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
            variables.into_iter().all(|variable| {
                let slope = graph.partial(node, variable);
                let at = |seed: f64| {
                    let state = move |k: f64| (seed * (k + 1.385) * 7.3).sin() + 1.7;
                    let many: Vec<f64> = (0..64).map(|k| state(f64::from(k) + 0.5)).collect();
                    let jets = move |u: u16, k: u8| state(f64::from(u) * 3.1 + f64::from(k));
                    let inputs = Inputs { jets: &jets, constants: &many, slots: &many, ..Inputs::at(0.385) };
                    graph.evaluate::<f64>(slope, &inputs)
                };
                let values = [at(0.9), at(1.7), at(2.6)];
                values.iter().all(|v| (v - values[0]).abs() <= 1e-11 * values[0].abs().max(v.abs()))
            })
        })
    }
}
