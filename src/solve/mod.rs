//! Drivers: from a model to a solution.

mod boundary;
mod eigen;
mod march;
mod nonlinear;
mod path;
mod solver;
mod viscosity;

pub use boundary::{boundary, on_mesh};
pub use eigen::{Ask, Count, Discarded, Method, Mode, Reason, Spectrum, eigen, eigen_complex};

pub use path::{Path, PathEnd, PathPoint, PathStep, Route, path};

use crate::error::Result;
use crate::evidence::bars::{self, Companions};
use crate::field::Field;
use crate::model::{Profile, Side};
use crate::quantity::{self, Estimate, Extreme};
use nalgebra::DVector;
use std::cell::Cell;

/// Called now and then during a solve; returning false stops it with `Error::Interrupted`.
pub type Watch<'a> = &'a (dyn Fn(Progress) -> bool + Sync);

/// How far a solve has come.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Progress {
    /// Pass, from 1.
    pub pass: usize,
    /// Elements of the mesh at hand.
    pub elements: usize,
    /// Elements done in this pass.
    pub done: usize,
}

/// What is asked of a solve.
#[derive(Clone, Copy)]
pub struct Settings<'a> {
    /// Error allowed, relative: 1e-14 to 1e-2.
    pub relative: f64,
    /// Largest number of elements.
    pub most_elements: usize,
    /// Progress and interruption.
    pub watch: Option<Watch<'a>>,
}

impl Default for Settings<'_> {
    /// Ten digits, at most 200,000 elements, no watch.
    fn default() -> Self {
        Self { relative: 1e-10, most_elements: 200_000, watch: None }
    }
}

/// A solution with everything that its error bars rest on.
#[derive(Debug, Clone)]
pub struct Solution {
    /// The answer: n + 4 nodes an element.
    pub field: Field,
    /// Condition number of the scaled closing system: by how much relative changes of the data can be
    /// amplified beyond what the elements themselves do.
    pub condition: f64,
    /// Passes of the mesh adaptation.
    pub passes: usize,
    /// Whether the last mesh resolved the solution.
    pub resolved: bool,
    companions: Companions,
}

impl Solution {
    /// A number made from the solution, with its bar.
    ///
    /// `number` is evaluated on the answer and on companion solutions (fewer nodes, changed data); it returns
    /// the value with the rounding error that its own arithmetic may have added. What comes out is a bound
    /// meant to hold: |true - value| <= error.
    ///
    /// # Errors
    /// Those of `number`, and `NotFinite` when value or bar is not finite.
    pub fn estimate(&self, number: impl Fn(&Field) -> Result<Estimate>) -> Result<Estimate> {
        bars::estimate(&self.field, &self.companions, &number)
    }

    /// The same with all its fields replaced.
    fn mapped(self, map: impl Fn(&Field) -> Field) -> Self {
        let all = |fields: &[Field]| fields.iter().map(&map).collect();
        let companions = Companions { coarser: all(&self.companions.coarser), nudged: all(&self.companions.nudged) };
        Self { field: map(&self.field), companions, ..self }
    }

    /// An unknown constant with its bar.
    ///
    /// # Errors
    /// `Argument` if it does not exist, `NotFinite`.
    pub fn constant(&self, index: usize) -> Result<Estimate> {
        if index >= self.field.constants.len() {
            return Err(crate::error::Error::Argument {
                what: "constant",
                value: index.to_string(),
                range: "one that exists",
            });
        }
        self.estimate(|field| Ok(Estimate { value: field.constants[index], error: 0.0 }))
    }

    /// Puts the values of held constants behind the unknown constants of all fields, for numbers that depend on them.
    pub fn carry(&mut self, values: &[f64]) {
        let others = self.companions.coarser.iter_mut().chain(&mut self.companions.nudged);
        for field in std::iter::once(&mut self.field).chain(others) {
            field.constants.truncate(field.layout.constants());
            field.constants.extend(values);
        }
    }

    /// Adds a companion: another approximation of the same solution, from which no number may differ unnoticed.
    pub fn accompany(&mut self, field: Field) {
        self.companions.coarser.push(field);
    }

    /// The solution with fewer nodes an element that the answer is compared with.
    pub fn base(&self) -> &Field {
        &self.companions.coarser[0]
    }

    /// u_i^(k) at x with its bar; at a break from the side given. k up to the order of the unknown.
    ///
    /// # Errors
    /// `NotFinite`.
    pub fn value(&self, unknown: usize, order: usize, x: f64, side: Side) -> Result<Estimate> {
        self.estimate(|field| {
            let element = field.locate(x, side);
            let mut tops = vec![0; field.layout.unknowns()];
            tops[unknown] = order;
            let error = field.noise(element, &tops)[unknown + order];
            Ok(Estimate { value: field.value(unknown, order, x, side), error })
        })
    }

