//! Sheets that follow a parameter: `[path]`, `fold(n)`, and the asked numbers along the path.

use super::assemble::Assembler;
use super::condition::Placed;
use super::functional::{Functional, Memory};
use super::lower::{Lowerer, Typed};
use super::source::{Located, Source};
use super::{Asked, Item, Reading, Sheet};
use crate::error::Result;
use crate::field::Field;
use crate::formula::graph::{Graph, NodeId};
use crate::formula::syntax::{Argument, Expression, Kind, Span};
use crate::model::Model;
use crate::quantity::Estimate;
use crate::solve::{Path, Route, Settings, Solution, Watch};
use crate::unit::Unit;
use std::collections::BTreeSet;

/// Most folds that reports may ask for.
pub(super) const MOST_FOLDS: usize = 32;

/// A path as a sheet asks for it; values in SI.
#[derive(Debug, Clone, PartialEq)]
pub struct PathAsked {
    /// Name of the parameter.
    pub parameter: String,
    /// The unit that it is written in.
    pub unit: Unit,
    /// Value at the start.
    pub from: f64,
    /// Value at the end.
    pub to: f64,
    /// Number of points, both ends included.
    pub points: usize,
    /// Whether to go on behind folds.
    pub through_folds: bool,
}

/// The asked numbers at one point of a path.
#[derive(Debug, Clone)]
pub struct AskedAt {
    /// Value of the parameter, in SI; exact at a point, with a bar at a fold.
    pub parameter: Estimate,
    /// Folds passed before.
    pub branch: usize,
    /// The asked numbers.
    pub asked: Vec<Asked>,
}

/// The asked numbers along a path, point by point and fold by fold.
#[derive(Debug, Clone)]
pub struct AskedAlong {
    /// At the points, in the order of the path.
    pub points: Vec<AskedAt>,
    /// At the folds, in the order of the path.
    pub folds: Vec<AskedAt>,
}

/// What the report needs to know of `fold(n)`.
#[derive(Debug, Clone, Copy)]
pub(super) struct FoldNames {
    /// Constant of fold(1).
    pub first: u16,
    /// What the parameter measures.
    pub parameter: Option<Typed>,
}

/// Data to be held: those asked for, the parameter of a path last.
pub(super) fn held_names<'s>(source: &'s Source, reading: &Reading<'s>) -> Vec<&'s str> {
    let parameter = source.path.as_ref().map(|follow| follow.parameter.text.as_str());
    let others = reading.held.iter().copied().filter(|name| Some(*name) != parameter);
    others.chain(parameter).collect()
}

impl FoldNames {
    /// Folds that a formula is made from, counted from 0.
    pub fn in_formula(&self, graph: &Graph, formula: NodeId, functionals: &[Functional]) -> Vec<usize> {
        let (mut found, mut seen) = (BTreeSet::new(), BTreeSet::new());
        let mut queue = vec![formula];
        while let Some(node) = queue.pop() {
            found.extend(graph.held_of(node).into_iter().filter_map(|c| c.checked_sub(self.first)).map(usize::from));
            for slot in graph.slots_of(node).into_iter().filter(|slot| seen.insert(*slot)) {
                let functional = &functionals[slot as usize];
                queue.push(functional.expression);
                queue.extend(&functional.points);
            }
        }
        found.into_iter().collect()
    }
}

impl Lowerer<'_> {
    /// `fold(n)`: the parameter of the path at its n-th fold.
    pub(super) fn fold(
        &mut self,
        at: &Located,
        e: &Expression,
        name_span: &Span,
        arguments: &[Argument],
    ) -> Option<Typed> {
        let Some(folds) = self.folds else {
            let hint = "[path] with parameter, from, to and through_folds = true follows the solutions to their folds";
            return self.fault(
                "fold",
                at,
                name_span,
                "`fold` asks for a fold of a path, and the sheet has no [path]",
                hint,
            );
        };
        if !self.reporting {
            let message = "`fold` is known when the path has been followed: it belongs into [report]";
            return self.fault("fold", at, name_span, message, "");
        }
        let n = match arguments {
            [Argument { value: Expression { kind: Kind::Number { value, .. }, .. }, .. }] => Some(*value),
            _ => None,
        };
        match n.filter(|n| *n >= 1.0 && n.fract() == 0.0 && *n <= MOST_FOLDS as f64) {
            Some(n) => {
                let typed = folds.parameter?;
                let node = self.graph.constant(folds.first + n as u16 - 1);
                Some(Typed { node, ..typed })
            }
            None => {
                let message = format!("`fold` takes the number of the fold, 1 to {MOST_FOLDS}");
                self.fault("fold", at, &e.span, message, "write fold(1) for the first")
            }
        }
    }
}

impl Assembler<'_, '_> {
    /// The path, once the names are known.
    pub(super) fn path(&mut self) -> Option<PathAsked> {
        let follow = self.source.path.as_ref()?;
        let name = crate::formula::syntax::name(&follow.parameter.text)?;
        let parameter = self.lowerer.named(&name)?;
        if let Some(folds) = &mut self.lowerer.folds {
            folds.parameter = Some(parameter);
        }
        let mut ends = [0.0; 2];
        for (at, end) in [&follow.from, &follow.to].into_iter().zip(&mut ends) {
            let formula = self.lowerer.parse(at)?;
            let typed = self.lowerer.lower(at, &formula.tree)?;
            self.lowerer.expect(at, &formula.tree, typed, parameter.dimension)?;
            *end = self.lowerer.shown_number(typed.node).filter(|v| v.is_finite()).or_else(|| {
                let message = "an end of a path must be one finite number";
                self.lowerer.fault("path", at, &formula.tree.span, message, "")
            })?;
        }
        if ends[0] == ends[1] {
            let message = "the path ends where it begins";
            let hint = "give `from` and `to` different values";
            self.lowerer.faults.add("path", follow.to.span.clone(), message, Some(hint.into()));
            return None;
        }
        let unit = Unit::si(parameter.dimension.unwrap_or_default());
        let unit = self.written_unit(&follow.parameter.text).unwrap_or(unit);
        let (points, through_folds) = (follow.points, follow.through_folds);
        let [from, to] = ends;
        Some(PathAsked { parameter: follow.parameter.text.clone(), unit, from, to, points, through_folds })
    }

