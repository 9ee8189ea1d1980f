//! First and last crossing of a level by a sampled curve.

/// An instant at which the curve crosses a level.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Crossing {
    pub time_s: f64,
    /// Half-width of the stretch in which the crossing may lie because of the sampling, s; 0 where the curve shows it.
    pub sampling_half_width_s: f64,
    /// Slope of the curve there, its unit per second (absolute value); infinite for a jump.
    pub slope: f64,
}

/// First crossing upward of `level`. Time and value have equal length, time increasing.
pub fn first_up(time_s: &[f64], value: &[f64], level: f64) -> Option<Crossing> {
    if *value.first()? >= level {
        return None;
    }
    let i = value.iter().position(|v| *v >= level)?;
    let point = |k: usize| Some((*time_s.get(k)?, *value.get(k)?));
    let before = if i >= 2 { point(i - 2) } else { None };
    crossing([before, point(i - 1), point(i), point(i + 1)], level)
}

/// Last crossing downward of `level`.
pub fn last_down(time_s: &[f64], value: &[f64], level: f64) -> Option<Crossing> {
    if *value.last()? >= level {
        return None;
    }
    let i = value.iter().rposition(|v| *v >= level)?;
    let point = |k: usize| Some((*time_s.get(k)?, *value.get(k)?));
    let beyond = if i >= 1 { point(i - 1) } else { None };
    crossing([point(i + 2), point(i + 1), point(i), beyond], level)
}

/// Crossing between the second point (below) and the third (at or above); the fourth lies further up, the first further
/// down. Works in either direction of time.
fn crossing(points: [Option<(f64, f64)>; 4], level: f64) -> Option<Crossing> {
    let (below, above) = (points[1]?, points[2]?);
    let (gap_s, rise) = (above.0 - below.0, above.1 - below.1);
    let straight = (level - below.1) / rise;
    let mut fraction = straight;
    let mut half_width = 0.0;
    if let (Some(low), Some(high)) = (points[0], points[3]) {
        let further = (high.1 - above.1) / (high.0 - above.0) * gap_s;
        let foot = (below.1 - low.1) / (below.0 - low.0) * gap_s;
        // Where the curve lies flat before the gap and most of the way up after it, the turn falls inside the gap, and
        // a straight line through the gap would put a low level too close to its start: samples show only that the rise
        // is at least as steep as the line, and, while it still goes on after the gap, about as steep as it is there.
        if foot.abs() < 0.15 * rise && level - below.1 < 0.5 * rise {
            let steepest = further.max(rise);
            let tangent = 1.0 - (above.1 - level) / steepest;
            // A jump anywhere in the gap fits too if the rise is over by its end; the middle of what fits is taken.
            let over = (1.0 - further / rise).clamp(0.0, 1.0);
            let latest = tangent + (1.0 - tangent) * over;
            fraction = 0.5 * (tangent + latest);
            half_width = 0.5 * (latest - tangent);
            fraction = fraction.max(straight.min(tangent));
        }
    }
    Some(Crossing {
        time_s: below.0 + fraction * gap_s,
        sampling_half_width_s: half_width * gap_s.abs(),
        slope: (rise / gap_s).abs(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reference() -> serde_json::Value {
        serde_json::from_str(include_str!("../../tests/reference/item06_burn_time_definitions.json"))
            .expect("reference")
    }

    /// Closed-form trace of tests/reference/item06 (computed, not published), sampled finely.
    #[test]
    fn crossings_of_the_reference_trace() {
        let reference = reference();
        let test = &reference["analytic_test_vector"];
        let nodes: Vec<(f64, f64)> = test["trace"]
            .as_array()
            .expect("trace")
            .iter()
            .map(|p| (p[0].as_f64().expect("t"), p[1].as_f64().expect("f")))
            .collect();
        let value = |t: f64| {
            let k = nodes.windows(2).position(|w| t <= w[1].0).unwrap_or(nodes.len() - 2);
            let ((t0, f0), (t1, f1)) = (nodes[k], nodes[k + 1]);
            f0 + (f1 - f0) * (t - t0) / (t1 - t0)
        };
        let t: Vec<f64> = (0..=3000).map(|i| i as f64 * 0.0005).collect();
        let f: Vec<f64> = t.iter().map(|&t| value(t)).collect();
        for (percent, key) in
            [(2.0, "2pct_of_peak"), (5.0, "5pct_of_peak"), (10.0, "10pct_of_peak"), (50.0, "50pct_of_peak")]
        {
            let start = first_up(&t, &f, percent).expect("start");
            let end = last_down(&t, &f, percent).expect("end");
            assert!((start.time_s - test[key]["start"].as_f64().expect("start")).abs() < 1e-9, "{key} {start:?}");
            assert!((end.time_s - test[key]["end"].as_f64().expect("end")).abs() < 1e-9, "{key} {end:?}");
        }
    }

    #[test]
    fn a_rise_within_one_gap_is_put_into_its_middle_and_says_how_far_it_may_be_off() {
        let t: Vec<f64> = (0..6).map(f64::from).collect();
        let f = [0.0, 0.0, 100.0, 100.0, 100.0, 0.0];
        let c = first_up(&t, &f, 5.0).expect("crossing");
        assert!((c.time_s - 1.525).abs() < 0.05 && c.sampling_half_width_s > 0.4, "{c:?}");
        let c = last_down(&t, &f, 5.0).expect("crossing");
        assert!(c.time_s > 4.0 && c.time_s < 5.0);
    }

    #[test]
    fn a_ramp_that_starts_inside_a_gap_is_followed_back() {
        // Ramp from t = 1.6 with slope 50 a second: the 5 level is crossed at 1.7.
        let t: Vec<f64> = (0..8).map(f64::from).collect();
        let f: Vec<f64> = t.iter().map(|t| (50.0 * (t - 1.6)).clamp(0.0, 200.0)).collect();
        let c = first_up(&t, &f, 5.0).expect("crossing");
        assert!((c.time_s - 1.7).abs() < 0.02, "{c:?}");
    }

    #[test]
    fn no_crossing_is_none() {
        assert_eq!(first_up(&[0.0, 1.0], &[0.0, 1.0], 2.0), None);
        assert_eq!(first_up(&[0.0, 1.0], &[3.0, 1.0], 2.0), None);
        assert_eq!(last_down(&[0.0, 1.0], &[3.0, 2.5], 2.0), None);
        assert_eq!(first_up(&[], &[], 2.0), None);
    }
}
