//! Asked numbers: values, extremes, places, integrals, each with its bar.
//!
//! The functions here work on one field and report the rounding of their own evaluation; what the field itself
//! is worth comes in with [`crate::solve::Solution::estimate`].

mod bracket;
mod extreme;
mod integral;
mod root;

pub use extreme::{Extreme, maximum, minimum};
pub use integral::{integral, norm};
pub use root::roots;

use crate::error::{Error, Result};
use crate::field::Field;
use crate::model::{Profile, Side};

/// A value and a bound for its error, in the same unit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Estimate {
    /// The value.
    pub value: f64,
    /// Bound meant to hold: |true - value| <= error.
    pub error: f64,
}

/// Value of a profile at x; at a break from the side given.
///
/// # Errors
/// `NotFinite` where the profile has no value.
pub fn value_at(field: &Field, profile: &dyn Profile, x: f64, side: Side) -> Result<Estimate> {
    let element = field.locate(x, side);
    Probe::new(field, profile, element).estimate(field.element(element).reference(x))
}

/// A profile on one element.
struct Probe<'a> {
    field: &'a Field,
    profile: &'a dyn Profile,
    element: usize,
    piece: usize,
    /// Derivatives that the value needs, and one more of each for the slope.
    tops: &'a [usize],
    beyond: Vec<usize>,
}

impl<'a> Probe<'a> {
    fn new(field: &'a Field, profile: &'a dyn Profile, element: usize) -> Self {
        let tops = profile.tops();
        let piece = field.element(element).piece;
        Self { field, profile, element, piece, tops, beyond: tops.iter().map(|t| t + 1).collect() }
    }

    fn x(&self, s: f64) -> f64 {
        self.field.element(self.element).coordinate(s)
    }

    fn value(&self, s: f64) -> f64 {
        let jets = self.field.jets(self.element, s, self.tops);
        self.profile.value(self.x(s), self.piece, &jets, &self.field.constants)
    }

    /// d/dx
    fn slope(&self, s: f64) -> f64 {
        let jets = self.field.jets(self.element, s, &self.beyond);
        self.profile.slope(self.x(s), self.piece, &jets, &self.field.constants)
    }

    /// Value with its rounding: the noise of each jet times the response to it.
    fn estimate(&self, s: f64) -> Result<Estimate> {
        let jets = self.field.jets(self.element, s, self.tops);
        let noise = self.field.noise(self.element, self.tops);
        self.felt(s, jets, &noise, &|x, jets| self.profile.value(x, self.piece, jets, &self.field.constants))
    }

    /// Slope with its rounding.
    fn slope_estimate(&self, s: f64) -> Result<Estimate> {
        let jets = self.field.jets(self.element, s, &self.beyond);
        let noise = self.field.noise(self.element, &self.beyond);
        self.felt(s, jets, &noise, &|x, jets| self.profile.slope(x, self.piece, jets, &self.field.constants))
    }

    fn felt(&self, s: f64, mut jets: Vec<f64>, noise: &[f64], f: &dyn Fn(f64, &[f64]) -> f64) -> Result<Estimate> {
        // The response is felt by steps large against the rounding of f itself.
        const LEVER: f64 = 4096.0;
        let x = self.x(s);
        let value = f(x, &jets);
        if !value.is_finite() {
            return Err(Error::NotFinite { what: "the expression".into(), x });
        }
        let mut error = 0.0;
        for (k, noise) in noise.iter().enumerate() {
            let kept = jets[k];
            jets[k] = kept + LEVER * noise;
            let moved = f(x, &jets);
            if moved.is_finite() {
                error += (moved - value).abs() / LEVER;
            }
            jets[k] = kept;
        }
        Ok(Estimate { value, error })
    }

    /// Number of samples that catches every turn of a polynomial of the element's degree, and some more.
    fn samples(&self) -> usize {
        2 * self.field.element(self.element).nodes + 9
    }
}

/// Elements that overlap [from, to] and the part of each, in its reference coordinate.
fn stretches(field: &Field, from: f64, to: f64) -> Vec<(usize, f64, f64)> {
    let (first, last) = (field.locate(from, Side::Right), field.locate(to, Side::Left));
    (first..=last.max(first))
        .map(|e| (e, field.element(e).reference(from), field.element(e).reference(to)))
        .filter(|(e, a, b)| a < b || (from == to && *e == first))
        .collect()
}

/// From `a` to `b`, denser towards the ends (Chebyshev extreme points).
fn spread(a: f64, b: f64, count: usize) -> impl Iterator<Item = f64> {
    let last = count.max(2) - 1;
    (0..=last).map(move |k| match k {
        0 => a,
        k if k == last => b,
        k => {
            let t = 0.5 * (1.0 - (std::f64::consts::PI * k as f64 / last as f64).cos());
            a + (b - a) * t
        }
    })
}

fn check_stretch(field: &Field, from: f64, to: f64) -> Result<()> {
    let [a, b] = field.mesh.span();
    if from.is_finite() && to.is_finite() && a <= from && from <= to && to <= b {
        return Ok(());
    }
    Err(Error::Argument { what: "stretch", value: format!("{from} .. {to}"), range: "ascending, inside the span" })
}
