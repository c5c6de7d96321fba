//! Results for programs.

use super::outcome::{
    CaseResult, Check, Entry, Envelope, Feature, FeatureKind, MeshRow, ModeNumber, ModeResult, Outcome, PathResult,
    PathRow, Peak, Quantity, Status,
};
use crate::sheet::Fault;
use serde::Serialize;

#[derive(Serialize)]
struct Document<'a> {
    program: &'static str,
    version: &'a str,
    status: &'static str,
    #[serde(skip_serializing_if = "Option::is_none")]
    reason: Option<&'a str>,
    title: &'a str,
    sheet: &'a str,
    sha256: &'a str,
    relative: f64,
    quantities: Vec<Number<'a>>,
    checks: Vec<Evidence<'a>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    problem: Option<Problem<'a>>,
    mesh: Mesh,
    warnings: &'a [String],
    #[serde(skip_serializing_if = "Option::is_none")]
    path: Option<PathLine<'a>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    modes: Option<Vec<ModeLine<'a>>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    count_checked: Option<Option<bool>>,
    #[serde(skip_serializing_if = "Option::is_none")]
    count_region: Option<[Option<f64>; 4]>,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    cases: Vec<CaseLine<'a>>,
    #[serde(skip_serializing_if = "Vec::is_empty")]
    envelopes: Vec<EnvelopeLine<'a>>,
}

/// The asked numbers along a parameter.
#[derive(Serialize)]
struct PathLine<'a> {
    parameter: &'a str,
    unit: &'a str,
    verdict: &'a str,
    points: Vec<PathRowLine<'a>>,
    folds: Vec<PathRowLine<'a>>,
}

#[derive(Serialize)]
struct PathRowLine<'a> {
    parameter: Number<'a>,
    /// Folds passed before.
    branch: usize,
    quantities: Vec<Number<'a>>,
}

#[derive(Serialize)]
struct ModeLine<'a> {
    index: usize,
    mode: usize,
    multiplicity: usize,
    parameter: ComplexNumber<'a>,
    quantities: Vec<ComplexNumber<'a>>,
}

#[derive(Serialize)]
struct ComplexNumber<'a> {
    #[serde(flatten)]
    number: Number<'a>,
    imaginary: f64,
}

fn complex_number(number_of: &ModeNumber) -> ComplexNumber<'_> {
    let imaginary = if number_of.imaginary.is_finite() { number_of.imaginary } else { 0.0 };
    ComplexNumber { number: number(&number_of.quantity), imaginary }
}

fn mode(m: &ModeResult) -> ModeLine<'_> {
    let ModeResult { index, mode, multiplicity, parameter, quantities } = m;
    ModeLine {
        index: *index,
        mode: *mode,
        multiplicity: *multiplicity,
        parameter: complex_number(parameter),
        quantities: quantities.iter().map(complex_number).collect(),
    }
}

#[derive(Serialize)]
struct CaseLine<'a> {
    name: &'a str,
    status: &'static str,
    #[serde(skip_serializing_if = "Option::is_none")]
    reason: Option<&'a str>,
    changed: Vec<Line<'a>>,
    quantities: Vec<Number<'a>>,
}

/// What a curve reaches over all cases.
#[derive(Serialize)]
struct EnvelopeLine<'a> {
    name: &'a str,
    unit: &'a str,
    cases: &'a [String],
    largest: Option<PeakLine<'a>>,
    smallest: Option<PeakLine<'a>>,
}

#[derive(Serialize)]
struct PeakLine<'a> {
    value: f64,
    error: f64,
    at: f64,
    case: &'a str,
}

#[derive(Serialize)]
struct Number<'a> {
    name: &'a str,
    value: Option<f64>,
    error: Option<f64>,
    unit: &'a str,
    formula: &'a str,
    met: bool,
    #[serde(skip_serializing_if = "Option::is_none")]
    reason: Option<&'a str>,
    #[serde(skip_serializing_if = "<[String]>::is_empty")]
    remarks: &'a [String],
}

#[derive(Serialize)]
struct Evidence<'a> {
    name: &'a str,
    result: &'a str,
    passed: Option<bool>,
}

#[derive(Serialize)]
struct Line<'a> {
    name: &'a str,
    text: &'a str,
    #[serde(skip_serializing_if = "str::is_empty")]
    remark: &'a str,
}

#[derive(Serialize)]
struct Point<'a> {
    x: f64,
    kind: &'static str,
    #[serde(skip_serializing_if = "str::is_empty")]
    label: &'a str,
}

#[derive(Serialize)]
struct Problem<'a> {
    coordinate: &'a str,
    unit: &'a str,
    span: [f64; 2],
    unknowns: Vec<Line<'a>>,
    equations: Vec<Line<'a>>,
    conditions: Vec<Line<'a>>,
    data: Vec<Line<'a>>,
    points: Vec<Point<'a>>,
}

#[derive(Serialize)]
struct Mesh {
    elements: usize,
    passes: usize,
    nodes: Vec<usize>,
    ends: Vec<f64>,
}

fn number(q: &Quantity) -> Number<'_> {
    let value = q.value.filter(|v| v.is_finite());
    Number {
        name: &q.name,
        value,
        error: value.map(|_| q.error).filter(|e| e.is_finite()),
        unit: &q.unit,
        formula: &q.formula,
        met: q.met,
        reason: q.reason.as_deref(),
        remarks: &q.remarks,
    }
}

fn lines(entries: &[Entry]) -> Vec<Line<'_>> {
    entries.iter().map(|e| Line { name: &e.name, text: &e.text, remark: &e.remark }).collect()
}

