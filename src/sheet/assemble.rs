//! From sections to a model: all checks in one pass.

use super::along::Along;
use super::carry::{Carrier, Flux};
use super::condition::{Placed, Read, Running};
use super::fault::{Fault, Faults};
use super::functional::Kind as Asked;
use super::lower::{Carried, Formula, Lowerer, Meaning, Unknown};
use super::model::{Equations, SheetModel, Tie};
use super::source::{self, Given, Located, MOST_BYTES, Source};
use super::statement::{Datum, Feature, Line, Role, Statement};
use super::{Balance, CurveItem, Item, Sheet, Wanted, short};
use crate::formula::graph::{Inputs, NodeId, Variable};
use crate::formula::syntax::{self, Expression, Kind};
use crate::model::{Condition, Layout, Release};
use crate::unit::Unit;
use std::collections::BTreeSet;
use std::ops::Range;

/// Most points (ends and breaks) of a sheet.
const MOST_POINTS: usize = 20_000;

/// Reads a sheet.
pub(super) fn assemble(text: &str) -> Result<Sheet, Vec<Fault>> {
    let mut faults = Faults::default();
    if text.len() > MOST_BYTES {
        let message = format!("the sheet has {} bytes; at most {MOST_BYTES} are read", text.len());
        faults.add("too large", 0..0, message, Some("measured data belong into files of their own".into()));
        return Err(faults.finish(text));
    }
    let source = source::read(text, &mut faults);
    let sheet = Assembler::new(&source, &mut faults).run();
    match sheet {
        Some(sheet) if faults.is_empty() => Ok(sheet),
        _ => Err(faults.finish(text)),
    }
}

struct Assembler<'s, 'f> {
    source: &'s Source,
    lowerer: Lowerer<'f>,
}

/// An equation with its fluxes carried.
struct Carrying {
    name: String,
    at: Located,
    tree: [Expression; 2],
    /// As written, with all derivatives kept.
    written: NodeId,
    /// Without them.
    main: NodeId,
}

impl<'s, 'f> Assembler<'s, 'f> {
    fn new(source: &'s Source, faults: &'f mut Faults) -> Self {
        Self { source, lowerer: Lowerer::new(faults) }
    }

    fn run(mut self) -> Option<Sheet> {
        self.declare();
        let span = self.span();
        let equations = self.equations();
        let fluxes: Vec<Flux> = equations.as_ref().map(|e| e.1.clone()).unwrap_or_default();
        self.lowerer.scalars = true;
        self.lowerer.carried = fluxes.iter().map(|f| Carried { written: f.written, unknown: f.unknown }).collect();
        self.names();
        let reads = self.conditions();
        let wanted = self.report();
        let breaks = self.breaks();
        let ((equations, fluxes), span) = (equations?, span?);
        if !self.lowerer.faults.is_empty() {
            // Orders and counts only make sense for a sheet whose parts do.
            return None;
        }
        let (nodes, names) = self.all_equations(&equations, &fluxes);
        let reads = reads?;
        let points = self.points(span, &nodes, &reads, &breaks, &wanted)?;
        self.build(equations, fluxes, nodes, names, reads, wanted, points)
    }

