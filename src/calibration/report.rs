//! What calibration.json holds.

use super::weights::levels;
use serde::{Deserialize, Serialize};

/// One calibration point with what the fit makes of it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CalibrationPoint {
    /// As listed, in the unit of the points.
    pub listed: f64,
    /// N (Pa for a pressure transducer).
    pub force_n: f64,
    /// In the reading unit.
    pub reading: f64,
    /// `up` or `down`.
    pub direction: String,
    /// In the reading unit.
    pub fitted: f64,
    /// Reading less fitted, in the reading unit.
    pub residual: f64,
    /// The residual as a force, N.
    pub residual_n: f64,
}

/// calibration.json: reading as a polynomial of force in newtons, coefficients lowest power first. Null where not known.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CalibrationReport {
    pub name: String,
    /// UCUM code of what the polynomial is of: N, or Pa.
    pub force_unit: String,
    pub degree: usize,
    /// Why this degree.
    pub reason: String,
    pub coefficients: Vec<f64>,
    /// Least-squares covariance of the coefficients, from the scatter of all points about the curve.
    pub covariance: Option<Vec<Vec<f64>>>,
    pub residual_standard_deviation: Option<f64>,
    pub residual_degrees_of_freedom: usize,
    /// Covariance of the coefficients from the weights' stated tolerance; null when none was stated.
    pub weights_covariance: Option<Vec<Vec<f64>>>,
    /// Scatter that the weights' tolerance does not explain, reading units; this is what the fit's uncertainty comes from.
    pub noise_standard_deviation: Option<f64>,
    pub reading_unit: String,
    /// Largest distance of the mean rising readings from the straight line through the first and last of them.
    pub nonlinearity_percent: Option<f64>,
    /// Largest difference between the mean falling and rising readings at one load.
    pub hysteresis_percent: Option<f64>,
    /// Largest spread of rising readings repeated at one load.
    pub repeatability_percent: Option<f64>,
    pub range_n: Option<[f64; 2]>,
    pub capacity_n: Option<f64>,
    /// Gravity that turned masses into forces, m/s2; null when none was needed.
    pub gravity_m_s2: Option<f64>,
    pub points: Vec<CalibrationPoint>,
    pub findings: Vec<String>,
    pub cautions: Vec<String>,
}

/// Departures of a cell from an ideal one, in % of full scale: the difference of the mean rising readings at the heaviest
/// and the lightest load. `None` where the points cannot tell.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(super) struct Quality {
    pub nonlinearity_percent: Option<f64>,
    pub hysteresis_percent: Option<f64>,
    pub repeatability_percent: Option<f64>,
}

/// Judges points by force, reading, and whether the load was rising.
pub(super) fn quality(forces_n: &[f64], readings: &[f64], rising: &[bool]) -> Quality {
    let (distinct, places) = levels(forces_n);
    let of = |level: usize, up: bool| -> Vec<f64> {
        let here = places.iter().zip(rising).zip(readings);
        here.filter(|((place, rising), _)| **place == level && **rising == up).map(|(_, reading)| *reading).collect()
    };
    let mean = |values: &[f64]| (!values.is_empty()).then(|| values.iter().sum::<f64>() / values.len() as f64);
    let up: Vec<(f64, f64)> =
        (0..distinct.len()).filter_map(|level| mean(&of(level, true)).map(|mean| (distinct[level], mean))).collect();
    let (Some(&(first_n, first)), Some(&(last_n, last))) = (up.first(), up.last()) else {
        return Quality::default();
    };
    let span = (last - first).abs();
    if !(span > 0.0) {
        return Quality::default();
    }
    let percent = |departures: Vec<f64>| departures.into_iter().reduce(f64::max).map(|largest| 100.0 * largest / span);
    let line = |force: f64| first + (last - first) * (force - first_n) / (last_n - first_n);
    let nonlinearity = up.iter().map(|(force, reading)| (reading - line(*force)).abs()).collect();
    let hysteresis = (0..distinct.len())
        .filter_map(|level| Some((mean(&of(level, false))? - mean(&of(level, true))?).abs()))
        .collect();
    let spread = (0..distinct.len())
        .map(|level| of(level, true))
        .filter(|readings| readings.len() > 1)
        .map(|readings| {
            let highest = readings.iter().copied().fold(f64::NEG_INFINITY, f64::max);
            let lowest = readings.iter().copied().fold(f64::INFINITY, f64::min);
            highest - lowest
        })
        .collect();
    Quality {
        nonlinearity_percent: if up.len() > 2 { percent(nonlinearity) } else { None },
        hysteresis_percent: percent(hysteresis),
        repeatability_percent: percent(spread),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Span 100; the middle is 1 above the line; falling is 2 above rising there; rising at 0 spreads by 0.5.
    #[test]
    fn percentages_by_hand() {
        let forces = [0.0, 0.0, 50.0, 100.0, 50.0];
        let readings = [-0.25, 0.25, 51.0, 100.0, 53.0];
        let rising = [true, true, true, true, false];
        let found = quality(&forces, &readings, &rising);
        assert!((found.nonlinearity_percent.unwrap() - 1.0).abs() < 1e-12);
        assert!((found.hysteresis_percent.unwrap() - 2.0).abs() < 1e-12);
        assert!((found.repeatability_percent.unwrap() - 0.5).abs() < 1e-12);
    }

    #[test]
    fn what_points_cannot_tell_is_unknown() {
        assert_eq!(quality(&[0.0, 1.0], &[0.0, 1.0], &[true, true]), Quality::default());
        assert_eq!(quality(&[], &[], &[]), Quality::default());
    }
}
