//! Two-point and multi-point boundary-value problems.

use super::nonlinear::nonlinear;
use super::solver::{ENRICH, PASSES, Solver, admissible, wanted_tail};
use super::{Settings, Solution};
use crate::adapt::{exponents, refine, seed};
use crate::error::{Error, Result};
use crate::evidence::bars::Companions;
use crate::field::Field;
use crate::linear::{Library, Perturbation};
use crate::mesh::Mesh;
use crate::model::Model;

/// Solves a boundary-value problem: seeds a mesh, adapts it, and solves once more with more nodes
/// and twice with changed coefficients for the error bars.
///
/// # Errors
/// [`Error::Singular`] with an explanation when the problem has no unique solution; [`Error::NotFinite`] when
/// data are not finite somewhere; [`Error::ConditionCount`]; [`Error::NoSolution`] when a nonlinear problem was not solved;
/// [`Error::Interrupted`] when the watch says so.
pub fn boundary(model: &dyn Model, settings: &Settings<'_>) -> Result<Solution> {
    check(model, settings)?;
    if !model.linear() {
        return nonlinear(model, settings);
    }
    let scale = exponents::scales(model)?;
    let open = exponents::singular_ends(model, &scale)?;
    let mut mesh = seed::seed(model, &scale, open, settings.most_elements)?;
    let mut solver = Solver { model, settings, scale, library: Library::suited(model), pass: 0 };
    let wanted = wanted_tail(settings.relative);
    let (mut base, mut resolved) = (solver.solve(&mesh, None, &Perturbation::NONE)?, false);
    while solver.pass < PASSES {
        let indicators = refine::indicators(model, &base.field, wanted)?;
        let Some(next) = refine::next(&mesh, &indicators) else {
            resolved = true;
            break;
        };
        if next.elements.len() > settings.most_elements {
            break;
        }
        mesh = next;
        base = solver.solve(&mesh, Some(&base.field), &Perturbation::NONE)?;
    }
    if let (false, Some(end)) = (resolved, open.iter().position(|o| *o)) {
        return Err(Error::SingularEnd { x: model.points()[if end == 0 { 0 } else { model.points().len() - 1 }] });
    }
    let passes = solver.pass;
    let other_rows = base.field;
    let base = solver.solve(&mesh, Some(&other_rows), &Perturbation::NONE)?.field;
    let between = solver.solve(&mesh.enriched(ENRICH / 2), Some(&base), &Perturbation::NONE)?.field;
    let answer = solver.solve(&mesh.enriched(ENRICH), Some(&base), &Perturbation::NONE)?;
    if !admissible(model, &answer.field) {
        return Err(Error::NoSolution {
            tried: "the one solution of this linear problem leaves the limits given".into(),
        });
    }
    let mut nudged = Vec::new();
    for pattern in 0..Perturbation::PATTERNS {
        let nudge = Perturbation::nudge(pattern);
        nudged.push(solver.solve(&mesh, Some(&base), &nudge)?.field);
    }
    let companions = Companions { coarser: vec![base, between, other_rows], nudged };
    Ok(Solution { field: answer.field, condition: answer.condition, passes, resolved, companions })
}

/// Solves a linear boundary-value problem on a given mesh, without adaptation and without bars.
///
/// # Errors
/// As [`boundary`].
pub fn on_mesh(model: &dyn Model, mesh: &Mesh) -> Result<Field> {
    let settings = Settings::default();
    check(model, &settings)?;
    let scale = exponents::scales(model)?;
    let mut solver = Solver { model, settings: &settings, scale, library: Library::suited(model), pass: 0 };
    Ok(solver.solve(mesh, None, &Perturbation::NONE)?.field)
}

pub(super) fn check(model: &dyn Model, settings: &Settings<'_>) -> Result<()> {
    let points = model.points();
    let ascending = points.len() >= 2 && points.windows(2).all(|p| p[0] < p[1]);
    if !ascending || points.iter().any(|p| !p.is_finite()) {
        let value = format!("{points:?}");
        return Err(Error::Argument { what: "points", value, range: "finite and ascending, two or more" });
    }
    if !(1e-14..=1e-2).contains(&settings.relative) {
        let value = settings.relative.to_string();
        return Err(Error::Argument { what: "relative accuracy", value, range: "1e-14 to 1e-2" });
    }
    if points.len() > settings.most_elements {
        return Err(Error::Unresolved { elements: settings.most_elements, x: points[settings.most_elements] });
    }
    if model.layout().unknowns() == 0 {
        return Err(Error::Argument { what: "unknowns", value: "none".into(), range: "one or more" });
    }
    Ok(())
}
