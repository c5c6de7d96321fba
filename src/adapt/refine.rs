//! What the Legendre coefficients of a solution say, and the next mesh.

use super::exponents::sample;
use crate::error::Result;
use crate::field::Field;
use crate::mesh::{Element, Mesh, Side};
use crate::model::Model;
use crate::tolerance;
use nalgebra::{DMatrix, DVector};

/// Most nodes that refinement gives an element.
const MOST_NODES: usize = 32;
/// Rungs of the ladder that takes the place of an element at a singular end, and their ratio. What is not smooth there is
/// most often a power of the distance (a square root, say), and only elements that shrink towards the end resolve it.
const RUNGS: usize = 4;
const RATIO: f64 = 0.25;
/// Nodes of the parts of a split element lie in this range.
const SPLIT_NODES: (usize, usize) = (16, 24);

/// What is to be done with an element.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Action {
    /// Resolved.
    Keep,
    /// Resolved with so much to spare that a neighbour of the same kind may be joined.
    Spare,
    /// More nodes will do.
    Raise(usize),
    /// Only shorter elements will do.
    Split,
    /// Only elements that shrink towards a singular end will do.
    Grade,
}

/// How well an element is resolved.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Indicator {
    /// Size of the last coefficients, as share of the largest u^(m-1) on the span.
    pub tail: f64,
    /// What follows.
    pub action: Action,
}

/// Judges all elements: the tail of the coefficients of each v_i, times h/2, against the size of u_i^(m_i-1).
pub(crate) fn indicators(model: &dyn Model, field: &Field, wanted: f64) -> Result<Vec<Indicator>> {
    let layout = &field.layout;
    let length = field.mesh.length();
    let sizes: Vec<f64> = layout
        .orders()
        .iter()
        .enumerate()
        .map(|(i, &m)| {
            let below = (0..m.max(1)).map(|j| field.size(i, j) * length.powi(j as i32 - m.max(1) as i32 + 1));
            below.fold(0.0, f64::max)
        })
        .collect();
    let mut all = Vec::with_capacity(field.mesh.elements.len());
    for (e, element) in field.mesh.elements.iter().enumerate() {
        let mut worst = Indicator { tail: 0.0, action: Action::Spare };
        let mut noise: Option<Vec<f64>> = None;
        for (i, &m) in layout.orders().iter().enumerate() {
            if sizes[i] == 0.0 {
                continue;
            }
            let factor = if m == 0 { 1.0 } else { 0.5 * element.length() } / sizes[i];
            let series = field.series(e, i, m);
            let tail = factor * tail(series);
            let mut limit = wanted;
            if tail > wanted {
                if noise.is_none() {
                    noise = Some(rounding_noise(model, field, e)?);
                }
                let noise = noise.as_ref().map_or(0.0, |n| n[i]);
                limit = limit.max(tolerance::NOISE * factor * noise);
            }
            let action = judge(series, factor, tail, limit, element.nodes);
            worst = worse(worst, Indicator { tail: if tail <= limit { 0.0 } else { tail }, action });
        }
        if worst.action == Action::Split && weakly_singular(model, field, e)? {
            worst.action = Action::Grade;
        }
        all.push(worst);
    }
    Ok(all)
}

/// Whether an element lies at a singular end at which the solution stays as smooth as its equation of that order makes it: the
/// lower terms, over the distance from the end, vanish there beside the highest derivatives. Where they do not (the centre of a
/// disc) there are solutions that grow without bound, and no grading must come near those.
fn weakly_singular(model: &dyn Model, field: &Field, element: usize) -> Result<bool> {
    let layout = model.layout();
    let place = field.element(element);
    let Some(side) = place.open else { return Ok(false) };
    let distance = 1e-6 * place.length();
    let x = if side == Side::Left { place.left + distance } else { place.right - distance };
    let Ok(equations) = sample(model, place.piece, x) else { return Ok(false) };
    let entry = |e: usize, i: usize, k: usize| equations.jets[e * layout.jets() + layout.jet(i, k)];
    let d = layout.unknowns();
    let leading = DMatrix::from_fn(d, d, |e, i| entry(e, i, layout.orders()[i]));
    let Some(inverse) = leading.try_inverse() else { return Ok(false) };
    let mut largest = 0.0f64;
    for (i, &m) in layout.orders().iter().enumerate() {
        for k in 0..m {
            for row in 0..d {
                let sum: f64 = (0..d).map(|e| (inverse[(row, e)] * entry(e, i, k)).abs()).sum();
                let top = layout.orders()[row].max(m);
                largest = largest.max(sum * distance.powi((top - k) as i32));
            }
        }
    }
    Ok(largest < 0.05)
}

/// Size of the last coefficients; two of them, for even and odd functions.
fn tail(series: &[f64]) -> f64 {
    series.iter().rev().take(2).fold(0.0, |s, c| s.max(c.abs()))
}

