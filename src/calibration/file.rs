//! Calibration files: TOML with exactly one of `[points]`, `[constants]`, `[rating]`.

use super::forms::{self, Constants, Rating};
use super::points::{self, Listed, Points};
use super::report::CalibrationReport;
use super::weights::{AIR_DENSITY_KG_M3, CONVENTIONAL_DENSITY_KG_M3, Tolerance, WeightErrors};
use super::{Calibration, table};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured, Unit};
use crate::run::document::{Document, Table};
use crate::run::{Gravity, SiteSpec, gravity, read_site};
use std::path::{Path, PathBuf};

/// A calibration read: the curve to use, what calibration.json says of it, and the files it came from.
#[derive(Debug, Clone, PartialEq)]
pub struct Calibrated {
    pub calibration: Calibration,
    pub report: CalibrationReport,
    /// The calibration file first, then a table of points where it names one.
    pub files: Vec<PathBuf>,
}

/// Reads a calibration file. `run_site`: the site to use where the file names none. `reading_unit`: the unit of the
/// readings it will be used on; `None`: as the file has it.
///
/// # Errors
/// A missing file, bad TOML, unknown or missing keys, wrong units, points that cannot be fitted, readings in a unit of
/// another kind.
pub fn load(path: &Path, run_site: &SiteSpec, reading_unit: Option<Unit>) -> Result<Calibrated, Problem> {
    from_document(&Document::read(path)?, run_site, reading_unit)
}

/// As [`load`], from text at hand; `path` is for messages and for what is relative to it.
///
/// # Errors
/// As [`load`].
pub fn load_text(
    path: &Path,
    text: &str,
    run_site: &SiteSpec,
    reading_unit: Option<Unit>,
) -> Result<Calibrated, Problem> {
    from_document(&Document::from_text(path, text), run_site, reading_unit)
}

/// `[cell]`.
struct Cell {
    name: String,
    /// N or Pa.
    capacity: Option<(f64, Dimension)>,
}

fn from_document(document: &Document, run_site: &SiteSpec, wanted: Option<Unit>) -> Result<Calibrated, Problem> {
    let parsed = document.parse()?;
    let root = parsed.root();
    root.only(&["cell", "site", "weights", "points", "fit", "constants", "rating"])?;
    let forms: Vec<&str> = ["points", "constants", "rating"].into_iter().filter(|form| root.has(form)).collect();
    let [form] = forms.as_slice() else {
        let found = match forms.as_slice() {
            [] => "none of [points], [constants], [rating] is there".to_string(),
            several => format!("[{}] are all there", several.join("] and [")),
        };
        let at = forms.last().copied().unwrap_or("points");
        return Err(root.problem_with(
            at,
            Problem::new(found).expected("exactly one of [points], [constants], [rating]").remedy(
                "keep [points] where weights were hung, [constants] for a known slope, [rating] for a data sheet alone",
            ),
        ));
    };
    if *form != "points" {
        for other in ["weights", "fit"] {
            if root.has(other) {
                let problem = Problem::new(format!("[{other}] is there without [points]"))
                    .expected("[weights] and [fit] only beside [points]")
                    .remedy(format!("remove [{other}]"));
                return Err(root.problem_with(other, problem));
            }
        }
    }
    let site = match root.table("site")? {
        Some(table) => {
            table.only(&["gravity", "latitude", "height"])?;
            read_site(&table)?
        }
        None => run_site.clone(),
    };
    let gravity = gravity(&site);
    let cell = cell(&root)?;
    let mut files = vec![document.path.clone()];
    let mut calibrated = match *form {
        "points" => from_points(&root, &cell, gravity, &mut files)?,
        "constants" => plain(from_constants(&root, &cell, &gravity)?, "slope as stated"),
        _ => plain(from_rating(&root, &cell, wanted)?, "rated output of the data sheet"),
    };
    if let Some(unit) = wanted {
        calibrated.calibration =
            calibrated.calibration.in_reading_unit(unit).map_err(|problem| problem.in_file(&document.path))?;
    }
    calibrated.files = files;
    Ok(calibrated)
}

fn cell(root: &Table<'_>) -> Result<Cell, Problem> {
    let stem = root.document().path.file_stem().map_or("cell".to_string(), |stem| stem.to_string_lossy().into_owned());
    let Some(table) = root.table("cell")? else { return Ok(Cell { name: stem, capacity: None }) };
    table.only(&["name", "capacity", "date"])?;
    table.date("date")?;
    let capacity = match table.quantity_among("capacity", &[Dimension::Force, Dimension::Mass, Dimension::Pressure])? {
        Some(found) if found.value.0.value > 0.0 => {
            let (measured, unit) = found.value;
            // a capacity in kilograms is a nominal force; standard gravity is what it means
            Some(match unit.dimension {
                Dimension::Mass => (measured.value * quantity::STANDARD_GRAVITY_M_S2, Dimension::Force),
                other => (measured.value, other),
            })
        }
        Some(found) => {
            let problem = Problem::new("cell.capacity is not above zero").remedy("write capacity = \"2 kN\"");
            return Err(table.problem_at(&found.span, problem));
        }
        None => None,
    };
    Ok(Cell { name: table.text("name")?.map_or(stem, |found| found.value), capacity })
}

