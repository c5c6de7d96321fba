//! Sizes of what a sheet may be, each with the reason for it.

use super::assemble::MOST_UNKNOWNS;
use super::cases::MOST_CASES;
use super::fault::Faults;
use super::measured::MOST_MEASURED;
use super::points::MOST_POINTS;
use super::source::{MOST_BYTES, Source};
use crate::formula::syntax::DEEPEST;
use crate::model::Layout;
use crate::solve::Settings;

/// Most entries of a sheet, all sections together: more names than anybody checks, and work that grows with them.
pub(super) const MOST_NAMES: usize = 10_000;

/// Memory that the elements of one solution may take, in bytes.
pub(super) const MOST_MEMORY: usize = 4_000_000_000;

/// Refuses a sheet with too many entries.
pub(super) fn check(source: &Source, faults: &mut Faults) {
    let cases = source.cases.iter().flat_map(|case| case.value.iter().map(|e| &e.name_span));
    let names = (source.given.iter().map(|e| &e.name_span))
        .chain(source.unknowns.iter().map(|e| &e.name_span))
        .chain(source.equations.iter().map(|e| &e.name_span))
        .chain(source.conditions.iter().map(|e| &e.name_span))
        .chain(source.report.iter().map(|e| &e.name_span))
        .chain(cases);
    let count = names.clone().count();
    if let Some(first) = names.skip(MOST_NAMES).min_by_key(|span| span.start) {
        let message = format!("the sheet has {count} entries; at most {MOST_NAMES} are allowed");
        let hint = "measured data belong into files of their own";
        faults.add("too large", first.clone(), message, Some(hint.into()));
    }
}

/// Most elements for a problem: as many as the memory allows, at most what the engine allows.
///
/// An element keeps its factors, D n (M + 1) numbers for D unknowns of the orders m, sum M, on n <= 32 nodes, and its part
/// of the answer and of nine companions; measured with 2, 20 and 60 unknowns this comes to half of what is counted here.
pub(super) fn most_elements(layout: &Layout) -> usize {
    let states: usize = layout.orders().iter().sum();
    let element = 16 * layout.unknowns() * 32 * (states + 21) + 8_000;
    Settings::default().most_elements.min(MOST_MEMORY / element)
}

/// All limits in words.
///
/// ```
/// assert!(spanwise::sheet::limits().iter().any(|(what, most)| *what == "bytes of a sheet" && *most == 1_000_000));
/// ```
pub fn limits() -> [(&'static str, usize); 9] {
    [
        ("bytes of a sheet", MOST_BYTES),
        ("entries of a sheet", MOST_NAMES),
        ("unknowns", MOST_UNKNOWNS),
        ("ends, breaks and limits of pieces", MOST_POINTS),
        ("points of one measured datum", MOST_MEASURED),
        ("load cases", MOST_CASES),
        ("brackets, signs and powers within each other", DEEPEST),
        ("elements", Settings::default().most_elements),
        ("bytes of memory for the elements of one solution", MOST_MEMORY),
    ]
}