    /// u_i^(k) at many places, and the bars; at a break from the left.
    ///
    /// # Errors
    /// `NotFinite`.
    ///
    /// # Example
    /// ```
    /// use nalgebra::DVector;
    /// use spanwise::{model::Side, problem::Problem};
    ///
    /// let mut p = Problem::new(0.0, 1.0);
    /// let y = p.unknown("y", 1);
    /// p.equation("growth", move |at| at.d(y, 1) - at.d(y, 0));
    /// p.condition("start", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
    /// let solution = p.solve(&Default::default())?;
    /// let x = DVector::from_column_slice(&[0.25, 0.5, 1.0]);
    /// let (values, bars) = solution.sample(y, 0, &x)?;
    /// assert!((values - x.map(f64::exp)).abs().iter().zip(&bars).all(|(e, b)| e <= b));
    /// # Ok::<(), spanwise::error::Error>(())
    /// ```
    pub fn sample(&self, unknown: usize, order: usize, x: &DVector<f64>) -> Result<(DVector<f64>, DVector<f64>)> {
        let at = x.iter().map(|x| self.value(unknown, order, *x, Side::Left)).collect::<Result<Vec<_>>>()?;
        let pick = |f: fn(&Estimate) -> f64| DVector::from_iterator(at.len(), at.iter().map(f));
        Ok((pick(|e| e.value), pick(|e| e.error)))
    }

    /// Value of a profile at x with its bar; at a break from the side given.
    ///
    /// # Errors
    /// `NotFinite`.
    pub fn value_of(&self, profile: &dyn Profile, x: f64, side: Side) -> Result<Estimate> {
        self.estimate(|field| quantity::value_at(field, profile, x, side))
    }

    /// Integral of a profile over [from, to] with its bar.
    ///
    /// # Errors
    /// Those of [`quantity::integral`].
    pub fn integral(&self, profile: &dyn Profile, from: f64, to: f64) -> Result<Estimate> {
        self.estimate(|field| quantity::integral(field, profile, from, to))
    }

    /// Largest value of a profile over [from, to] and its place, both with their bars.
    ///
    /// # Errors
    /// Those of [`quantity::maximum`].
    pub fn maximum(&self, profile: &dyn Profile, from: f64, to: f64) -> Result<Extreme> {
        self.extreme(&|field, near| quantity::maximum(field, profile, from, to, near))
    }

    /// Smallest value, otherwise as [`Solution::maximum`].
    ///
    /// # Errors
    /// Those of [`quantity::minimum`].
    pub fn minimum(&self, profile: &dyn Profile, from: f64, to: f64) -> Result<Extreme> {
        self.extreme(&|field, near| quantity::minimum(field, profile, from, to, near))
    }

    fn extreme(&self, find: &dyn Fn(&Field, Option<f64>) -> Result<Extreme>) -> Result<Extreme> {
        // The answer is asked first; its companions must answer for the same peak.
        let near = Cell::new(None);
        let place = self.estimate(|field| {
            let found = find(field, near.get())?.place;
            near.set(near.get().or(Some(found.value)));
            Ok(found)
        })?;
        let first = Cell::new(None);
        let value = self.estimate(|field| {
            let found = find(field, first.get())?;
            first.set(first.get().or(Some(found.place.value)));
            Ok(found.value)
        })?;
        Ok(Extreme { place, value, ..find(&self.field, None)? })
    }

    /// The n-th place (from 1) in [from, to] where a profile changes sign, with its bar; `None` if there are fewer.
    ///
    /// # Errors
    /// Those of [`quantity::roots`].
    pub fn root(&self, profile: &dyn Profile, n: usize, from: f64, to: f64) -> Result<Option<Estimate>> {
        if quantity::roots(&self.field, profile, from, to)?.len() < n || n == 0 {
            return Ok(None);
        }
        let missing = || crate::error::Error::NotFinite { what: "a place of change of sign".into(), x: from };
        self.estimate(|field| quantity::roots(field, profile, from, to)?.get(n - 1).copied().ok_or_else(missing))
            .map(Some)
    }

    /// Square root of the integral of the square of a profile over [from, to], with its bar.
    ///
    /// # Errors
    /// Those of [`quantity::integral`].
    pub fn norm(&self, profile: &dyn Profile, from: f64, to: f64) -> Result<Estimate> {
        self.estimate(|field| quantity::norm(field, profile, from, to))
    }
}