fn judge(series: &[f64], factor: f64, tail: f64, limit: f64, nodes: usize) -> Action {
    let n = series.len();
    if tail <= limit {
        let spare = series[n / 3..].iter().all(|c| factor * c.abs() <= 0.1 * limit);
        return if spare { Action::Spare } else { Action::Keep };
    }
    // Decay per degree of the running maximum (even and odd functions have zeros in between).
    let start = n / 3;
    let running = |k: usize| factor * series[k..].iter().fold(0.0f64, |s, c| s.max(c.abs()));
    let rate = (running(start) / running(n - 2).max(f64::MIN_POSITIVE)).ln() / (n - 2 - start) as f64;
    let more = (tail / limit).ln() / rate.max(1e-3);
    let needed = nodes as f64 + 1.1 * more + 2.0;
    if needed <= MOST_NODES as f64 {
        Action::Raise(((needed / 2.0).ceil() as usize * 2).clamp(nodes + 2, MOST_NODES))
    } else {
        Action::Split
    }
}

fn worse(a: Indicator, b: Indicator) -> Indicator {
    let rank = |action: Action| match action {
        Action::Spare => 0,
        Action::Keep => 1,
        Action::Raise(n) => n,
        Action::Split => usize::MAX - 1,
        Action::Grade => usize::MAX,
    };
    let action = if rank(b.action) > rank(a.action) { b.action } else { a.action };
    Indicator { tail: a.tail.max(b.tail), action }
}

/// Rounding error to be expected in the highest derivatives on an element: the unit roundoff times
/// the sum of sizes of all terms of the equations, through the inverse of the leading coefficients. Each derivative
/// counts with at least the size that its lower ones give it over the length of the element: it is
/// known through them.
pub(crate) fn rounding_noise(model: &dyn Model, field: &Field, element: usize) -> Result<Vec<f64>> {
    let layout = model.layout();
    let d = layout.unknowns();
    let place = field.element(element);
    let half = 0.5 * place.length();
    let mut size = vec![0.0; layout.jets()];
    for (i, &m) in layout.orders().iter().enumerate() {
        let sum = |k: usize| field.series(element, i, k).iter().map(|c| c.abs()).sum::<f64>();
        let largest = (0..=m).map(|k| sum(k) * half.powi(k as i32)).fold(0.0, f64::max);
        (0..=m).for_each(|k| size[layout.jet(i, k)] = largest / half.powi(k as i32));
    }
    let mut noise = vec![0.0f64; d];
    for s in [-0.93, -0.21, 0.57] {
        let equations = sample(model, place.piece, place.coordinate(s))?;
        let terms = DVector::from_fn(d, |e, _| {
            let row = &equations.jets[e * layout.jets()..(e + 1) * layout.jets()];
            // The highest derivative itself is what is being judged: it cannot excuse itself.
            let highest = |j: usize| (0..d).any(|i| j == layout.jet(i, layout.orders()[i]) && layout.orders()[i] > 0);
            let sum: f64 =
                row.iter().zip(&size).enumerate().filter(|(j, _)| !highest(*j)).map(|(_, (a, u))| (a * u).abs()).sum();
            sum + equations.residual[e].abs()
        });
        let leading =
            DMatrix::from_fn(d, d, |e, i| equations.jets[e * layout.jets() + layout.jet(i, layout.orders()[i])]);
        if let Some(inverse) = leading.try_inverse() {
            let v = inverse.abs() * terms;
            noise.iter_mut().zip(v.iter()).for_each(|(n, v)| *n = n.max(tolerance::ROUNDOFF * v));
        }
    }
    Ok(noise)
}

/// The next mesh, or `None` if every element is resolved.
pub(crate) fn next(mesh: &Mesh, indicators: &[Indicator]) -> Option<Mesh> {
    let worst = indicators.iter().map(|i| i.tail).fold(0.0, f64::max);
    if indicators.iter().all(|i| matches!(i.action, Action::Keep | Action::Spare)) {
        return None;
    }
    // Far from converged, elements beyond the worst ones are polluted by them: their turn comes later.
    let mark = if worst > 1e-2 { 0.1 * worst } else { 0.0 };
    let mut elements: Vec<Element> = Vec::with_capacity(2 * mesh.elements.len());
    let mut spare_before = false;
    for (element, indicator) in mesh.elements.iter().zip(indicators) {
        let action = if indicator.tail >= mark { indicator.action } else { Action::Keep };
        let mut spare = false;
        match action {
            Action::Keep => elements.push(*element),
            Action::Spare => {
                spare = true;
                let join = elements.last().filter(|before| {
                    let ratio = element.length() / before.length();
                    spare_before && before.piece == element.piece && (0.3..3.5).contains(&ratio)
                });
                if join.is_some() {
                    if let Some(before) = elements.last_mut() {
                        before.right = element.right;
                        before.open = before.open.or(element.open);
                        before.nodes = before.nodes.max(element.nodes);
                    }
                    spare = false;
                } else {
                    elements.push(*element);
                }
            }
            Action::Raise(nodes) => elements.push(Element { nodes, ..*element }),
            Action::Split => {
                let nodes = element.nodes.clamp(SPLIT_NODES.0, SPLIT_NODES.1);
                elements.extend(element.halves().map(|half| Element { nodes, ..half }));
            }
            Action::Grade => {
                let nodes = element.nodes.clamp(SPLIT_NODES.0, SPLIT_NODES.1);
                elements.extend(ladder(element, element.open.unwrap_or(Side::Left), nodes));
            }
        }
        spare_before = spare;
    }
    Some(Mesh { elements })
}

