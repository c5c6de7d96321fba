//! Matrices on the reference interval against exact integrals and derivatives, and their identities.

use nalgebra::{DMatrix, DVector};
use proptest::prelude::*;
use spanwise::error::Error;
use spanwise::legendre::{
    End, Kind, Rule, differentiate_series, gauss, integrate_series, lobatto, radau, series, series_with_slope,
    to_modal, to_nodal,
};
use spanwise::operator::{
    barycentric_weights, differentiation, differentiation_between, integration, integration_at, interpolation, lumped,
    mass,
};

const EPS: f64 = f64::EPSILON;

fn rules(n: usize) -> [Rule; 4] {
    [gauss(n), lobatto(n), radau(n, End::Left), radau(n, End::Right)].map(|rule| rule.expect("n >= 2"))
}

fn at_nodes(rule: &Rule, f: impl Fn(f64) -> f64) -> DVector<f64> {
    DVector::from_iterator(rule.len(), rule.nodes().iter().map(|s| f(*s)))
}

/// The table's making is told in `tests/data/integrals.py`.
#[test]
fn integration_matrices_match_the_table() {
    let mut worst = 0.0f64;
    let (mut made, mut rows) = (None, 0);
    for line in include_str!("data/integrals.csv").lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        let [n, r, i, j] = [0, 1, 2, 3].map(|c| cells[c].parse::<usize>().expect("a count"));
        let exact: f64 = cells[4].parse().expect("a number");
        if made.as_ref().is_none_or(|(n_made, _)| *n_made != n) {
            let rule = lobatto(n).expect("n >= 2");
            made = Some((n, (0..=4).map(|r| integration(&rule, r)).collect::<Vec<_>>()));
        }
        let Some((_, matrices)) = &made else { unreachable!("just made") };
        let error = (matrices[r][(i, j)] - exact).abs();
        assert!(error <= 2.0 * EPS, "n = {n}, r = {r}, ({i}, {j}): {error:e}");
        worst = worst.max(error);
        rows += 1;
    }
    println!("{rows} entries, worst error {:.2} eps", worst / EPS);
    assert!(rows > 700);
}

/// r-fold integrals of P_k from the coefficients, whose recurrence is not the one of the matrices' own nodes.
#[test]
fn integration_of_legendre_polynomials() {
    for n in [2, 5, 16, 64, 200] {
        for rule in rules(n) {
            let values = to_nodal(&rule);
            for r in 1..=4 {
                let found = integration(&rule, r) * &values;
                for k in [0, 1, n / 2, n - 1] {
                    let mut c = vec![0.0; k + 1];
                    c[k] = 1.0;
                    for _ in 0..r {
                        c = integrate_series(&c);
                    }
                    for (i, s) in rule.nodes().iter().enumerate() {
                        let error = (found[(i, k)] - series(&c, *s)).abs();
                        // Each entry is right to an eps; the sum over n of them rounds once more.
                        let bound = (4.0 + (n as f64).sqrt()) * EPS;
                        assert!(error < bound, "{:?} n = {n} r = {r} P_{k} at {s}: {error:e}", rule.kind());
                    }
                }
            }
        }
    }
}

/// r-fold integral of exp from -1: exp(s) - e^-1 (1 + t + ... + t^(r-1)/(r-1)!), t = 1 + s.
#[test]
fn integration_of_the_exponential() {
    for n in [20, 33, 64, 200] {
        for rule in rules(n) {
            let v = at_nodes(&rule, f64::exp);
            let points = [-1.0, -0.99, -0.2385, 0.0, 0.5, 0.987, 1.0];
            for r in 0..=4 {
                let exact = |s: f64| {
                    let (mut taylor, mut term) = (0.0, (-1f64).exp());
                    for k in 0..r {
                        taylor += term;
                        term *= (1.0 + s) / (k + 1) as f64;
                    }
                    s.exp() - taylor
                };
                let own = integration(&rule, r) * &v;
                let other = integration_at(&rule, r, &points).expect("finite") * &v;
                let pairs = rule.nodes().iter().zip(own.iter()).chain(points.iter().zip(other.iter()));
                for (s, value) in pairs {
                    // The size of the values is e.
                    let error = (value - exact(*s)).abs();
                    assert!(
                        error < (16.0 + (n as f64).sqrt()) * EPS,
                        "{:?} n = {n} r = {r} at {s}: {error:e}",
                        rule.kind()
                    );
                }
            }
        }
    }
}

