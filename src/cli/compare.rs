//! `burntally compare`: reduced firings in, groups held against each other out.

use super::args::CompareArguments;
use super::console::{Console, Ending, end};
use super::runs::unreadable;
use crate::compare::curves::Trace;
use crate::compare::{self, Comparison, Request, Run};
use crate::export::files::{self, OutputFile};
use crate::export::{comparison, json, thrust_table, thrust_table_read};
use crate::problem::Problem;
use crate::report::{comparison_plot, comparison_summary, plot, summary};
use rayon::prelude::*;
use std::path::{Path, PathBuf};

const FILES: [&str; 5] = [
    comparison::FILE,
    comparison::TABLE_FILE,
    comparison::BANDS_FILE,
    comparison_plot::SVG_FILE,
    comparison_plot::PNG_FILE,
];
const RESULT: &str = "result.json";

pub fn run(arguments: &CompareArguments) -> Ending {
    end(compare_runs(arguments))
}

fn compare_runs(arguments: &CompareArguments) -> Result<Ending, Problem> {
    let console = Console::new(arguments.common);
    let paths = results(&arguments.results)?;
    let runs: Vec<Run> = paths.par_iter().map(|path| load(path)).collect::<Result<_, _>>()?;
    let request = Request {
        by: arguments.by.clone(),
        leave_out: arguments.leave_out.clone(),
        alike_within: arguments.alike / 100.0,
        with_failed: arguments.with_failed,
        by_burn_time: arguments.by_burn_time,
    };
    let found = compare::compare(&runs, &request)?;
    let mut made = vec![
        OutputFile::new(comparison::FILE, comparison::pretty(&found)?),
        OutputFile::new(comparison::TABLE_FILE, comparison::table(&found)?),
        OutputFile::new(comparison::BANDS_FILE, comparison::bands(&found)?),
    ];
    if !arguments.no_pictures {
        let svg = comparison_plot::comparison_svg(&found, &traces(&found, &runs), arguments.common.units.into())?;
        made.push(OutputFile::new(comparison_plot::PNG_FILE, plot::png(&svg)?));
        made.push(OutputFile::new(comparison_plot::SVG_FILE, svg));
    }
    files::write_set(&arguments.out, &made, &FILES, &paths)?;
    let names: Vec<&str> = FILES.into_iter().filter(|name| made.iter().any(|file| file.name == *name)).collect();
    let place = format!("written to {}: {}", summary::plain(&arguments.out.display().to_string()), names.join(", "));
    console.say(&comparison_summary::summary(&found, console.view(), &place))?;
    console.emit(&comparison::line(&found)?)?;
    Ok(if compare::needs_attention(&found) { Ending::CheckFailed } else { Ending::Done })
}

/// The curves of each group, for the picture.
fn traces(found: &Comparison, runs: &[Run]) -> Vec<Vec<(String, Trace)>> {
    let of = |id: &String| runs.iter().find(|r| r.firing.run.id == *id);
    found
        .groups
        .iter()
        .map(|g| g.runs.iter().filter_map(|id| Some((id.clone(), of(id)?.trace.clone()?))).collect())
        .collect()
}

/// Every result.json that is named, or lies in a folder that is.
fn results(names: &[PathBuf]) -> Result<Vec<PathBuf>, Problem> {
    let mut found = Vec::new();
    for name in names {
        if name.is_file() {
            found.push(name.clone());
            continue;
        }
        if name.join(RESULT).is_file() {
            found.push(name.join(RESULT));
            continue;
        }
        let entries = std::fs::read_dir(name).map_err(|error| unreadable(name, &error))?;
        let mut inside: Vec<PathBuf> =
            entries.filter_map(Result::ok).map(|e| e.path().join(RESULT)).filter(|p| p.is_file()).collect();
        if inside.is_empty() {
            return Err(Problem::new("there is no result of a reduction in this folder")
                .in_file(name)
                .expected("a reduced run's folder, its result.json, or a folder of such")
                .remedy("run `burntally reduce` first"));
        }
        inside.sort();
        found.extend(inside);
    }
    // The same run named twice, by itself and by its folder, is one.
    let mut seen = std::collections::HashSet::new();
    found.retain(|path| seen.insert(path.canonicalize().unwrap_or_else(|_| path.clone())));
    Ok(found)
}

fn load(path: &Path) -> Result<Run, Problem> {
    let text = std::fs::read_to_string(path).map_err(|error| unreadable(path, &error))?;
    let firing = json::read(&text).map_err(|problem| problem.in_file(path))?;
    let table = path.with_file_name(thrust_table::FILE);
    let trace = match std::fs::read(&table) {
        Ok(bytes) => {
            let table = thrust_table_read::read(&bytes).map_err(|problem| problem.in_file(&table))?;
            let lead_s = firing.burn.start_s - firing.burn.thrust_start_s;
            Some(Trace {
                time_s: table.time_s.iter().map(|t| t - lead_s).collect(),
                thrust_n: table.thrust_n,
                burn_time_s: firing.burn.end_s - firing.burn.start_s,
            })
        }
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => None,
        Err(error) => return Err(unreadable(&table, &error)),
    };
    Ok(Run { firing, trace })
}
