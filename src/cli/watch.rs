//! Solving again whenever the sheet or one of its data files changes.

use super::{NO_SENSE, Wish, complain, files, progress, solve};
use std::path::Path;
use std::time::Duration;

/// How often the files are looked at.
const EVERY: Duration = Duration::from_millis(150);

/// Texts of the sheet and its data files, as far as they can be read.
fn texts(name: &str) -> Option<(String, Vec<crate::sheet::DataFile>)> {
    // While an editor writes the file it may be gone or half there: then the next look counts.
    let text = files::sheet(name).ok()?;
    let data = files::data(name, &text);
    Some((text, data))
}

/// Solves, then waits for changes until interrupted.
pub(super) fn watch(name: &str, wish: &Wish<'_>) -> u8 {
    if name == "-" {
        complain("standard input cannot be watched", Some("name a file"));
        return NO_SENSE;
    }
    let mut seen = texts(name);
    if seen.is_none() && !Path::new(name).exists() {
        return solve(name, wish);
    }
    loop {
        let code = solve(name, wish);
        if progress::interrupted() {
            return code;
        }
        eprintln!("watching {name}: Ctrl-C ends");
        progress::wait(true);
        loop {
            std::thread::sleep(EVERY);
            let now = texts(name);
            if now.is_some() && now != seen {
                seen = now;
                break;
            }
        }
        progress::wait(false);
        eprintln!();
    }
}
