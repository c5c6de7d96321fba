//! One block of modes as a boundary-value problem on its own adapted mesh.

use super::Task;
use super::candidates::Start;
use crate::adapt::{refine, seed};
use crate::error::{Error, Result};
use crate::evidence::bars::Companions;
use crate::field::Field;
use crate::linear::{Library, Perturbation, from_nodes, transfer};
use crate::mesh::Mesh;
use crate::model::Model;
use crate::newton::Linearisation;
use crate::solve::Solution;
use crate::solve::solver::{ENRICH, PASSES, Solver, wanted_tail};
use crate::spectrum::block::Block;
use crate::spectrum::pins;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// Most Newton steps on one mesh.
const STEPS: usize = 12;
/// Relative change at which the iteration has converged.
const CONVERGED: f64 = 1e-12;

/// Vectors that span an invariant subspace, with the small matrix S: A_0 U + A_1 U S + A_2 U S^2 = 0.
pub(super) struct Basis {
    pub vectors: Vec<[Field; 2]>,
    pub matrix: DMatrix<Complex64>,
    /// Whether vectors and matrix are complex.
    pub complex: bool,
}

impl Basis {
    /// One mode.
    pub fn single(start: &Start, complex: bool) -> Self {
        let mut vector = start.fields.clone();
        if !complex {
            // A real eigenvector may come with any complex factor.
            let [re, im] = &start.fields;
            let size = |f: &Field| f.layout.orders().iter().enumerate().map(|(i, _)| f.size(i, 0)).fold(0.0, f64::max);
            if size(im) > size(re) {
                vector = [im.clone(), re.clone()];
            }
            vector[1] = vector[1].minus(&vector[1].clone());
        }
        Self { vectors: vec![vector], matrix: DMatrix::from_element(1, 1, start.value), complex }
    }

    /// A basis normalised by the pins, and its matrix.
    fn pinned(&self, pins: &[pins::Pin]) -> Option<(DMatrix<Complex64>, DMatrix<Complex64>)> {
        let values = pins::matrix(pins, &self.vectors);
        let inverse = values.clone().try_inverse()?;
        let matrix = values * &self.matrix * &inverse;
        Some((inverse, matrix))
    }
}

impl Task<'_> {
    /// Solves the block problem that starts from a basis.
    pub(super) fn polish<'b>(&'b self, basis: &Basis) -> Result<(Block<'b>, Solution)> {
        let fail = |tried: &str| Error::NoSolution { tried: tried.into() };
        let pins = pins::choose(&self.pencil, &self.scale, &basis.vectors);
        if pins.len() < basis.vectors.len() {
            return Err(fail("no condition fixes the size of the mode"));
        }
        let (combine, matrix) = basis.pinned(&pins).ok_or_else(|| fail("the modes cannot be told apart"))?;
        let block = Block::new(&self.pencil, basis.complex, pins);
        let mut constants = Vec::with_capacity(block.layout().constants());
        let parts = if block.complex() { 2 } else { 1 };
        for column in 0..block.width() {
            for part in 0..parts {
                for p in 0..self.pencil.layout.constants() {
                    let value: Complex64 = (0..block.width())
                        .map(|l| {
                            let [re, im] = &basis.vectors[l];
                            Complex64::new(re.constants[p], im.constants[p]) * combine[(l, column)]
                        })
                        .sum();
                    constants.push(if part == 0 { value.re } else { value.im });
                }
            }
        }
        for (r, c) in (0..block.width()).flat_map(|r| (0..block.width()).map(move |c| (r, c))) {
            constants.push(matrix[(r, c)].re);
            if block.complex() {
                constants.push(matrix[(r, c)].im);
            }
        }
        let start = Opening { task: self, block: &block, basis, combine: &combine, constants };
        let mut library = Library::new(block.layout().orders().iter().copied().max().unwrap_or(0));
        let coarse = start.on(&Mesh::uniform(block.points(), 1, 8), &mut library)?;
        let scale: Vec<f64> = (0..parts * block.width()).flat_map(|_| self.scale.iter().copied()).collect();
        let mesh = {
            let linear = Linearisation::new(&block, &coarse, &coarse);
            // Some more nodes than a seed has: close eigenvalues must be told apart from the first step on.
            seed::seed(&linear, &scale, self.open, self.settings.most_elements)?.enriched(ENRICH)
        };
        let field = start.on(&mesh, &mut library)?;
        let mut run = Run { task: self, block: &block, scale, field, library, passes: 0, condition: 1.0 };
        let resolved = run.adapt()?;
        let solution = run.finish(resolved)?;
        Ok((block, solution))
    }
}

/// The field to start from.
struct Opening<'a> {
    task: &'a Task<'a>,
    block: &'a Block<'a>,
    basis: &'a Basis,
    combine: &'a DMatrix<Complex64>,
    constants: Vec<f64>,
}

