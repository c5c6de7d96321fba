//! How it is made sure that no mode is missing.

use super::oscillation::Oscillator;
use super::{Ask, Count, Method, Mode, Task};
use crate::error::{Error, Result};
use crate::linear::Library;
use crate::spectrum::dense::Dense;
use crate::spectrum::winding::Determinant;
use num_complex::Complex64;
use std::cell::Cell;
use std::f64::consts::PI;

/// A region in which modes are counted, with a boundary half way between wanted and unwanted ones.
#[derive(Debug, Clone, Copy)]
enum Region {
    /// From, to, lowest and highest imaginary part.
    Box([f64; 4]),
    /// Centre and radius.
    Disc(Complex64, f64),
}

impl Region {
    fn holds(&self, z: Complex64) -> bool {
        match *self {
            Region::Box([a, b, c, d]) => (a..=b).contains(&z.re) && (c..=d).contains(&z.im),
            Region::Disc(centre, radius) => (z - centre).norm() <= radius,
        }
    }

    fn bounds(&self) -> [f64; 4] {
        match *self {
            Region::Box(bounds) => bounds,
            Region::Disc(z, r) => [z.re - r, z.re + r, z.im - r, z.im + r],
        }
    }

    /// Its boundary, anticlockwise, for t in [0, 1].
    fn contour(&self, t: f64) -> Complex64 {
        match *self {
            Region::Disc(centre, radius) => centre + Complex64::from_polar(radius, 2.0 * PI * t),
            Region::Box([a, b, c, d]) => {
                let corners = [Complex64::new(a, c), Complex64::new(b, c), Complex64::new(b, d), Complex64::new(a, d)];
                let side = ((4.0 * t) as usize).min(3);
                let share = 4.0 * t - side as f64;
                // Denser towards the corners and the real axis, where the zeros are.
                let share = 0.5 * (1.0 - (PI * share).cos());
                corners[side] + (corners[(side + 1) % 4] - corners[side]) * share
            }
        }
    }
}

