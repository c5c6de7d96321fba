//! Help for writing sheets and for the shell: starting sheets, the schema, completions, the manual page.

use super::arguments::{Arguments, Kind};
use super::{GOOD, NO_SENSE, complain, say};
use crate::record::schema;
use clap_complete::Shell;
use std::fs::OpenOptions;
use std::io::Write;
use std::path::Path;

impl Kind {
    /// The starting sheet.
    fn text(self) -> &'static str {
        match self {
            Self::Beam => include_str!("starts/beam.toml"),
            Self::Column => include_str!("starts/column.toml"),
            Self::Fin => include_str!("starts/fin.toml"),
            Self::Pipe => include_str!("starts/pipe.toml"),
            Self::Reactor => include_str!("starts/reactor.toml"),
            Self::Shaft => include_str!("starts/shaft.toml"),
            Self::Wall => include_str!("starts/wall.toml"),
        }
    }
}

/// Writes a starting sheet; a file that is there already is left alone.
pub(super) fn new(kind: Kind, file: Option<&Path>) -> u8 {
    let Some(path) = file else { return say(kind.text()) };
    let written = OpenOptions::new().write(true).create_new(true).open(path);
    match written.and_then(|mut file| file.write_all(kind.text().as_bytes())) {
        Ok(()) => {
            eprintln!("{} written: change it, then spanwise solve {}", path.display(), path.display());
            GOOD
        }
        Err(error) => {
            let there = error.kind() == std::io::ErrorKind::AlreadyExists;
            let hint = if there { "choose another name" } else { "choose a folder that can be written" };
            complain(&format!("{} cannot be written: {error}", path.display()), Some(hint));
            NO_SENSE
        }
    }
}

/// The JSON Schema of the sheet.
pub(super) fn schema() -> u8 {
    let mut text = serde_json::to_string_pretty(&schema::schema()).unwrap_or_default();
    text.push('\n');
    say(&text)
}

/// Completions for a shell.
pub(super) fn completions(shell: Shell) -> u8 {
    let mut text = Vec::new();
    clap_complete::generate(shell, &mut Arguments::command_with_limits(), "spanwise", &mut text);
    say(&String::from_utf8_lossy(&text))
}

/// The manual page, for man.
pub(super) fn manual() -> u8 {
    let mut text = Vec::new();
    let command = Arguments::command_with_limits();
    let page = clap_mangen::Man::new(command.clone()).render(&mut text);
    let mut tasks = command.get_subcommands().filter(|task| !task.is_hide_set());
    let rest: std::io::Result<()> = tasks.try_for_each(|task| {
        // Each task with its options below the page of the whole.
        let page = clap_mangen::Man::new(task.clone().bin_name(format!("spanwise {}", task.get_name())));
        writeln!(text, ".SH \"TASK {}\"", task.get_name().to_uppercase())?;
        let mut own = Vec::new();
        page.render_synopsis_section(&mut own)?;
        page.render_description_section(&mut own)?;
        page.render_options_section(&mut own)?;
        // Sections of a section.
        text.extend(String::from_utf8_lossy(&own).replace(".SH ", ".SS ").into_bytes());
        Ok(())
    });
    if page.and(rest).is_err() {
        complain("the manual page cannot be made", None);
        return NO_SENSE;
    }
    say(&String::from_utf8_lossy(&text))
}
