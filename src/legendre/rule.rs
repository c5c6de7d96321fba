//! Quadrature rules: nodes, weights, angles.

use std::f64::consts::FRAC_PI_2;

use super::double::{Double, PI};
use super::expansion::{self, Expansion};
use super::newton;
use super::zero::{Ends, Zero};
use crate::error::{Error, Result};

/// An end of the reference interval [-1, 1].
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum End {
    /// s = -1.
    Left,
    /// s = 1.
    Right,
}

/// Which of the ends are nodes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Kind {
    /// Neither end; exact for polynomials to degree 2n - 1.
    Gauss,
    /// Both ends; exact to degree 2n - 3.
    Lobatto,
    /// The one end; exact to degree 2n - 2.
    Radau(End),
}

/// A quadrature rule on [-1, 1]: the integral of f is about sum_j w_j f(s_j).
///
/// Nodes ascend. Beside each node s_j stand its angle theta_j in [0, pi], s_j = -cos(theta_j), and its
/// distances 1 + s_j and 1 - s_j from the ends, which keep their relative accuracy where s_j itself cannot.
///
/// Error: angles, distances and weights are the exact ones rounded, within 0.51 ulp; nodes within 1.2e-16.
#[derive(Debug, Clone, PartialEq)]
pub struct Rule {
    kind: Kind,
    nodes: Vec<f64>,
    weights: Vec<f64>,
    angles: Vec<f64>,
    from_left: Vec<f64>,
    from_right: Vec<f64>,
}

impl Rule {
    /// Which of the ends are nodes.
    pub fn kind(&self) -> Kind {
        self.kind
    }

    /// Number of nodes n.
    #[expect(clippy::len_without_is_empty, reason = "a rule always has nodes")]
    pub fn len(&self) -> usize {
        self.nodes.len()
    }

    /// Nodes s_j, ascending in [-1, 1].
    pub fn nodes(&self) -> &[f64] {
        &self.nodes
    }

    /// Weights w_j, all positive, with sum 2.
    pub fn weights(&self) -> &[f64] {
        &self.weights
    }

    /// Angles theta_j with s_j = -cos(theta_j), ascending in [0, pi].
    pub fn angles(&self) -> &[f64] {
        &self.angles
    }

    /// Distances 1 + s_j from the left end.
    pub fn from_left(&self) -> &[f64] {
        &self.from_left
    }

    /// Distances 1 - s_j from the right end.
    pub fn from_right(&self) -> &[f64] {
        &self.from_right
    }

    fn with_capacity(kind: Kind, n: usize) -> Self {
        let room = || Vec::with_capacity(n);
        Self { kind, nodes: room(), weights: room(), angles: room(), from_left: room(), from_right: room() }
    }

    /// Adds a node given as seen from the left end.
    fn push(&mut self, angle: Double, distance: Double, weight: f64) {
        self.nodes.push((distance - Double::from(1.0)).hi);
        self.weights.push(weight);
        self.angles.push(angle.hi);
        self.from_left.push(distance.hi);
        self.from_right.push((Double::from(2.0) - distance).hi);
    }

    /// Adds a node given as seen from the right end.
    fn push_from_right(&mut self, angle: Double, distance: Double, weight: f64) {
        self.nodes.push((Double::from(1.0) - distance).hi);
        self.weights.push(weight);
        self.angles.push((PI - angle).hi);
        self.from_left.push((Double::from(2.0) - distance).hi);
        self.from_right.push(distance.hi);
    }
}

/// The Gauss rule with n nodes, exact for polynomials to degree 2n - 1.
///
/// Nodes are the zeros of P_n, weights w = 2 / ((1-s^2) P_n'(s)^2) = 2 / (dP_n/dtheta)^2.
///
/// Cost O(n).
///
/// # Errors
/// [`Error::Argument`] for n = 0 or n > 10,000,000.
///
/// # Example
/// ```
/// let rule = spanwise::legendre::gauss(5)?;
/// let integral: f64 = rule.nodes().iter().zip(rule.weights()).map(|(s, w)| w * s.exp()).sum();
/// assert!((integral - (1f64.exp() - (-1f64).exp())).abs() < 1e-9);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Abramowitz & Stegun 25.4.29; NIST DLMF 3.5(v).
pub fn gauss(n: usize) -> Result<Rule> {
    require(n, 1, "1 to 10,000,000")?;
    Ok(build(n, Kind::Gauss))
}

/// The Lobatto rule with n nodes, both ends among them, exact for polynomials to degree 2n - 3.
///
/// Inner nodes are the zeros of P_(n-1)', weights w = 2 / (n (n-1) P_(n-1)(s)^2).
///
/// Cost O(n).
///
/// # Errors
/// [`Error::Argument`] for n < 2 or n > 10,000,000.
///
/// # Example
/// ```
/// let rule = spanwise::legendre::lobatto(3)?; // Simpson's rule
/// assert_eq!(rule.nodes(), [-1.0, 0.0, 1.0]);
/// assert_eq!(rule.weights(), [1.0 / 3.0, 4.0 / 3.0, 1.0 / 3.0]);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Abramowitz & Stegun 25.4.32.
pub fn lobatto(n: usize) -> Result<Rule> {
    require(n, 2, "2 to 10,000,000")?;
    Ok(build(n, Kind::Lobatto))
}