#[test]
fn the_last_row_of_q1_is_the_weights_and_the_first_is_zero() {
    for n in [2, 3, 8, 33, 100] {
        for rule in rules(n) {
            let ends = integration_at(&rule, 1, &[-1.0, 1.0]).expect("finite");
            assert!(ends.row(0).iter().all(|entry| *entry == 0.0));
            assert!(ends.row(1).iter().eq(rule.weights()));
            let own = integration(&rule, 1);
            if matches!(rule.kind(), Kind::Lobatto | Kind::Radau(End::Right)) {
                assert!(own.row(n - 1).iter().eq(rule.weights()));
            }
            if matches!(rule.kind(), Kind::Lobatto | Kind::Radau(End::Left)) {
                assert!(own.row(0).iter().all(|entry| *entry == 0.0));
            }
        }
    }
}

/// Derivatives of sin(3.2385 s + 0.4): the error stays below eps n^(2m), and it does grow.
#[test]
fn differentiation_loses_digits_as_documented() {
    let (a, b) = (3.2385f64, 0.4);
    for n in [24, 32, 64, 128, 200] {
        let rule = lobatto(n).expect("n >= 2");
        let v = at_nodes(&rule, |s| (a * s + b).sin());
        for m in 1..=4 {
            let d = differentiation(rule.nodes(), m).expect("distinct");
            let exact =
                at_nodes(&rule, |s| a.powi(m as i32) * (a * s + b + m as f64 * std::f64::consts::FRAC_PI_2).sin());
            let error = (&d * &v - exact).amax();
            let bound = EPS * (n as f64).powi(2 * m as i32);
            println!("n = {n} m = {m}: error / bound {:.1e}", error / bound);
            assert!(error < bound, "n = {n}, m = {m}: {error:e}");
            // Rounding of the entries themselves: the derivative of 1 is 0 to the rounding of the row's sum.
            assert!((&d * DVector::from_element(n, 1.0)).amax() < EPS * d.amax() * n as f64);
        }
        let first = differentiation(rule.nodes(), 1).expect("distinct");
        let norm = first.row_iter().map(|row| row.lp_norm(1)).fold(0.0, f64::max);
        assert!((0.9..1.2).contains(&(norm / (n * n) as f64)), "n = {n}: norm {norm}");
        let fourth = differentiation(rule.nodes(), 4).expect("distinct");
        let lost = (fourth * &v - at_nodes(&rule, |s| a.powi(4) * (a * s + b).sin())).amax();
        assert!(lost > 1e4 * EPS, "the docs say digits are lost: {lost:e}");
    }
}

#[test]
fn derivatives_between_nodes() {
    let rule = lobatto(12).expect("n >= 2");
    let c: Vec<f64> = (0..12).map(|k| (k as f64 + 0.2385).sin()).collect();
    let points = [-1.0, -0.77, 0.1, 0.999, rule.nodes()[4]];
    let v = to_nodal(&rule) * DVector::from_column_slice(&c);
    let mut d = c.clone();
    for m in 0..=3 {
        let matrix = differentiation_between(rule.nodes(), &points, m).expect("distinct");
        for (value, s) in (matrix * &v).iter().zip(points) {
            let bound = 4.0 * EPS * 12f64.powi(2 * m as i32 + 1);
            assert!((value - series(&d, s)).abs() < bound, "m = {m} at {s}");
        }
        d = differentiate_series(&d);
    }
}

