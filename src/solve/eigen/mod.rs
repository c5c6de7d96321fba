//! Eigenproblems: candidates from the dense pencil, each polished as a boundary-value problem of its own.

mod candidates;
mod count;
mod modes;
mod oscillation;
mod polish;

use super::solver::Solver;
use super::{Settings, Solution};
use crate::adapt::exponents;
use crate::error::{Eigen, Error, Result};
use crate::evidence::singular;
use crate::field::Field;
use crate::linear::{Library, Perturbation};
use crate::model::{Held, Model};
use crate::spectrum::pencil::Pencil;
use num_complex::Complex64;

/// Which eigenvalues are wanted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Ask {
    /// The n lowest, by real part, multiple ones as often as they are.
    Lowest(usize),
    /// All with real part between two numbers.
    Between(f64, f64),
    /// The n nearest to a number.
    Near(Complex64, usize),
    /// The n with the largest real part.
    LargestReal(usize),
    /// The n with the largest imaginary part.
    LargestImaginary(usize),
    /// The n smallest conjugate pairs; the one with positive imaginary part stands for the pair.
    Pairs(usize),
}

/// What was found.
#[derive(Debug, Clone)]
pub struct Spectrum {
    /// The wanted eigenvalues in the order asked.
    pub modes: Vec<Mode>,
    /// Candidates that turned out to be none, and why.
    pub discarded: Vec<Discarded>,
    /// How it was made sure that none is missing.
    pub count: Count,
}

/// One eigenvalue with its eigenfunction.
#[derive(Debug, Clone)]
pub struct Mode {
    /// Position in the list asked, from 0.
    pub index: usize,
    /// Number of eigenvalues that cannot be told from this one, itself included.
    pub multiplicity: usize,
    /// The eigenvalue.
    pub value: Complex64,
    /// Bound meant to hold: |true - value| <= error.
    pub error: f64,
    /// Whether the solution is complex, and its layout doubled: unknown functions 2i and 2i + 1 are the real
    /// and the imaginary part of the i-th, constants likewise, the last two being those of the eigenvalue. A real
    /// solution has the layout of the model, the eigenvalue being the last constant.
    pub complex: bool,
    /// The eigenfunction, of any size (see [`Mode::scaled`]), with all that error bars need.
    pub solution: Solution,
}

/// A candidate that was no eigenvalue.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Discarded {
    /// Its value.
    pub value: Complex64,
    /// What gave it away.
    pub reason: Reason,
}

/// Why a candidate was discarded.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum Reason {
    /// Another mesh gives another value.
    Drift {
        /// What the coarser mesh gave.
        before: Complex64,
    },
    /// The boundary-value problem started from it has no solution near by.
    NoSolution,
    /// The boundary-value problem started from it led to another eigenvalue.
    Moved {
        /// Where to.
        to: Complex64,
    },
    /// No mesh allowed resolves its function.
    Unresolved,
}

/// How it was made sure that none is missing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Count {
    /// Whether an independent count agrees; `None` if none was made.
    pub checked: Option<bool>,
    /// Number of modes found in the region counted.
    pub found: usize,
    /// Number that the count gives.
    pub counted: Option<usize>,
    /// Way of counting.
    pub method: Method,
    /// Region of the count: real parts from, to; imaginary parts from, to. Infinite where unbounded.
    pub region: [f64; 4],
}

/// Ways of counting.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Method {
    /// None.
    None,
    /// Oscillations of the solution that meets the left condition (Pruefer's angle).
    Oscillation,
    /// Winding number of the determinant round the region (argument principle).
    Argument,
}

/// Finds eigenvalues and eigenfunctions of a model whose last unknown constant is the eigenparameter lambda, which is
/// homogeneous and linear in everything else, and a polynomial of degree two at most in lambda:
/// (A_0 + lambda A_1 + lambda^2 A_2)(u, p) = 0 in equations and conditions. Conditions number
/// order + (constants - 1) + releases.
///
/// # Errors
/// [`Error::Eigen`] when the model is no such problem or is asked for what it does not have; those of
/// [`super::boundary`].
///
/// # Example
/// ```
/// use spanwise::{model::Side, problem::Problem, solve};
///
/// let mut string = Problem::new(0.0, 1.0);
/// let u = string.unknown("u", 2);
/// let lambda = string.constant("lambda");
/// string.equation("vibration", move |at| at.d(u, 2) + at.constant(lambda) * at.d(u, 0));
/// string.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(u, 0));
/// string.condition("right", &[(1.0, Side::Left)], move |v| v[0].d(u, 0));
/// let spectrum = solve::eigen(&string.build()?, solve::Ask::Lowest(3), &Default::default())?;
/// for (n, mode) in (1..).zip(&spectrum.modes) {
///     let exact = (f64::from(n) * std::f64::consts::PI).powi(2);
///     assert!((mode.value.re - exact).abs() <= mode.error && mode.error < 1e-10 * exact);
/// }
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub fn eigen(model: &dyn Model, ask: Ask, settings: &Settings<'_>) -> Result<Spectrum> {
    run(model, false, ask, settings)
}

/// The same for complex coefficients, given as a doubled real model: unknown functions 2i and 2i + 1 are real and
/// imaginary part of the i-th, likewise equations, conditions, releases and the constants before the last; the parameter is
/// one real constant, the last. Eigenvalues are complex.
///
/// # Errors
/// As [`eigen()`].
pub fn eigen_complex(model: &dyn Model, ask: Ask, settings: &Settings<'_>) -> Result<Spectrum> {
    run(model, true, ask, settings)
}

