//! The command line: see `inrush --help`.

mod cli;

fn main() -> std::process::ExitCode {
    cli::main()
}
