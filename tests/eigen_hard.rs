//! Eigenvalues of harder problems: clusters, singular ends, parameters in conditions and to the second power, complex
//! eigenvalues and coefficients, periodic ends, and what must be refused.

#![allow(clippy::excessive_precision)]
use num_complex::Complex64;
use num_dual::DualNum;
use spanwise::error::{Eigen, Error};
use spanwise::model::{Model, Side};
use spanwise::problem::{Number, Problem};
use spanwise::solve::{Ask, Settings, Spectrum, eigen, eigen_complex};

/// Each eigenvalue within its bar, and the bar within the accuracy wanted.
#[track_caller]
fn agrees(spectrum: &Spectrum, exact: &[Complex64], relative: f64) {
    let found: Vec<_> = spectrum.modes.iter().map(|m| (m.value, m.error)).collect();
    assert_eq!(spectrum.modes.len(), exact.len(), "{found:?} {:?}", spectrum.discarded);
    assert_eq!(spectrum.count.checked, Some(true), "{:?}", spectrum.count);
    for (mode, exact) in spectrum.modes.iter().zip(exact) {
        let error = (mode.value - exact).norm();
        assert!(error <= mode.error, "mode {}: {} instead of {exact}, bar {:.1e}", mode.index, mode.value, mode.error);
        let floor = if exact.norm() < 1e-10 { 1.0 } else { exact.norm() };
        assert!(mode.error <= relative * floor, "mode {}: bar {:.1e} of {exact}", mode.index, mode.error);
    }
}

fn real(values: &[f64]) -> Vec<Complex64> {
    values.iter().map(|v| Complex64::from(*v)).collect()
}

/// a u'' + b u' + c u + lambda w u = 0 with u^(left) = 0 and u^(right) = 0 at the ends.
fn second_order(
    span: [f64; 2],
    ends: [usize; 2],
    coefficients: impl Fn(f64) -> [f64; 4] + Send + Sync + 'static,
) -> impl Model {
    let mut p = Problem::new(span[0], span[1]);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("equation", move |at| {
        let [a, b, c, w] = coefficients(at.x());
        at.d(u, 2) * a + at.d(u, 1) * b + at.d(u, 0) * c + at.constant(lambda) * at.d(u, 0) * w
    });
    p.condition("left", &[(span[0], Side::Right)], move |v| v[0].d(u, ends[0]));
    p.condition("right", &[(span[1], Side::Left)], move |v| v[0].d(u, ends[1]));
    p.build().expect("a sound problem")
}

fn lowest(model: &impl Model, n: usize) -> Spectrum {
    eigen(model, Ask::Lowest(n), &Settings::default()).expect("an eigenproblem")
}

#[test]
fn bessel_zeros() {
    // u'' + u'/x + lambda u = 0, regular at 0: DLMF 10.21, zeros of J_0 squared (from memory to 16 digits).
    let model = second_order([0.0, 1.0], [1, 0], |x| [x, 1.0, 0.0, x]);
    let zeros = [2.404825557695773, 5.520078110286311, 8.653727912911013, 11.79153443901428, 14.930917708487787];
    agrees(&lowest(&model, 5), &real(&zeros.map(|z| z * z)), 3e-12);
}

#[test]
fn legendre_operator() {
    // ((1 - x^2) u')' + lambda u = 0, regular at both ends: n (n + 1).
    let mut p = Problem::new(-1.0, 1.0);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("Legendre", move |at| {
        at.d(u, 2) * (1.0 - at.x() * at.x()) - at.d(u, 1) * (2.0 * at.x()) + at.constant(lambda) * at.d(u, 0)
    });
    // What regularity forces: -+2 u' + lambda u = 0 at the ends.
    p.condition("left", &[(-1.0, Side::Right)], move |v| v[0].d(u, 1) * 2.0 + v[0].constant(lambda) * v[0].d(u, 0));
    p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(u, 1) * 2.0 - v[0].constant(lambda) * v[0].d(u, 0));
    let exact: Vec<f64> = (0..8).map(|n| f64::from(n * (n + 1))).collect();
    agrees(&lowest(&p.build().expect("sound"), 8), &real(&exact), 1e-11);
}

