//! What a run names, read into the inputs of its reduction: run.toml, calibration files, the log, and their hashes.

use crate::calibration::{self, Calibration};
use crate::firing::InputFile;
use crate::log::{self, Column, Log, ReadRequest};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Unit};
use crate::reduce::Inputs;
use crate::run::{
    self, ChannelSpec, ColumnRef, LogSpec, MotorSpec, ReductionSpec, Role, RunSpec, SiteSpec, StandSpec, gravity,
};
use sha2::{Digest, Sha256};
use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

/// Reads a run.toml and all it names.
///
/// # Errors
/// A file that is missing or cannot be understood, a channel whose unit is not known, a calibration for another unit.
pub fn load_run(run_toml: &Path) -> Result<Inputs, Problem> {
    let run = run::read(run_toml)?;
    let request = ReadRequest {
        time: run.log.time.clone(),
        rate_hz: run.log.rate_hz.map(|rate| rate.value),
        columns: run.channels.iter().map(|channel| channel.column.clone()).collect(),
    };
    let log = read_log(&run.log.file, &request)?;
    finish(run, log, vec![run_toml.to_path_buf()])
}

/// Reads a log on its own. Its channel is the only numeric column, else the one whose name speaks of load, force, thrust
/// or weight; its unit is the one given, else the log's own, else the calibration's.
///
/// # Errors
/// As [`load_run`]; several columns that could be the load; no unit from anywhere.
pub fn load_bare_log(log: &Path, calibration: Option<&Path>, unit: Option<&str>) -> Result<Inputs, Problem> {
    let unit = unit
        .map(|text| {
            quantity::find(text)
                .ok_or_else(|| quantity::unknown_unit(text, None).expected("the unit of the readings, after --unit"))
        })
        .transpose()?;
    let path = log;
    let mut log = read_log(path, &ReadRequest::default())?;
    let column = the_load(&log).map_err(|problem| problem.in_file(path))?;
    log.columns.retain(|other| other.number == column);
    let id = path.file_stem().map_or_else(String::new, |stem| stem.to_string_lossy().trim().to_string());
    run::check_id(&id)
        .map_err(|problem| problem.in_file(path).remedy("rename the log, or describe the firing in a run.toml"))?;
    let channel = ChannelSpec {
        role: Role::Force,
        column: ColumnRef::Number(column),
        unit,
        calibration: calibration.map(Path::to_path_buf),
        accuracy: None,
        reference: None,
        line: None,
    };
    let run = RunSpec {
        path: None,
        id,
        pour: None,
        date: None,
        log: LogSpec { file: path.to_path_buf(), time: None, rate_hz: None, clock_tolerance: None, averaging_s: None },
        channels: vec![channel],
        stand: StandSpec::default(),
        site: SiteSpec::default(),
        motor: MotorSpec::default(),
        conditions: serde_json::Map::new(),
        tags: serde_json::Map::new(),
        check_loads: Vec::new(),
        reduction: ReductionSpec::default(),
    };
    finish(run, log, Vec::new())
}

fn read_log(path: &Path, request: &ReadRequest) -> Result<Log, Problem> {
    let mut file = File::open(path).map_err(|error| cannot_open(path, &error))?;
    if file.metadata().is_ok_and(|about| about.is_dir()) {
        return Err(Problem::new("this is a folder, not a log").in_file(path).remedy("name the log file itself"));
    }
    log::read(&mut file, path, request).map_err(|problem| problem.in_file(path))
}

fn cannot_open(path: &Path, error: &std::io::Error) -> Problem {
    let found = match error.kind() {
        std::io::ErrorKind::NotFound => "there is no such file".to_string(),
        _ => format!("the file cannot be read: {error}"),
    };
    Problem::new(found).in_file(path).remedy("check the name, and the folder it is relative to")
}

/// Units, calibrations and hashes for a run whose log is read.
fn finish(mut run: RunSpec, mut log: Log, described_in: Vec<PathBuf>) -> Result<Inputs, Problem> {
    let mut files = described_in;
    let mut calibrations = Vec::with_capacity(run.channels.len());
    let run_path = run.path.clone();
    let site = run.site.clone();
    for channel in &mut run.channels {
        let place = |problem: Problem| match (&run_path, channel.line) {
            (Some(path), Some(line)) if problem.file.is_none() => problem.in_file(path).at_line(line),
            (Some(path), _) => problem.in_file(path),
            (None, _) => problem.in_file(&run.log.file),
        };
        if channel.role == Role::Ignition {
            calibrations.push(None);
            continue;
        }
        if channel.unit.is_none() {
            channel.unit = unit_of_log(channel, &mut log).map_err(place)?;
        }
        let calibration = calibrate(channel, &site, &mut files, &mut log).map_err(place)?;
        channel.unit = Some(calibration.reading_unit);
        calibrations.push(Some(calibration));
    }
    files.dedup();
    let mut inputs = Vec::with_capacity(files.len() + 1);
    for file in &files {
        let entry = InputFile { file: file.display().to_string(), sha256: hash(file)? };
        if !inputs.contains(&entry) {
            inputs.push(entry);
        }
    }
    inputs.push(InputFile { file: run.log.file.display().to_string(), sha256: log.sha256.clone() });
    Ok(Inputs { run, log, calibrations, files: inputs })
}

