//! The problem as understood, in the words of the sheet.

use super::assemble::{Assembler, Carrying};
use super::carry::Flux;
use super::condition::Read;
use super::lower::Meaning;
use super::nature::Constant;
use super::statement::{Datum, Feature, Line, Role, Statement};
use crate::formula::graph::NodeId;
use crate::formula::syntax::{self, Expression, Kind};
use crate::model::Release;
use crate::unit::Unit;

/// Longest text that serves as the name of a flux, in characters.
const LONGEST_FLUX: usize = 24;

impl Assembler<'_, '_> {
    #[allow(clippy::too_many_arguments)]
    pub(super) fn statement(
        &mut self,
        equations: &[Carrying],
        fluxes: &[Flux],
        reads: &[Read],
        points: &[f64],
        orders: &[usize],
        order: usize,
        releases: &[Release],
        linear: bool,
    ) -> Statement {
        let functions = self.lowerer.functions.len();
        let mut carried: Vec<String> = self.lowerer.functions.iter().map(|f| f.name.clone()).collect();
        for flux in fluxes {
            let name = self.flux_name(equations, flux, &carried);
            carried.push(name);
        }
        let mut unknowns: Vec<Line> = Vec::new();
        for (u, function) in self.lowerer.functions.iter().enumerate() {
            let remark = match orders[u] {
                0 => "algebraic".to_owned(),
                m => format!("highest derivative carried: {m}"),
            };
            unknowns.push(Line { name: function.name.clone(), text: function.unit.text.clone(), remark });
        }
        for (k, name) in carried[functions..].iter().enumerate() {
            let remark = format!("flux, highest derivative carried: {}", orders[functions + k]);
            unknowns.push(Line { name: name.clone(), text: String::new(), remark });
        }
        for constant in &self.lowerer.constants {
            let remark = "unknown constant".into();
            unknowns.push(Line { name: constant.name.clone(), text: constant.unit.text.clone(), remark });
        }
        let lines = equations.iter().map(|e| {
            let jets = self.lowerer.graph.jets_of(e.main);
            let mut own: Vec<&str> = jets
                .iter()
                .filter_map(|(u, _)| carried.get(usize::from(*u)).filter(|_| usize::from(*u) >= functions))
                .map(String::as_str)
                .collect();
            own.dedup();
            let remark = if own.is_empty() { String::new() } else { format!("carries {}", own.join(", ")) };
            Line { name: e.name.clone(), text: e.at.text.clone(), remark }
        });
        let equations = lines.collect();
        let conditions = reads
            .iter()
            .map(|r| {
                let remark = match (&r.release, r.node) {
                    (Some((_, _, what)), Some(_)) => format!("replaces the continuity of {what}"),
                    (Some((_, _, what)), None) => format!("{what} need not be continuous there"),
                    _ => String::new(),
                };
                Line { name: r.name.clone(), text: r.at.text.clone(), remark }
            })
            .collect();
        let features = self.features(reads, points);
        let span = [points[0], points[points.len() - 1]];
        let data = self.data();
        Statement {
            coordinate: self.lowerer.coordinate.clone(),
            coordinate_unit: self.coordinate_unit(),
            span,
            unknowns,
            equations,
            conditions,
            data,
            features,
            order,
            constants: self.lowerer.constants.len(),
            releases: releases.len(),
            carried,
            linear,
        }
    }

