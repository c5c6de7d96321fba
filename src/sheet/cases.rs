//! Load cases: the sheet once more, with changed data.

use super::assemble::Assembler;
use super::fault::Faults;
use super::source::Source;
use super::{Reading, Sheet};

/// Most load cases of a sheet.
pub(super) const MOST_CASES: usize = 100;

/// A load case.
#[derive(Debug)]
pub struct Case {
    /// Its name: NAME of `[cases.NAME]`.
    pub name: String,
    /// Data changed: names, and the formulas as written.
    pub changed: Vec<(String, String)>,
    /// The sheet with these data.
    pub sheet: Sheet,
}

/// Reads all cases of a sheet that is sound by itself.
pub(super) fn read(source: &Source, reading: &Reading<'_>, faults: &mut Faults) -> Vec<Case> {
    let mut cases = Vec::new();
    for (index, entry) in source.cases.iter().enumerate() {
        if index >= MOST_CASES {
            let message = format!("the sheet has {} cases; at most {MOST_CASES} are allowed", source.cases.len());
            faults.add("too large", entry.name_span.clone(), message, None);
            break;
        }
        let mut own = Faults::default();
        let varied = source.varied(&entry.value);
        let changed = entry.value.iter().map(|e| (e.name.clone(), e.value.text())).collect();
        match Assembler::new(&varied, reading, &mut own).run() {
            Some(sheet) if own.is_empty() => cases.push(Case { name: entry.name.clone(), changed, sheet }),
            _ => faults.append(own, &format!("case `{}`: ", entry.name)),
        }
    }
    cases
}