#[test]
fn mathieu_periodic() {
    // -u'' + 10 cos(2x) u = lambda u on [0, pi], periodic: characteristic values a_0, b_2, a_2, b_4, a_4 for q = 5
    // (DLMF 28; digits by two independent high-precision routes).
    let mut p = Problem::new(0.0, std::f64::consts::PI);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("Mathieu", move |at| {
        at.d(u, 2) - at.d(u, 0) * (10.0 * (2.0 * at.x()).cos()) + at.constant(lambda) * at.d(u, 0)
    });
    let ends = [(0.0, Side::Right), (std::f64::consts::PI, Side::Left)];
    p.condition("periodic", &ends, move |v| v[0].d(u, 0) - v[1].d(u, 0));
    p.condition("periodic", &ends, move |v| v[0].d(u, 1) - v[1].d(u, 1));
    let exact = [
        -5.800046020851508419,
        2.099460445486665364,
        7.449109739529177812,
        16.648219937169776906,
        17.096581684366047977,
    ];
    agrees(&lowest(&p.build().expect("sound"), 5), &real(&exact), 1e-11);
}

#[test]
fn antiperiodic_ring_has_double_eigenvalues() {
    let end = 2.0 * std::f64::consts::PI;
    let mut p = Problem::new(0.0, end);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("ring", move |at| at.d(u, 2) + at.constant(lambda) * at.d(u, 0));
    let ends = [(0.0, Side::Right), (end, Side::Left)];
    p.condition("antiperiodic", &ends, move |v| v[0].d(u, 0) + v[1].d(u, 0));
    p.condition("antiperiodic", &ends, move |v| v[0].d(u, 1) + v[1].d(u, 1));
    let spectrum = lowest(&p.build().expect("sound"), 6);
    agrees(&spectrum, &real(&[0.25, 0.25, 2.25, 2.25, 6.25, 6.25]), 1e-11);
    assert!(spectrum.modes.iter().all(|m| m.multiplicity == 2));
}

#[test]
fn parameter_in_the_condition_only() {
    // u'' = 0, u(0) = 0, u'(1) = lambda u(1): one eigenvalue, 1.
    let mut p = Problem::new(0.0, 1.0);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("straight", move |at| at.d(u, 2));
    p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(u, 0));
    p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(u, 1) - v[0].constant(lambda) * v[0].d(u, 0));
    let model = p.build().expect("sound");
    agrees(&lowest(&model, 1), &real(&[1.0]), 1e-12);
    let more = eigen(&model, Ask::Lowest(2), &Settings::default());
    assert_eq!(more.err(), Some(Error::Eigen(Eigen::TooFew { asked: 2, found: 1 })));
}

#[test]
fn slab_with_film() {
    // zeta tan zeta = Bi (Carslaw & Jaeger, Conduction of Heat in Solids, appendix IV), lambda = zeta^2, Bi = 0.385.
    let bi = 0.385;
    let mut p = Problem::new(0.0, 1.0);
    let u = p.unknown("u", 2);
    let lambda = p.constant("lambda");
    p.equation("slab", move |at| at.d(u, 2) + at.constant(lambda) * at.d(u, 0));
    p.condition("middle", &[(0.0, Side::Right)], move |v| v[0].d(u, 1));
    p.condition("film", &[(1.0, Side::Left)], move |v| v[0].d(u, 1) + v[0].d(u, 0) * bi);
    let exact: Vec<f64> = (0..10)
        .map(|n| {
            let start = f64::from(n) * std::f64::consts::PI;
            let mut z = start + if n == 0 { 0.6 } else { bi / start };
            for _ in 0..60 {
                // z sin z = Bi cos z
                let (f, slope) = (z * z.sin() - bi * z.cos(), z.sin() + z * z.cos() + bi * z.sin());
                z -= f / slope;
            }
            z * z
        })
        .collect();
    agrees(&lowest(&p.build().expect("sound"), 10), &real(&exact), 1e-11);
}

/// -u'' + (beta^2 sin^2 2x - 2 beta cos 2x) u = lambda u, u = 0 at -pi/2 and pi/2.
fn coffey_evans(beta: f64) -> impl Model {
    let half = std::f64::consts::FRAC_PI_2;
    second_order([-half, half], [0, 0], move |x: f64| {
        [-1.0, 0.0, -2.0 * beta * (2.0 * x).cos() + (beta * (2.0 * x).sin()).powi(2), -1.0]
    })
}

#[test]
fn coffey_evans_clusters() {
    // Pryce, Numerical Solution of Sturm-Liouville Problems, 1993; digits for beta = 20 by two independent high-precision
    // routes, those for beta = 50 from memory.
    let exact = [
        2.1360860819777255872e-16,
        77.916195677143971293,
        151.46277834645662787,
        151.46322365765862713,
        151.46366898835164577,
    ];
    agrees(&lowest(&coffey_evans(20.0), 5), &real(&exact), 1e-10);
    let spectrum = lowest(&coffey_evans(50.0), 6);
    let table = [0.0, 197.968726516507, 391.80819148905, 391.80819148905, 391.80819148905, 581.377109231579];
    for (mode, table) in spectrum.modes.iter().zip(table) {
        assert!((mode.value - table).norm() <= mode.error + 1e-11, "{} against {table}", mode.value);
        assert!(mode.error < 2e-11);
    }
    assert_eq!(spectrum.modes.iter().map(|m| m.multiplicity).collect::<Vec<_>>(), [1, 1, 3, 3, 3, 1]);
    assert_eq!(spectrum.count.checked, Some(true));
}

