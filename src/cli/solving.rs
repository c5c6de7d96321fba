//! One solve with its cases, watched.

use super::{complain, progress};
use crate::error::Error;
use crate::record::build::{self, Origin};
use crate::record::outcome::Outcome;
use crate::record::{cases, modes};
use crate::sheet::Sheet;
use std::time::Duration;

/// Solves a sheet and its cases; `None` when interrupted or out of time, which has been said.
pub(super) fn solve(sheet: &Sheet, origin: Origin<'_>, cross_check: bool, limit: Option<Duration>) -> Option<Outcome> {
    let progress = progress::Progress::start(limit);
    let watch = |step| progress.step(step);
    if let Some(path) = sheet.follow(Some(&watch)) {
        progress.finish();
        if matches!(path, Err(Error::Interrupted)) {
            return stopped_early(limit);
        }
        return Some(crate::record::path::followed(sheet, &path, origin, cross_check));
    }
    if let Some(eigen) = sheet.eigen() {
        let found = sheet.solve_modes(Some(&watch));
        progress.finish();
        return match &found {
            Err(Error::Interrupted) => stopped_early(limit),
            Ok(spectrum) => Some(modes::solved(sheet, eigen, spectrum, origin)),
            Err(error) => Some(build::failed(sheet, origin, error)),
        };
    }
    let solved = sheet.solve(Some(&watch));
    let mut answers: Vec<cases::Answer<'_>> = Vec::new();
    let mut stopped = matches!(solved, Err(Error::Interrupted));
    for case in sheet.cases() {
        if stopped {
            break;
        }
        answers.push((case, case.sheet.solve(Some(&watch))));
        stopped = matches!(answers.last(), Some((_, Err(Error::Interrupted))));
    }
    progress.finish();
    if stopped {
        return stopped_early(limit);
    }
    let mut outcome = match &solved {
        Ok(solution) => build::solved(sheet, solution, origin, cross_check),
        Err(error) => build::failed(sheet, origin, error),
    };
    cases::join(&mut outcome, sheet, solved.as_ref().ok(), &answers, origin);
    Some(outcome)
}

/// Says why nothing was finished.
fn stopped_early(limit: Option<Duration>) -> Option<Outcome> {
    match limit.filter(|_| !progress::interrupted()) {
        Some(limit) => complain(&progress::late(limit), Some("allow more time, or ask for less accuracy")),
        None => complain("interrupted: nothing was written", None),
    }
    None
}
