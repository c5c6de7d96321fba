//! Damped Newton iteration on piecewise polynomials.
//!
//! A nonlinear model is replaced by its linearisation about a field, which is a linear model like any other: the
//! whole of [`crate::linear`] and [`crate::adapt`] works on it. The iterate may live on any mesh; the step is
//! solved on the mesh at hand.

mod linearisation;

pub(crate) use linearisation::Linearisation;

use crate::error::{Error, Result};
use crate::field::Field;

/// Smallest damping factor that is tried before the iteration is given up.
const LEAST_DAMPING: f64 = 1e-6;

/// Steps this short that bring nothing nearer are rounding: the problem is that sensitive, and the bars will say so.
const STALL: f64 = 1e-6;

/// How an iteration ended.
#[derive(Debug, Clone)]
pub(crate) struct Iteration {
    /// The last iterate.
    pub field: Field,
    /// Why it did not converge; `None` if it did.
    pub failure: Option<String>,
}

/// What the iteration needs from the solver: one linear solve of a linearised model.
pub(crate) trait Stepper {
    /// Solution of the model linearised about `jacobian`, with the residual of `residual`.
    fn solve(&mut self, jacobian: &Field, residual: &Field) -> Result<Field>;
    /// The same field on the mesh at hand.
    fn transfer(&mut self, field: &Field) -> Result<Field>;
    /// Whether a field lies where the equations make sense.
    fn admissible(&self, field: &Field) -> bool;
}

/// Affine-covariant damped Newton iteration (Deuflhard, Newton Methods for Nonlinear Problems, 2004, ch. 3):
/// a step u + l*d is accepted when the simplified correction at its end, made with the old Jacobian, is shorter than
/// (1 - l/4) times d; l is predicted from the last one and halved until that holds.
///
/// Stops when a full step is shorter than `wanted` (relative), or when rounding stops it from shrinking; with a failure
/// when the damping factor becomes too small or the steps are used up.
///
/// # Errors
/// Those of the linear solves.
pub(crate) fn newton(stepper: &mut dyn Stepper, start: &Field, wanted: f64, most: usize) -> Result<Iteration> {
    let mut field = stepper.transfer(start)?;
    let mut damping = 1.0f64;
    let mut before: Option<(f64, f64)> = None;
    for step in 1..=most {
        let full = match stepper.solve(&field, &field) {
            Ok(full) => full,
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(error) => return Ok(failed(field, &error.to_string(), step)),
        };
        let length = distance(&full, &field, &field);
        if !length.is_finite() {
            return Ok(failed(field, "a step is not finite", step));
        }
        if length <= wanted && stepper.admissible(&full) {
            return Ok(Iteration { field: full, failure: None });
        }
        if let Some((old, simplified)) = before.filter(|b| b.1 > 0.0) {
            // Prediction from the change between simplified and true correction.
            let change = (length - simplified).abs().max(1e-3 * length);
            damping = (old * simplified / (change * length)).min(1.0);
        }
        damping = damping.clamp(LEAST_DAMPING, 1.0);
        loop {
            let trial = field.combined(&full, damping);
            let simplified = simplified_correction(stepper, &field, &trial)?;
            match simplified {
                Some(simplified) if simplified <= (1.0 - 0.25 * damping) * length => {
                    // Contraction that stalls at rounding is convergence too.
                    let stalled = damping == 1.0 && length < 1e-9 && simplified > 0.25 * length;
                    field = trial;
                    if stalled || (damping == 1.0 && simplified <= wanted) {
                        return Ok(Iteration { field, failure: None });
                    }
                    before = Some((damping * length, simplified));
                    break;
                }
                _ if length < 1e-10 || (length < STALL && damping < 0.1) => {
                    return Ok(Iteration { field, failure: None });
                }
                _ => damping *= 0.5,
            }
            if damping < LEAST_DAMPING {
                return Ok(failed(field, "no step of any length brings the solution nearer", step));
            }
        }
    }
    Ok(failed(field, "the steps did not become small", most))
}

/// Length of the correction at a trial point with the old Jacobian; `None` where the equations make no sense.
fn simplified_correction(stepper: &mut dyn Stepper, field: &Field, trial: &Field) -> Result<Option<f64>> {
    if !stepper.admissible(trial) {
        return Ok(None);
    }
    match stepper.solve(field, trial) {
        Ok(next) => Ok(Some(distance(&next, trial, field)).filter(|d| d.is_finite())),
        Err(Error::Interrupted) => Err(Error::Interrupted),
        Err(_) => Ok(None),
    }
}

fn failed(field: Field, what: &str, step: usize) -> Iteration {
    Iteration { field, failure: Some(format!("Newton's iteration stopped at step {step}: {what}")) }
}

/// Distance of two fields on the same mesh, relative to the size of a third: root of the mean square over all
/// states and constants.
fn distance(a: &Field, b: &Field, size: &Field) -> f64 {
    let difference = a.minus(b);
    let layout = &a.layout;
    let length = a.mesh.length();
    let (mut sum, mut count) = (0.0, 0.0f64);
    for (i, &m) in layout.orders().iter().enumerate() {
        let own = |f: &Field, k: usize| f.size(i, k);
        let floor = (0..=m).map(|k| own(size, k).max(own(a, k)) * length.powi(k as i32)).fold(0.0, f64::max);
        for k in 0..m.max(1) {
            let scale = own(size, k).max(own(a, k)).max(1e-8 * floor / length.powi(k as i32));
            if scale > 0.0 {
                sum += (own(&difference, k) / scale).powi(2);
                count += 1.0;
            }
        }
    }
    for (c, d) in a.constants.iter().zip(&b.constants) {
        let scale = c.abs().max(d.abs());
        if scale > 0.0 {
            sum += ((c - d) / scale).powi(2);
            count += 1.0;
        }
    }
    (sum / count.max(1.0)).sqrt()
}
