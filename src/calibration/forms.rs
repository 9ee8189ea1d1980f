//! Calibrations without points: a known slope, a data sheet, an instrument that reads forces or masses already.

use super::{Calibration, ErrorDirection, ErrorShape, ScaleSource};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured, Unit};
use crate::run::Gravity;

fn relative(source: ScaleSource, size: f64) -> ErrorDirection {
    ErrorDirection { source, shape: ErrorShape::Relative(size) }
}

/// A straight line through readings, with nothing known beyond it.
pub(super) fn line(
    name: String,
    reading_unit: Unit,
    zero: f64,
    readings_per_n: f64,
    measures: Dimension,
) -> Calibration {
    Calibration {
        name,
        reading_unit,
        coefficients: vec![zero, readings_per_n],
        range_n: None,
        capacity_n: None,
        errors: None,
        measures,
        fit_degrees_of_freedom: None,
        findings: Vec::new(),
        cautions: Vec::new(),
    }
}

/// An instrument that shows forces, masses (force = reading × gravity) or pressures itself.
///
/// `accuracy`: limits of reading, as a fraction; `None`: the scale's error is not known.
///
/// # Errors
/// The unit is one of raw readings: those need a calibration.
pub fn scaled_identity(unit: Unit, accuracy: Option<f64>, gravity: &Gravity) -> Result<Calibration, Problem> {
    let newtons = match unit.dimension {
        Dimension::Force | Dimension::Pressure => unit.factor,
        Dimension::Mass => unit.factor * gravity.value_m_s2,
        _ => {
            return Err(Problem::new(format!("a channel in {} has no calibration", unit.symbol))
                .expected("a calibration, or readings that are forces already")
                .remedy("write calibration = \"cell.toml\" in the [[channel]], or give --calibration FILE"));
        }
    };
    let measures = if unit.dimension == Dimension::Pressure { Dimension::Pressure } else { Dimension::Force };
    let mut calibration = line(unit.symbol.to_string(), unit, 0.0, 1.0 / newtons, measures);
    let by_gravity = unit.dimension == Dimension::Mass;
    if by_gravity {
        calibration.findings.push(format!(
            "readings in {} times gravity {:.5} m/s2 ({})",
            unit.symbol, gravity.value_m_s2, gravity.source
        ));
    }
    if let Some(accuracy) = accuracy {
        let mut errors = vec![relative(ScaleSource::Stated, accuracy / 3f64.sqrt())];
        if by_gravity {
            errors.push(relative(ScaleSource::Gravity, gravity.standard_uncertainty / gravity.value_m_s2));
        }
        calibration.errors = Some(errors);
    } else {
        calibration.cautions.push("no accuracy is stated for the channel: its scale error is not known".to_string());
    }
    Ok(calibration)
}

/// A slope known already: force = slope (reading − zero).
#[derive(Debug, Clone)]
pub(super) struct Constants {
    /// Force, mass or pressure per reading, SI, and the unit it was written in.
    pub slope: Measured,
    pub slope_unit: Unit,
    /// Relative standard uncertainty.
    pub slope_relative: Option<f64>,
    /// In the reading unit.
    pub zero: f64,
}

/// The unit of readings a slope is for: what stands under the line.
pub(super) fn reading_unit_of(slope: Unit) -> Option<Unit> {
    let (_, below) = slope.symbol.split_once('/')?;
    quantity::find(below.trim_start_matches('(').trim_end_matches(')'))
}

