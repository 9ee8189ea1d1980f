//! Standard output and standard error of the commands.

use super::args::Common;
use crate::problem::Problem;
use crate::report::summary::View;
use std::io::{self, IsTerminal, Write};
use std::process::ExitCode;

/// How a command ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ending {
    Done,
    Refused,
    Usage,
    CheckFailed,
}

impl From<Ending> for ExitCode {
    fn from(ending: Ending) -> Self {
        ExitCode::from(match ending {
            Ending::Done => 0,
            Ending::Refused => 1,
            Ending::Usage => 2,
            Ending::CheckFailed => 3,
        })
    }
}

/// What may be said, and how.
#[derive(Debug, Clone, Copy)]
pub struct Console {
    common: Common,
}

impl Console {
    pub fn new(common: Common) -> Self {
        Console { common }
    }

    /// Colour only on a terminal that can, and not where NO_COLOR is set.
    pub fn view(self) -> View {
        let wanted = |name: &str| std::env::var_os(name).is_none_or(|value| value.is_empty());
        let dumb = std::env::var_os("TERM").is_some_and(|term| term == "dumb");
        View { units: self.common.units.into(), colour: io::stdout().is_terminal() && wanted("NO_COLOR") && !dumb }
    }

    /// Progress is for a person in front of a terminal.
    pub fn may_show_progress(self) -> bool {
        !self.common.json && !self.common.quiet && io::stderr().is_terminal()
    }

    /// Text for a person.
    pub fn say(self, text: &str) -> Result<(), Problem> {
        if self.common.json || self.common.quiet {
            return Ok(());
        }
        print(text)
    }

    /// A line of JSON for a program.
    pub fn emit(self, line: &str) -> Result<(), Problem> {
        if !self.common.json {
            return Ok(());
        }
        print(line)
    }
}

/// To standard output, with a line feed at the end. A reader that has gone away is no trouble: what it read was right.
fn print(text: &str) -> Result<(), Problem> {
    let mut out = io::stdout().lock();
    let end = if text.ends_with('\n') { "" } else { "\n" };
    match write!(out, "{text}{end}").and_then(|()| out.flush()) {
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => {
            Err(Problem::new(format!("standard output cannot be written: {error}")))
        }
        _ => Ok(()),
    }
}

/// To standard error. Text of a log may be in a problem, so that control characters but line feeds are taken out.
pub fn complain(problem: &Problem) {
    let text: String =
        problem.to_string().chars().map(|c| if c.is_control() && c != '\n' { '\u{fffd}' } else { c }).collect();
    let _ = writeln!(io::stderr().lock(), "burntally: {text}");
}

/// Complains where something was refused.
pub fn end(result: Result<Ending, Problem>) -> Ending {
    result.unwrap_or_else(|problem| {
        complain(&problem);
        Ending::Refused
    })
}
