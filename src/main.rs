//! The one binary. Thin: `cli` parses, calls the library and prints.

mod cli;

fn main() -> std::process::ExitCode {
    cli::run()
}
