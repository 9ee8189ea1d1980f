//! Arguments in, library call, words out.

mod args;
mod calibrate;
mod compare;
mod console;
mod inputs;
mod inspect;
mod new;
mod preflight;
mod progress;
mod reduce;
mod run_template;
mod runs;

use args::{Arguments, Command};
use clap::Parser;
use console::Ending;
use std::process::ExitCode;

/// Runs the command on the command line; the exit status is 0 done, 1 refused, 2 wrong usage, 3 a check failed.
pub fn main() -> ExitCode {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(error) => {
            // Help and version are errors to clap, too; they go to standard output. A closed pipe is no trouble here.
            let _ = error.print();
            return if error.use_stderr() { Ending::Usage } else { Ending::Done }.into();
        }
    };
    match arguments.command {
        Command::Reduce(arguments) => reduce::run(&arguments),
        Command::Compare(arguments) => compare::run(&arguments),
        Command::Preflight(arguments) => preflight::run(&arguments),
        Command::Calibrate(arguments) => calibrate::run(&arguments),
        Command::Inspect(arguments) => inspect::run(&arguments),
        Command::New(arguments) => new::run(&arguments),
    }
    .into()
}
