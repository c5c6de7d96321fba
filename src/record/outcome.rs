//! Everything a record shows, ready for print: plain data in the user's units.

/// How the solve ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Status {
    /// Every asked number met its accuracy.
    Solved,
    /// Solved, but some number did not meet the accuracy asked.
    Inaccurate,
    /// No solution; the reason is in [`Outcome::reason`].
    Failed,
}

/// One asked number.
#[derive(Debug, Clone, PartialEq)]
pub struct Quantity {
    /// Its label in the sheet.
    pub name: String,
    /// Its formula as written.
    pub formula: String,
    /// Value in `unit`, or `None` with a reason.
    pub value: Option<f64>,
    /// Bar in `unit`.
    pub error: f64,
    /// Unit as printed; `1` for pure numbers.
    pub unit: String,
    /// Why there is no value, or why the accuracy was missed.
    pub reason: Option<String>,
    /// Remarks: side of a break, ties.
    pub remarks: Vec<String>,
    /// Whether the accuracy asked was met.
    pub met: bool,
}

/// One piece of evidence.
#[derive(Debug, Clone, PartialEq)]
pub struct Check {
    /// What was checked, in plain words.
    pub name: String,
    /// What came out.
    pub result: String,
    /// What that means.
    pub meaning: String,
    /// Passed, failed, or for information only.
    pub passed: Option<bool>,
}

/// A named line of text: an equation, a condition, a datum.
#[derive(Debug, Clone, PartialEq)]
pub struct Entry {
    /// Its name in the sheet.
    pub name: String,
    /// What it says.
    pub text: String,
    /// Remark: SI value, order, how it is carried.
    pub remark: String,
}

/// A quantity along the span, piece by piece (no line is drawn across a break at which it jumps).
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    /// Name.
    pub name: String,
    /// Unit.
    pub unit: String,
    /// Polylines of (x, value) in the units printed.
    pub pieces: Vec<Vec<(f64, f64)>>,
    /// Marked points: largest, smallest, asked places.
    pub marks: Vec<Mark>,
}

/// A marked point of a curve.
#[derive(Debug, Clone, PartialEq)]
pub struct Mark {
    /// Coordinate.
    pub x: f64,
    /// Value.
    pub value: f64,
    /// Label.
    pub label: String,
}

/// Something that stands at a point of the span: a support, an end condition, a jump, a break in the data.
#[derive(Debug, Clone, PartialEq)]
pub struct Feature {
    /// Coordinate.
    pub x: f64,
    /// Label (name of the condition, or "break").
    pub label: String,
    /// What kind.
    pub kind: FeatureKind,
}

/// Kinds of features.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum FeatureKind {
    /// A condition on values at this point.
    Condition,
    /// A prescribed jump: point load, point source.
    Jump,
    /// A continuity given up: hinge, support, contact.
    Release,
    /// A break of the data only.
    Break,
}

/// One element of the mesh with the decay of its coefficients.
#[derive(Debug, Clone, PartialEq)]
pub struct MeshRow {
    /// Left end.
    pub from: f64,
    /// Right end.
    pub to: f64,
    /// Nodes.
    pub nodes: usize,
    /// For each unknown: sizes of the Legendre coefficients of its highest derivative, relative to the
    /// largest on the span.
    pub decay: Vec<Vec<f64>>,
}

/// Results of one load case.
#[derive(Debug, Clone, PartialEq)]
pub struct CaseResult {
    /// Its name.
    pub name: String,
    /// Data changed, as written.
    pub changed: Vec<Entry>,
    /// How it ended.
    pub status: Status,
    /// Why it failed.
    pub reason: Option<String>,
    /// Asked numbers.
    pub quantities: Vec<Quantity>,
    /// Evidence.
    pub checks: Vec<Check>,
}

/// The largest or smallest value of an expression over the span and all cases.
#[derive(Debug, Clone, PartialEq)]
pub struct Peak {
    /// The value.
    pub value: f64,
    /// Its bar.
    pub error: f64,
    /// Where.
    pub x: f64,
    /// Name of the case that governs; `base` for the sheet as it stands.
    pub case: String,
}

/// Smallest and largest value at one place, each with the index of the case that governs.
#[derive(Debug, Clone, PartialEq)]
pub struct Extent {
    /// Coordinate.
    pub x: f64,
    /// Smallest value, index of its case.
    pub low: (f64, usize),
    /// Largest value, index of its case.
    pub high: (f64, usize),
}