pub(super) fn constants(name: String, constants: &Constants, gravity: &Gravity) -> Result<Calibration, Problem> {
    let unit = reading_unit_of(constants.slope_unit)
        .ok_or_else(|| Problem::new(format!("{} is not a force per reading", constants.slope_unit.symbol)))?;
    let by_gravity = matches!(
        constants.slope_unit.dimension,
        Dimension::MassPerCount | Dimension::MassPerVolt | Dimension::MassPerVoltageRatio
    );
    let pressure = matches!(
        constants.slope_unit.dimension,
        Dimension::PressurePerCount | Dimension::PressurePerVolt | Dimension::PressurePerVoltageRatio
    );
    let measures = if pressure { Dimension::Pressure } else { Dimension::Force };
    let per_reading = constants.slope.value * unit.factor * if by_gravity { gravity.value_m_s2 } else { 1.0 };
    let mut calibration = line(name, unit, constants.zero, 1.0 / per_reading, measures);
    match constants.slope_relative {
        Some(size) => {
            let mut errors = vec![relative(ScaleSource::Stated, size)];
            if by_gravity {
                errors.push(relative(ScaleSource::Gravity, gravity.standard_uncertainty / gravity.value_m_s2));
            }
            calibration.errors = Some(errors);
        }
        None => {
            calibration.cautions.push("the slope is stated without uncertainty: the scale error is not known".into())
        }
    }
    if by_gravity {
        calibration
            .findings
            .push(format!("slope in mass, times gravity {:.5} m/s2 ({})", gravity.value_m_s2, gravity.source));
    }
    calibration.findings.push("slope stated, not fitted: straightness was not tested".to_string());
    Ok(calibration)
}

/// A data sheet.
#[derive(Debug, Clone, Copy)]
pub(super) struct Rating {
    /// V per V of excitation at capacity.
    pub rated_output: f64,
    /// N, or Pa.
    pub capacity: f64,
    pub measures: Dimension,
    pub excitation_v: Option<f64>,
    pub adc_bits: Option<u32>,
    /// Span of voltage that 2^adc_bits counts cover, behind the amplifier.
    pub adc_reference_v: Option<f64>,
    pub gain: Option<f64>,
    /// Limits as a fraction of capacity.
    pub accuracy: Option<f64>,
}

/// The line a data sheet promises, for readings in `unit`.
///
/// # Formula
/// Bridge output at force F: V/Vexc = rated output × F/capacity. Counts = V × gain / adc_reference × 2^adc_bits.
///
/// # Errors
/// What the unit needs beyond the rated output is missing; it is named.
pub(super) fn rating(name: String, rating: &Rating, unit: Unit) -> Result<Calibration, Problem> {
    let need = |value: Option<f64>, key: &str, example: &str| {
        value.ok_or_else(|| {
            Problem::new(format!("rating.{key} is missing"))
                .expected(format!("{key}, for readings in {}", unit.symbol))
                .remedy(format!("write {key} = {example} under [rating]"))
        })
    };
    let ratio_per_n = rating.rated_output / rating.capacity;
    let readings_per_n = match unit.dimension {
        Dimension::VoltageRatio => ratio_per_n / unit.factor,
        Dimension::Voltage => ratio_per_n * need(rating.excitation_v, "excitation", "\"5 V\"")? / unit.factor,
        Dimension::Count => {
            let excitation = need(rating.excitation_v, "excitation", "\"5 V\"")?;
            let bits = need(rating.adc_bits.map(f64::from), "adc_bits", "24")?;
            let reference = need(rating.adc_reference_v, "adc_reference", "\"5 V\"")?;
            let gain = need(rating.gain, "gain", "128")?;
            ratio_per_n * excitation * gain / reference * 2f64.powf(bits)
        }
        _ => {
            return Err(Problem::new(format!("a data sheet says nothing of readings in {}", unit.symbol))
                .expected("readings in mV/V, mV, V or count")
                .remedy("correct the channel's unit, or drop its calibration"));
        }
    };
    let mut calibration = line(name, unit, 0.0, readings_per_n, rating.measures);
    calibration.capacity_n = Some(rating.capacity);
    calibration.errors = rating.accuracy.map(|accuracy| data_sheet_errors(accuracy, rating.capacity, readings_per_n));
    if rating.accuracy.is_none() {
        calibration.cautions.push("the data sheet is given without accuracy: the scale error is not known".into());
    }
    calibration.cautions.push("scale from the data sheet: no weight was hung on this cell with this logger".into());
    if unit.dimension == Dimension::Count {
        calibration.findings.push("counts = bridge voltage x gain / adc_reference x 2^adc_bits".into());
    }
    Ok(calibration)
}