/// A calibration that was not fitted, with a report that says so by its nulls.
fn plain(calibration: Calibration, reason: &str) -> Calibrated {
    let report = CalibrationReport {
        name: calibration.name.clone(),
        force_unit: calibration.measures.ucum().to_string(),
        degree: 1,
        reason: reason.to_string(),
        coefficients: calibration.coefficients.clone(),
        covariance: None,
        residual_standard_deviation: None,
        residual_degrees_of_freedom: 0,
        weights_covariance: None,
        noise_standard_deviation: None,
        reading_unit: calibration.reading_unit.symbol.to_string(),
        nonlinearity_percent: None,
        hysteresis_percent: None,
        repeatability_percent: None,
        range_n: None,
        capacity_n: calibration.capacity_n,
        gravity_m_s2: None,
        points: Vec::new(),
        findings: calibration.findings.clone(),
        cautions: calibration.cautions.clone(),
    };
    Calibrated { calibration, report, files: Vec::new() }
}

/// Limits stand in the file without the sign ±: a plain value is the half-width.
fn standard_of(limits: Measured) -> f64 {
    limits.standard_uncertainty.unwrap_or(limits.value.abs() / 3f64.sqrt())
}

fn from_constants(root: &Table<'_>, cell: &Cell, gravity: &Gravity) -> Result<Calibration, Problem> {
    let Some(table) = root.table("constants")? else { return Err(Problem::new("[constants] is missing")) };
    table.only(&["slope", "slope_uncertainty", "zero"])?;
    let slopes = [
        Dimension::ForcePerCount,
        Dimension::ForcePerVolt,
        Dimension::ForcePerVoltageRatio,
        Dimension::MassPerCount,
        Dimension::MassPerVolt,
        Dimension::MassPerVoltageRatio,
        Dimension::PressurePerCount,
        Dimension::PressurePerVolt,
        Dimension::PressurePerVoltageRatio,
    ];
    let Some(found) = table.quantity_among("slope", &slopes)? else {
        return Err(table.missing(
            "slope",
            "the force per reading",
            "write slope = \"0.000113 N/count\" under [constants]",
        ));
    };
    let (slope, slope_unit) = found.value;
    if slope.value == 0.0 {
        return Err(
            table.problem_at(&found.span, Problem::new("constants.slope is zero").expected("a force per reading"))
        );
    }
    let own = slope.standard_uncertainty.map(|standard| standard / slope.value.abs());
    let stated = table.quantity("slope_uncertainty", Dimension::Ratio)?;
    if let (Some(_), Some(stated)) = (own, &stated) {
        let problem =
            Problem::new("the slope's uncertainty is stated twice").remedy("keep slope_uncertainty, or the ± in slope");
        return Err(table.problem_at(&stated.span, problem));
    }
    if let Some(stated) = &stated
        && !(0.0..1.0).contains(&stated.value.value)
    {
        let problem = Problem::new("constants.slope_uncertainty is out of range")
            .expected("limits, 0 to 100 %")
            .remedy("write slope_uncertainty = \"0.3 %\"");
        return Err(table.problem_at(&stated.span, problem));
    }
    let unit = forms::reading_unit_of(slope_unit);
    let zero = match (table.raw_text("zero"), unit) {
        // a zero with its unit is understood as well as a bare reading
        (Some(_), Some(unit)) => table.quantity("zero", unit.dimension)?.map(|found| found.value.value / unit.factor),
        _ => table.number("zero")?.map(|found| found.value),
    };
    let constants = Constants {
        slope,
        slope_unit,
        slope_relative: own.or(stated.map(|found| standard_of(found.value))),
        zero: zero.unwrap_or(0.0),
    };
    let mut calibration =
        forms::constants(cell.name.clone(), &constants, gravity).map_err(|problem| table.problem(problem))?;
    calibration.capacity_n = capacity_of(cell, calibration.measures);
    Ok(calibration)
}

fn capacity_of(cell: &Cell, measures: Dimension) -> Option<f64> {
    cell.capacity.filter(|(_, dimension)| *dimension == measures).map(|(capacity, _)| capacity)
}