#[test]
fn damped_string() {
    // u'' = s^2 u, u(0) = 0, u'(1) = -s u(1)/2: s = (ln(1/3) + i (2 n - 1) pi)/2 with tanh s = -2.
    let mut p = Problem::new(0.0, 1.0);
    let u = p.unknown("u", 2);
    let s = p.constant("s");
    p.equation("string", move |at| at.d(u, 2) - at.constant(s) * at.constant(s) * at.d(u, 0));
    p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(u, 0));
    p.condition("damper", &[(1.0, Side::Left)], move |v| v[0].d(u, 1) + v[0].constant(s) * v[0].d(u, 0) * 0.5);
    let model = p.build().expect("sound");
    let exact: Vec<Complex64> = (1..=5)
        .map(|n| Complex64::new(-(3.0f64.ln()) / 2.0, (2.0 * f64::from(n) - 1.0) * std::f64::consts::FRAC_PI_2))
        .collect();
    let pairs = eigen(&model, Ask::Pairs(5), &Settings::default()).expect("an eigenproblem");
    agrees(&pairs, &exact, 1e-11);
    let near = eigen(&model, Ask::Near(Complex64::new(0.0, 5.0), 1), &Settings::default()).expect("an eigenproblem");
    agrees(&near, &exact[1..2], 1e-11);
}

#[test]
fn follower_force() {
    // Beck's column, w'''' + 20 w'' = lambda w, clamped and free, digits by two independent high-precision routes.
    let beck = |force: f64| {
        let mut p = Problem::new(0.0, 1.0);
        let w = p.unknown("w", 4);
        let lambda = p.constant("lambda");
        p.equation("column", move |at| at.d(w, 4) + at.d(w, 2) * force - at.constant(lambda) * at.d(w, 0));
        for (x, side, k) in [(0.0, Side::Right, 0), (0.0, Side::Right, 1), (1.0, Side::Left, 2), (1.0, Side::Left, 3)] {
            p.condition("end", &[(x, side)], move |v| v[0].d(w, k));
        }
        p.build().expect("sound")
    };
    let exact = [110.85862347019719737, 132.49429509579200108, 2886.8100882073597384, 12637.346424973926825];
    agrees(&lowest(&beck(20.0), 4), &real(&exact), 1e-10);
    // Beyond the flutter load of 20.05 the two lowest are a conjugate pair.
    let spectrum = lowest(&beck(25.0), 3);
    assert!(spectrum.modes[0].value.im > 1.0 && spectrum.modes[0].value == spectrum.modes[1].value.conj());
}

#[test]
fn plane_poiseuille_flow() {
    // Orr-Sommerfeld at Re = 10,000, alpha = 1: (D^2 - 1)^2 f = 10000 i [(1 - y^2 - c)(D^2 - 1) f + 2 f]; Orszag, J. Fluid
    // Mech. 50, 1971: c = 0.23752649 + 0.00373967 i; further digits by two independent high-precision routes.
    let re = 10_000.0;
    let mut p = Problem::new(-1.0, 1.0);
    let (fr, fi) = (p.unknown("fr", 4), p.unknown("fi", 4));
    let c = p.constant("c");
    let part = move |at: &spanwise::problem::Station<'_>, own: usize, other: usize, sign: f64| -> Number {
        let y = at.x();
        let viscous = at.d(own, 4) - at.d(own, 2) * 2.0 + at.d(own, 0);
        let curl = at.d(other, 2) - at.d(other, 0);
        // i (a + i b) = -b + i a
        let inner = curl * (1.0 - y * y) - at.constant(c) * curl + at.d(other, 0) * 2.0;
        viscous - inner * (re * sign)
    };
    p.equation("real part", move |at| part(at, fr, fi, -1.0));
    p.equation("imaginary part", move |at| part(at, fi, fr, 1.0));
    for (y, side) in [(-1.0, Side::Right), (1.0, Side::Left)] {
        for k in [0, 1] {
            p.condition("wall", &[(y, side)], move |v| v[0].d(fr, k));
            p.condition("wall", &[(y, side)], move |v| v[0].d(fi, k));
        }
    }
    let model = p.build().expect("sound");
    let exact = [Complex64::new(0.237526488820471, 0.003739670622979)];
    let spectrum = eigen_complex(&model, Ask::LargestImaginary(1), &Settings::default()).expect("an eigenproblem");
    agrees(&spectrum, &exact, 1e-10);
}

