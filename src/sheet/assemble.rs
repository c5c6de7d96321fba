//! From sections to a model: all checks in one pass.

use super::carry::{Carrier, Flux};
use super::condition::{Placed, Read};
use super::far::Again;
use super::fault::{Fault, Faults};
use super::lower::{Carried, Lowerer, Meaning, Unknown};
use super::model::{Equations, SheetModel, Tie};
use super::path::{FoldNames, MOST_FOLDS, PathAsked, held_names};
use super::reduce::Reduction;
use super::singular::{Expanded, Singular};
use super::source::{self, Given, Located, MOST_BYTES, Source};
use super::{DataFile, HeldDatum, Item, Reading, Sheet, Wanted};
use crate::formula::graph::{Node, NodeId};
use crate::formula::number::Rounded;
use crate::formula::syntax::{self, Expression, Kind};
use crate::model::{Condition, Layout};
use crate::unit::Unit;
use std::collections::HashSet;
use std::ops::Range;

/// Most unknowns of a sheet: the work grows with the cube of their number.
pub(super) const MOST_UNKNOWNS: usize = 200;

/// Reads a sheet.
pub(super) fn assemble(text: &str, reading: &Reading<'_>) -> Result<Sheet, Vec<Fault>> {
    let mut faults = Faults::default();
    if text.len() > MOST_BYTES {
        let message = format!("the sheet has {} bytes; at most {MOST_BYTES} are read", text.len());
        faults.add("too large", 0..0, message, Some("measured data belong into files of their own".into()));
        return Err(faults.finish(text));
    }
    let mut source = source::read(text, &mut faults);
    super::limits::check(&source, &mut faults);
    if faults.too_large() {
        return Err(faults.finish(text));
    }
    source.replace(reading.replaced, &mut faults);
    source.settle_path(&mut faults);
    let mut sheet = super::eigen::assembled(&mut source, reading, &mut faults);
    if source.eigen.is_none() && source.infinite() && reading.far.is_none() && faults.only("outside") {
        // Points named further out than the first cut: begin beyond them.
        let mut far = source.first_cut();
        for _ in 0..60 {
            far *= 4.0;
            let mut others = Faults::default();
            let reading = Reading { far: Some(far), ..*reading };
            let longer = Assembler::new(&source, &reading, &mut others).run();
            if !others.only("outside") {
                (sheet, faults) = (longer, others);
                break;
            }
        }
    }
    if let Some(sheet) = sheet.as_mut().filter(|sheet| sheet.far.is_some()) {
        sheet.again = Some(Again::new(text, reading));
    }
    if sheet.is_none() && faults.is_empty() {
        faults.add("not understood", 0..0, "the sheet is not understood, and it is not known why", None);
    }
    if let Some(sheet) = &mut sheet
        && faults.is_empty()
        && reading.held.is_empty()
        && reading.replaced.is_empty()
    {
        match source.cases.first().filter(|_| source.path.is_some()) {
            Some(case) => {
                let message = "load cases and a path in one sheet are not part of this version";
                faults.add("not yet", case.name_span.clone(), message, None);
            }
            None => sheet.cases = super::cases::read(&source, reading, &mut faults),
        }
    }
    match sheet {
        Some(sheet) if faults.is_empty() => Ok(sheet),
        _ => Err(faults.finish(text)),
    }
}

pub(super) struct Assembler<'s, 'f> {
    pub source: &'s Source,
    /// Names of the data to be held.
    held: Vec<&'s str>,
    /// Data files of the sheet.
    files: &'s [DataFile],
    /// Where infinite ends are cut.
    far: Option<f64>,
    pub lowerer: Lowerer<'f>,
    /// Equations that are singular at an end, and the fluxes of those, which are not carried.
    pub singular: Vec<Singular>,
    pub expanded: Vec<Expanded>,
}

/// An equation with its fluxes carried.
pub(super) struct Carrying {
    pub name: String,
    pub at: Located,
    pub tree: [Expression; 2],
    /// As written, with all derivatives kept.
    pub written: NodeId,
    /// Without them.
    pub main: NodeId,
}

impl<'s, 'f> Assembler<'s, 'f> {
    pub fn new(source: &'s Source, reading: &Reading<'s>, faults: &'f mut Faults) -> Self {
        Self {
            source,
            held: held_names(source, reading),
            far: source.infinite().then(|| reading.far.unwrap_or_else(|| source.first_cut())),
            files: reading.files,
            lowerer: Lowerer::new(faults),
            singular: Vec::new(),
            expanded: Vec::new(),
        }
    }

