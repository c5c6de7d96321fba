//! Eigenvalues and modes of a sheet, ready for print, and how it was made sure that none is missing.

use super::build::{self, Origin};
use super::outcome::{Check, ModeNumber, ModeResult, Outcome, Quantity, Status};
use crate::sheet::{EigenSheet, Sheet, short};
use crate::solve::{Ask, Method, Mode, Reason, Spectrum};
use crate::unit::Unit;
use num_complex::Complex64;

/// Most places of one mode that are listed.
const MOST_PLACES: usize = 12;
/// Most modes that are drawn.
const MOST_DRAWN: usize = 12;

/// A record of an eigen sheet.
pub fn solved(sheet: &Sheet, eigen: &EigenSheet, spectrum: &Spectrum, origin: Origin<'_>) -> Outcome {
    let mut outcome = match spectrum.modes.first() {
        Some(first) if !first.complex => build::solved(sheet, &first.solution, origin, false),
        _ => build::unsolved(sheet, origin),
    };
    // Evidence and numbers of one mode are not those of all.
    outcome.quantities.clear();
    outcome.checks.clear();
    outcome.curves.clear();
    outcome.stations.clear();
    outcome.residual.clear();
    let smallest = spectrum.modes.iter().map(|m| m.value.norm()).filter(|v| *v > 0.0);
    // A vanishing eigenvalue is judged against the smallest that does not vanish.
    let solid = |m: &&Mode| m.value.norm() > m.error;
    let floor = spectrum.modes.iter().filter(solid).map(|m| m.value.norm()).fold(f64::INFINITY, f64::min);
    let floor = if floor.is_finite() { floor } else { smallest.fold(1.0, f64::max) };
    for mode in &spectrum.modes {
        let result = result(sheet, eigen, mode, floor);
        let own = format!("mode {}: ", result.mode);
        let all = std::iter::once(&result.parameter).chain(&result.quantities);
        outcome.quantities.extend(all.map(|n| Quantity { name: own.clone() + &n.quantity.name, ..lined(n) }));
        outcome.modes.push(result);
    }
    for (mode, result) in spectrum.modes.iter().zip(&outcome.modes).take(MOST_DRAWN) {
        if let (false, Some(curve)) = (mode.complex, build::first_curve(sheet, &mode.solution)) {
            let name = format!("{}, mode {}", curve.name, result.mode);
            outcome.curves.push(super::outcome::Curve { name, ..curve });
        }
    }
    outcome.checks = vec![count(eigen, spectrum), discarded(eigen, spectrum), resolution(spectrum)];
    outcome.count_checked = spectrum.count.checked;
    outcome.count_region = spectrum.count.region.map(|v| from_si(&eigen.unit, v));
    let met = outcome.quantities.iter().all(|q| q.met) && spectrum.count.checked != Some(false);
    outcome.status = if met { Status::Solved } else { Status::Inaccurate };
    outcome.reason = (spectrum.count.checked == Some(false)).then(|| "the count of eigenvalues disagrees".to_owned());
    outcome
}

fn from_si(unit: &Unit, value: f64) -> f64 {
    if value.is_finite() { unit.from_si(value) } else { value }
}

/// For tables with one column of values: the imaginary part goes into a remark.
fn lined(number: &ModeNumber) -> Quantity {
    let mut line = number.quantity.clone();
    if number.imaginary != 0.0 {
        line.remarks.insert(0, format!("imaginary part {}", super::number::concise(number.imaginary, line.error)));
    }
    line
}

fn result(sheet: &Sheet, eigen: &EigenSheet, mode: &Mode, floor: f64) -> ModeResult {
    let unit = &eigen.unit;
    let scale = |v: f64| unit.from_si(v);
    let met = mode.error <= sheet.relative * mode.value.norm().max(floor);
    let mut remarks = Vec::new();
    if mode.multiplicity > 1 {
        remarks.push(format!("one of {} that cannot be told apart", mode.multiplicity));
    }
    let at = &sheet.statement.coordinate_unit;
    let [nodes, antinodes] = sheet.nodes_and_antinodes(mode);
    for (what, places) in [("zero", nodes), ("extremes", antinodes)] {
        if !places.is_empty() {
            let shown: Vec<String> = places.iter().take(MOST_PLACES).map(|x| short(at.from_si(*x))).collect();
            let more = if places.len() > MOST_PLACES { ", ..." } else { "" };
            let unit = if at.text == "1" { String::new() } else { format!(" {}", at.text) };
            remarks.push(format!("{what} at {}{more}{unit}", shown.join(", ")));
        }
    }
    let parameter = ModeNumber {
        quantity: Quantity {
            name: eigen.parameter.clone(),
            formula: eigen.parameter.clone(),
            value: Some(scale(mode.value.re)),
            error: scale(mode.error) + 0.5 * f64::EPSILON * scale(mode.value.norm()),
            unit: unit.text.clone(),
            reason: (!met).then(|| format!("the bar is above what relative = {:e} allows", sheet.relative)),
            remarks,
            met,
        },
        imaginary: scale(mode.value.im),
    };
    let quantities = if mode.complex { complex(sheet, mode) } else { real(sheet, mode) };
    ModeResult { index: mode.index, mode: mode.index + 1, multiplicity: mode.multiplicity, parameter, quantities }
}

fn real(sheet: &Sheet, mode: &Mode) -> Vec<ModeNumber> {
    let asked = sheet.evaluate(&mode.solution);
    asked.iter().map(|a| ModeNumber { quantity: build::asked_quantity(a, sheet.relative), imaginary: 0.0 }).collect()
}

