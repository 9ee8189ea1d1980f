//! Calibration files: TOML with exactly one of `[points]`, `[constants]`, `[rating]`.

use super::Calibration;
use super::file_points::from_points;
use super::forms::{self, Constants, Rating};
use super::report::CalibrationReport;
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Unit};
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
pub(super) struct Cell {
    pub name: String,
    /// N or Pa.
    pub capacity: Option<(f64, Dimension)>,
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
    let stated = table.limits("slope_uncertainty")?;
    if let (Some(_), Some(stated)) = (own, &stated) {
        let problem =
            Problem::new("the slope's uncertainty is stated twice").remedy("keep slope_uncertainty, or the ± in slope");
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
        slope_relative: own.or(stated.map(|found| found.value / 3f64.sqrt())),
        zero: zero.unwrap_or(0.0),
    };
    let mut calibration =
        forms::constants(cell.name.clone(), &constants, gravity).map_err(|problem| table.problem(problem))?;
    calibration.capacity_n = capacity_of(cell, calibration.measures);
    Ok(calibration)
}

pub(super) fn capacity_of(cell: &Cell, measures: Dimension) -> Option<f64> {
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
    let accuracy = table.limits("accuracy")?;
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
        accuracy: accuracy.map(|found| found.value),
    };
    let natural = match (rating.adc_bits, rating.excitation_v) {
        (Some(_), _) => "count",
        (None, Some(_)) => "mV",
        (None, None) => "mV/V",
    };
    let unit = wanted.or_else(|| quantity::find(natural)).ok_or_else(|| Problem::new("no reading unit"))?;
    forms::rating(cell.name.clone(), &rating, unit).map_err(|problem| table.problem(problem))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibration::{ErrorShape, ScaleSource};

    const POINTS: &str =
        "[points]\nunit = \"kg\"\nreading_unit = \"count\"\nup = [[0, 10.0], [5, 510.0], [10, 1011.0]]\n";

    fn read(text: &str) -> Result<Calibrated, Problem> {
        load_text(Path::new("bench/cell.toml"), text, &SiteSpec::default(), None)
    }

    fn unit(symbol: &str) -> Option<Unit> {
        quantity::find(symbol)
    }

    #[test]
    fn a_full_file_by_points() {
        let text = "[cell]\nname = \"2 kN S-beam\"\ncapacity = \"2 kN\"\ndate = \"2026-04-02\"\n[site]\nlatitude = \"44.7 deg\"\n\
            height = \"310 m\"\n[weights]\ndensity = \"7850 kg/m3\"\ntolerance = \"0.05 %\"\nerrors = \"each\"\n[points]\nunit = \"kg\"\n\
            reading_unit = \"count\"\nup = [[0, 8123.4], [5, 52311.0], [10, 96490.2]]\ndown = [[10, 96502.0], [5, 52330.5], [0, 8125.1]]\n\
            [fit]\ndegree = 1\n";
        let found = read(text).unwrap_or_else(|problem| panic!("{problem}"));
        assert_eq!(found.calibration.name, "2 kN S-beam");
        assert_eq!(found.calibration.capacity_n, Some(2000.0));
        assert_eq!(found.calibration.cautions, Vec::<String>::new());
        assert!(found.report.hysteresis_percent.is_some() && found.report.weights_covariance.is_some());
        let sources: std::collections::BTreeSet<_> =
            found.calibration.errors.iter().flatten().map(|error| error.source).collect();
        for source in [
            ScaleSource::Fit,
            ScaleSource::Weights,
            ScaleSource::Gravity,
            ScaleSource::Buoyancy,
            ScaleSource::Extrapolation,
        ] {
            assert!(sources.contains(&source), "{source:?}");
        }
        let json = serde_json::to_value(&found.report).unwrap();
        for key in [
            "degree",
            "coefficients",
            "covariance",
            "residual_standard_deviation",
            "reading_unit",
            "nonlinearity_percent",
            "hysteresis_percent",
            "repeatability_percent",
            "range_n",
            "points",
        ] {
            assert!(json.get(key).is_some(), "{key}");
        }
        assert!(json["repeatability_percent"].is_null());
    }

    /// Two points say nothing of scatter: no covariance, a caution, and what the weights do is still known.
    #[test]
    fn two_points_claim_no_scatter() {
        let two = "[points]\nunit = \"kg\"\nreading_unit = \"mV\"\nup = [[0, 0.1], [10, 5.3]]\n";
        let bare = read(two).unwrap();
        assert_eq!(bare.calibration.errors, None);
        assert_eq!((&bare.report.covariance, bare.report.residual_standard_deviation), (&None, None));
        assert!(bare.calibration.cautions.iter().any(|caution| caution.contains("as many coefficients")));
        let stated = read(&format!("[weights]\ntolerance = \"5 g\"\n{two}")).unwrap();
        let errors = stated.calibration.errors.as_ref().unwrap();
        assert!(errors.iter().all(|error| error.source != ScaleSource::Fit));
        let weights = errors.iter().find(|error| error.source == ScaleSource::Weights).unwrap();
        let top = stated.calibration.range_n.unwrap()[1];
        // 5 g of 10 kg, rectangular
        let expected = top * 5e-4 / 3f64.sqrt();
        let found = stated.calibration.force_error_n(weights, top).abs();
        assert!((found / expected - 1.0).abs() < 1e-3, "{found} {expected}");
    }

    /// A shared error is invisible in scatter: without its tolerance the scale's error is not known.
    #[test]
    fn a_shared_error_without_tolerance_is_unknown() {
        assert!(read(POINTS).unwrap().calibration.errors.is_some());
        assert_eq!(read(&format!("[weights]\nerrors = \"common\"\n{POINTS}")).unwrap().calibration.errors, None);
        let common = read(&format!("[weights]\nerrors = \"common\"\ntolerance = \"0.3 %\"\n{POINTS}")).unwrap();
        let errors = common.calibration.errors.unwrap();
        let weights: Vec<_> = errors.iter().filter(|error| error.source == ScaleSource::Weights).collect();
        assert_eq!(weights.len(), 1);
        assert_eq!(weights[0].shape, ErrorShape::Relative(0.003 / 3f64.sqrt()));
    }

    #[test]
    fn readings_in_another_unit_are_converted_or_refused() {
        let text = POINTS.replace("count", "mV");
        let volts = load_text(Path::new("c.toml"), &text, &SiteSpec::default(), unit("V")).unwrap().calibration;
        let millivolts = read(&text).unwrap().calibration;
        assert!((volts.force_n(0.5).unwrap() - millivolts.force_n(500.0).unwrap()).abs() < 1e-9);
        let problem = load_text(Path::new("c.toml"), POINTS, &SiteSpec::default(), unit("mV")).unwrap_err();
        assert!(problem.found.contains("mV") && problem.found.contains("count"));
        assert_eq!(problem.file.as_deref(), Some(Path::new("c.toml")));
    }

    #[test]
    fn constants_and_rating() {
        let line = read("[constants]\nslope = \"0.000113 N/count\"\nslope_uncertainty = \"0.3 %\"\nzero = 8123\n")
            .unwrap()
            .calibration;
        assert!((line.force_n(8123.0 + 1e6).unwrap() - 113.0).abs() < 1e-9);
        assert!((line.force_uncertainty_n(100.0).unwrap() - 0.3 / 3f64.sqrt()).abs() < 1e-12);
        assert_eq!(read("[constants]\nslope = \"0.000113 N/count\"\n").unwrap().calibration.errors, None);
        let sheet = "[cell]\ncapacity = \"2 kN\"\n[rating]\nrated_output = \"2.0 mV/V\"\nexcitation = \"5 V\"\naccuracy = \"0.25 %\"\n";
        let millivolts = load_text(Path::new("c.toml"), sheet, &SiteSpec::default(), unit("mV")).unwrap().calibration;
        assert!((millivolts.force_n(10.0).unwrap() - 2000.0).abs() < 1e-9);
        let problem = load_text(Path::new("c.toml"), sheet, &SiteSpec::default(), unit("count")).unwrap_err();
        assert!(problem.to_string().contains("adc_bits"), "{problem}");
    }

    #[test]
    fn refusals_have_a_line_and_a_remedy() {
        let with = |extra: &str| format!("{POINTS}{extra}");
        let cases: Vec<(String, u64, &str)> = vec![
            ("[cell]\nname = \"x\"\n".into(), 1, "none of [points]"),
            (with("[constants]\nslope = \"1 N/V\"\n"), 5, "exactly one"),
            (with("[fit]\ndegree = 4\n"), 6, "1, 2 or 3"),
            (with("[fit]\ndegree = 3\n"), 1, "distinct loads"),
            (with("[weights]\ntolerance = 0.5 \nmasses = 3\n"), 7, "tolerance"),
            (with("[weights]\nerrors = \"eech\"\n"), 6, "each"),
            (with("[weights]\ndensity = \"7.85 kg/m3\"\n"), 6, "7850"),
            (with("[weights]\ntolerance = \"1 s\"\n"), 6, "a plain ratio"),
            (POINTS.replace("\"kg\"", "\"V\""), 2, "voltage"),
            (POINTS.replace("\"count\"", "\"kounts\""), 3, "count"),
            (POINTS.replace("[5, 510.0]", "[5]"), 4, "pair"),
            (POINTS.replace("[5, 510.0]", "[5, nan]"), 4, "pair"),
            ("[points]\nunit = \"kg\"\nreading_unit = \"count\"\nup = [[0, 1], [0, 1.1]]\n".into(), 1, "distinct"),
            ("[points]\nunit = \"kg\"\nreading_unit = \"count\"\nup = [[0, 7], [5, 7]]\n".into(), 1, "do not change"),
            ("[points]\nunit = \"kg\"\nreading_unit = \"count\"\nup = [[0, 7]]\n".into(), 1, "at least two"),
            ("[points]\nunit = \"kg\"\nup = [[0, 7]]\n".into(), 1, "reading_unit"),
            ("[constants]\nslope = 0.1\n".into(), 2, "N/count"),
            ("[constants]\nslope = \"5 N\"\n".into(), 2, "a force per count"),
            ("[constants]\nslope = \"5 ± 1 N/V\"\nslope_uncertainty = \"1 %\"\n".into(), 3, "twice"),
            ("[constants]\nslope = \"5 N/V\"\nslope_uncertainty = \"1 ± 0.1 %\"\n".into(), 3, "half-width"),
            (with("[weights]\ntolerance = \"5 ± 1 g\"\n"), 6, "half-width"),
            ("[constants]\nslop = \"5 N/V\"\n".into(), 2, "slope"),
            ("[rating]\nrated_output = \"2 mV/V\"\n".into(), 1, "capacity"),
            ("[rating]\nexcitation = \"2 V\"\n[cell]\ncapacity = \"2 kN\"\n".into(), 1, "rated_output"),
        ];
        for (text, line, part) in cases {
            let problem = read(&text).expect_err(&text);
            let message = problem.to_string();
            assert_eq!(problem.line, Some(line), "{text}\n{message}");
            assert!(message.contains(part), "{text}\n{message}");
        }
    }

    proptest::proptest! {
        #[test]
        fn never_panics(cut in 0usize..400, junk in "\\PC{0,12}") {
            let at = cut.min(POINTS.len());
            let _ = read(&format!("{}{junk}{}", &POINTS[..at], &POINTS[at..]));
        }

        #[test]
        fn any_points_are_fitted_or_refused(points in proptest::collection::vec((proptest::num::f64::ANY, proptest::num::f64::ANY), 0..8)) {
            let list: Vec<String> = points.iter().map(|(load, reading)| format!("[{load:e}, {reading:e}]").replace("NaN", "nan")).collect();
            let text = format!("[points]\nunit = \"N\"\nreading_unit = \"mV\"\nup = [{}]\n", list.join(", "));
            if let Ok(found) = read(&text) {
                let _ = found.calibration.force_n(1.0);
                let _ = found.calibration.force_uncertainty_n(1.0);
            }
        }
    }
}
