//! Helpers shared by the integration tests.
#![allow(dead_code)]

pub mod sheets;

use spanwise::model::Side;
use spanwise::problem::{Number, Problem};
use spanwise::solve::{Settings, Solution};

/// Solves F(x, u, u', u'') = 0 with given values at both ends.
pub fn second_order(
    span: [f64; 2],
    ends: [f64; 2],
    f: impl Fn(f64, [Number; 3]) -> Number + Send + Sync + 'static,
) -> Solution {
    let mut problem = Problem::new(span[0], span[1]);
    let y = problem.unknown("y", 2);
    problem.equation("equation", move |at| f(at.x(), [at.d(y, 0), at.d(y, 1), at.d(y, 2)]));
    problem.condition("left", &[(span[0], Side::Right)], move |v| v[0].d(y, 0) - ends[0]);
    problem.condition("right", &[(span[1], Side::Left)], move |v| v[0].d(y, 0) - ends[1]);
    problem.solve(&Settings::default()).expect("a regular problem")
}

/// Collects errors and bars.
#[derive(Default)]
pub struct Tally {
    rows: Vec<(String, f64, f64)>,
}

impl Tally {
    /// Compares the first unknown at some places with its exact values, relative to `scale`.
    pub fn compare(&mut self, name: &str, solution: &Solution, places: &[f64], scale: f64, exact: impl Fn(f64) -> f64) {
        for x in places {
            let y = solution.value(0, 0, *x, Side::Left).expect("finite");
            self.add(format!("{name} at {x}"), (y.value - exact(*x)).abs() / scale, y.error / scale);
        }
    }

    /// Adds one relative error and bar.
    pub fn add(&mut self, name: String, error: f64, bar: f64) {
        self.rows.push((name, error, bar));
    }

    /// Every error within its bar and below `limit`; the median over-estimate below `over`. Closed forms evaluated in
    /// double precision are themselves only known to a few units in the last place.
    pub fn check(&self, limit: f64, over: f64) {
        let known = 4.0 * f64::EPSILON;
        for (name, error, bar) in &self.rows {
            assert!(*error <= limit, "{name}: error {error:e} above {limit:e}");
            assert!(*error <= bar + known, "{name}: error {error:e} above its bar {bar:e}");
        }
        let mut ratios: Vec<f64> = self.rows.iter().map(|(_, error, bar)| bar / error.max(1e-17)).collect();
        ratios.sort_by(f64::total_cmp);
        let median = ratios[ratios.len() / 2];
        assert!(median < over, "median over-estimate {median}");
    }
}
