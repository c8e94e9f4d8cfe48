//! Arguments, command, exit status; all else is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    reassay::cli::main(std::env::args_os())
}
