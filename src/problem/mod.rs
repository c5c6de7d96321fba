//! Problems from Rust closures.
//!
//! Equations, conditions and expressions are closures over [`Number`], which carries exact derivatives along; nothing
//! is differentiated numerically.
//!
//! # Example
//! A beam of 2 m, clamped at the left, with a load of 3 at the right end: E I y'' = M, M'' = 0.
//! ```
//! use spanwise::problem::Problem;
//! use spanwise::model::Side;
//!
//! let mut beam = Problem::new(0.0, 2.0);
//! let y = beam.unknown("y", 2);
//! let m = beam.unknown("M", 2);
//! beam.equation("bending", move |at| at.d(y, 2) * 2.385 - at.d(m, 0));
//! beam.equation("balance", move |at| at.d(m, 2));
//! beam.condition("clamped", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
//! beam.condition("clamped", &[(0.0, Side::Right)], move |v| v[0].d(y, 1));
//! beam.condition("free", &[(2.0, Side::Left)], move |v| v[0].d(m, 0));
//! beam.condition("load", &[(2.0, Side::Left)], move |v| v[0].d(m, 1) - 3.0);
//! let solution = beam.solve(&Default::default())?;
//! let tip = solution.value(y, 0, 2.0, Side::Left)?;
//! let exact = -3.0 * 2.0f64.powi(3) / (3.0 * 2.385);
//! assert!((tip.value - exact).abs() <= tip.error && tip.error < 1e-12);
//! # Ok::<(), spanwise::error::Error>(())
//! ```

mod closures;

pub use closures::{Expression, Station};

use crate::error::{Error, Result};
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release, Side};
use crate::solve::{self, Settings, Solution};
use closures::{Seeds, WIDTH, sweep};
use num_dual::DualSVec64;

/// A value with the derivatives that the solver needs. Arithmetic and functions as for `f64`
/// (trait `num_dual::DualNum`).
pub type Number = DualSVec64<WIDTH>;

