//! Nonlinear problems without a guess, against closed forms and reference values.

mod common;

use common::Tally;
use num_dual::DualNum;
use spanwise::error::Error;
use spanwise::model::Side;
use spanwise::problem::{Number, Problem};
use spanwise::solve::{Settings, Solution};
use std::f64::consts::PI;

/// F(x, u, u', u'') = 0 with given values at both ends.
fn two_point(
    ends: [f64; 2],
    f: impl Fn(f64, [Number; 3]) -> Number + Send + Sync + 'static,
) -> Result<Solution, Error> {
    let mut problem = Problem::new(0.0, 1.0);
    let y = problem.unknown("y", 2);
    problem.equation("equation", move |at| f(at.x(), [at.d(y, 0), at.d(y, 1), at.d(y, 2)]));
    problem.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - ends[0]);
    problem.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - ends[1]);
    problem.solve(&Settings::default())
}

/// A problem of the published set by its number.
fn published(number: &str, eps: f64) -> Result<Solution, Error> {
    match number {
        "P19" => two_point([0.0, 0.0], move |x, u| {
            u[2] * eps + u[0].exp() * u[1] - (u[0] * 2.0).exp() * (0.5 * PI * x).sin() * (0.5 * PI)
        }),
        "P20" => {
            // 1 + eps ln cosh((x - 0.745)/eps), without overflow
            let end = |z: f64| 1.0 + z.abs() + eps * ((1.0 + (-2.0 * z.abs() / eps).exp()) / 2.0).ln();
            two_point([end(0.745), end(0.255)], move |_, u| u[2] * eps + u[1] * u[1] - 1.0)
        }
        "P21" => {
            let r = eps.sqrt();
            two_point([1.0, (-1.0 / r).exp()], move |x, u| u[2] * eps - u[0] - u[0] * u[0] + (-2.0 * x / r).exp())
        }
        "P22" => two_point([0.0, 0.5], move |_, u| u[2] * eps + u[1] + u[0] * u[0]),
        "P23" => two_point([0.0, 1.0], move |_, u| u[2] - (u[0] / eps).sinh() / eps),
        "P24" => nozzle(eps),
        "P25" => two_point([-1.0 / 3.0, 1.0 / 3.0], move |_, u| u[2] * eps + u[0] * u[1] - u[0]),
        "P27" => two_point([1.0, 1.0 / 3.0], move |_, u| u[2] * eps + u[0] * u[1] - u[0]),
        "P29" => two_point([0.0, 1.5], move |_, u| u[2] * eps + u[0] * u[1] - u[0]),
        "P34" => two_point([0.0, 0.0], move |_, u| u[2] + u[0].exp() * eps),
        "P31" => beam_system(eps),
        "P32" => injection(eps),
        "P33" => swirl(eps),
        _ => panic!("{number} is not one of these"),
    }
}

/// Transonic nozzle: y must stay positive.
fn nozzle(eps: f64) -> Result<Solution, Error> {
    let gamma = 1.4;
    let mut p = Problem::new(0.0, 1.0);
    let y = p.unknown("y", 2);
    p.limit(y, 0.0, f64::INFINITY);
    p.equation("flow", move |at| {
        let (x, u, slope) = (at.x(), at.d(y, 0), at.d(y, 1));
        let area = 1.0 + x * x;
        u * at.d(y, 2) * (eps * area) - u * slope * ((1.0 + gamma) / 2.0 - 2.0 * eps * x)
            + slope / u
            + (-(u * u) * ((gamma - 1.0) / 2.0) + 1.0) * (2.0 * x / area)
    });
    p.condition("inlet", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 0.9129);
    p.condition("outlet", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - 0.375);
    p.solve(&Settings::default())
}

fn beam_system(eps: f64) -> Result<Solution, Error> {
    let mut p = Problem::new(0.0, 1.0);
    let [y, th, m, q] = ["y", "th", "M", "Q"].map(|name| p.unknown(name, 1));
    p.equation("place", move |at| at.d(y, 1) - at.d(th, 0).sin());
    p.equation("angle", move |at| at.d(th, 1) - at.d(m, 0));
    p.equation("moment", move |at| at.d(m, 1) * eps + at.d(q, 0));
    p.equation("force", move |at| {
        let (sine, cosine) = (at.d(th, 0).sin(), at.d(th, 0).cos());
        let bracket = cosine.recip() + at.d(q, 0) * sine / cosine * eps;
        at.d(q, 1) * eps - (at.d(y, 0) - 1.0) * cosine + at.d(m, 0) * bracket
    });
    for (x, side) in [(0.0, Side::Right), (1.0, Side::Left)] {
        p.condition("end", &[(x, side)], move |v| v[0].d(y, 0));
        p.condition("end", &[(x, side)], move |v| v[0].d(m, 0));
    }
    p.solve(&Settings::default())
}

fn injection(eps: f64) -> Result<Solution, Error> {
    let mut p = Problem::new(0.0, 1.0);
    let y = p.unknown("y", 4);
    let r = 1.0 / eps;
    p.equation("flow", move |at| at.d(y, 4) - (at.d(y, 1) * at.d(y, 2) - at.d(y, 0) * at.d(y, 3)) * r);
    for (x, side, value) in [(0.0, Side::Right, 0.0), (1.0, Side::Left, 1.0)] {
        p.condition("wall", &[(x, side)], move |v| v[0].d(y, 0) - value);
        p.condition("wall", &[(x, side)], move |v| v[0].d(y, 1));
    }
    p.solve(&Settings::default())
}

