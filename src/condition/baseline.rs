//! The zero under the thrust: from the quiet record before and after, with the motor's own weight taken along.

use crate::condition::quiet::{QuietFit, Thermal};

/// Course of the zero through the burst. Forces in N as the calibration reads them.
#[derive(Debug, Clone, PartialEq)]
pub struct Baseline {
    /// Fitted at the start of the burst.
    pub before: Option<QuietFit>,
    /// Fitted at the end of the burst.
    pub after: Option<QuietFit>,
    pub start_s: f64,
    pub end_s: f64,
    /// Part of the shift that goes with the propellant burned, i.e. in proportion to impulse delivered.
    pub weight_shift_n: f64,
    /// Part of the shift that goes with time.
    pub drift_n: f64,
    /// How it goes with time, where that is no straight line.
    pub thermal: Option<Thermal>,
}

impl Baseline {
    /// Splits the shift between the two zeros into the given weight part and a drift.
    ///
    /// Where one zero is missing, the other is carried through the burst, with the weight part added.
    pub fn new(
        before: Option<QuietFit>,
        after: Option<QuietFit>,
        start_s: f64,
        end_s: f64,
        weight_shift_n: f64,
    ) -> Self {
        let mut baseline = Baseline { before, after, start_s, end_s, weight_shift_n, drift_n: 0.0, thermal: None };
        if let Some(shift) = baseline.shift_n() {
            baseline.drift_n = shift - weight_shift_n;
        }
        baseline
    }

    /// Zero after minus zero before, where both are known.
    pub fn shift_n(&self) -> Option<f64> {
        Some(self.after?.level_at(self.end_s) - self.before?.level_at(self.start_s))
    }

    /// Standard uncertainty of the shift.
    pub fn shift_u_n(&self) -> Option<f64> {
        let (after, before) = (self.after?, self.before?);
        let variance = after.level_u.powi(2) + before.level_u.powi(2) - 2.0 * before.level_covariance;
        Some(variance.max(0.0).sqrt())
    }

    /// Zero at `time_s`, when `fraction` of the impulse has been delivered.
    pub fn at(&self, time_s: f64, fraction: f64) -> f64 {
        let duration = (self.end_s - self.start_s).max(f64::MIN_POSITIVE);
        let x = ((time_s - self.start_s) / duration).clamp(0.0, 1.0);
        match (&self.before, &self.after) {
            (Some(before), Some(after)) => {
                if time_s <= self.start_s {
                    before.level_at(time_s)
                } else if time_s >= self.end_s {
                    after.level_at(time_s)
                } else {
                    let share = self.thermal.map_or(x, |t| {
                        let whole = t.at(duration) - t.level;
                        if whole == 0.0 { x } else { (t.at(x * duration) - t.level) / whole }
                    });
                    before.level_at(self.start_s) + self.drift_n * share + self.weight_shift_n * fraction
                }
            }
            (Some(before), None) => before.level_at(time_s) + self.weight_shift_n * fraction,
            (None, Some(after)) => after.level_at(time_s) - self.weight_shift_n * (1.0 - fraction),
            (None, None) => self.weight_shift_n * fraction,
        }
    }

    /// How much the zero at `time_s` moves when the level before moves by one, and when the level after does.
    pub fn sensitivity(&self, time_s: f64) -> (f64, f64) {
        let duration = (self.end_s - self.start_s).max(f64::MIN_POSITIVE);
        let x = ((time_s - self.start_s) / duration).clamp(0.0, 1.0);
        match (self.before.is_some(), self.after.is_some()) {
            (true, true) => (1.0 - x, x),
            (true, false) => (1.0, 0.0),
            (false, true) => (0.0, 1.0),
            (false, false) => (0.0, 0.0),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn level(level: f64, at_s: f64, slope_per_s: f64) -> QuietFit {
        QuietFit {
            at_s,
            level,
            slope_per_s,
            level_u: 0.1,
            slope_u: 0.0,
            level_covariance: 0.0,
            sample_sd: 1.0,
            low_frequency_density: 0.0,
            samples: 100,
            duration_s: 1.0,
        }
    }

    #[test]
    fn joins_the_levels_before_and_after() {
        let b = Baseline::new(Some(level(10.0, 1.0, 0.5)), Some(level(4.0, 3.0, 0.0)), 1.0, 3.0, -5.0);
        assert_eq!(b.at(0.0, 0.0), 9.5);
        assert_eq!(b.at(1.0, 0.0), 10.0);
        assert_eq!(b.at(3.0, 1.0), 4.0);
        // Half the time, nine tenths of the impulse: -0.5 of drift and -4.5 of weight.
        assert!((b.at(2.0, 0.9) - 5.0).abs() < 1e-12);
        assert_eq!(b.shift_n(), Some(-6.0));
    }

    /// One line through both: an error of its slope lifts one level and lowers the other, and the shift takes both.
    #[test]
    fn the_shift_knows_what_its_ends_share() {
        let shared = |covariance: f64| {
            let fit = QuietFit { level_covariance: covariance, ..level(0.0, 1.0, 0.0) };
            Baseline::new(Some(fit), Some(fit), 1.0, 3.0, 0.0).shift_u_n().expect("a shift")
        };
        assert!((shared(0.0) - 0.1 * 2f64.sqrt()).abs() < 1e-12);
        assert!((shared(-0.01) - 0.2).abs() < 1e-12 && shared(0.01) < 1e-6);
    }

    #[test]
    fn one_zero_alone_is_carried_through() {
        let b = Baseline::new(Some(level(10.0, 1.0, 0.0)), None, 1.0, 3.0, -2.0);
        assert_eq!(b.at(5.0, 1.0), 8.0);
        let b = Baseline::new(None, Some(level(10.0, 3.0, 0.0)), 1.0, 3.0, -2.0);
        assert_eq!(b.at(1.0, 0.0), 12.0);
    }
}
