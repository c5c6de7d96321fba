//! Records once more: solved again, or beside each other.

use super::{GOOD, NO_SENSE, NOT_MET, VERSION, complain, files, say, solving};
use crate::record::build::Origin;
use crate::record::compare::{self, Compared, Record, Verdict};
use crate::record::digests::{self, Digests, State, digest};
use crate::record::json;
use crate::sheet::{self, DataFile, Reading};
use serde::Serialize;
use std::fmt::Write;
use std::path::{Component, Path, PathBuf};

/// Largest file of a record that is read, in bytes.
const MOST_BYTES: u64 = 200_000_000;

/// The folder of a record and its results.
fn open(name: &Path) -> Result<(PathBuf, Record), u8> {
    let folder = if name.is_dir() { name } else { name.parent().unwrap_or(Path::new("")) };
    let file = if name.is_dir() { name.join("record.json") } else { name.to_owned() };
    let hint = Some("name the folder that --record wrote");
    let content = files::bytes(&file, MOST_BYTES).map_err(|reason| {
        complain(&format!("{} {reason}", file.display()), hint);
        NO_SENSE
    })?;
    match compare::read(&String::from_utf8_lossy(&content)) {
        Ok(record) => Ok((folder.to_owned(), record)),
        Err(reason) => {
            complain(&format!("{} is not a record: {reason}", file.display()), hint);
            Err(NO_SENSE)
        }
    }
}

#[derive(Serialize)]
struct FileLine<'a> {
    name: &'a str,
    state: State,
}

#[derive(Serialize)]
struct Report<'a> {
    status: &'static str,
    files: Vec<FileLine<'a>>,
    numbers: &'a [Compared],
    warnings: &'a [String],
}

fn shown(report: &Report<'_>, as_json: bool, heads: [&str; 2]) -> u8 {
    if as_json {
        let mut text = serde_json::to_string_pretty(report).unwrap_or_default();
        text.push('\n');
        return say(&text);
    }
    let mut text = String::new();
    let bad = |f: &&FileLine<'_>| f.state != State::Unchanged;
    for file in report.files.iter().filter(bad) {
        let word = if file.state == State::Missing { "MISSING" } else { "CHANGED" };
        let _ = writeln!(text, "{word}   {}", file.name);
    }
    if !report.files.is_empty() {
        let changed = report.files.iter().filter(bad).count();
        let _ = match changed {
            0 => writeln!(text, "all {} files are as they were written\n", report.files.len()),
            n => writeln!(text, "{n} of {} files are not as they were written\n", report.files.len()),
        };
    }
    for warning in report.warnings {
        let _ = writeln!(text, "warning: {warning}");
    }
    say(&(text + &compare::text(report.numbers, heads)))
}

/// Two records side by side.
pub(super) fn compare(first: &Path, second: &Path, as_json: bool) -> u8 {
    let ((_, a), (_, b)) = match (open(first), open(second)) {
        (Ok(a), Ok(b)) => (a, b),
        (Err(code), _) | (_, Err(code)) => return code,
    };
    let numbers = compare::compare(&a.numbers, &b.numbers);
    let agree = compare::all_agree(&numbers);
    let status = if agree { "agrees" } else { "differs" };
    let report = Report { status, files: Vec::new(), numbers: &numbers, warnings: &[] };
    let code = shown(&report, as_json, ["first", "second"]);
    code.max(if agree { GOOD } else { NOT_MET })
}

/// Digests, then the sheet solved again.
pub(super) fn recheck(name: &Path, as_json: bool, limit: Option<std::time::Duration>) -> u8 {
    let (folder, record) = match open(name) {
        Ok(opened) => opened,
        Err(code) => return code,
    };
    let mut warnings = Vec::new();
    // Only files inside the folder of the record belong to it.
    let inside = |file: &str| Path::new(file).components().all(|c| matches!(c, Component::Normal(_)));
    let content = |file: &str| {
        if !inside(file) {
            return None;
        }
        files::bytes(&folder.join(file), MOST_BYTES).ok()
    };
    let digests = match content(digests::FILE).map(|bytes| Digests::read(&String::from_utf8_lossy(&bytes))) {
        Some(Ok(digests)) => digests,
        Some(Err(reason)) => {
            complain(&format!("{} of the record is damaged: {reason}", digests::FILE), None);
            return NO_SENSE;
        }
        None => {
            complain(
                &format!("the record has no {}: nothing shows that its files belong together", digests::FILE),
                None,
            );
            return NO_SENSE;
        }
    };
    let states = digests.states(content);
    let Some(text) = content("sheet.toml").and_then(|bytes| String::from_utf8(bytes).ok()) else {
        complain("the record has no sheet.toml that can be read", None);
        return NO_SENSE;
    };
    if digest(text.as_bytes()) != record.sha256 {
        warnings.push("the sheet is not the one that the results were made from".to_owned());
    }
    if record.version != VERSION {
        warnings.push(format!("written by version {}, solved again by {VERSION}", record.version));
    }
    let data: Vec<DataFile> = digests
        .data
        .iter()
        .map(|(name, file)| {
            let text = content(file).and_then(|bytes| String::from_utf8(bytes).ok());
            DataFile { name: name.clone(), content: text.ok_or_else(|| "is not in the record".to_owned()) }
        })
        .collect();
    let sheet = match sheet::read_with(&text, &Reading { files: &data, ..Reading::default() }) {
        Ok(sheet) => sheet,
        Err(faults) => {
            for fault in faults.iter().take(10) {
                complain(&format!("sheet.toml:{}:{}: {}", fault.line, fault.column, fault.message), None);
            }
            return NO_SENSE;
        }
    };
    let origin = Origin { source: &record.sheet, text: &text };
    let Some(outcome) = solving::solve(&sheet, origin, false, limit) else { return NOT_MET };
    let again = match compare::read(&json::document(&outcome, &record.sha256, VERSION, false)) {
        Ok(again) => again,
        Err(reason) => {
            complain(&reason, None);
            return NO_SENSE;
        }
    };
    let numbers = compare::compare(&record.numbers, &again.numbers);
    let sound = states.iter().all(|(_, state)| *state == State::Unchanged) && digest(text.as_bytes()) == record.sha256;
    let good = sound && compare::all_agree(&numbers);
    let files = states.iter().map(|(name, state)| FileLine { name, state: *state }).collect();
    let status = match (good, numbers.iter().any(|c| c.verdict != Verdict::Agrees)) {
        (true, _) => "agrees",
        (false, true) => "differs",
        (false, false) => "changed",
    };
    let report = Report { status, files, numbers: &numbers, warnings: &warnings };
    let code = shown(&report, as_json, ["recorded", "again"]);
    code.max(if good { GOOD } else { NOT_MET })
}
