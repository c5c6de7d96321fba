//! Nonlinear boundary-value problems: start, mesh and iteration together, homotopy when they find no way.

use super::march::{initial, march};
use super::solver::{ENRICH, PASSES, Solver, admissible, wanted_tail};
use super::viscosity::Viscous;
use super::{Settings, Solution};
use crate::adapt::{exponents, refine, seed};
use crate::error::{Error, Result};
use crate::evidence::bars::Companions;
use crate::field::Field;
use crate::linear::{Library, Perturbation, from_nodes, transfer};
use crate::mesh::Mesh;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Release};
use crate::newton::{Iteration, Linearisation, Stepper, newton};

/// Most steps of one iteration.
const STEPS: usize = 40;
/// Most points of a homotopy.
const HOMOTOPY: usize = 300;
/// Most element solves of one attempt: some seconds.
const BUDGET: usize = 200_000;

/// Solves a nonlinear problem.
pub(super) fn nonlinear(model: &dyn Model, settings: &Settings<'_>) -> Result<Solution> {
    if initial(model)
        && let Some(near) = march(model, settings)?
    {
        return follow(model, settings, &near, near.mesh.clone());
    }
    let starts = starts(model, settings)?;
    let mut reasons = Vec::new();
    let mut note = |error: Error| match error {
        Error::Interrupted => Err(Error::Interrupted),
        Error::NoSolution { tried } => {
            reasons.push(tried);
            Ok(())
        }
        other => {
            reasons.push(other.to_string());
            Ok(())
        }
    };
    for start in &starts {
        match seeded(model, settings, start) {
            Ok(solution) => return Ok(solution),
            Err(error) => note(error)?,
        }
    }
    for way in [thinning, homotopy] {
        let mut budget = BUDGET;
        for start in &starts {
            match way(model, settings, start, &mut budget).and_then(|near| seeded(model, settings, &near)) {
                Ok(solution) => return Ok(solution),
                Err(error) => note(error)?,
            }
        }
    }
    reasons.dedup();
    Err(Error::NoSolution { tried: reasons.join("; ") })
}

/// Fields to start from: constant ones at which the equations make sense, and what one linear solve makes of
/// each, which meets all linear conditions.
fn starts(model: &dyn Model, settings: &Settings<'_>) -> Result<Vec<Field>> {
    let closed = Mesh::uniform(model.points(), 1, 16);
    let mut library = Library::suited(model);
    let mut starts = Vec::new();
    starts.extend(guessed(model, &mut library)?);
    for level in [0.0, 1.0] {
        let flat = constant(model, &closed, level, &mut library)?;
        let linear = Linearisation::new(model, &flat, &flat);
        let Ok(scale) = exponents::scales(&linear) else { continue };
        let mesh = closed.clone().opened(exponents::open_ends(&linear, &scale)?);
        let mut solver = Solver { model: &linear, settings, scale, library: Library::suited(model), pass: 0 };
        match solver.solve(&mesh, None, &Perturbation::NONE) {
            Ok(pass) => starts.push(pass.field),
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(_) => {}
        }
        starts.push(flat);
    }
    if starts.is_empty() {
        return Err(Error::NoSolution {
            tried: "the equations make no sense at constant values of the unknowns".into(),
        });
    }
    Ok(starts)
}

/// The field that the model guesses.
fn guessed(model: &dyn Model, library: &mut Library) -> Result<Option<Field>> {
    let layout = model.layout();
    let mesh = Mesh::uniform(model.points(), 4, 16);
    if model.guess(model.points()[0], 0).is_none() {
        return Ok(None);
    }
    let mut values = Vec::with_capacity(mesh.elements.len());
    for element in &mesh.elements {
        let tables = library.get(element)?;
        let at = |s: &f64| model.guess(element.coordinate(*s), element.piece).unwrap_or_default();
        let jets: Vec<Vec<f64>> = std::iter::once(&-1.0).chain(&tables.nodes).map(at).collect();
        if jets.iter().flatten().any(|v| !v.is_finite()) || jets.iter().any(|j| j.len() != layout.jets()) {
            return Err(Error::NotFinite { what: "the guess".into(), x: element.left });
        }
        values.push(jets);
    }
    let constants = model.guessed_constants().unwrap_or_else(|| vec![0.0; layout.constants()]);
    Ok(Some(from_nodes(layout, &mesh, &values, constants, library)?))
}