    /// The user's own name for a flux, what stands inside the derivative, or a number of ours.
    pub(super) fn flux_name(&mut self, equations: &[Carrying], flux: &Flux, taken: &[String]) -> String {
        let jet = self.lowerer.graph.jet(flux.unknown, 0);
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let typed = self.lowerer.named(&name);
            let ratio = typed.and_then(|t| self.lowerer.graph.ratio(t.node, jet));
            match ratio {
                Some(r) if r == 1.0 && !taken.contains(&name) => return name,
                Some(r) if r == -1.0 && !taken.contains(&name) => return format!("-{name}"),
                _ => {}
            }
        }
        if let Some(text) = self.flux_text(equations, flux).filter(|t| !taken.contains(t)) {
            return text;
        }
        let mut k = 1;
        loop {
            let name = format!("flux {k}");
            if !taken.contains(&name) {
                return name;
            }
            k += 1;
        }
    }

    /// What was written inside the derivative that became a flux, if it stands there as a whole and is short.
    fn flux_text(&mut self, equations: &[Carrying], flux: &Flux) -> Option<String> {
        fn insides<'e>(e: &'e Expression, found: &mut Vec<&'e Expression>) {
            match &e.kind {
                Kind::Prime(a, _) => {
                    found.push(a);
                    insides(a, found);
                }
                Kind::Negate(a) => insides(a, found),
                Kind::Binary(_, a, b) | Kind::If(_, a, b) => [a, b].into_iter().for_each(|e| insides(e, found)),
                Kind::Call { .. } | Kind::Number { .. } | Kind::Name(_) => {}
            }
        }
        // As the equations were read: with all derivatives kept.
        let scalars = std::mem::replace(&mut self.lowerer.scalars, false);
        let text = equations.iter().find_map(|equation| {
            let mut found = Vec::new();
            equation.tree.iter().for_each(|tree| insides(tree, &mut found));
            found.into_iter().find_map(|e| {
                let typed = self.lowerer.lower(&equation.at, e)?;
                let same = self.lowerer.graph.ratio(typed.node, flux.written) == Some(1.0);
                let text = equation.at.text.get(e.span.clone())?.trim();
                let text = text.strip_prefix('(').and_then(|t| t.strip_suffix(')')).unwrap_or(text);
                (same && text.chars().count() <= LONGEST_FLUX).then(|| text.to_owned())
            })
        });
        self.lowerer.scalars = scalars;
        text
    }

    pub(super) fn data(&mut self) -> Vec<Datum> {
        let mut data = Vec::new();
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let typed = self.lowerer.named(&name);
            let text = entry.value.text();
            let node = typed.map(|t| t.node);
            let value = node.and_then(|n| self.lowerer.shown_number(n)).zip(typed).map(|(v, t)| {
                let dimension = t.dimension.unwrap_or_default();
                let written = self.written_unit(&name);
                (v, written.unwrap_or_else(|| Unit::si(dimension)))
            });
            let remark = node.map_or("", |n| {
                let d = self.lowerer.graph.depends_on(n);
                match (value.is_some(), d.jets, d.slots, d.coordinate) {
                    (true, ..) => "datum",
                    (_, true, ..) => "expression of the unknowns",
                    (_, _, true, _) => "result",
                    (_, _, _, true) => "varies along the span",
                    _ => "expression of unknown constants",
                }
            });
            data.push(Datum { name: entry.name.clone(), text, value, remark: remark.into() });
        }
        for constant in &self.lowerer.nature {
            let Constant { name, value, unit, meaning } = constant;
            let (name, text) = ((*name).to_owned(), format!("{value} {unit}"));
            data.push(Datum { name, text, value: None, remark: (*meaning).to_owned() });
        }
        data
    }

    /// The unit in which a plain datum is written.
    pub(super) fn written_unit(&self, name: &str) -> Option<Unit> {
        let (Meaning::Formula(formula) | Meaning::Held(_, formula)) =
            self.lowerer.meanings.get(&syntax::name(name)?)?
        else {
            return None;
        };
        match &formula.tree.kind {
            Kind::Number { unit, .. } => unit.clone(),
            _ => None,
        }
    }

    pub(super) fn features(&mut self, reads: &[Read], points: &[f64]) -> Vec<Feature> {
        let mut features: Vec<Feature> = Vec::new();
        for read in reads {
            let places: Vec<f64> = match &read.release {
                Some((_, point, _)) => self.lowerer.shown_number(*point).into_iter().collect(),
                None => {
                    let slots = read.node.map(|n| self.lowerer.all_slots(&[n])).unwrap_or_default();
                    let points = slots.iter().flat_map(|s| self.lowerer.functionals[*s as usize].points.clone());
                    let points: Vec<NodeId> = points.collect();
                    points.into_iter().filter_map(|p| self.lowerer.shown_number(p)).collect()
                }
            };
            let role = match (&read.release, read.node) {
                (Some(_), Some(_)) => Role::Jump,
                (Some(_), None) => Role::Release,
                _ => Role::Condition,
            };
            for x in places {
                let feature = Feature { x, label: read.name.clone(), role };
                if !features.contains(&feature) {
                    features.push(feature);
                }
            }
        }
        for x in &points[1..points.len() - 1] {
            if !features.iter().any(|f| (f.x - x).abs() <= 1e-12 * x.abs()) {
                features.push(Feature { x: *x, label: String::new(), role: Role::Break });
            }
        }
        features.sort_by(|a, b| a.x.total_cmp(&b.x));
        features
    }
}