/// For the zeros of an orthogonal family the weights are known: (-1)^j sqrt(w_j) for Lobatto,
/// (-1)^j sqrt((1-s^2) w_j) for Gauss (Wang & Xiang, Math. Comp. 81, 2012).
#[test]
fn barycentric_weights_of_rules() {
    for n in [3, 10, 64, 400, 1500] {
        for (rule, closed) in [
            (lobatto(n).expect("n >= 2"), (|_, w: f64| w.sqrt()) as fn(f64, f64) -> f64),
            (gauss(n).expect("n >= 1"), |square, w| (square * w).sqrt()),
        ] {
            let weights = barycentric_weights(rule.nodes()).expect("distinct");
            let middle = n / 2;
            let closed = |j: usize| closed(rule.from_left()[j] * rule.from_right()[j], rule.weights()[j]);
            for j in 0..n {
                let sign = if (j + middle) % 2 == 0 { 1.0 } else { -1.0 };
                let ratio = weights[j] / weights[middle] / (sign * closed(j) / closed(middle));
                // The nodes are rounded: their clustering at the ends makes n^2 of the last place.
                let bound = EPS * (n * n + 10) as f64;
                assert!((ratio - 1.0).abs() < bound, "{:?} n = {n} j = {j}: {:e}", rule.kind(), ratio - 1.0);
            }
        }
    }
}

#[test]
fn bad_nodes_are_refused() {
    let refused = |result: Result<DMatrix<f64>, Error>| assert!(matches!(result, Err(Error::Argument { .. })));
    for nodes in [&[][..], &[0.0, 1.0, 0.0], &[0.0, -0.0], &[f64::NAN, 0.0], &[f64::INFINITY], &[-1e308, 1e308]] {
        refused(differentiation(nodes, 1));
        refused(interpolation(nodes, &[0.5]));
        assert!(barycentric_weights(nodes).is_err());
    }
    refused(interpolation(&[0.0, 1.0], &[f64::NAN]));
    refused(integration_at(&lobatto(4).expect("n >= 2"), 1, &[0.0, f64::INFINITY]));
    let equidistant: Vec<f64> = (0..3000).map(|j| f64::from(j) / 1500.0 - 1.0).collect();
    refused(differentiation(&equidistant, 1));
    assert!(barycentric_weights(&equidistant).expect("distinct").iter().all(|w| w.is_finite()));
}

#[test]
fn points_on_and_beside_nodes() {
    let rule = lobatto(21).expect("n >= 2");
    let beside = [0.0, 1e-310, -5e-324, 1e-17, rule.nodes()[3], rule.nodes()[3].next_up(), 1.0, 1f64.next_down()];
    let matrix = interpolation(rule.nodes(), &beside).expect("distinct");
    let v = at_nodes(&rule, |s| (2.385 * s).cos());
    for ((value, s), row) in (&matrix * &v).iter().zip(beside).zip(matrix.row_iter()) {
        assert!((value - (2.385 * s).cos()).abs() < 4.0 * EPS, "{s}");
        if rule.nodes().contains(&s) {
            assert_eq!(row.iter().filter(|entry| **entry != 0.0).count(), 1);
        }
    }
}

/// Inner products by a Gauss rule that is exact for them.
#[test]
fn mass_is_the_exact_inner_product() {
    for n in [2, 3, 6, 17, 64] {
        let fine = gauss(n).expect("n >= 1");
        for rule in rules(n) {
            let basis = interpolation(rule.nodes(), fine.nodes()).expect("distinct");
            let exact = basis.transpose() * lumped(&fine) * &basis;
            let error = (mass(&rule) - &exact).amax();
            assert!(error < 8.0 * EPS, "{:?} n = {n}: {error:e}", rule.kind());
            let modal = to_modal(&rule);
            let norms = DVector::from_fn(n, |k, _| 2.0 / (2 * k + 1) as f64);
            let defined = modal.transpose() * DMatrix::from_diagonal(&norms) * modal;
            assert!((mass(&rule) - defined).amax() < 8.0 * EPS, "{:?} n = {n}", rule.kind());
        }
    }
}

