//! The engine through Rust closures: accuracy and bars against closed forms.

mod common;

use common::{Tally, second_order};
use spanwise::error::Error;
use spanwise::evidence::nodal::nodal;
use spanwise::evidence::residual::residual;
use spanwise::mesh::Mesh;
use spanwise::model::Side;
use spanwise::problem::{Expression, Problem};
use spanwise::solve::{self, Settings};
use std::f64::consts::PI;

/// u'''' + (1 + x) u = f with u = sin(2.385 x) + x^2, clamped ends: one element of n nodes. The powers of the
/// differentiation matrix lose everything here from n = 64 on; the integrated form must not.
#[test]
fn clamped_beam_in_one_element_keeps_its_digits_at_every_n() {
    let c = 2.385f64;
    let u = move |k: usize, x: f64| {
        let wave = c.powi(k as i32) * (c * x + 0.5 * PI * k as f64).sin();
        wave + [x * x, 2.0 * x, 2.0, 0.0, 0.0][k]
    };
    let mut beam = Problem::new(-1.0, 1.0);
    let y = beam.unknown("u", 4);
    beam.equation("bending", move |at| {
        let x = at.x();
        at.d(y, 4) + at.d(y, 0) * (1.0 + x) - (u(4, x) + (1.0 + x) * u(0, x))
    });
    for (x, side) in [(-1.0, Side::Right), (1.0, Side::Left)] {
        for k in 0..2 {
            beam.condition("clamped", &[(x, side)], move |v| v[0].d(y, k) - u(k, x));
        }
    }
    let model = beam.build().expect("well posed");
    for n in 16..=200 {
        let field = solve::on_mesh(&model, &Mesh::uniform(&[-1.0, 1.0], 1, n)).expect("regular");
        for k in [0, 2, 3] {
            for j in 0..=40 {
                let x = -1.0 + 0.05 * j as f64;
                let error = (field.value(y, k, x, Side::Left) - u(k, x)).abs();
                assert!(error < 1e-12, "n = {n}, derivative {k} at {x}: error {error:e}");
            }
        }
    }
}

