//! Paths: the solutions of a problem while a parameter goes from one value to another, through folds if wanted.
//!
//! Steps are taken in arclength (Keller, in: Applications of Bifurcation Theory, Academic Press, 1977), measured by the
//! states at both ends of the span, the constants and the parameter, each relative to its size: prediction along the
//! exact tangent, correction on a mesh adapted on the way. These steps only have to come near. Each point that is asked for is solved again with
//! the parameter held, each fold as a solution of the extended system, both to the accuracy and with the bars of any other
//! boundary-value problem.

mod arc;
mod fold;

use super::boundary::{boundary, check};
use super::nonlinear::{follow, near};
use super::solver::Solver;
use super::{Settings, Solution};
use crate::adapt::exponents;
use crate::error::{Error, Result};
use crate::field::Field;
use crate::linear::{Library, Perturbation, transfer};
use crate::mesh::Mesh;
use crate::model::{Batch, ConditionValue, Held, Linearised, Model};
use crate::newton::Linearisation;
use arc::{Closed, Form, Homogeneous, Metric};
use fold::{Extended, first_part};

/// Most steps of a path.
const STEPS: usize = 3000;
/// Longest way, relative to the sizes of the solution, from one asked value of the parameter to the next, and most steps on
/// it: a way without end runs to infinity.
const BETWEEN: f64 = 15.0;
const BETWEEN_STEPS: usize = 400;
/// Longest and shortest step, relative to the sizes of the solution.
const LENGTHS: [f64; 2] = [1e-5, 0.5];
/// Cosine of the largest change of direction in a step, and of one after which steps may grow.
const TURNS: [f64; 2] = [0.9, 0.98];
/// Most points that can be asked.
const POINTS: usize = 10_000;

/// What is asked of a path.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Route {
    /// Value of the parameter at the start.
    pub from: f64,
    /// Value at the end.
    pub to: f64,
    /// Number of evenly spaced values, both ends included: 2 to 10,000.
    pub points: usize,
    /// Whether to go on where the parameter turns back.
    pub through_folds: bool,
    /// Whether the problem is linear in unknowns and other constants once the parameter has a value.
    pub linear: bool,
}

/// A solution on a path.
#[derive(Debug, Clone)]
pub struct PathPoint {
    /// Value of the parameter.
    pub parameter: f64,
    /// Folds passed before.
    pub branch: usize,
    /// The solution with the parameter held; its fields carry it behind the unknown constants.
    pub solution: Solution,
}

/// A step of a path, for the record.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PathStep {
    /// Length of the path so far, relative to the sizes of the solution.
    pub length: f64,
    /// Value of the parameter.
    pub parameter: f64,
    /// Elements of the mesh.
    pub elements: usize,
}

/// How a path ended.
#[derive(Debug, Clone, PartialEq)]
pub enum PathEnd {
    /// At the value asked.
    Reached,
    /// It came back to the value where it began, after folds, and found no way to the value asked from there.
    Returned,
    /// At a fold: there is no solution beyond it nearby.
    Fold,
    /// Somewhere else.
    Lost {
        /// Value of the parameter that was reached.
        parameter: f64,
        /// Why it could not be followed.
        reason: String,
    },
}

/// A path.
#[derive(Debug, Clone)]
pub struct Path {
    /// Points at the asked values of the parameter, in the order of the path.
    pub points: Vec<PathPoint>,
    /// Folds in the order of the path: the constants of the solutions are those of the model, the parameter last.
    pub folds: Vec<Solution>,
    /// All steps taken.
    pub steps: Vec<PathStep>,
    /// How it ended.
    pub end: PathEnd,
}

