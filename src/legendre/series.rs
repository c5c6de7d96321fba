//! Values and sums of Legendre polynomials, and the calculus of their coefficients.

/// P_0(s), ..., P_degree(s).
///
/// By the difference recurrence from the nearer end,
/// (k+1) (P_(k+1) - P_k) = k (P_k - P_(k-1)) - (2k+1) (1-|s|) P_k, and
/// P_k(-s) = (-1)^k P_k(s). Absolute error of P_k below (2 + sqrt(k)) eps on [-1, 1], eps = 2.2e-16; exact at the ends.
/// (The three-term recurrence loses a hundred times as much near the ends.)
///
/// # Example
/// ```
/// let p = spanwise::legendre::values(2, 0.5);
/// assert_eq!(p, [1.0, 0.5, -0.125]);
/// ```
///
/// Source: NIST DLMF 18.9.1, rewritten for differences.
pub fn values(degree: usize, s: f64) -> Vec<f64> {
    let mut values = vec![0.0; degree + 1];
    fill_values(1.0 + s, 1.0 - s, &mut values);
    values
}

/// [`values`] at the point with the distances 1 + s and 1 - s from the ends.
pub(crate) fn fill_values(from_left: f64, from_right: f64, values: &mut [f64]) {
    let mut recurrence = Recurrence::new(from_left, from_right);
    for slot in values {
        *slot = recurrence.value();
        recurrence.advance();
    }
}

/// The difference recurrence, one degree at a time.
struct Recurrence {
    degree: f64,
    distance: f64,
    value: f64,
    step: f64,
    /// Sign of P_k at the point against P_k at its mirror image on the right: sign, and sign of odd degrees.
    sign: f64,
    mirror: f64,
}

impl Recurrence {
    fn new(from_left: f64, from_right: f64) -> Self {
        let left = from_left < from_right;
        Self {
            degree: 0.0,
            distance: if left { from_left } else { from_right },
            value: 1.0,
            step: 0.0,
            sign: 1.0,
            mirror: if left { -1.0 } else { 1.0 },
        }
    }

    fn value(&self) -> f64 {
        self.sign * self.value
    }

    fn advance(&mut self) {
        let k = self.degree;
        self.step = (k * self.step - (2.0 * k + 1.0) * self.distance * self.value) / (k + 1.0);
        self.value += self.step;
        self.degree = k + 1.0;
        self.sign *= self.mirror;
    }
}

/// Sum of c_k P_k(s).
///
/// # Example
/// ```
/// // 3 P_0 + 2 P_1 + P_2 at 0.5
/// assert_eq!(spanwise::legendre::series(&[3.0, 2.0, 1.0], 0.5), 3.875);
/// ```
pub fn series(coefficients: &[f64], s: f64) -> f64 {
    let mut recurrence = Recurrence::new(1.0 + s, 1.0 - s);
    let mut sum = 0.0;
    for c in coefficients {
        sum += c * recurrence.value();
        recurrence.advance();
    }
    sum
}

/// Sum of c_k P_k(s) and its derivative by s.
///
/// The derivatives come from P_(k+1)' = P_(k-1)' + (2k+1) P_k (NIST DLMF 18.9.19 with lambda = 1/2).
///
/// # Example
/// ```
/// // s^2 = (P_0 + 2 P_2) / 3
/// let (value, slope) = spanwise::legendre::series_with_slope(&[1.0 / 3.0, 0.0, 2.0 / 3.0], 0.5);
/// assert!((value - 0.25).abs() < 1e-15 && (slope - 1.0).abs() < 1e-15);
/// ```
pub fn series_with_slope(coefficients: &[f64], s: f64) -> (f64, f64) {
    let mut recurrence = Recurrence::new(1.0 + s, 1.0 - s);
    let (mut sum, mut slope_sum) = (0.0, 0.0);
    // P_k' and P_(k+1)'
    let (mut slope, mut next) = (0.0, 1.0);
    for c in coefficients {
        sum += c * recurrence.value();
        slope_sum += c * slope;
        recurrence.advance();
        let after = slope + (2.0 * recurrence.degree + 1.0) * recurrence.value();
        (slope, next) = (next, after);
    }
    (sum, slope_sum)
}

