//! The `gyremesh` command; all of it is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    ExitCode::from(gyremesh::cli::main() as u8)
}
