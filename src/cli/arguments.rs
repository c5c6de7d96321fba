//! Arguments as typed.

use clap::builder::styling::Styles;
use clap::{CommandFactory, Parser, Subcommand, ValueEnum};
use std::path::PathBuf;

const EXAMPLE: &str = "\
Example:
  spanwise solve agitator-shaft.toml --record agitator-record

  A sheet in short:
    [given]
    L = \"3.2 m\"
    k = { \"0 m .. 1.1 m\" = \"0.8 W/(m K)\", else = \"0.04 W/(m K)\" }
    [span]
    x = [\"0 m\", \"L\"]
    [unknowns]
    T = \"degC\"
    [equations]
    conduction = \"(k*T')' = 0\"
    [conditions]
    inside = \"T(0 m) = 20 degC\"
    outside = \"T(L) = -5 degC\"
    [report]
    \"heat flux\" = \"-k(L)*T'(L) in W/m^2\"

Exit code 0: every asked number met its accuracy; 1: solved but not to the accuracy asked, or
no solution; 2: the sheet cannot be read or makes no sense.";

/// Solves problems along one coordinate, written as a calculation sheet; every number with its error bar.
#[derive(Debug, Parser)]
#[command(name = "spanwise", version, about, after_help = EXAMPLE, styles = Styles::plain())]
pub(super) struct Arguments {
    #[command(subcommand)]
    pub task: Task,
    /// Colours in messages
    #[arg(long = "color", value_enum, default_value_t = Colour::Auto, global = true)]
    pub colour: Colour,
}

impl Arguments {
    /// The command with all its help.
    pub fn command_with_limits() -> clap::Command {
        let mut text = "Limits, beyond which a sheet is refused:\n".to_owned();
        for (what, most) in crate::sheet::limits() {
            text.push_str(&format!("  {most:>10} {what}\n"));
        }
        text.push_str("Time is limited by --time-limit of solve and recheck.");
        Self::command().mut_subcommand("check", |task| task.after_help(text))
    }
}

#[derive(Debug, Subcommand)]
pub(super) enum Task {
    /// Solve a sheet and print the asked numbers
    Solve {
        /// The sheet; `-` reads standard input
        sheet: String,
        /// Print JSON instead of a table
        #[arg(long)]
        json: bool,
        /// Write the record (page, plots, data) into this folder
        #[arg(long, value_name = "DIR")]
        record: Option<PathBuf>,
        /// Solve by a second, independent route as well and show the difference
        #[arg(long)]
        cross_check: bool,
        /// Give up after so many seconds
        #[arg(long, value_name = "SECONDS", value_parser = seconds)]
        time_limit: Option<f64>,
        /// Solve again whenever the sheet or one of its data files changes, until Ctrl-C
        #[arg(long)]
        watch: bool,
    },
    /// Read a sheet, count, check dimensions, show the problem as understood; solve nothing
    Check {
        /// The sheet; `-` reads standard input
        sheet: String,
        /// Print JSON instead of text
        #[arg(long)]
        json: bool,
    },
    /// Read a record, see whether its files still belong together, solve it again, and say which numbers agree
    Recheck {
        /// The folder that --record wrote
        record: PathBuf,
        /// Print JSON instead of text
        #[arg(long)]
        json: bool,
        /// Give up after so many seconds
        #[arg(long, value_name = "SECONDS", value_parser = seconds)]
        time_limit: Option<f64>,
    },
    /// Write a commented starting sheet that solves as it stands
    New {
        /// What is to be calculated
        #[arg(value_enum)]
        kind: Kind,
        /// The file to write; without it the sheet goes to standard output
        file: Option<PathBuf>,
    },
    /// Print the JSON Schema of the sheet, for editors
    Schema,
    /// Print completions for a shell
    Completions {
        /// The shell
        #[arg(value_enum)]
        shell: clap_complete::Shell,
    },
    /// Print the manual page, for man
    Manual,
    /// Set two records side by side: differences against their bars
    Compare {
        /// The folder of a record
        first: PathBuf,
        /// The folder of another one
        second: PathBuf,
        /// Print JSON instead of text
        #[arg(long)]
        json: bool,
    },
}

/// Kinds of starting sheets.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Kind {
    /// Beam on two supports
    Beam,
    /// Column with a bow under its load
    Column,
    /// Pin fin in an air stream
    Fin,
    /// Pipe that loses heat to the ground
    Pipe,
    /// Tubular reactor with axial dispersion
    Reactor,
    /// Stepped shaft under torsion
    Shaft,
    /// Wall of two layers
    Wall,
}

/// A time that can be waited for.
fn seconds(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(seconds) if seconds > 0.0 && seconds <= 1e7 => Ok(seconds),
        _ => Err("a number of seconds, more than 0".into()),
    }
}

/// When messages are coloured.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Colour {
    /// On a terminal, unless NO_COLOR is set
    Auto,
    Always,
    Never,
}
