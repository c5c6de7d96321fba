//! The calculation sheet: from a file to a located, checked model in SI units.
//!
//! [`read`] takes the text through these stages, noting all faults on the way: sections and located texts
//! (`source`), syntax and names (`lower`, with `arithmetic`, `call`, `piece` and `absolute` for dimensions and
//! temperatures), fluxes (`carry`), conditions (`condition`), all of it led by `assemble`, which checks in passing:
//! `points` cuts the span, `guard` and `count` refuse what would go wrong without a sign, `reduce` puts in for
//! derivatives above the order. At last stands the model that the engine solves (`model`), what people are told about
//! it (`describe`, `draw`), and [`Sheet::evaluate`], which makes the asked numbers from a solution (`functional`).

mod absolute;
mod along;
mod arithmetic;
mod assemble;
mod call;
mod carry;
mod cases;
mod condition;
mod count;
mod datafile;
mod describe;
mod draw;
mod eigen;
mod far;
mod fault;
mod functional;
mod guard;
mod limits;
mod lower;
mod measured;
mod model;
mod nature;
mod path;
mod piece;
mod points;
mod pole;
mod reach;
mod reduce;
mod singular;
mod source;
mod start;
mod statement;

pub use cases::Case;
pub use datafile::DataFile;
pub use eigen::EigenSheet;
pub use fault::Fault;
pub use limits::limits;
pub use model::SheetModel;
pub use nature::{CONSTANTS, Constant};
pub use path::{AskedAlong, AskedAt, PathAsked};
pub use source::MOST_BYTES;
pub use statement::{Datum, Feature, Line, Role, Statement};

use crate::error::{Error, Result};
use crate::field::Field;
use crate::formula::graph::{Graph, NodeId};
use crate::model::{Held, Profile, Side};
use crate::quantity::Estimate;
use crate::solve::Solution;
use crate::unit::Unit;
use functional::{Functional, Memory, Reckoner};

/// A sheet that has been read and checked.
pub struct Sheet {
    /// Title, or empty.
    pub title: String,
    /// Note.
    pub note: Option<String>,
    /// Accuracy asked, relative.
    pub relative: f64,
    /// The problem as understood, for people.
    pub statement: Statement,
    /// Warnings: readings that may not be what was meant.
    pub warnings: Vec<String>,
    model: SheetModel,
    held: Vec<HeldDatum>,
    moves_points: bool,
    report: Vec<Item>,
    curves: Vec<CurveItem>,
    balances: Vec<Balance>,
    watched: Vec<reach::Watched>,
    /// Where infinite ends are cut, and how to cut them elsewhere.
    far: Option<f64>,
    again: Option<far::Again>,
    cases: Vec<Case>,
    path: Option<PathAsked>,
    eigen: Option<EigenSheet>,
}

impl std::fmt::Debug for Sheet {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Sheet").field("title", &self.title).field("model", &self.model).finish_non_exhaustive()
    }
}

/// One line of the report.
struct Item {
    label: String,
    formula: String,
    unit: Unit,
    reckoner: Reckoner,
    /// Folds that it is made from, counted from 0.
    folds: Vec<usize>,
}

/// Something that can be drawn along the span.
struct CurveItem {
    name: String,
    unit: Unit,
    along: along::Along,
}

/// An equation coefficient * g' + rest = 0 with g carried: what must balance along the span.
struct Balance {
    name: String,
    unknown: usize,
    order: usize,
    /// -rest/coefficient
    source: along::Along,
}

/// An asked number.
#[derive(Debug, Clone)]
pub struct Asked {
    /// Label in the sheet.
    pub label: String,
    /// Formula as written, without the unit.
    pub formula: String,
    /// Unit to print in.
    pub unit: Unit,
    /// Value and bar in SI, or why there is none.
    pub value: std::result::Result<Estimate, String>,
    /// Size in SI against which the accuracy counts.
    pub scale: f64,
    /// Remarks on sides and ties.
    pub remarks: Vec<String>,
}

impl Asked {
    /// Value and bar in the unit printed.
    pub fn printed(&self) -> Option<Estimate> {
        let estimate = self.value.as_ref().ok()?;
        let value = self.unit.from_si(estimate.value);
        // Conversion rounds once more.
        let error = self.unit.difference_from_si(estimate.error).abs() + 0.5 * f64::EPSILON * value.abs();
        Some(Estimate { value, error })
    }
}