/// The calibration of a force or pressure channel.
fn calibrate(
    channel: &ChannelSpec,
    site: &SiteSpec,
    files: &mut Vec<PathBuf>,
    log: &mut Log,
) -> Result<Calibration, Problem> {
    let wanted = if channel.role == Role::Pressure { Dimension::Pressure } else { Dimension::Force };
    let Some(path) = &channel.calibration else {
        let Some(unit) = channel.unit else {
            return Err(Problem::new("the unit of the readings is not known: the log does not give one")
                .expected("the unit of the channel")
                .remedy("write unit = \"N\" (or count, kg, lbf, mV ...) in the [[channel]], or give --unit"));
        };
        let calibration = calibration::scaled_identity(unit, channel.accuracy, &gravity(site))?;
        return measures(calibration, wanted, &unit);
    };
    let loaded = calibration::load(path, site, channel.unit)?;
    files.extend(loaded.files);
    let calibration = loaded.calibration;
    if channel.unit.is_none() {
        log.findings.push(format!(
            "no unit is given for {}: taken as {}, the reading unit of its calibration",
            column_words(&channel.column),
            calibration.reading_unit.symbol
        ));
    }
    if channel.accuracy.is_some() {
        log.findings.push(format!(
            "the accuracy stated for {} is not used: its calibration has its own uncertainty",
            column_words(&channel.column)
        ));
    }
    let unit = calibration.reading_unit;
    measures(calibration, wanted, &unit)
}

fn measures(calibration: Calibration, wanted: Dimension, unit: &Unit) -> Result<Calibration, Problem> {
    if calibration.measures == wanted {
        return Ok(calibration);
    }
    Err(Problem::new(format!(
        "the channel is to be {}, but \"{}\" (readings in {}) gives {}",
        wanted.words(),
        calibration.name,
        unit.symbol,
        calibration.measures.words()
    ))
    .expected(wanted.words())
    .remedy("correct the channel's role, its unit or its calibration"))
}

/// The unit the log itself gives a channel's column; `None` when it gives none and a calibration may say.
fn unit_of_log(channel: &ChannelSpec, log: &mut Log) -> Result<Option<Unit>, Problem> {
    let written = find_column(log, &channel.column).and_then(|column| column.unit.clone());
    let Some(written) = written.filter(|text| !text.trim().is_empty()) else { return Ok(None) };
    match quantity::find(&written) {
        Some(unit) => {
            let what = column_words(&channel.column);
            log.findings.push(format!("the unit of {what} is {}, as the log gives it", unit.symbol));
            Ok(Some(unit))
        }
        None => Err(quantity::unknown_unit(&written, None)
            .remedy("write the unit in the [[channel]], or give --unit: the log's own is not understood")),
    }
}

fn find_column<'a>(log: &'a Log, wanted: &ColumnRef) -> Option<&'a Column> {
    log.columns.iter().find(|column| match wanted {
        ColumnRef::Name(name) => column.name == *name,
        ColumnRef::Number(number) => column.number == *number,
    })
}

fn column_words(column: &ColumnRef) -> String {
    match column {
        ColumnRef::Name(name) => format!("column \"{name}\""),
        ColumnRef::Number(number) => format!("column {number}"),
    }
}

/// The number of the one column of a bare log that must be the load.
fn the_load(log: &Log) -> Result<usize, Problem> {
    if let [only] = log.columns.as_slice() {
        return Ok(only.number);
    }
    let speaks = |column: &&Column| {
        let name = column.name.to_lowercase();
        ["load", "force", "thrust", "weight"].iter().any(|word| name.contains(word))
    };
    let likely: Vec<&Column> = log.columns.iter().filter(speaks).collect();
    if let [one] = likely.as_slice() {
        return Ok(one.number);
    }
    let names = |columns: Vec<&Column>| columns.iter().map(|column| column.name.clone()).collect::<Vec<_>>().join(", ");
    let found = match likely.as_slice() {
        [] => format!("none of the columns is named as a load: {}", names(log.columns.iter().collect())),
        _ => format!("several columns could be the load: {}", names(likely)),
    };
    Err(Problem::new(found)
        .expected("one column of readings, or one with load, force, thrust or weight in its name")
        .remedy("describe the firing in a run.toml and name the column in [[channel]]"))
}

