//! Arguments in, library call, words out.

use std::process::ExitCode;

pub fn main() -> ExitCode {
    ExitCode::from(2)
}
