//! What the commands read, each behind one function.

use super::runs::{Source, unreadable};
use crate::burn::events::{self, Expectation};
use crate::calibration;
use crate::condition::{clipping, quiet, ringing};
use crate::load;
use crate::log::{Log, ReadRequest};
use crate::problem::Problem;
use crate::reduce::Inputs;
use crate::report::residuals::{Direction, ResidualPoint};
use crate::run::SiteSpec;
use std::fs::File;
use std::path::{Path, PathBuf};

/// Reads all that a reduction depends on.
pub fn load(source: &Source, calibration: Option<&Path>, unit: Option<&str>) -> Result<Inputs, Problem> {
    match source {
        Source::Described(path) => load::load_run(path),
        Source::BareLog(path) => load::load_bare_log(path, calibration, unit),
    }
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
    inputs.files.iter().map(|input| PathBuf::from(&input.file)).collect()
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

/// Reads and fits a calibration file, at the site it names, else anywhere on Earth.
pub fn fit(file: &Path) -> Result<Fitted, Problem> {
    let read = calibration::load(file, &SiteSpec::default(), None)?;
    let report = &read.report;
    let residuals = report.points.iter().map(|point| ResidualPoint {
        force_n: point.force_n,
        residual_n: point.residual_n,
        direction: if point.direction == "down" { Direction::Down } else { Direction::Up },
    });
    let heaviest_n = report.points.iter().map(|point| point.force_n).fold(0.0, f64::max);
    Ok(Fitted {
        name: report.name.clone(),
        report: serde_json::to_value(report).map_err(|error| Problem::new(error.to_string()).in_file(file))?,
        residuals: residuals.collect(),
        full_scale_n: report.capacity_n.unwrap_or(heaviest_n),
        files: read.files.clone(),
    })
}

/// Reads a log.
pub fn read_log(file: &Path, request: &ReadRequest) -> Result<Log, Problem> {
    let mut source = File::open(file).map_err(|error| unreadable(file, &error))?;
    if source.metadata().is_ok_and(|data| data.is_dir()) {
        return Err(Problem::new("this is a folder").in_file(file).expected("a log").remedy("name the log itself"));
    }
    crate::log::read(&mut source, file, request).map_err(|problem| problem.in_file(file))
}

/// What `inspect` finds in the samples of a log, in the log's own units.
#[derive(Debug, Clone, PartialEq, Default, serde::Serialize)]
pub struct InspectFindings {
    /// Column and standard deviation of its longest quiet stretch.
    pub noise: Vec<(String, f64)>,
    /// Where a burst rings, and how fast that dies away.
    pub resonance_hz: Option<f64>,
    pub resonance_damping_ratio: Option<f64>,
    /// Column, start and end in s of log time, and largest departure from the quiet level.
    pub bursts: Vec<(String, f64, f64, f64)>,
}

/// Looks into the samples of a log.
pub fn findings(log: &Log) -> InspectFindings {
    let mut found = InspectFindings::default();
    // A temperature that drifts is no burst; where it is not plain which column is the load, all are looked at.
    let force = super::run_template::force_column(log);
    for column in &log.columns {
        // Missing values would spread through every mean; the one before stands in.
        let mut last = column.values.iter().copied().find(|value| value.is_finite()).unwrap_or(0.0);
        let values: Vec<f64> = column
            .values
            .iter()
            .map(|value| {
                if value.is_finite() {
                    last = *value;
                }
                last
            })
            .collect();
        if values.len() < FEWEST_SAMPLES {
            continue;
        }
        let nothing_known = Expectation { relative_shift: 0.0, shift: 0.0 };
        let cut: Vec<_> = clipping::find_clipping(&values)
            .into_iter()
            .filter(|found| found.is_away_from_rest(&values))
            .flat_map(|found| found.ranges)
            .collect();
        let parts = events::find(&log.time_s, &values, log.interval_s, nothing_known, &cut);
        if let Some(longest) = parts.quiet.iter().max_by_key(|range| range.len())
            && let Some(fit) = quiet::fit(&log.time_s, &values, longest.clone(), 0.0)
        {
            // Where a reading never changes, rounding leaves a last digit that is no noise.
            let largest = values.iter().fold(0.0_f64, |largest, value| largest.max(value.abs()));
            let sd = if fit.sample_sd > 1e-9 * largest { fit.sample_sd } else { 0.0 };
            found.noise.push((column.name.clone(), sd));
        }
        if force.is_some_and(|force| force.number != column.number) {
            continue;
        }
        for event in &parts.events {
            let (Some(start_s), Some(end_s)) =
                (log.time_s.get(event.start), log.time_s.get(event.end.saturating_sub(1)))
            else {
                continue;
            };
            found.bursts.push((column.name.clone(), *start_s, *end_s, event.peak));
            if found.resonance_hz.is_none() {
                let (t, y) = (&log.time_s[event.start..event.end], &values[event.start..event.end]);
                let noise = found.noise.last().map_or(0.0, |(_, sd)| *sd);
                let risen = y.iter().position(|v| (v - event.level_before) / event.peak > 0.5).unwrap_or(0);
                let limit_s = t[risen] + 0.6 * (end_s - start_s);
                let ring = ringing::after(t, y, noise, t[risen], limit_s, LEAST_RING * event.peak.abs());
                found.resonance_hz = ring.map(|ring| ring.frequency_hz);
                found.resonance_damping_ratio = ring.map(|ring| ring.damping_ratio);
            }
        }
    }
    found
}

/// A swing smaller than this share of the burst's peak is not spoken of.
const LEAST_RING: f64 = 0.01;
/// Fewer samples tell nothing of noise and bursts.
const FEWEST_SAMPLES: usize = 16;