#[test]
fn what_makes_no_sense_is_refused() {
    let build = |term: fn(&spanwise::problem::Station<'_>) -> Number, right: fn(Number, Number, Number) -> Number| {
        let mut p = Problem::new(0.0, 1.0);
        let u = p.unknown("u", 2);
        let lambda = p.constant("lambda");
        p.equation("equation", move |at| at.d(u, 2) + term(at));
        p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(u, 0));
        p.condition("right", &[(1.0, Side::Left)], move |v| right(v[0].d(u, 0), v[0].d(u, 1), v[0].constant(lambda)));
        p.build().expect("sound")
    };
    let fault = |model: &dyn Model| match eigen(model, Ask::Lowest(2), &Settings::default()) {
        Err(Error::Eigen(fault)) => fault,
        other => panic!("{other:?}"),
    };
    let absent = build(|at| at.d(0, 0), |u, _, _| u);
    assert_eq!(fault(&absent), Eigen::Absent);
    let loaded = build(|at| at.constant(0) * at.d(0, 0) + 2.385, |u, _, _| u);
    assert!(matches!(fault(&loaded), Eigen::Inhomogeneous { .. }));
    let moved = build(|at| at.constant(0) * at.d(0, 0), |u, _, _| u - 2.385);
    assert!(matches!(fault(&moved), Eigen::Inhomogeneous { .. }));
    let bent = build(|at| at.constant(0) * at.d(0, 0) * at.d(0, 0), |u, _, _| u);
    assert!(matches!(fault(&bent), Eigen::Nonlinear { .. }));
    let cubic = build(|at| at.constant(0).powi(3) * at.d(0, 0) + at.constant(0) * at.d(0, 0), |u, _, _| u);
    assert!(matches!(fault(&cubic), Eigen::Degree { .. }));
    // u'' = 0, u(0) = 0, lambda (u(1) - u'(1)) = 0: u = x solves it whatever lambda is.
    let all = build(|_| Number::from_re(0.0), |u, slope, l| l * (u - slope));
    assert!(matches!(fault(&all), Eigen::Everything { .. }));
    // -u'' = lambda x u on [-1, 1] has eigenvalues down to minus infinity.
    let indefinite = second_order([-1.0, 1.0], [0, 0], |x| [1.0, 0.0, 0.0, x]);
    assert!(matches!(fault(&indefinite), Eigen::Unbounded { .. }));
}

#[test]
fn ways_of_asking_agree() {
    // u'' + lambda u = 0, u(0) = u(1) = 0: (n pi)^2.
    let model = second_order([0.0, 1.0], [0, 0], |_| [1.0, 0.0, 0.0, 1.0]);
    let exact: Vec<f64> = (1..=30).map(|n| (f64::from(n) * std::f64::consts::PI).powi(2)).collect();
    let ask = |ask: Ask| eigen(&model, ask, &Settings::default()).expect("an eigenproblem");
    agrees(&ask(Ask::Lowest(30)), &real(&exact), 1e-12);
    agrees(&ask(Ask::Between(200.0, 1000.0)), &real(&exact[4..10]), 1e-12);
    let near = [exact[6], exact[5], exact[7]];
    agrees(&ask(Ask::Near(Complex64::from(480.0), 3)), &real(&near), 1e-12);
    assert!(ask(Ask::Between(1.0, 2.0)).modes.is_empty());
    // The other way round: u'' = lambda u.
    let model = second_order([0.0, 1.0], [0, 0], |_| [1.0, 0.0, 0.0, -1.0]);
    let spectrum = eigen(&model, Ask::LargestReal(4), &Settings::default()).expect("an eigenproblem");
    agrees(&spectrum, &real(&exact[..4].iter().map(|v| -v).collect::<Vec<_>>()), 1e-12);
}

#[test]
fn a_mode_is_scaled_with_its_bars() {
    let model = second_order([0.0, 1.0], [0, 0], |_| [1.0, 0.0, 0.0, 1.0]);
    let mode = &lowest(&model, 2).modes[1];
    let scaled =
        mode.scaled(|f| Ok(Complex64::from(f.value(0, 1, 0.0, Side::Right)))).expect("a slope that is not zero");
    let value = scaled.solution.value(0, 0, 0.2385, Side::Left).expect("a value");
    let exact = (2.0 * std::f64::consts::PI * 0.2385).sin() / (2.0 * std::f64::consts::PI);
    assert!((value.value - exact).abs() <= value.error && value.error < 1e-12, "{value:?} {exact}");
}