/// The Radau rule with n nodes, one end among them, exact for polynomials to degree 2n - 2.
///
/// With the left end, inner nodes are the other zeros of P_(n-1) + P_n, weights
/// w = (1-s) / (n P_(n-1)(s))^2; the right one is its mirror image.
///
/// Cost O(n).
///
/// # Errors
/// [`Error::Argument`] for n = 0 or n > 10,000,000.
///
/// # Example
/// ```
/// use spanwise::legendre::{End, radau};
/// let rule = radau(2, End::Left)?;
/// assert_eq!(rule.nodes()[0], -1.0);
/// assert!((rule.nodes()[1] - 1.0 / 3.0).abs() < 1e-15);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
///
/// Source: Abramowitz & Stegun 25.4.31.
pub fn radau(n: usize, end: End) -> Result<Rule> {
    require(n, 1, "1 to 10,000,000")?;
    Ok(build(n, Kind::Radau(end)))
}

/// Longer rules would only exhaust the memory.
const MOST_NODES: usize = 10_000_000;

fn require(n: usize, least: usize, range: &'static str) -> Result<()> {
    if n < least || n > MOST_NODES {
        return Err(Error::Argument { what: "number of nodes", value: n.to_string(), range });
    }
    Ok(())
}

fn build(n: usize, kind: Kind) -> Rule {
    let (left, right) = match kind {
        Kind::Gauss => (false, false),
        Kind::Lobatto => (true, true),
        Kind::Radau(End::Left) => (true, false),
        Kind::Radau(End::Right) => (false, true),
    };
    let points = n as f64;
    let end_weight = match kind {
        Kind::Lobatto => 2.0 / (points * (points - 1.0)),
        _ => 2.0 / (points * points),
    };
    let zero_angle = Double::from(0.0);
    let inner = n - usize::from(left) - usize::from(right);
    let half = inner / 2;
    let middle = left == right && inner % 2 == 1;
    let from_left = zeros(n, Ends { near: left, far: right }, half + usize::from(middle));
    let left_half = &from_left[..half];
    let from_right;
    let right_half = if left == right {
        left_half
    } else {
        from_right = zeros(n, Ends { near: right, far: left }, inner - half);
        &from_right
    };

    let mut rule = Rule::with_capacity(kind, n);
    if left {
        rule.push(zero_angle, zero_angle, end_weight);
    }
    for node in left_half {
        rule.push(node.angle, node.distance, node.weight.hi);
    }
    if middle {
        // Its place is known; only its weight is not.
        rule.push(Double::from(FRAC_PI_2), Double::from(1.0), from_left[half].weight.hi);
    }
    for node in right_half.iter().rev() {
        rule.push_from_right(node.angle, node.distance, node.weight.hi);
    }
    if right {
        rule.push_from_right(zero_angle, zero_angle, end_weight);
    }
    rule
}

/// The first `count` inner nodes of the n-point rule, counted from the near end.
fn zeros(n: usize, ends: Ends, count: usize) -> Vec<Zero> {
    if n < expansion::LEAST_NODES {
        (1..=count).map(|k| newton::zero(n, ends, k)).collect()
    } else {
        let expansion = Expansion::new(n, ends);
        (1..=count).map(|k| expansion.zero(k)).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn all(n: usize) -> Vec<Rule> {
        let mut rules = vec![gauss(n).expect("n >= 1")];
        rules.push(radau(n, End::Left).expect("n >= 1"));
        rules.push(radau(n, End::Right).expect("n >= 1"));
        if n >= 2 {
            rules.push(lobatto(n).expect("n >= 2"));
        }
        rules
    }

    #[test]
    fn nodes_ascend_and_weights_sum_to_two() {
        for n in (1..=70).chain([255, 256]) {
            for rule in all(n) {
                assert_eq!(rule.len(), n);
                assert!(rule.nodes().is_sorted_by(|a, b| a < b), "{:?} {n}", rule.kind());
                assert!(rule.weights().iter().all(|w| *w > 0.0));
                let sum: f64 = rule.weights().iter().sum();
                assert!((sum - 2.0).abs() < 1e-14, "{:?} {n}: {sum}", rule.kind());
                for (j, s) in rule.nodes().iter().enumerate() {
                    assert!((s + rule.angles()[j].cos()).abs() < 3e-16);
                    assert!((rule.from_left()[j] - (1.0 + s)).abs() < 3e-16);
                    assert!((rule.from_right()[j] - (1.0 - s)).abs() < 3e-16);
                }
            }
        }
    }

    #[test]
    fn too_few_or_too_many_nodes_are_refused() {
        assert!(gauss(0).is_err() && lobatto(1).is_err() && radau(0, End::Left).is_err());
        assert!(gauss(usize::MAX).is_err());
    }
}
