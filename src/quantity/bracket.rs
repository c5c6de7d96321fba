//! Root of a function between two points of opposite sign.

/// Chandrupatla's method (Adv. Eng. Softw. 28, 1997): inverse quadratic steps where they are safe, bisection
/// elsewhere; ends when the bracket is as short as the coordinate resolves. At most 200 evaluations.
pub(super) fn bracketed_root(f: impl Fn(f64) -> f64, mut a: f64, mut b: f64, mut fa: f64, mut fb: f64) -> f64 {
    let mut t = 0.5;
    for _ in 0..200 {
        let x = a + t * (b - a);
        let fx = f(x);
        if !fx.is_finite() {
            return x;
        }
        // The third point: the end that leaves the bracket.
        let (c, fc) = if (fx > 0.0) == (fa > 0.0) {
            (a, fa)
        } else {
            let before = (b, fb);
            (b, fb) = (a, fa);
            before
        };
        (a, fa) = (x, fx);
        let (best, f_best) = if fa.abs() < fb.abs() { (a, fa) } else { (b, fb) };
        let resolution = 2.0 * f64::EPSILON * best.abs().max(f64::MIN_POSITIVE);
        let limit = resolution / (b - a).abs();
        if f_best == 0.0 || limit > 0.5 {
            return best;
        }
        let xi = (a - b) / (c - b);
        let phi = (fa - fb) / (fc - fb);
        let quadratic = phi * phi < xi && (1.0 - phi) * (1.0 - phi) < 1.0 - xi;
        t = if quadratic {
            fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
        } else {
            0.5
        };
        t = if t.is_finite() { t.clamp(limit, 1.0 - limit) } else { 0.5 };
    }
    if fa.abs() < fb.abs() { a } else { b }
}

#[cfg(test)]
mod tests {
    use super::bracketed_root;

    #[test]
    fn finds_roots_of_smooth_kinked_and_flat_functions() {
        let cube = bracketed_root(|x| x * x * x - 2.385, 0.0, 4.0, -2.385, 61.615);
        assert!((cube - 2.385f64.cbrt()).abs() < 4e-16 * cube);
        let kink = bracketed_root(|x: f64| if x < 0.385 { -1.0 } else { 1.0 }, -1.0, 1.0, -1.0, 1.0);
        assert!((kink - 0.385).abs() < 1e-15);
        let flat = bracketed_root(|x: f64| (x - 0.385).powi(9), -1.0, 1.0, -18.7, 0.0126);
        assert!((flat - 0.385).abs() < 1e-3);
    }
}
