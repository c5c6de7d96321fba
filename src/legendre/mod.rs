//! Legendre polynomials: values, Gauss, Lobatto and Radau rules, nodal and modal coefficients (first version).
use crate::error::Result;
use nalgebra::DMatrix;
#[derive(Debug, Clone)]
pub struct Rule {
    nodes: Vec<f64>,
    weights: Vec<f64>,
    lob: bool,
}
impl Rule {
    pub fn nodes(&self) -> &[f64] {
        &self.nodes
    }
    pub fn weights(&self) -> &[f64] {
        &self.weights
    }
    pub fn len(&self) -> usize {
        self.nodes.len()
    }
}
pub fn values(d: usize, s: f64) -> Vec<f64> {
    let mut p = vec![1.0, s];
    for k in 1..d.max(1) {
        let k_ = k as f64;
        p.push(((2.0 * k_ + 1.0) * s * p[k] - k_ * p[k - 1]) / (k_ + 1.0));
    }
    p.truncate(d + 1);
    p
}
pub fn gauss(n: usize) -> Result<Rule> {
    let mut nodes = vec![0.0; n];
    let mut weights = vec![0.0; n];
    for i in 0..n {
        let mut x = -(std::f64::consts::PI * (i as f64 + 0.75) / (n as f64 + 0.5)).cos();
        let mut dp = 0.0;
        for _ in 0..50 {
            let p = values(n, x);
            dp = n as f64 * (x * p[n] - p[n - 1]) / (x * x - 1.0);
            let dx = p[n] / dp;
            x -= dx;
            if dx.abs() < 1e-16 {
                break;
            }
        }
        nodes[i] = x;
        weights[i] = 2.0 / ((1.0 - x * x) * dp * dp);
    }
    Ok(Rule { nodes, weights, lob: false })
}
pub fn lobatto(n: usize) -> Result<Rule> {
    let m = n - 1;
    let mut nodes = vec![0.0; n];
    let mut weights = vec![0.0; n];
    for i in 0..n {
        let mut x = -(std::f64::consts::PI * i as f64 / m as f64).cos();
        if i > 0 && i < m {
            for _ in 0..60 {
                let p = values(m, x);
                let dp = m as f64 * (x * p[m] - p[m - 1]) / (x * x - 1.0);
                let ddp = (2.0 * x * dp - (m * (m + 1)) as f64 * p[m]) / (1.0 - x * x);
                let dx = dp / ddp;
                x -= dx;
                if dx.abs() < 1e-16 {
                    break;
                }
            }
        }
        nodes[i] = x;
        let p = values(m, x)[m];
        weights[i] = 2.0 / ((m * (m + 1)) as f64 * p * p);
    }
    Ok(Rule { nodes, weights, lob: true })
}
pub fn series(c: &[f64], s: f64) -> f64 {
    let p = values(c.len().max(1) - 1, s);
    c.iter().zip(p).map(|(a, b)| a * b).sum()
}
pub fn to_modal(r: &Rule) -> DMatrix<f64> {
    let n = r.len();
    let p: Vec<Vec<f64>> = r.nodes.iter().map(|s| values(n - 1, *s)).collect();
    DMatrix::from_fn(n, n, |k, j| {
        let norm = if r.lob && k == n - 1 { 2.0 / (n as f64 - 1.0) } else { 2.0 / (2.0 * k as f64 + 1.0) };
        r.weights[j] * p[j][k] / norm
    })
}
pub fn integrate_series(c: &[f64]) -> Vec<f64> {
    let n = c.len();
    let mut o = vec![0.0; n + 1];
    for k in 0..n {
        let q = 2.0 * k as f64 + 1.0;
        o[k + 1] += c[k] / q;
        if k > 0 {
            o[k - 1] -= c[k] / q;
        }
    }
    let at: f64 = o.iter().enumerate().map(|(k, v)| if k % 2 == 0 { *v } else { -*v }).sum();
    o[0] -= at;
    o
}
pub fn differentiate_series(c: &[f64]) -> Vec<f64> {
    let n = c.len();
    let mut o = vec![0.0; n.max(1)];
    for k in 0..n {
        let mut j = k as isize - 1;
        while j >= 0 {
            o[j as usize] += (2.0 * j as f64 + 1.0) * c[k];
            j -= 2;
        }
    }
    if n > 1 {
        o.truncate(n - 1);
    }
    o
}
