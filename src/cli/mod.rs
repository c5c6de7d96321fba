//! The command line: arguments, streams, colours, progress, exit codes.
//!
//! Results go to standard output, talk to standard error. Exit code 0: every asked number met its accuracy; 1:
//! solved but not to the accuracy asked, or no solution; 2: the sheet or the command makes no sense, or a file cannot
//! be read or written.

mod arguments;
mod extras;
mod faults;
mod files;
mod progress;
mod recheck;
mod solving;
mod watch;

use crate::record::build::{self, Origin};
use crate::record::digests::{self, digest};
use crate::record::outcome::Status;
use crate::record::{json, text};
use crate::sheet::{self, DataFile, Reading, Sheet};
use arguments::{Arguments, Colour, Task};
use clap::FromArgMatches;
use std::io::{IsTerminal, Write};
use std::path::Path;
use std::process::ExitCode;
use std::time::Duration;

/// Every asked number met its accuracy.
const GOOD: u8 = 0;
/// Solved but not to the accuracy asked, or no solution found.
const NOT_MET: u8 = 1;
/// The sheet or the command makes no sense, or a file cannot be read or written.
const NO_SENSE: u8 = 2;

/// The version of the program.
const VERSION: &str = env!("CARGO_PKG_VERSION");

/// Runs the command.
pub fn main() -> ExitCode {
    let typed = Arguments::command_with_limits().try_get_matches();
    let arguments = match typed.and_then(|typed| Arguments::from_arg_matches(&typed)) {
        Ok(arguments) => arguments,
        Err(error) => {
            let asked = !error.use_stderr();
            // Printing help into a closed pipe is no failure.
            let _ = error.print();
            return ExitCode::from(if asked { GOOD } else { NO_SENSE });
        }
    };
    let colour = arguments.colour;
    let code = match &arguments.task {
        Task::Solve { sheet, json, record, cross_check, time_limit, watch } => {
            let limit = time_limit.map(Duration::from_secs_f64);
            progress::listen();
            let wish = Wish { json: *json, record: record.as_deref(), cross_check: *cross_check, limit, colour };
            if *watch {
                watch::watch(sheet, &wish)
            } else {
                progress::deadline(limit);
                solve(sheet, &wish)
            }
        }
        Task::Check { sheet, json } => check(sheet, *json, colour),
        Task::Recheck { record, json, time_limit } => {
            let limit = time_limit.map(Duration::from_secs_f64);
            progress::listen();
            progress::deadline(limit);
            recheck::recheck(record, *json, limit)
        }
        Task::New { kind, file } => extras::new(*kind, file.as_deref()),
        Task::Schema => extras::schema(),
        Task::Completions { shell } => extras::completions(*shell),
        Task::Manual => extras::manual(),
        Task::Compare { first, second, json } => recheck::compare(first, second, *json),
    };
    ExitCode::from(code)
}

/// Writes to standard output; a reader that has gone away is no failure.
fn say(text: &str) -> u8 {
    let mut out = std::io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(error) if error.kind() != std::io::ErrorKind::BrokenPipe => {
            complain(&format!("standard output cannot be written: {error}"), None);
            NO_SENSE
        }
        _ => GOOD,
    }
}

/// An error and what to do about it, on standard error.
fn complain(message: &str, hint: Option<&str>) {
    eprintln!("error: {message}");
    if let Some(hint) = hint {
        eprintln!("hint: {hint}");
    }
}

fn coloured(choice: Colour) -> bool {
    match choice {
        Colour::Always => true,
        Colour::Never => false,
        Colour::Auto => std::env::var_os("NO_COLOR").is_none_or(|v| v.is_empty()) && std::io::stderr().is_terminal(),
    }
}

/// Reads and checks a sheet; faults are reported.
fn read(name: &str, as_json: bool, colour: Colour) -> Result<(Sheet, String, Vec<DataFile>), u8> {
    let text = files::sheet(name).map_err(|failure| {
        complain(&failure.message, failure.hint);
        NO_SENSE
    })?;
    let data = files::data(name, &text);
    match sheet::read_with(&text, &Reading { files: &data, ..Reading::default() }) {
        Ok(sheet) => {
            for warning in &sheet.warnings {
                eprintln!("warning: {warning}");
            }
            Ok((sheet, text, data))
        }
        Err(found) => {
            eprint!("{}", faults::render(name, &text, &found, coloured(colour)));
            if as_json {
                say(&json::faults(name, &found));
            }
            Err(NO_SENSE)
        }
    }
}

fn check(name: &str, as_json: bool, colour: Colour) -> u8 {
    let (sheet, text, _) = match read(name, as_json, colour) {
        Ok(read) => read,
        Err(code) => return code,
    };
    let outcome = build::unsolved(&sheet, Origin { source: name, text: &text });
    if as_json {
        return say(&json::statement(&outcome, &digest(text.as_bytes()), VERSION));
    }
    let s = &sheet.statement;
    let conditions = s.order + s.constants + s.releases;
    let kind = if sheet.eigen().is_some() {
        "an eigenproblem"
    } else if s.linear {
        "linear"
    } else {
        "nonlinear"
    };
    let count = format!("\norder {}, {conditions} conditions, {kind}; nothing was solved\n", s.order);
    say(&(text::statement(&outcome) + &count))
}

/// How a sheet is to be solved.
struct Wish<'a> {
    json: bool,
    record: Option<&'a Path>,
    cross_check: bool,
    limit: Option<Duration>,
    colour: Colour,
}

fn solve(name: &str, wish: &Wish<'_>) -> u8 {
    let (sheet, text, data) = match read(name, wish.json, wish.colour) {
        Ok(read) => read,
        Err(code) => return code,
    };
    let origin = Origin { source: name, text: &text };
    let Some(outcome) = solving::solve(&sheet, origin, wish.cross_check, wish.limit) else { return NOT_MET };
    if let Some(reason) = outcome.reason.as_ref().filter(|_| outcome.status == Status::Failed) {
        complain(&format!("{name}: {reason}"), None);
    }
    let digest = digest(text.as_bytes());
    let mut code = if wish.json {
        say(&json::document(&outcome, &digest, VERSION, false))
    } else if outcome.status == Status::Failed {
        GOOD
    } else {
        say(&text::results(&outcome))
    };
    if let Some(folder) = wish.record {
        let mut files = crate::record::files(&outcome, &digest, VERSION);
        digests::seal(&mut files, &data);
        let _whole = progress::writing();
        if let Err(failure) = files::write_record(folder, &files) {
            complain(&failure.message, failure.hint);
            code = NO_SENSE;
        }
    }
    match outcome.status {
        Status::Solved => code,
        _ => code.max(NOT_MET),
    }
}