/// What an expression reaches along the span over all cases.
#[derive(Debug, Clone, PartialEq)]
pub struct Envelope {
    /// The expression.
    pub name: String,
    /// Its unit.
    pub unit: String,
    /// Names of the cases in it: `base` first.
    pub cases: Vec<String>,
    /// Place by place; at a break the left, then the right limit.
    pub rows: Vec<Extent>,
    /// The smallest value of all.
    pub low: Option<Peak>,
    /// The largest value of all.
    pub high: Option<Peak>,
}

/// The asked numbers at a point or fold of a path.
#[derive(Debug, Clone, PartialEq)]
pub struct PathRow {
    /// Value of the parameter.
    pub parameter: Quantity,
    /// Folds passed before.
    pub branch: usize,
    /// Asked numbers.
    pub quantities: Vec<Quantity>,
}

/// A path.
#[derive(Debug, Clone, PartialEq)]
pub struct PathResult {
    /// Name of the parameter.
    pub parameter: String,
    /// Its unit.
    pub unit: String,
    /// At the asked values of the parameter, in the order of the path.
    pub points: Vec<PathRow>,
    /// At its folds.
    pub folds: Vec<PathRow>,
    /// All steps: relative length of the path so far, parameter, elements.
    pub steps: Vec<(f64, f64, usize)>,
    /// How it ended.
    pub verdict: String,
}

/// A number of a mode.
#[derive(Debug, Clone, PartialEq)]
pub struct ModeNumber {
    /// Its real part.
    pub quantity: Quantity,
    /// Its imaginary part, in the same unit; the bar holds for the complex number.
    pub imaginary: f64,
}

/// An eigenvalue and the numbers asked of its mode.
#[derive(Debug, Clone, PartialEq)]
pub struct ModeResult {
    /// Position among all that were asked for, from 0.
    pub index: usize,
    /// The same from 1.
    pub mode: usize,
    /// How many cannot be told from it, itself included.
    pub multiplicity: usize,
    /// The eigenvalue.
    pub parameter: ModeNumber,
    /// Asked numbers.
    pub quantities: Vec<ModeNumber>,
}

/// Everything a record shows.
#[derive(Debug, Clone, PartialEq)]
pub struct Outcome {
    /// Title of the sheet.
    pub title: String,
    /// Note of the sheet.
    pub note: Option<String>,
    /// Name of the sheet's file as given on the command line (`-` for standard input).
    pub source: String,
    /// The sheet's text.
    pub sheet: String,
    /// How it ended.
    pub status: Status,
    /// Why it failed.
    pub reason: Option<String>,
    /// Name of the coordinate.
    pub coordinate: String,
    /// Its unit in tables and plots.
    pub coordinate_unit: String,
    /// Ends of the span, in that unit.
    pub span: (f64, f64),
    /// Unknowns, each with unit and order.
    pub unknowns: Vec<Entry>,
    /// Equations as written, the remark says what is carried.
    pub equations: Vec<Entry>,
    /// Conditions as written.
    pub conditions: Vec<Entry>,
    /// Data and named expressions as written, the remark shows the value found.
    pub data: Vec<Entry>,
    /// Asked numbers.
    pub quantities: Vec<Quantity>,
    /// Evidence.
    pub checks: Vec<Check>,
    /// Curves: unknowns and asked expressions.
    pub curves: Vec<Curve>,
    /// Values along the span: the coordinate, then one value per curve. At a break there are two rows, the left and
    /// then the right limit.
    pub stations: Vec<Vec<f64>>,
    /// Residual along the span, relative.
    pub residual: Vec<Curve>,
    /// Supports, jumps, breaks.
    pub features: Vec<Feature>,
    /// The path, where a parameter was followed.
    pub path: Option<PathResult>,
    /// Load cases.
    pub cases: Vec<CaseResult>,
    /// What each curve reaches over base and cases.
    pub envelopes: Vec<Envelope>,
    /// Modes of an eigenproblem.
    pub modes: Vec<ModeResult>,
    /// Whether an independent count of the eigenvalues agrees; `None` where none was made.
    pub count_checked: Option<bool>,
    /// Region counted: real parts from, to; imaginary parts from, to. Not finite where unbounded or not counted.
    pub count_region: [f64; 4],
    /// Names of the unknowns of the decay columns (carried fluxes included).
    pub decay_names: Vec<String>,
    /// The mesh.
    pub mesh: Vec<MeshRow>,
    /// Passes of the mesh adaptation.
    pub passes: usize,
    /// Warnings.
    pub warnings: Vec<String>,
    /// Relative accuracy asked.
    pub relative: f64,
}
