//! Measured data: names that are given by points.

use super::absolute::Absolute;
use super::assemble::Assembler;
use super::datafile::{self, Columns, DataFile};
use super::fault::Faults;
use super::lower::{Formula, Lowerer, Meaning, Typed};
use super::reach::Reach;
use super::source::{Located, Measured, Rows};
use crate::formula::graph::{Graph, Inputs, NodeId};
use crate::formula::table::{Table, Through};
use crate::unit::{Dimension, Unit};
use std::ops::Range;
use std::sync::Arc;

/// Most points of one datum.
pub(super) const MOST_MEASURED: usize = 2_000;

/// Part of the measured range by which rounding may lead beyond it.
const SLACK: f64 = 1e-9;

/// Samples of the span in which an argument is looked for at the measured points.
const SAMPLES: usize = 2_000;

const POINTS_HINT: &str = "points are pairs: [[\"20 degC\", \"15.1 W/(m K)\"], [\"200 degC\", \"17.4 W/(m K)\"]]";

/// Measured data as declared.
#[derive(Debug, Clone)]
pub(super) struct Declaration {
    pub against: Formula,
    through: Through,
    values: Values,
    /// Where the data stand in the sheet.
    place: Range<usize>,
}

#[derive(Debug, Clone)]
enum Values {
    Written(Vec<[Formula; 2]>),
    Read(Box<Columns>),
}

/// What has been made of a declaration.
#[derive(Debug, Clone, Copy)]
pub(super) struct Taken {
    table: u16,
    dimension: Option<Dimension>,
    absolute: Absolute,
}

impl Assembler<'_, '_> {
    /// Measured data of the sheet: formulas parsed, file taken in.
    pub(super) fn declare_measured(&mut self, name: &str, given: &Measured, files: &[DataFile]) -> Option<Meaning> {
        let against = self.lowerer.parse(&given.against);
        let values = match &given.rows {
            Rows::Points(rows) => {
                if rows.len() > MOST_MEASURED {
                    let message = format!("`{name}` has {} points; at most {MOST_MEASURED} are allowed", rows.len());
                    self.lowerer.faults.add("too large", given.place.clone(), message, None);
                    return None;
                }
                let rows: Vec<Option<[Formula; 2]>> = rows
                    .iter()
                    .map(|[x, y]| {
                        let (x, y) = (self.lowerer.parse(x), self.lowerer.parse(y));
                        Some([x?, y?])
                    })
                    .collect();
                Values::Written(rows.into_iter().collect::<Option<_>>()?)
            }
            Rows::File { file, columns } => {
                let columns = columns.as_ref().map(|c| c.each_ref().map(|l| l.text.as_str()));
                Values::Read(Box::new(from_file(file, columns, files, self.lowerer.faults)?))
            }
        };
        let place = given.place.clone();
        Some(Meaning::Measured(Arc::new(Declaration { against: against?, through: given.through, values, place })))
    }

    /// Where the arguments of measured data pass the points: breaks, for there the data are not smooth.
    pub(super) fn measured_points(&mut self, span: [f64; 2]) -> Vec<f64> {
        let mut found = Vec::new();
        for reach in self.lowerer.reaches.clone() {
            let graph = &mut self.lowerer.graph;
            let depends = graph.depends_on(reach.argument);
            let Some(table) = graph.tables().get(usize::from(reach.table)).cloned() else { continue };
            if !depends.only_coordinate() {
                continue;
            }
            if depends.held {
                self.lowerer.moves.set(true);
            }
            found.extend(crossings(graph, reach.argument, table.points(), span));
        }
        found
    }
}

fn from_file(file: &Located, columns: Option<[&str; 2]>, files: &[DataFile], faults: &mut Faults) -> Option<Columns> {
    let mut refuse = |message: String, hint: &str| {
        faults.add("data file", file.span.clone(), message, Some(hint.to_owned()));
        None
    };
    let name = file.text.as_str();
    match files.iter().find(|f| f.name == name).map(|f| &f.content) {
        None => refuse(format!("{name} was not handed over with the sheet"), "the name is relative to the sheet"),
        Some(Err(reason)) => refuse(format!("{name}: {reason}"), "the name is relative to the sheet"),
        Some(Ok(text)) => match datafile::read(text, columns, MOST_MEASURED) {
            Ok(columns) => Some(columns),
            Err((message, hint)) => refuse(format!("{name}: {message}"), hint),
        },
    }
}

