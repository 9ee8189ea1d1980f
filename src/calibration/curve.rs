//! A calibration in use: readings to forces and back, and how far the force may be off.

use super::fit::{slope, turning_points, value};
use super::{Calibration, ErrorDirection, ErrorShape};
use crate::problem::Problem;
use crate::quantity::Unit;

impl Calibration {
    /// Reading the polynomial gives at a force, in the reading unit.
    pub fn reading(&self, force_n: f64) -> f64 {
        value(&self.coefficients, force_n)
    }

    /// Readings per newton at a force.
    pub fn slope(&self, force_n: f64) -> f64 {
        slope(&self.coefficients, force_n)
    }

    /// Force at a reading, on the branch of the curve that holds the calibrated forces. NaN gives NaN.
    ///
    /// # Errors
    /// The curve turns over before it reaches the reading.
    pub fn force_n(&self, reading: f64) -> Result<f64, Problem> {
        if let [zero, per_newton] = self.coefficients.as_slice() {
            return Ok((reading - zero) / per_newton);
        }
        if reading.is_nan() {
            return Ok(f64::NAN);
        }
        let (low, high) = self.branch();
        self.invert(reading, low, high).ok_or_else(|| self.turns_over(reading, low, high))
    }

    /// Forces at many readings.
    ///
    /// # Errors
    /// As [`Calibration::force_n`], for the first reading that is out of reach.
    pub fn forces_n(&self, readings: &[f64]) -> Result<Vec<f64>, Problem> {
        readings.iter().map(|reading| self.force_n(*reading)).collect()
    }

    /// Refuses a curve that turns over within these readings.
    ///
    /// # Errors
    /// The inverse is not single-valued over the readings.
    pub fn check_monotonic(&self, lowest_reading: f64, highest_reading: f64) -> Result<(), Problem> {
        self.force_n(lowest_reading)?;
        self.force_n(highest_reading)?;
        Ok(())
    }

    /// Change of the force at a fixed reading for one standard uncertainty of an error: −δp(F)/p'(F) for a change δp of
    /// the response.
    pub fn force_error_n(&self, error: &ErrorDirection, force_n: f64) -> f64 {
        match &error.shape {
            ErrorShape::Coefficients(change) => -value(change, force_n) / self.slope(force_n),
            ErrorShape::Relative(relative) => relative * force_n,
            ErrorShape::Beyond { from_n, degree, coefficient, side } => {
                let size = force_n.abs();
                let power = size.powi(degree.saturating_sub(1) as i32);
                let reach = if force_n * side < 0.0 { size + from_n } else { (size - from_n).max(0.0) };
                (coefficient * power * reach).copysign(coefficient * force_n)
            }
        }
    }

    /// Standard uncertainty of a force from the calibration alone, zero included; `None` when nothing is known of it.
    pub fn force_uncertainty_n(&self, force_n: f64) -> Option<f64> {
        let errors = self.errors.as_ref()?;
        Some(errors.iter().map(|error| self.force_error_n(error, force_n).powi(2)).sum::<f64>().sqrt())
    }

    /// Standard uncertainty of F − F₀ from the calibration alone: an error shared by both cancels.
    pub fn difference_uncertainty_n(&self, force_n: f64, zero_n: f64) -> Option<f64> {
        let errors = self.errors.as_ref()?;
        let square = |error| (self.force_error_n(error, force_n) - self.force_error_n(error, zero_n)).powi(2);
        Some(errors.iter().map(square).sum::<f64>().sqrt())
    }