impl Opening<'_> {
    /// The basis on a mesh of the block problem.
    fn on(&self, mesh: &Mesh, library: &mut Library) -> Result<Field> {
        let own = &self.task.pencil.layout;
        let parts = if self.block.complex() { 2 } else { 1 };
        let mut nodes = Vec::with_capacity(mesh.elements.len());
        let mut hint = 0;
        for element in &mesh.elements {
            let piece = self.block.piece(element.piece);
            let tables = library.get(element)?;
            let mut all = Vec::with_capacity(tables.n + 1);
            for s in std::iter::once(&-1.0).chain(&tables.nodes) {
                let x = element.coordinate(*s);
                hint = self.basis.vectors[0][0].locate_in(x, piece, hint);
                let jets: Vec<[Vec<f64>; 2]> = self
                    .basis
                    .vectors
                    .iter()
                    .map(|pair| [0, 1].map(|p| pair[p].jets(hint, pair[p].element(hint).reference(x), own.orders())))
                    .collect();
                let mut values = Vec::with_capacity(parts * self.block.width() * own.jets());
                for column in 0..self.block.width() {
                    let mixed: Vec<Complex64> = (0..own.jets())
                        .map(|j| {
                            let term =
                                |l: usize| Complex64::new(jets[l][0][j], jets[l][1][j]) * self.combine[(l, column)];
                            (0..self.block.width()).map(term).sum()
                        })
                        .collect();
                    values.extend(mixed.iter().map(|v| v.re));
                    if parts == 2 {
                        values.extend(mixed.iter().map(|v| v.im));
                    }
                }
                all.push(values);
            }
            nodes.push(all);
        }
        from_nodes(self.block.layout(), mesh, &nodes, self.constants.clone(), library)
    }
}

/// Newton's iteration with its mesh.
struct Run<'a> {
    task: &'a Task<'a>,
    block: &'a Block<'a>,
    scale: Vec<f64>,
    field: Field,
    library: Library,
    passes: usize,
    condition: f64,
}

impl Run<'_> {
    /// Iterates and refines until mesh and iterate are good; whether the mesh is.
    fn adapt(&mut self) -> Result<bool> {
        let tail = wanted_tail(self.task.settings.relative);
        let mut worst = 1.0f64;
        for _ in 0..PASSES {
            let wanted = (1e-3 * worst).clamp(CONVERGED, 1e-4);
            self.iterate(wanted)?;
            let linear = Linearisation::new(self.block, &self.field, &self.field);
            let indicators = refine::indicators(&linear, &self.field, tail)?;
            worst = indicators.iter().map(|i| i.tail).fold(0.0, f64::max);
            let Some(next) = refine::next(&self.field.mesh, &indicators) else {
                self.iterate(CONVERGED)?;
                return Ok(true);
            };
            let most = self.task.settings.most_elements.min(3000);
            if next.elements.len() > most {
                return Err(Error::Unresolved { elements: next.elements.len(), x: next.elements[0].left });
            }
            self.field = transfer(&self.field, &next, &mut self.library)?;
        }
        Ok(false)
    }

    fn iterate(&mut self, wanted: f64) -> Result<()> {
        let mut last = f64::INFINITY;
        let mesh = self.field.mesh.clone();
        for step in 0..STEPS {
            let next = self.solve(&mesh, &Perturbation::NONE)?;
            let change = self.change(&next);
            if !change.is_finite() {
                break;
            }
            self.field = next;
            // At the level of rounding nothing shrinks any more.
            if change <= wanted || (change < 1e-8 && change > 0.3 * last) {
                return Ok(());
            }
            if step >= 4 && change > last && change > 1e-3 {
                break;
            }
            last = change;
        }
        Err(Error::NoSolution { tried: "Newton's iteration from a candidate".into() })
    }

    /// Relative change of functions and eigenvalues.
    fn change(&self, next: &Field) -> f64 {
        let difference = next.minus(&self.field);
        let states = next.layout.orders().iter().enumerate().filter(|(_, m)| **m > 0);
        let size = states.clone().map(|(i, _)| next.size(i, 0) / self.scale[i]).fold(0.0, f64::max);
        let moved = states.map(|(i, _)| difference.size(i, 0) / self.scale[i]).fold(0.0, f64::max);
        let norm = |c: &[f64]| c[self.block.first()..].iter().map(|v| v * v).sum::<f64>().sqrt();
        let floor = 1e-3 * self.task.pencil.size;
        (moved / size).max(norm(&difference.constants) / norm(&next.constants).max(floor))
    }

    /// One Newton step, on any mesh.
    fn solve(&mut self, mesh: &Mesh, nudge: &Perturbation) -> Result<Field> {
        self.passes += 1;
        let linear = Linearisation::new(self.block, &self.field, &self.field);
        let library = std::mem::replace(&mut self.library, Library::new(0));
        let settings = self.task.settings;
        let mut solver = Solver { model: &linear, settings, scale: self.scale.clone(), library, pass: self.passes };
        let solved = solver.solve_once(mesh, Some(&self.field), nudge);
        self.library = solver.library;
        let solved = solved?;
        if !solved.free.is_empty() {
            return Err(Error::NoSolution { tried: "the linearised problem of a mode is singular".into() });
        }
        self.condition = solved.condition;
        Ok(solved.field)
    }

    /// The answer with its companions, one step each from the converged field.
    fn finish(mut self, resolved: bool) -> Result<Solution> {
        let passes = self.passes;
        let about = self.field.clone();
        let mesh = about.mesh.clone();
        let base = self.solve(&mesh, &Perturbation::NONE)?;
        self.field = base.clone();
        let between = self.solve(&mesh.enriched(ENRICH / 2), &Perturbation::NONE)?;
        let answer = self.solve(&mesh.enriched(ENRICH), &Perturbation::NONE)?;
        let condition = self.condition;
        let mut nudged = Vec::new();
        for pattern in 0..Perturbation::PATTERNS {
            nudged.push(self.solve(&mesh, &Perturbation::nudge(pattern))?);
        }
        let companions = Companions { coarser: vec![base, between, about], nudged };
        Ok(Solution { field: answer, condition, passes, resolved, companions })
    }
}
