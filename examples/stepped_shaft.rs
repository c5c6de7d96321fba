//! A stepped shaft in torsion, written as closures: twist, torque, the largest twist and its place, each with its bar.
//!
//! Run with `cargo run --example stepped_shaft`.

use spanwise::error::Error;
use spanwise::model::Side;
use spanwise::problem::{Expression, Problem};
use spanwise::solve::Settings;

fn main() -> Result<(), Error> {
    let (length, step, impeller) = (1.8, 0.7, 1.1);
    let (drag, torque, coupling) = (900.0, 600.0, 60.0e3);
    // Torsional stiffness G J of both parts; a closure takes what steps from the piece, not from x.
    let stiffness = |piece: usize| {
        let diameter: f64 = if piece == 0 { 0.080 } else { 0.060 };
        80.0e9 * std::f64::consts::PI * diameter.powi(4) / 32.0
    };

    let mut shaft = Problem::new(0.0, length);
    let phi = shaft.unknown("phi", 1);
    let q = shaft.unknown("Q", 1);
    shaft.break_at(step);
    shaft.equation("torsion", move |at| at.d(phi, 1) * stiffness(at.piece()) - at.d(q, 0));
    shaft.equation("balance", move |at| at.d(q, 1) + drag);
    shaft.condition("locked end", &[(0.0, Side::Right)], move |v| v[0].d(phi, 0));
    shaft.condition("coupling", &[(length, Side::Left)], move |v| v[0].d(q, 0) + v[0].d(phi, 0) * coupling);
    shaft.release(impeller, q, 0);
    let both_sides = [(impeller, Side::Left), (impeller, Side::Right)];
    shaft.condition("impeller", &both_sides, move |v| v[1].d(q, 0) - v[0].d(q, 0) + torque);

    let solution = shaft.solve(&Settings::default())?;
    let held = solution.value(q, 0, 0.0, Side::Right)?;
    println!("torque at the locked end  {:.9} N m, bar {:.1e}", held.value, held.error);
    let twist = Expression::new(&[1, 1], move |at| at.d(phi, 0));
    let largest = solution.maximum(&twist, 0.0, length)?;
    println!("largest twist             {:.12} rad, bar {:.1e}", largest.value.value, largest.value.error);
    println!("its place                 {:.12} m, bar {:.1e}", largest.place.value, largest.place.error);
    let energy = Expression::new(&[1, 1], move |at| at.d(q, 0) * at.d(phi, 1) * 0.5);
    let energy = solution.integral(&energy, 0.0, length)?;
    println!("strain energy             {:.9} J, bar {:.1e}", energy.value, energy.error);
    Ok(())
}
