//! Nodes and weights without iteration, each at constant cost, for long rules.
//!
//! Let t be the angle from an end and alpha, beta be 1 where the near or far end is a node, else 0. The
//! inner nodes are the zeros of the Jacobi polynomial P^(alpha, beta), and
//! u = sin(t/2)^(alpha+1/2) cos(t/2)^(beta+1/2) P^(alpha, beta)(cos t) obeys
//!
//! u'' + (N^2 + q(t)) u = 0,  q = c / (4 sin^2(t/2)) + d / (4 cos^2(t/2)),  c = 1/4 - alpha^2,  d = 1/4 - beta^2,
//!
//! while sqrt(z) J_alpha(N z) obeys the same with q = c / z^2. So u = z'^(-1/2) sqrt(z) J_alpha(N z), where, with
//! {z,t} the Schwarzian derivative (Liouville's transformation),
//!
//! 1 + q/N^2 = z'^2 (1 + c/(N z)^2) + {z,t} / (2 N^2).
//!
//! Its solution is t times a power series in t^2 and 1/N^2. Here 1/N^2 is put in as a number; substituting often
//! enough gives the series in t^2, and once more its inverse t(z). A node is t(j/N), j a zero of J_alpha, and the
//! slope of u there gives its weight. Expansions of this kind, iteration-free: Bogaert, SIAM J. Sci. Comput. 36 (2014); the
//! derivation here is our own, and covers the Lobatto and Radau rules too.

use super::bessel;
use super::double::{Double, PI};
use super::zero::{Ends, Zero};

/// Terms in t^2. The series converge for t < pi, and t^2 stays below 0.27 pi^2 (node next to the middle).
const TERMS: usize = 28;

/// From here on expansions are used: they are cheaper from about 45 nodes on, and good to 1e-17 from 30 on.
pub(crate) const LEAST_NODES: usize = 50;

type Series = [f64; TERMS];

/// Nodes of one rule as seen from one end.
pub(crate) struct Expansion {
    one: bool,
    /// N.
    large: f64,
    /// t = z (1 + sum_i inverse_i z^(2i)).
    inverse: Series,
    /// Weights are pi sin(t) t'(z) (1 + excess) (1 + factor) / N.
    factor: f64,
}

impl Expansion {
    pub(crate) fn new(n: usize, ends: Ends) -> Self {
        let order = |fixed: bool| if fixed { 1.0 } else { 0.0 };
        let (alpha, beta) = (order(ends.near), order(ends.far));
        let points = n as f64;
        let large = points - 0.5 * (alpha + beta) + 0.5;
        let small = 1.0 / (large * large);
        let forward = forward(0.25 - alpha * alpha, 0.25 - beta * beta, small);
        // z'(0)^2 N^2 / (n (n - beta)) where the near end is a node, from the value of the polynomial there.
        let factor = if ends.near {
            let slope = forward[0] * (2.0 + forward[0]);
            let ratio = if ends.far { 0.25 / (points * (points - 1.0)) } else { 0.0 };
            slope + ratio + slope * ratio
        } else {
            0.0
        };
        Self { one: ends.near, large, inverse: inverse(&forward), factor }
    }

    /// The k-th inner node from the end, k = 1, 2, ...
    pub(crate) fn zero(&self, k: usize) -> Zero {
        let bessel = bessel::zero(self.one, k);
        let z = bessel.place / self.large;
        let square = z.hi * z.hi;
        // The series and its derivative by z^2, together.
        let (mut sum, mut slope) = (0.0, 0.0);
        for c in self.inverse.iter().rev() {
            slope = slope * square + sum;
            sum = sum * square + c;
        }
        let angle = z + Double::from(z.hi * sum);
        let distance = angle.versine();
        let sine = (distance * (Double::from(2.0) - distance)).sqrt();
        let stretch = sum + 2.0 * square * slope;
        let excess = bessel.excess + self.factor + bessel.excess * self.factor;
        let excess = excess + stretch + excess * stretch;
        let main = PI * sine / self.large;
        Zero { angle, distance, weight: main + Double::from(main.hi * excess) }
    }
}

fn times(a: &Series, b: &Series) -> Series {
    let mut product = [0.0; TERMS];
    for (i, a) in a.iter().enumerate() {
        for (slot, b) in product[i..].iter_mut().zip(b) {
            *slot += a * b;
        }
    }
    product
}

/// (1 + a) (1 + b) - 1
fn joined(a: &Series, b: &Series) -> Series {
    let mut product = times(a, b);
    for (slot, (a, b)) in product.iter_mut().zip(a.iter().zip(b)) {
        *slot += a + b;
    }
    product
}

/// a / (1 + b)
fn over(a: &Series, b: &Series) -> Series {
    let mut quotient = *a;
    for i in 0..TERMS {
        let known: f64 = (0..i).map(|j| quotient[j] * b[i - j]).sum();
        quotient[i] = (a[i] - known) / (1.0 + b[0]);
    }
    quotient
}