/// A balance of loads against reactions, of sources against flows.
#[derive(Debug, Clone)]
pub struct Closure {
    /// Name of the equation.
    pub name: String,
    /// g(to) - g(from), jumps taken off, in SI.
    pub flows: Estimate,
    /// Integral of the sources, in SI.
    pub sources: Estimate,
    /// Size of what is compared.
    pub size: f64,
}

/// Reads and checks a sheet.
///
/// # Errors
/// All faults of the sheet, in its order, each with its place.
///
/// # Example
/// ```
/// let sheet = spanwise::sheet::read(r#"
/// [span]
/// x = ["0 m", "2 m"]
/// [unknowns]
/// T = "degC"
/// [equations]
/// conduction = "T'' = 0"
/// [conditions]
/// left = "T(0 m) = 20 degC"
/// right = "T(2 m) = 60 degC"
/// [report]
/// middle = "T(1 m) in degC"
/// "#).expect("no faults");
/// let solution = sheet.solve(None)?;
/// let middle = sheet.evaluate(&solution).remove(0).printed().expect("a value");
/// assert!((middle.value - 40.0).abs() <= middle.error);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn read(text: &str) -> std::result::Result<Sheet, Vec<Fault>> {
    read_with(text, &Reading::default())
}

/// Names of the data files that a sheet reads measured data from, as it writes them.
///
/// ```
/// let text = "[given]\nk = { against = 'T', file = 'k.csv' }\n";
/// assert_eq!(spanwise::sheet::files(text), ["k.csv"]);
/// ```
pub fn files(text: &str) -> Vec<String> {
    source::files(text)
}

/// How a sheet is to be read otherwise than it stands.
#[derive(Debug, Clone, Copy, Default)]
pub struct Reading<'a> {
    /// Data of `[given]` to be held: their values may be changed, and derivatives by them exist.
    pub held: &'a [&'a str],
    /// Data of `[given]` with another formula in place of the one written.
    pub replaced: &'a [(&'a str, &'a str)],
    /// The data files that the sheet names ([`files`]).
    pub files: &'a [DataFile],
    /// Where infinite ends of the span are cut (SI), at first; otherwise a place is chosen.
    pub far: Option<f64>,
}

/// A datum whose value may be changed.
#[derive(Debug, Clone, PartialEq)]
pub struct HeldDatum {
    /// Its name.
    pub name: String,
    /// The unit that it is written in.
    pub unit: Unit,
    /// Its value as written, in SI.
    pub value: f64,
}

/// Reads and checks a sheet, with some data held or replaced.
///
/// # Errors
/// As [`read`]; names that are not in `[given]`, or not plain numbers where they are to be held.
///
/// # Example
/// ```
/// use spanwise::sheet::{Reading, read_with};
/// let text = r#"
/// [given]
/// k = "0.8 W/(m K)"
/// [span]
/// x = ["0 m", "2 m"]
/// [unknowns]
/// T = "degC"
/// [equations]
/// conduction = "(k*T')' = 0"
/// [conditions]
/// left = "T(0 m) = 20 degC"
/// right = "T(2 m) = 60 degC"
/// [report]
/// flux = "k*T'(0 m) in W/m^2"
/// "#;
/// let sheet = read_with(text, &Reading { held: &["k"], ..Default::default() }).expect("no faults");
/// let flux = |k: f64| {
///     let solution = sheet.solve_held(&[k], None).expect("a regular problem");
///     sheet.evaluate(&solution).remove(0).printed().expect("a value").value
/// };
/// assert!((flux(0.8) - 16.0).abs() < 1e-12 && (flux(2.0) - 40.0).abs() < 1e-12);
/// ```
pub fn read_with(text: &str, reading: &Reading<'_>) -> std::result::Result<Sheet, Vec<Fault>> {
    assemble::assemble(text, reading)
}

