//! Matrices on the reference interval [-1, 1] (first version).
use crate::legendre::{self, Rule};
use nalgebra::DMatrix;
pub fn integration(rule: &Rule, r: usize) -> DMatrix<f64> {
    let n = rule.len();
    let m = legendre::to_modal(rule);
    let mut o = DMatrix::zeros(n, n);
    for j in 0..n {
        let mut c = m.column(j).as_slice().to_vec();
        for _ in 0..r {
            c = legendre::integrate_series(&c);
        }
        for i in 0..n {
            o[(i, j)] = legendre::series(&c, rule.nodes()[i]);
        }
    }
    o
}
pub fn interpolation(a: &[f64], b: &[f64]) -> DMatrix<f64> {
    DMatrix::from_fn(b.len(), a.len(), |i, j| {
        let mut v = 1.0;
        for k in 0..a.len() {
            if k != j {
                v *= (b[i] - a[k]) / (a[j] - a[k]);
            }
        }
        v
    })
}
pub fn differentiation(a: &[f64], order: usize) -> DMatrix<f64> {
    let n = a.len();
    let mut d = DMatrix::zeros(n, n);
    let w: Vec<f64> = (0..n).map(|j| (0..n).filter(|k| *k != j).map(|k| 1.0 / (a[j] - a[k])).product()).collect();
    for i in 0..n {
        let mut s = 0.0;
        for j in 0..n {
            if i != j {
                let v = w[j] / w[i] / (a[i] - a[j]);
                d[(i, j)] = v;
                s -= v;
            }
        }
        d[(i, i)] = s;
    }
    let mut o = d.clone();
    for _ in 1..order {
        o = &o * &d;
    }
    o
}
