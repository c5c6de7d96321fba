//! Results as text, JSON, page, tables and plots. Pure functions; display units are applied here only.

/// Everything a record shows, ready for print: plain data in the user's units.
pub mod outcome;
/// From a solved sheet to that data; display units are applied here.
pub mod build;
/// Values with uncertain digits.
pub mod number;
/// Eigenvalues and modes.
pub mod modes;
/// Load cases.
pub mod cases;
/// Envelopes over load cases.
pub mod envelope;
/// Paths along a parameter.
pub mod path;
/// Records read back and set side by side.
pub mod compare;
/// Digests of the files of a record.
pub mod digests;
/// The JSON Schema of the sheet.
pub mod schema;
/// Results for people, on a terminal.
pub mod text;
/// Results for programs.
pub mod json;
/// Axes: ranges, round ticks, engineering powers, labels.
pub(crate) mod axis;
/// Drawing paper on top of plotters: lines, texts, the marks of the span.
pub(crate) mod canvas;
/// The span, curves along it, residual, decay as SVG.
pub mod plot;
/// Formulas set as mathematics.
pub(crate) mod mathematics;
/// The record as a page.
pub mod page;
/// The solution along the span as a table.
pub mod csv;
/// The same as an array for NumPy.
pub mod npy;

use outcome::Outcome;

/// The files of a record: name inside its folder, and content.
pub fn files(outcome: &Outcome, sha256: &str, version: &str) -> Vec<(String, Vec<u8>)> {
    let (page, plots) = page::with_plots(outcome, sha256, version);
    let mut files = vec![
        ("record.html".into(), page.into_bytes()),
        ("record.json".into(), json::document(outcome, sha256, version, true).into_bytes()),
        ("solution.csv".into(), csv::table(outcome).into_bytes()),
        ("solution.npy".into(), npy::table(outcome)),
        ("sheet.toml".into(), outcome.sheet.clone().into_bytes()),
    ];
    if !outcome.envelopes.is_empty() {
        files.push(("envelope.csv".into(), envelope::table(outcome).into_bytes()));
    }
    files.extend(outcome.path.as_ref().map(|p| ("path.csv".to_owned(), path::table(p).into_bytes())));
    files.extend(plots.into_iter().map(|p| (format!("plots/{}", p.file), p.svg.into_bytes())));
    files
}
