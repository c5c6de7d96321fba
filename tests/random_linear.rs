//! Random linear problems made from known solutions: every number within its bar.

mod common;

use common::Tally;
use spanwise::model::Side;
use spanwise::problem::{Expression, Problem};
use spanwise::solve::Settings;

/// A small generator with a fixed seed (splitmix64).
struct Random(u64);

impl Random {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64
    }

    fn between(&mut self, a: f64, b: f64) -> f64 {
        a + (b - a) * self.next()
    }
}

/// a sin(b x + c) + d exp(e x) and its derivatives.
#[derive(Clone, Copy)]
struct Known([f64; 5]);

impl Known {
    fn new(random: &mut Random, length: f64) -> Self {
        let rate = random.between(-4.0, 4.0) / length;
        Self([
            random.between(0.5, 2.0),
            random.between(0.5, 12.0) / length,
            random.between(0.0, 6.0),
            random.between(-1.0, 1.0) / (rate * length).exp().max(1.0),
            rate,
        ])
    }

    fn at(&self, k: usize, x: f64) -> f64 {
        let [a, b, c, d, e] = self.0;
        let wave = a * b.powi(k as i32) * (b * x + c + 0.5 * std::f64::consts::PI * k as f64).sin();
        wave + d * e.powi(k as i32) * (e * x).exp()
    }
}

/// (p u')' + q u' + r u = f on one to four pieces with stepping p, the flux carried, conditions of all three kinds.
#[test]
fn second_order_with_steps() {
    let mut tally = Tally::default();
    let mut random = Random(2385);
    for case in 0..150 {
        let length = 10f64.powf(random.between(-2.0, 3.0));
        // Prescribed values are computed from sin(b x + c): only for small arguments are they good to the last digits.
        let (from, to) = (0.0, length);
        let u = Known::new(&mut random, length);
        let pieces = 1 + (random.next() * 4.0) as usize;
        let mut points: Vec<f64> = (1..pieces).map(|_| from + length * random.between(0.05, 0.95)).collect();
        points.sort_by(f64::total_cmp);
        let steps: Vec<f64> = (0..pieces).map(|_| 10f64.powf(random.between(-1.0, 1.0))).collect();
        let (q, r) = (random.between(-3.0, 3.0) / length, random.between(-9.0, 3.0) / (length * length));
        let slope = random.between(-0.4, 0.4) / length;
        // u is the same on all pieces, so the flux jumps with p: by known amounts.
        let p = move |piece: usize, x: f64| steps[piece] * (1.0 + slope * (x - from));
        let p_slope = {
            let p = p.clone();
            move |piece: usize, x: f64| p(piece, x) * slope / (1.0 + slope * (x - from))
        };
        let mut problem = Problem::new(from, to);
        let (y, g) = (problem.unknown("u", 1), problem.unknown("g", 1));
        for x in &points {
            problem.break_at(*x);
        }
        let pp = p.clone();
        problem.equation("flux", move |at| at.d(y, 1) * pp(at.piece(), at.x()) - at.d(g, 0));
        let pp = p.clone();
        problem.equation("balance", move |at| {
            let (x, k) = (at.x(), at.piece());
            let f = p_slope(k, x) * u.at(1, x) + pp(k, x) * u.at(2, x) + q * u.at(1, x) + r * u.at(0, x);
            at.d(g, 1) + at.d(y, 1) * q + at.d(y, 0) * r - f
        });
        for (k, x) in points.iter().enumerate() {
            let jump = (p(k + 1, *x) - p(k, *x)) * u.at(1, *x);
            problem.release(*x, g, 0);
            problem
                .condition("step", &[(*x, Side::Left), (*x, Side::Right)], move |v| v[1].d(g, 0) - v[0].d(g, 0) - jump);
        }
        let kind = (random.next() * 3.0) as usize;
        problem.condition("left", &[(from, Side::Right)], move |v| v[0].d(y, 0) - u.at(0, from));
        let (last, h) = (pieces - 1, random.between(0.1, 3.0));
        let flux = p(last, to) * u.at(1, to);
        problem.condition("right", &[(to, Side::Left)], move |v| match kind {
            0 => v[0].d(y, 0) - u.at(0, to),
            1 => v[0].d(g, 0) - flux,
            _ => v[0].d(g, 0) * length + v[0].d(y, 0) * h - (flux * length + h * u.at(0, to)),
        });
        let solution = problem.solve(&Settings::default()).unwrap_or_else(|e| panic!("case {case}: {e}"));
        let size = u.0[0] + u.0[3].abs();
        for t in [0.131, 0.5, 0.77, 1.0] {
            let x = from + t * length;
            let value = solution.value(y, 0, x, Side::Left).expect("finite");
            // sin(b x + c) is known to the rounding of its argument.
            let known = f64::EPSILON * (u.0[1] * x.abs() + u.0[2]) * u.0[0];
            let error = (value.value - u.at(0, x)).abs();
            tally.add(format!("case {case} at {t}"), error / size, (value.error + known) / size);
        }
        let whole = Expression::new(&[1, 1], move |at| at.d(y, 0));
        let mean = solution.integral(&whole, from, to).expect("finite");
        let [a, b, c, d, e] = u.0;
        let antiderivative = |x: f64| -a / b * (b * x + c).cos() + d / e * (e * x).exp();
        let exact = antiderivative(to) - antiderivative(from);
        // The closed form itself cancels: what it is known to counts with the bar.
        let known =
            4.0 * f64::EPSILON * ((a / b).abs() + (d / e * (e * to).exp()).abs() + (d / e * (e * from).exp()).abs());
        let scale = size * length;
        tally.add(format!("case {case} integral"), (mean.value - exact).abs() / scale, (mean.error + known) / scale);
    }
    tally.check(1e-10, 100.0);
}

