//! Paths of solutions: folds, ends, verdicts. Models from closures; sheets are tested in `sheet_paths`.

use num_dual::DualNum;
use spanwise::error::Error;
use spanwise::model::{Model, Side};
use spanwise::problem::Problem;
use spanwise::solve::{PathEnd, Route, Settings, path};

/// y'' + p exp(y) = 0, y(0) = y(1) = 0.
fn bratu() -> impl Model {
    let mut problem = Problem::new(0.0, 1.0);
    let y = problem.unknown("y", 2);
    let p = problem.constant("p");
    problem.equation("heat", move |at| at.d(y, 2) + at.constant(p) * at.d(y, 0).exp());
    problem.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
    problem.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
    problem.build().expect("a problem")
}

/// Slope at the left end, p and middle of Bratu's solution with cosh(a)^2 = exp(y(1/2)): closed form of Liouville 1853,
/// y = 2 ln(cosh a / cosh(a (2x - 1))), p = 8 a^2 / cosh(a)^2.
fn exact(a: f64) -> (f64, f64) {
    (8.0 * (a / a.cosh()).powi(2), 4.0 * a * a.tanh())
}

/// a of the given parameter on the branch between two bounds.
fn branch(p: f64, mut low: f64, mut high: f64) -> f64 {
    let rising = exact(high).0 > exact(low).0;
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if (exact(middle).0 < p) == rising { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

#[test]
fn bratus_path_goes_through_its_fold() {
    let route = Route { from: 0.5, to: 4.0, points: 15, through_folds: true, linear: false };
    let path = path(&bratu(), &route, &Settings::default()).expect("a path");
    assert_eq!(path.end, PathEnd::Returned);
    assert_eq!(path.folds.len(), 1);
    let fold = path.folds[0].constant(0).expect("a value");
    // a tanh(a) = 1 at the fold, a = 1.199678640257734: p = 3.5138307191251612... (closed form).
    assert!((fold.value - 3.513_830_719_125_161).abs() <= fold.error, "{fold:?}");
    assert!(fold.error < 1e-12, "{fold:?}");
    // The middle of the fold, 2 ln cosh(a).
    let middle = path.folds[0].value(0, 0, 0.5, Side::Left).expect("a value");
    assert!((middle.value - 1.186_842_168_634_389).abs() <= middle.error && middle.error < 1e-11, "{middle:?}");
    let turn = 1.199_678_640_257_734;
    for point in &path.points {
        let a =
            if point.branch == 0 { branch(point.parameter, 0.0, turn) } else { branch(point.parameter, turn, 20.0) };
        let slope = point.solution.value(0, 1, 0.0, Side::Right).expect("a value");
        let off = (slope.value - exact(a).1).abs();
        assert!(off <= slope.error && slope.error < 1e-11 * slope.value, "{} {slope:?} {off}", point.parameter);
    }
    // 0.5, 0.75, ... 3.5 before the fold, and the same backwards behind it.
    assert_eq!(path.points.iter().filter(|p| p.branch == 0).count(), 13);
    assert_eq!(path.points.iter().filter(|p| p.branch == 1).count(), 13);
}

#[test]
fn a_fold_ends_a_path_that_may_not_turn() {
    let route = Route { from: 3.0, to: 4.0, points: 3, through_folds: false, linear: false };
    let path = path(&bratu(), &route, &Settings::default()).expect("a path");
    assert_eq!(path.end, PathEnd::Fold);
    assert_eq!(path.points.iter().map(|p| p.parameter).collect::<Vec<_>>(), [3.0, 3.5]);
    assert_eq!(path.folds.len(), 1);
}

#[test]
fn no_solution_at_the_start_is_said() {
    let route = Route { from: 4.0, to: 5.0, points: 3, through_folds: true, linear: false };
    let error = path(&bratu(), &route, &Settings::default()).expect_err("beyond the fold");
    assert!(matches!(&error, Error::NoSolution { tried } if tried.contains("at the start of the path")), "{error}");
}

/// y' = p y^2, y(0) = 1: y = 1/(1 - p x) runs away at p = 1; there is no fold.
#[test]
fn a_solution_that_runs_away_is_followed_as_far_as_it_goes() {
    let mut problem = Problem::new(0.0, 1.0);
    let y = problem.unknown("y", 1);
    let p = problem.constant("p");
    problem.equation("growth", move |at| at.d(y, 1) - at.constant(p) * at.d(y, 0) * at.d(y, 0));
    problem.condition("start", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
    let route = Route { from: 0.0, to: 2.0, points: 11, through_folds: true, linear: false };
    let path = path(&problem.build().expect("a problem"), &route, &Settings::default()).expect("a path");
    assert!(matches!(path.end, PathEnd::Lost { parameter, .. } if (0.9..1.0).contains(&parameter)), "{:?}", path.end);
    assert!(path.folds.is_empty());
    for point in &path.points {
        let end = point.solution.value(0, 0, 1.0, Side::Left).expect("a value");
        assert!((end.value - 1.0 / (1.0 - point.parameter)).abs() <= end.error, "{} {end:?}", point.parameter);
    }
    assert_eq!(path.points.len(), 5);
}

/// y'' = y^3/6 - 2 y + p with free slopes: y constant, p = 2 y - y^3/6 folds twice, at y = -2 and y = 2, p = -8/3 and 8/3.
#[test]
fn an_s_is_followed_through_both_folds() {
    let mut problem = Problem::new(0.0, 0.385);
    let y = problem.unknown("y", 2);
    let p = problem.constant("p");
    problem.equation("cubic", move |at| {
        let u = at.d(y, 0);
        at.d(y, 2) - (u.powi(3) / 6.0 - u * 2.0 + at.constant(p))
    });
    problem.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(y, 1));
    problem.condition("right", &[(0.385, Side::Left)], move |v| v[0].d(y, 1));
    let route = Route { from: 5.0, to: -5.0, points: 11, through_folds: true, linear: false };
    let path = path(&problem.build().expect("a problem"), &route, &Settings::default()).expect("a path");
    assert_eq!(path.end, PathEnd::Reached);
    let folds: Vec<f64> = path.folds.iter().map(|f| f.constant(0).expect("a value").value).collect();
    assert_eq!(folds.len(), 2);
    assert!((folds[0] + 8.0 / 3.0).abs() < 1e-13 && (folds[1] - 8.0 / 3.0).abs() < 1e-13, "{folds:?}");
    // 5 .. -2, back to 2, on to -5: in this order, each on the cubic.
    let parameters: Vec<f64> = path.points.iter().map(|p| p.parameter).collect();
    let expected: Vec<f64> = (-2..=5).rev().chain(-2..=2).chain((-5..=2).rev()).map(f64::from).collect();
    assert_eq!(parameters, expected);
    for point in &path.points {
        let u = point.solution.value(0, 0, 0.1, Side::Left).expect("a value");
        let off = (2.0 * u.value - u.value.powi(3) / 6.0 - point.parameter).abs();
        assert!(off <= 1e-13 * point.parameter.abs().max(1.0), "{} {u:?}", point.parameter);
    }
}

#[test]
fn an_idle_parameter_and_senseless_routes_are_refused() {
    let mut problem = Problem::new(0.0, 1.0);
    let y = problem.unknown("y", 1);
    problem.constant("p");
    problem.equation("growth", move |at| at.d(y, 1) - at.d(y, 0));
    problem.condition("start", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
    let model = problem.build().expect("a problem");
    let route = Route { from: 0.0, to: 1.0, points: 3, through_folds: false, linear: true };
    let refused = |route: &Route| path(&model, route, &Settings::default()).expect_err("refused").to_string();
    assert!(refused(&route).contains("neither an equation nor a condition depends on the parameter"));
    assert!(refused(&Route { to: 0.0, ..route }).contains("two different finite values"));
    assert!(refused(&Route { to: f64::NAN, ..route }).contains("two different finite values"));
    assert!(refused(&Route { points: 1, ..route }).contains("2 to 10,000"));
}

#[test]
fn a_path_can_be_interrupted() {
    let count = std::sync::atomic::AtomicUsize::new(0);
    let watch = |_| count.fetch_add(1, std::sync::atomic::Ordering::Relaxed) < 100;
    let settings = Settings { watch: Some(&watch), ..Settings::default() };
    let route = Route { from: 0.5, to: 4.0, points: 15, through_folds: true, linear: false };
    assert_eq!(path(&bratu(), &route, &settings).expect_err("interrupted"), Error::Interrupted);
}