/// Follows the solutions of a model whose last constant is the parameter; it has one condition fewer than needed.
///
/// # Errors
/// [`Error::Argument`] for a route or model that makes no sense, [`Error::NoSolution`] where there is no solution at the
/// start, [`Error::Interrupted`]. A path that ends on the way is no error: see [`Path::end`].
///
/// # Example
/// Bratu's problem y'' + p exp(y) = 0, y(0) = y(1) = 0 has no solution beyond p = 3.5138 and two before.
/// ```
/// use num_dual::DualNum;
/// use spanwise::model::Side;
/// use spanwise::problem::Problem;
/// use spanwise::solve::{PathEnd, Route, path};
///
/// let mut bratu = Problem::new(0.0, 1.0);
/// let y = bratu.unknown("y", 2);
/// let p = bratu.constant("p");
/// bratu.equation("heat", move |at| at.d(y, 2) + at.constant(p) * at.d(y, 0).exp());
/// bratu.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
/// bratu.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
/// let route = Route { from: 3.0, to: 4.0, points: 5, through_folds: true, linear: false };
/// let path = path(&bratu.build()?, &route, &Default::default())?;
/// assert_eq!(path.end, PathEnd::Returned);
/// let fold = path.folds[0].constant(p)?;
/// assert!((fold.value - 3.513830719125162).abs() <= fold.error && fold.error < 1e-11);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn path(model: &dyn Model, route: &Route, settings: &Settings<'_>) -> Result<Path> {
    check(model, settings)?;
    let levels = levels(model, route)?;
    let held = Held::new(model, vec![route.from], route.linear);
    let mut first = boundary(&held, settings).map_err(|error| match error {
        Error::Interrupted => error,
        other => Error::NoSolution { tried: format!("at the start of the path, where it must be known: {other}") },
    })?;
    first.carry(&[route.from]);
    refuse_idle(model, &first.field)?;
    let mut path = Path { points: Vec::new(), folds: Vec::new(), steps: Vec::new(), end: PathEnd::Reached };
    path.points.push(PathPoint { parameter: route.from, branch: 0, solution: first });
    if route.linear {
        path.step_by_step(model, &levels, settings)?;
        return Ok(path);
    }
    Walk::new(model, route, settings, &levels, path)?.run()
}

/// Evenly spaced values of the parameter.
fn levels(model: &dyn Model, route: &Route) -> Result<Vec<f64>> {
    let layout = model.layout();
    let needed = (layout.states() + layout.constants() + model.releases().len()).wrapping_sub(1);
    if layout.constants() == 0 {
        return Err(Error::Argument {
            what: "constants",
            value: "none".into(),
            range: "the last is the parameter of a path",
        });
    }
    if model.conditions().len() != needed {
        return Err(Error::ConditionCount { found: model.conditions().len(), needed });
    }
    if !(route.from.is_finite() && route.to.is_finite() && route.from != route.to) {
        let value = format!("{} to {}", route.from, route.to);
        return Err(Error::Argument { what: "path", value, range: "two different finite values" });
    }
    if !(2..=POINTS).contains(&route.points) {
        let value = route.points.to_string();
        return Err(Error::Argument { what: "points of a path", value, range: "2 to 10,000" });
    }
    let last = route.points - 1;
    let at = |k: usize| match k {
        0 => route.from,
        k if k == last => route.to,
        k => short(route.from + (route.to - route.from) * (k as f64 / last as f64)),
    };
    Ok((0..=last).map(at).collect())
}

/// The nearest number of 15 digits: values between the ends need not be spaced more evenly, and read better.
fn short(value: f64) -> f64 {
    format!("{value:.14e}").parse().unwrap_or(value)
}

/// Refuses a parameter that neither an equation nor a condition depends on, at the solution or beside it.
fn refuse_idle(model: &dyn Model, field: &Field) -> Result<()> {
    let layout = model.layout();
    let (j, c) = (layout.jets(), layout.constants());
    let mut equations = Linearised::default();
    for element in (0..field.mesh.elements.len()).step_by(field.mesh.elements.len().div_ceil(40)) {
        let own = field.element(element);
        let x = own.coordinate(0.137);
        let here = field.jets(element, 0.137, layout.orders());
        for shift in [0.0, 0.385] {
            let jets: Vec<f64> = here.iter().map(|v| v + shift * (1.0 + v.abs())).collect();
            equations.reset(layout, 1);
            let batch = Batch { piece: own.piece, x: &[x], jets: &jets, constants: &field.constants };
            model.equations(&batch, &mut equations)?;
            if (0..layout.unknowns()).any(|e| equations.constants[e * c + c - 1] != 0.0) {
                return Ok(());
            }
        }
    }
    let mut value = ConditionValue::default();
    for (index, condition) in model.conditions().iter().enumerate() {
        let jets: Vec<f64> = (0..j * condition.places.len()).map(|k| 0.385 + 0.1 * k as f64).collect();
        value.reset(layout, condition.places.len());
        model.condition(index, &jets, &field.constants, &mut value)?;
        if value.constants[c - 1] != 0.0 {
            return Ok(());
        }
    }
    Err(Error::Unsupported("neither an equation nor a condition depends on the parameter of the path".into()))
}