/// Problems 1, 2, 4, 6, 9, 12, 14, 16, 17 of the singularly perturbed linear set of J. R. Cash and co-workers (numbering
/// from memory; see Cash & Wright, SIAM J. Sci. Stat. Comput. 12, 1991), against their closed forms.
#[test]
fn published_linear_layers_to_ten_digits_with_bars_that_hold() {
    let mut tally = Tally::default();
    for eps in [1e-2, 1e-4, 1e-6, 1e-8] {
        let r = f64::sqrt(eps);
        let solution = second_order([0.0, 1.0], [1.0, 0.0], move |_, u| u[2] * eps - u[0]);
        let exact = |x: f64| ((-x / r).exp() - ((x - 2.0) / r).exp()) / -(-2.0 / r).exp_m1();
        tally.compare("1", &solution, &[0.5 * r, r, 4.0 * r, 0.3, 0.75], 1.0, exact);
        assert!(solution.field.mesh.elements.len() <= 40 && solution.passes <= 6, "problem 1, eps {eps}");

        let solution = second_order([0.0, 1.0], [1.0, 0.0], move |_, u| u[2] * eps - u[1]);
        let exact = |x: f64| ((x - 1.0) / eps).exp_m1() / (-1.0 / eps).exp_m1();
        tally.compare("2", &solution, &[0.3, 0.5, 0.99], 1.0, exact);
        assert!(solution.field.mesh.elements.len() <= 40 && solution.passes <= 6, "problem 2, eps {eps}");

        let ends = [1.0 + (-2.0f64).exp(), 1.0 + (-2.0 * (1.0 + eps) / eps).exp()];
        let solution = second_order([-1.0, 1.0], ends, move |_, u| u[2] * eps + u[1] - u[0] * (1.0 + eps));
        let exact = |x: f64| (x - 1.0).exp() + (-(1.0 + eps) * (1.0 + x) / eps).exp();
        tally.compare("4", &solution, &[-0.9, 0.0, 0.5], 1.0, exact);

        let solution = second_order([-1.0, 1.0], [-2.0, 0.0], move |x, u| {
            u[2] * eps + u[1] * x + eps * PI * PI * (PI * x).cos() + PI * x * (PI * x).sin()
        });
        let w = (2.0 * eps).sqrt();
        let exact = |x: f64| (PI * x).cos() + libm::erf(x / w) / libm::erf(1.0 / w);
        tally.compare("6", &solution, &[-0.5, 0.0, 0.3 * r, 0.5], 1.0, exact);

        let end = 1.0 / (1.0 + eps);
        let solution =
            second_order([-1.0, 1.0], [end, end], move |x, u| u[2] * (eps + x * x) + u[1] * (4.0 * x) + u[0] * 2.0);
        tally.compare("9", &solution, &[-0.5, 0.0, 0.3 * r, 0.5], 1.0 / eps, |x| 1.0 / (eps + x * x));

        let source = move |x: f64| (eps * PI * PI + 1.0) * (PI * x).cos();
        let solution = second_order([-1.0, 1.0], [-1.0, 0.0], move |x, u| u[2] * eps - u[0] + source(x));
        let exact = |x: f64| (PI * x).cos() + ((x - 1.0) / r).exp();
        let exact = move |x: f64| exact(x) - ((-x - 3.0) / r).exp();
        tally.compare("12", &solution, &[-0.5, 0.0, 1.0 - r, 1.0 - 0.1 * r], 1.0, exact);

        let solution = second_order([-1.0, 1.0], [0.0, 0.0], move |x, u| u[2] * eps - u[0] + source(x));
        let edge = move |x: f64| (((x - 1.0) / r).exp() + (-(x + 1.0) / r).exp()) / (1.0 + (-2.0 / r).exp());
        tally.compare("14", &solution, &[-1.0 + r, 0.0, 0.7, 1.0 - 0.1 * r], 1.0, |x| (PI * x).cos() + edge(x));

        let eps = 0.3 * eps;
        let end = 0.1 / (eps + 0.01f64).sqrt();
        let solution =
            second_order([-0.1, 0.1], [-end, end], move |x, u| u[2] + u[0] * (3.0 * eps / (eps + x * x).powi(2)));
        tally.compare("17", &solution, &[-0.05, 0.1 * r, 0.01], 1.0, |x| x / (eps + x * x).sqrt());
    }
    for eps in [1.0 / 11.0, 1.0 / 101.0, 1.0 / 1001.0] {
        let end = (PI / (2.0 * eps)).sin();
        let solution = second_order([0.0, 1.0], [0.0, end], move |_, u| u[2] * (eps * eps) + u[0] * (PI * PI / 4.0));
        tally.compare("16", &solution, &[0.3, 0.77], 1.0, |x| (PI * x / (2.0 * eps)).sin());
    }
    tally.check(1e-10, 100.0);
}