fn point(f: &Feature) -> Point<'_> {
    let kind = match f.kind {
        FeatureKind::Condition => "condition",
        FeatureKind::Jump => "jump",
        FeatureKind::Release => "release",
        FeatureKind::Break => "break",
    };
    Point { x: f.x, kind, label: &f.label }
}

fn mesh(outcome: &Outcome) -> Mesh {
    let rows = &outcome.mesh;
    let mut ends: Vec<f64> = rows.iter().map(|r: &MeshRow| r.from).collect();
    ends.extend(rows.last().map(|r| r.to));
    Mesh { elements: rows.len(), passes: outcome.passes, nodes: rows.iter().map(|r| r.nodes).collect(), ends }
}

fn problem_of(outcome: &Outcome) -> Problem<'_> {
    Problem {
        coordinate: &outcome.coordinate,
        unit: &outcome.coordinate_unit,
        span: [outcome.span.0, outcome.span.1],
        unknowns: lines(&outcome.unknowns),
        equations: lines(&outcome.equations),
        conditions: lines(&outcome.conditions),
        data: lines(&outcome.data),
        points: outcome.features.iter().map(point).collect(),
    }
}

fn status(status: Status) -> &'static str {
    match status {
        Status::Solved => "solved",
        Status::Inaccurate => "inaccurate",
        Status::Failed => "failed",
    }
}

fn path(p: &PathResult) -> PathLine<'_> {
    PathLine {
        parameter: &p.parameter,
        unit: &p.unit,
        verdict: &p.verdict,
        points: p.points.iter().map(path_row).collect(),
        folds: p.folds.iter().map(path_row).collect(),
    }
}

fn path_row(r: &PathRow) -> PathRowLine<'_> {
    PathRowLine {
        parameter: number(&r.parameter),
        branch: r.branch,
        quantities: r.quantities.iter().map(number).collect(),
    }
}

fn case(c: &CaseResult) -> CaseLine<'_> {
    CaseLine {
        name: &c.name,
        status: status(c.status),
        reason: c.reason.as_deref(),
        changed: lines(&c.changed),
        quantities: c.quantities.iter().map(number).collect(),
    }
}

fn envelope(e: &Envelope) -> EnvelopeLine<'_> {
    EnvelopeLine {
        name: &e.name,
        unit: &e.unit,
        cases: &e.cases,
        largest: peak_line(&e.high),
        smallest: peak_line(&e.low),
    }
}

fn peak_line(peak: &Option<Peak>) -> Option<PeakLine<'_>> {
    let Peak { value, error, x, case } = peak.as_ref()?;
    (value.is_finite() && error.is_finite()).then_some(PeakLine { value: *value, error: *error, at: *x, case })
}

/// The record as JSON; with `problem` the statement of the problem is included. Never holds a number that is not
/// finite.
pub fn document(outcome: &Outcome, sha256: &str, version: &str, problem: bool) -> String {
    let problem = problem.then(|| problem_of(outcome));
    let evidence =
        outcome.checks.iter().map(|Check { name, result, passed, .. }| Evidence { name, result, passed: *passed });
    let checks = evidence.collect();
    let eigen = !outcome.modes.is_empty();
    let document = Document {
        program: "spanwise",
        version,
        status: status(outcome.status),
        reason: outcome.reason.as_deref(),
        title: &outcome.title,
        sheet: &outcome.source,
        sha256,
        relative: outcome.relative,
        quantities: if eigen { Vec::new() } else { outcome.quantities.iter().map(number).collect() },
        checks,
        problem,
        mesh: mesh(outcome),
        warnings: &outcome.warnings,
        path: outcome.path.as_ref().map(path),
        modes: eigen.then(|| outcome.modes.iter().map(mode).collect()),
        count_checked: eigen.then_some(outcome.count_checked),
        count_region: eigen.then(|| outcome.count_region.map(|v| Some(v).filter(|v| v.is_finite()))),
        cases: outcome.cases.iter().map(case).collect(),
        envelopes: outcome.envelopes.iter().map(envelope).collect(),
    };
    pretty(&document)
}

/// The problem as understood, nothing solved.
pub fn statement(outcome: &Outcome, sha256: &str, version: &str) -> String {
    #[derive(Serialize)]
    struct Understood<'a> {
        program: &'static str,
        version: &'a str,
        status: &'static str,
        title: &'a str,
        sheet: &'a str,
        sha256: &'a str,
        problem: Problem<'a>,
        warnings: &'a [String],
    }
    pretty(&Understood {
        program: "spanwise",
        version,
        status: "checked",
        title: &outcome.title,
        sheet: &outcome.source,
        sha256,
        problem: problem_of(outcome),
        warnings: &outcome.warnings,
    })
}

#[derive(Serialize)]
struct FaultLine<'a> {
    file: &'a str,
    line: usize,
    column: usize,
    code: &'a str,
    message: &'a str,
    #[serde(skip_serializing_if = "Option::is_none")]
    hint: Option<&'a str>,
}

#[derive(Serialize)]
struct FaultList<'a> {
    status: &'static str,
    reason: &'static str,
    quantities: [(); 0],
    faults: Vec<FaultLine<'a>>,
    warnings: [(); 0],
}

/// Faults of a sheet as JSON.
pub fn faults(file: &str, faults: &[Fault]) -> String {
    let faults = faults
        .iter()
        .map(|f| {
            let Fault { line, column, code, message, hint, .. } = f;
            FaultLine { file, line: *line, column: *column, code, message, hint: hint.as_deref() }
        })
        .collect();
    pretty(&FaultList { status: "failed", reason: "the sheet has faults", quantities: [], faults, warnings: [] })
}

fn pretty(document: &impl Serialize) -> String {
    // Plain data with text keys always serialise.
    let mut text = serde_json::to_string_pretty(document).unwrap_or_default();
    text.push('\n');
    text
}
