//! What is wrong with a sheet, and where.

use crate::unit::Dimension;
use std::ops::Range;

/// A fault with its place in the sheet.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Fault {
    /// Short name of the kind of fault, stable for programs.
    pub code: &'static str,
    /// What is wrong.
    pub message: String,
    /// What to do about it.
    pub hint: Option<String>,
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// Bytes of the sheet.
    pub span: Range<usize>,
}

/// Faults beyond this number are only counted.
const MOST_FAULTS: usize = 200;

/// Longest name for which a likely one is looked for.
const LONGEST_NAME: usize = 40;

/// Code of faults of the file's structure.
pub(super) const NOT_TOML: &str = "toml";

/// Faults gathered in one reading.
#[derive(Debug, Default)]
pub(super) struct Faults {
    list: Vec<Fault>,
    /// Number of those not listed.
    more: usize,
    /// Dimensions that were set against each other and differ.
    pub unequal: Vec<(Dimension, Dimension)>,
}

impl Faults {
    /// Notes a fault; one that repeats an earlier one at the same place is dropped.
    pub fn add(&mut self, code: &'static str, span: Range<usize>, message: impl Into<String>, hint: Option<String>) {
        if self.is_full() {
            self.more += 1;
            return;
        }
        let message = message.into();
        if !self.list.iter().any(|f| f.span == span && f.message == message) {
            self.list.push(Fault { code, message, hint, line: 0, column: 0, span });
        }
    }

    /// Takes in those of another reading, each message behind `prefix`.
    pub fn append(&mut self, other: Self, prefix: &str) {
        for fault in other.list {
            self.add(fault.code, fault.span, format!("{prefix}{}", fault.message), fault.hint);
        }
        self.more += other.more;
    }

    /// Whether a limit is broken: then there is no use in reading on.
    pub fn too_large(&self) -> bool {
        self.list.iter().any(|f| f.code == "too large")
    }

    /// Number of faults so far.
    pub fn len(&self) -> usize {
        self.list.len() + self.more
    }

    /// Whether further ones are only counted.
    pub fn is_full(&self) -> bool {
        self.list.len() >= MOST_FAULTS
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.list.is_empty()
    }

    /// Whether there are faults, all of one kind.
    pub fn only(&self, code: &str) -> bool {
        !self.list.is_empty() && self.list.iter().all(|fault| fault.code == code)
    }

    /// All faults in the order of the sheet, with lines and columns.
    pub fn finish(mut self, sheet: &str) -> Vec<Fault> {
        // Where a line is no TOML, what was made of it is guesswork.
        let line = |fault: &Fault| line_and_column(sheet, fault.span.start).0;
        let broken: Vec<usize> = self.list.iter().filter(|f| f.code == NOT_TOML).map(line).collect();
        self.list.retain(|f| f.code == NOT_TOML || !broken.contains(&line(f)));
        self.list.sort_by_key(|f| f.span.start);
        if self.more > 0 {
            let message = format!("{} more faults are not listed", self.more);
            let span = sheet.len()..sheet.len();
            self.list.push(Fault { code: "too many faults", message, hint: None, line: 0, column: 0, span });
        }
        for fault in &mut self.list {
            (fault.line, fault.column) = line_and_column(sheet, fault.span.start);
        }
        self.list
    }
}

/// Line and column (in characters), both from 1, of a byte of the text.
pub(super) fn line_and_column(text: &str, byte: usize) -> (usize, usize) {
    let mut end = byte.min(text.len());
    while !text.is_char_boundary(end) {
        end -= 1;
    }
    let before = &text[..end];
    let line = before.matches('\n').count() + 1;
    let start = before.rfind('\n').map_or(0, |n| n + 1);
    (line, before[start..].chars().count() + 1)
}

/// The name among `known` that `name` was likely meant to be.
pub(super) fn nearest<'a>(name: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    if name.len() > LONGEST_NAME {
        return None;
    }
    let known: Vec<&str> = known.into_iter().filter(|k| k.len() <= LONGEST_NAME).collect();
    // A capital for a small letter is the nearest miss of all.
    if let Some(same) = known.iter().find(|k| k.eq_ignore_ascii_case(name)) {
        return Some(same);
    }
    // A word that goes on where a known one ends, or the other way round: `maximum` for `max`.
    let begins = |k: &&&str| k.len() >= 3 && name.len() >= 3 && (name.starts_with(**k) || k.starts_with(name));
    let begun = known.iter().filter(begins).min_by_key(|k| (k.len().abs_diff(name.len()), **k)).copied();
    let best = known.into_iter().map(|k| (strsim::osa_distance(name, k), k)).min_by_key(|(d, k)| (*d, k.len(), *k))?;
    let most = match name.chars().count() {
        0 | 1 => 0,
        2..=4 => 1,
        5..=8 => 2,
        _ => 3,
    };
    if best.0 <= most { Some(best.1) } else { begun }
}
