//! Size of the unknowns and local characteristic exponents, from samples of the equations.

use crate::error::{Error, Result};
use crate::model::{Batch, Layout, Linearised, Model};
use nalgebra::DMatrix;
use nalgebra::linalg::{Schur, balancing};
use num_complex::Complex64;

/// The equations linearised about zero at one point.
pub(crate) fn sample(model: &dyn Model, piece: usize, x: f64) -> Result<Linearised> {
    let layout = model.layout();
    let mut equations = Linearised::default();
    equations.reset(layout, 1);
    let (jets, constants) = (vec![0.0; layout.jets()], vec![0.0; layout.constants()]);
    model.equations(&Batch { piece, x: &[x], jets: &jets, constants: &constants }, &mut equations)?;
    let values = equations.residual.iter().chain(&equations.jets).chain(&equations.constants);
    if values.into_iter().all(|v| v.is_finite()) {
        return Ok(equations);
    }
    let per = |array: &[f64], width: usize| array.iter().position(|v| !v.is_finite()).map(|i| i / width.max(1));
    let equation = per(&equations.residual, 1)
        .or_else(|| per(&equations.jets, layout.jets()))
        .or_else(|| per(&equations.constants, layout.constants()));
    Err(Error::NotFinite { what: model.equation_name(equation.unwrap_or(0)), x })
}

/// One size per unknown function that balances the coefficients of the equations: in sum over the span the
/// matrix max_k |A_ik| L^-k, scaled by rows and by these sizes, has entries of size 1 (equilibration by
/// square roots: Ruiz 2001). A pure matter of units: the answer does not depend on it, pivots do.
pub(crate) fn scales(model: &dyn Model) -> Result<Vec<f64>> {
    let layout = model.layout();
    let d = layout.unknowns();
    let points = model.points();
    let length = points[points.len() - 1] - points[0];
    let mut size = DMatrix::<f64>::zeros(d, d);
    for piece in pieces_to_sample(points.len() - 1) {
        for t in [0.137, 0.5, 0.831] {
            let x = points[piece] + t * (points[piece + 1] - points[piece]);
            let equations = sample(model, piece, x)?;
            for e in 0..d {
                for (i, &m) in layout.orders().iter().enumerate() {
                    for k in 0..=m {
                        let a = equations.jets[e * layout.jets() + layout.jet(i, k)].abs() / length.powi(k as i32);
                        size[(e, i)] = size[(e, i)].max(a);
                    }
                }
            }
        }
    }
    let mut scale = vec![1.0; d];
    for (i, column) in size.column_iter().enumerate() {
        if column.amax() == 0.0 {
            return Err(Error::Singular(format!("{} does not appear in the equations", model.unknown_name(i))));
        }
    }
    for _ in 0..20 {
        let rows: Vec<f64> = size.row_iter().map(|r| r.amax()).collect();
        let columns: Vec<f64> = size.column_iter().map(|c| c.amax()).collect();
        for (e, r) in rows.iter().enumerate().filter(|(_, r)| **r > 0.0) {
            size.row_mut(e).unscale_mut(r.sqrt());
        }
        for (i, c) in columns.iter().enumerate() {
            scale[i] /= c.sqrt();
            size.column_mut(i).unscale_mut(c.sqrt());
        }
    }
    // A common factor is free: the first unknown keeps its own unit.
    let first = scale[0];
    Ok(scale.into_iter().map(|s| s / first).collect())
}

/// Whether a linear model is singular at the ends of its span: leading coefficients that vanish, or anything that is not
/// finite. Refuses one that is singular inside, where collocation would admit false solutions.
pub(crate) fn singular_ends(model: &dyn Model, scale: &[f64]) -> Result<[bool; 2]> {
    let layout = model.layout();
    let (d, jets) = (layout.unknowns(), layout.jets());
    let points = model.points();
    let length = points[points.len() - 1] - points[0];
    let determinant = |piece: usize, x: f64| -> Result<f64> {
        let equations = sample(model, piece, x)?;
        let entry = |e: usize, i: usize| {
            let m = layout.orders()[i];
            equations.jets[e * jets + layout.jet(i, m)] * scale[i] / length.powi(m as i32)
        };
        Ok(DMatrix::from_fn(d, d, entry).determinant())
    };
    let count = if points.len() > 100 { 2 } else { 32 };
    let mut open = [false; 2];
    for piece in 0..points.len() - 1 {
        let (a, b) = (points[piece], points[piece + 1]);
        let at = |k: usize| if k == count { b } else { a + (b - a) * k as f64 / count as f64 };
        let is_end = |k: usize| [k == 0 && piece == 0, k == count && piece + 2 == points.len()];
        let mut values = Vec::with_capacity(count + 1);
        for k in 0..=count {
            match determinant(piece, at(k)) {
                Err(Error::NotFinite { .. }) if is_end(k).contains(&true) => values.push(0.0),
                other => values.push(other?),
            }
        }
        let largest = values.iter().fold(0.0f64, |s, v| s.max(v.abs()));
        if largest == 0.0 {
            return Err(Error::Singular(
                "the equations do not determine the highest derivatives of all unknowns: they hide a constraint".into(),
            ));
        }
        for k in 0..=count {
            let vanishes = values[k].abs() <= 1e-15 * largest;
            let changes = k > 0 && values[k - 1] * values[k] < 0.0;
            match is_end(k) {
                [true, _] if vanishes => open[0] = true,
                [_, true] if vanishes => open[1] = true,
                _ if vanishes || changes => return Err(Error::SingularPoint { x: at(k) }),
                _ => {}
            }
        }
    }
    for (end, side) in
        [(points[0], 1.0), (points[points.len() - 1], -1.0)].into_iter().zip(open).filter(|(_, o)| *o).map(|(e, _)| e)
    {
        refuse_vanishing_rows(model, end, side)?;
    }
    Ok(open)
}