impl Sheet {
    /// The problem for the engine, with data held as written.
    pub fn model(&self) -> Held<'_> {
        self.model_at(self.held.iter().map(|held| held.value).collect())
    }

    /// The same with other values (SI) of the data held. A problem whose points they move must be read again instead
    /// ([`Sheet::moves_points`]).
    pub fn model_at(&self, values: Vec<f64>) -> Held<'_> {
        Held::new(&self.model, self.behind(&values), self.statement.linear)
    }

    /// The same with the values that a solution carries behind its unknown constants, where it does.
    pub fn model_of(&self, field: &Field) -> Held<'_> {
        let own = self.model.layout.constants() - self.held.len();
        match field.constants.get(own..own + self.held.len()) {
            Some(values) => self.model_at(values.to_vec()),
            None => self.model(),
        }
    }

    /// The problem with held data left open: constants behind the unknown ones, in the order of [`Sheet::held`]. It has as
    /// many conditions fewer than unknowns.
    pub fn open_model(&self) -> &SheetModel {
        &self.model
    }

    /// The data held.
    pub fn held(&self) -> &[HeldDatum] {
        &self.held
    }

    /// Whether a datum held decides about points, exponents or the like, so that with another value the sheet must be read
    /// again.
    pub fn moves_points(&self) -> bool {
        self.moves_points
    }

    /// Whether an end of the span is infinite: a solution then shows where it was cut.
    pub fn infinite(&self) -> bool {
        self.far.is_some()
    }

    /// The load cases: each the sheet with changed data.
    pub fn cases(&self) -> &[Case] {
        &self.cases
    }

    fn settings<'a>(&self, watch: Option<crate::solve::Watch<'a>>) -> crate::solve::Settings<'a> {
        let most_elements = limits::most_elements(&self.model.layout);
        crate::solve::Settings { relative: self.relative, most_elements, watch }
    }

    /// Solves the sheet to the accuracy asked.
    ///
    /// # Errors
    /// Those of [`crate::solve::boundary`].
    pub fn solve(&self, watch: Option<crate::solve::Watch<'_>>) -> Result<Solution> {
        if self.eigen.is_some() {
            return Err(Error::Unsupported("an eigenproblem has modes, not one solution".into()));
        }
        let values: Vec<f64> = self.held.iter().map(|held| held.value).collect();
        self.solve_held(&values, watch)
    }

    /// Refuses a solution that needs measured data where nothing was measured.
    fn within_measured(&self, solution: &Solution) -> Result<()> {
        match self.watched.iter().find_map(|w| w.refuses(solution)) {
            Some(reason) => Err(Error::Unsupported(reason)),
            None => Ok(()),
        }
    }

    /// The same with other values (SI) of the data held, which the fields of the solution carry behind the unknown
    /// constants.
    ///
    /// # Errors
    /// Those of [`crate::solve::boundary`].
    pub fn solve_held(&self, values: &[f64], watch: Option<crate::solve::Watch<'_>>) -> Result<Solution> {
        let settings = self.settings(watch);
        let solution = match &self.again {
            Some(again) => far::solve(self, again, values, watch)?,
            None => {
                let mut solution = crate::solve::boundary(&self.model_at(values.to_vec()), &settings)?;
                solution.carry(values);
                solution
            }
        };
        self.within_measured(&solution)?;
        Ok(solution)
    }

    /// What is asked: label, formula, unit.
    pub fn wanted(&self) -> impl Iterator<Item = (&str, &str, &Unit)> {
        self.report.iter().map(|i| (i.label.as_str(), i.formula.as_str(), &i.unit))
    }

    /// The asked numbers, in the order of the sheet.
    pub fn evaluate(&self, solution: &Solution) -> Vec<Asked> {
        let outside = self.watched.iter().find_map(|w| w.refuses(solution));
        let asked = self.report.iter().map(|item| self.asked(item, solution));
        match outside {
            Some(reason) => asked.map(|a| Asked { value: Err(reason.clone()), ..a }).collect(),
            None => asked.collect(),
        }
    }

    fn asked(&self, item: &Item, solution: &Solution) -> Asked {
        // The answer is asked first and leaves in the memory which peak it found; companions follow.
        let memory = Memory::default();
        let value = solution.estimate(|field| item.reckoner.number(field, &memory));
        let value = value.map_err(|error| self.reason(&error));
        let scale = item.reckoner.scale(&solution.field).unwrap_or(f64::NAN);
        let mut remarks = Vec::new();
        if let (Ok(_), Some(extreme)) = (&value, item.reckoner.extreme(&solution.field)) {
            let at = |x: f64| self.shown(x);
            match extreme.side {
                Some(Side::Left) => remarks.push(format!("just left of the break at {}", at(extreme.place.value))),
                Some(Side::Right) => remarks.push(format!("just right of the break at {}", at(extreme.place.value))),
                None => {}
            }
            match extreme.ties.len() {
                0 => {}
                1..=3 => {
                    let others: Vec<String> = extreme.ties.iter().map(|x| at(*x)).collect();
                    remarks.push(format!("also reached at {}", others.join(", ")));
                }
                n => remarks.push(format!("also reached at {n} other places")),
            }
        }
        let (label, formula, unit) = (item.label.clone(), item.formula.clone(), item.unit.clone());
        Asked { label, formula, unit, value, scale, remarks }
    }

    /// The asked numbers on another field, without bars: for the second route. In SI.
    pub fn plain_numbers(&self, field: &Field) -> Vec<Result<f64>> {
        self.report.iter().map(|item| Ok(item.reckoner.number(field, &Memory::default())?.value)).collect()
    }

    /// A coordinate in the unit of the span.
    fn shown(&self, x: f64) -> String {
        let unit = &self.statement.coordinate_unit;
        let number = short(unit.from_si(x));
        if unit.text == "1" { number } else { format!("{number} {}", unit.text) }
    }

    /// An error of the engine in the words and units of the sheet.
    pub fn reason(&self, error: &Error) -> String {
        let at = |x: f64| format!("{} = {}", self.statement.coordinate, self.shown(x));
        match error {
            Error::NotFinite { what, x } if x.is_finite() => {
                format!(
                    "{what} is not finite at {}: look for a division by zero, a root or logarithm of a negative number",
                    at(*x)
                )
            }
            Error::NotFinite { what, .. } => {
                format!("{what} is not finite: look for a division by zero, a root or logarithm of a negative number")
            }
            Error::Unresolved { elements, x } => {
                format!("{elements} elements do not resolve the solution near {}", at(*x))
            }
            Error::SingularPoint { x } => format!(
                "the factor of the highest derivative vanishes at {}: singular points are not part of this version",
                at(*x)
            ),
            Error::SingularEnd { x } => format!(
                "no smooth solution at the singular end {}: a condition there contradicts what the equation itself forces \
                 (at the centre of a disc or sphere the first derivative is 0), or the data are not smooth there",
                at(*x)
            ),
            other => other.to_string(),
        }
    }

    /// Curves along the span: name, unit, and the expression behind each; unknowns first.
    pub fn curves(&self) -> impl Iterator<Item = (&str, &Unit, &dyn Profile)> {
        self.curves.iter().map(|c| (c.name.as_str(), &c.unit, &c.along as &dyn Profile))
    }

    /// Balances of all carried fluxes: difference between the ends, without the jumps, against the sources.
    pub fn balances(&self, solution: &Solution) -> Vec<Closure> {
        let points = &self.model.points;
        self.balances.iter().filter_map(|b| b.closure(solution, points)).collect()
    }
}

