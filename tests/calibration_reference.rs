//! Published calibrations and fits, through the same path a calibration file takes.

use burntally::calibration::{Calibrated, CalibrationReport, ScaleSource, load_text};
use burntally::quantity::Measured;
use burntally::run::SiteSpec;
use std::path::Path;

fn calibrated(text: &str) -> Calibrated {
    let path = Path::new("tests/reference/cell.toml");
    load_text(path, text, &SiteSpec::default(), None).unwrap_or_else(|problem| panic!("{problem}"))
}

/// A calibration file from a table of (force in N, reading).
fn file_of(pairs: &[(f64, f64)], rest: &str) -> String {
    let points: Vec<String> = pairs.iter().map(|(force, reading)| format!("[{force:?}, {reading:?}]")).collect();
    format!("[points]\nunit = \"N\"\nreading_unit = \"mV\"\nup = [{}]\n{rest}", points.join(", "))
}

/// The columns of a two-column reference table.
fn table(text: &str) -> Vec<(f64, f64)> {
    text.lines()
        .skip(1)
        .filter(|line| !line.trim().is_empty())
        .map(|line| {
            let mut fields = line.split(',').map(|field| field.trim().parse::<f64>().expect("a number"));
            (fields.next().expect("first"), fields.next().expect("second"))
        })
        .collect()
}

fn swapped(pairs: Vec<(f64, f64)>) -> Vec<(f64, f64)> {
    pairs.into_iter().map(|(first, second)| (second, first)).collect()
}

/// Eight significant digits: half a unit of the eighth digit of any number is at most 5e-8 of it; hold 1e-8.
fn eight_digits(found: f64, expected: f64) {
    assert!((found / expected - 1.0).abs() < 1e-8, "{found} {expected}");
}

fn deviations(report: &CalibrationReport) -> Vec<f64> {
    let covariance = report.covariance.as_ref().expect("a covariance");
    (0..covariance.len()).map(|at| covariance[at][at].sqrt()).collect()
}

/// NIST Statistical Reference Datasets, linear regression, Norris: certified values.
#[test]
fn norris() {
    let pairs = swapped(table(include_str!("reference/norris.csv")));
    assert_eq!(pairs.len(), 36);
    let report = calibrated(&file_of(&pairs, "[fit]\ndegree = 1\n")).report;
    eight_digits(report.coefficients[0], -0.262323073774029);
    eight_digits(report.coefficients[1], 1.00211681802045);
    eight_digits(deviations(&report)[0], 0.232818234301152);
    eight_digits(deviations(&report)[1], 0.000429796848199937);
    eight_digits(report.residual_standard_deviation.unwrap(), 0.884796396144373);
    assert_eq!(report.residual_degrees_of_freedom, 34);
    // the line is all there is to see
    assert_eq!(calibrated(&file_of(&pairs, "")).report.degree, 1);
}

/// NIST Statistical Reference Datasets, linear regression, Pontius (a load-cell calibration): certified values. The
/// covariance is a 60-digit refit; inverse predictions by the same refit.
#[test]
fn pontius() {
    let pairs = swapped(table(include_str!("reference/pontius.csv")));
    assert_eq!(pairs.len(), 40);
    let forced = calibrated(&file_of(&pairs, "[fit]\ndegree = 2\n"));
    let report = &forced.report;
    for (found, expected) in
        report.coefficients.iter().zip([0.000673565789473684, 7.32059160401003e-07, -3.16081871345029e-15])
    {
        eight_digits(*found, expected);
    }
    for (found, expected) in
        deviations(report).iter().zip([0.000107938612033077, 1.57817399981659e-10, 4.86652849992036e-17])
    {
        eight_digits(*found, expected);
    }
    eight_digits(report.residual_standard_deviation.unwrap(), 0.000205177424076185);
    let covariance = report.covariance.as_ref().unwrap();
    eight_digits(covariance[0][1], -1.514042797694806e-14);
    eight_digits(covariance[0][2], 4.103097012723051e-21);
    eight_digits(covariance[1][2], -7.460176386769185e-27);
    // NIST/SEMATECH e-Handbook 4.6.1 works this example: the quadratic is what the readings ask for
    let free = calibrated(&file_of(&pairs, ""));
    assert_eq!(free.report.degree, 2, "{}", free.report.reason);
    for (reading, force) in [
        (0.5, 684105.5006485805),
        (1.0, 1373231.9089195845),
        (1.239722, 1705105.5688517152),
        (1.5, 2066533.6717096039),
        (2.0, 2764087.6157030035),
    ] {
        eight_digits(free.calibration.force_n(reading).unwrap(), force);
    }
}

/// The same from a table beside the calibration file.
#[test]
fn points_from_a_table() {
    let pairs = swapped(table(include_str!("reference/pontius.csv")));
    let folder = tempfile::tempdir().unwrap();
    let lines: Vec<String> = pairs.iter().map(|(force, reading)| format!("{force},{reading},up")).collect();
    std::fs::write(folder.path().join("points.csv"), format!("mass,reading,direction\n{}\n", lines.join("\n")))
        .unwrap();
    let cell = folder.path().join("cell.toml");
    std::fs::write(&cell, "[points]\nunit = \"N\"\nreading_unit = \"mV\"\nfile = \"points.csv\"\n").unwrap();
    let found = burntally::calibration::load(&cell, &SiteSpec::default(), None).unwrap();
    assert_eq!(found.report.coefficients, calibrated(&file_of(&pairs, "")).report.coefficients);
    assert_eq!(found.files.len(), 2);
}