impl Path {
    /// A problem that is linear at every value of the parameter has no folds: each point by itself.
    fn step_by_step(&mut self, model: &dyn Model, levels: &[f64], settings: &Settings<'_>) -> Result<()> {
        for level in levels.iter().skip(1) {
            match boundary(&Held::new(model, vec![*level], true), settings) {
                Ok(mut solution) => {
                    solution.carry(&[*level]);
                    self.points.push(PathPoint { parameter: *level, branch: 0, solution });
                }
                Err(Error::Interrupted) => return Err(Error::Interrupted),
                Err(error) => {
                    self.end = PathEnd::Lost { parameter: *level, reason: error.to_string() };
                    return Ok(());
                }
            }
        }
        Ok(())
    }
}

/// A point that the steps go to, with the direction of the path there, of length 1.
#[derive(Debug, Clone)]
struct Station {
    field: Field,
    tangent: Field,
}

impl Station {
    fn parameter(&self) -> f64 {
        last(&self.field)
    }

    fn rising(&self) -> f64 {
        last(&self.tangent)
    }
}

/// The parameter of a field, or its rate.
fn last(field: &Field) -> f64 {
    field.constants[field.constants.len() - 1]
}

struct Walk<'a> {
    model: &'a dyn Model,
    route: &'a Route,
    settings: &'a Settings<'a>,
    levels: &'a [f64],
    metric: Metric,
    /// What the equations make of the sizes of the unknowns, one against the other.
    scale: Vec<f64>,
    at: Station,
    path: Path,
    length: f64,
    /// Library for transfers between meshes.
    library: Library,
}

/// What became of a step that was tried.
enum Tried {
    Done { turn: f64 },
    TooLong(String),
}

impl<'a> Walk<'a> {
    fn new(
        model: &'a dyn Model,
        route: &'a Route,
        settings: &'a Settings<'a>,
        levels: &'a [f64],
        path: Path,
    ) -> Result<Self> {
        let layout = model.layout();
        let base = path.points[0].solution.base();
        let field = first_part(base, layout, &base.mesh, &[route.from]);
        let mut metric = Metric::new(layout, (route.to - route.from).abs());
        let toward = Form::one(layout, model.points().len(), 2 * layout.jets() + layout.constants() - 1);
        let tangent = tangent(model, settings, &field, toward, route.to - route.from).map_err(|error| match error {
            Error::Interrupted => error,
            _ => Error::Singular(
                "the path has no single direction at its start, which lies at a fold or where paths cross: start beside it"
                    .into(),
            ),
        })?;
        let scale = exponents::scales(&Linearisation::new(model, &field, &field))?;
        metric.grow(&field, 1.0, &scale);
        metric.grow(&tangent, 0.1, &scale);
        let library = Library::suited(&Closed::new(model, metric.along(&tangent, model.points().len()), 0.0));
        let at = Station { tangent: tangent.scaled(1.0 / metric.length(&tangent)), field };
        let mut walk = Self { model, route, settings, levels, metric, scale, at, path, length: 0.0, library };
        walk.note();
        Ok(walk)
    }

    fn note(&mut self) {
        let (length, parameter) = (self.length, self.at.parameter());
        self.path.steps.push(PathStep { length, parameter, elements: self.at.field.mesh.elements.len() });
    }

    fn run(mut self) -> Result<Path> {
        let spacing = (self.levels[1] - self.levels[0]).abs();
        let mut step = (spacing / self.at.rising().abs().max(f64::MIN_POSITIVE)).clamp(1e-3, 0.25);
        let (mut idle, mut since) = (0, 0.0);
        for _ in 0..STEPS {
            let before = self.path.points.len();
            match self.attempt(step)? {
                Tried::Done { turn } => {
                    if let Some(end) = self.ended() {
                        self.path.end = end;
                        return Ok(self.path);
                    }
                    let reached = self.path.points.len() > before;
                    (idle, since) = if reached { (0, self.length) } else { (idle + 1, since) };
                    if turn > TURNS[1] {
                        step = (1.5 * step).min(LENGTHS[1]);
                    }
                }
                Tried::TooLong(reason) => {
                    step *= 0.4;
                    if step < LENGTHS[0] {
                        return Ok(self.lost(reason));
                    }
                }
            }
            if self.length - since > BETWEEN || idle > BETWEEN_STEPS {
                return Ok(self.lost("the solution goes on and on, and the parameter hardly moves any more".into()));
            }
        }
        Ok(self.lost(format!("{STEPS} steps")))
    }

    fn lost(mut self, reason: String) -> Path {
        let returned =
            self.path.points.len() > 1 && self.path.points.last().is_some_and(|p| p.parameter == self.route.from);
        self.path.end = match returned {
            true => PathEnd::Returned,
            false => PathEnd::Lost { parameter: self.at.parameter(), reason },
        };
        self.path
    }

