//! Nodes and weights of short rules, by Newton's iteration.
//!
//! Seen from an end at angle 0, x = cos(angle). Newton's iteration runs on the angle, with the Legendre values from the
//! difference recurrence
//! (k+1) (P_(k+1) - P_k) = k (P_k - P_(k-1)) - (2k+1) (1-x) P_k, 1 - x = 2 sin^2(angle/2),
//! which keeps its relative accuracy near the end; its last step is taken in double-double numbers, so that
//! angle and weight are the exact ones, rounded.

use std::f64::consts::PI as PI_F64;
use std::ops::{Add, Div, Mul, Sub};

use super::double::Double;
use super::zero::{Ends, Zero};

/// Arithmetic that plain and double-double numbers share.
trait Real:
    Copy
    + From<f64>
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Mul<f64, Output = Self>
    + Div<f64, Output = Self>
{
    fn versine(self) -> Self;
    fn root(self) -> Self;
}

impl Real for f64 {
    fn versine(self) -> Self {
        let half = (0.5 * self).sin();
        2.0 * half * half
    }
    fn root(self) -> Self {
        self.sqrt()
    }
}

impl Real for Double {
    fn versine(self) -> Self {
        Double::versine(self)
    }
    fn root(self) -> Self {
        self.sqrt()
    }
}

/// Legendre values at an angle; `slope` is by the angle.
struct Sample<T> {
    distance: T,
    sine: T,
    /// P_n and its slope.
    last: T,
    last_slope: T,
    /// P_(n-1) and its slope.
    previous: T,
    previous_slope: T,
}

fn sample<T: Real>(degree: usize, angle: T) -> Sample<T> {
    let distance = angle.versine();
    let mut value = T::from(1.0);
    let mut step = T::from(0.0);
    let mut previous = value;
    for k in 0..degree {
        let k = k as f64;
        step = (step * k - distance * (2.0 * k + 1.0) * value) / (k + 1.0);
        previous = value;
        value = value + step;
    }
    let sine = (distance * (T::from(2.0) - distance)).root();
    let degree = degree as f64;
    // (1-x^2) P_n' = n (P_(n-1) - x P_n) = n (x P_(n-1) - P_n) with n - 1 for n
    Sample {
        last_slope: (step - distance * value) * degree / sine,
        previous_slope: (step + distance * previous) * degree / sine,
        distance,
        sine,
        last: value,
        previous,
    }
}

/// The function whose zeros are the inner nodes, and its slope by the angle.
fn target<T: Real>(n: usize, ends: Ends, at: &Sample<T>) -> (T, T) {
    match (ends.near, ends.far) {
        (false, false) => (at.last, at.last_slope),
        // P_(n-1)': the sample is of degree n - 1. Legendre's equation gives the second derivative.
        (true, true) => {
            let cosine = T::from(1.0) - at.distance;
            let eigenvalue = (n - 1) as f64 * n as f64;
            let curvature = T::from(0.0) - cosine * at.last_slope / at.sine - at.last * eigenvalue;
            (at.last_slope, curvature)
        }
        (true, false) => (at.last - at.previous, at.last_slope - at.previous_slope),
        (false, true) => (at.last + at.previous, at.last_slope + at.previous_slope),
    }
}

/// The k-th inner node, k = 1, 2, ..., by Newton's iteration.
pub(crate) fn zero(n: usize, ends: Ends, k: usize) -> Zero {
    let degree = if ends.near && ends.far { n - 1 } else { n };
    let mut angle = start(n, ends, k);
    // From the start (error below 1e-2 of the angle) four steps are the most ever seen.
    for _ in 0..8 {
        let (value, slope) = target(n, ends, &sample(degree, angle));
        let step = value / slope;
        angle -= step;
        // Quadratic: the next error is the square of this step.
        if step.abs() < 1e-9 * angle {
            break;
        }
    }
    let angle = Double::from(angle);
    let at = sample(degree, angle);
    let (value, slope) = target(n, ends, &at);
    let step = Double::from(0.0) - value / slope;
    let angle = angle + step;
    let distance = angle.versine();
    let points = n as f64;
    // The values a weight needs, moved to the new angle; the step is near 1e-16, its square nothing.
    let weight = match (ends.near, ends.far) {
        (false, false) => {
            let cosine = Double::from(1.0) - at.distance;
            let curvature = Double::from(0.0) - cosine * at.last_slope / at.sine - at.last * (points * (points + 1.0));
            let slope = at.last_slope + step * curvature;
            Double::from(2.0) / (slope * slope)
        }
        (true, true) => {
            let value = at.last + step * at.last_slope;
            Double::from(2.0) / (value * value * (points * (points - 1.0)))
        }
        (near_fixed, _) => {
            let value = at.previous + step * at.previous_slope;
            let from_free_end = if near_fixed { Double::from(2.0) - distance } else { distance };
            from_free_end / (value * value * (points * points))
        }
    };
    Zero { angle, distance, weight }
}

/// First guess of the k-th zero's angle.
///
/// The nodes are zeros of the Jacobi polynomial with alpha = 1 at an end that is a node, else 0. With
/// c = 1/4 - alpha^2, the function sqrt(sin) x polynomial obeys
/// u'' + (N^2 + c_near / (4 sin^2(t/2)) + c_far / (4 cos^2(t/2))) u = 0, Bessel's equation in disguise, so
/// t + (c_near (1/t - cot(t/2)/2) + c_far tan(t/2)/2) / (2 N^2) = j/N up to N^-4, j a zero of the Bessel function J_alpha
/// (McMahon's expansion, NIST DLMF 10.21.19).
fn start(n: usize, ends: Ends, k: usize) -> f64 {
    let order = |fixed: bool| if fixed { 1.0 } else { 0.0 };
    let (near, far) = (order(ends.near), order(ends.far));
    let inner = n as f64 - near - far;
    let big = inner + 0.5 * (near + far + 1.0);
    let mu = 4.0 * near * near;
    let b = (k as f64 + 0.5 * near - 0.25) * PI_F64;
    let eight = 8.0 * b;
    let bessel = b - (mu - 1.0) / eight - 4.0 * (mu - 1.0) * (7.0 * mu - 31.0) / (3.0 * eight.powi(3));
    let t = bessel / big;
    let tangent = (0.5 * t).tan();
    let c = |order: f64| 0.25 - order * order;
    t - (c(near) * (1.0 / t - 0.5 / tangent) + c(far) * 0.5 * tangent) / (2.0 * big * big)
}