/// A stepped shaft's torsion with a point torque: flux unknown, jump, two routes.
#[test]
fn jump_and_step_agree_with_statics_and_with_the_second_route() {
    let mut shaft = Problem::new(0.0, 1.8);
    let phi = shaft.unknown("phi", 1);
    let t = shaft.unknown("T", 1);
    shaft.break_at(0.7);
    let stiffness = |piece: usize| if piece == 0 { 3.2e5 } else { 1.0e5 };
    shaft.equation("torsion", move |at| at.d(phi, 1) * stiffness(at.piece()) - at.d(t, 0));
    shaft.equation("balance", move |at| at.d(t, 1) + 900.0);
    shaft.condition("locked", &[(0.0, Side::Right)], move |v| v[0].d(phi, 0));
    shaft.condition("coupling", &[(1.8, Side::Left)], move |v| v[0].d(t, 0) + v[0].d(phi, 0) * 6.0e4);
    shaft.release(1.1, t, 0);
    shaft.condition("impeller", &[(1.1, Side::Left), (1.1, Side::Right)], move |v| v[1].d(t, 0) - v[0].d(t, 0) + 600.0);
    let model = shaft.build().expect("well posed");
    let solution = solve::boundary(&model, &Settings::default()).expect("regular");
    let [left, right] = [Side::Left, Side::Right].map(|side| solution.value(t, 0, 1.1, side).expect("finite"));
    assert!((left.value - right.value - 600.0).abs() <= left.error + right.error);
    // Closed form by superposition: integrate T/stiffness, T linear with the jump, T(0) from the coupling.
    let (g1, g2, k, l) = (3.2e5, 1.0e5, 6.0e4, 1.8);
    let compliance = 0.7 / g1 + (l - 0.7) / g2;
    let load = |a: f64, b: f64, g: f64| 900.0 * (b * b - a * a) / (2.0 * g);
    let lost = load(0.0, 0.7, g1) + load(0.7, l, g2) + 600.0 * (l - 1.1) / g2;
    let t0 = (k * lost + 900.0 * l + 600.0) / (1.0 + k * compliance);
    let start = solution.value(t, 0, 0.0, Side::Right).expect("finite");
    assert!((start.value - t0).abs() <= start.error && start.error < 1e-12 * t0, "{start:?} {t0}");
    let second = nodal(&model, &solution.base().mesh).expect("small");
    for x in [0.3, 0.7, 1.0, 1.5] {
        let difference = second.value(phi, 0, x, Side::Left) - solution.field.value(phi, 0, x, Side::Left);
        assert!(difference.abs() < 1e-12 * 6e-3, "at {x}: {difference:e}");
    }
    assert!(residual(&model, &solution.field).expect("finite").largest < 1e-12);
}

/// Beam on two spans with a hinge: release of the slope, support as release of the shear.
#[test]
fn hinge_and_support_as_releases() {
    let mut beam = Problem::new(0.0, 10.0);
    let y = beam.unknown("y", 2);
    let m = beam.unknown("M", 2);
    beam.equation("bending", move |at| at.d(y, 2) * 2.385e3 - at.d(m, 0));
    beam.equation("load", move |at| at.d(m, 2) + 3.0);
    for k in 0..2 {
        beam.condition("clamped", &[(0.0, Side::Right)], move |v| v[0].d(y, k));
    }
    beam.release(4.0, y, 1);
    beam.condition("hinge", &[(4.0, Side::Left)], move |v| v[0].d(m, 0));
    beam.release(7.0, m, 1);
    beam.condition("support", &[(7.0, Side::Left)], move |v| v[0].d(y, 0));
    beam.condition("end", &[(10.0, Side::Left)], move |v| v[0].d(m, 0));
    beam.condition("end", &[(10.0, Side::Left)], move |v| v[0].d(m, 1));
    let solution = beam.solve(&Settings::default()).expect("regular");
    // Right part by statics: hinge force and reaction from moments about the hinge.
    let reaction = 3.0 * 6.0 * 3.0 / 3.0;
    let shear = |side| solution.value(m, 1, 7.0, side).expect("finite");
    let (left, right) = (shear(Side::Left), shear(Side::Right));
    assert!((right.value - left.value - reaction).abs() <= left.error + right.error, "{left:?} {right:?}");
    let hinge_force = 3.0 * 6.0 - reaction;
    let moment = -(hinge_force * 4.0 + 3.0 * 8.0);
    let clamp = solution.value(m, 0, 0.0, Side::Right).expect("finite");
    assert!((clamp.value - moment).abs() <= clamp.error && clamp.error < 1e-11, "{clamp:?} {moment}");
}