type Equation = Box<dyn Fn(&Station<'_>) -> Number + Send + Sync>;
/// Name, places and closure of a condition.
type Tied = (String, Vec<(f64, Side)>, Tie);
type Tie = Box<dyn Fn(&[Station<'_>]) -> Number + Send + Sync>;

/// A boundary-value problem under construction. Whether it is linear is found from its derivatives at several states.
pub struct Problem {
    points: Vec<f64>,
    unknowns: Vec<(String, usize)>,
    constants: Vec<String>,
    equations: Vec<(String, Equation)>,
    conditions: Vec<Tied>,
    releases: Vec<(f64, usize, usize)>,
    limits: Vec<(usize, f64, f64)>,
}

impl Problem {
    /// A problem on the span from `from` to `to`.
    pub fn new(from: f64, to: f64) -> Self {
        Self {
            points: vec![from, to],
            unknowns: Vec::new(),
            constants: Vec::new(),
            equations: Vec::new(),
            conditions: Vec::new(),
            releases: Vec::new(),
            limits: Vec::new(),
        }
    }

    /// Adds an unknown function whose highest derivative in the equations is `order`; returns its index.
    pub fn unknown(&mut self, name: &str, order: usize) -> usize {
        self.unknowns.push((name.into(), order));
        self.unknowns.len() - 1
    }

    /// Adds an unknown constant; returns its index.
    pub fn constant(&mut self, name: &str) -> usize {
        self.constants.push(name.into());
        self.constants.len() - 1
    }

    /// Refuses solutions, and steps towards one, with an unknown function outside ]low, high\[.
    pub fn limit(&mut self, unknown: usize, low: f64, high: f64) {
        self.limits.push((unknown, low, high));
    }

    /// Declares a place where data step or kink.
    pub fn break_at(&mut self, x: f64) {
        self.points.push(x);
    }

    /// Adds an equation: the closure gives left side minus right side. As many equations as unknown functions.
    pub fn equation(&mut self, name: &str, f: impl Fn(&Station<'_>) -> Number + Send + Sync + 'static) {
        self.equations.push((name.into(), Box::new(f)));
    }

    /// Adds a condition among values at `places` (each becomes a break) and constants: left side minus right side.
    pub fn condition(
        &mut self,
        name: &str,
        places: &[(f64, Side)],
        f: impl Fn(&[Station<'_>]) -> Number + Send + Sync + 'static,
    ) {
        self.points.extend(places.iter().map(|p| p.0));
        self.conditions.push((name.into(), places.to_vec(), Box::new(f)));
    }

    /// Gives up the continuity of the derivative of the given order at an inner place: one more condition is needed.
    pub fn release(&mut self, x: f64, unknown: usize, order: usize) {
        self.points.push(x);
        self.releases.push((x, unknown, order));
    }

    /// Checks the problem and makes it ready for the solver.
    ///
    /// # Errors
    /// `Argument` for a span, place, unknown or order that does not exist.
    pub fn build(self) -> Result<impl Model> {
        Ready::new(self)
    }

    /// Builds and solves.
    ///
    /// # Errors
    /// Those of [`Problem::build`] and [`solve::boundary`].
    pub fn solve(self, settings: &Settings<'_>) -> Result<Solution> {
        solve::boundary(&self.build()?, settings)
    }
}

/// A checked problem.
struct Ready {
    layout: Layout,
    points: Vec<f64>,
    names: Vec<String>,
    equations: Vec<(String, Equation)>,
    conditions: Vec<Condition>,
    ties: Vec<Tie>,
    releases: Vec<Release>,
    limits: Vec<(usize, f64, f64)>,
    linear: bool,
}

impl Ready {
    fn new(problem: Problem) -> Result<Self> {
        let Problem { mut points, unknowns, constants, equations, conditions, releases, limits } = problem;
        let (from, to) = (points[0], points[1]);
        let inside = |x: f64| x.is_finite() && from <= x && x <= to;
        if let Some(x) = points.iter().find(|x| !inside(**x)) {
            return Err(Error::Argument { what: "point", value: x.to_string(), range: "finite, inside the span" });
        }
        points.sort_by(f64::total_cmp);
        points.dedup();
        if equations.len() != unknowns.len() {
            let value = format!("{} for {} unknown functions", equations.len(), unknowns.len());
            return Err(Error::Argument { what: "number of equations", value, range: "one per unknown function" });
        }
        let orders: Vec<usize> = unknowns.iter().map(|u| u.1).collect();
        let point = |x: f64| points.partition_point(|p| *p < x);
        let mut ready = Self {
            layout: Layout::new(&orders, constants.len()),
            names: unknowns.into_iter().map(|u| u.0).collect(),
            equations,
            conditions: Vec::new(),
            ties: Vec::new(),
            releases: Vec::new(),
            points: Vec::new(),
            limits,
            linear: false,
        };
        if let Some((unknown, _, _)) = ready.limits.iter().find(|l| l.0 >= orders.len()) {
            return Err(Error::Argument {
                what: "limited unknown",
                value: unknown.to_string(),
                range: "one that exists",
            });
        }
        for (x, unknown, order) in releases {
            let exists = unknown < orders.len() && order < orders[unknown] && from < x && x < to;
            if !exists {
                let value = format!("derivative {order} of unknown {unknown} at {x}");
                return Err(Error::Argument { what: "release", value, range: "a state at an inner point" });
            }
            ready.releases.push(Release { point: point(x), unknown, order });
        }
        for (name, places, tie) in conditions {
            let places = places.iter().map(|(x, side)| Place { point: point(*x), side: *side }).collect();
            ready.conditions.push(Condition { name, places });
            ready.ties.push(tie);
        }
        ready.points = points;
        ready.linear = ready.found_linear()?;
        Ok(ready)
    }

    /// Linear if the derivatives at several states agree with each other to rounding.
    fn found_linear(&self) -> Result<bool> {
        let (jets, constants) = (self.layout.jets(), self.layout.constants());
        let state = |k: usize, count: usize| -> Vec<f64> {
            (0..count).map(|j| if k == 0 { 0.0 } else { ((j * 7 + k * 13) as f64).sin() * 2.385 }).collect()
        };
        let same = |a: &[f64], b: &[f64]| a.iter().zip(b).all(|(a, b)| (a - b).abs() <= 1e-9 * a.abs().max(b.abs()));
        for piece in 0..self.points.len() - 1 {
            let x = [0.385f64, 0.77].map(|t| self.points[piece] + t * (self.points[piece + 1] - self.points[piece]));
            let at = |k: usize| -> Result<Linearised> {
                let mut out = Linearised::default();
                out.reset(&self.layout, 2);
                let batch = Batch { piece, x: &x, jets: &state(k, 2 * jets), constants: &state(k, constants) };
                self.equations(&batch, &mut out)?;
                Ok(out)
            };
            let (zero, others) = (at(0)?, [at(1)?, at(2)?]);
            if !others.iter().all(|o| same(&zero.jets, &o.jets) && same(&zero.constants, &o.constants)) {
                return Ok(false);
            }
        }
        for (index, condition) in self.conditions.iter().enumerate() {
            let at = |k: usize| -> Result<ConditionValue> {
                let mut out = ConditionValue::default();
                out.reset(&self.layout, condition.places.len());
                let jets = state(k, jets * condition.places.len());
                self.condition(index, &jets, &state(k, constants), &mut out)?;
                Ok(out)
            };
            let (zero, others) = (at(0)?, [at(1)?, at(2)?]);
            if !others.iter().all(|o| same(&zero.jets, &o.jets) && same(&zero.constants, &o.constants)) {
                return Ok(false);
            }
        }
        Ok(true)
    }
}

impl Model for Ready {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        &self.points
    }

    fn linear(&self) -> bool {
        self.linear
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let n = batch.x.len();
        let (j, p) = (self.layout.jets(), self.layout.constants());
        let mut jets = vec![0.0; j];
        for node in 0..n {
            jets.iter_mut().enumerate().for_each(|(k, jet)| *jet = batch.jets[k * n + node]);
            let (x, piece, constants) = (batch.x[node], batch.piece, batch.constants);
            for (e, (_, equation)) in self.equations.iter().enumerate() {
                let evaluate = |first: usize| {
                    equation(&Station::new(&self.layout, x, piece, &jets, constants, Seeds::Window { first, shift: 0 }))
                };
                let residual = sweep(j + p, evaluate, |index, derivative| {
                    if index < j {
                        out.jets[(e * j + index) * n + node] = derivative;
                    } else {
                        out.constants[(e * p + index - j) * n + node] = derivative;
                    }
                });
                out.residual[e * n + node] = residual;
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let j = self.layout.jets();
        let places = &self.conditions[index].places;
        let evaluate = |first: usize| {
            let stations: Vec<Station<'_>> = places
                .iter()
                .enumerate()
                .map(|(k, place)| {
                    let piece = if place.side == Side::Left { place.point.saturating_sub(1) } else { place.point };
                    let piece = piece.min(self.points.len() - 2);
                    let seeds = Seeds::Window { first, shift: k * j };
                    let constants_at = places.len() * j;
                    Station::new(
                        &self.layout,
                        self.points[place.point],
                        piece,
                        &jets[k * j..(k + 1) * j],
                        constants,
                        seeds,
                    )
                    .constants_at(constants_at)
                })
                .collect();
            (self.ties[index])(&stations)
        };
        let total = places.len() * j + constants.len();
        out.residual = sweep(total, evaluate, |index, derivative| {
            if index < places.len() * j {
                out.jets[index] = derivative;
            } else {
                out.constants[index - places.len() * j] = derivative;
            }
        });
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &self.releases
    }

    fn admissible(&self, _x: f64, jets: &[f64], _constants: &[f64]) -> bool {
        let inside = |(u, low, high): &(usize, f64, f64)| {
            let value = jets[self.layout.jet(*u, 0)];
            value > *low && value < *high
        };
        self.limits.iter().all(inside)
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.names[unknown].clone()
    }

    fn equation_name(&self, equation: usize) -> String {
        self.equations[equation].0.clone()
    }
}