    /// Whether the last step came to an end of the path: `to`, a fold that ends it, or as far behind `from` as `to` lies
    /// before it (a path that comes back may turn once more there).
    fn ended(&self) -> Option<PathEnd> {
        if !self.path.folds.is_empty() && !self.route.through_folds {
            return Some(PathEnd::Fold);
        }
        let Route { from, to, .. } = *self.route;
        let far = (self.at.parameter() - from) / (to - from) < -1.0;
        let point = self.path.points.last().filter(|_| self.path.points.len() > 1)?;
        match point.parameter == to {
            true => Some(PathEnd::Reached),
            false => far.then_some(PathEnd::Returned),
        }
    }

    /// One step, with the fold and the asked points on it.
    fn attempt(&mut self, step: f64) -> Result<Tried> {
        let next = match self.advance(step) {
            Ok(next) => next,
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(error) => return Ok(Tried::TooLong(error.to_string())),
        };
        let turn = self.metric.product(&self.at.tangent, &next.tangent);
        if turn < TURNS[0] && step > LENGTHS[0] / 0.4 {
            return Ok(Tried::TooLong("it turns too sharply".into()));
        }
        let arc = Arc::new(&self.at, &next, step, &mut self.library)?;
        let turning = (self.at.rising() * next.rising() < 0.0).then(|| arc.turning());
        let mut fold = None;
        if let Some(at) = turning {
            match self.fold(&arc, at)? {
                Some(found) => fold = Some((at, found)),
                None => return Ok(Tried::TooLong("a fold could not be located".into())),
            }
        }
        let turned_at = fold.as_ref().map(|(_, found): &(f64, Solution)| last(&found.field));
        let branch = self.path.folds.len();
        let mut points = Vec::new();
        let stretches = match turning {
            Some(at) => vec![(0.0, at), (at, 1.0)],
            None => vec![(0.0, 1.0)],
        };
        let count = if self.route.through_folds { stretches.len() } else { 1 };
        for (passed, stretch) in stretches.into_iter().take(count).enumerate() {
            let ends = match (passed, turned_at) {
                (0, Some(turned)) => (self.at.parameter(), turned),
                (0, None) => (self.at.parameter(), next.parameter()),
                (_, turned) => (turned.unwrap_or(next.parameter()), next.parameter()),
            };
            for level in self.crossed(ends) {
                let Some(solution) = self.point(&arc, stretch, level)? else {
                    return Ok(Tried::TooLong(format!("no solution was found at the value {level}")));
                };
                points.push(PathPoint { parameter: level, branch: branch + passed, solution });
                if level == self.route.to {
                    break;
                }
            }
        }
        if let Some(end) = points.iter().position(|p| p.parameter == self.route.to) {
            points.truncate(end + 1);
            // A fold behind the end is none of this path.
            if points[end].branch == branch {
                fold = None;
            }
        }
        self.path.points.extend(points);
        self.path.folds.extend(fold.map(|(_, found)| found));
        self.length += step;
        self.metric.grow(&next.field, 1.0, &self.scale);
        let length = self.metric.length(&next.tangent);
        self.at = Station { tangent: next.tangent.scaled(1.0 / length), field: next.field };
        self.note();
        Ok(Tried::Done { turn })
    }

    /// Asked values behind `from`, up to `to`, in order.
    fn crossed(&self, (from, to): (f64, f64)) -> Vec<f64> {
        let inside = |p: &&f64| if from < to { from < **p && **p <= to } else { to <= **p && **p < from };
        let mut crossed: Vec<f64> = self.levels.iter().filter(inside).copied().collect();
        crossed.sort_by(f64::total_cmp);
        if from > to {
            crossed.reverse();
        }
        crossed
    }

    /// The station a step ahead.
    fn advance(&self, step: f64) -> Result<Station> {
        let form = self.metric.along(&self.at.tangent, self.model.points().len());
        let here = form.on(&self.at.field);
        let ahead = self.at.field.plus(&self.at.tangent, step);
        let closed = Closed::new(self.model, form.clone(), here + step);
        let field = near(&closed, self.settings, &ahead, ahead.mesh.clone())?;
        let tangent = tangent(self.model, self.settings, &field, form, 1.0)?;
        let length = self.metric.length(&tangent);
        Ok(Station { tangent: tangent.scaled(1.0 / length), field })
    }

