//! Residual on a finer Gauss grid.

use crate::adapt::exponents::sample;
use crate::error::Result;
use crate::field::Field;
use crate::legendre;
use crate::model::{Batch, Linearised, Model};

/// The residual of the equations along the span.
#[derive(Debug, Clone)]
pub struct Residual {
    /// Per element: (x, residual relative to the sum of the sizes of the terms of its equation), the
    /// worst equation at each point.
    pub points: Vec<Vec<(f64, f64)>>,
    /// Root of the mean square over the span, by Gauss weights.
    pub norm: f64,
    /// Largest value.
    pub largest: f64,
}

/// Residual of a solution at n + 3 Gauss nodes per element (not the collocation nodes, where it
/// vanishes by construction), with its L2 norm by the Gauss weights. A residual is no error bound: it is to be
/// read beside the condition number.
pub fn residual(model: &dyn Model, field: &Field) -> Result<Residual> {
    let mut points = Vec::with_capacity(field.mesh.elements.len());
    let (mut sum, mut largest) = (0.0, 0.0f64);
    let mut rule = legendre::gauss(1)?;
    for (e, element) in field.mesh.elements.iter().enumerate() {
        if rule.len() != element.nodes + 3 {
            rule = legendre::gauss(element.nodes + 3)?;
        }
        let values = relative(model, field, e, rule.nodes())?;
        for ((_, r), w) in values.iter().zip(rule.weights()) {
            sum += 0.5 * element.length() * w * r * r;
            largest = largest.max(*r);
        }
        points.push(values);
    }
    Ok(Residual { points, norm: (sum / field.mesh.length()).sqrt(), largest })
}

/// Size of the residual of each equation on a grid that is finer than, and apart from, the collocation
/// nodes, relative to the sum of the sizes of its terms: (x, worst equation's ratio).
fn relative(model: &dyn Model, field: &Field, element: usize, nodes: &[f64]) -> Result<Vec<(f64, f64)>> {
    let layout = model.layout();
    let (d, j) = (layout.unknowns(), layout.jets());
    let place = field.element(element);
    let mut points = Vec::with_capacity(nodes.len());
    for s in nodes {
        let x = [place.coordinate(*s)];
        let jets = field.jets(element, *s, layout.orders());
        let mut at = Linearised::default();
        at.reset(layout, 1);
        model.equations(&Batch { piece: place.piece, x: &x, jets: &jets, constants: &field.constants }, &mut at)?;
        let zero = sample(model, place.piece, x[0])?;
        let ratio = (0..d).map(|e| {
            let terms: f64 = at.jets[e * j..(e + 1) * j].iter().zip(&jets).map(|(a, u)| (a * u).abs()).sum();
            let terms = terms + zero.residual[e].abs();
            if terms > 0.0 { at.residual[e].abs() / terms } else { 0.0 }
        });
        points.push((x[0], ratio.fold(0.0, f64::max)));
    }
    Ok(points)
}