/// What all steps share.
struct Task<'a> {
    pencil: Pencil<'a>,
    settings: &'a Settings<'a>,
    ask: Ask,
    /// One size per unknown of the pencil.
    scale: Vec<f64>,
    /// Singular ends.
    open: [bool; 2],
}

fn run(model: &dyn Model, complex: bool, ask: Ask, settings: &Settings<'_>) -> Result<Spectrum> {
    super::boundary::check(model, settings)?;
    check_ask(ask)?;
    let pencil = Pencil::new(model, complex)?;
    let held = Held::new(model, vec![pencil.size], true);
    let all = exponents::scales(&held)?;
    let open = exponents::singular_ends(&held, &all)?;
    let scale = all.into_iter().step_by(if complex { 2 } else { 1 }).collect();
    let task = Task { pencil, settings, ask, scale, open };
    task.refuse_everything()?;
    let first = task.spectrum(1)?;
    if first.count.checked != Some(false) {
        return Ok(first);
    }
    // The count disagrees: once more on a mesh twice as fine.
    match task.spectrum(2) {
        Ok(second) if second.count.checked != Some(false) || second.modes.len() >= first.modes.len() => Ok(second),
        Err(Error::Interrupted) => Err(Error::Interrupted),
        _ => Ok(first),
    }
}

impl Task<'_> {
    /// Refuses a problem that has a solution whatever the parameter is.
    fn refuse_everything(&self) -> Result<()> {
        let mut why = String::new();
        for factor in [0.7137, -0.3851, 1.9173] {
            let parameter = factor * self.pencil.size;
            let held = Held::new(self.pencil.model, vec![parameter], true);
            let mesh = self.mesh(parameter.abs(), 0)?;
            let depth = self.pencil.layout.orders().iter().copied().max().unwrap_or(0);
            let (settings, scale) = (self.settings, self.doubled_scale());
            let mut solver = Solver { model: &held, settings, scale, library: Library::new(depth), pass: 0 };
            let pass = solver.solve_once(&mesh, None, &Perturbation::NONE)?;
            if pass.free.is_empty() {
                return Ok(());
            }
            why = singular::explain(&held, &pass.free, &pass.contradictions);
        }
        Err(Eigen::Everything { why }.into())
    }

    /// Search, modes and count; `finer` multiplies the nodes of the search.
    fn spectrum(&self, finer: usize) -> Result<Spectrum> {
        let found = self.candidates(finer)?;
        let beyond = found.beyond.clone();
        let mut spectrum = self.modes(found)?;
        spectrum.count = self.count(&spectrum.modes, &beyond)?;
        Ok(spectrum)
    }

    /// One size per unknown of the model.
    fn doubled_scale(&self) -> Vec<f64> {
        let copies = if self.pencil.complex { 2 } else { 1 };
        self.scale.iter().flat_map(|s| std::iter::repeat_n(*s, copies)).collect()
    }
}

fn check_ask(ask: Ask) -> Result<()> {
    let (count, numbers) = match ask {
        Ask::Lowest(n) | Ask::LargestReal(n) | Ask::LargestImaginary(n) | Ask::Pairs(n) => (n, [0.0, 1.0]),
        Ask::Between(a, b) => (1, [a, b]),
        Ask::Near(z, n) => (n, [z.re, z.im]),
    };
    if count == 0 {
        return Err(Error::Argument { what: "number of eigenvalues", value: "0".into(), range: "one or more" });
    }
    let ascending = !matches!(ask, Ask::Between(a, b) if a >= b);
    if !ascending || numbers.iter().any(|v| !v.is_finite()) {
        let value = format!("{numbers:?}");
        return Err(Error::Argument { what: "eigenvalues asked for", value, range: "finite and ascending" });
    }
    Ok(())
}

impl Ask {
    /// Whether eigenvalues of a real problem come as conjugate pairs, and not one by one.
    fn paired(&self) -> bool {
        !matches!(self, Ask::Near(z, _) if z.im != 0.0) && !matches!(self, Ask::LargestImaginary(_))
    }

    /// How many eigenvalues are wanted, as far as known beforehand.
    fn wanted(&self) -> Option<usize> {
        match *self {
            Ask::Lowest(n) | Ask::LargestReal(n) | Ask::LargestImaginary(n) | Ask::Near(_, n) => Some(n),
            Ask::Pairs(n) => Some(2 * n),
            Ask::Between(..) => None,
        }
    }

    /// What the wanted ones are sorted by, ascending.
    fn rank(&self, value: Complex64) -> f64 {
        match *self {
            Ask::Lowest(_) | Ask::Between(..) => value.re,
            Ask::Near(z, _) => (value - z).norm(),
            Ask::LargestReal(_) => -value.re,
            Ask::LargestImaginary(_) => -value.im,
            Ask::Pairs(_) => value.norm(),
        }
    }
}

impl Mode {
    /// The real and the imaginary part of a field of a complex mode, each in the layout of the problem.
    pub fn parts(field: &Field) -> [Field; 2] {
        modes::halves(field)
    }

    /// The mode divided by a number made from it, such as its largest value or the root of its energy, so that this
    /// number becomes 1; bars take part.
    ///
    /// # Errors
    /// Those of `number`; `NotFinite` where it is zero or not finite.
    pub fn scaled(&self, number: impl Fn(&Field) -> Result<Complex64>) -> Result<Mode> {
        modes::scaled(self, &number)
    }
}

fn too_few(asked: usize, found: usize) -> Error {
    Eigen::TooFew { asked, found }.into()
}
