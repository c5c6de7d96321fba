//! Integrals along the span.

use super::{Estimate, Probe, check_stretch, stretches};
use crate::error::{Error, Result};
use crate::field::Field;
use crate::legendre::{self, Rule};
use crate::model::Profile;

/// Most halvings of a stretch: enough to corner a kink to the last place.
const DEPTH: usize = 52;
/// Most parts that one stretch may need at a time.
const PARTS: usize = 2000;

/// Integral over [from, to] (to < from: negative), by Gauss rules on each element, halved where the
/// profile has a kink.
///
/// # Errors
/// `Argument` for a stretch that is not inside the span; `NotFinite` where the profile has no value.
pub fn integral(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Estimate> {
    if to < from {
        return integral(field, profile, to, from).map(|e| Estimate { value: -e.value, ..e });
    }
    check_stretch(field, from, to)?;
    if from == to {
        return Ok(Estimate { value: 0.0, error: 0.0 });
    }
    let mut total = Sum::default();
    let mut rule = legendre::gauss(1)?;
    for (element, a, b) in stretches(field, from, to) {
        let count = field.element(element).nodes + 5;
        if rule.len() != count {
            rule = legendre::gauss(count)?;
        }
        stretch(&Probe::new(field, profile, element), &rule, a, b, &mut total)?;
    }
    Ok(Estimate { value: total.value.total(), error: total.error })
}

/// Square root of the integral of the square over [from, to].
///
/// # Errors
/// As [`integral`].
pub fn norm(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Estimate> {
    let sum = integral(field, &Square(profile), from, to)?;
    let value = sum.value.max(0.0).sqrt();
    let error = if value > 0.0 { 0.5 * sum.error / value } else { sum.error.sqrt() };
    Ok(Estimate { value, error })
}

/// The square of a profile.
struct Square<'a>(&'a dyn Profile);

impl Profile for Square<'_> {
    fn tops(&self) -> &[usize] {
        self.0.tops()
    }

    fn value(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        self.0.value(x, piece, jets, constants).powi(2)
    }

    fn slope(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        let (mut inner, mut at) = (Vec::with_capacity(jets.len()), 0);
        for top in self.tops() {
            inner.extend_from_slice(&jets[at..=at + top]);
            at += top + 2;
        }
        2.0 * self.0.value(x, piece, &inner, constants) * self.0.slope(x, piece, jets, constants)
    }
}

/// A compensated sum (Neumaier) with its error.
#[derive(Default)]
struct Sum {
    value: Compensated,
    error: f64,
}

#[derive(Default, Clone, Copy)]
struct Compensated(f64, f64);

impl Compensated {
    fn add(&mut self, term: f64) {
        let sum = self.0 + term;
        self.1 += if self.0.abs() >= term.abs() { (self.0 - sum) + term } else { (term - sum) + self.0 };
        self.0 = sum;
    }

    fn total(&self) -> f64 {
        self.0 + self.1
    }
}

/// Gauss sum, and the sum of sizes, over [a, b] of the reference coordinate.
fn gauss(probe: &Probe<'_>, rule: &Rule, a: f64, b: f64) -> Result<(f64, f64)> {
    let half = 0.25 * (b - a) * probe.field.element(probe.element).length();
    let (mut sum, mut size) = (0.0, 0.0);
    for (s, w) in rule.nodes().iter().zip(rule.weights()) {
        let value = probe.value(0.5 * (a + b) + 0.5 * (b - a) * s);
        if !value.is_finite() {
            return Err(Error::NotFinite { what: "the integrand".into(), x: probe.x(0.5 * (a + b)) });
        }
        sum += w * value;
        size += w * value.abs();
    }
    Ok((half * sum, half * size))
}

fn stretch(probe: &Probe<'_>, rule: &Rule, a: f64, b: f64, total: &mut Sum) -> Result<()> {
    let (whole, size) = gauss(probe, rule, a, b)?;
    // Rounding of the jets, felt in the middle and at both ends of the stretch.
    let mut noise = 0.0f64;
    for s in [a, 0.5 * (a + b), b] {
        noise = noise.max(probe.estimate(s).map_or(0.0, |e| e.error));
    }
    total.error += noise * 0.5 * (b - a) * probe.field.element(probe.element).length() + 2.0 * f64::EPSILON * size;
    let accept = 4.0 * f64::EPSILON * size;
    let mut queue = vec![(a, b, whole, 0)];
    let mut parts = 0;
    while let Some((a, b, whole, depth)) = queue.pop() {
        let middle = 0.5 * (a + b);
        let (left, _) = gauss(probe, rule, a, middle)?;
        let (right, _) = gauss(probe, rule, middle, b)?;
        let gap = (left + right - whole).abs();
        parts += 1;
        if gap <= accept || depth >= DEPTH || parts > PARTS {
            total.value.add(left + right);
            total.error += if gap <= accept { 0.1 * gap } else { gap };
        } else {
            queue.extend([(a, middle, left, depth + 1), (middle, b, right, depth + 1)]);
        }
    }
    Ok(())
}