    /// The same curve for readings in another unit of the same kind (V for mV).
    ///
    /// # Errors
    /// The units are of different kinds; both are named.
    pub fn in_reading_unit(mut self, unit: Unit) -> Result<Self, Problem> {
        if unit.symbol == self.reading_unit.symbol {
            return Ok(self);
        }
        if unit.dimension != self.reading_unit.dimension {
            let found = format!(
                "the channel reads in {}, but the calibration \"{}\" is for readings in {}",
                unit.symbol, self.name, self.reading_unit.symbol
            );
            return Err(Problem::new(found).expected("readings and calibration in units of one kind").remedy(format!(
                "correct the channel's unit (to \"{}\", if that is what the log holds), or name the calibration that \
                 was made with this logger",
                self.reading_unit.symbol
            )));
        }
        let ratio = self.reading_unit.factor / unit.factor;
        let scale = |coefficients: &mut Vec<f64>| coefficients.iter_mut().for_each(|coefficient| *coefficient *= ratio);
        scale(&mut self.coefficients);
        for error in self.errors.iter_mut().flatten() {
            if let ErrorShape::Coefficients(change) = &mut error.shape {
                scale(change);
            }
        }
        self.findings.push(format!("readings converted from {} to {}", unit.symbol, self.reading_unit.symbol));
        self.reading_unit = unit;
        Ok(self)
    }

    /// Forces between which the curve does not turn, around the calibrated ones.
    fn branch(&self) -> (f64, f64) {
        let anchor = self.anchor();
        let mut branch = (f64::NEG_INFINITY, f64::INFINITY);
        for turn in turning_points(&self.coefficients) {
            if turn < anchor {
                branch.0 = branch.0.max(turn);
            } else {
                branch.1 = branch.1.min(turn);
            }
        }
        branch
    }

    fn anchor(&self) -> f64 {
        self.range_n.map_or(0.0, |[low, high]| 0.5 * (low + high))
    }

    /// Newton steps kept inside a bracket that halves when a step would leave it.
    fn invert(&self, reading: f64, lowest: f64, highest: f64) -> Option<f64> {
        let anchor = self.anchor();
        let sign = self.slope(anchor).signum();
        let miss = |force: f64| sign * (self.reading(force) - reading);
        let width = self.range_n.map_or(1.0, |[low, high]| (high - low).abs()).max(f64::MIN_POSITIVE);
        let upwards = miss(anchor) < 0.0;
        let (mut low, mut high) = (anchor, anchor);
        let mut step = width;
        let mut found = false;
        // doubling covers any finite force
        for _ in 0..1100 {
            let edge = if upwards { (anchor + step).min(highest) } else { (anchor - step).max(lowest) };
            let reached = if upwards { miss(edge) >= 0.0 } else { miss(edge) <= 0.0 };
            if reached {
                if upwards {
                    high = edge
                } else {
                    low = edge
                }
                found = true;
                break;
            }
            if !edge.is_finite() || edge == lowest || edge == highest {
                return None;
            }
            if upwards {
                low = edge
            } else {
                high = edge
            }
            step *= 2.0;
        }
        if !found {
            return None;
        }
        let mut force = 0.5 * (low + high);
        for _ in 0..200 {
            let off = miss(force);
            if off == 0.0 {
                return Some(force);
            }
            if off < 0.0 {
                low = force
            } else {
                high = force
            }
            let newton = force - off / (sign * self.slope(force));
            let next = if newton > low && newton < high { newton } else { 0.5 * (low + high) };
            let close = 2.0 * f64::EPSILON * force.abs().max(width * 1e-3);
            if (next - force).abs() <= close {
                return Some(next);
            }
            force = next;
        }
        Some(force)
    }