    pub fn run(mut self) -> Option<Sheet> {
        self.lowerer.eigen = self.source.eigen.is_some();
        self.declare();
        let span = self.span();
        let equations = self.equations(span);
        let fluxes: Vec<Flux> = equations.as_ref().map(|e| e.1.clone()).unwrap_or_default();
        self.lowerer.scalars = true;
        self.lowerer.carried = fluxes.iter().map(|f| Carried { written: f.written, unknown: f.unknown }).collect();
        self.names();
        let path = self.path();
        let reads = self.conditions();
        self.lowerer.reporting = true;
        let mut wanted = self.report();
        let normalise = self.normalisation();
        let normalised = normalise.is_some();
        wanted.extend(normalise);
        self.lowerer.reporting = false;
        let breaks = self.breaks();
        self.check_smooth();
        let understood = equations.as_ref().map(|(e, f)| self.all_equations(e, f));
        let nodes: &[NodeId] = understood.as_ref().map_or(&[], |u| &u.0);
        // Each check runs as soon as what it needs is there: all faults in one pass.
        let points = span.map(|span| self.points(span, nodes, reads.as_deref().unwrap_or(&[]), &breaks, &wanted));
        if self.lowerer.graph.is_full() {
            // What was cut short says nothing about orders and counts.
            return None;
        }
        let ((equations, fluxes), (nodes, names), points) = (equations?, understood?, points?);
        self.build(equations, fluxes, nodes, names, reads, (wanted, normalised), points, path)
    }

    /// Gives every name its meaning.
    fn declare(&mut self) {
        let source = self.source;
        let mut declared: HashSet<String> = HashSet::new();
        let coordinate = source.coordinate.as_ref().map(|c| (c.name.clone(), c.name_span.clone()));
        let mut add = |lowerer: &mut Lowerer<'_>, name: &str, span: &Range<usize>, meaning: Meaning| {
            let Some(spelled) = syntax::name(name) else {
                let hint = "letters, digits and _, not beginning with a digit; pi, inf, if, and, or, in are taken";
                lowerer.faults.add("name", span.clone(), format!("`{name}` cannot be a name"), Some(hint.into()));
                return;
            };
            if declared.contains(&spelled) {
                let message = format!("`{name}` is declared twice");
                lowerer.faults.add("name", span.clone(), message, Some("every name may stand for one thing".into()));
                return;
            }
            lowerer.meanings.insert(spelled.clone(), meaning);
            declared.insert(spelled);
        };
        if let Some((name, span)) = coordinate {
            self.lowerer.coordinate.clone_from(&name);
            add(&mut self.lowerer, &name, &span, Meaning::Coordinate);
        }
        if let Some(first) = source.unknowns.get(MOST_UNKNOWNS) {
            let message =
                format!("the sheet has {} unknowns; at most {MOST_UNKNOWNS} are allowed", source.unknowns.len());
            self.lowerer.faults.add("too large", first.name_span.clone(), message, None);
        }
        for entry in source.unknowns.iter().skip(MOST_UNKNOWNS) {
            add(&mut self.lowerer, &entry.name, &entry.name_span, Meaning::Faulty);
        }
        for entry in source.unknowns.iter().take(MOST_UNKNOWNS) {
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
        for (name, span) in &source.faulty {
            add(&mut self.lowerer, name, span, Meaning::Faulty);
        }
        let first = self.lowerer.constants.len() as u16;
        let behind = first + self.held.len() as u16;
        let folds = if source.path.is_some() { MOST_FOLDS } else { 0 };
        self.lowerer.graph.hold(first, self.held.len() + usize::from(self.far.is_some()) + folds);
        if let Some(far) = self.far {
            self.lowerer.graph.set_held(behind, Rounded::exact(far));
            self.lowerer.far = Some(behind);
        }
        if folds > 0 {
            let first = behind + u16::from(self.far.is_some());
            self.lowerer.folds = Some(FoldNames { first, parameter: None });
        }
        for name in &self.held {
            if !source.given.iter().any(|entry| entry.name == *name) {
                let message = format!("`{name}` is not among the data of this sheet");
                self.lowerer.faults.add("held", 0..0, message, Some("only names of [given] can be held".into()));
            }
        }
        for entry in &source.given {
            let held = self.held.iter().position(|name| *name == entry.name).map(|k| first + k as u16);
            let meaning = match &entry.value {
                Given::Formula(at) => self.lowerer.parse(at).map(|formula| match held {
                    Some(constant) => Meaning::Held(constant, formula),
                    None => Meaning::Formula(formula),
                }),
                Given::Pieces { pieces, otherwise } => self.parse_pieces(pieces, otherwise.as_ref()),
                Given::Measured(measured) => self.declare_measured(&entry.name, measured, self.files),
            };
            add(&mut self.lowerer, &entry.name, &entry.name_span, meaning.unwrap_or(Meaning::Faulty));
        }
    }