    /// Refuses a parameter that decides about points, or about nothing.
    pub(super) fn check_path(&mut self, nodes: &[NodeId], placed: &[Placed]) {
        let (Some(follow), Some(folds)) = (self.source.path.as_ref(), self.lowerer.folds) else { return };
        let parameter = folds.first - 1;
        let name = &follow.parameter.text;
        let place = follow.parameter.span.clone();
        if self.lowerer.moves.get() {
            let message = format!(
                "`{name}` moves an end or a break of the span (or decides an exponent): a path cannot follow it in this \
                 version"
            );
            let hint =
                "scale the coordinate so that the span stays as it is: x = [\"0\", \"1\"] with lengths as factors";
            self.lowerer.faults.add("path", place, message, Some(hint.into()));
            return;
        }
        let graph = &self.lowerer.graph;
        let mut all = nodes.iter().copied().chain(placed.iter().map(|p| p.formula));
        if !all.any(|node| graph.held_of(node).contains(&parameter)) {
            let message = format!("nothing depends on `{name}`: it is in no equation and no condition");
            let hint = "the parameter of a path must change the problem";
            self.lowerer.faults.add("path", place, message, Some(hint.into()));
        }
    }
}

impl Sheet {
    /// The path that the sheet asks for.
    pub fn path(&self) -> Option<&PathAsked> {
        self.path.as_ref()
    }

    /// Follows the path that the sheet asks for; `None` where it asks for none.
    ///
    /// # Errors
    /// Those of [`crate::solve::path`].
    pub fn follow(&self, watch: Option<Watch<'_>>) -> Option<Result<Path>> {
        let asked = self.path.as_ref()?;
        let route = Route {
            from: asked.from,
            to: asked.to,
            points: asked.points,
            through_folds: asked.through_folds,
            linear: self.statement.linear,
        };
        let settings = Settings { relative: self.relative, watch, ..Settings::default() };
        let mut path = match crate::solve::path(&self.model, &route, &settings) {
            Ok(path) => path,
            Err(error) => return Some(Err(error)),
        };
        let values: Vec<f64> = path.folds.iter().map(|fold| parameter_of(&fold.field)).collect();
        for point in &mut path.points {
            let with: Vec<f64> = std::iter::once(point.parameter).chain(values.iter().copied()).collect();
            point.solution.carry(&with);
        }
        for fold in &mut path.folds {
            fold.carry(&values);
        }
        Some(Ok(path))
    }

    /// The asked numbers along a path that [`Sheet::follow`] made.
    pub fn evaluate_along(&self, path: &Path) -> AskedAlong {
        let layout = self.model.layout();
        let parameter = layout.constants() - 1;
        let points = path.points.iter().map(|point| AskedAt {
            parameter: Estimate { value: point.parameter, error: 0.0 },
            branch: point.branch,
            asked: self.asked_with_folds(&point.solution, &path.folds),
        });
        let folds = path.folds.iter().enumerate().map(|(k, fold)| AskedAt {
            parameter: fold.constant(parameter).unwrap_or(Estimate { value: f64::NAN, error: f64::NAN }),
            branch: k,
            asked: self.asked_with_folds(fold, &path.folds),
        });
        AskedAlong { points: points.collect(), folds: folds.collect() }
    }

    /// The asked numbers on a solution; bars of folds come in where a number is made from them.
    fn asked_with_folds(&self, solution: &Solution, folds: &[Solution]) -> Vec<Asked> {
        let mut asked = self.evaluate(solution);
        for (asked, item) in asked.iter_mut().zip(&self.report) {
            self.add_folds(asked, item, solution, folds);
        }
        asked
    }

    fn add_folds(&self, asked: &mut Asked, item: &Item, solution: &Solution, folds: &[Solution]) {
        let first = self.model.layout().constants();
        if let Some(missing) = item.folds.iter().find(|k| **k >= folds.len()) {
            let found = match folds.len() {
                0 => "the path has no fold".to_owned(),
                1 => "the path has only one fold".to_owned(),
                n => format!("the path has only {n} folds"),
            };
            asked.value = Err(format!("there is no fold {}: {found}", missing + 1));
            return;
        }
        for k in &item.folds {
            let varied = folds[*k].estimate(|fold| {
                let mut field = solution.field.clone();
                if let Some(value) = field.constants.get_mut(first + k) {
                    *value = parameter_at(fold, first - 1);
                }
                item.reckoner.number(&field, &Memory::default())
            });
            match (&mut asked.value, varied) {
                (Ok(value), Ok(varied)) => value.error += varied.error,
                (value @ Ok(_), Err(error)) => *value = Err(self.reason(&error)),
                (Err(_), _) => {}
            }
        }
    }
}

fn parameter_of(fold: &Field) -> f64 {
    parameter_at(fold, fold.layout.constants() - 1)
}

fn parameter_at(fold: &Field, index: usize) -> f64 {
    fold.constants.get(index).copied().unwrap_or(f64::NAN)
}
