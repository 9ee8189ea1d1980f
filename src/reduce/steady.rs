//! Thrust against pressure through the burn: a check of nozzle and cell.

use crate::measure::integral;

/// A spread of thrust over pressure through the burn from which on it is worth a look (project's own judgement, no source).
const STEADY: f64 = 0.03;
/// Slices of the action time, and the share of it left out at either end, where rise and tail-off are short against the
/// response of stand and transducer.
const SLICES: usize = 8;
const LEFT_OUT: f64 = 0.05;
/// Slices below this share of the highest pressure are passed over.
const LEAST_PRESSURE: f64 = 0.3;
/// Thrust is C A p − A_e p_a with the vacuum coefficient C, throat A and exit A_e: against the pressure above the air it is a line
/// whose intercept is (C − A_e/A) A p_a. Coefficients of 1.5 and exits of up to 12 throats are allowed for (from memory).
const INTERCEPTS: [f64; 2] = [-10.5, 0.5];
const TYPICAL_COEFFICIENT: f64 = 1.5;
const TRIED: u32 = 20;
/// Part of a line's sum of squares below which a step explains the slices better.
const STEP_EVIDENCE: f64 = 0.5;

/// Thrust and pressure of one firing at the same instants.
pub(super) struct Course<'a> {
    pub time_s: &'a [f64],
    pub thrust_n: &'a [f64],
    /// Above the outside air.
    pub above_pa: &'a [f64],
    pub outside_pa: f64,
    /// Ends of the action time.
    pub action_s: [f64; 2],
    pub throat_area_m2: Option<f64>,
    /// Growth of the throat's area through the burn as a share, where it was measured.
    pub growth: f64,
}

/// What thrust over pressure does through the burn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Verdict {
    /// Spread of thrust over pressure, as a share.
    Steady(f64),
    /// It moves as thrust against the outside air must where the pressure changes.
    ByPressure(f64),
    /// Change through the burn, as a share.
    Drifts(f64),
    /// Change, as a share, and the log time.
    Steps(f64, f64),
}

/// Thrust over pressure in slices of the burn: `None` where there are too few to tell.
pub(super) fn judge(course: &Course<'_>) -> Option<(Verdict, f64)> {
    let [from, to] = course.action_s;
    let length = (to - from) * (1.0 - 2.0 * LEFT_OUT) / SLICES as f64;
    let start = from + LEFT_OUT * (to - from);
    let mut slices: Vec<(f64, f64, f64)> = (0..SLICES)
        .map(|k| {
            let (a, b) = (start + k as f64 * length, start + (k + 1) as f64 * length);
            let mean = |y: &[f64]| integral::between(course.time_s, y, a, b) / length;
            (0.5 * (a + b), mean(course.thrust_n), mean(course.above_pa))
        })
        .collect();
    let highest = slices.iter().map(|s| s.2).fold(0.0, f64::max);
    slices.retain(|s| s.2 > LEAST_PRESSURE * highest && s.1.is_finite());
    if slices.len() < SLICES / 2 {
        return None;
    }
    let n = slices.len() as f64;
    let (thrust, pressure) = slices.iter().fold((0.0, 0.0), |(f, p), s| (f + s.1 / n, p + s.2 / n));
    let area = course.throat_area_m2.unwrap_or(thrust / pressure / TYPICAL_COEFFICIENT);
    let ratios = |intercept: f64| -> Vec<(f64, f64)> {
        let grown = |t: f64| 1.0 + course.growth * (t - from) / (to - from);
        slices.iter().map(|(t, f, p)| (*t, (f - intercept) / p / grown(*t))).collect()
    };
    let plain = ratios(0.0);
    // Shares are of thrust over pressure as it is: an intercept would make every ratio larger and its change look smaller.
    let whole = plain.iter().map(|r| r.1).sum::<f64>() / n;
    let spread = |ratios: &[(f64, f64)]| range(ratios) / whole.abs();
    if spread(&plain) < STEADY {
        return Some((Verdict::Steady(spread(&plain)), thrust / pressure));
    }
    let unit = area * course.outside_pa;
    let least = (0..=TRIED)
        .map(|k| INTERCEPTS[0] + (INTERCEPTS[1] - INTERCEPTS[0]) * f64::from(k) / f64::from(TRIED))
        .map(|share| ratios(share * unit))
        .min_by(|a, b| spread(a).total_cmp(&spread(b)))?;
    if spread(&least) < STEADY {
        return Some((Verdict::ByPressure(spread(&plain)), thrust / pressure));
    }
    Some((step_or_drift(&least, whole), thrust / pressure))
}

/// Highest less lowest.
fn range(ratios: &[(f64, f64)]) -> f64 {
    let (low, high) = ratios.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), r| (l.min(r.1), h.max(r.1)));
    high - low
}