fn swirl(eps: f64) -> Result<Solution, Error> {
    let mut p = Problem::new(0.0, 1.0);
    let (y, g) = (p.unknown("y", 4), p.unknown("g", 2));
    p.equation("axial", move |at| at.d(y, 4) * eps + at.d(y, 0) * at.d(y, 3) + at.d(g, 0) * at.d(g, 1));
    p.equation("swirl", move |at| at.d(g, 2) * eps - at.d(y, 1) * at.d(g, 0) + at.d(y, 0) * at.d(g, 1));
    for (x, side, value) in [(0.0, Side::Right, -1.0), (1.0, Side::Left, 1.0)] {
        p.condition("disc", &[(x, side)], move |v| v[0].d(y, 0));
        p.condition("disc", &[(x, side)], move |v| v[0].d(y, 1));
        p.condition("disc", &[(x, side)], move |v| v[0].d(g, 0) - value);
    }
    p.solve(&Settings::default())
}

#[test]
fn the_published_set_without_a_guess() {
    let mut tally = Tally::default();
    let mut solved: Option<(String, Solution)> = None;
    let rows = include_str!("data/two_point.csv").lines().filter(|l| !l.starts_with('#')).skip(1);
    for row in rows {
        let parts: Vec<&str> = row.split(',').collect();
        let [id, eps, x, unknown, value, scale] = parts[..] else { panic!("{row}") };
        if solved.as_ref().is_none_or(|s| s.0 != id) {
            let eps = eps.split_once('/').map_or_else(
                || eps.parse::<f64>().expect("a number"),
                |(a, b)| a.parse::<f64>().expect("a number") / b.parse::<f64>().expect("a number"),
            );
            let solution = published(&id[..3], eps).unwrap_or_else(|e| panic!("{id}: {e}"));
            solved = Some((id.to_owned(), solution));
        }
        let Some((_, solution)) = &solved else { continue };
        let index = match unknown {
            "th" | "g" => 1,
            "M" => 2,
            "Q" => 3,
            _ => 0,
        };
        let number = |text: &str| text.parse::<f64>().expect("a number");
        let (x, value, scale) = (number(x), number(value), number(scale));
        let got = solution.value(index, 0, x, Side::Left).expect("finite");
        tally.add(format!("{id} {unknown}({x})"), (got.value - value).abs() / scale, got.error / scale);
    }
    tally.check(1e-9, 100.0);
}

/// Troesch's problem at mu = 20: y'(0) = 1.6487734e-8 in published tables (Roberts & Shipman 1976 give 1.648773182e-8; from
/// memory).
#[test]
fn troesch_at_twenty() {
    let solution = published("P23", 0.05).expect("solved");
    let slope = solution.value(0, 1, 0.0, Side::Right).expect("finite");
    assert!((slope.value - 1.648_773_182e-8).abs() < 1e-16, "{slope:?}");
    assert!(slope.error < 1e-15, "{slope:?}");
}

/// Severe layers of the same set: mesh and iteration find them together.
#[test]
fn severe_layers_without_a_guess() {
    for eps in [1e-4, 1e-6] {
        let r = f64::sqrt(eps);
        let mut tally = Tally::default();
        let solution = published("P21", eps).expect("solved");
        tally.compare("P21", &solution, &[0.5 * r, 2.0 * r, 0.3], 1.0, |x| (-x / r).exp());
        let e = 1e-2;
        let solution = published("P20", e).expect("solved");
        let exact = |x: f64| {
            let z = (x - 0.745).abs();
            1.0 + z + e * ((1.0 + (-2.0 * z / e).exp()) / 2.0).ln()
        };
        tally.compare("P20", &solution, &[0.1, 0.745, 0.745 + e, 0.9], 1.0, exact);
        tally.check(1e-9, 1000.0);
    }
}

/// Beyond the fold of y'' + d exp(y) = 0 (d = 3.5138) there is no solution: a verdict, no number, no hang.
#[test]
fn no_solution_is_said() {
    match published("P34", 4.0) {
        Err(Error::NoSolution { tried }) => assert!(tried.contains("homotopy"), "{tried}"),
        other => panic!("expected a verdict, got {:?}", other.map(|s| s.condition)),
    }
}

/// Of the two solutions of y'' + exp(y) = 0 the guess and the limits of the sheet choose (largest values: closed form ln cosh,
/// 0.1405392144 and 4.0914672462).
#[test]
fn a_guess_chooses_and_limits_hold() {
    let largest = |unknown: &str| {
        let text = format!(
            "[span]\nx = [\"0\", \"1\"]\n[unknowns]\ny = {{ unit = \"1\"{unknown} }}\n[equations]\ne = \"y'' + exp(y) = 0\"\n\
             [conditions]\na = \"y(0) = 0\"\nb = \"y(1) = 0\"\n[report]\nm = \"max(y)\"\n"
        );
        let sheet = spanwise::sheet::read(&text).unwrap_or_else(|f| panic!("{f:#?}"));
        let solution = sheet.solve(None)?;
        Ok::<f64, Error>(sheet.evaluate(&solution)[0].printed().expect("a value").value)
    };
    let near = |found: Result<f64, Error>, value: f64| {
        let found = found.expect("solved");
        assert!((found - value).abs() < 1e-12, "{found}");
    };
    near(largest(""), 0.140_539_214_400_471_8);
    near(largest(", guess = \"16*x*(1 - x)\""), 4.091_467_246_189_26);
    near(largest(", below = \"3\""), 0.140_539_214_400_471_8);
    assert!(matches!(largest(", above = \"1\""), Err(Error::NoSolution { .. })));
}
