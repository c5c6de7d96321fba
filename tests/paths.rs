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
    for s in &path.steps { eprintln!("{s:?}"); }
    assert_eq!(path.end, PathEnd::Returned);
    assert_eq!(path.folds.len(), 1);
    let fold = path.folds[0].constant(0).expect("a value");
    eprintln!("{fold:?} {}", fold.value - 3.513830719125161);
    // a tanh(a) = 1 at the fold, a = 1.199678640257734 (40 digits by mpmath): p = 3.5138307191251612...
    assert!((fold.value - 3.513_830_719_125_161).abs() <= fold.error, "{fold:?}");
    assert!(fold.error < 1e-12, "{fold:?}");
    assert_eq!(path.points.iter().map(|p| p.branch).max(), Some(1));
    for point in &path.points {
        let turn = 1.199_678_640_257_734;
        let a = if point.branch == 0 { branch(point.parameter, 0.0, turn) } else { branch(point.parameter, turn, 20.0) };
        let slope = point.solution.value(0, 1, 0.0, Side::Right).expect("a value");
        let off = (slope.value - exact(a).1).abs();
        eprintln!("{} {} {off:e} {:e}", point.parameter, point.branch, slope.error);
        assert!(off <= slope.error && slope.error < 1e-9 * slope.value, "{} {slope:?} {off}", point.parameter);
    }
    assert_eq!(path.points.len(), 2 * 13);
    let _ = Error::Interrupted;
}