    /// Gives every name its meaning.
    fn declare(&mut self) {
        let source = self.source;
        let mut declared: Vec<(String, Range<usize>)> = Vec::new();
        let coordinate = source.coordinate.as_ref().map(|c| (c.name.clone(), c.name_span.clone()));
        let mut add = |lowerer: &mut Lowerer<'_>, name: &str, span: &Range<usize>, meaning: Meaning| {
            let Some(spelled) = syntax::name(name) else {
                let hint = "letters, digits and _, not beginning with a digit; pi, inf, if, and, or, in are taken";
                lowerer.faults.add("name", span.clone(), format!("`{name}` cannot be a name"), Some(hint.into()));
                return;
            };
            if declared.iter().any(|d| d.0 == spelled) {
                let message = format!("`{name}` is declared twice");
                lowerer.faults.add("name", span.clone(), message, Some("every name may stand for one thing".into()));
                return;
            }
            lowerer.meanings.insert(spelled.clone(), meaning);
            declared.push((spelled, span.clone()));
        };
        if let Some((name, span)) = coordinate {
            self.lowerer.coordinate.clone_from(&name);
            add(&mut self.lowerer, &name, &span, Meaning::Coordinate);
        }
        for entry in &source.unknowns {
            let unit = match Unit::parse(&entry.value.unit.text, true) {
                Ok(unit) => unit,
                Err(error) => {
                    let place = entry.value.unit.place(&error.span);
                    self.lowerer.faults.add("unit", place, error.message, error.hint);
                    add(&mut self.lowerer, &entry.name, &entry.name_span, Meaning::Faulty);
                    continue;
                }
            };
            let name = syntax::name(&entry.name).unwrap_or_else(|| entry.name.clone());
            let list = if entry.value.constant { &mut self.lowerer.constants } else { &mut self.lowerer.functions };
            list.push(Unknown { name, unit });
            let index = (list.len() - 1) as u16;
            let meaning = if entry.value.constant { Meaning::Constant(index) } else { Meaning::Function(index) };
            add(&mut self.lowerer, &entry.name, &entry.name_span, meaning);
        }
        for entry in &source.given {
            let meaning = match &entry.value {
                Given::Formula(at) => self.lowerer.parse(at).map(Meaning::Formula),
                Given::Pieces { pieces, otherwise } => self.parse_pieces(pieces, otherwise.as_ref()),
            };
            add(&mut self.lowerer, &entry.name, &entry.name_span, meaning.unwrap_or(Meaning::Faulty));
        }
    }

    fn parse_pieces(&mut self, pieces: &[(Located, Located)], otherwise: Option<&Located>) -> Option<Meaning> {
        let mut list = Vec::new();
        for (key, value) in pieces {
            let (left, right) = key.text.split_once("..")?;
            let part = |from: usize, to: usize| Located::part(key, from..to);
            let from = self.lowerer.parse(&part(0, left.len()));
            let to = self.lowerer.parse(&part(key.text.len() - right.len(), key.text.len()));
            let value = self.lowerer.parse(value);
            list.push([from?, to?, value?]);
        }
        let otherwise = match otherwise {
            Some(at) => Some(self.lowerer.parse(at)?),
            None => None,
        };
        Some(Meaning::Pieces(list, otherwise))
    }

    /// Ends of the span, in SI.
    fn span(&mut self) -> Option<[f64; 2]> {
        let entry = self.source.coordinate.as_ref()?;
        let mut ends = Vec::new();
        let mut dimension = None;
        for at in &entry.value {
            let formula = self.lowerer.parse(at)?;
            // Until both ends are known the coordinate measures what the first end does.
            let typed = self.lowerer.lower(at, &formula.tree)?;
            if let (Some(first), Some(_)) = (dimension, typed.dimension) {
                self.lowerer.expect(at, &formula.tree, typed, Some(first))?;
            }
            dimension = dimension.or(typed.dimension);
            self.lowerer.coordinate_dimension = dimension.or(Some(crate::unit::Dimension::default()));
            let depends = self.lowerer.graph.depends_on(typed.node);
            if depends.constants {
                let message = "an end of the span that is an unknown constant is not part of this version";
                return self.lowerer.fault("not yet", at, &formula.tree.span, message, "");
            }
            match self.lowerer.number_of(typed.node) {
                Some(x) if x.is_finite() => ends.push(x),
                _ => {
                    let message = "an end of the span must be a datum";
                    return self.lowerer.fault("span", at, &formula.tree.span, message, "");
                }
            }
        }
        if ends[0] >= ends[1] {
            let span = entry.value[0].span.start..entry.value[1].span.end;
            let message = "the span runs backwards: its first end is not below its second";
            self.lowerer.faults.add("span", span, message, Some("write the smaller end first".into()));
            return None;
        }
        Some([ends[0], ends[1]])
    }

    /// Lowers the equations and carries their fluxes.
    fn equations(&mut self) -> Option<(Vec<Carrying>, Vec<Flux>)> {
        let source = self.source;
        let mut lowered = Vec::new();
        let mut complete = true;
        for entry in &source.equations {
            let at = &entry.value;
            let sides = match syntax::parse_equation(&at.text) {
                Ok(sides) => sides,
                Err(error) => {
                    let hint = error.hint.unwrap_or_default();
                    self.lowerer.fault::<()>("syntax", at, &error.span.clone(), error.message, &hint);
                    complete = false;
                    continue;
                }
            };
            let (left, right) = (self.lowerer.lower(at, &sides.0), self.lowerer.lower(at, &sides.1));
            let (Some(left), Some(right)) = (left, right) else {
                complete = false;
                continue;
            };
            if self.lowerer.equal(at, (&sides.0, left), (&sides.1, right)).is_none() {
                complete = false;
                continue;
            }
            let written = self.lowerer.graph.subtract(left.node, right.node);
            let name = entry.name.clone();
            lowered.push(Carrying { name, at: at.clone(), tree: [sides.0, sides.1], written, main: written });
        }
        let functions = self.lowerer.functions.len();
        if complete
            && !source.unknowns.is_empty()
            && source.equations.len() != functions
            && !source.equations.is_empty()
        {
            let place = source.equations[source.equations.len() - 1].name_span.clone();
            let plural = |n: usize, what: &str| format!("{n} {what}{}", if n == 1 { "" } else { "s" });
            let message =
                format!("{} for {}", plural(source.equations.len(), "equation"), plural(functions, "unknown function"));
            let hint = "write one equation for each unknown that is not constant";
            self.lowerer.faults.add("equation count", place, message, Some(hint.into()));
        }
        let mut carrier = Carrier { graph: &mut self.lowerer.graph, fluxes: Vec::new(), next: functions as u16 };
        let mut stepping = Vec::new();
        for (k, equation) in lowered.iter_mut().enumerate() {
            match carrier.carry(equation.written) {
                Ok(main) => equation.main = main,
                Err(_) => stepping.push(k),
            }
        }
        let fluxes = carrier.fluxes;
        for k in stepping {
            let at = lowered[k].at.clone();
            let message = "a factor that steps along the span stands outside a derivative of a sum";
            let hint = "write it inside the derivative, (k*T')', or divide the equation by it";
            self.lowerer.fault::<()>("stepped datum", &at, &(0..at.text.len()), message, hint);
        }
        complete.then_some((lowered, fluxes))
    }

    /// Lowers every name once, so that faults in unused ones are found too.
    fn names(&mut self) {
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let (at, tree) = match self.lowerer.meanings.get(&name) {
                Some(Meaning::Formula(f)) => (f.at.clone(), f.tree.clone()),
                Some(Meaning::Pieces(pieces, _)) => match pieces.first() {
                    Some([_, _, value]) => (value.at.clone(), value.tree.clone()),
                    None => continue,
                },
                _ => continue,
            };
            let named = Expression { kind: Kind::Name(name), span: tree.span };
            let Some(typed) = self.lowerer.lower(&at, &named) else { continue };
            if let Some(value) = self.lowerer.number_of(typed.node)
                && !value.is_finite()
            {
                let message = format!("`{}` is not finite", entry.name);
                self.lowerer.fault::<()>(
                    "not finite",
                    &at,
                    &(0..at.text.len()),
                    message,
                    "look for a root or logarithm of a negative number",
                );
            }
        }
    }

    fn conditions(&mut self) -> Option<Vec<Read>> {
        let mut reads = Vec::new();
        let mut complete = true;
        for entry in &self.source.conditions {
            for at in &entry.value {
                match self.lowerer.condition(&entry.name, at) {
                    Some(read) => reads.push(read),
                    None => complete = false,
                }
            }
        }
        complete.then_some(reads)
    }

    fn report(&mut self) -> Vec<Wanted> {
        let mut wanted = Vec::new();
        for entry in &self.source.report {
            let at = &entry.value;
            let (tree, unit) = match syntax::parse_report(&at.text) {
                Ok(parts) => parts,
                Err(error) => {
                    let hint = error.hint.unwrap_or_default();
                    self.lowerer.fault::<()>("syntax", at, &error.span.clone(), error.message, &hint);
                    continue;
                }
            };
            let Some(typed) = self.lowerer.lower(at, &tree) else { continue };
            if self.lowerer.scalar(at, &tree, typed).is_none() {
                continue;
            }
            let dimension = typed.dimension.unwrap_or_default();
            let unit = match unit {
                Some((unit, span)) => {
                    if typed.dimension.is_some() && unit.dimension != dimension {
                        let message =
                            format!("this number is {}, not {}", dimension.describe(), unit.dimension.describe());
                        let hint = crate::unit::mistaken(&unit, dimension).unwrap_or_default();
                        self.lowerer.fault::<()>("dimension", at, &span, message, &hint);
                        continue;
                    }
                    if unit.is_absolute() && (typed.absolute - 1.0).abs() > 1e-12 {
                        let message = format!("this is no absolute temperature: it cannot be printed in {}", unit.text);
                        let hint = "a difference is printed in K; an unknown to be printed in degC is declared in degC";
                        self.lowerer.fault::<()>("temperature difference", at, &span, message, hint);
                        continue;
                    }
                    unit
                }
                None => {
                    self.usual_unit(&tree).filter(|u| u.dimension == dimension).unwrap_or_else(|| Unit::si(dimension))
                }
            };
            let end = tree.span.end.min(at.text.len());
            let formula = at.text.get(..end).unwrap_or(&at.text).trim().to_owned();
            wanted.push(Wanted { label: entry.name.clone(), formula, node: typed.node, unit });
        }
        wanted
    }

    /// The unit of a bare value of an unknown.
    fn usual_unit(&self, tree: &Expression) -> Option<Unit> {
        let name = match &tree.kind {
            Kind::Name(name) => name,
            Kind::Call { name, primes: 0, arguments, .. } => match &arguments.first()?.value.kind {
                Kind::Name(inner) if matches!(name.as_str(), "max" | "min" | "mean" | "at") => inner,
                _ => name,
            },
            _ => return None,
        };
        match self.lowerer.meanings.get(name)? {
            Meaning::Function(k) => Some(self.lowerer.functions[usize::from(*k)].unit.clone()),
            Meaning::Constant(k) => Some(self.lowerer.constants[usize::from(*k)].unit.clone()),
            _ => None,
        }
    }

    /// Further breaks, with their places.
    fn breaks(&mut self) -> Vec<(f64, Range<usize>)> {
        let mut breaks = Vec::new();
        for at in &self.source.breaks {
            let Some(formula) = self.lowerer.parse(at) else { continue };
            let Some(typed) = self.lowerer.lower(at, &formula.tree) else { continue };
            let wanted = self.lowerer.coordinate_dimension;
            if self.lowerer.expect(at, &formula.tree, typed, wanted).is_none() {
                continue;
            }
            match self.lowerer.number_of(typed.node) {
                Some(x) => breaks.push((x, at.span.clone())),
                None => {
                    self.lowerer.fault::<()>("break", at, &formula.tree.span, "a break must be a datum", "");
                }
            }
        }
        breaks
    }

    /// Equations of the sheet, then the definitions of the fluxes; and their names.
    fn all_equations(&mut self, equations: &[Carrying], fluxes: &[Flux]) -> (Vec<NodeId>, Vec<String>) {
        let graph = &mut self.lowerer.graph;
        let mut nodes: Vec<NodeId> = equations.iter().map(|e| e.main).collect();
        let mut names: Vec<String> = equations.iter().map(|e| format!("equation `{}`", e.name)).collect();
        for flux in fluxes {
            let g = graph.jet(flux.unknown, 0);
            nodes.push(graph.subtract(flux.defined, g));
            names.push("the definition of a flux".into());
        }
        (nodes, names)
    }

    /// Ends and breaks, ascending; places outside the span are faults.
    fn points(
        &mut self,
        span: [f64; 2],
        equations: &[NodeId],
        reads: &[Read],
        breaks: &[(f64, Range<usize>)],
        wanted: &[Wanted],
    ) -> Option<Vec<f64>> {
        let length = span[1] - span[0];
        // Points that differ by rounding are one point.
        let small = 1e-13 * length.max(span[0].abs()).max(span[1].abs());
        let inside = |x: f64| x >= span[0] - small && x <= span[1] + small;
        let unit = self.coordinate_unit();
        let shown = |x: f64| format!("{} {}", short(unit.from_si(x)), unit.text);
        let mut points = span.to_vec();
        for (x, place) in breaks {
            if inside(*x) {
                points.push(*x);
            } else {
                let message = format!("the break at {} lies outside the span", shown(*x));
                self.lowerer.faults.add("outside", place.clone(), message, None);
            }
        }
        for (node, place) in self.lowerer.limits.clone() {
            let Some(x) = self.lowerer.number_of(node) else { continue };
            if inside(x) {
                points.push(x);
            } else {
                let message = format!("this piece ends at {}, outside the span", shown(x));
                self.lowerer.faults.add("outside", place, message, None);
            }
        }
        let mut used: BTreeSet<u32> = BTreeSet::new();
        let mut own: Vec<NodeId> = equations.to_vec();
        for read in reads {
            used.extend(read.node.iter().flat_map(|n| self.lowerer.graph.slots_of(*n)));
            if let Some((_, point, _)) = &read.release {
                match self.lowerer.number_of(*point) {
                    Some(x) if x > span[0] + small && x < span[1] - small => points.push(x),
                    _ => {
                        let message = "a jump or release must lie at a point inside the span";
                        self.lowerer.faults.add("outside", read.at.span.clone(), message, None);
                    }
                }
            }
        }
        for slot in used {
            let functional = self.lowerer.functionals[slot as usize].clone();
            own.push(functional.expression);
            for node in &functional.points {
                match self.lowerer.number_of(*node) {
                    Some(x) if inside(x) => points.push(x),
                    Some(x) => {
                        let message = format!("this point, {}, lies outside the span", shown(x));
                        self.lowerer.faults.add("outside", functional.place.clone(), message, None);
                    }
                    None => {}
                }
            }
        }
        for functional in self.lowerer.functionals.clone() {
            own.push(functional.expression);
            for node in &functional.points {
                if let Some(x) = self.lowerer.number_of(*node).filter(|x| !inside(*x)) {
                    let message = format!("this point, {}, lies outside the span", shown(x));
                    self.lowerer.faults.add("outside", functional.place.clone(), message, None);
                }
            }
        }
        own.extend(wanted.iter().map(|w| w.node));
        for test in self.lowerer.graph.piece_tests(&own) {
            points.extend(self.sign_changes(test.gap, span));
        }
        points.iter_mut().for_each(|x| *x = x.clamp(span[0], span[1]));
        points.sort_by(f64::total_cmp);
        let mut merged: Vec<f64> = Vec::with_capacity(points.len());
        for x in points {
            match merged.last() {
                Some(last) if x - last <= small => {}
                _ => merged.push(x),
            }
        }
        // The last end stays what was written.
        if let Some(last) = merged.last_mut() {
            *last = span[1];
        }
        if merged.len() > MOST_POINTS {
            let place = self.source.coordinate.as_ref().map_or(0..0, |c| c.name_span.clone());
            let message = format!("the sheet has {} breaks; at most {MOST_POINTS} are allowed", merged.len() - 2);
            self.lowerer.faults.add("too large", place, message, None);
        }
        self.lowerer.faults.is_empty().then_some(merged)
    }

    /// Where an expression of the coordinate and data changes sign inside the span.
    fn sign_changes(&mut self, gap: NodeId, span: [f64; 2]) -> Vec<f64> {
        let slope = self.lowerer.graph.total(gap);
        let graph = &self.lowerer.graph;
        let at = |x: f64| graph.evaluate::<f64>(gap, &Inputs::at(x));
        if let Some(slope) = graph.as_number(slope) {
            // Straight: the crossing is exact.
            let x = -at(0.0) / slope;
            return if x > span[0] && x < span[1] { vec![x] } else { Vec::new() };
        }
        let samples = 2000;
        let place = |k: usize| span[0] + (span[1] - span[0]) * k as f64 / samples as f64;
        let mut changes = Vec::new();
        for k in 0..samples {
            let (mut a, mut b) = (place(k), place(k + 1));
            let (left, right) = (at(a), at(b));
            if left == 0.0 && k > 0 {
                changes.push(a);
            }
            if (left < 0.0) == (right < 0.0) || left == 0.0 || right == 0.0 {
                continue;
            }
            for _ in 0..200 {
                let middle = 0.5 * (a + b);
                if middle <= a || middle >= b {
                    break;
                }
                if (at(middle) < 0.0) == (left < 0.0) { a = middle } else { b = middle }
            }
            changes.push(b);
        }
        changes
    }

    /// The unit in which the ends of the span are written.
    fn coordinate_unit(&self) -> Unit {
        fn first(tree: &Expression) -> Option<Unit> {
            match &tree.kind {
                Kind::Number { unit, .. } => unit.clone(),
                Kind::Negate(a) => first(a),
                Kind::Binary(_, a, b) => first(a).or_else(|| first(b)),
                _ => None,
            }
        }
        let dimension = self.lowerer.coordinate_dimension.unwrap_or_default();
        let mut queue: Vec<Expression> = Vec::new();
        for at in self.source.coordinate.iter().flat_map(|c| &c.value) {
            queue.extend(syntax::parse(&at.text).ok());
        }
        let mut named = Vec::new();
        for tree in &queue {
            if let Some(unit) = first(tree).filter(|u| u.dimension == dimension) {
                return unit;
            }
            if let Kind::Name(name) = &tree.kind {
                named.push(name.clone());
            }
        }
        let by_name = named.iter().find_map(|name| match self.lowerer.meanings.get(name) {
            Some(Meaning::Formula(Formula { tree, .. })) => first(tree).filter(|u| u.dimension == dimension),
            _ => None,
        });
        by_name.unwrap_or_else(|| Unit::si(dimension))
    }

    /// Orders, counts and guards, then the model.
    #[allow(clippy::too_many_arguments)]
    fn build(
        mut self,
        equations: Vec<Carrying>,
        fluxes: Vec<Flux>,
        mut nodes: Vec<NodeId>,
        mut equation_names: Vec<String>,
        reads: Vec<Read>,
        wanted: Vec<Wanted>,
        points: Vec<f64>,
    ) -> Option<Sheet> {
        let given = self.lowerer.functions.len() + fluxes.len();
        let mut orders = vec![0u8; given];
        for node in &nodes {
            for (unknown, order) in self.lowerer.graph.jets_of(*node) {
                let at = &mut orders[usize::from(unknown)];
                *at = order.max(*at);
            }
        }
        self.check_equations(&equations, &nodes, &orders, &points)?;
        let releases = self.releases(&reads, &orders, &points)?;
        self.check_count(&reads, &orders, releases.len(), &points)?;
        let order: usize = orders.iter().map(|m| usize::from(*m)).sum();

        // Integrals in conditions run along as unknowns.
        let running = self.running(&reads, given);
        for (_, run) in &running {
            nodes.push(self.running_equation(run));
            equation_names.push("an integral of a condition".into());
            orders.push(1);
        }
        let released = |point: usize, u: u16, k: u8| {
            releases.iter().any(|r| (r.point, r.unknown, r.order) == (point, usize::from(u), usize::from(k)))
        };
        let mut placed: Vec<Placed> = Vec::new();
        for read in &reads {
            let Some(node) = read.node else { continue };
            placed.extend(self.lowerer.place(read, node, &points, &orders, &released, &running));
        }
        if !self.lowerer.faults.is_empty() {
            return None;
        }
        for (_, run) in &running {
            let slot = self.lowerer.graph.slot(0);
            let place = crate::model::Place { point: 0, side: crate::model::Side::Right };
            let name = "start of an integral".to_owned();
            placed.push(Placed { name, places: vec![place], formula: slot, reads: vec![(0, run.unknown, 0)] });
        }
        let orders: Vec<usize> = orders.iter().map(|m| usize::from(*m)).collect();
        let layout = Layout::new(&orders, self.lowerer.constants.len());
        let linear = self.linear(&nodes, &placed);
        let statement = self.statement(&equations, &fluxes, &reads, &points, &orders, order, &releases, linear);
        let graph = &mut self.lowerer.graph;
        let model = SheetModel {
            equations: Equations::new(graph, &nodes, &layout, &points),
            conditions: placed.iter().map(|p| Condition { name: p.name.clone(), places: p.places.clone() }).collect(),
            ties: placed.iter().map(|p| Tie::new(graph, p.formula, &p.reads, &layout)).collect(),
            linear,
            releases,
            unknown_names: statement
                .carried
                .iter()
                .cloned()
                .chain(running.iter().map(|_| "an integral".into()))
                .collect(),
            equation_names,
            limits: Vec::new(),
            constant_limits: Vec::new(),
            layout,
            points: points.clone(),
        };
        let unknowns = orders.len();
        let curves = self.curves(unknowns, &points);
        let balances = self.balances(&equations, &orders, unknowns, &points);
        let Lowerer { mut graph, functionals, warnings, .. } = self.lowerer;
        let report: Vec<Item> =
            wanted.into_iter().map(|w| w.item(&mut graph, &functionals, unknowns, &points)).collect();
        Some(Sheet {
            title: self.source.title.clone(),
            note: self.source.note.clone(),
            relative: self.source.relative.as_ref().map_or(1e-10, |r| r.0),
            statement,
            warnings,
            model,
            report,
            curves,
            balances,
        })
    }

    /// Every unknown needs an equation for its highest derivative; stepped factors belong into fluxes.
    fn check_equations(
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
    fn check_steps(&mut self, equation: &Carrying, points: &[f64]) {
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
    fn stepping_name(&mut self, equation: &Carrying, points: &[f64], k: usize) -> Option<String> {
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

    fn releases(&mut self, reads: &[Read], orders: &[u8], points: &[f64]) -> Option<Vec<Release>> {
        let mut releases = Vec::new();
        for read in reads {
            let Some((what, point, text)) = &read.release else { continue };
            let x = self.lowerer.number_of(*point)?;
            let near = |k: &usize| (points[*k] - x).abs();
            let point = (0..points.len()).min_by(|p, q| near(p).total_cmp(&near(q)))?;
            let state = self.lowerer.state_of(*what).filter(|(u, k)| *k < orders[usize::from(*u)]);
            let Some((unknown, order)) = state else {
                let message = format!("`{text}` is not one of the continuous quantities of this problem");
                let hint = "name an unknown, one of its lower derivatives, or a flux as it stands in the equation";
                self.lowerer.faults.add("release", read.at.span.clone(), message, Some(hint.into()));
                continue;
            };
            let release = Release { point, unknown: usize::from(unknown), order: usize::from(order) };
            if releases.contains(&release) {
                let message = format!("the continuity of `{text}` is given up twice at this point");
                self.lowerer.faults.add("release", read.at.span.clone(), message, None);
            } else {
                releases.push(release);
            }
        }
        self.lowerer.faults.is_empty().then_some(releases)
    }

    /// Conditions must number order + constants + releases.
    fn check_count(&mut self, reads: &[Read], orders: &[u8], releases: usize, points: &[f64]) -> Option<()> {
        let order: usize = orders.iter().map(|m| usize::from(*m)).sum();
        let constants = self.lowerer.constants.len();
        let needed = order + constants + releases;
        let given = reads.iter().filter(|r| r.node.is_some()).count();
        if given == needed {
            return Some(());
        }
        let unit = self.coordinate_unit();
        let shown = |x: f64| format!("{} = {} {}", self.lowerer.coordinate, short(unit.from_si(x)), unit.text);
        let (mut from, mut to, mut inner, mut spread) = (0, 0, 0, 0);
        for node in reads.iter().filter_map(|r| r.node) {
            let slots: Vec<u32> = self.lowerer.graph.slots_of(node).into_iter().collect();
            let places: Vec<f64> = slots
                .iter()
                .flat_map(|s| self.lowerer.functionals[*s as usize].points.clone())
                .filter_map(|p| self.lowerer.number_of(p))
                .collect();
            let integral = slots.iter().any(|s| self.lowerer.functionals[*s as usize].kind == Asked::Integral);
            let small = 1e-12 * (points[points.len() - 1] - points[0]);
            let all = |x: f64| !places.is_empty() && !integral && places.iter().all(|p| (p - x).abs() <= small);
            if all(points[0]) {
                from += 1;
            } else if all(points[points.len() - 1]) {
                to += 1;
            } else if places.len() == 1 || (places.len() > 1 && places.iter().all(|p| (p - places[0]).abs() <= small)) {
                inner += 1;
            } else {
                spread += 1;
            }
        }
        let mut parts = vec![format!("order {order}")];
        if constants > 0 {
            parts.push(format!("{constants} unknown constant{}", if constants == 1 { "" } else { "s" }));
        }
        if releases > 0 {
            parts.push(format!(
                "{releases} jump{} or release{}",
                if releases == 1 { "" } else { "s" },
                if releases == 1 { "" } else { "s" }
            ));
        }
        let mut sides =
            vec![format!("{from} at {}", shown(points[0])), format!("{to} at {}", shown(points[points.len() - 1]))];
        if inner > 0 {
            sides.push(format!("{inner} inside"));
        }
        if spread > 0 {
            sides.push(format!("{spread} over several points"));
        }
        let message =
            format!("{needed} conditions are needed ({}), {given} given: {}", parts.join(", "), sides.join(", "));
        let place = self.source.conditions.last().map_or_else(
            || self.source.equations.last().map_or(0..0, |e| e.name_span.clone()),
            |c| c.name_span.clone(),
        );
        let hint = if given < needed {
            let each: Vec<String> = self
                .lowerer
                .functions
                .iter()
                .enumerate()
                .map(|(u, f)| format!("`{}` (order {})", f.name, self.true_order(u, orders)))
                .collect();
            let short = needed - given;
            let end = if from < to { shown(points[0]) } else { shown(points[points.len() - 1]) };
            format!("{short} more, most likely at {end}; unknowns: {}", each.join(", "))
        } else {
            format!("{} too many", given - needed)
        };
        self.lowerer.faults.add("condition count", place, message, Some(hint));
        None
    }

    /// Order of an unknown with the fluxes that follow from it.
    fn true_order(&self, unknown: usize, orders: &[u8]) -> usize {
        let own = usize::from(orders[unknown]);
        let mut total = own;
        for (k, carried) in self.lowerer.carried.iter().enumerate() {
            let first = self.lowerer.graph.jets_of(carried.written).into_iter().next();
            if first.is_some_and(|(u, _)| usize::from(u) == unknown) {
                total += usize::from(orders[self.lowerer.functions.len() + k]);
            }
        }
        total
    }

    fn running(&mut self, reads: &[Read], given: usize) -> Vec<(usize, Running)> {
        let mut slots: BTreeSet<u32> = BTreeSet::new();
        for node in reads.iter().filter_map(|r| r.node) {
            slots.extend(self.lowerer.graph.slots_of(node));
        }
        let integrals = slots.into_iter().filter(|s| self.lowerer.functionals[*s as usize].kind == Asked::Integral);
        integrals
            .enumerate()
            .map(|(k, slot)| {
                let functional = &self.lowerer.functionals[slot as usize];
                let ends = match functional.points[..] {
                    [from, to] => Some([from, to]),
                    _ => None,
                };
                let unknown = (given + k) as u16;
                (slot as usize, Running { unknown, integrand: functional.expression, ends })
            })
            .collect()
    }

    /// I' - integrand = 0 inside the stretch, I' = 0 outside.
    fn running_equation(&mut self, run: &Running) -> NodeId {
        let graph = &mut self.lowerer.graph;
        let zero = graph.number(0.0);
        let mut inside = graph.expand(run.integrand);
        if let Some([from, to]) = run.ends {
            let x = graph.coordinate();
            let (below, above) = (graph.subtract(x, from), graph.subtract(x, to));
            inside = graph.choose(above, true, inside, zero);
            inside = graph.choose(below, true, zero, inside);
        }
        let slope = graph.jet(run.unknown, 1);
        graph.subtract(slope, inside)
    }

    /// Linear by the derivatives: free of unknowns, or the same at several states.
    fn linear(&mut self, equations: &[NodeId], placed: &[Placed]) -> bool {
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

    #[allow(clippy::too_many_arguments)]
    fn statement(
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
            let name = self.flux_name(flux, &carried);
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

    /// The user's own name for a flux, or one of ours.
    fn flux_name(&mut self, flux: &Flux, taken: &[String]) -> String {
        let jet = self.lowerer.graph.jet(flux.unknown, 0);
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let named = Expression { kind: Kind::Name(name.clone()), span: 0..0 };
            let Some(at) = self.source.equations.first().map(|e| e.value.clone()) else { continue };
            let typed = self.lowerer.lower(&at, &named);
            let ratio = typed.and_then(|t| self.lowerer.graph.ratio(t.node, jet));
            match ratio {
                Some(r) if r == 1.0 && !taken.contains(&name) => return name,
                Some(r) if r == -1.0 && !taken.contains(&name) => return format!("-{name}"),
                _ => {}
            }
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

    fn data(&mut self) -> Vec<Datum> {
        let mut data = Vec::new();
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let Some(at) = self.source.equations.first().map(|e| e.value.clone()) else { continue };
            let named = Expression { kind: Kind::Name(name.clone()), span: 0..0 };
            let typed = self.lowerer.lower(&at, &named);
            let text = match &entry.value {
                Given::Formula(at) => at.text.clone(),
                Given::Pieces { pieces, otherwise } => {
                    let mut parts: Vec<String> =
                        pieces.iter().map(|(k, v)| format!("{}: {}", k.text.trim(), v.text)).collect();
                    parts.extend(otherwise.iter().map(|o| format!("else {}", o.text)));
                    parts.join("; ")
                }
            };
            let node = typed.map(|t| t.node);
            let value = node.and_then(|n| self.lowerer.number_of(n)).zip(typed).map(|(v, t)| {
                let dimension = t.dimension.unwrap_or_default();
                let written = match self.lowerer.meanings.get(&name) {
                    Some(Meaning::Formula(Formula {
                        tree: Expression { kind: Kind::Number { unit, .. }, .. },
                        ..
                    })) => unit.clone(),
                    _ => None,
                };
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
        data
    }

    fn features(&mut self, reads: &[Read], points: &[f64]) -> Vec<Feature> {
        let mut features: Vec<Feature> = Vec::new();
        for read in reads {
            let places: Vec<f64> = match &read.release {
                Some((_, point, _)) => self.lowerer.number_of(*point).into_iter().collect(),
                None => {
                    let slots = read.node.map(|n| self.lowerer.graph.slots_of(n)).unwrap_or_default();
                    let points = slots.iter().flat_map(|s| self.lowerer.functionals[*s as usize].points.clone());
                    let points: Vec<NodeId> = points.collect();
                    points.into_iter().filter_map(|p| self.lowerer.number_of(p)).collect()
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

    /// Unknowns and named expressions, to be drawn.
    fn curves(&mut self, unknowns: usize, points: &[f64]) -> Vec<CurveItem> {
        let mut curves = Vec::new();
        for (u, function) in self.lowerer.functions.clone().into_iter().enumerate() {
            let node = self.lowerer.graph.jet(u as u16, 0);
            let along = Along::new(&mut self.lowerer.graph, node, unknowns, points);
            curves.push(CurveItem { name: function.name, unit: function.unit, along });
        }
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let Some(at) = self.source.equations.first().map(|e| e.value.clone()) else { continue };
            let named = Expression { kind: Kind::Name(name), span: 0..0 };
            let Some(typed) = self.lowerer.lower(&at, &named) else { continue };
            let depends = self.lowerer.graph.depends_on(typed.node);
            if !depends.jets || depends.slots {
                continue;
            }
            let dimension = typed.dimension.unwrap_or_default();
            let unit = self.reported_unit(&entry.name).filter(|u| u.dimension == dimension && !u.is_absolute());
            let along = Along::new(&mut self.lowerer.graph, typed.node, unknowns, points);
            curves.push(CurveItem {
                name: entry.name.clone(),
                unit: unit.unwrap_or_else(|| Unit::si(dimension)),
                along,
            });
        }
        curves
    }

    /// The unit in which the report first asks for something of a name.
    fn reported_unit(&self, name: &str) -> Option<Unit> {
        self.source.report.iter().find_map(|entry| {
            let (tree, unit) = syntax::parse_report(&entry.value.text).ok()?;
            let mut stack = vec![&tree];
            while let Some(e) = stack.pop() {
                match &e.kind {
                    Kind::Call { name: own, .. } if own == name => return unit.map(|u| u.0),
                    Kind::Name(own) if own == name => return unit.map(|u| u.0),
                    Kind::Call { arguments, .. } => stack.extend(arguments.iter().map(|a| &a.value)),
                    Kind::Negate(a) => stack.push(a),
                    Kind::Binary(_, a, b) => stack.extend([&**a, &**b]),
                    _ => {}
                }
            }
            None
        })
    }

    /// For each equation coefficient * g^(k) + rest = 0 with g carried: -rest/coefficient.
    fn balances(&mut self, equations: &[Carrying], orders: &[usize], unknowns: usize, points: &[f64]) -> Vec<Balance> {
        let functions = self.lowerer.functions.len();
        let mut balances = Vec::new();
        for equation in equations {
            let jets = self.lowerer.graph.jets_of(equation.main);
            let top =
                jets.iter().find(|(u, k)| usize::from(*u) >= functions && usize::from(*k) == orders[usize::from(*u)]);
            let Some(&(unknown, order)) = top.filter(|(_, k)| *k > 0) else { continue };
            let graph = &mut self.lowerer.graph;
            let factor = graph.partial(equation.main, Variable::Jet { unknown, order });
            if graph.depends_on(factor).unknowns() {
                continue;
            }
            let jet = graph.jet(unknown, order);
            let zero = graph.number(0.0);
            let rest = graph.substitute(equation.main, &[(jet, zero)].into());
            let source = graph.divide(rest, factor);
            let source = graph.negate(source);
            let source = Along::new(graph, source, unknowns, points);
            let (unknown, order) = (usize::from(unknown), usize::from(order) - 1);
            balances.push(Balance { name: equation.name.clone(), unknown, order, source });
        }
        balances
    }
}