fn from_rating(root: &Table<'_>, cell: &Cell, wanted: Option<Unit>) -> Result<Calibration, Problem> {
    let Some(table) = root.table("rating")? else { return Err(Problem::new("[rating] is missing")) };
    table.only(&["rated_output", "excitation", "accuracy", "adc_bits", "adc_reference", "gain"])?;
    let Some(rated) = table.positive("rated_output", Dimension::VoltageRatio)? else {
        return Err(table.missing(
            "rated_output",
            "the bridge output at capacity",
            "write rated_output = \"2.0 mV/V\" under [rating]",
        ));
    };
    let Some((capacity, measures)) = cell.capacity else {
        return Err(table.problem(
            Problem::new("cell.capacity is missing")
                .expected("the force at which the rated output is reached")
                .remedy("write [cell] and capacity = \"2 kN\""),
        ));
    };
    let accuracy = table.quantity("accuracy", Dimension::Ratio)?;
    if let Some(found) = &accuracy
        && !(0.0..1.0).contains(&found.value.value)
    {
        let problem = Problem::new("rating.accuracy is out of range")
            .expected("limits as a fraction of capacity, 0 to 100 %")
            .remedy("write accuracy = \"0.25 %\"");
        return Err(table.problem_at(&found.span, problem));
    }
    let adc_bits = table.counting("adc_bits")?;
    if let Some(found) = &adc_bits
        && found.value > 64
    {
        let problem =
            Problem::new(format!("rating.adc_bits is {}", found.value)).expected("bits of the converter, 1 to 64");
        return Err(table.problem_at(&found.span, problem));
    }
    let gain = table.number("gain")?;
    if let Some(found) = &gain
        && found.value <= 0.0
    {
        let problem =
            Problem::new("rating.gain is not above zero").expected("the amplifier's gain").remedy("write gain = 128");
        return Err(table.problem_at(&found.span, problem));
    }
    let rating = Rating {
        rated_output: rated.value,
        capacity,
        measures,
        excitation_v: table.positive("excitation", Dimension::Voltage)?.map(|found| found.value),
        adc_bits: adc_bits.map(|found| found.value as u32),
        adc_reference_v: table.positive("adc_reference", Dimension::Voltage)?.map(|found| found.value),
        gain: gain.map(|found| found.value),
        accuracy: accuracy.map(|found| found.value.value),
    };
    let natural = match (rating.adc_bits, rating.excitation_v) {
        (Some(_), _) => "count",
        (None, Some(_)) => "mV",
        (None, None) => "mV/V",
    };
    let unit = wanted.or_else(|| quantity::find(natural)).ok_or_else(|| Problem::new("no reading unit"))?;
    forms::rating(cell.name.clone(), &rating, unit).map_err(|problem| table.problem(problem))
}

fn from_points(
    root: &Table<'_>,
    cell: &Cell,
    gravity: Gravity,
    files: &mut Vec<PathBuf>,
) -> Result<Calibrated, Problem> {
    let Some(table) = root.table("points")? else { return Err(Problem::new("[points] is missing")) };
    table.only(&["unit", "reading_unit", "up", "down", "file"])?;
    let unit = unit_among(
        &table,
        "unit",
        &[Dimension::Mass, Dimension::Force, Dimension::Pressure],
        "unit = \"kg\" for weights, or \"N\" for forces",
    )?;
    let reading_unit = unit_among(
        &table,
        "reading_unit",
        &[
            Dimension::Count,
            Dimension::Voltage,
            Dimension::VoltageRatio,
            Dimension::Force,
            Dimension::Mass,
            Dimension::Pressure,
        ],
        "reading_unit = \"count\"",
    )?;
    let listed = listed(&table, files)?;
    let weights = weights(root, unit, &gravity)?;
    let degree = match root.table("fit")? {
        Some(fit) => {
            fit.only(&["degree"])?;
            let degree = fit.counting("degree")?;
            if let Some(found) = &degree
                && found.value > 3
            {
                let problem = Problem::new(format!("fit.degree is {}", found.value))
                    .expected("1, 2 or 3")
                    .remedy("write degree = 1");
                return Err(fit.problem_at(&found.span, problem));
            }
            degree.map(|found| found.value)
        }
        None => None,
    };
    let measures = if unit.dimension == Dimension::Pressure { Dimension::Pressure } else { Dimension::Force };
    let points = Points {
        name: cell.name.clone(),
        capacity_n: capacity_of(cell, measures),
        listed,
        unit,
        reading_unit,
        gravity,
        density_kg_m3: weights.density_kg_m3,
        tolerance: weights.tolerance,
        weight_errors: weights.errors,
        weight_errors_stated: weights.errors_stated,
        degree,
    };
    points::calibrate(&points).map_err(|problem| table.problem(problem))
}

