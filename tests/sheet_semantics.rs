//! What sheets mean, against closed forms worked out here.

use nalgebra::{SMatrix, SVector};
use spanwise::sheet::{self, Sheet};

fn read(text: &str) -> Sheet {
    sheet::read(text).unwrap_or_else(|faults| panic!("{faults:#?}"))
}

/// Values and bars in the units printed.
fn numbers(text: &str) -> Vec<(f64, f64)> {
    let sheet = read(text);
    let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{}", sheet.reason(&e)));
    let printed = |a: &sheet::Asked| a.printed().unwrap_or_else(|| panic!("{}: {:?}", a.label, a.value));
    sheet.evaluate(&solution).iter().map(|a| (printed(a).value, printed(a).error)).collect()
}

fn check(got: (f64, f64), exact: f64) {
    let known = 8.0 * f64::EPSILON * exact.abs();
    assert!((got.0 - exact).abs() <= got.1 + known, "{} +- {:e}, exact {exact}", got.0, got.1);
    assert!(got.1 <= 1e-10 * exact.abs().max(1e-3), "{got:?}");
}

/// -(D*u')' + (v*u)' = 0, v and D stepping: order 2; the whole flux is one number F, u = F/v + C exp(v x/D) on each part.
#[test]
fn transport_with_a_stepping_velocity_has_order_two() {
    let text = "[given]\nD = { \"0 .. 0.4\" = 0.3, else = 0.7 }\nv = { \"0 .. 0.4\" = 1.1, else = 2.3 }\n[span]\nx = [\"0\", \"1\"]\n\
                [unknowns]\nu = \"1\"\n[equations]\ne = \"-(D*u')' + (v*u)' = 0\"\n[conditions]\na = \"u(0) = 1\"\nb = \"u(1) = 3\"\n\
                [report]\nm = \"u(0.4)\"\nn = \"u(0.8)\"\nf = \"-D(0.4-)*u'(0.4-) + v(0.4-)*u(0.4)\"\ng = \"-D(0.4+)*u'(0.4+) + v(0.4+)*u(0.4)\"\n";
    assert_eq!(read(text).statement.order, 2);
    let (a, b, r, s): (f64, f64, f64, f64) = (1.1, 2.3, 1.1 / 0.3, 2.3 / 0.7);
    // F, C1, C2 with exponentials scaled to the joint
    let matrix = SMatrix::<f64, 3, 3>::new(
        1.0 / a,
        (-0.4f64 * r).exp(),
        0.0,
        1.0 / a - 1.0 / b,
        1.0,
        -1.0,
        1.0 / b,
        0.0,
        (0.6 * s).exp(),
    );
    let solved = matrix.lu().solve(&SVector::<f64, 3>::new(1.0, 0.0, 3.0)).expect("regular");
    let got = numbers(text);
    check(got[0], solved[0] / a + solved[1]);
    check(got[1], solved[0] / b + solved[2] * (0.4 * s).exp());
    check(got[2], solved[0]);
    check(got[3], solved[0]);
}

