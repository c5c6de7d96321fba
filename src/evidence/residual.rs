//! Residual on a finer Gauss grid.

use crate::adapt::exponents::sample;
use crate::error::Result;
use crate::field::Field;
use crate::legendre;
use crate::model::{Batch, Linearised, Model};

/// The residual of the equations along the span.
#[derive(Debug, Clone)]
pub struct Residual {
    /// Per element: (x, residual relative to the largest terms of its equation on the span), the worst
    /// equation at each point.
    pub points: Vec<Vec<(f64, f64)>>,
    /// L2 norm of the residual over that of the sum of the sizes of the terms, worst equation, by Gauss weights.
    pub norm: f64,
    /// Largest value of `points`.
    pub largest: f64,
}

/// Residual and sum of the sizes of the terms of each equation at one point.
struct At {
    x: f64,
    weight: f64,
    residuals: Vec<f64>,
    terms: Vec<f64>,
}

/// Residual of a solution at n + 3 Gauss nodes per element (not the collocation nodes, where it
/// vanishes by construction). A residual is no error bound: it is to be read beside the condition number.
///
/// # Errors
/// Those of the model's equations.
pub fn residual(model: &dyn Model, field: &Field) -> Result<Residual> {
    let d = model.layout().unknowns();
    let mut elements: Vec<Vec<At>> = Vec::with_capacity(field.mesh.elements.len());
    let mut rule = legendre::gauss(1)?;
    for (index, element) in field.mesh.elements.iter().enumerate() {
        if rule.len() != element.nodes + 3 {
            rule = legendre::gauss(element.nodes + 3)?;
        }
        let nodes = rule.nodes().iter().zip(rule.weights());
        let points = nodes.map(|(s, w)| at(model, field, index, *s, 0.5 * element.length() * w));
        elements.push(points.collect::<Result<_>>()?);
    }
    let mut largest_terms = vec![0.0f64; d];
    let mut sums = vec![[0.0f64; 2]; d];
    for point in elements.iter().flatten() {
        for e in 0..d {
            largest_terms[e] = largest_terms[e].max(point.terms[e]);
            sums[e][0] += point.weight * point.residuals[e].powi(2);
            sums[e][1] += point.weight * point.terms[e].powi(2);
        }
    }
    let share = |r: f64, t: f64| if t > 0.0 { r / t } else { 0.0 };
    let norm = sums.iter().map(|[r, t]| share(r.sqrt(), t.sqrt())).fold(0.0, f64::max);
    let points: Vec<Vec<(f64, f64)>> = elements
        .iter()
        .map(|points| {
            let worst = |p: &At| (0..d).map(|e| share(p.residuals[e], largest_terms[e])).fold(0.0, f64::max);
            points.iter().map(|p| (p.x, worst(p))).collect()
        })
        .collect();
    let largest = points.iter().flatten().map(|p| p.1).fold(0.0, f64::max);
    Ok(Residual { points, norm, largest })
}

fn at(model: &dyn Model, field: &Field, element: usize, s: f64, weight: f64) -> Result<At> {
    let layout = model.layout();
    let (d, j, p) = (layout.unknowns(), layout.jets(), layout.constants());
    let place = field.element(element);
    let x = place.coordinate(s);
    let jets = field.jets(element, s, layout.orders());
    let mut here = Linearised::default();
    here.reset(layout, 1);
    model.equations(&Batch { piece: place.piece, x: &[x], jets: &jets, constants: &field.constants }, &mut here)?;
    let sources = sample(model, place.piece, x).map(|zero| zero.residual).unwrap_or_else(|_| vec![0.0; d]);
    let sizes = |factors: &[f64], values: &[f64]| factors.iter().zip(values).map(|(a, u)| (a * u).abs()).sum::<f64>();
    let terms = (0..d).map(|e| {
        let of_jets = sizes(&here.jets[e * j..(e + 1) * j], &jets);
        let of_constants = sizes(&here.constants[e * p..(e + 1) * p], &field.constants);
        of_jets + of_constants + sources[e].abs()
    });
    let terms = terms.collect();
    let residuals = here.residual.iter().map(|r| r.abs()).collect();
    Ok(At { x, weight, residuals, terms })
}
