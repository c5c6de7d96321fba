//! The command line: arguments, streams, colours, progress, exit codes.

/// Runs the command.
pub fn main() -> std::process::ExitCode {
    std::process::ExitCode::SUCCESS
}
