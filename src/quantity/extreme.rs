//! Largest and smallest values and their places.

use super::bracket::bracketed_root;
use super::{Estimate, Probe, check_stretch, spread, stretches};
use crate::error::{Error, Result};
use crate::field::Field;
use crate::model::{Profile, Side};

/// The largest or smallest value of a profile and where it is taken. The errors are those of rounding in
/// the evaluation on the field given; those of the field itself come in with `Solution::estimate`.
#[derive(Debug, Clone, PartialEq)]
pub struct Extreme {
    /// Where (the first place, if several share the value).
    pub place: Estimate,
    /// The value there.
    pub value: Estimate,
    /// Set if the place is a break and the value is a one-sided limit there.
    pub side: Option<Side>,
    /// Further places where the value is the same within rounding.
    pub ties: Vec<f64>,
}

/// Largest value over [from, to], ends and one-sided limits at breaks included.
///
/// With `near` the local maximum closest to that place is taken instead of the largest one: companion solutions
/// must answer for the same peak, not for another of nearly the same height.
///
/// # Errors
/// `Argument` for a stretch that is not inside the span; `NotFinite` where the profile has no value.
pub fn maximum(field: &Field, profile: &dyn Profile, from: f64, to: f64, near: Option<f64>) -> Result<Extreme> {
    extreme(field, profile, from, to, near, 1.0)
}

/// Smallest value, otherwise as [`maximum`].
///
/// # Errors
/// As [`maximum`].
pub fn minimum(field: &Field, profile: &dyn Profile, from: f64, to: f64, near: Option<f64>) -> Result<Extreme> {
    extreme(field, profile, from, to, near, -1.0)
}

/// A local extreme: its element, reference coordinate, coordinate and value (sign already applied).
#[derive(Debug, Clone, Copy)]
struct Candidate {
    element: usize,
    s: f64,
    x: f64,
    value: f64,
    /// Found as a root of the slope (else an end of a stretch).
    inner: bool,
}

fn extreme(field: &Field, profile: &dyn Profile, from: f64, to: f64, near: Option<f64>, sign: f64) -> Result<Extreme> {
    check_stretch(field, from, to)?;
    let mut candidates = Vec::new();
    let mut size = 0.0f64;
    for (element, a, b) in stretches(field, from, to) {
        let probe = Probe::new(field, profile, element);
        gather(&probe, a, b, sign, &mut candidates, &mut size)?;
    }
    let largest = candidates.iter().map(|c| c.value).fold(f64::NEG_INFINITY, f64::max);
    let tie = 1e-12 * size;
    let resolution = 1e-9 * (to - from);
    let chosen = match near {
        None => candidates.iter().find(|c| c.value >= largest - tie),
        Some(place) => {
            let closest = candidates.iter().map(|c| (c.x - place).abs()).fold(f64::INFINITY, f64::min);
            let near = candidates.iter().filter(|c| (c.x - place).abs() <= closest + resolution);
            near.max_by(|p, q| p.value.total_cmp(&q.value))
        }
    };
    let chosen = *chosen.ok_or(Error::NotFinite { what: "the expression".into(), x: from })?;
    let mut ties: Vec<f64> = candidates
        .iter()
        .filter(|c| c.value >= largest - tie && (c.x - chosen.x).abs() > 1e-6 * (to - from))
        .map(|c| c.x)
        .collect();
    ties.dedup_by(|b, a| (*b - *a).abs() <= 1e-6 * (to - from));
    let probe = Probe::new(field, profile, chosen.element);
    let value = probe.estimate(chosen.s)?;
    let place = Estimate { value: chosen.x, error: place_error(&probe, &chosen) };
    Ok(Extreme { place, value, side: side_of(field, profile, &chosen, size), ties })
}

/// Ends and inner extremes of one stretch.
fn gather(probe: &Probe<'_>, a: f64, b: f64, sign: f64, candidates: &mut Vec<Candidate>, size: &mut f64) -> Result<()> {
    let mut add = |s: f64, inner: bool| -> Result<()> {
        let (x, value) = (probe.x(s), sign * probe.value(s));
        if !value.is_finite() {
            return Err(Error::NotFinite { what: "the expression".into(), x });
        }
        *size = size.max(value.abs());
        candidates.push(Candidate { element: probe.element, s, x, value, inner });
        Ok(())
    };
    add(a, false)?;
    let slope = |s: f64| sign * probe.slope(s);
    let mut before: Option<(f64, f64)> = None;
    for s in spread(a, b, probe.samples()) {
        let g = slope(s);
        if let Some((s0, g0)) = before {
            // A maximum lies where the slope turns from rising to falling.
            if g0 > 0.0 && g <= 0.0 {
                let top = if g == 0.0 { s } else { bracketed_root(slope, s0, s, g0, g) };
                add(top, true)?;
            }
        }
        if g.is_finite() {
            before = Some((s, g));
        }
    }
    add(b, false)
}

/// Rounding of the place: noise of the slope over its rate of change.
fn place_error(probe: &Probe<'_>, chosen: &Candidate) -> f64 {
    let last_place = 2.0 * f64::EPSILON * chosen.x.abs();
    if !chosen.inner {
        return last_place;
    }
    let Ok(slope) = probe.slope_estimate(chosen.s) else { return last_place };
    let step = 1e-5;
    let half = 0.5 * probe.field.element(probe.element).length();
    let (left, right) = ((chosen.s - step).max(-1.0), (chosen.s + step).min(1.0));
    let curvature = (probe.slope(right) - probe.slope(left)) / ((right - left) * half);
    let error = (slope.error + slope.value.abs()) / curvature.abs();
    last_place + if error.is_finite() { error.min(2.0 * half) } else { 2.0 * half }
}

/// The side of a break from which an extreme is a limit; `None` where the profile is continuous.
fn side_of(field: &Field, profile: &dyn Profile, chosen: &Candidate, size: f64) -> Option<Side> {
    let element = field.element(chosen.element);
    let [from, to] = field.mesh.span();
    let (side, other, s) = if chosen.x == element.right && chosen.x < to {
        (Side::Left, chosen.element + 1, -1.0)
    } else if chosen.x == element.left && chosen.x > from {
        (Side::Right, chosen.element.checked_sub(1)?, 1.0)
    } else {
        return None;
    };
    let beyond = Probe::new(field, profile, other).value(s);
    let own = Probe::new(field, profile, chosen.element).value(chosen.s);
    ((beyond - own).abs() > 1e-9 * size).then_some(side)
}
