//! What the drivers share: one linear solve after another on changing meshes.

use super::{Progress, Settings};
use crate::error::{Error, Result};
use crate::evidence::singular;
use crate::field::Field;
use crate::linear::{self, Library, Pass, Perturbation};
use crate::mesh::Mesh;
use crate::model::Model;
use crate::tolerance;

/// Most passes of the mesh adaptation.
pub(super) const PASSES: usize = 40;
/// How many nodes the answer has more than the mesh it was adapted on.
pub(super) const ENRICH: usize = 4;

/// Whether a field lies within the limits of its model, seen at more points of each element than it has nodes, close to its
/// ends too.
pub(super) fn admissible(model: &dyn Model, field: &Field) -> bool {
    let inside = |e: usize, s: f64| {
        let jets = field.jets(e, s, field.layout.orders());
        model.admissible(field.element(e).coordinate(s), &jets, &field.constants)
    };
    (0..field.mesh.elements.len()).all(|e| {
        let count = 2 * field.element(e).nodes + 1;
        (0..count).all(|k| inside(e, -(std::f64::consts::PI * (k as f64 + 0.5) / count as f64).cos()))
    })
}

/// How small the last coefficients must be for a given accuracy.
pub(super) fn wanted_tail(relative: f64) -> f64 {
    (tolerance::TAIL_SHARE * relative).max(tolerance::FINEST_TAIL)
}

/// One problem being solved, pass after pass.
pub(super) struct Solver<'a> {
    pub model: &'a dyn Model,
    pub settings: &'a Settings<'a>,
    pub scale: Vec<f64>,
    pub library: Library,
    pub pass: usize,
}

impl Solver<'_> {
    /// One linear solve. A system that looks singular is solved once more with more nodes before it is called so:
    /// on a coarse mesh a regular problem may look singular.
    pub fn solve(&mut self, mesh: &Mesh, before: Option<&Field>, nudge: &Perturbation) -> Result<Pass> {
        let first = self.solve_once(mesh, before, nudge)?;
        if first.free.is_empty() {
            return Ok(first);
        }
        let second = self.solve_once(&mesh.enriched(2 * ENRICH), before, nudge)?;
        if second.free.is_empty() {
            return Ok(second);
        }
        Err(Error::Singular(singular::explain(self.model, &second.free, &second.contradictions)))
    }

    pub fn solve_once(&mut self, mesh: &Mesh, before: Option<&Field>, nudge: &Perturbation) -> Result<Pass> {
        self.pass += 1;
        let (pass, elements) = (self.pass, mesh.elements.len());
        let watch = self.settings.watch;
        let mut tick = |done: usize| watch.is_none_or(|w| w(Progress { pass, elements, done }));
        linear::solve(self.model, mesh, &mut self.library, &self.scale, before, nudge, &mut tick)
    }
}
