//! Cost of one linear solve against the number of elements, beside its floor: the bare factorisations; and the accuracy
//! of one element against its number of nodes.
//!
//! Prints tables and the slope in log-log; run with `cargo bench --bench elements`.

use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::lu::partial_pivoting::factor::{lu_in_place, lu_in_place_scratch};
use faer::{MatMut, Par};
use spanwise::error::Result;
use spanwise::mesh::Mesh;
use spanwise::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release, Side};
use spanwise::problem::Problem;
use spanwise::solve;
use std::time::Instant;

const NODES: usize = 16;

/// A beam on a bedding, E I y'' - M = 0, M'' + k y = sin x, pinned at both ends; written by hand, so that the engine
/// is measured and not the evaluation of formulas.
struct Beam {
    layout: Layout,
    conditions: Vec<Condition>,
}

impl Beam {
    fn new() -> Self {
        let pinned = |point| Condition { name: "pinned".into(), places: vec![Place { point, side: Side::Right }] };
        Self { layout: Layout::new(&[2, 2], 0), conditions: vec![pinned(0), pinned(0), pinned(1), pinned(1)] }
    }
}

impl Model for Beam {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        &[0.0, 1000.0]
    }

    fn linear(&self) -> bool {
        true
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let n = batch.x.len();
        let jet = |k: usize, node: usize| batch.jets[k * n + node];
        for node in 0..n {
            // jets: y, y', y'', M, M', M''
            out.residual[node] = 2.385 * jet(2, node) - jet(3, node);
            out.residual[n + node] = jet(5, node) + 0.385 * jet(0, node) - batch.x[node].sin();
            out.jets[2 * n + node] = 2.385;
            out.jets[3 * n + node] = -1.0;
            out.jets[(6 + 5) * n + node] = 1.0;
            out.jets[6 * n + node] = 0.385;
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], _constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let jet = if index.is_multiple_of(2) { 0 } else { 3 };
        out.residual = jets[jet];
        out.jets[jet] = 1.0;
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &[]
    }
}

/// u'''' + (1 + x) u = f with u = sin(2.385 x) + x^2, clamped, in one element: errors of u, u'', u'''.
fn accuracy() {
    let c = 2.385f64;
    let u = move |k: usize, x: f64| {
        let wave = c.powi(k as i32) * (c * x + 0.5 * std::f64::consts::PI * k as f64).sin();
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
    println!("clamped beam in one element: largest error");
    println!("{:>5} {:>9} {:>9} {:>9}", "n", "u", "u''", "u'''");
    for n in [16, 24, 32, 48, 64, 96, 128, 160, 200] {
        let field = solve::on_mesh(&model, &Mesh::uniform(&[-1.0, 1.0], 1, n)).expect("regular");
        let error = |k: usize| {
            let at = |j: usize| -1.0 + 0.01 * j as f64;
            (0..=200).map(|j| (field.value(y, k, at(j), Side::Left) - u(k, at(j))).abs()).fold(0.0, f64::max)
        };
        println!("{n:>5} {:>9.1e} {:>9.1e} {:>9.1e}", error(0), error(2), error(3));
    }
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
    accuracy();
    let model = Beam::new();
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
