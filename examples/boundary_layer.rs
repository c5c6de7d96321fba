//! A boundary layer a billionth of the span thin: the mesh finds it, the bar holds.
//!
//! Run with `cargo run --example boundary_layer`.

use spanwise::error::Error;
use spanwise::model::Side;
use spanwise::problem::Problem;
use spanwise::solve::Settings;

fn main() -> Result<(), Error> {
    println!(
        "{:>8} {:>9} {:>7} {:>24} {:>9} {:>9}",
        "eps", "elements", "passes", "u one layer before end", "error", "bar"
    );
    for eps in [1e-3, 1e-6, 1e-9] {
        let mut problem = Problem::new(0.0, 1.0);
        let u = problem.unknown("u", 2);
        problem.equation("transport", move |at| at.d(u, 2) * eps - at.d(u, 1));
        problem.condition("inlet", &[(0.0, Side::Right)], move |v| v[0].d(u, 0) - 1.0);
        problem.condition("outlet", &[(1.0, Side::Left)], move |v| v[0].d(u, 0));
        let solution = problem.solve(&Settings::default())?;
        let x = 1.0 - eps;
        let value = solution.value(u, 0, x, Side::Left)?;
        let exact = ((x - 1.0) / eps).exp_m1() / (-1.0f64 / eps).exp_m1();
        let error = (value.value - exact).abs();
        let elements = solution.field.mesh.elements.len();
        println!(
            "{eps:>8.0e} {elements:>9} {:>7} {:>24.16} {error:>9.1e} {:>9.1e}",
            solution.passes, value.value, value.error
        );
    }
    Ok(())
}
