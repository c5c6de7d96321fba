//! Time of rules and matrices against their size; run with `cargo bench --bench nodes`.
//!
//! Rules are made by Newton's iteration (cost n^2) when short and by expansions (cost n) when long: the counter
//! shows the time per node. Beside the matrices stands their floor, one n x n matrix product.

use divan::{Bencher, counter::ItemsCount};
use nalgebra::DMatrix;
use spanwise::legendre::{End, gauss, lobatto, radau, to_modal};
use spanwise::operator::{differentiation, integration, interpolation};

const LENGTHS: [usize; 12] = [4, 8, 16, 32, 64, 99, 100, 200, 1000, 10_000, 100_000, 1_000_000];
const SIZES: [usize; 5] = [8, 16, 32, 64, 200];

fn main() {
    divan::main();
}

#[divan::bench(args = LENGTHS)]
fn gauss_rule(bencher: Bencher, n: usize) {
    bencher.counter(ItemsCount::new(n)).bench(|| gauss(n).expect("n >= 1"));
}

#[divan::bench(args = LENGTHS)]
fn lobatto_rule(bencher: Bencher, n: usize) {
    bencher.counter(ItemsCount::new(n)).bench(|| lobatto(n).expect("n >= 2"));
}

#[divan::bench(args = LENGTHS)]
fn radau_rule(bencher: Bencher, n: usize) {
    bencher.counter(ItemsCount::new(n)).bench(|| radau(n, End::Left).expect("n >= 1"));
}

#[divan::bench(args = SIZES)]
fn floor_one_product(bencher: Bencher, n: usize) {
    let a = DMatrix::from_fn(n, n, |i, j| ((i * 7 + j * 11) % 13) as f64);
    bencher.bench(|| &a * divan::black_box(&a));
}

#[divan::bench(args = SIZES)]
fn integrated_twice(bencher: Bencher, n: usize) {
    let rule = lobatto(n).expect("n >= 2");
    bencher.bench(|| integration(divan::black_box(&rule), 2));
}

#[divan::bench(args = SIZES)]
fn modal(bencher: Bencher, n: usize) {
    let rule = lobatto(n).expect("n >= 2");
    bencher.bench(|| to_modal(divan::black_box(&rule)));
}

#[divan::bench(args = SIZES)]
fn differentiated_twice(bencher: Bencher, n: usize) {
    let rule = lobatto(n).expect("n >= 2");
    bencher.bench(|| differentiation(divan::black_box(rule.nodes()), 2));
}

#[divan::bench(args = SIZES)]
fn interpolated(bencher: Bencher, n: usize) {
    let (rule, other) = (lobatto(n).expect("n >= 2"), gauss(n + 4).expect("n >= 1"));
    bencher.bench(|| interpolation(divan::black_box(rule.nodes()), other.nodes()));
}