impl Task<'_> {
    /// Counts the modes independently of the search. `beyond` holds further eigenvalues seen, in the order asked.
    pub(super) fn count(&self, modes: &[Mode], beyond: &[Complex64]) -> Result<Count> {
        let mut count =
            Count { checked: None, found: modes.len(), counted: None, method: Method::None, region: [f64::NAN; 4] };
        if let Some(oscillator) = Oscillator::new(&self.pencil, self.open)
            && let Some([from, to]) = self.interval(modes, beyond)
        {
            let upper = oscillator.count(self, to);
            let lower = if from.is_finite() { oscillator.count(self, from) } else { Ok(0) };
            match (lower, upper) {
                (Err(Error::Interrupted), _) | (_, Err(Error::Interrupted)) => return Err(Error::Interrupted),
                (Ok(lower), Ok(upper)) => {
                    let inside = |m: &&Mode| m.value.re >= from && m.value.re <= to;
                    count.found = modes.iter().filter(inside).count();
                    let counted = upper.saturating_sub(lower);
                    let region = [from, to, f64::NEG_INFINITY, f64::INFINITY];
                    let checked = Some(counted == count.found);
                    return Ok(Count { checked, counted: Some(counted), method: Method::Oscillation, region, ..count });
                }
                // A count that fails leaves the other way.
                _ => {}
            }
        }
        let Some(region) = self.region(modes, beyond) else { return Ok(count) };
        // The mesh of the mode with the largest eigenvalue resolves all of the region.
        let Some(largest) = modes.iter().max_by(|a, b| a.value.norm().total_cmp(&b.value.norm())) else {
            return Ok(count);
        };
        let mesh = largest.solution.base().mesh.clone();
        let mut library = Library::new(self.pencil.layout.orders().iter().copied().max().unwrap_or(0));
        let dense = Dense::new(&self.pencil, mesh, &self.scale, &mut library)?;
        let determinant = Determinant::new(&dense);
        let interrupted = Cell::new(false);
        let mut budget = || {
            let on = self.tick(0).is_ok();
            interrupted.set(!on);
            on
        };
        let turns = determinant.winding(&|t| region.contour(t), &mut budget);
        if interrupted.get() {
            return Err(Error::Interrupted);
        }
        count.found = self.all_values(modes).iter().filter(|v| region.holds(**v)).count();
        count.region = region.bounds();
        count.method = Method::Argument;
        if let Some(turns) = turns {
            // Turns the wrong way are a sign of a contour that was not followed: no count.
            count.counted = usize::try_from(turns).ok();
            count.checked = count.counted.map(|counted| counted == count.found);
        }
        Ok(count)
    }

    /// All eigenvalues that the modes stand for.
    fn all_values(&self, modes: &[Mode]) -> Vec<Complex64> {
        let mut values: Vec<Complex64> = modes.iter().map(|m| m.value).collect();
        if matches!(self.ask, Ask::Pairs(_)) && !self.pencil.complex {
            values.extend(modes.iter().map(|m| m.value.conj()));
        }
        values
    }

    /// Real interval for the oscillation count.
    fn interval(&self, modes: &[Mode], beyond: &[Complex64]) -> Option<[f64; 2]> {
        let real = |z: Complex64| if z.im.abs() <= 1e-6 * z.norm() { Some(z.re) } else { None };
        let values: Option<Vec<f64>> = modes.iter().map(|m| real(m.value)).collect();
        let values = values?;
        let highest = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let margin = |modes: &[Mode]| modes.iter().map(|m| m.error).fold(0.0, f64::max);
        match self.ask {
            Ask::Lowest(_) => {
                let next = beyond.iter().copied().filter_map(real).find(|v| *v > highest + 10.0 * margin(modes));
                let to = between(highest, next.unwrap_or(highest + 0.1 * highest.abs().max(self.pencil.size)));
                Some([f64::NEG_INFINITY, to])
            }
            Ask::Between(a, b) => Some([a, b]),
            Ask::Near(z, _) if z.im == 0.0 => {
                let radius = self.radius(modes, beyond, z)?;
                Some([z.re - radius, z.re + radius])
            }
            _ => None,
        }
    }

    /// Half way between the farthest wanted and the nearest unwanted eigenvalue.
    fn radius(&self, modes: &[Mode], beyond: &[Complex64], centre: Complex64) -> Option<f64> {
        let far = modes.iter().map(|m| (m.value - centre).norm()).fold(0.0, f64::max);
        let next = beyond.iter().map(|v| (v - centre).norm()).find(|d| *d > far * (1.0 + 1e-6));
        let next = next.unwrap_or(1.2 * far.max(1e-3 * self.pencil.size));
        (!modes.is_empty()).then(|| between(far, next))
    }

    fn region(&self, modes: &[Mode], beyond: &[Complex64]) -> Option<Region> {
        let part = |f: &dyn Fn(Complex64) -> f64| {
            let values = modes.iter().map(|m| f(m.value));
            values.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)))
        };
        let ((left, right), (low, high)) = (part(&|z| z.re), part(&|z| z.im));
        // Half way to the next one, and some way further on the other sides.
        let reach = (right - left).max(high - low).max(1e-2 * left.abs().max(right.abs())).max(1e-3 * self.pencil.size);
        let next = |f: &dyn Fn(Complex64) -> f64, from: f64| {
            beyond.iter().map(|v| f(*v)).find(|v| (v - from).abs() > 1e-6 * reach)
        };
        let (low, high) = if self.pencil.complex || !self.ask.paired() {
            (low, high)
        } else {
            (-low.abs().max(high), low.abs().max(high))
        };
        match self.ask {
            Ask::Between(a, b) => Some(Region::Box([a, b, low - 0.5 * (b - a), high + 0.5 * (b - a)])),
            Ask::Near(z, _) => Some(Region::Disc(z, self.radius(modes, beyond, z)?)),
            Ask::Pairs(_) => Some(Region::Disc(Complex64::ZERO, self.radius(modes, beyond, Complex64::ZERO)?)),
            _ if modes.is_empty() => None,
            Ask::Lowest(_) => {
                let edge = between(right, next(&|z| z.re, right).filter(|v| *v > right).unwrap_or(right + 0.1 * reach));
                Some(Region::Box([left - reach, edge, low - 0.5 * reach, high + 0.5 * reach]))
            }
            Ask::LargestReal(_) => {
                let edge = between(left, next(&|z| z.re, left).filter(|v| *v < left).unwrap_or(left - 0.1 * reach));
                Some(Region::Box([edge, right + reach, low - 0.5 * reach, high + 0.5 * reach]))
            }
            Ask::LargestImaginary(_) => {
                let edge = between(low, next(&|z| z.im, low).filter(|v| *v < low).unwrap_or(low - 0.1 * reach));
                Some(Region::Box([left - reach, right + reach, edge, high + reach]))
            }
        }
    }
}

/// The middle, off centre by an odd share so that nothing symmetric is hit.
fn between(a: f64, b: f64) -> f64 {
    a + 0.4637 * (b - a)
}