/// sqrt(1 + a) - 1
fn root(a: &Series) -> Series {
    let mut root = [0.0; TERMS];
    let first = (1.0 + a[0]).sqrt();
    root[0] = a[0] / (1.0 + first);
    for i in 1..TERMS {
        let known: f64 = (1..i).map(|j| root[j] * root[i - j]).sum();
        root[i] = (a[i] - known) / (2.0 * first);
    }
    root
}

fn derivative(a: &Series) -> Series {
    std::array::from_fn(|i| if i + 1 < TERMS { (i + 1) as f64 * a[i + 1] } else { 0.0 })
}

/// a times t^2
fn shifted(a: &Series) -> Series {
    std::array::from_fn(|i| if i == 0 { 0.0 } else { a[i - 1] })
}

/// c (1 / (4 sin^2(t/2)) - 1/t^2) + d / (4 cos^2(t/2)), in powers of t^2.
fn potential(c: f64, d: f64) -> Series {
    // tan x = sum tan_i x^(2i+1) from tan' = 1 + tan^2; 1/x - cot x = sum cot_i x^(2i+1) likewise.
    let (mut tan, mut cot) = ([0.0; TERMS], [0.0; TERMS]);
    (tan[0], cot[0]) = (1.0, 1.0 / 3.0);
    for i in 1..TERMS {
        let squared = |s: &Series| (0..i).map(|j| s[j] * s[i - 1 - j]).sum::<f64>();
        tan[i] = squared(&tan) / (2 * i + 1) as f64;
        cot[i] = squared(&cot) / (2 * i + 3) as f64;
    }
    let mut quarter = 0.25;
    std::array::from_fn(|i| {
        // A quarter of the derivatives of both at x = t/2.
        let term = quarter * (2 * i + 1) as f64 * (c * cot[i] + d * tan[i]);
        quarter *= 0.25;
        term
    })
}

/// A - 1, where z = t A(t^2).
fn forward(c: f64, d: f64, small: f64) -> Series {
    let potential = potential(c, d);
    let (mut a, mut b) = ([0.0; TERMS], [0.0; TERMS]);
    // One more power of 1/N^2 is right after each substitution.
    for _ in 0..SUBSTITUTIONS {
        // 1 + b is z'. {z,t} = (2 b_1 + 4 t^2 b_2) / (1+b) - 6 t^2 (b_1 / (1+b))^2, b_1 and b_2 the
        // derivatives of b by t^2.
        let first = derivative(&b);
        let second = shifted(&derivative(&first));
        let relative = over(&first, &b);
        let square = shifted(&times(&relative, &relative));
        let curvature = over(&std::array::from_fn(|i| 2.0 * first[i] + 4.0 * second[i]), &b);
        // (z'^2 / A^2 - 1) / t^2 = 2 A_1 (A + z') / A^2, as z' = A + 2 t^2 A_1.
        let slope = derivative(&a);
        let both: Series = std::array::from_fn(|i| a[i] + b[i]);
        let product = times(&slope, &both);
        let top = std::array::from_fn(|i| 2.0 * (2.0 * slope[i] + product[i]));
        let ratio = over(&top, &joined(&a, &a));
        b = root(&std::array::from_fn(|i| {
            small * (potential[i] - c * ratio[i] - 0.5 * curvature[i] + 3.0 * square[i])
        }));
        a = std::array::from_fn(|i| b[i] / (2 * i + 1) as f64);
    }
    a
}

/// H - 1, where t = z H(z^2), from A - 1, where z = t A(t^2).
fn inverse(forward: &Series) -> Series {
    let mut h = [0.0; TERMS];
    for _ in 0..SUBSTITUTIONS {
        // A - 1 at t^2 = z^2 H^2, by Horner's rule.
        let square = joined(&h, &h);
        let mut inner = [0.0; TERMS];
        for c in forward.iter().rev() {
            let product = times(&inner, &square);
            for (slot, p) in inner.iter_mut().zip(product) {
                *slot += p;
            }
            inner = shifted(&inner);
            inner[0] = *c;
        }
        // H = 1 / A
        h = over(&inner.map(|v| -v), &inner);
    }
    h
}

/// Powers of 1/N^2 kept. With N > 49 the first left out is below 1e-19.
const SUBSTITUTIONS: usize = 6;

#[cfg(test)]
mod tests {
    use super::*;
    use crate::legendre::newton;

    /// Two roads to the same nodes: expansions, and Newton's iteration in double-double numbers.
    #[test]
    fn agrees_with_newton() {
        for n in [LEAST_NODES, LEAST_NODES + 1, 64, 100, 201, 500] {
            for (near, far) in [(false, false), (true, true), (true, false), (false, true)] {
                let ends = Ends { near, far };
                let expansion = Expansion::new(n, ends);
                for k in 1..=n / 2 {
                    let (a, b) = (expansion.zero(k), newton::zero(n, ends, k));
                    let off = |a: Double, b: Double| ((a - b).hi / b.hi).abs();
                    let angle = off(a.angle, b.angle);
                    let distance = off(a.distance, b.distance);
                    let weight = off(a.weight, b.weight);
                    // A thousandth and a tenth of an ulp.
                    assert!(angle < 2e-19 && distance < 2e-19 && weight < 2e-17, "{n} {ends:?} {k}");
                }
            }
        }
    }
}