#[test]
fn unknown_constant_and_interior_condition() {
    // T'' = -c, T(0) = 0, T(1) = 0, T(0.5) = 2.385: c = 8 * 2.385
    let mut wall = Problem::new(0.0, 1.0);
    let t = wall.unknown("T", 2);
    let c = wall.constant("c");
    wall.equation("source", move |at| at.d(t, 2) + at.constant(c));
    wall.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(t, 0));
    wall.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(t, 0));
    wall.condition("middle", &[(0.5, Side::Left)], move |v| v[0].d(t, 0) - 2.385);
    let solution = wall.solve(&Settings::default()).expect("regular");
    assert!((solution.field.constants[0] - 8.0 * 2.385).abs() < 1e-12);
    let peak = solution.maximum(&Expression::new(&[2], move |at| at.d(t, 0)), 0.0, 1.0).expect("finite");
    assert!((peak.place.value - 0.5).abs() <= peak.place.error && peak.place.error < 1e-8, "{peak:?}");
    assert!((peak.value.value - 2.385).abs() <= peak.value.error);
}

fn beam(ends: [[(usize, f64); 2]; 2], load: f64) -> Result<solve::Solution, Error> {
    let mut beam = Problem::new(0.0, 3.0);
    let y = beam.unknown("y", 2);
    let m = beam.unknown("M", 2);
    beam.equation("bending", move |at| at.d(y, 2) * 7.0e4 - at.d(m, 0));
    beam.equation("load", move |at| at.d(m, 2) + load);
    for (end, (x, side)) in ends.into_iter().zip([(0.0, Side::Right), (3.0, Side::Left)]) {
        for (which, value) in end {
            let name = if x == 0.0 { "left" } else { "right" };
            let (unknown, k) = [(y, 0), (y, 1), (m, 0), (m, 1)][which];
            beam.condition(name, &[(x, side)], move |v| v[0].d(unknown, k) - value);
        }
    }
    beam.solve(&Settings::default())
}

#[test]
fn singular_problems_are_explained() {
    let text = |outcome: Result<solve::Solution, Error>| match outcome {
        Err(Error::Singular(text)) => text,
        other => panic!("expected a refusal, got {:?}", other.map(|s| s.condition)),
    };
    let free = text(beam([[(2, 0.0), (3, 0.0)], [(2, 0.0), (3, 0.0)]], 5.0));
    assert!(free.contains("no reaction") && free.contains("holds y against translation"), "{free}");
    assert!(free.contains("against rotation"), "{free}");
    let unloaded = text(beam([[(2, 0.0), (3, 0.0)], [(2, 0.0), (3, 0.0)]], 0.0));
    assert!(unloaded.contains("not unique") && unloaded.contains("holds y against translation"), "{unloaded}");
    let pinned_only_once = text(beam([[(0, 0.0), (2, 0.0)], [(2, 0.0), (3, 0.0)]], 5.0));
    assert!(pinned_only_once.contains("rotation") && !pinned_only_once.contains("translation"), "{pinned_only_once}");
    let repeated = text(beam([[(0, 0.0), (1, 0.0)], [(3, -15.0), (3, -15.0)]], 5.0));
    assert!(repeated.contains("\"right\""), "{repeated}");

    let mut wall = Problem::new(0.0, 0.3);
    let t = wall.unknown("T", 1);
    let q = wall.unknown("q", 1);
    wall.equation("conduction", move |at| at.d(t, 1) * 0.8 + at.d(q, 0));
    wall.equation("sources", move |at| at.d(q, 1) - 100.0);
    wall.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(q, 0));
    wall.condition("right", &[(0.3, Side::Left)], move |v| v[0].d(q, 0));
    let insulated = text(wall.solve(&Settings::default()));
    assert!(insulated.contains("no reaction") && insulated.contains("T against translation"), "{insulated}");

    let resonance = text({
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("y", 2);
        p.equation("vibration", move |at| at.d(y, 2) + at.d(y, 0) * (9.0 * PI * PI) - 1.0);
        p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
        p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
        p.solve(&Settings::default())
    });
    assert!(resonance.contains("resonance"), "{resonance}");
}