/// Places where an expression of the coordinate and data passes one of ascending values.
fn crossings(graph: &mut Graph, argument: NodeId, values: &[f64], [from, to]: [f64; 2]) -> Vec<f64> {
    let slope = graph.total(argument);
    let at = |x: f64| graph.evaluate::<f64>(argument, &Inputs::at(x));
    if let Some(slope) = graph.as_number(slope) {
        // Straight: exact.
        let zero = at(0.0);
        return values.iter().map(|v| (v - zero) / slope).filter(|x| *x > from && *x < to).collect();
    }
    let place = |k: usize| from + (to - from) * k as f64 / SAMPLES as f64;
    let mut found = Vec::new();
    for k in 0..SAMPLES {
        let (a, b) = (place(k), place(k + 1));
        let (left, right) = (at(a), at(b));
        let (low, high) = (left.min(right), left.max(right));
        let first = values.partition_point(|v| *v <= low);
        for value in values[first..].iter().take_while(|v| **v <= high) {
            let (mut a, mut b) = (a, b);
            for _ in 0..100 {
                let middle = 0.5 * (a + b);
                if middle <= a || middle >= b {
                    break;
                }
                if (at(middle) < *value) == (left < *value) { a = middle } else { b = middle }
            }
            found.push(b);
        }
    }
    found.retain(|x| *x > from && *x < to);
    found
}