/// All unknowns at the same value.
fn constant(model: &dyn Model, mesh: &Mesh, level: f64, library: &mut Library) -> Result<Field> {
    let layout = model.layout();
    let series = mesh
        .elements
        .iter()
        .map(|e| {
            let jets = layout.orders().iter().flat_map(|&m| {
                (0..=m).map(move |k| {
                    let mut c = vec![0.0; e.nodes + m - k];
                    c[0] = if k == 0 { level } else { 0.0 };
                    c
                })
            });
            jets.collect()
        })
        .collect();
    let field = Field::from_series(mesh.clone(), layout, vec![level; layout.constants()], series);
    transfer(&field, mesh, library)
}

/// [`follow`] on a mesh seeded from the equations about the start.
fn seeded(model: &dyn Model, settings: &Settings<'_>, start: &Field) -> Result<Solution> {
    let mesh = Run::new(model, settings, start, BUDGET)?.field.mesh;
    follow(model, settings, start, mesh)
}

/// A point of a path that need not be more than near: Newton's iteration and mesh adaptation to some six digits.
pub(super) fn near(model: &dyn Model, settings: &Settings<'_>, start: &Field, mesh: Mesh) -> Result<Field> {
    let mut run = Run::on(model, settings, start, mesh, BUDGET)?;
    run.converge(start, 1e-6, 1e-8)?;
    Ok(run.field)
}

/// Newton's iteration and mesh adaptation in turn, from a start and a mesh to the answer with its companions.
pub(super) fn follow(model: &dyn Model, settings: &Settings<'_>, start: &Field, mesh: Mesh) -> Result<Solution> {
    let mut run = Run::on(model, settings, start, mesh, BUDGET)?;
    let resolved = run.converge(start, wanted_tail(settings.relative), 1e-13)?;
    let passes = run.passes;
    let about = run.field.clone();
    let linear = Linearisation::new(model, &about, &about);
    let mut solver =
        Solver { model: &linear, settings, scale: run.scale.clone(), library: Library::suited(model), pass: passes };
    let mesh = about.mesh.clone();
    let base = solver.solve(&mesh, Some(&about), &Perturbation::NONE)?.field;
    let between = run.polished(&mesh.enriched(ENRICH / 2), &base)?;
    let answer = run.polished(&mesh.enriched(ENRICH), &base)?;
    let condition = solver.solve(&mesh.enriched(ENRICH), Some(&base), &Perturbation::NONE)?.condition;
    let mut nudged = Vec::new();
    for pattern in 0..Perturbation::PATTERNS {
        let nudge = Perturbation::nudge(pattern);
        nudged.push(solver.solve(&mesh, Some(&base), &nudge)?.field);
    }
    let companions = Companions { coarser: vec![base, between, about], nudged };
    Ok(Solution { field: answer, condition, passes, resolved, companions })
}

/// One iteration with its mesh.
struct Run<'a> {
    model: &'a dyn Model,
    settings: &'a Settings<'a>,
    scale: Vec<f64>,
    field: Field,
    library: Library,
    passes: usize,
    /// Element solves that are left.
    budget: usize,
}

impl<'a> Run<'a> {
    fn new(model: &'a dyn Model, settings: &'a Settings<'a>, start: &Field, budget: usize) -> Result<Self> {
        let linear = Linearisation::new(model, start, start);
        let scale = exponents::scales(&linear)?;
        let open = exponents::open_ends(&linear, &scale)?;
        let mesh = seed::seed(&linear, &scale, open, settings.most_elements)?;
        Self::on(model, settings, start, mesh, budget)
    }

    fn on(model: &'a dyn Model, settings: &'a Settings<'a>, start: &Field, mesh: Mesh, budget: usize) -> Result<Self> {
        let scale = exponents::scales(&Linearisation::new(model, start, start))?;
        let mut library = Library::suited(model);
        let field = transfer(start, &mesh, &mut library)?;
        Ok(Self { model, settings, scale, field, library, passes: 0, budget })
    }

