//! The `spanwise` command.

fn main() -> std::process::ExitCode {
    spanwise::cli::main()
}
