//! A condition in terms of states.

use super::element::check_finite;
use super::nudge::Perturbation;
use crate::error::{Error, Result};
use crate::model::{Batch, ConditionValue, Linearised, Model, Place, Side};
use nalgebra::{DMatrix, DVector};

/// A condition as coefficients of scaled states at its places, of the constants, and the rest.
#[derive(Debug, Clone)]
pub(super) struct LinearCondition {
    /// Coefficients of the states at each place.
    pub places: Vec<(Place, Vec<f64>)>,
    /// Coefficients of the constants, then the rest.
    pub tail: Vec<f64>,
}

/// Linearises a condition about zero. Highest
/// derivatives are replaced through the equations, which hold at the ends of an element.
pub(super) fn linear_condition(
    model: &dyn Model,
    index: usize,
    scale: &[f64],
    perturbation: &Perturbation,
) -> Result<LinearCondition> {
    let layout = model.layout();
    let condition = &model.conditions()[index];
    let mut value = ConditionValue::default();
    value.reset(layout, condition.places.len());
    let zeros = vec![0.0; condition.places.len() * layout.jets()];
    let none = vec![0.0; layout.constants()];
    model.condition(index, &zeros, &none, &mut value)?;
    let entries = value.jets.iter().chain(&value.constants).chain([&value.residual]);
    if !entries.into_iter().all(|v| v.is_finite()) {
        let x = condition.places.first().map_or(0.0, |p| model.points()[p.point]);
        return Err(Error::NotFinite { what: format!("condition {}", condition.name), x });
    }
    perturbation.apply_condition(model, index, &zeros, &none, &mut value);
    let mut tail = value.constants.clone();
    tail.push(value.residual);
    let mut places = Vec::with_capacity(condition.places.len());
    for (place, jets) in condition.places.iter().zip(value.jets.chunks_exact(layout.jets().max(1))) {
        let mut coefficients = vec![0.0; layout.states()];
        for (i, &m) in layout.orders().iter().enumerate() {
            (0..m).for_each(|k| coefficients[layout.state(i, k)] = jets[layout.jet(i, k)]);
        }
        let highest: Vec<f64> = layout.orders().iter().enumerate().map(|(i, &m)| jets[layout.jet(i, m)]).collect();
        if highest.iter().any(|h| *h != 0.0) {
            replace_highest(model, place, perturbation, &highest, &mut coefficients, &mut tail)?;
        }
        for (i, &m) in layout.orders().iter().enumerate() {
            (0..m).for_each(|k| coefficients[layout.state(i, k)] *= scale[i]);
        }
        places.push((*place, coefficients));
    }
    Ok(LinearCondition { places, tail })
}

/// Adds highest . v with v = -A_m^-1 (lower terms + constants + residual) at a place.
fn replace_highest(
    model: &dyn Model,
    place: &Place,
    perturbation: &Perturbation,
    highest: &[f64],
    coefficients: &mut [f64],
    tail: &mut [f64],
) -> Result<()> {
    let layout = model.layout();
    let (d, jets, constants) = (layout.unknowns(), layout.jets(), layout.constants());
    let last = model.points().len() - 1;
    let piece = match (place.point, place.side) {
        (0, _) => 0,
        (p, _) if p == last => last - 1,
        (p, Side::Left) => p - 1,
        (p, Side::Right) => p,
    };
    let x = [model.points()[place.point]];
    let mut equations = Linearised::default();
    equations.reset(layout, 1);
    let (zeros, none) = (vec![0.0; jets], vec![0.0; constants]);
    let batch = Batch { piece, x: &x, jets: &zeros, constants: &none };
    model.equations(&batch, &mut equations)?;
    check_finite(model, &x, &equations)?;
    perturbation.apply(model, &batch, &mut equations);
    let leading = DMatrix::from_fn(d, d, |e, i| equations.jets[e * jets + layout.jet(i, layout.orders()[i])]);
    // highest . A_m^-1 as weights of the equations
    let weights = leading.transpose().full_piv_lu().solve(&DVector::from_column_slice(highest));
    let weights = weights.filter(|w| w.iter().all(|w| w.is_finite())).ok_or_else(|| {
        Error::Singular(format!(
            "the equations do not determine the highest derivatives at x = {} (SI), where a condition asks for one",
            x[0]
        ))
    })?;
    for (e, weight) in weights.iter().enumerate() {
        for (i, &m) in layout.orders().iter().enumerate() {
            for k in 0..m {
                coefficients[layout.state(i, k)] -= weight * equations.jets[e * jets + layout.jet(i, k)];
            }
        }
        let own = &equations.constants[e * constants..(e + 1) * constants];
        tail.iter_mut().zip(own).for_each(|(t, a)| *t -= weight * a);
        tail[constants] -= weight * equations.residual[e];
    }
    Ok(())
}
