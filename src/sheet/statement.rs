//! The problem as understood, for people.

use crate::unit::Unit;

/// A named line of text.
#[derive(Debug, Clone, PartialEq)]
pub struct Line {
    /// Its name in the sheet.
    pub name: String,
    /// What it says.
    pub text: String,
    /// How it was understood.
    pub remark: String,
}

/// A datum or named expression.
#[derive(Debug, Clone, PartialEq)]
pub struct Datum {
    /// Its name.
    pub name: String,
    /// As written.
    pub text: String,
    /// Value of a plain datum, in SI, with its unit.
    pub value: Option<(f64, Unit)>,
    /// What it is: datum, varies along the span, expression of the unknowns, result.
    pub remark: String,
}

/// Something that stands at a point of the span.
#[derive(Debug, Clone, PartialEq)]
pub struct Feature {
    /// Coordinate, SI.
    pub x: f64,
    /// Name of the condition, or empty.
    pub label: String,
    /// What it is.
    pub role: Role,
}

/// What stands at a point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Role {
    /// A condition on values there.
    Condition,
    /// A prescribed jump.
    Jump,
    /// A continuity given up.
    Release,
    /// A break of the data.
    Break,
}

/// The problem as understood.
#[derive(Debug, Clone, PartialEq)]
pub struct Statement {
    /// Name of the coordinate.
    pub coordinate: String,
    /// Unit to print it in.
    pub coordinate_unit: Unit,
    /// Ends, SI.
    pub span: [f64; 2],
    /// Unknowns: name, unit, order.
    pub unknowns: Vec<Line>,
    /// Equations as written; the remark says what is carried.
    pub equations: Vec<Line>,
    /// Conditions as written.
    pub conditions: Vec<Line>,
    /// Data in the order of the sheet.
    pub data: Vec<Datum>,
    /// What stands where.
    pub features: Vec<Feature>,
    /// Order of the problem.
    pub order: usize,
    /// Unknown constants.
    pub constants: usize,
    /// Continuities given up.
    pub releases: usize,
    /// Names of all unknown functions that the solver carries, fluxes included.
    pub carried: Vec<String>,
    /// Whether the problem is linear.
    pub linear: bool,
}