/// Legendre coefficients of the integral from -1 of sum_k c_k P_k; one longer than c.
///
/// Exact but for rounding: the integral of P_k is (P_(k+1) - P_(k-1)) / (2k+1), that of P_0 is P_0 + P_1.
/// The coefficients alternate in sign to 0 at s = -1 up to rounding.
///
/// # Example
/// ```
/// // integral of 1 is 1 + s
/// assert_eq!(spanwise::legendre::integrate_series(&[1.0]), [1.0, 1.0]);
/// ```
///
/// Source: NIST DLMF 18.9.19 with lambda = 1/2.
pub fn integrate_series(c: &[f64]) -> Vec<f64> {
    let mut integral = vec![0.0; c.len() + 1];
    for (k, c) in c.iter().enumerate() {
        let part = c / (2 * k + 1) as f64;
        integral[k + 1] += part;
        // From P_1 on the integral vanishes at -1 by itself; P_0 needs the constant.
        if k == 0 {
            integral[0] += part;
        } else {
            integral[k - 1] -= part;
        }
    }
    integral
}

/// Legendre coefficients of the derivative of sum_k c_k P_k; one shorter than c, but never empty.
///
/// d_k = (2k+1) (c_(k+1) + c_(k+3) + ...).
///
/// # Example
/// ```
/// // P_3' = P_0 + 5 P_2
/// assert_eq!(spanwise::legendre::differentiate_series(&[0.0, 0.0, 0.0, 1.0]), [1.0, 0.0, 5.0]);
/// ```
///
/// Source: NIST DLMF 18.9.19 with lambda = 1/2, summed.
pub fn differentiate_series(c: &[f64]) -> Vec<f64> {
    if c.len() < 2 {
        return vec![0.0];
    }
    let mut derivative = vec![0.0; c.len() - 1];
    // Sums over the coefficients of either parity, from the highest down.
    let mut sums = [0.0, 0.0];
    for k in (0..derivative.len()).rev() {
        sums[k % 2] += c[k + 1];
        derivative[k] = (2 * k + 1) as f64 * sums[k % 2];
    }
    derivative
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_match_closed_forms() {
        for s in [-1.0, -0.93, -0.2385, 0.0, 0.4711, 0.999, 1.0f64] {
            let p = values(4, s);
            let exact =
                [1.0, s, 1.5 * s * s - 0.5, 2.5 * s.powi(3) - 1.5 * s, (35.0 * s.powi(4) - 30.0 * s * s + 3.0) / 8.0];
            for k in 0..=4 {
                assert!((p[k] - exact[k]).abs() < 5e-16, "P_{k}({s})");
            }
        }
    }

    /// The second opinion: the three-term recurrence in double-double numbers.
    #[test]
    fn values_are_within_their_bound_to_degree_3000() {
        use crate::legendre::double::Double;
        for i in 0..400 {
            let s = (0.002385 + f64::from(i) * 0.0078539).cos();
            let p = values(3000, s);
            let x = Double::from(s);
            let (mut before, mut here) = (Double::from(0.0), Double::from(1.0));
            for (k, value) in p.iter().enumerate() {
                let k = k as f64;
                let error = (here - Double::from(*value)).hi.abs();
                assert!(error <= (2.0 + k.sqrt()) * f64::EPSILON, "P_{k}({s}): {error:e}");
                let next = (x * here * (2.0 * k + 1.0) - before * k) / (k + 1.0);
                (before, here) = (here, next);
            }
        }
    }

    #[test]
    fn slope_is_the_series_of_the_differentiated_coefficients() {
        let c = [0.2385, -1.7, 0.33, 2.1, -0.05, 0.71];
        let d = differentiate_series(&c);
        for s in [-1.0, -0.77, -0.1, 0.0, 0.31, 0.95, 1.0] {
            let (value, slope) = series_with_slope(&c, s);
            assert_eq!(value, series(&c, s));
            assert!((slope - series(&d, s)).abs() < 3e-14, "s = {s}");
        }
    }

    #[test]
    fn derivative_undoes_integral() {
        let c = [0.2385, -1.7, 0.33, 2.1, -0.05, 0.71];
        let integral = integrate_series(&c);
        assert!(series(&integral, -1.0).abs() < 1e-15);
        for (a, b) in differentiate_series(&integral).iter().zip(c) {
            assert!((a - b).abs() < 2e-15);
        }
        assert_eq!(differentiate_series(&[]), [0.0]);
        assert_eq!(integrate_series(&[]), [0.0]);
    }
}