/// w'''' - (N*w')' = q with N stepping, pinned ends: order 4; w''' - N w' is continuous, w' and w'' too.
#[test]
fn tie_with_a_stepping_force_has_order_four() {
    let text = "[given]\nN = { \"0 .. 0.6\" = 4, else = 9 }\n[span]\nx = [\"0\", \"1\"]\n[unknowns]\nw = \"1\"\n\
                [equations]\ne = \"w'''' - (N*w')' = 1\"\n[conditions]\na = [\"w(0) = 0\", \"w''(0) = 0\"]\nb = [\"w(1) = 0\", \"w''(1) = 0\"]\n\
                [report]\nm = \"w(0.6)\"\ns = \"w'(0.6)\"\nn = \"w''(0.3)\"\n";
    assert_eq!(read(text).statement.order, 4);
    // w = A + B x + C cosh(k x) + D sinh(k x) - x^2/(2 N) on each part, k = sqrt(N)
    let row = |k: f64, x: f64, order: usize| -> ([f64; 4], f64) {
        let n = k * k;
        let (c, s) = ((k * x).cosh(), (k * x).sinh());
        match order {
            0 => ([1.0, x, c, s], -x * x / (2.0 * n)),
            1 => ([0.0, 1.0, k * s, k * c], -x / n),
            2 => ([0.0, 0.0, n * c, n * s], -1.0 / n),
            // w''' - N w'
            _ => ([0.0, -n, 0.0, 0.0], x),
        }
    };
    let (mut matrix, mut right) = (SMatrix::<f64, 8, 8>::zeros(), SVector::<f64, 8>::zeros());
    let mut put = |r: usize, part: usize, sign: f64, (c, p): ([f64; 4], f64)| {
        (0..4).for_each(|j| matrix[(r, 4 * part + j)] += sign * c[j]);
        right[r] -= sign * p;
    };
    for (r, order) in [0, 2].into_iter().enumerate() {
        put(r, 0, 1.0, row(2.0, 0.0, order));
        put(2 + r, 1, 1.0, row(3.0, 1.0, order));
    }
    for order in 0..4 {
        put(4 + order, 0, 1.0, row(2.0, 0.6, order));
        put(4 + order, 1, -1.0, row(3.0, 0.6, order));
    }
    let c = matrix.lu().solve(&right).expect("regular");
    let at = |part: usize, k: f64, x: f64, order: usize| {
        let (f, p) = row(k, x, order);
        (0..4).map(|j| c[4 * part + j] * f[j]).sum::<f64>() + p
    };
    let got = numbers(text);
    check(got[0], at(0, 2.0, 0.6, 0));
    check(got[1], at(0, 2.0, 0.6, 1));
    check(got[2], at(0, 2.0, 0.3, 2));
}

/// T'' = -12 x^2 on [0, 1], T(0) = 0, T(1) = 0: T = x - x^4.
const QUARTIC: &str = "[span]\nx = [\"0 m\", \"1 m\"]\n[unknowns]\nT = \"K\"\n[equations]\n\
                       e = \"T'' = -12 K/m^4*x^2\"\n[conditions]\na = \"T(0 m) = 0\"\nb = \"T(1 m) = 0\"\n[report]\n";

#[test]
fn report_functions() {
    let top = 0.25f64.cbrt();
    let text = QUARTIC.to_owned()
        + "a = \"max(T)\"\nb = \"argmax(T)\"\nc = \"integral(T, 0.2 m, 0.7 m)\"\nd = \"mean(T)\"\ne = \"norm(T)\"\n\
           f = \"at(T', 0.3 m)\"\ng = \"at(T'', argmax(T))\"\nh = \"root(T - 0.3 K, 2)\"\ni = \"min(T, 0.1 m, 0.9 m)\"\n\
           j = \"integral(T, 0.7 m, 0.2 m)\"\nk = \"max(T)/T(0.5 m) - 1 in %\"\nl = \"argmax(T, 0 m, argmax(T)/2) in mm\"\n";
    let got = numbers(&text);
    let antiderivative = |x: f64| x * x / 2.0 - x.powi(5) / 5.0;
    check(got[0], top - top.powi(4));
    check(got[1], top);
    check(got[2], antiderivative(0.7) - antiderivative(0.2));
    check(got[3], 0.3);
    check(got[4], (1.0f64 / 3.0 - 2.0 / 6.0 + 1.0 / 9.0).sqrt());
    check(got[5], 1.0 - 4.0 * 0.3f64.powi(3));
    check(got[6], -12.0 * top * top);
    // the second root of x - x^4 = 0.3, by Newton from 0.9
    let root = (0..50).fold(0.9f64, |x, _| x - (x - x.powi(4) - 0.3) / (1.0 - 4.0 * x.powi(3)));
    check(got[7], root);
    check(got[8], 0.1 - 1e-4);
    check(got[9], antiderivative(0.2) - antiderivative(0.7));
    check(got[10], 100.0 * ((top - top.powi(4)) / (0.5 - 0.0625) - 1.0));
    check(got[11], 500.0 * top);
}

