//! Entry point: everything is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    nightwright::cli::main()
}