fn node_values() -> impl Strategy<Value = Vec<f64>> {
    prop::collection::vec(-1.0..1.0f64, 3..40)
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(64) })]

    /// The derivative of the integral is the function, between rules that hold both exactly.
    #[test]
    fn derivative_undoes_integral(v in node_values()) {
        let n = v.len();
        let longer = lobatto(n + 1).expect("n >= 1");
        for rule in rules(n) {
            let up = integration_at(&rule, 1, longer.nodes()).expect("finite");
            let down = differentiation_between(longer.nodes(), rule.nodes(), 1).expect("distinct");
            let v = DVector::from_column_slice(&v);
            let error = (down * (up * &v) - &v).amax();
            prop_assert!(error < EPS * (n * n + 10) as f64, "{:?} {n}: {error:e}", rule.kind());
        }
    }

    /// Integrals from the left and from the right add up to the whole.
    #[test]
    fn mirrored_integration(v in node_values()) {
        let n = v.len();
        for (rule, mirrored) in [
            (lobatto(n), lobatto(n)),
            (gauss(n), gauss(n)),
            (radau(n, End::Left), radau(n, End::Right)),
        ] {
            let (rule, mirrored) = (rule.expect("n >= 2"), mirrored.expect("n >= 2"));
            let left = integration(&rule, 1) * DVector::from_column_slice(&v);
            let reversed = DVector::from_iterator(n, v.iter().rev().copied());
            let right = integration(&mirrored, 1) * reversed;
            let whole: f64 = v.iter().zip(rule.weights()).map(|(v, w)| v * w).sum();
            for i in 0..n {
                prop_assert!((left[i] + right[n - 1 - i] - whole).abs() < 16.0 * EPS);
            }
        }
    }

    /// Q_2 is Q_1 twice, where the first integral is held exactly.
    #[test]
    fn twice_once_is_twofold(v in node_values()) {
        let n = v.len();
        let longer = lobatto(n + 1).expect("n >= 1");
        for rule in rules(n) {
            let v = DVector::from_column_slice(&v);
            let once = integration_at(&rule, 1, longer.nodes()).expect("finite") * &v;
            let twice = integration_at(&longer, 1, rule.nodes()).expect("finite") * once;
            prop_assert!((twice - integration(&rule, 2) * v).amax() < 8.0 * EPS);
        }
    }

    /// From one rule's nodes to another's and back.
    #[test]
    fn interpolation_and_back(v in node_values()) {
        let n = v.len();
        let finer = gauss(n + 3).expect("n >= 1");
        for rule in rules(n) {
            let there = interpolation(rule.nodes(), finer.nodes()).expect("distinct");
            let back = interpolation(finer.nodes(), rule.nodes()).expect("distinct");
            let v = DVector::from_column_slice(&v);
            prop_assert!((back * (there * &v) - &v).amax() < 200.0 * EPS);
        }
    }

    /// A series, its values and its slope agree with the matrices.
    #[test]
    fn series_and_matrices_agree(c in node_values(), s in -1.0..1.0f64) {
        let n = c.len();
        let rule = lobatto(n).expect("n >= 3");
        let v = to_nodal(&rule) * DVector::from_column_slice(&c);
        let (value, slope) = series_with_slope(&c, s);
        let at = interpolation(rule.nodes(), &[s]).expect("distinct") * &v;
        let down = differentiation_between(rule.nodes(), &[s], 1).expect("distinct") * &v;
        let size = n as f64;
        prop_assert!((at[0] - value).abs() < 8.0 * EPS * size);
        prop_assert!((down[0] - slope).abs() < 8.0 * EPS * size.powi(3));
        let round = to_modal(&rule) * v - DVector::from_column_slice(&c);
        prop_assert!(round.amax() < 8.0 * EPS * size);
    }

    /// Any coefficients: the integral starts from 0 and its derivative gives them back.
    #[test]
    fn calculus_of_coefficients(c in node_values()) {
        let integral = integrate_series(&c);
        prop_assert!(series(&integral, -1.0).abs() < 8.0 * EPS);
        for (a, b) in differentiate_series(&integral).iter().zip(&c) {
            prop_assert!((a - b).abs() < 8.0 * EPS * c.len() as f64);
        }
    }
}