#[test]
fn hinge_contact_and_constants() {
    // Contact resistance in the middle of a wall: three resistances in series.
    let wall = "[given]\nk = \"2 W/(m K)\"\nR = \"0.05 m^2 K/W\"\nq = \"-k*T'\"\n[span]\nx = [\"0 m\", \"0.4 m\"]\n[unknowns]\nT = \"degC\"\n\
                [equations]\ne = \"(k*T')' = 0\"\n[conditions]\na = \"T(0 m) = 100 degC\"\nb = \"T(0.4 m) = 20 degC\"\n\
                c = [\"release(T, 0.1 m)\", \"q(0.1 m) = (T(0.1 m-) - T(0.1 m+))/R\"]\n\
                [report]\nq = \"q(0 m) in W/m^2\"\nleft = \"T(0.1 m-) in degC\"\ndrop = \"jump(T, 0.1 m) in K\"\n";
    let flux = 80.0 / (0.4 / 2.0 + 0.05);
    let got = numbers(wall);
    check(got[0], flux);
    check(got[1], 100.0 - flux * 0.05);
    check(got[2], -flux * 0.05);
    // Inverse design: which uniform source brings the middle to 50 degC?
    let source = "[span]\nx = [\"0 m\", \"1 m\"]\n[unknowns]\nT = \"degC\"\ns = { unit = \"W/m^3\", constant = true }\n\
                  [equations]\ne = \"2 W/(m K)*T'' = -s\"\n[conditions]\na = \"T(0 m) = 20 degC\"\nb = \"T(1 m) = 20 degC\"\n\
                  c = \"T(0.5 m) = 50 degC\"\n[report]\ns = \"s\"\n";
    check(numbers(source)[0], 8.0 * 2.0 * 30.0);
    // The same with the mean over the middle half prescribed: mean of s x (1 - x)/(2 k) there is 11 s/(48 * 2 k).
    let mean = source.replace("T(0.5 m) = 50 degC", "integral(T - 20 degC, 0.25 m, 0.75 m) = 15 K m");
    check(numbers(&mean)[0], 30.0 * 48.0 * 2.0 * 2.0 / 11.0);
}

#[test]
fn kinks_of_data_are_breaks() {
    // y'' = abs(x - 0.3): y = |x - 0.3|^3/6 + linear
    let text = "[given]\nf = \"abs(x - 0.3)\"\n[span]\nx = [\"0\", \"1\"]\n[unknowns]\ny = \"1\"\n[equations]\ne = \"y'' = f\"\n\
                [conditions]\na = \"y(0) = 0\"\nb = \"y(1) = 0\"\n[report]\nm = \"y(0.5)\"\n";
    let sheet = read(text);
    assert!(spanwise::model::Model::points(&sheet.model()).contains(&0.3));
    let cube = |x: f64| (x - 0.3f64).abs().powi(3) / 6.0;
    let exact = cube(0.5) - cube(0.0) - 0.5 * (cube(1.0) - cube(0.0));
    check(numbers(text)[0], exact);
    let max = text.replace("abs(x - 0.3)", "max(x - 0.3, 0)");
    let ramp = |x: f64| (x - 0.3f64).max(0.0).powi(3) / 6.0;
    check(numbers(&max)[0], ramp(0.5) - 0.5 * ramp(1.0));
    let chain = text.replace("abs(x - 0.3)", "if(0.3 < x < 0.6, 1, 0)");
    let part = |x: f64| 0.5 * ((x - 0.3f64).max(0.0).powi(2) - (x - 0.6f64).max(0.0).powi(2));
    check(numbers(&chain)[0], part(0.5) - 0.5 * part(1.0));
}