fn unit_among(table: &Table<'_>, key: &str, dimensions: &[Dimension], remedy: &str) -> Result<Unit, Problem> {
    let allowed: Vec<&str> =
        quantity::all().iter().filter(|unit| dimensions.contains(&unit.dimension)).map(|unit| unit.symbol).collect();
    let expected = format!("one of: {}", allowed.join(", "));
    let Some(found) = table.text(key)? else {
        return Err(table.missing(key, &expected, &format!("write {remedy} under [{}]", table.name)));
    };
    match quantity::find(&found.value) {
        Some(unit) if dimensions.contains(&unit.dimension) => Ok(unit),
        Some(unit) => {
            let problem = Problem::new(format!("{} is {}, {}", table.full(key), unit.symbol, unit.dimension.words()));
            Err(table.problem_at(&found.span, problem.expected(expected).remedy(format!("write {remedy}"))))
        }
        None => Err(table.problem_at(&found.span, quantity::unknown_unit(&found.value, None).expected(expected))),
    }
}

fn listed(table: &Table<'_>, files: &mut Vec<PathBuf>) -> Result<Vec<Listed>, Problem> {
    let mut listed = Vec::new();
    for (key, rising) in [("up", true), ("down", false)] {
        for found in table.pairs(key)?.unwrap_or_default() {
            let [load, reading] = found.value;
            listed.push(Listed { load, reading, rising });
        }
    }
    match table.text("file")? {
        Some(file) if listed.is_empty() => {
            let path = table.document().resolve(&file.value);
            listed = table::read(&Document::read(&path)?)?;
            files.push(path);
        }
        Some(file) => {
            let problem = Problem::new("[points] holds points and names a file of them")
                .expected("one of the two")
                .remedy("remove file, or up and down");
            return Err(table.problem_at(&file.span, problem));
        }
        None => {}
    }
    if listed.len() < 2 {
        return Err(table.problem(
            Problem::new(format!("[points] holds {} point(s)", listed.len()))
                .expected("at least two loads with their readings")
                .remedy("write up = [[0, 8123.4], [5, 52311.0], [10, 96490.2]]: load, reading"),
        ));
    }
    Ok(listed)
}

struct Weights {
    density_kg_m3: f64,
    tolerance: Option<Tolerance>,
    errors: WeightErrors,
    errors_stated: bool,
}

fn weights(root: &Table<'_>, unit: Unit, gravity: &Gravity) -> Result<Weights, Problem> {
    let mut weights = Weights {
        density_kg_m3: CONVENTIONAL_DENSITY_KG_M3,
        tolerance: None,
        errors: WeightErrors::Each,
        errors_stated: false,
    };
    let Some(table) = root.table("weights")? else { return Ok(weights) };
    table.only(&["density", "tolerance", "errors"])?;
    if let Some(density) = table.positive("density", Dimension::Density)? {
        if density.value < 500.0 || density.value > 25000.0 {
            let problem = Problem::new(format!("weights.density is {} kg/m3", density.value))
                .expected("the density of a solid weight, 500 to 25000 kg/m3")
                .remedy("write density = \"7850 kg/m3\" for steel, or leave it out for conventional masses");
            return Err(table.problem_with("density", problem));
        }
        weights.density_kg_m3 = density.value;
    }
    let kinds = match unit.dimension {
        Dimension::Mass => vec![Dimension::Ratio, Dimension::Mass, Dimension::Force],
        other => vec![Dimension::Ratio, other],
    };
    if let Some(found) = table.quantity_among("tolerance", &kinds)? {
        let (measured, written) = found.value;
        let negative = measured.value < 0.0;
        if negative || written.dimension == Dimension::Ratio && measured.value >= 1.0 {
            let problem = Problem::new("weights.tolerance is out of range")
                .expected("limits of a weight's error, from 0 up")
                .remedy("write tolerance = \"0.05 %\", or \"0.5 g\"");
            return Err(table.problem_at(&found.span, problem));
        }
        let in_air = gravity.value_m_s2 * (1.0 - AIR_DENSITY_KG_M3 / weights.density_kg_m3);
        let scaled = |factor: f64| Measured {
            value: measured.value * factor,
            standard_uncertainty: measured.standard_uncertainty.map(|standard| standard * factor),
            limits: measured.limits.map(|limits| limits * factor),
        };
        weights.tolerance = Some(match written.dimension {
            Dimension::Ratio => Tolerance::Relative(measured),
            Dimension::Mass => Tolerance::ForceN(scaled(in_air)),
            _ => Tolerance::ForceN(measured),
        });
    }
    let words = [("each", WeightErrors::Each), ("stack", WeightErrors::Stack), ("common", WeightErrors::Common)];
    if let Some(errors) = table.word("errors", &words)? {
        weights.errors = errors;
        weights.errors_stated = errors != WeightErrors::Each;
    }
    Ok(weights)
}