/// Lower-case hex SHA-256 of a file, read in pieces.
fn hash(path: &Path) -> Result<String, Problem> {
    let mut file = File::open(path).map_err(|error| cannot_open(path, &error))?;
    let mut hasher = Sha256::new();
    let mut piece = [0u8; 16384];
    loop {
        let count = file.read(&mut piece).map_err(|error| cannot_open(path, &error))?;
        if count == 0 {
            break;
        }
        hasher.update(piece.get(..count).unwrap_or_default());
    }
    Ok(hasher.finalize().iter().map(|byte| format!("{byte:02x}")).collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::log::Records;

    fn log_with(columns: &[(&str, Option<&str>)]) -> Log {
        let columns = (2..).zip(columns).map(|(number, (name, unit))| Column {
            name: name.to_string(),
            number,
            unit: unit.map(str::to_string),
            values: vec![1.0, 2.0],
        });
        Log {
            time_s: vec![0.0, 1.0],
            line: vec![1, 2],
            columns: columns.collect(),
            available: vec![],
            interval_s: 1.0,
            clock_resolution_s: 0.0,
            gaps: vec![],
            records: Records::default(),
            repairs: vec![],
            findings: vec![],
            sha256: "00".into(),
            bytes: 0,
        }
    }

    fn run(channel: &str) -> RunSpec {
        let text = format!("[run]\nid = \"A\"\n[log]\nfile = \"a.csv\"\n[site]\ngravity = \"9.8 m/s2\"\n{channel}");
        run::read_text(Path::new("run.toml"), &text).unwrap_or_else(|problem| panic!("{problem}"))
    }

    #[test]
    fn the_load_is_found_or_the_columns_are_listed() {
        assert_eq!(the_load(&log_with(&[("whatever", None)])).unwrap(), 2);
        assert_eq!(the_load(&log_with(&[("temp", None), ("Load cell", None)])).unwrap(), 3);
        let message = the_load(&log_with(&[("a", None), ("b", None)])).unwrap_err().to_string();
        assert!(message.contains("a, b"), "{message}");
        assert!(the_load(&log_with(&[("load a", None), ("load b", None)])).is_err());
    }

    #[test]
    fn masses_become_forces_with_the_gravity_of_the_site() {
        let spec = run("[[channel]]\nrole = \"force\"\ncolumn = \"w\"\naccuracy = \"0.2 %\"\n");
        let inputs = finish(spec, log_with(&[("w", Some("g"))]), vec![]).unwrap();
        let calibration = inputs.calibrations[0].as_ref().unwrap();
        assert!((calibration.force_n(1000.0).unwrap() - 9.8).abs() < 1e-12);
        assert!(inputs.log.findings[0].contains("as the log gives it"));
        assert_eq!(inputs.run.channels[0].unit.unwrap().symbol, "g");
    }

    #[test]
    fn a_unit_from_nowhere_is_refused_at_its_line() {
        let spec = run("[[channel]]\nrole = \"force\"\ncolumn = \"w\"\n");
        let problem = finish(spec, log_with(&[("w", None)]), vec![]).unwrap_err();
        assert_eq!(problem.line, Some(7));
        assert!(problem.remedy.unwrap().contains("unit = "));
        let spec = run("[[channel]]\nrole = \"force\"\ncolumn = \"w\"\n");
        assert!(finish(spec, log_with(&[("w", Some("bar"))]), vec![]).unwrap_err().found.contains("pressure"));
    }

    #[test]
    fn a_calibration_gives_and_checks_the_unit() {
        let folder = tempfile::tempdir().unwrap();
        let cell = folder.path().join("cell.toml");
        std::fs::write(&cell, "[constants]\nslope = \"0.5 N/count\"\nslope_uncertainty = \"0.3 %\"\n").unwrap();
        let channel = |unit: &str| {
            format!("[[channel]]\nrole = \"force\"\ncolumn = \"w\"\ncalibration = '{}'\n{unit}", cell.display())
        };
        let inputs = finish(run(&channel("")), log_with(&[("w", None)]), vec![]).unwrap();
        assert_eq!(inputs.calibrations[0].as_ref().unwrap().force_n(10.0).unwrap(), 5.0);
        assert_eq!(inputs.files.len(), 2);
        assert_eq!(inputs.files[0].sha256.len(), 64);
        let problem = finish(run(&channel("unit = \"mV\"\n")), log_with(&[("w", None)]), vec![]).unwrap_err();
        assert!(problem.found.contains("mV") && problem.found.contains("count"), "{problem}");
    }

    /// FIPS 180-4: the hash of "abc".
    #[test]
    fn hashes_are_lower_case_hex() {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("abc");
        std::fs::write(&file, "abc").unwrap();
        assert_eq!(hash(&file).unwrap(), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
        assert!(hash(&folder.path().join("none")).is_err());
    }
}