    /// Iterates and refines until the coefficients of the iterate have fallen to `tail` and the steps to `step`; whether
    /// the mesh resolves the solution.
    fn converge(&mut self, start: &Field, tail: f64, step: f64) -> Result<bool> {
        self.field = transfer(start, &self.field.mesh, &mut self.library)?;
        let mut worst = 1.0f64;
        let mut failures = 0;
        while self.passes < 2 * PASSES {
            let wanted = (1e-3 * worst).clamp(step, 1e-2);
            let mesh = self.field.mesh.clone();
            let Iteration { field, failure, .. } = self.iterate(&mesh, wanted)?;
            self.field = field;
            let linear = Linearisation::new(self.model, &self.field, &self.field);
            let indicators = refine::indicators(&linear, &self.field, tail)?;
            worst = indicators.iter().map(|i| i.tail).fold(0.0, f64::max);
            let next = refine::next(&mesh, &indicators);
            match (failure, next) {
                (None, None) if wanted <= step || worst == 0.0 => {
                    let mesh = self.field.mesh.clone();
                    let last = self.iterate(&mesh, step)?;
                    self.field = last.field;
                    return match last.failure {
                        None => Ok(true),
                        Some(reason) => Err(Error::NoSolution { tried: reason }),
                    };
                }
                (None, None) => {}
                (Some(reason), None) => return Err(Error::NoSolution { tried: reason }),
                (failed, Some(next)) => {
                    failures += usize::from(failed.is_some());
                    if let Some(reason) = failed.filter(|_| failures > 6) {
                        return Err(Error::NoSolution { tried: reason });
                    }
                    if next.elements.len() > self.settings.most_elements.min(3000) {
                        return Err(Error::Unresolved { elements: next.elements.len(), x: next.elements[0].left });
                    }
                    self.field = transfer(&self.field, &next, &mut self.library)?;
                }
            }
        }
        Ok(false)
    }

    fn iterate(&mut self, mesh: &Mesh, wanted: f64) -> Result<Iteration> {
        self.passes += 1;
        let start = self.field.clone();
        let mut steps = Steps { run: self, mesh };
        newton(&mut steps, &start, wanted, STEPS)
    }

    /// The solution on another mesh: two more steps from a converged one.
    fn polished(&mut self, mesh: &Mesh, near: &Field) -> Result<Field> {
        let mut field = transfer(near, mesh, &mut self.library)?;
        for _ in 0..2 {
            let mut steps = Steps { run: self, mesh };
            field = steps.solve(&field, &field)?;
        }
        Ok(field)
    }
}

struct Steps<'r, 'a> {
    run: &'r mut Run<'a>,
    mesh: &'r Mesh,
}

impl Stepper for Steps<'_, '_> {
    fn solve(&mut self, jacobian: &Field, residual: &Field) -> Result<Field> {
        let elements = self.mesh.elements.len();
        let Some(left) = self.run.budget.checked_sub(elements) else {
            return Err(Error::Unresolved { elements, x: self.mesh.elements[0].left });
        };
        self.run.budget = left;
        let linear = Linearisation::new(self.run.model, jacobian, residual);
        let library = std::mem::replace(&mut self.run.library, Library::new(0));
        let mut solver = Solver {
            model: &linear,
            settings: self.run.settings,
            scale: self.run.scale.clone(),
            library,
            pass: self.run.passes,
        };
        let solved = solver.solve_once(self.mesh, Some(jacobian), &Perturbation::NONE);
        self.run.library = solver.library;
        let solved = solved?;
        if solved.free.is_empty() {
            Ok(solved.field)
        } else {
            Err(Error::Singular("the linearised problem has no unique solution".into()))
        }
    }

    fn transfer(&mut self, field: &Field) -> Result<Field> {
        transfer(field, self.mesh, &mut self.run.library)
    }

    fn admissible(&self, field: &Field) -> bool {
        admissible(self.run.model, field)
    }
}

