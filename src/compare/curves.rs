//! Thrust curves of several motors on one time: mean, spread, and the band for the next one.

use super::sample::mean_and_sd;
use super::tolerance;
use serde::{Deserialize, Serialize};

/// A motor's thrust: straight lines between points, time from the start of the burn, s and N.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Trace {
    pub time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    /// First to last crossing of 5 % of peak, s.
    pub burn_time_s: f64,
}

impl Trace {
    /// Thrust at an instant; nil before and after.
    pub fn at(&self, time_s: f64) -> f64 {
        let i = self.time_s.partition_point(|t| *t <= time_s);
        if i == 0 || i == self.time_s.len() {
            let last = i > 0 && self.time_s[i - 1] == time_s;
            return if last { self.thrust_n[i - 1] } else { 0.0 };
        }
        let (t0, t1) = (self.time_s[i - 1], self.time_s[i]);
        self.thrust_n[i - 1] + (self.thrust_n[i] - self.thrust_n[i - 1]) * (time_s - t0) / (t1 - t0)
    }
}

/// Points of a band.
pub const POINTS: usize = 201;

/// Instants that all traces are read at: from the earliest start to the latest end. With `by_burn_time` each trace's time is stretched
/// to the mean burn time.
pub fn common_time(traces: &[&Trace]) -> Vec<f64> {
    let ends = |pick: fn(&Trace) -> Option<f64>, best: fn(f64, f64) -> f64| {
        traces.iter().filter_map(|t| pick(t)).reduce(best).unwrap_or(0.0)
    };
    let (first, last) = (ends(|t| t.time_s.first().copied(), f64::min), ends(|t| t.time_s.last().copied(), f64::max));
    (0..POINTS).map(|i| first + (last - first) * i as f64 / (POINTS - 1) as f64).collect()
}

/// The trace as it would run with another burn time: time stretched, thrust kept.
pub fn stretched(trace: &Trace, burn_time_s: f64) -> Trace {
    let factor = if trace.burn_time_s > 0.0 { burn_time_s / trace.burn_time_s } else { 1.0 };
    Trace { time_s: trace.time_s.iter().map(|t| t * factor).collect(), burn_time_s, ..trace.clone() }
}

/// Mean and band of a group. Time from the start of the burn, s; forces N.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Band {
    pub time_s: Vec<f64>,
    pub mean_n: Vec<f64>,
    /// Standard deviation from motor to motor; empty for one motor.
    pub standard_deviation_n: Vec<f64>,
    /// At each instant 95 % of all motors to come lie above `lower_n` and below `upper_n`, at 95 % confidence, if the thrust there is
    /// normally distributed; empty for one motor. Not cut at zero.
    pub lower_n: Vec<f64>,
    pub upper_n: Vec<f64>,
    /// Standard deviations that the band lies off the mean.
    pub factor: Option<f64>,
}

/// # Formula
/// mean ± √((k s)² + (1.96 u)²), k the two-sided 95/95 tolerance factor, u the error of calibration that the motors share
pub fn band(traces: &[&Trace], time_s: Vec<f64>, shared_relative_u: f64) -> Band {
    let n = traces.len();
    let factor = tolerance::two_sided(n, tolerance::CONTENT, tolerance::CONFIDENCE);
    let mut band = Band { factor, ..Band::default() };
    for t in &time_s {
        let values: Vec<f64> = traces.iter().map(|c| c.at(*t)).collect();
        let Some((mean, sd)) = mean_and_sd(&values) else { continue };
        band.mean_n.push(mean);
        if let (Some(sd), Some(k)) = (sd, factor) {
            let off = (k * sd).hypot(1.96 * shared_relative_u * mean);
            band.standard_deviation_n.push(sd);
            band.lower_n.push(mean - off);
            band.upper_n.push(mean + off);
        }
    }
    band.time_s = time_s;
    band
}

#[cfg(test)]
mod tests {
    use super::*;

    fn triangle(peak: f64) -> Trace {
        Trace { time_s: vec![0.0, 1.0, 2.0], thrust_n: vec![0.0, peak, 0.0], burn_time_s: 1.9 }
    }

    #[test]
    fn a_trace_between_its_points_and_beyond_them() {
        let t = triangle(10.0);
        assert_eq!([-0.1, 0.0, 0.5, 1.5, 2.0, 2.1].map(|x| t.at(x)), [0.0, 0.0, 5.0, 5.0, 0.0, 0.0]);
        let longer = stretched(&t, 3.8);
        assert!((longer.at(2.0) - 10.0).abs() < 1e-12);
    }

    #[test]
    fn the_band_of_two_motors() {
        let (a, b) = (triangle(10.0), triangle(12.0));
        let all = band(&[&a, &b], common_time(&[&a, &b]), 0.0);
        let middle = POINTS / 2;
        assert!(
            (all.mean_n[middle] - 11.0).abs() < 1e-12 && (all.standard_deviation_n[middle] - 2f64.sqrt()).abs() < 1e-12
        );
        let k = all.factor.expect("a factor");
        assert!((all.upper_n[middle] - 11.0 - k * 2f64.sqrt()).abs() < 1e-9);
        let one = band(&[&a], common_time(&[&a]), 0.0);
        assert!(one.lower_n.is_empty() && one.factor.is_none() && one.mean_n.len() == POINTS);
    }
}