/// `whole`: mean of thrust over pressure, of which shares are given.
fn step_or_drift(ratios: &[(f64, f64)], whole: f64) -> Verdict {
    let mean = |r: &[(f64, f64)]| r.iter().map(|x| x.1).sum::<f64>() / r.len() as f64;
    let squares = |r: &[(f64, f64)]| r.iter().map(|x| (x.1 - mean(r)).powi(2)).sum::<f64>();
    let n = ratios.len() as f64;
    let (t, v) = (ratios.iter().map(|r| r.0).sum::<f64>() / n, mean(ratios));
    let sxx: f64 = ratios.iter().map(|r| (r.0 - t).powi(2)).sum();
    let slope = ratios.iter().map(|r| (r.0 - t) * (r.1 - v)).sum::<f64>() / sxx;
    let around_line: f64 = ratios.iter().map(|r| (r.1 - v - slope * (r.0 - t)).powi(2)).sum();
    let span = ratios.last().map_or(0.0, |l| l.0) - ratios.first().map_or(0.0, |f| f.0);
    let step = (1..ratios.len())
        .map(|k| (squares(&ratios[..k]) + squares(&ratios[k..]), k))
        .min_by(|a, b| a.0.total_cmp(&b.0));
    match step {
        Some((left, k)) if left < STEP_EVIDENCE * around_line => {
            let at = 0.5 * (ratios[k - 1].0 + ratios[k].0);
            Verdict::Steps((mean(&ratios[k..]) - mean(&ratios[..k])) / (whole + mean(&ratios[..k]) - v), at)
        }
        _ => Verdict::Drifts(slope * span / (whole - 0.5 * slope * span)),
    }
}

/// The verdict in words.
pub(super) fn words(course: &Course<'_>) -> Option<String> {
    let (verdict, ratio_m2) = judge(course)?;
    let percent = |share: f64| format!("{:.1} %", 100.0 * share);
    let size = course.throat_area_m2.map_or(String::new(), |a| {
        format!(" (in the mean {:.3} of the throat area times gauge pressure)", ratio_m2 / a)
    });
    let wear = if course.growth == 0.0 { "" } else { ", the throat's measured growth taken to be even" };
    Some(match verdict {
        Verdict::Steady(by) => format!(
            "thrust over pressure is steady within {} through the burn{size}{wear}: nozzle, cell and transducer agree",
            percent(by)
        ),
        Verdict::ByPressure(by) => format!(
            "thrust over pressure changes by {} through the burn{size}{wear}: no more than a change of pressure against the outside air may do",
            percent(by)
        ),
        Verdict::Drifts(by) => format!(
            "CAUTION: thrust over pressure drifts by {:+.1} % through the burn{size}{wear}: the throat wore or narrowed, or cell or transducer drifted; look at nozzle and zeros",
            100.0 * by
        ),
        Verdict::Steps(by, at) => format!(
            "CAUTION: thrust over pressure steps by {:+.1} % near {at:.2} s of log time{size}{wear}: a part of the nozzle may have gone, or the motor or the cell may have shifted; look at the nozzle",
            100.0 * by
        ),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Judges thrust and pressure given by share of the burn; throat 1 cm², air 1 bar.
    fn verdict(growth: f64, thrust_n: impl Fn(f64, f64) -> f64, above_pa: impl Fn(f64) -> f64) -> Verdict {
        let time_s: Vec<f64> = (0..=2000).map(|i| f64::from(i) * 1e-3).collect();
        let above: Vec<f64> = time_s.iter().map(|t| above_pa(t / 2.0)).collect();
        let thrust: Vec<f64> = time_s.iter().zip(&above).map(|(t, p)| thrust_n(t / 2.0, *p)).collect();
        let course = Course {
            time_s: &time_s,
            thrust_n: &thrust,
            above_pa: &above,
            outside_pa: 1e5,
            action_s: [0.0, 2.0],
            throat_area_m2: Some(1e-4),
            growth,
        };
        assert!(words(&course).is_some());
        judge(&course).expect("a verdict").0
    }

    const AREA: f64 = 1.5e-4;

    #[test]
    fn a_steady_nozzle_and_one_against_the_air_are_no_fault() {
        assert!(matches!(verdict(0.0, |_, p| AREA * p, |_| 3e6), Verdict::Steady(_)));
        // Vacuum coefficient 1.7, exit six throats: from 40 to 15 bar thrust over pressure falls by itself.
        let against_air = |_: f64, p: f64| 1.7e-4 * (p + 1e5) - 6e-4 * 1e5;
        assert!(matches!(verdict(0.0, against_air, |x| 4e6 - 2.5e6 * x), Verdict::ByPressure(by) if by > STEADY));
    }

    #[test]
    fn a_drift_and_a_step_are_told_apart_and_sized() {
        let drift = verdict(0.0, |x, p| AREA * (1.0 + 0.1 * x) * p, |_| 3e6);
        // Between the middles of the first and last of eight slices over 90 % of the burn: 0.7875 of it, of 10 %.
        assert!(matches!(drift, Verdict::Drifts(by) if (by - 0.0782).abs() < 0.004), "{drift:?}");
        let step = verdict(0.0, |x, p| if x > 0.6 { 0.88 * AREA * p } else { AREA * p }, |_| 3e6);
        // The step falls inside a slice: its size is blurred by a part of one of three or five.
        assert!(
            matches!(step, Verdict::Steps(by, at) if (by + 0.12).abs() < 0.03 && (at - 1.2).abs() < 0.25),
            "{step:?}"
        );
    }

    #[test]
    fn a_throat_that_was_measured_to_grow_explains_the_drift() {
        let grown = verdict(0.1, |x, p| AREA * (1.0 + 0.1 * x) * p, |_| 3e6);
        assert!(matches!(grown, Verdict::Steady(by) if by < 1e-3), "{grown:?}");
    }
}