/// NIST/SEMATECH e-Handbook 2.3.6.5, load cell: refit in 60 digits. The printed residual standard deviation 3.76353e-05
/// is single precision and not used.
#[test]
fn handbook_load_cell() {
    let pairs = table(include_str!("reference/handbook_loadcell_2365.csv"));
    assert_eq!(pairs.len(), 33);
    let report = calibrated(&file_of(&pairs, "")).report;
    assert_eq!(report.degree, 2, "{}", report.reason);
    eight_digits(report.coefficients[0], -1.839804672679876e-05);
    eight_digits(report.coefficients[1], 0.10010248539736545);
    eight_digits(report.coefficients[2], 7.031865114818033e-06);
    eight_digits(deviations(&report)[1], 4.838699447617109e-06);
    eight_digits(report.residual_standard_deviation.unwrap(), 3.7640294199263725e-05);
    let line = calibrated(&file_of(&pairs, "[fit]\ndegree = 1\n")).report;
    eight_digits(line.coefficients[1], 0.10026736213102952);
    eight_digits(line.residual_standard_deviation.unwrap(), 0.00023897026863004304);
    // all readings rising: three at each load, spread by at most 0.00009 to 0.00012 of 1.905
    assert!((0.004..0.007).contains(&report.repeatability_percent.unwrap()), "{:?}", report.repeatability_percent);
    assert_eq!(report.hysteresis_percent, None);
}

/// NIST/SEMATECH e-Handbook, line-width calibration: refit in 60 digits.
#[test]
fn handbook_line() {
    let pairs = table(include_str!("reference/handbook_linewidth_calibration.csv"));
    let report = calibrated(&file_of(&pairs, "")).report;
    assert_eq!(report.degree, 1, "{}", report.reason);
    eight_digits(report.coefficients[0], 0.2357622902929844);
    eight_digits(report.coefficients[1], 0.9870377142845892);
    eight_digits(report.covariance.as_ref().unwrap()[0][1], -7.64945263113703e-05);
    eight_digits(report.residual_standard_deviation.unwrap(), 0.062031959377696205);
}

/// Forces of weights: ASTM E4 8.1.1, F = M g (1 - d/D), and OIML D 28 conventional mass; recomputed values.
#[test]
fn dead_weights_in_air() {
    let force = |mass: f64, gravity: f64, density: &str| {
        let text = format!(
            "[site]\ngravity = \"{gravity} m/s2\"\n[weights]\n{density}\n[points]\nunit = \"kg\"\nreading_unit = \"count\"\n\
             up = [[0, 0], [{mass}, 1000]]\n"
        );
        calibrated(&text).calibration.range_n.unwrap()[1]
    };
    // printed to ten digits or more
    let close = |found: f64, expected: f64| assert!((found / expected - 1.0).abs() < 1e-10, "{found} {expected}");
    close(force(10.0, 9.80665, "density = \"8000 kg/m3\""), 98.05179002499999);
    close(force(10.0, 9.80665, "density = \"7850 kg/m3\""), 98.05150894267514);
    close(force(5.0, 9.79563577, "density = \"7800 kg/m3\""), 48.970643745561546);
    // no density: conventional masses, the same force whatever they are made of
    close(force(1.0, 9.80665, ""), 9.8051790025);
    // an exact pound force takes 100.12774632728285 lb of steel where g is 979563.577 mGal
    let text = "[site]\ngravity = \"9.79563577 m/s2\"\n[weights]\ndensity = \"7850 kg/m3\"\n[points]\nunit = \"lb\"\n\
                reading_unit = \"mV/V\"\nup = [[0, 0], [100.12774632728285, 2]]\n";
    close(calibrated(text).calibration.range_n.unwrap()[1] / 4.4482216152605, 100.0);
}

/// Gravity of the weights' site enters as it is: relative, and known by its source.
#[test]
fn gravity_and_buoyancy_are_relative_errors() {
    let site = SiteSpec { gravity_m_s2: Some(Measured::within(9.8, 0.0098)), ..SiteSpec::default() };
    let text = "[weights]\ntolerance = \"0 %\"\n[points]\nunit = \"kg\"\nreading_unit = \"mV\"\nup = [[0, 0], [1, 1], [2, 2], [3, 3]]\n";
    let found = load_text(Path::new("cell.toml"), text, &site, None).unwrap().calibration;
    let part = |source: ScaleSource| {
        let errors = found.errors.as_ref().unwrap();
        errors
            .iter()
            .filter(|error| error.source == source)
            .map(|error| found.force_error_n(error, 100.0).powi(2))
            .sum::<f64>()
            .sqrt()
    };
    assert!((part(ScaleSource::Gravity) - 0.1 / 3f64.sqrt()).abs() < 1e-9);
    // 10 % of 1.2/8000, rectangular
    assert!((part(ScaleSource::Buoyancy) - 100.0 * 1.5e-5 / 3f64.sqrt() / 0.99985).abs() < 1e-9);
    assert_eq!(part(ScaleSource::Weights), 0.0);
}
