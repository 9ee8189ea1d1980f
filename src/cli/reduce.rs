//! `burntally reduce`: several runs in parallel, each standing alone.

use super::args::ReduceArguments;
use super::console::{Console, Ending, complain, end};
use super::inputs;
use super::progress::Progress;
use super::runs::{self, Source};
use crate::export::{files, json};
use crate::firing::Status;
use crate::problem::Problem;
use crate::report::outputs::{self, FILES, Wanted};
use crate::report::summary;
use rayon::prelude::*;
use std::collections::HashMap;
use std::path::PathBuf;
use std::sync::{Mutex, PoisonError};

/// What is left of a run once its files are written: text, not curves, so that many runs need little memory.
struct Written {
    text: String,
    json: String,
    failed: bool,
}

pub fn run(arguments: &ReduceArguments) -> Ending {
    let console = Console::new(arguments.common);
    let sources = runs::find(&arguments.runs);
    if let Some(problem) = misplaced_flags(arguments, &sources) {
        complain(&problem);
        return Ending::Usage;
    }
    let sources = refuse_twins(sources);
    let single = sources.len() == 1;
    let claimed = Mutex::new(HashMap::new());
    let progress = Progress::new(sources.len(), console.may_show_progress());
    let results: Vec<Result<Written, Problem>> = sources
        .into_par_iter()
        .map(|source| {
            let result = source.and_then(|source| one(&source, arguments, console, single, &claimed));
            progress.step();
            result
        })
        .collect();
    progress.finish();
    end(tell(&results, console))
}

/// Says what was done, in the order in which the runs were named.
fn tell(results: &[Result<Written, Problem>], console: Console) -> Result<Ending, Problem> {
    let mut ending = Ending::Done;
    for result in results {
        match result {
            Ok(written) => {
                console.say(&written.text)?;
                console.emit(&written.json)?;
                if written.failed && ending == Ending::Done {
                    ending = Ending::CheckFailed;
                }
            }
            Err(problem) => {
                complain(problem);
                ending = Ending::Refused;
            }
        }
    }
    Ok(ending)
}

fn one(
    source: &Source,
    arguments: &ReduceArguments,
    console: Console,
    single: bool,
    claimed: &Mutex<HashMap<String, PathBuf>>,
) -> Result<Written, Problem> {
    let read = inputs::load(source, arguments.calibration.as_deref(), arguments.unit.as_deref())?;
    let in_source = |problem: Problem| problem.in_file(source.path());
    let folder = files::run_folder(&arguments.out, &read.run.id).map_err(in_source)?;
    claim(claimed, &read.run.id, source)?;
    let reduction = crate::reduce::reduce(&read).map_err(in_source)?;
    let wanted = Wanted {
        units: arguments.common.units.into(),
        pictures: !arguments.no_pictures,
        table_rows: arguments.table_rows as usize,
    };
    let made = outputs::outputs(&reduction, wanted).map_err(in_source)?;
    files::write_set(&folder, &made, &FILES, &inputs::files_of(&read))?;
    let firing = &reduction.firing;
    let view = console.view();
    let text = if single {
        let names: Vec<&str> = FILES.into_iter().filter(|name| made.iter().any(|file| file.name == *name)).collect();
        summary::summary(firing, view, Some((&folder, &names)))
    } else {
        format!(
            "{}\n             -> {}\n",
            summary::one_line(firing, view),
            summary::plain(&folder.display().to_string())
        )
    };
    let failed = firing.checks.iter().any(|check| check.status == Status::Fail);
    Ok(Written { text, json: json::line(firing)?, failed })
}

/// Flags for bare logs beside a run.toml would be ignored; better to say so.
fn misplaced_flags(arguments: &ReduceArguments, sources: &[Result<Source, Problem>]) -> Option<Problem> {
    if arguments.calibration.is_none() && arguments.unit.is_none() {
        return None;
    }
    sources.iter().find_map(|source| match source {
        Ok(Source::Described(path)) => Some(
            Problem::new("--calibration and --unit are for a bare log, and this run has a run.toml")
                .in_file(path)
                .remedy("write calibration and unit into its [[channel]]"),
        ),
        _ => None,
    })
}

/// Of runs with the same id the first stands; the others are refused before anything is read at length, so that which
/// is first does not depend on which is quicker.
fn refuse_twins(sources: Vec<Result<Source, Problem>>) -> Vec<Result<Source, Problem>> {
    let mut first: HashMap<String, PathBuf> = HashMap::new();
    sources
        .into_iter()
        .map(|source| {
            let source = source?;
            let Some(id) = inputs::id_of(&source) else { return Ok(source) };
            match first.get(&id) {
                Some(other) => Err(twin(&id, other, &source)),
                None => {
                    first.insert(id, source.path().to_path_buf());
                    Ok(source)
                }
            }
        })
        .collect()
}

/// The same once the run is read, should its id differ from what a first look told.
fn claim(claimed: &Mutex<HashMap<String, PathBuf>>, id: &str, source: &Source) -> Result<(), Problem> {
    let mut claimed = claimed.lock().unwrap_or_else(PoisonError::into_inner);
    match claimed.get(id) {
        Some(other) => Err(twin(id, other, source)),
        None => {
            claimed.insert(id.to_owned(), source.path().to_path_buf());
            Ok(())
        }
    }
}

fn twin(id: &str, other: &std::path::Path, source: &Source) -> Problem {
    Problem::new(format!("the run's id {id:?} is taken by {} already", other.display()))
        .in_file(source.path())
        .expected("an id of its own for each run")
        .remedy("change [run] id in one of the two, or reduce them into different folders")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn of_two_runs_with_one_id_the_second_is_refused_and_both_are_named() {
        let dir = tempfile::tempdir().unwrap();
        let path = |name: &str| dir.path().join(name);
        std::fs::write(path("a.toml"), "[run]\nid = \"X\"\n").unwrap();
        std::fs::write(path("b.toml"), "[run]\nid = \"X\"\n").unwrap();
        std::fs::write(path("c.toml"), "not toml").unwrap();
        let sources = ["a.toml", "b.toml", "c.toml"].map(|name| Ok(Source::Described(path(name))));
        let result = refuse_twins(sources.into());
        assert!(result[0].is_ok() && result[2].is_ok());
        let text = result[1].as_ref().unwrap_err().to_string();
        assert!(text.contains("a.toml") && text.contains("b.toml"), "{text}");
    }

    #[test]
    fn an_id_is_claimed_once() {
        let claimed = Mutex::new(HashMap::new());
        let source = Source::BareLog("a.csv".into());
        assert!(claim(&claimed, "X", &source).is_ok());
        assert!(claim(&claimed, "X", &source).is_err());
        assert!(claim(&claimed, "Y", &source).is_ok());
    }
}