impl Balance {
    fn closure(&self, solution: &Solution, points: &[f64]) -> Option<Closure> {
        let mut flows = Estimate { value: 0.0, error: 0.0 };
        let mut size = 0.0f64;
        // Piece by piece, so that prescribed jumps do not count.
        for ends in points.windows(2) {
            let left = solution.value(self.unknown, self.order, ends[0], Side::Right).ok()?;
            let right = solution.value(self.unknown, self.order, ends[1], Side::Left).ok()?;
            flows.value += right.value - left.value;
            flows.error += right.error + left.error;
            size = size.max(left.value.abs()).max(right.value.abs());
        }
        let sources = solution.integral(&self.source, points[0], points[points.len() - 1]).ok()?;
        Some(Closure { name: self.name.clone(), flows, sources, size: size.max(sources.value.abs()) })
    }
}

/// A number in a few digits, for messages.
pub(crate) fn short(value: f64) -> String {
    let text = format!("{value:.6}");
    if value != 0.0 && !(1e-4..1e7).contains(&value.abs()) {
        return format!("{value:.4e}");
    }
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// What a line of the report is made of.
struct Wanted {
    label: String,
    formula: String,
    node: NodeId,
    unit: Unit,
}

impl Wanted {
    fn item(
        self,
        graph: &mut Graph,
        functionals: &[Functional],
        unknowns: usize,
        points: &[f64],
        folds: Option<path::FoldNames>,
    ) -> Item {
        let folds = folds.map_or_else(Vec::new, |folds| folds.in_formula(graph, self.node, functionals));
        let reckoner = Reckoner::new(graph, self.node, functionals, unknowns, points);
        Item { label: self.label, formula: self.formula, unit: self.unit, reckoner, folds }
    }
}