/// Close to a resonance the answer exists and is ill-conditioned: the bar must show it.
#[test]
fn near_resonance_the_bar_grows_and_holds() {
    for gap in [1e-3, 1e-6, 1e-9] {
        let k = PI * (1.0 + gap);
        let solution = second_order([0.0, 1.0], [0.0, 1.0], move |_, u| u[2] + u[0] * (k * k));
        let y = solution.value(0, 0, 0.5, Side::Left).expect("finite");
        // sin(k/2)/sin(k) = 1/(2 cos(k/2)), and cos(k/2) = -sin(pi gap/2) without cancellation
        let exact = -0.5 / (0.5 * PI * gap).sin();
        // k itself is rounded: relative 1e-16 of pi against the gap.
        assert!((y.value - exact).abs() <= y.error, "gap {gap}: {y:?} {exact}");
        assert!(y.error < 1e-12 / gap * exact.abs(), "gap {gap}: {y:?}");
    }
}

#[test]
fn faulty_problems_are_refused() {
    let mut p = Problem::new(0.0, 1.0);
    let y = p.unknown("y", 2);
    p.equation("e", move |at| at.d(y, 2));
    p.condition("l", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
    assert_eq!(p.solve(&Settings::default()).err(), Some(Error::ConditionCount { found: 1, needed: 2 }));
    let mut p = Problem::new(0.0, 1.0);
    let y = p.unknown("y", 2);
    p.equation("source", move |at| at.d(y, 2) - (at.x() - 2.0).sqrt());
    for x in [0.0, 1.0] {
        p.condition("ends", &[(x, Side::Left)], move |v| v[0].d(y, 0));
    }
    assert!(matches!(p.solve(&Settings::default()), Err(Error::NotFinite { what, .. }) if what == "source"));
    let p = Problem::new(1.0, 0.0);
    assert!(matches!(p.solve(&Settings::default()), Err(Error::Argument { .. })));
}

#[test]
fn a_watch_stops_the_solve() {
    let stop = |_: solve::Progress| false;
    let settings = Settings { watch: Some(&stop), ..Settings::default() };
    let mut p = Problem::new(0.0, 1.0);
    let y = p.unknown("y", 1);
    p.equation("e", move |at| at.d(y, 1) - at.d(y, 0));
    p.condition("l", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
    assert_eq!(p.solve(&settings).err(), Some(Error::Interrupted));
}

/// A factor of the highest derivative that vanishes admits false solutions: sqrt(x) y' = f, f' = -1 would be "solved"
/// with a jump at x = 0.
#[test]
fn singular_points_are_refused() {
    for inside in [0.0, 0.385f64] {
        let mut p = Problem::new(0.0, 1.0);
        let (y, f) = (p.unknown("y", 1), p.unknown("f", 1));
        p.equation("flux", move |at| {
            at.d(y, 1) * (at.x() - inside).abs().sqrt() * (at.x() - inside).signum() - at.d(f, 0)
        });
        p.equation("balance", move |at| at.d(f, 1) + 1.0);
        p.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
        p.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - 1.0);
        match p.solve(&Settings::default()) {
            Err(Error::SingularPoint { x }) => assert!((x - inside).abs() <= 1.0 / 32.0, "{x}"),
            other => panic!("expected a refusal, got {:?}", other.map(|s| s.condition)),
        }
    }
}

/// Regular singular ends have Gauss nodes: Bessel's equation r u'' + u' + r u = 0 with u'(0) = 0, u(2.385) = J0(2.385);
/// a reacting sphere D (c'' + 2 c'/r) = k c, closed form sinh(m r)/r.
#[test]
fn singular_ends_of_discs_and_spheres() {
    // J0(x) by its power series, exact to rounding for such x.
    let j0 = |x: f64| (1..40).rev().fold(1.0, |sum, k| 1.0 - sum * x * x / (4.0 * f64::from(k * k)));
    let mut p = Problem::new(0.0, 2.385);
    let u = p.unknown("u", 2);
    p.equation("Bessel", move |at| at.d(u, 2) * at.x() + at.d(u, 1) + at.d(u, 0) * at.x());
    p.condition("centre", &[(0.0, Side::Right)], move |v| v[0].d(u, 1));
    p.condition("rim", &[(2.385, Side::Left)], move |v| v[0].d(u, 0) - j0(2.385));
    let solution = p.solve(&Settings::default()).expect("regular");
    for x in [0.0, 0.5, 1.7] {
        let got = solution.value(u, 0, x, Side::Right).expect("finite");
        assert!(
            (got.value - j0(x)).abs() <= got.error + 4.0 * f64::EPSILON && got.error < 1e-11,
            "{x}: {got:?} {}",
            j0(x)
        );
    }
    for m in [0.5, 5.0, 60.0] {
        let mut p = Problem::new(0.0, 1.0);
        let c = p.unknown("c", 2);
        p.equation("uptake", move |at| at.d(c, 2) + at.d(c, 1) * (2.0 / at.x()) - at.d(c, 0) * (m * m));
        p.condition("centre", &[(0.0, Side::Right)], move |v| v[0].d(c, 1));
        p.condition("surface", &[(1.0, Side::Left)], move |v| v[0].d(c, 0) - 1.0);
        let solution = p.solve(&Settings::default()).expect("regular");
        let exact = |r: f64| if r == 0.0 { m / f64::sinh(m) } else { (m * r).sinh() / (r * f64::sinh(m)) };
        for r in [0.0, 0.3, 0.9] {
            let got = solution.value(c, 0, r, Side::Right).expect("finite");
            let known = 4.0 * f64::EPSILON * exact(r);
            assert!(
                (got.value - exact(r)).abs() <= got.error + known && got.error < 1e-11,
                "m {m} at {r}: {got:?} {}",
                exact(r)
            );
        }
    }
}

/// What contradicts the regularity that the equation forces at a singular end is refused, not smoothed over.
#[test]
fn wrong_conditions_at_a_singular_end_are_refused() {
    for (order, value) in [(0, 5.0), (1, 3.0)] {
        let mut p = Problem::new(0.0, 1.0);
        let c = p.unknown("c", 2);
        p.equation("uptake", move |at| at.d(c, 2) + at.d(c, 1) * (2.0 / at.x()) - at.d(c, 0) * 25.0);
        p.condition("centre", &[(0.0, Side::Right)], move |v| v[0].d(c, order) - value);
        p.condition("surface", &[(1.0, Side::Left)], move |v| v[0].d(c, 0) - 1.0);
        let outcome = p.solve(&Settings::default());
        assert!(matches!(outcome, Err(Error::SingularEnd { x: 0.0 })), "{:?}", outcome.map(|s| s.condition));
    }
}

/// The thinnest layer that is promised: eps y'' = y' at eps = 1e-9, at most 40 elements and 6 passes.
#[test]
fn a_layer_a_billionth_thin_needs_few_elements() {
    let eps = 1e-9;
    let solution = second_order([0.0, 1.0], [1.0, 0.0], move |_, u| u[2] * eps - u[1]);
    assert!(solution.field.mesh.elements.len() <= 40 && solution.passes <= 6, "{} passes", solution.passes);
    let mut tally = Tally::default();
    let exact = |x: f64| ((x - 1.0) / eps).exp_m1() / (-1.0 / eps).exp_m1();
    tally.compare("2", &solution, &[0.3, 0.5, 0.99, 1.0 - 4.0 * eps, 1.0 - eps], 1.0, exact);
    tally.check(1e-10, 1000.0);
}

/// The rest of the same linear set (3, 5, 7, 8, 10, 11, 13, 18; statements from memory, each closed form verified by
/// substitution). Number 15, Airy's equation, has its own test below.
#[test]
fn published_linear_layers_the_rest() {
    let mut tally = Tally::default();
    // Number 7 at the severest eps: in the smooth region y'' is the rounding of the other terms over eps, and only 1e-9 can
    // be had in double precision. The bar must say so and hold.
    let mut severe = Tally::default();
    for eps in [1e-2, 1e-4, 1e-6, 1e-8] {
        let (r, w) = (f64::sqrt(eps), f64::sqrt(2.0 * eps));
        let bend = move |x: f64| (1.0 + eps * PI * PI) * (PI * x).cos();
        let wave = |x: f64| (PI * x).cos();
        let solution = second_order([-1.0, 1.0], [-1.0, -1.0], move |x, u| {
            let a = 2.0 + (PI * x).cos();
            u[2] * eps + u[1] * a - u[0] + (bend(x) + a * PI * (PI * x).sin())
        });
        tally.compare("3", &solution, &[-0.9, 0.0, 0.7], 1.0, wave);
        let solution = second_order([-1.0, 1.0], [-1.0, -1.0], move |x, u| {
            u[2] * eps - u[1] * x - u[0] + (bend(x) - x * PI * (PI * x).sin())
        });
        tally.compare("5", &solution, &[-0.9, 0.0, 0.7], 1.0, wave);
        let solution = second_order([-1.0, 1.0], [-1.0, 1.0], move |x, u| {
            u[2] * eps + u[1] * x - u[0] + (bend(x) + x * PI * (PI * x).sin())
        });
        let hat = move |x: f64| x * libm::erf(x / w) + (2.0 * eps / PI).sqrt() * (-x * x / (2.0 * eps)).exp();
        let tally_of_seven = if eps > 1e-7 { &mut tally } else { &mut severe };
        tally_of_seven
            .compare("7", &solution, &[-0.5, 0.0, 0.3 * r, 0.7], 2.0, move |x| wave(x) + x + hat(x) / hat(1.0));
        let solution = second_order([0.0, 1.0], [1.0, 2.0], move |_, u| u[2] * eps + u[1]);
        let end = (-1.0 / eps).exp();
        tally.compare("8", &solution, &[0.5 * eps, 3.0 * eps, 0.5], 1.0, |x| {
            (2.0 - end - (-x / eps).exp()) / (1.0 - end)
        });
        let solution = second_order([-1.0, 1.0], [0.0, 2.0], move |x, u| u[2] * eps + u[1] * x);
        tally
            .compare("10", &solution, &[-0.5, 0.0, 0.3 * r, 0.5], 1.0, |x| 1.0 + libm::erf(x / w) / libm::erf(1.0 / w));
        let solution = second_order([-1.0, 1.0], [-1.0, -1.0], move |x, u| u[2] * eps - u[0] + bend(x));
        tally.compare("11", &solution, &[-0.9, 0.0, 0.7], 1.0, wave);
        let solution = second_order([-1.0, 1.0], [0.0, -1.0], move |x, u| u[2] * eps - u[0] + bend(x));
        let edge = move |x: f64| (-(x + 1.0) / r).exp() * -((2.0 * (x - 1.0)) / r).exp_m1() / -(-4.0 / r).exp_m1();
        tally.compare("13", &solution, &[-1.0 + 0.3 * r, -1.0 + 3.0 * r, 0.4], 1.0, move |x| wave(x) + edge(x));
        let solution = second_order([0.0, 1.0], [1.0, end], move |_, u| u[2] * eps + u[1]);
        tally.compare("18", &solution, &[0.5 * eps, 3.0 * eps, 0.5], 1.0, |x| (-x / eps).exp());
    }
    tally.check(1e-10, 1000.0);
    severe.check(1e-8, 1000.0);
}

/// Number 15: eps y'' = x y, y(-1) = y(1) = 1, oscillating on one side and decaying on the other. There is
/// no short closed form: the identity that the integral of x y is eps (y'(1) - y'(-1)) must hold within the bars.
#[test]
fn airy_turning_point() {
    for eps in [1e-2, 1e-4, 1e-6] {
        let solution = second_order([-1.0, 1.0], [1.0, 1.0], move |x, u| u[2] * eps - u[0] * x);
        let moment = solution.integral(&Expression::new(&[2], |at| at.d(0, 0) * at.x()), -1.0, 1.0).expect("finite");
        let [left, right] =
            [(-1.0, Side::Right), (1.0, Side::Left)].map(|(x, s)| solution.value(0, 1, x, s).expect("finite"));
        let ends = eps * (right.value - left.value);
        let bar = moment.error + eps * (left.error + right.error);
        assert!((moment.value - ends).abs() <= bar && bar < 1e-9, "eps {eps}: {moment:?} {ends} {bar:e}");
    }
}