    fn turns_over(&self, reading: f64, low: f64, high: f64) -> Problem {
        let at = if high.is_finite() { high } else { low };
        let unit = self.reading_unit.symbol;
        Problem::new(format!(
            "the calibration curve of \"{}\" turns over at {at:.4} {}, before it reaches the reading {reading} {unit}",
            self.name,
            self.measures.ucum()
        ))
        .expected("a curve that rises or falls throughout the readings used")
        .remedy("calibrate with weights up to the thrust, or force degree = 1 under [fit] in the calibration file")
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibration::ScaleSource;
    use crate::quantity::{self, Dimension};
    use proptest::prelude::*;

    fn curve(coefficients: Vec<f64>, range_n: Option<[f64; 2]>) -> Calibration {
        Calibration {
            name: "test".into(),
            reading_unit: quantity::find("mV").unwrap(),
            coefficients,
            range_n,
            capacity_n: None,
            errors: None,
            measures: Dimension::Force,
            fit_degrees_of_freedom: None,
            findings: vec![],
            cautions: vec![],
        }
    }

    proptest! {
        /// Force to reading to force, for lines, parabolas and cubics of either sign that do not turn in the range.
        #[test]
        fn inversion_is_a_round_trip(
            zero in -1e4f64..1e4, per_newton in 1e-3f64..1e4, bend in -0.2f64..0.2, twist in -0.1f64..0.1,
            sign in prop_oneof![Just(1.0), Just(-1.0)], full in 1f64..1e5, at in -0.5f64..1.3,
        ) {
            let coefficients = vec![zero, sign * per_newton, sign * per_newton * bend / full, sign * per_newton * twist / (full * full)];
            let line = curve(coefficients, Some([0.0, full]));
            let force = at * full;
            let back = line.force_n(line.reading(force)).unwrap();
            // the reading itself is rounded: half a unit in its last place is worth this much force
            let rounding = 8.0 * f64::EPSILON * (zero.abs() / per_newton + 3.0 * full);
            prop_assert!((back - force).abs() <= rounding, "{back} {force}");
        }

        #[test]
        fn any_reading_gives_a_force_or_a_refusal(
            coefficients in prop::collection::vec(-1e6f64..1e6, 3..=4), reading in prop::num::f64::ANY,
        ) {
            let _ = curve(coefficients, Some([0.0, 100.0])).force_n(reading);
        }
    }

    #[test]
    fn a_curve_that_turns_is_refused_beyond_its_turn() {
        // turns at 500 N, reading 250
        let bent = curve(vec![0.0, 1.0, -1e-3], Some([0.0, 200.0]));
        assert!((bent.force_n(160.0).unwrap() - 200.0).abs() < 1e-9);
        assert!(bent.check_monotonic(-50.0, 249.0).is_ok());
        let message = bent.check_monotonic(0.0, 251.0).unwrap_err().to_string();
        assert!(message.contains("turns over at 500"), "{message}");
    }

    #[test]
    fn errors_move_the_force_as_they_say() {
        let mut bent = curve(vec![3.0, 2.0, 1e-4], Some([0.0, 1000.0]));
        let change = [0.01, 1e-4, 1e-8];
        let error = |shape| ErrorDirection { source: ScaleSource::Fit, shape };
        let expected = bent.force_error_n(&error(ErrorShape::Coefficients(change.to_vec())), 700.0);
        let reading = bent.reading(700.0);
        for (coefficient, delta) in bent.coefficients.iter_mut().zip(change) {
            *coefficient += delta;
        }
        let moved = bent.force_n(reading).unwrap() - 700.0;
        // second order: the slope itself moves by 1e-4 in 2.14
        assert!((moved - expected).abs() < 1e-4 * expected.abs(), "{moved} {expected}");
        assert_eq!(bent.force_error_n(&error(ErrorShape::Relative(0.01)), -50.0), -0.5);
        let beyond = error(ErrorShape::Beyond { from_n: 100.0, degree: 2, coefficient: 1e-5, side: 0.0 });
        assert_eq!(bent.force_error_n(&beyond, 100.0), 0.0);
        assert!((bent.force_error_n(&beyond, 200.0) - 1e-5 * 200.0 * 100.0).abs() < 1e-12);
        assert!(bent.force_error_n(&beyond, -200.0) < 0.0);
        // A bend of c F² under a line through 0 and 100 N hides c F (100 - F); on the other side it shows as c F (100 + |F|).
        let pulled = error(ErrorShape::Beyond { from_n: 100.0, degree: 2, coefficient: 1e-5, side: 1.0 });
        assert_eq!(bent.force_error_n(&pulled, 90.0), 0.0);
        assert!((bent.force_error_n(&pulled, -50.0) + 1e-5 * 50.0 * 150.0).abs() < 1e-12);
    }

    #[test]
    fn volts_for_millivolts_and_never_for_counts() {
        let line = curve(vec![1.0, 0.5], None);
        let volts = line.clone().in_reading_unit(quantity::find("V").unwrap()).unwrap();
        assert!((volts.force_n(0.011).unwrap() - line.force_n(11.0).unwrap()).abs() < 1e-9);
        let message = line.in_reading_unit(quantity::find("count").unwrap()).unwrap_err().to_string();
        assert!(message.contains("count") && message.contains("mV"), "{message}");
    }
}
