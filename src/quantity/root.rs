//! Places where a profile changes sign.

use super::bracket::bracketed_root;
use super::{Estimate, Probe, check_stretch, spread, stretches};
use crate::error::{Error, Result};
use crate::field::Field;
use crate::model::Profile;

/// A sample of the profile.
#[derive(Debug, Clone, Copy)]
struct Sample {
    element: usize,
    s: f64,
    value: f64,
}

/// All places in [from, to] where the profile changes sign continuously, ascending. A zero at an end of the
/// span, or a jump across zero, is no change of sign.
///
/// # Errors
/// `Argument` for a stretch that is not inside the span; `NotFinite` where the profile has no value.
pub fn roots(field: &Field, profile: &dyn Profile, from: f64, to: f64) -> Result<Vec<Estimate>> {
    check_stretch(field, from, to)?;
    let mut samples: Vec<Sample> = Vec::new();
    for (element, a, b) in stretches(field, from, to) {
        let probe = Probe::new(field, profile, element);
        for s in spread(a, b, probe.samples()) {
            let value = probe.value(s);
            if !value.is_finite() {
                return Err(Error::NotFinite { what: "the expression".into(), x: probe.x(s) });
            }
            samples.push(Sample { element, s, value });
        }
    }
    let size = samples.iter().map(|s| s.value.abs()).fold(0.0, f64::max);
    // Below this a sample is rounding: its sign says nothing.
    let zero = 1e-13 * size;
    let mut roots = Vec::new();
    let mut before: Option<usize> = None;
    for (k, sample) in samples.iter().enumerate() {
        if sample.value.abs() <= zero {
            continue;
        }
        if let Some(b) = before.filter(|b| (samples[*b].value > 0.0) != (sample.value > 0.0)) {
            roots.extend(root_between(field, profile, &samples[b..=k], size)?);
        }
        before = Some(k);
    }
    Ok(roots)
}

/// The root between two samples of opposite sign; those in between, if any, are zero. `None` if the
/// profile jumps across zero.
fn root_between(field: &Field, profile: &dyn Profile, samples: &[Sample], size: f64) -> Result<Option<Estimate>> {
    let (first, last) = (samples[0], samples[samples.len() - 1]);
    if first.element != last.element {
        let jump =
            samples.windows(2).any(|p| p[0].element != p[1].element && (p[0].value - p[1].value).abs() > 1e-9 * size);
        if jump {
            return Ok(None);
        }
        // The sign changes at or beside a joint: look for it on either side.
        for (element, inside) in [(first.element, 1.0), (last.element, -1.0)] {
            let probe = Probe::new(field, profile, element);
            let (near, far) = if inside > 0.0 { (first, 1.0) } else { (last, -1.0) };
            let end = probe.value(far);
            if end != 0.0 && (end > 0.0) != (near.value > 0.0) {
                return refine(&probe, near.s, far, near.value, end).map(Some);
            }
        }
        let x = field.element(first.element).right;
        return Ok(Some(Estimate { value: x, error: 2.0 * f64::EPSILON * x.abs() }));
    }
    let probe = Probe::new(field, profile, first.element);
    refine(&probe, first.s, last.s, first.value, last.value).map(Some)
}

fn refine(probe: &Probe<'_>, a: f64, b: f64, fa: f64, fb: f64) -> Result<Estimate> {
    let s = bracketed_root(|s| probe.value(s), a, b, fa, fb);
    let x = probe.x(s);
    let value = probe.estimate(s)?;
    let half = 0.5 * probe.field.element(probe.element).length();
    let error = (value.error + value.value.abs()) / probe.slope(s).abs();
    let error = if error.is_finite() { error.min(2.0 * half) } else { 2.0 * half };
    Ok(Estimate { value: x, error: error + 2.0 * f64::EPSILON * x.abs() })
}
