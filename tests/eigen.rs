//! Eigenvalues of problems from closures against closed forms and tables.

use spanwise::model::{Model, Side};
use spanwise::problem::Problem;
use spanwise::solve::{Ask, Settings, Spectrum, eigen};

const LEFT: &[(f64, Side)] = &[(0.0, Side::Right)];
const RIGHT: &[(f64, Side)] = &[(1.0, Side::Left)];

/// Each eigenvalue within its bar, and the bar within the accuracy wanted.
#[track_caller]
fn agrees(spectrum: &Spectrum, exact: &[f64], relative: f64) {
    assert_eq!(spectrum.modes.len(), exact.len(), "{:?}", spectrum.discarded);
    assert_eq!(spectrum.count.checked, Some(true), "{:?}", spectrum.count);
    for (mode, exact) in spectrum.modes.iter().zip(exact) {
        let error = (mode.value - exact).norm();
        assert!(error <= mode.error, "mode {}: {} instead of {exact}, bar {:.1e}", mode.index, mode.value, mode.error);
        let floor = if *exact == 0.0 { 1.0 } else { exact.abs() };
        assert!(mode.error <= relative * floor, "mode {}: bar {:.1e} of {exact}", mode.index, mode.error);
    }
}

/// u'''' = lambda u with the given derivatives vanishing at either end.
fn beam(left: [usize; 2], right: [usize; 2]) -> impl Model {
    let mut p = Problem::new(0.0, 1.0);
    let u = p.unknown("u", 4);
    let lambda = p.constant("lambda");
    p.equation("bending", move |at| at.d(u, 4) - at.constant(lambda) * at.d(u, 0));
    for k in left {
        p.condition("left", LEFT, move |v| v[0].d(u, k));
    }
    for k in right {
        p.condition("right", RIGHT, move |v| v[0].d(u, k));
    }
    p.build().expect("a sound problem")
}

/// The n-th root of cos k cosh k = sign, or of tan k = tanh k (sign 0), by Newton's iteration on a bounded form.
/// Blevins, Formulas for Natural Frequency and Mode Shape, table 8-1 (from memory), gives the same equations.
fn wave_number(sign: f64, n: usize) -> f64 {
    use std::f64::consts::PI;
    let n = n as f64;
    let mut k = if sign < 0.0 {
        (n - 0.5) * PI
    } else if sign > 0.0 {
        (n + 0.5) * PI
    } else {
        (n + 0.25) * PI
    };
    for _ in 0..50 {
        let (f, slope) = if sign == 0.0 {
            (k.sin() - k.tanh() * k.cos(), k.cos() + k.tanh() * k.sin() - k.cos() / k.cosh().powi(2))
        } else {
            (k.cos() - sign / k.cosh(), -k.sin() + sign * k.tanh() / k.cosh())
        };
        k -= f / slope;
    }
    k
}

#[test]
fn beams_of_all_usual_ends() {
    let cases: [([usize; 2], [usize; 2], Option<f64>); 4] = [
        ([0, 1], [2, 3], Some(-1.0)),
        ([0, 1], [0, 1], Some(1.0)),
        ([0, 1], [0, 2], Some(0.0)),
        ([0, 2], [0, 2], None),
    ];
    for (left, right, sign) in cases {
        let exact: Vec<f64> =
            (1..=20).map(|n| sign.map_or(n as f64 * std::f64::consts::PI, |s| wave_number(s, n)).powi(4)).collect();
        let spectrum = eigen(&beam(left, right), Ask::Lowest(20), &Settings::default()).expect("an eigenproblem");
        agrees(&spectrum, &exact, 2e-12);
    }
}

#[test]
fn free_beam_has_two_zeros() {
    let spectrum = eigen(&beam([2, 3], [2, 3]), Ask::Lowest(5), &Settings::default()).expect("an eigenproblem");
    let exact: Vec<f64> = [0.0, 0.0].into_iter().chain((1..=3).map(|n| wave_number(1.0, n).powi(4))).collect();
    agrees(&spectrum, &exact, 1e-8);
    assert_eq!(spectrum.modes.iter().map(|m| m.multiplicity).collect::<Vec<_>>(), [2, 2, 1, 1, 1]);
    assert!(spectrum.modes[..2].iter().all(|m| m.value.norm() == 0.0));
}