/// Mirroring the span mirrors the solution.
#[test]
fn a_mirrored_problem_has_the_mirrored_solution() {
    let solve = |mirror: bool| {
        let sign = if mirror { -1.0 } else { 1.0 };
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("y", 2);
        p.equation("e", move |at| {
            let x = if mirror { 1.0 - at.x() } else { at.x() };
            at.d(y, 2) * 1e-3 + at.d(y, 1) * (sign * (1.0 + x)) - at.d(y, 0) - x.sin()
        });
        let ends = if mirror { [0.7, -0.385] } else { [-0.385, 0.7] };
        p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - ends[0]);
        p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - ends[1]);
        p.solve(&Settings::default()).expect("regular")
    };
    let (plain, mirrored) = (solve(false), solve(true));
    for x in [0.001, 0.1, 0.5, 0.93] {
        let (a, b) = (plain.value(0, 0, x, Side::Left), mirrored.value(0, 0, 1.0 - x, Side::Left));
        let (a, b) = (a.expect("finite"), b.expect("finite"));
        assert!((a.value - b.value).abs() <= a.error + b.error, "{x}: {a:?} {b:?}");
    }
}

/// eps u'' + a u' - b u = f with layers of any thickness at one or both ends, against the two exponentials.
#[test]
fn layers_of_any_thickness() {
    let mut tally = Tally::default();
    let mut random = Random(77);
    for case in 0..200 {
        let eps = 10f64.powf(random.between(-8.0, 0.0));
        let a = if random.next() < 0.3 { 0.0 } else { random.between(-2.0, 2.0) };
        let (b, f) = (random.between(0.1, 3.0), random.between(-2.0, 2.0));
        let ends = [random.between(-1.0, 1.0), random.between(-1.0, 1.0)];
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("u", 2);
        p.equation("balance", move |at| at.d(y, 2) * eps + at.d(y, 1) * a - at.d(y, 0) * b - f);
        p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - ends[0]);
        p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - ends[1]);
        let solution = p.solve(&Settings::default()).unwrap_or_else(|e| panic!("case {case}: {e}"));
        // Roots of eps r^2 + a r - b without cancellation: one negative, one positive.
        let root = (a * a + 4.0 * eps * b).sqrt();
        let q = -0.5 * (a + a.signum() * root);
        let pair = if a == 0.0 { [-(b / eps).sqrt(), (b / eps).sqrt()] } else { [q / eps, -b / q] };
        let (low, high) = (pair[0].min(pair[1]), pair[0].max(pair[1]));
        // u = -f/b + A exp(low x) + B exp(high (x - 1))
        let (at_left, at_right) = (ends[0] + f / b, ends[1] + f / b);
        let (el, eh) = (low.exp(), (-high).exp());
        let det = 1.0 - el * eh;
        let (ca, cb) = ((at_left - eh * at_right) / det, (at_right - el * at_left) / det);
        let size = (f / b).abs() + ca.abs() + cb.abs();
        let thin = 1.0 / high.max(-low);
        for x in [0.0, 0.7 * thin, 3.0 * thin, 0.31, 0.77, 1.0 - 3.0 * thin, 1.0 - 0.7 * thin, 1.0] {
            if !(0.0..=1.0).contains(&x) {
                continue;
            }
            let exact = -f / b + ca * (low * x).exp() + cb * (high * (x - 1.0)).exp();
            // Near the far end 1 - x is known to the last place of 1 only, which the layer magnifies.
            let known = f64::EPSILON * (1.0 + (high * cb * (high * (x - 1.0)).exp()).abs() / size * x);
            let got = solution.value(y, 0, x, Side::Left).expect("finite");
            tally.add(
                format!("case {case}, eps {eps:e}, a {a} at {x}"),
                (got.value - exact).abs() / size,
                got.error / size + known,
            );
        }
    }
    tally.check(1e-10, 200.0);
}
