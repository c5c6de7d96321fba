//! Nonlinear problems without a guess, against closed forms and published values.

mod common;

use num_dual::DualNum;
use spanwise::error::Error;
use spanwise::model::Side;
use spanwise::problem::{Number, Problem};
use spanwise::solve::{Settings, Solution};

fn two_point(
    span: [f64; 2],
    ends: [f64; 2],
    f: impl Fn(f64, [Number; 3]) -> Number + Send + Sync + 'static,
) -> Result<Solution, Error> {
    let mut problem = Problem::new(span[0], span[1]);
    let y = problem.unknown("y", 2);
    problem.equation("equation", move |at| f(at.x(), [at.d(y, 0), at.d(y, 1), at.d(y, 2)]));
    problem.condition("left", &[(span[0], Side::Right)], move |v| v[0].d(y, 0) - ends[0]);
    problem.condition("right", &[(span[1], Side::Left)], move |v| v[0].d(y, 0) - ends[1]);
    problem.solve(&Settings::default())
}

fn show(name: &str, s: Result<Solution, Error>, at: &[(f64, f64)]) {
    match s {
        Ok(s) => {
            println!("{name}: passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
            for (x, exact) in at {
                let v = s.value(0, 0, *x, Side::Left).unwrap();
                println!("   {x}: {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
            }
        }
        Err(e) => println!("{name}: ERROR {e}"),
    }
}

#[test]
fn cash() {
    // Bratu delta=1 : y'' + exp(y) = 0: y = -2 ln(cosh((x-1/2) th/2)/cosh(th/4)), th = sqrt(2) cosh(th/4)
    let mut th: f64 = 1.5;
    for _ in 0..200 {
        th = std::f64::consts::SQRT_2 * (th / 4.0).cosh();
    }
    show("bratu", two_point([0.0, 1.0], [0.0, 0.0], |_, u| u[2] + u[0].exp()), &[(0.5, 2.0 * (th / 4.0).cosh().ln())]);
    for mu in [5.0, 10.0, 20.0] {
        show(
            &format!("troesch {mu}"),
            two_point([0.0, 1.0], [0.0, 1.0], move |_, u| u[2] - (u[0] * mu).sinh() * mu),
            &[(0.5, 0.0), (0.9, 0.0)],
        );
    }
    for eps in [1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6] {
        let r: f64 = eps;
        let exact = |x: f64| 1.0 + r * ((x - 0.745) / r).cosh().ln();
        let (a, b) = (1.0 + r * ((0.0f64 - 0.745) / r).cosh().ln(), 1.0 + r * (0.255 / r).cosh().ln());
        if a.is_finite() && b.is_finite() {
            show(
                &format!("P20 {eps}"),
                two_point([0.0, 1.0], [a, b], move |_, u| u[2] * eps + u[1] * u[1] - 1.0),
                &[(0.745, exact(0.745)), (0.7, exact(0.7))],
            );
        }
        show(
            &format!("P22 {eps}"),
            two_point([0.0, 1.0], [0.0, 0.5], move |_, u| u[2] * eps + u[1] + u[0] * u[0]),
            &[(0.1, 0.0)],
        );
        show(
            &format!("P25 {eps}"),
            two_point([0.0, 1.0], [-1.0 / 3.0, 1.0 / 3.0], move |_, u| u[2] * eps + u[0] * u[1] - u[0]),
            &[(0.1, 0.0)],
        );
        show(
            &format!("P27 {eps}"),
            two_point([0.0, 1.0], [1.0, 1.0 / 3.0], move |_, u| u[2] * eps + u[0] * u[1] - u[0]),
            &[(0.1, 0.0)],
        );
        show(
            &format!("P21 {eps}"),
            two_point([0.0, 1.0], [1.0, (-1.0 / f64::sqrt(eps)).exp()], move |x, u| {
                u[2] * eps - u[0] - u[0] * u[0] + (-2.0 * x / f64::sqrt(eps)).exp()
            }),
            &[(0.1, (-0.1 / f64::sqrt(eps)).exp())],
        );
        show(
            &format!("P19 {eps}"),
            two_point([0.0, 1.0], [0.0, 0.0], move |x, u| {
                u[2] * eps + u[0].exp() * u[1]
                    - (u[0] * 2.0).exp() * (std::f64::consts::PI / 2.0 * x).sin() * (std::f64::consts::PI / 2.0)
            }),
            &[(0.5, 0.0)],
        );
    }
}