/// One point of a way: the field there, from that of the point before. Coarse meshes will do.
fn point(model: &dyn Model, settings: &Settings<'_>, before: &Field, budget: &mut usize) -> Result<Field> {
    let mut run = Run::new(model, settings, before, *budget / 4)?;
    let outcome = run.converge(before, 1e-5, 1e-6);
    *budget -= (*budget / 4 - run.budget).min(*budget);
    outcome?;
    Ok(run.field)
}

/// Gives the highest derivatives more weight at first and takes it away step by step.
fn thinning(model: &dyn Model, settings: &Settings<'_>, start: &Field, budget: &mut usize) -> Result<Field> {
    let mut viscous = Viscous::new(model, start)?;
    if !viscous.useful() {
        return Err(Error::NoSolution { tried: "no equation has a thin highest derivative".into() });
    }
    let mut field = point(&viscous, settings, start, budget)?;
    let (mut share, mut factor) = (1.0f64, 0.2f64);
    for _ in 0..HOMOTOPY {
        // Once the weight is lost in the rest the last step is to none at all.
        viscous.share = if share * factor < 1e-12 { 0.0 } else { share * factor };
        match point(&viscous, settings, &field, budget) {
            Ok(found) => {
                field = found;
                share = viscous.share;
                if share == 0.0
                    || follow_step(model, settings, &field, budget).is_some_and(|f| {
                        field = f;
                        true
                    })
                {
                    return Ok(field);
                }
                factor = (factor * factor).max(0.04);
            }
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(_) => factor = factor.sqrt(),
        }
        if factor > 0.97 || *budget < 100 {
            break;
        }
    }
    Err(Error::NoSolution { tried: format!("thinning of the highest derivatives: got to a share of {share:.1e}") })
}

/// Whether the problem itself can be solved from here at once.
fn follow_step(model: &dyn Model, settings: &Settings<'_>, near: &Field, budget: &mut usize) -> Option<Field> {
    let mut small = (*budget / 20).max(400).min(*budget);
    let before = small;
    let found = point(model, settings, near, &mut small).ok();
    *budget -= before - small;
    found
}

/// Follows F(u) = (1 - t) F(u0) from t = 0, where u0 solves it, to t = 1.
fn homotopy(model: &dyn Model, settings: &Settings<'_>, start: &Field, budget: &mut usize) -> Result<Field> {
    let (mut t, mut step) = (0.0f64, 0.25f64);
    let mut field = start.clone();
    for _ in 0..HOMOTOPY {
        let next = (t + step).min(1.0);
        let between = Homotopy { model, start, share: 1.0 - next };
        match point(&between, settings, &field, budget) {
            Ok(found) => {
                (t, field) = (next, found);
                if t >= 1.0 {
                    return Ok(field);
                }
                step *= 2.0;
            }
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(_) => step *= 0.25,
        }
        if step < 1e-4 || *budget < 100 {
            break;
        }
    }
    Err(Error::NoSolution { tried: format!("homotopy: got {:.1} % of the way", 100.0 * t) })
}

/// F(u) - share * F(u0).
struct Homotopy<'a> {
    model: &'a dyn Model,
    start: &'a Field,
    share: f64,
}

impl Model for Homotopy<'_> {
    fn layout(&self) -> &Layout {
        self.model.layout()
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        false
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.model.equations(batch, out)?;
        let mut first = Linearised::default();
        first.reset(self.layout(), batch.x.len());
        // The linearisation about u0, asked at zero jets and taken to u0 again, is F(u0).
        let about = Linearisation::new(self.model, self.start, self.start);
        about.equations_at_centre(batch, &mut first)?;
        out.residual.iter_mut().zip(&first.residual).for_each(|(a, b)| *a -= self.share * b);
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        self.model.condition(index, jets, constants, out)?;
        let mut first = ConditionValue::default();
        first.reset(self.layout(), self.conditions()[index].places.len());
        let about = Linearisation::new(self.model, self.start, self.start);
        about.condition_at_centre(index, &mut first)?;
        out.residual -= self.share * first.residual;
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn open(&self) -> [bool; 2] {
        self.model.open()
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        self.model.admissible(x, jets, constants)
    }
}