    fn parse_pieces(&mut self, pieces: &[(Located, Located)], otherwise: Option<&Located>) -> Option<Meaning> {
        let mut list = Vec::new();
        for (key, value) in pieces {
            let (left, right) = key.text.split_once("..")?;
            let part = |from: usize, to: usize| Located::part(key, from..to);
            if let Some(third) = right.find("..") {
                let from = key.text.len() - right.len() + third;
                let hint = "write one key for each stretch: \"0 m .. 1 m\" = \"value\"";
                return self.lowerer.fault("piece", key, &(from..from + 2), "a stretch has two limits", hint);
            }
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
    fn equations(&mut self, span: Option<[f64; 2]>) -> Option<(Vec<Carrying>, Vec<Flux>)> {
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
        for (k, equation) in lowered.iter().enumerate() {
            let singular = span.map_or_else(Vec::new, |span| self.singular(k, equation.written, span));
            if !singular.is_empty() {
                let expanded = self.expanded(k, equation.written);
                self.singular.extend(singular);
                self.expanded.extend(expanded);
            }
        }
        let mut carrier = Carrier { graph: &mut self.lowerer.graph, fluxes: Vec::new(), next: functions as u16 };
        let mut stepping = Vec::new();
        for (k, equation) in lowered.iter_mut().enumerate() {
            if self.singular.iter().any(|s| s.equation == k) {
                equation.main = carrier.graph.expand(equation.written);
                continue;
            }
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
        (complete && lowered.len() == functions).then_some((lowered, fluxes))
    }

    /// Lowers every name once, so that faults in unused ones are found too.
    fn names(&mut self) {
        for entry in &self.source.given {
            let Some(name) = syntax::name(&entry.name) else { continue };
            let (at, tree) = match self.lowerer.meanings.get(&name) {
                Some(Meaning::Formula(f) | Meaning::Held(_, f)) => (f.at.clone(), f.tree.clone()),
                Some(Meaning::Pieces(pieces, _)) => match pieces.first() {
                    Some([_, _, value]) => (value.at.clone(), value.tree.clone()),
                    None => continue,
                },
                Some(Meaning::Measured(declared)) => (declared.against.at.clone(), declared.against.tree.clone()),
                _ => continue,
            };
            let named = Expression { kind: Kind::Name(name), span: tree.span };
            let Some(typed) = self.lowerer.lower(&at, &named) else { continue };
            if let Some(value) = self.lowerer.shown_number(typed.node)
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
                        let usual = || format!("ask for it in {} or the like", Unit::si(dimension).text);
                        let hint = crate::unit::mistaken(&unit, dimension).unwrap_or_else(usual);
                        self.lowerer.fault::<()>("dimension", at, &span, message, &hint);
                        continue;
                    }
                    if unit.is_absolute() && !typed.absolute.is_temperature() {
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
            if let Node::Slot(slot) = self.lowerer.graph.node(typed.node) {
                self.lowerer.functionals[slot as usize].unit.get_or_insert_with(|| unit.clone());
            }
            let end = tree.span.end.min(at.text.len());
            let formula = at.text.get(..end).unwrap_or(&at.text).trim().to_owned();
            wanted.push(Wanted { label: entry.name.clone(), formula, node: typed.node, unit });
        }
        wanted
    }

    /// The data held, in the order of their constants.
    fn held_data(&mut self) -> Vec<HeldDatum> {
        let first = self.lowerer.constants.len() as u16;
        let mut data = Vec::with_capacity(self.held.len());
        for (k, name) in self.held.clone().into_iter().enumerate() {
            let typed = syntax::name(name).and_then(|name| self.lowerer.named(&name));
            let value = self.lowerer.graph.held(first + k as u16).map_or(f64::NAN, |held| held.value);
            let unit = Unit::si(typed.and_then(|t| t.dimension).unwrap_or_default());
            let unit = self.written_unit(name).unwrap_or(unit);
            data.push(HeldDatum { name: name.to_owned(), unit, value });
        }
        data
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

    /// Orders, counts and guards, then the model.
    #[allow(clippy::too_many_arguments)]
    fn build(
        mut self,
        equations: Vec<Carrying>,
        fluxes: Vec<Flux>,
        mut nodes: Vec<NodeId>,
        mut equation_names: Vec<String>,
        reads: Option<Vec<Read>>,
        (wanted, normalised): (Vec<Wanted>, bool),
        points: Vec<f64>,
        path: Option<PathAsked>,
    ) -> Option<Sheet> {
        let given = self.lowerer.functions.len() + fluxes.len();
        let mut orders = vec![0u8; given];
        for node in &nodes {
            for (unknown, order) in self.lowerer.graph.jets_of(*node) {
                let at = &mut orders[usize::from(unknown)];
                *at = order.max(*at);
            }
        }
        for (k, equation) in equations.iter().enumerate() {
            if !self.singular.iter().any(|s| s.equation == k) {
                self.check_steps(equation, &fluxes, &points);
            }
        }
        let owners = self.owners(&equations, &nodes, &orders)?;
        self.lowerer.reduction = Reduction::new(&mut self.lowerer.graph, &nodes, &orders, &owners);
        let reads = reads?;
        if reads.iter().any(|read| !self.inside(read, &points)) {
            // Refused already; what such a condition ties cannot be counted.
            return None;
        }
        let (singular, expanded) = (std::mem::take(&mut self.singular), std::mem::take(&mut self.expanded));
        let reads = self.regularity(reads, &equations, &singular, &expanded, &points)?;
        let releases = self.releases(&reads, &expanded, &orders, &points)?;
        self.check_count(&reads, &orders, releases.len(), &points);
        self.check_eigen(&nodes, &reads, &points);
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
        let held = self.held_data();
        self.check_path(&nodes, &placed);
        let layout = Layout::new(&orders, self.lowerer.constants.len() + held.len() + usize::from(self.far.is_some()));
        let eigen = self.source.eigen.is_some();
        let linear = !eigen && self.linear(&nodes, &placed, [points[0], points[points.len() - 1]]);
        let mut statement = self.statement(&equations, &fluxes, &reads, &points, &orders, order, &releases, linear);
        let eigen = self.eigen_sheet(&orders, &points);
        if let Some(eigen) = &eigen {
            statement.constants -= 1;
            let line = statement.unknowns.iter_mut().rev().find(|l| l.name == eigen.parameter);
            line.into_iter().for_each(|l| l.remark = "eigenvalue".into());
        }
        let [limits, constant_limits] = self.limits();
        let guess = self.guess(&fluxes, &layout, &points);
        if !self.lowerer.faults.is_empty() {
            return None;
        }
        let graph = &mut self.lowerer.graph;
        let model = SheetModel {
            equations: Equations::new(graph, &nodes, &layout, &points),
            conditions: placed.iter().map(|p| Condition { name: p.name.clone(), places: p.places.clone() }).collect(),
            ties: placed.iter().map(|p| Tie::new(graph, p.formula, &p.reads, &layout)).collect(),
            linear: linear && held.is_empty() && self.far.is_none(),
            releases,
            unknown_names: statement
                .carried
                .iter()
                .cloned()
                .chain(running.iter().map(|_| "an integral".into()))
                .collect(),
            equation_names,
            infinite: self.source.infinite_ends(),
            written_out: singular.iter().map(|s| s.equation).collect(),
            limits,
            constant_limits,
            guess,
            layout,
            points: points.clone(),
        };
        self.check_poles(&equations, &nodes, model.layout.unknowns(), &points);
        if linear {
            self.check_regular(&model, &equations, &nodes, &singular)?;
        }
        let unknowns = orders.len();
        let curves = self.curves(unknowns, &points);
        let balances = self.balances(&equations, &orders, unknowns, &points);
        let watched = self.watched(&nodes, unknowns, &points);
        if !self.lowerer.faults.is_empty() {
            return None;
        }
        let Lowerer { mut graph, mut functionals, warnings, reduction, moves, folds, .. } = self.lowerer;
        for functional in &mut functionals {
            functional.expression = reduction.reduce(&mut graph, functional.expression);
        }
        let mut report: Vec<Item> =
            wanted.into_iter().map(|w| w.item(&mut graph, &functionals, unknowns, &points, folds)).collect();
        let mut eigen = eigen;
        if let (Some(eigen), true) = (&mut eigen, normalised) {
            eigen.normalise = report.pop().map(|item| item.reckoner);
        }
        Some(Sheet {
            title: self.source.title.clone(),
            note: self.source.note.clone(),
            relative: self.source.relative.as_ref().map_or(1e-10, |r| r.0),
            statement,
            warnings,
            model,
            held,
            moves_points: moves.get(),
            report,
            curves,
            balances,
            watched,
            far: self.far,
            again: None,
            cases: Vec::new(),
            path,
            eigen,
        })
    }
}