/// Limits of accuracy × capacity at every force, as two independent errors that together stay within them: a gain
/// error that reaches the limit at capacity, and a bow, nil at zero and at capacity, of 0.85 of the limit in the
/// middle. A constant error is no part of it: it cancels in a difference of two forces. The bow's slope at zero makes
/// a small motor on a large cell relatively less certain, as it is: 3.5 times the accuracy instead of once.
fn data_sheet_errors(accuracy: f64, capacity_n: f64, readings_per_n: f64) -> Vec<ErrorDirection> {
    let standard = accuracy / 3f64.sqrt();
    let bow = 0.85 * 4.0 * standard * readings_per_n;
    let shape = ErrorShape::Coefficients(vec![0.0, -bow, bow / capacity_n]);
    vec![relative(ScaleSource::Stated, standard), ErrorDirection { source: ScaleSource::Stated, shape }]
}

#[cfg(test)]
mod tests {
    use super::*;

    fn gravity() -> Gravity {
        Gravity { value_m_s2: 9.8, standard_uncertainty: 0.001, source: "given".into() }
    }

    fn unit(symbol: &str) -> Unit {
        quantity::find(symbol).unwrap()
    }

    #[test]
    fn instruments_that_show_forces_or_masses() {
        let pounds = scaled_identity(unit("lbf"), Some(0.002), &gravity()).unwrap();
        assert!((pounds.force_n(10.0).unwrap() - 44.482216152605).abs() < 1e-12);
        assert!((pounds.force_uncertainty_n(100.0).unwrap() - 0.2 / 3f64.sqrt()).abs() < 1e-12);
        let mass = scaled_identity(unit("g"), Some(0.0), &gravity()).unwrap();
        assert!((mass.force_n(1000.0).unwrap() - 9.8).abs() < 1e-12);
        assert!((mass.force_uncertainty_n(9.8).unwrap() - 0.001).abs() < 1e-12);
        let unknown = scaled_identity(unit("N"), None, &gravity()).unwrap();
        assert_eq!(unknown.force_uncertainty_n(1.0), None);
        assert!(scaled_identity(unit("mV"), None, &gravity()).is_err());
    }

    #[test]
    fn a_slope_works_in_the_unit_under_its_line() {
        let given = Constants {
            slope: quantity::parse("2 g/count", Dimension::MassPerCount).unwrap(),
            slope_unit: unit("g/count"),
            slope_relative: None,
            zero: 100.0,
        };
        let line = constants("scale".into(), &given, &gravity()).unwrap();
        assert_eq!(line.reading_unit.symbol, "count");
        assert!((line.force_n(600.0).unwrap() - 9.8).abs() < 1e-12);
        assert_eq!(line.errors, None);
        assert_eq!(reading_unit_of(unit("N/(mV/V)")).unwrap().symbol, "mV/V");
        assert_eq!(reading_unit_of(unit("N/mV")).unwrap().symbol, "mV");
    }

    /// 2 mV/V at 2000 N, 5 V: 10 mV at 2000 N. Gain 128, 5 V over 2^24 counts: 10 mV makes 0.256 of 2^24.
    #[test]
    fn a_data_sheet_in_each_reading_unit() {
        let sheet = Rating {
            rated_output: 2e-3,
            capacity: 2000.0,
            measures: Dimension::Force,
            excitation_v: Some(5.0),
            adc_bits: Some(24),
            adc_reference_v: Some(5.0),
            gain: Some(128.0),
            accuracy: Some(0.0025),
        };
        for (symbol, full) in [("mV/V", 2.0), ("mV", 10.0), ("V", 0.01), ("count", 0.256 * 2f64.powi(24))] {
            let line = rating("cell".into(), &sheet, unit(symbol)).unwrap();
            assert!((line.force_n(full).unwrap() - 2000.0).abs() < 1e-9, "{symbol}");
            let limit = 0.0025 * 2000.0 / 3f64.sqrt();
            assert!((line.force_uncertainty_n(2000.0).unwrap() - limit).abs() < 1e-9 * limit);
            for force in [10.0, 200.0, 700.0, 1000.0, 1400.0, 1700.0] {
                let uncertainty = line.force_uncertainty_n(force).unwrap();
                assert!(uncertainty <= limit * 1.001 && uncertainty > limit * force / 2000.0, "{symbol} {force}");
            }
        }
        let message = rating("cell".into(), &Rating { gain: None, ..sheet }, unit("count")).unwrap_err().to_string();
        assert!(message.contains("rating.gain"), "{message}");
    }
}
