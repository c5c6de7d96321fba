//! Errors of the numerical engine. Faults of a sheet have a type of their own, with a place in the file
//! (`sheet::Fault`).

use thiserror::Error;

/// Why a problem could not be solved.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum Error {
    /// An argument of a public function is outside its range.
    #[error("{what}: {value} is outside {range}")]
    Argument {
        /// Name of the argument.
        what: &'static str,
        /// The value given, as text.
        value: String,
        /// The range allowed.
        range: &'static str,
    },
    /// The number of conditions does not fit the order of the problem.
    #[error("{found} conditions given, {needed} needed")]
    ConditionCount {
        /// Conditions given.
        found: usize,
        /// Conditions needed: order + constants + releases.
        needed: usize,
    },
    /// Equation or condition gave a value that is not finite.
    #[error("{what} is not finite at x = {x}")]
    NotFinite {
        /// Which equation, condition or quantity.
        what: String,
        /// Where along the span.
        x: f64,
    },
    /// The problem has no unique solution; the text explains which motion is free and what contradicts.
    #[error("{0}")]
    Singular(String),
    /// The factor of the highest derivative vanishes: the equations are singular there.
    #[error("the factor of the highest derivative vanishes at x = {x}: singular points are not covered")]
    SingularPoint {
        /// Where.
        x: f64,
    },
    /// No smooth solution at a singular end of the span.
    #[error(
        "no smooth solution at the singular end x = {x}: a condition there contradicts what the equation itself forces"
    )]
    SingularEnd {
        /// Where.
        x: f64,
    },
    /// No solution was found.
    #[error("no solution found: {tried}")]
    NoSolution {
        /// What was tried and how far it got.
        tried: String,
    },
    /// The problem is outside what the solver covers.
    #[error("{0}")]
    Unsupported(String),
    /// The mesh would need more elements than allowed.
    #[error("{elements} elements do not resolve the solution near x = {x}")]
    Unresolved {
        /// Elements reached.
        elements: usize,
        /// Where the worst element lies.
        x: f64,
    },
    /// An eigenproblem that makes no sense or is asked for what it does not have.
    #[error(transparent)]
    Eigen(#[from] Eigen),
    /// Interrupted from outside or out of time.
    #[error("interrupted")]
    Interrupted,
}

/// Why an eigenproblem was refused.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum Eigen {
    /// The eigenparameter stands in no equation and no condition.
    #[error("the eigenparameter appears in no equation and no condition")]
    Absent,
    /// A term without any unknown.
    #[error("{what} has a term without any unknown: an eigenproblem is homogeneous")]
    Inhomogeneous {
        /// Equation or condition.
        what: String,
    },
    /// Not linear in the unknowns for a fixed parameter.
    #[error("{what} is not linear in the unknowns: an eigenproblem is")]
    Nonlinear {
        /// Equation or condition.
        what: String,
    },
    /// Not a polynomial of degree two at most in the parameter.
    #[error("{what} is no polynomial of degree two at most in the eigenparameter")]
    Degree {
        /// Equation or condition.
        what: String,
    },
    /// Nothing but constants is unknown.
    #[error("an eigenproblem needs an unknown function of order one or more")]
    NoFunction,
    /// The homogeneous problem has a solution whatever the parameter is.
    #[error("every number is an eigenvalue: {why}")]
    Everything {
        /// Which motion is free.
        why: String,
    },
    /// Fewer eigenvalues exist than were asked for.
    #[error("{asked} eigenvalues asked, but only {found} exist")]
    TooFew {
        /// How many were asked for.
        asked: usize,
        /// How many there are.
        found: usize,
    },
    /// There is no lowest eigenvalue.
    #[error(
        "the spectrum has no lowest eigenvalue (finer meshes show ever lower ones, below {seen:.3e}): ask near a number"
    )]
    Unbounded {
        /// The lowest one seen.
        seen: f64,
    },
}

/// Result of the engine.
pub type Result<T> = std::result::Result<T, Error>;