#[test]
fn two_values_need_a_side() {
    let text = "[given]\nk = { \"0 m .. 0.1 m\" = \"1 W/(m K)\", else = \"3 W/(m K)\" }\n[span]\nx = [\"0 m\", \"0.4 m\"]\n[unknowns]\nT = \"degC\"\n\
                [equations]\ne = \"(k*T')' = 0\"\n[conditions]\na = \"T(0 m) = 100 degC\"\nb = \"T(0.4 m) = 20 degC\"\n\
                [report]\ng = \"T'(0.1 m)\"\nl = \"T'(0.1 m-) in K/m\"\nr = \"T'(0.1 m+) in K/m\"\n";
    let sheet = read(text);
    let solution = sheet.solve(None).expect("regular");
    let asked = sheet.evaluate(&solution);
    assert!(asked[0].value.as_ref().is_err_and(|reason| reason.contains("two values")), "{:?}", asked[0].value);
    let flux = 80.0 / (0.1 + 0.1);
    check(asked[1].printed().map(|e| (e.value, e.error)).expect("a value"), -flux);
    check(asked[2].printed().map(|e| (e.value, e.error)).expect("a value"), -flux / 3.0);
}

/// The one asked number, or why there is none.
fn asked(report: &str) -> Result<(f64, f64), String> {
    let sheet = read(&format!("{QUARTIC}a = \"{report}\"\n"));
    let asked = sheet.evaluate(&sheet.solve(None).expect("regular")).remove(0);
    asked.printed().map(|e| (e.value, e.error)).ok_or_else(|| asked.value.expect_err("no value"))
}

#[test]
fn nothing_infinite_has_an_extreme_or_an_integral() {
    // T' = 1 - 4 x^3 vanishes at x = 0.6299605, T'' only at 0.
    let top = "x = 0.629961 m";
    for (report, place) in [
        ("max(1/(x - 0.1 m))", "x = 0.1 m"),
        ("argmin(1/(x - 0.1 m))", "x = 0.1 m"),
        ("max(1/(x - 0.1 m)^2)", "x = 0.1 m"),
        ("integral(1/(x - 0.1 m))", "x = 0.1 m"),
        ("mean(tan(2 1/m*x))", "x = 0.785398 m"),
        ("max(T/T')", top),
        ("norm(T''/T')", top),
        ("integral(T''/T', 0.5 m, 0.9 m)", top),
        ("integral(1/x)", "x = 0 m"),
        ("norm(1/sqrt(x))", "x = 0 m"),
    ] {
        let reason = asked(report).expect_err(report);
        assert!(reason.contains(&format!("is not finite at {place}:")), "{report}: {reason}");
    }
    // Divisors that vanish where the numerator does, elsewhere, or in a branch not taken do no harm.
    check(asked("max(sin(1 1/m*x - 0.1)/(1 1/m*x - 0.1))").expect("a limit"), 1.0);
    check(asked("max(1/(x - 0.1 m), 0.5 m, 0.9 m)").expect("away from it"), 2.5);
    check(asked("max(if(x < 0.5 m, 1/(x - 0.6 m), 1/(x + 1 m)))").expect("not taken"), 2.0 / 3.0);
    // (x - x^4)/x = 1 - x^3
    check(asked("integral(T/x)").expect("a limit"), 0.75);
    // A layer is steep, not infinite: 1/(1e-6 + y^2) with y = x - 0.3.
    check(asked("max(1/(1e-6 + (1 1/m*x - 0.3)^2))").expect("finite"), 1e6);
}

#[test]
fn data_with_a_finite_limit_may_divide_by_what_vanishes() {
    // y'' = (x^2 - 0.09)/(x - 0.3) = x + 0.3
    let text = "[span]\nx = [\"0\", \"1\"]\n[unknowns]\ny = \"1\"\n[equations]\ne = \"y'' = (x^2 - 0.09)/(x - 0.3)\"\n\
                [conditions]\na = \"y(0) = 0\"\nb = \"y(1) = 0\"\n[report]\nm = \"y(0.5)\"\n";
    let cubic = |x: f64| x.powi(3) / 6.0 + 0.15 * x * x;
    check(numbers(text)[0], cubic(0.5) - 0.5 * cubic(1.0));
}