/// Whether a model is singular at the ends of its span, whatever it is inside.
pub(crate) fn open_ends(model: &dyn Model, scale: &[f64]) -> Result<[bool; 2]> {
    let layout = model.layout();
    let (d, points) = (layout.unknowns(), model.points());
    let last = points.len() - 1;
    let length = points[last] - points[0];
    let determinant = |piece: usize, x: f64| -> Result<f64> {
        let equations = sample(model, piece, x)?;
        let entry = |e: usize, i: usize| {
            let m = layout.orders()[i];
            equations.jets[e * layout.jets() + layout.jet(i, m)] * scale[i] / length.powi(m as i32)
        };
        Ok(DMatrix::from_fn(d, d, entry).determinant())
    };
    let mut open = model.open();
    for (open, (piece, x)) in open.iter_mut().zip([(0, points[0]), (last - 1, points[last])]) {
        let inside = determinant(piece, 0.5 * (points[piece] + points[piece + 1]))?;
        *open |= match determinant(piece, x) {
            Ok(at) => at.abs() <= 1e-15 * inside.abs(),
            Err(Error::NotFinite { .. }) => true,
            Err(error) => return Err(error),
        };
    }
    Ok(open)
}

/// In a system, an equation whose own highest derivatives fade out towards a singular end is most likely a flux carried
/// through it, and that admits false solutions.
fn refuse_vanishing_rows(model: &dyn Model, end: f64, side: f64) -> Result<()> {
    let layout = model.layout();
    let (d, jets) = (layout.unknowns(), layout.jets());
    let points = model.points();
    let length = points[points.len() - 1] - points[0];
    let piece = if side > 0.0 { 0 } else { points.len() - 2 };
    let row = |x: f64, e: usize| -> Result<f64> {
        let equations = sample(model, piece, x)?;
        let top = |i: usize| equations.jets[e * jets + layout.jet(i, layout.orders()[i])].abs();
        Ok((0..d).map(top).fold(0.0, f64::max))
    };
    let middle = 0.5 * (points[piece] + points[piece + 1]);
    for e in 0..d {
        if d > 1 && !model.written_out(e) && row(end + side * 1e-9 * length, e)? < 1e-3 * row(middle, e)? {
            return Err(Error::SingularPoint { x: end });
        }
    }
    Ok(())
}

/// All pieces, or an even choice of them when there are many.
fn pieces_to_sample(pieces: usize) -> impl Iterator<Item = usize> {
    (0..pieces).step_by(pieces.div_ceil(200).max(1))
}

/// Local characteristic exponents at a point: eigenvalues (1/length) of the linearised first-order
/// system of the states. `None` where the highest derivatives are not determined.
pub(crate) fn exponents(
    model: &dyn Model,
    scale: &[f64],
    piece: usize,
    x: f64,
    length: f64,
) -> Result<Option<Vec<Complex64>>> {
    let layout = model.layout();
    let equations = sample(model, piece, x)?;
    Ok(companion(layout, &equations, scale, length).and_then(|mut matrix| {
        balancing::balance_parlett_reinsch(&mut matrix);
        let schur = Schur::try_new(matrix.clone(), f64::EPSILON, 1000).or_else(|| {
            // On a cyclic matrix (the fourth derivative proportional to u) the iteration may go in circles: a small change
            // breaks the symmetry.
            let size = matrix.amax();
            matrix.iter_mut().enumerate().for_each(|(k, v)| *v += 1e-9 * size * (k as f64 + 0.385).sin());
            Schur::try_new(matrix, f64::EPSILON, 1000)
        })?;
        Some(schur.complex_eigenvalues().iter().map(|e| e / length).collect())
    }))
}

/// Matrix of length * dz/dx for the states z_(i,k) = u_i^(k) length^k / scale_i.
fn companion(layout: &Layout, equations: &Linearised, scale: &[f64], length: f64) -> Option<DMatrix<f64>> {
    let (d, states, jets) = (layout.unknowns(), layout.states(), layout.jets());
    if states == 0 {
        return None;
    }
    let entry =
        |e: usize, i: usize, k: usize| equations.jets[e * jets + layout.jet(i, k)] * scale[i] / length.powi(k as i32);
    let leading = DMatrix::from_fn(d, d, |e, i| entry(e, i, layout.orders()[i]));
    let mut lower = DMatrix::zeros(d, states);
    for (i, &m) in layout.orders().iter().enumerate() {
        for k in 0..m {
            (0..d).for_each(|e| lower[(e, layout.state(i, k))] = -entry(e, i, k));
        }
    }
    let highest = leading.full_piv_lu().solve(&lower)?;
    let mut matrix = DMatrix::zeros(states, states);
    for (i, &m) in layout.orders().iter().enumerate() {
        for k in 0..m {
            let row = layout.state(i, k);
            if k + 1 < m {
                matrix[(row, layout.state(i, k + 1))] = 1.0;
            } else {
                matrix.row_mut(row).copy_from(&highest.row(i));
            }
        }
    }
    matrix.iter().all(|v| v.is_finite()).then_some(matrix)
}
