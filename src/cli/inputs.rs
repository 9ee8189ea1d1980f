//! What the commands read, each behind one function.

use super::runs::{Source, unreadable};
use crate::log::{Log, ReadRequest};
use crate::problem::Problem;
use crate::reduce::Inputs;
use crate::report::residuals::ResidualPoint;
use std::fs::File;
use std::path::{Path, PathBuf};

/// Reads all that a reduction depends on.
pub fn load(source: &Source, calibration: Option<&Path>, unit: Option<&str>) -> Result<Inputs, Problem> {
    let _ = (calibration, unit);
    File::open(source.path()).map_err(|error| unreadable(source.path(), &error))?;
    Err(Problem::new("runs cannot be loaded yet").in_file(source.path()))
}

/// The id a run will have, without reading its log; `None` where that takes more than a look.
pub fn id_of(source: &Source) -> Option<String> {
    match source {
        Source::BareLog(path) => path.file_stem().and_then(|stem| stem.to_str()).map(str::to_owned),
        Source::Described(path) => {
            let table: toml::Table = std::fs::read_to_string(path).ok()?.parse().ok()?;
            Some(table.get("run")?.get("id")?.as_str()?.to_owned())
        }
    }
}

/// Files a result must never replace.
pub fn files_of(inputs: &Inputs) -> Vec<PathBuf> {
    let run = &inputs.run;
    let calibrations = run.channels.iter().filter_map(|channel| channel.calibration.clone());
    run.path.iter().cloned().chain([run.log.file.clone()]).chain(calibrations).collect()
}

/// A fitted calibration as `calibrate` shows it.
#[derive(Debug, Clone)]
pub struct Fitted {
    pub name: String,
    /// What calibration.json holds, by the contract's keys.
    pub report: serde_json::Value,
    /// Empty where there were no points to fit.
    pub residuals: Vec<ResidualPoint>,
    /// N; capacity, or the heaviest weight.
    pub full_scale_n: f64,
    /// Files a result must never replace.
    pub files: Vec<PathBuf>,
}

/// Reads and fits a calibration file.
pub fn fit(file: &Path) -> Result<Fitted, Problem> {
    File::open(file).map_err(|error| unreadable(file, &error))?;
    Err(Problem::new("calibrations cannot be fitted yet").in_file(file))
}

/// Reads a log.
pub fn read_log(file: &Path, request: &ReadRequest) -> Result<Log, Problem> {
    let mut source = File::open(file).map_err(|error| unreadable(file, &error))?;
    if source.metadata().is_ok_and(|data| data.is_dir()) {
        return Err(Problem::new("this is a folder").in_file(file).expected("the log itself"));
    }
    crate::log::read(&mut source, file, request)
}

/// What `inspect` finds in the samples of a log, in the log's own units.
#[derive(Debug, Clone, PartialEq, Default, serde::Serialize)]
pub struct InspectFindings {
    /// Column and standard deviation of its quiet record.
    pub noise: Vec<(String, f64)>,
    pub resonance_hz: Option<f64>,
    /// Start and end in s of log time, and peak.
    pub bursts: Vec<(f64, f64, f64)>,
}

/// Looks into the samples of a log.
pub fn findings(log: &Log) -> InspectFindings {
    let _ = log;
    InspectFindings::default()
}
