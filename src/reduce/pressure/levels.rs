//! What stands in the chamber before and after: the outside air, and the transducer's own zero.

use super::Record;

/// Mean air pressure at sea level, Pa, and how it falls with height in the troposphere (ISO 2533:1975, standard atmosphere; from
/// memory).
const SEA_LEVEL_PA: f64 = 101_325.0;
const LAPSE_PER_M: f64 = 2.255_77e-5;
const LAPSE_EXPONENT: f64 = 5.255_88;
/// How far the weather may take the air pressure from that, limits, Pa (common practice, no source).
const WEATHER_PA: f64 = 3000.0;
/// A barometer read to a hectopascal: limits of a stated air pressure without limits, Pa.
const BAROMETER_PA: f64 = 100.0;
/// Air pressures between which people live, Pa: a stated one outside is worth a look.
const LIVEABLE_PA: std::ops::Range<f64> = 45_000.0..110_000.0;
/// Quiet samples below which the zero counts as not seen.
const LEAST_QUIET: usize = 8;
/// Parts of a quiet stretch whose means show what slow noise does to its level.
const BLOCKS: usize = 10;
/// Standard errors from which on a shift of the zero counts as seen.
const SEEN: f64 = 3.0;
/// Air pressure outside the motor, Pa, half its limits' width, and where it came from.
pub(super) fn outside(record: &Record<'_>) -> (f64, f64, String) {
    let run = &record.inputs.run;
    if let Some(stated) = run.conditions.get("air_pressure") {
        let get = |key: &str| stated.get(key).and_then(serde_json::Value::as_f64);
        let pressure = stated.get("unit").and_then(serde_json::Value::as_str) == Some("Pa");
        if let Some(value) = get("value").filter(|v| pressure && *v > 0.0) {
            let stated_limits = get("standard_uncertainty").map(|u| u * 3f64.sqrt());
            let limits = stated_limits.unwrap_or(BAROMETER_PA);
            let assumed = if stated_limits.is_some() { "" } else { " (limits assumed)" };
            let odd = if LIVEABLE_PA.contains(&value) { "" } else { ", an unlikely one: check its unit" };
            let words = format!(
                "air pressure {:.1} hPa ± {:.1} hPa{assumed} as stated under [conditions]{odd}",
                value / 100.0,
                limits / 100.0
            );
            return (value, limits, words);
        }
    }
    let height = run.site.height_m.map_or(0.0, |h| h.value);
    let value = SEA_LEVEL_PA * (1.0 - LAPSE_PER_M * height).max(0.0).powf(LAPSE_EXPONENT);
    let words = format!(
        "no air_pressure in a unit of pressure under [conditions]: {:.0} hPa ± {:.0} hPa taken from the standard atmosphere at {}",
        value / 100.0,
        WEATHER_PA / 100.0,
        run.site
            .height_m
            .map_or("sea level, since [site] gives no height".to_string(), |h| format!("{:.0} m", h.value))
    );
    (value, WEATHER_PA, words)
}

/// Level of a quiet stretch with its standard uncertainty, and the standard deviation of single samples.
#[derive(Debug, Clone, Copy)]
pub(super) struct Level {
    pub pa: f64,
    pub u_pa: f64,
    pub sample_pa: f64,
}

impl Level {
    fn of(values: &[f64]) -> Option<Level> {
        if values.len() < LEAST_QUIET {
            return None;
        }
        let mean = |v: &[f64]| v.iter().sum::<f64>() / v.len() as f64;
        let deviation = |v: &[f64], about: f64| {
            (v.iter().map(|x| (x - about).powi(2)).sum::<f64>() / (v.len() - 1).max(1) as f64).sqrt()
        };
        let pa = mean(values);
        let sample_pa = deviation(values, pa);
        let white = sample_pa / (values.len() as f64).sqrt();
        // Slow noise moves the mean by more than white noise of the same size would.
        let block = values.len() / BLOCKS;
        let slow = if block >= LEAST_QUIET {
            let means: Vec<f64> = values.chunks_exact(block).map(mean).collect();
            deviation(&means, pa) / (means.len() as f64).sqrt()
        } else {
            0.0
        };
        Some(Level { pa, u_pa: white.max(slow), sample_pa })
    }
}

/// The channel at rest on either side of the burst, readings in Pa on its own scale.
pub(super) struct Rest {
    pub before: Option<Level>,
    /// Shift of the zero across the burst where one is seen, Pa.
    pub drift_pa: f64,
}

/// `burst`: samples of the burst in the window.
pub(super) fn rest(reading_pa: &[f64], burst: std::ops::Range<usize>) -> Rest {
    let before = Level::of(&reading_pa[..burst.start.min(reading_pa.len())]);
    // Gas may still leave the chamber just after the burst: the later half of what follows it.
    let left = reading_pa.len().saturating_sub(burst.end);
    let after = Level::of(&reading_pa[reading_pa.len() - left / 2..]);
    let drift_pa = match (before, after) {
        (Some(b), Some(a)) if (a.pa - b.pa).abs() > SEEN * a.u_pa.hypot(b.u_pa) => a.pa - b.pa,
        _ => 0.0,
    };
    Rest { before, drift_pa }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slow_noise_counts_more_than_white_and_a_moved_zero_is_seen() {
        let white = |i: usize| ((i * 7919) % 101) as f64 - 50.0;
        let quiet: Vec<f64> = (0..1000).map(white).collect();
        let slow: Vec<f64> = (0..1000).map(|i| white(i) + 100.0 * (i as f64 * 0.01).sin()).collect();
        let (a, b) = (Level::of(&quiet).expect("a level"), Level::of(&slow).expect("a level"));
        // The sine's own standard error of the mean of ten blocks: some 70 / sqrt(10), less what blocks of one period average.
        assert!(a.u_pa < 2.0 && b.u_pa > 10.0, "{a:?} {b:?}");
        assert!(Level::of(&quiet[..4]).is_none());
        let moved: Vec<f64> = (0..1000).map(|i| white(i) + if i >= 500 { 40.0 } else { 0.0 }).collect();
        // Seen to the scatter of the two means, some 29 / sqrt(250) and 29 / sqrt(400).
        assert!((rest(&moved, 400..500).drift_pa - 40.0).abs() < 10.0);
        assert_eq!(rest(&quiet, 400..500).drift_pa, 0.0);
        assert!(rest(&quiet, 0..500).before.is_none());
    }
}