fn complex(sheet: &Sheet, mode: &Mode) -> Vec<ModeNumber> {
    let values = sheet.complex_numbers(mode);
    let line = |(asked, value): (_, Option<(Complex64, f64)>)| {
        let (name, formula, unit): (&str, &str, &Unit) = asked;
        let reason = "only formulas of the eigenvalue and data are made for complex modes in this version";
        let met = value.is_some_and(|(z, e)| e <= sheet.relative * mode.value.norm().max(z.norm()) || e == 0.0);
        let quantity = Quantity {
            name: name.to_owned(),
            formula: formula.to_owned(),
            value: value.map(|(z, _)| z.re),
            error: value.map_or(0.0, |(_, e)| e),
            unit: unit.text.clone(),
            reason: match value {
                None => Some(reason.to_owned()),
                Some(_) if !met => Some(format!("the bar is above what relative = {:e} allows", sheet.relative)),
                Some(_) => None,
            },
            remarks: Vec::new(),
            met,
        };
        ModeNumber { quantity, imaginary: value.map_or(0.0, |(z, _)| z.im) }
    };
    sheet.wanted().zip(values).map(line).collect()
}

/// How it was made sure that none is missing.
fn count(eigen: &EigenSheet, spectrum: &Spectrum) -> Check {
    let count = &spectrum.count;
    let limit = |v: f64| {
        let unit = if eigen.unit.text == "1" { String::new() } else { format!(" {}", eigen.unit.text) };
        format!("{}{unit}", short(from_si(&eigen.unit, v)))
    };
    let [from, to, ..] = count.region;
    let region = match (from.is_finite(), to.is_finite()) {
        (false, true) => format!("below {}", limit(to)),
        (true, true) => format!("between {} and {}", limit(from), limit(to)),
        (true, false) => format!("above {}", limit(from)),
        _ => "in all".to_owned(),
    };
    let counted = count.counted.map_or("none".to_owned(), |n| n.to_string());
    let result = match count.checked {
        Some(true) => format!("all found (count {counted} {region})"),
        Some(false) => format!("{} found, but the count gives {counted} {region}", count.found),
        None => "not counted; found on two meshes and each confirmed by a solution of its own".to_owned(),
    };
    let meaning = match count.method {
        Method::Oscillation => {
            "number of oscillations of the solution that meets the first condition (Pruefer's angle)"
        }
        Method::Argument => "winding number of the determinant round the region (argument principle)",
        _ => "no independent count was made for this problem",
    };
    let name = match (eigen.ask, spectrum.modes.len()) {
        (Ask::Lowest(n), _) => format!("modes 1-{n}"),
        (_, n) => format!("{n} mode{}", if n == 1 { "" } else { "s" }),
    };
    Check { name, result, meaning: meaning.into(), passed: count.checked }
}

fn discarded(eigen: &EigenSheet, spectrum: &Spectrum) -> Check {
    let shown = |z: Complex64| {
        let (re, im) = (short(eigen.unit.from_si(z.re)), eigen.unit.from_si(z.im));
        if im == 0.0 { re } else { format!("{re} {} {}i", if im < 0.0 { '-' } else { '+' }, short(im.abs())) }
    };
    let why = |d: &crate::solve::Discarded| {
        let why = match d.reason {
            Reason::Drift { before } => format!("a coarser mesh gave {}", shown(before)),
            Reason::NoSolution => "no solution near by".to_owned(),
            Reason::Moved { to } => format!("led to {}", shown(to)),
            Reason::Unresolved => "not resolved by any mesh".to_owned(),
        };
        format!("{} ({why})", shown(d.value))
    };
    let list: Vec<String> = spectrum.discarded.iter().take(MOST_PLACES).map(why).collect();
    let result = match spectrum.discarded.len() {
        0 => "none".to_owned(),
        n if n > MOST_PLACES => format!("{n}: {}, ...", list.join("; ")),
        _ => list.join("; "),
    };
    let meaning = "candidates of the first search that turned out to be no eigenvalues";
    Check { name: "candidates discarded".into(), result, meaning: meaning.into(), passed: None }
}

fn resolution(spectrum: &Spectrum) -> Check {
    let unresolved = spectrum.modes.iter().filter(|m| !m.solution.resolved).count();
    let result = match unresolved {
        0 => "every mode resolved on a mesh of its own".to_owned(),
        n => format!("{n} not resolved to the end: rely on the bars only"),
    };
    let meaning =
        "each eigenvalue is an unknown of a boundary-value problem that is refined until its coefficients fade";
    Check { name: "decay of the coefficients".into(), result, meaning: meaning.into(), passed: Some(unresolved == 0) }
}

/// A table of eigenvalues: one line for each mode.
pub(super) fn text(outcome: &Outcome) -> String {
    let mut text = String::new();
    for mode in &outcome.modes {
        let parts = |n: &ModeNumber| {
            let q = &n.quantity;
            let value = q.value.map_or("none".to_owned(), |v| super::number::concise(v, q.error));
            let imaginary = match n.imaginary {
                0.0 => String::new(),
                im => format!(" {} {} i", if im < 0.0 { '-' } else { '+' }, super::number::concise(im.abs(), q.error)),
            };
            let unit = if q.unit == "1" { String::new() } else { format!(" {}", q.unit) };
            let reason = q.reason.as_ref().map_or(String::new(), |r| format!(" ({r})"));
            format!("{} = {value}{imaginary}{unit}{reason}", q.name)
        };
        let times = if mode.multiplicity > 1 { format!(" (one of {})", mode.multiplicity) } else { String::new() };
        text.push_str(&format!("mode {}{times}   {}\n", mode.mode, parts(&mode.parameter)));
        mode.quantities.iter().for_each(|n| text.push_str(&format!("    {}\n", parts(n))));
        let places = mode.parameter.quantity.remarks.iter().filter(|r| r.contains(" at "));
        places.for_each(|r| text.push_str(&format!("    {r}\n")));
    }
    text
}
