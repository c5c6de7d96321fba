//! Cost of one linear solve against the number of elements, beside its floor: the bare factorisations.
//!
//! Prints a table and the slope in log-log; run with `cargo bench --bench elements`.

use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::lu::partial_pivoting::factor::{lu_in_place, lu_in_place_scratch};
use faer::{MatMut, Par};
use spanwise::mesh::Mesh;
use spanwise::model::{Model, Side};
use spanwise::problem::Problem;
use spanwise::solve;
use std::time::Instant;

const NODES: usize = 16;

/// A beam on many small steps of bedding: y of order 2, M of order 2.
fn beam() -> impl Model {
    let mut beam = Problem::new(0.0, 1000.0);
    let y = beam.unknown("y", 2);
    let m = beam.unknown("M", 2);
    beam.equation("bending", move |at| at.d(y, 2) * 2.385 - at.d(m, 0));
    beam.equation("load", move |at| at.d(m, 2) + at.d(y, 0) * 0.385 - at.x().sin());
    for (x, side) in [(0.0, Side::Right), (1000.0, Side::Left)] {
        beam.condition("pinned", &[(x, side)], move |v| v[0].d(y, 0));
        beam.condition("pinned", &[(x, side)], move |v| v[0].d(m, 0));
    }
    beam.build().expect("well posed")
}

/// Seconds for one tall factorisation of the element's size.
fn floor() -> f64 {
    let (rows, columns) = (2 * NODES + 4, 2 * NODES);
    let original: Vec<f64> = (0..rows * columns).map(|k| ((k * 7919) % 104_729) as f64 / 104_729.0 - 0.5).collect();
    let mut scratch = MemBuffer::new(lu_in_place_scratch::<usize, f64>(rows, columns, Par::Seq, Default::default()));
    let (mut permutation, mut inverse) = (vec![0usize; rows], vec![0usize; rows]);
    let mut matrix = original.clone();
    let repeats = 20_000;
    let start = Instant::now();
    for _ in 0..repeats {
        matrix.copy_from_slice(&original);
        lu_in_place(
            MatMut::from_column_major_slice_mut(&mut matrix, rows, columns),
            &mut permutation,
            &mut inverse,
            Par::Seq,
            MemStack::new(&mut scratch),
            Default::default(),
        );
    }
    start.elapsed().as_secs_f64() / f64::from(repeats)
}

fn main() {
    let model = beam();
    let floor = floor();
    println!("tall factorisation {} x {}: {:.2} us", 2 * NODES + 4, 2 * NODES, 1e6 * floor);
    println!("{:>9} {:>12} {:>12} {:>7}", "elements", "s", "us/element", "/floor");
    let mut rows = Vec::new();
    for elements in [10usize, 100, 1000, 10_000, 100_000] {
        let mesh = Mesh::uniform(&[0.0, 1000.0], elements, NODES);
        let repeats = (20_000 / elements).clamp(1, 200);
        let start = Instant::now();
        for _ in 0..repeats {
            std::hint::black_box(solve::on_mesh(&model, &mesh).expect("regular"));
        }
        let time = start.elapsed().as_secs_f64() / repeats as f64;
        let each = time / elements as f64;
        println!("{elements:>9} {time:>12.6} {:>12.2} {:>7.2}", 1e6 * each, each / floor);
        rows.push(((elements as f64).ln(), time.ln()));
    }
    let mean = |f: &dyn Fn(&(f64, f64)) -> f64| rows.iter().map(f).sum::<f64>() / rows.len() as f64;
    let (mx, my) = (mean(&|r| r.0), mean(&|r| r.1));
    let slope = rows.iter().map(|r| (r.0 - mx) * (r.1 - my)).sum::<f64>()
        / rows.iter().map(|r| (r.0 - mx).powi(2)).sum::<f64>();
    println!("slope in log-log: {slope:.3}");
}