impl Lowerer<'_> {
    /// The value of measured data where their argument is.
    pub(super) fn measured(&mut self, name: &str, declared: &Arc<Declaration>) -> Option<Typed> {
        let Formula { at, tree } = &declared.against;
        let argument = self.lower(at, tree);
        let taken = match self.taken.get(name) {
            Some(taken) => *taken,
            None => {
                let taken = self.take(name, declared, argument);
                self.taken.insert(name.to_owned(), taken);
                taken
            }
        };
        let (Taken { table, dimension, absolute }, argument) = (taken?, argument?);
        let node = self.graph.table(table, 0, argument.node);
        let range = self.graph.tables().get(usize::from(table)).map(|t| t.range())?;
        let unit = self.argument_unit(declared, argument.dimension.unwrap_or_default());
        if let Some(value) = self.shown_number(argument.node)
            && !within(value, range)
        {
            let message =
                format!("`{name}` has no value at {}: it is measured {}", shown(value, &unit), span(range, &unit));
            return self.fault("measured", at, &tree.span, message, OUTSIDE);
        }
        let known = |r: &Reach| r.table == table && r.argument == argument.node;
        if !self.reaches.iter().any(known) {
            let against = at.text.trim().to_owned();
            let place = declared.place.clone();
            self.reaches.push(Reach { name: name.to_owned(), against, argument: argument.node, table, unit, place });
        }
        Some(Typed { node, dimension, absolute })
    }

    /// The unit in which the argument was written at the points.
    fn argument_unit(&self, declared: &Declaration, dimension: Dimension) -> Unit {
        use crate::formula::syntax::Kind;
        let written = match &declared.values {
            Values::Read(columns) => Some(columns.units[0].clone()),
            Values::Written(rows) => rows.iter().find_map(|[x, _]| match &x.tree.kind {
                Kind::Number { unit, .. } => unit.clone(),
                _ => None,
            }),
        };
        written.filter(|u| u.dimension == dimension).unwrap_or_else(|| Unit::si(dimension))
    }

    /// Makes a table of a declaration.
    fn take(&mut self, name: &str, declared: &Declaration, argument: Option<Typed>) -> Option<Taken> {
        let wanted = argument.map(|a| a.dimension);
        let ((x, y), dimension, absolute, places) = match &declared.values {
            Values::Written(rows) => self.written(name, rows, wanted)?,
            Values::Read(columns) => {
                let Columns { units: [x, y], rows } = columns.as_ref();
                if let Some(Some(wanted)) = wanted
                    && wanted != x.dimension
                {
                    let message = format!(
                        "the first column of `{name}` is {} but `{}` is {}",
                        x.dimension.describe(),
                        declared.against.at.text.trim(),
                        wanted.describe()
                    );
                    self.faults.add("dimension", declared.place.clone(), message, None);
                    return None;
                }
                let absolute = match y.dimension {
                    _ if y.is_absolute() => Absolute::CELSIUS,
                    Dimension::TEMPERATURE => Absolute::DATUM,
                    _ => Absolute::NONE,
                };
                let values = rows.iter().map(|(r, _)| (x.to_si(r[0]), y.to_si(r[1]))).unzip();
                let places = vec![declared.place.clone(); rows.len()];
                (values, Some(y.dimension), absolute, places)
            }
        };
        if x.len() < 2 {
            let message = format!("`{name}` needs at least two points");
            self.faults.add("measured", declared.place.clone(), message, Some(POINTS_HINT.into()));
            return None;
        }
        if let Some(k) = (1..x.len()).find(|k| x[*k] <= x[k - 1]) {
            let line = match &declared.values {
                Values::Read(columns) => format!(" in line {}", columns.rows[k].1),
                Values::Written(_) => String::new(),
            };
            let message = format!("the points of `{name}` do not ascend{line}");
            let hint = "write them in ascending order, each place once";
            self.faults.add("measured", places[k].clone(), message, Some(hint.into()));
            return None;
        }
        let Some(table) = Table::new(&x, &y, declared.through) else {
            let message = format!("the points of `{name}` lie too close together for numbers of this size");
            self.faults.add("measured", declared.place.clone(), message, None);
            return None;
        };
        let Some(table) = self.graph.measure(table) else {
            self.faults.add("too large", declared.place.clone(), "too many measured data", None);
            return None;
        };
        Some(Taken { table, dimension, absolute })
    }

    /// Points as written in the sheet, in SI, with what they measure.
    #[allow(clippy::type_complexity)]
    fn written(
        &mut self,
        name: &str,
        rows: &[[Formula; 2]],
        wanted: Option<Option<Dimension>>,
    ) -> Option<((Vec<f64>, Vec<f64>), Option<Dimension>, Absolute, Vec<Range<usize>>)> {
        let (mut x, mut y, mut places) = (Vec::new(), Vec::new(), Vec::new());
        let mut own: [Option<Dimension>; 2] = [wanted.flatten(), None];
        let mut absolute = None;
        let mut sound = true;
        for row in rows {
            for (k, formula) in row.iter().enumerate() {
                let Formula { at, tree } = formula;
                let Some(typed) = self.lower(at, tree) else {
                    sound = false;
                    continue;
                };
                sound &= self.expect(at, tree, typed, own[k]).is_some();
                own[k] = own[k].or(typed.dimension);
                match self.number_of(typed.node).filter(|v| v.is_finite()) {
                    Some(value) if k == 0 => {
                        x.push(value);
                        places.push(at.span.clone());
                    }
                    Some(value) => {
                        y.push(value);
                        absolute = Some(absolute.map_or(typed.absolute, |a: Absolute| a.either(typed.absolute)));
                    }
                    None => {
                        let message = format!("a point of `{name}` must be a number");
                        self.fault::<()>("measured", at, &tree.span, message, "data only, no unknowns");
                        sound = false;
                    }
                }
            }
        }
        sound.then_some(((x, y), own[1], absolute.unwrap_or(Absolute::NONE), places))
    }
}

/// What to do when data end too early.
pub(super) const OUTSIDE: &str = "nothing is made up beyond the last point: add points, or shorten what needs them";

pub(super) fn shown(value: f64, unit: &Unit) -> String {
    let number = super::short(unit.from_si(value));
    if unit.text == "1" { number } else { format!("{number} {}", unit.text) }
}

pub(super) fn span(range: [f64; 2], unit: &Unit) -> String {
    format!("from {} to {} only", shown(range[0], unit), shown(range[1], unit))
}

pub(super) fn within(value: f64, [low, high]: [f64; 2]) -> bool {
    let slack = SLACK * (high - low);
    value >= low - slack && value <= high + slack
}