/// An element at a singular end as a ladder that grows away from it.
fn ladder(element: &Element, side: Side, nodes: usize) -> Vec<Element> {
    let length = element.length();
    let rung = |k: usize| length * RATIO.powi((RUNGS - k) as i32);
    let mut edges: Vec<f64> = match side {
        Side::Left => (0..=RUNGS).map(|k| element.left + rung(k)).collect(),
        Side::Right => (0..=RUNGS).map(|k| element.right - rung(RUNGS - k)).rev().collect::<Vec<_>>(),
    };
    match side {
        Side::Left => edges.insert(0, element.left),
        Side::Right => {
            edges.sort_by(f64::total_cmp);
            edges.push(element.right);
        }
    }
    edges.dedup();
    let last = edges.len() - 1;
    (edges[0], edges[last]) = (element.left, element.right);
    let open = |k: usize| match side {
        Side::Left => (k == 0).then_some(side),
        Side::Right => (k + 1 == last).then_some(side),
    };
    (0..last).map(|k| Element { left: edges[k], right: edges[k + 1], nodes, open: open(k), ..*element }).collect()
}

#[cfg(test)]
mod tests {
    use super::{Action, Indicator, judge, next};
    use crate::mesh::Mesh;

    fn indicator(tail: f64, action: Action) -> Indicator {
        Indicator { tail, action }
    }

    #[test]
    fn a_resolved_mesh_is_left_alone() {
        let mesh = Mesh::uniform(&[0.0, 1.0], 3, 16);
        let good = [Action::Keep, Action::Spare, Action::Spare].map(|a| indicator(0.0, a));
        assert_eq!(next(&mesh, &good), None);
    }

    #[test]
    fn elements_are_split_raised_and_joined_within_their_piece() {
        let mesh = Mesh::uniform(&[0.0, 1.0, 2.0], 3, 16);
        let plan = [
            indicator(1e-6, Action::Split),
            indicator(0.0, Action::Spare),
            indicator(0.0, Action::Spare),
            indicator(0.0, Action::Spare),
            indicator(1e-9, Action::Raise(22)),
            indicator(0.0, Action::Keep),
        ];
        let refined = next(&mesh, &plan).expect("something is to be done");
        let nodes: Vec<usize> = refined.elements.iter().map(|e| e.nodes).collect();
        // Split in two, two joined, and a spare one beyond the break stays by itself.
        assert_eq!(nodes, [16, 16, 16, 16, 22, 16]);
        let pieces: Vec<usize> = refined.elements.iter().map(|e| e.piece).collect();
        assert_eq!(pieces, [0, 0, 0, 1, 1, 1]);
        assert_eq!((refined.elements[2].left, refined.elements[2].right), (1.0 / 3.0, 1.0));
        assert!(refined.elements.windows(2).all(|e| e[0].right == e[1].left));
    }

    #[test]
    fn far_from_converged_only_the_worst_are_marked() {
        let mesh = Mesh::uniform(&[0.0, 1.0], 2, 16);
        let plan = [indicator(0.9, Action::Split), indicator(0.01, Action::Split)];
        assert_eq!(next(&mesh, &plan).expect("something is to be done").elements.len(), 3);
    }

    #[test]
    fn decay_decides_between_more_nodes_and_shorter_elements() {
        let series = |rate: f64| (0..16).map(|k| (-rate * f64::from(k)).exp()).collect::<Vec<f64>>();
        let action = |rate: f64| {
            let series = series(rate);
            judge(&series, 1.0, series[15], 1e-14, 16)
        };
        assert!(matches!(action(1.6), Action::Raise(n) if n > 16 && n <= 32));
        assert_eq!(action(0.3), Action::Split);
        // Even functions: every other coefficient vanishes, the decay is the same.
        let even: Vec<f64> = series(1.6).iter().enumerate().map(|(k, c)| if k % 2 == 0 { *c } else { 0.0 }).collect();
        assert!(matches!(judge(&even, 1.0, even[14], 1e-14, 16), Action::Raise(_)));
    }
}