    /// The fold near a place of the arc.
    fn fold(&self, arc: &Arc, at: f64) -> Result<Option<Solution>> {
        let about = arc.field(at);
        let (extended, start) = Extended::near(self.model, &about, &arc.tangent(at), &self.metric);
        let found = match follow(&extended, self.settings, &start, start.mesh.clone()) {
            Ok(found) => found,
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(_) => return Ok(None),
        };
        let layout = self.model.layout();
        let found = found.mapped(|field| first_part(field, layout, &field.mesh, &[]));
        let near = self.metric.distance(found.base(), &about) <= 0.5 * arc.step;
        Ok(near.then_some(found))
    }

    /// The solution at an asked value of the parameter on a stretch of the arc.
    fn point(&self, arc: &Arc, stretch: (f64, f64), level: f64) -> Result<Option<Solution>> {
        let layout = self.model.layout();
        let about = arc.field(arc.place(stretch, level));
        let held = Held::new(self.model, vec![level], false);
        let start = first_part(&about, held.layout(), &about.mesh, &[]);
        match follow(&held, self.settings, &start, start.mesh.clone()) {
            Ok(mut solution) => {
                solution.carry(&[level]);
                let base = solution.base();
                let found = first_part(base, layout, &base.mesh, &[level]);
                Ok((self.metric.distance(&found, &about) <= 0.25 * arc.step).then_some(solution))
            }
            Err(Error::Interrupted) => Err(Error::Interrupted),
            Err(_) => Ok(None),
        }
    }
}

/// The path between two stations, as cubics that meet values and directions at both.
struct Arc {
    ends: [Station; 2],
    step: f64,
}

impl Arc {
    fn new(from: &Station, to: &Station, step: f64, library: &mut Library) -> Result<Self> {
        let mesh: &Mesh = &to.field.mesh;
        let field = transfer(&from.field, mesh, library)?;
        let tangent = transfer(&from.tangent, mesh, library)?;
        Ok(Self { ends: [Station { field, tangent }, to.clone()], step })
    }

    /// Cubic Hermite weights of value, direction, value, direction.
    fn weights(&self, t: f64) -> [f64; 4] {
        let (rest, h) = (1.0 - t, self.step);
        [rest * rest * (1.0 + 2.0 * t), rest * rest * t * h, t * t * (3.0 - 2.0 * t), -t * t * rest * h]
    }

    fn field(&self, t: f64) -> Field {
        let [a, b, c, d] = self.weights(t);
        let [from, to] = &self.ends;
        from.field.scaled(a).plus(&from.tangent, b).plus(&to.field, c).plus(&to.tangent, d)
    }

    /// Direction, between those at the ends.
    fn tangent(&self, t: f64) -> Field {
        let [from, to] = &self.ends;
        from.tangent.scaled(1.0 - t).plus(&to.tangent, t)
    }

    fn parameter(&self, t: f64) -> f64 {
        let [a, b, c, d] = self.weights(t);
        let [from, to] = &self.ends;
        a * from.parameter() + b * from.rising() + c * to.parameter() + d * to.rising()
    }

    /// Where the parameter is extreme.
    fn turning(&self) -> f64 {
        let sign = self.ends[0].rising().signum();
        let (mut low, mut high) = (0.0f64, 1.0f64);
        // Golden section on a function with one extreme.
        let ratio = 0.5 * (5.0f64.sqrt() - 1.0);
        for _ in 0..60 {
            let (a, b) = (high - ratio * (high - low), low + ratio * (high - low));
            if sign * self.parameter(a) > sign * self.parameter(b) { high = b } else { low = a }
        }
        0.5 * (low + high)
    }

    /// Where on a stretch the parameter has a value: as near as bisection comes.
    fn place(&self, (from, to): (f64, f64), level: f64) -> f64 {
        let (mut low, mut high) = (from, to);
        let sign = (self.parameter(from) - level).signum();
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if (self.parameter(middle) - level).signum() == sign { low = middle } else { high = middle }
        }
        0.5 * (low + high)
    }
}

/// The solution of the linearised problem about a field with `form = value`.
fn tangent(model: &dyn Model, settings: &Settings<'_>, field: &Field, form: Form, value: f64) -> Result<Field> {
    let homogeneous = Homogeneous::new(model, field);
    let closed = Closed::new(&homogeneous, form, value);
    let scale = exponents::scales(&closed)?;
    let mut solver = Solver { model: &closed, settings, scale, library: Library::suited(&closed), pass: 0 };
    let pass = solver.solve_once(&field.mesh, Some(field), &Perturbation::NONE)?;
    if pass.free.is_empty() {
        Ok(pass.field)
    } else {
        Err(Error::Singular("the path has no single direction here".into()))
    }
}
