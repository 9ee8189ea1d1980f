//! Thrust cut off at a limit: what impulse and peak may have been, from a pressure trace that was not cut. The figures
//! themselves stay lower bounds; this stands beside them, labelled as an estimate.

use super::Record;
use super::curve::Curve;
use super::figures::clipped_in_burn;
use super::pressure::Pressure;
use super::zero::Zero;
use crate::firing::{Estimate, Figure, Quantities};
use crate::uncertainty::statistics;

/// Samples of thrust at pressures of at least this share of the highest tell thrust over pressure.
const LEAST_PRESSURE: f64 = 0.2;
const LEAST_SAMPLES: usize = 8;
/// Samples beside a cut that its filter or its edge may have touched.
const BESIDE: usize = 2;
/// What thrust over pressure may do unseen under the cut, limits as a share (project's own judgement, no source).
const UNSEEN: f64 = 0.01;
/// Samples between which the pressure changes by more than this share of the highest are steep; what thrust over pressure may be off by
/// on slopes alone, limits as a share (project's own judgement, no source).
const STEEP: f64 = 0.05;
const ON_SLOPES: f64 = 0.05;
/// The estimate must reach the cut itself within this share, or pressure and thrust contradict each other.
const BELOW_CUT: f64 = 0.05;
/// Intercepts of thrust against the pressure above the air, in throat areas times the outside pressure, as exits of up to twelve
/// throats give them (see `steady`); throat area by a coefficient of 1.5.
const INTERCEPTS: [f64; 2] = [-10.5, 0.5];
const TYPICAL_COEFFICIENT: f64 = 1.5;

/// Thrust as a line in the pressure above the air.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Model {
    slope_m2: f64,
    intercept_n: f64,
}

impl Model {
    fn thrust_n(&self, above_pa: f64) -> f64 {
        self.slope_m2 * above_pa + self.intercept_n
    }
}

/// Samples of thrust in N and pressure above the air in Pa.
type Pairs = [(f64, f64)];

fn through_zero(pairs: &Pairs) -> Option<Model> {
    let (fp, pp) = pairs.iter().fold((0.0, 0.0), |(fp, pp), (f, p)| (fp + f * p, pp + p * p));
    let slope_m2 = fp / pp;
    (slope_m2.is_finite() && slope_m2 > 0.0).then_some(Model { slope_m2, intercept_n: 0.0 })
}

/// With an intercept, held within what a nozzle may give.
fn with_intercept(pairs: &Pairs, plain: Model, outside_pa: f64) -> Option<Model> {
    let n = pairs.len() as f64;
    let (f, p) = pairs.iter().fold((0.0, 0.0), |(f, p), x| (f + x.0 / n, p + x.1 / n));
    let spread: f64 = pairs.iter().map(|x| (x.1 - p).powi(2)).sum();
    let slope = pairs.iter().map(|x| (x.1 - p) * (x.0 - f)).sum::<f64>() / spread;
    let unit = plain.slope_m2 / TYPICAL_COEFFICIENT * outside_pa;
    let intercept_n = (f - slope * p).clamp(INTERCEPTS[0] * unit, INTERCEPTS[1] * unit);
    let slope_m2 = (f - intercept_n) / p;
    (slope_m2.is_finite() && slope_m2 > 0.0).then_some(Model { slope_m2, intercept_n })
}

/// What thrust would have been where it was cut.
struct Found {
    /// Impulse above the cut and under it in the cut stretches, N s.
    added: f64,
    filled: f64,
    peak_n: f64,
    /// Relative standard uncertainty of the filled thrust, from thrust over pressure alone.
    model_u: f64,
    samples: usize,
}

/// `cut`: whether each sample was; thrust as it was measured; `growth` of the throat's area through the burn, as a share.
fn fill(
    time_s: &[f64],
    thrust_n: &[f64],
    above_pa: &[f64],
    cut: &[bool],
    outside_pa: f64,
    growth: f64,
) -> Result<Found, String> {
    let highest = above_pa.iter().copied().fold(0.0, f64::max);
    let near = |i: usize| cut[i.saturating_sub(BESIDE)..(i + BESIDE + 1).min(cut.len())].iter().any(|c| *c);
    let steep = |i: usize| {
        let step = |a: usize, b: usize| (above_pa[a] - above_pa[b]).abs() > STEEP * highest;
        i > 0 && step(i, i - 1) || i + 1 < cut.len() && step(i, i + 1)
    };
    let mut usable: Vec<usize> =
        (0..cut.len()).filter(|i| above_pa[*i] > LEAST_PRESSURE * highest && !near(*i)).collect();
    // Where both run steeply a part of a sample between them counts as a difference of thrust: such samples only where there are no
    // others.
    let calm: Vec<usize> = usable.iter().copied().filter(|i| !steep(*i)).collect();
    let calm_enough = calm.len() >= LEAST_SAMPLES;
    if calm_enough {
        usable = calm;
    }
    if usable.len() < LEAST_SAMPLES {
        return Err(format!("only {} samples of the burn outside the cut tell thrust over pressure", usable.len()));
    }
    let pairs_of =
        |indices: &[usize]| -> Vec<(f64, f64)> { indices.iter().map(|i| (thrust_n[*i], above_pa[*i])).collect() };
    let pairs = pairs_of(&usable);
    let none = || "thrust does not rise with pressure outside the cut".to_string();
    let plain = through_zero(&pairs).ok_or_else(none)?;
    let line = with_intercept(&pairs, plain, outside_pa).ok_or_else(none)?;
    let thrust = |p: f64| 0.5 * (plain.thrust_n(p) + line.thrust_n(p));
    let first_cut = cut.iter().position(|c| *c).unwrap_or(0);
    let (early, late): (Vec<usize>, Vec<usize>) = usable.iter().partition(|i| **i < first_cut);
    // Before the cut and after it: what nozzle, response and zeros do between them is not known along the cut.
    let moved = match (through_zero(&pairs_of(&early)), through_zero(&pairs_of(&late))) {
        (Some(a), Some(b)) if early.len().min(late.len()) >= LEAST_SAMPLES => {
            0.5 * (a.slope_m2 - b.slope_m2).abs() / plain.slope_m2
        }
        _ => 0.0,
    };
    // When in the burn a throat grew is not known.
    let moved = moved.max(0.5 * growth.abs()).max(if calm_enough { 0.0 } else { ON_SLOPES });
    let residual: f64 = pairs.iter().map(|(f, p)| (f - thrust(*p)).powi(2)).sum::<f64>();
    let pressure_squares: f64 = pairs.iter().map(|x| x.1 * x.1).sum();
    let scatter = (residual / (pairs.len() - 1) as f64 / pressure_squares).sqrt() / plain.slope_m2;
    let (mut added, mut filled, mut peak_n, mut reached, mut at_cut) = (0.0, 0.0, 0.0_f64, 0.0, 0.0);
    for i in (0..cut.len()).filter(|i| cut[*i]) {
        let left = if i > 0 { time_s[i] - time_s[i - 1] } else { 0.0 };
        let right = time_s.get(i + 1).map_or(0.0, |t| t - time_s[i]);
        let share_s = 0.5 * (left + right);
        let estimate_n = thrust(above_pa[i]);
        reached += share_s * estimate_n;
        at_cut += share_s * thrust_n[i];
        // Where it was cut the thrust was at least what was read.
        added += share_s * (estimate_n - thrust_n[i]).max(0.0);
        filled += share_s * estimate_n.max(thrust_n[i]);
        peak_n = peak_n.max(estimate_n);
    }
    if reached < (1.0 - BELOW_CUT) * at_cut {
        return Err("the thrust that the pressure speaks for does not reach the cut: they contradict each other".into());
    }
    let top = thrust(highest);
    let models = 0.5 * (plain.thrust_n(highest) - line.thrust_n(highest)).abs() / top;
    let model_u = ((models.powi(2) + moved.powi(2) + UNSEEN.powi(2)) / 3.0 + scatter.powi(2)).sqrt();
    Ok(Found { added, filled, peak_n, model_u, samples: usable.len() })
}

/// Puts estimates beside the bounds of total impulse and peak thrust where the thrust was cut in the burn and the pressure was
/// not; says so, or why there is none.
pub(super) fn estimate(
    record: &Record<'_>,
    zero: &Zero,
    curve: &Curve,
    pressure: Option<&Pressure>,
    q: &mut Quantities,
    findings: &mut Vec<String>,
) {
    let ranges = clipped_in_burn(record);
    if ranges.is_empty() {
        return;
    }
    let none = "no estimate of what was cut off";
    let Some(pressure) = pressure else {
        findings.push(format!(
            "{none}: there is no pressure trace, and how high the thrust went between the flanks of the cut they do not tell"
        ));
        return;
    };
    if pressure.clipped {
        findings.push(format!("{none}: the pressure was cut off too"));
        return;
    }
    let offset = zero.window.start;
    let (from, to) = (zero.burst.start, zero.burst.end);
    let inside = from - offset..to - offset;
    let (starts, ends) = (record.time_s[record.burn.start], record.time_s[record.burn.end - 1]);
    // A throat that was measured to grow lets the same pressure push more: evenly along the burn, for want of better knowledge.
    let grown =
        |t: f64| 1.0 + pressure.growth * ((t - starts) / (ends - starts).max(f64::MIN_POSITIVE)).clamp(0.0, 1.0);
    let above_pa: Vec<f64> = pressure.curve_pa[inside.clone()]
        .iter()
        .zip(&record.time_s[from..to])
        .map(|(p, t)| (p - pressure.air_pa) * grown(*t))
        .collect();
    let cut: Vec<bool> = (from..to).map(|i| ranges.iter().any(|r| r.contains(&i))).collect();
    let found =
        fill(&record.time_s[from..to], &zero.thrust_n[inside], &above_pa, &cut, pressure.air_pa, pressure.growth);
    let found = match found {
        Ok(found) => found,
        Err(why) => {
            findings.push(format!("{none}: {why}"));
            return;
        }
    };
    let method = format!(
        "pressure trace: thrust over pressure of the {} samples of the burn that were not cut, times the pressure under the cut",
        found.samples
    );
    let peak_n = found.peak_n.max(curve.peak.thrust_n);
    let pressure_u = pressure.peak_noise_pa / (pressure.peak_pa - pressure.air_pa);
    // Figure, value, and standard uncertainty of what the pressure adds.
    let total = q.total_impulse.as_ref().map_or(0.0, |f| f.value) + found.added;
    let mut said = Vec::new();
    for (figure, name, value, model_u) in [
        (&mut q.total_impulse, "total impulse", total, found.model_u * found.filled),
        (&mut q.peak_thrust, "peak thrust", peak_n, found.model_u.hypot(pressure_u) * peak_n),
    ] {
        let Some(figure) = figure else { continue };
        let made = beside(figure, value, model_u, &method);
        let spread = made
            .interval_95
            .map_or("uncertainty not known".to_string(), |[low, high]| format!("95 % interval {low:.4} to {high:.4}"));
        said.push(format!("{name} {value:.4} {} ({spread})", figure.unit));
        figure.estimate = Some(made);
    }
    findings.push(format!(
        "ESTIMATE, not measured: {}; by the {method}. The figures themselves stay lower bounds",
        said.join(", ")
    ));
}

/// The measured part's uncertainty grows with the value, since its scale is that of the filled part too.
fn beside(figure: &Figure, value: f64, model_u: f64, method: &str) -> Estimate {
    let u = figure.standard_uncertainty.map(|u| (u * value / figure.value).hypot(model_u));
    let half = statistics::normal_quantile(0.975).unwrap_or(1.96);
    // It was no less than what was measured, which has its own uncertainty.
    let least = figure.interval_95.map_or(f64::NEG_INFINITY, |[low, _]| low);
    Estimate {
        value,
        standard_uncertainty: u,
        interval_95: u.map(|u| [(value - half * u).max(least), value + half * u]),
        method: method.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// An arched burn at 1 kHz, 400 N at the top and 30 bar, cut at 300 N.
    fn cut_arch(thrust: impl Fn(f64) -> f64) -> (Vec<f64>, Vec<f64>, Vec<f64>, Vec<bool>, f64, f64) {
        let time_s: Vec<f64> = (0..=2000).map(|i| f64::from(i) * 1e-3).collect();
        let above: Vec<f64> = time_s.iter().map(|t| 3e6 * t * (2.0 - t)).collect();
        let whole: Vec<f64> = above.iter().map(|p| thrust(*p)).collect();
        let cut: Vec<bool> = whole.iter().map(|f| *f > 300.0).collect();
        let read: Vec<f64> = whole.iter().map(|f| f.min(300.0)).collect();
        let missing =
            crate::measure::integral::trapezoid(&time_s, &whole) - crate::measure::integral::trapezoid(&time_s, &read);
        let top = whole.iter().copied().fold(0.0, f64::max);
        (time_s, read, above, cut, missing, top)
    }

    #[test]
    fn what_was_cut_comes_back_where_thrust_follows_pressure() {
        let (t, f, p, cut, missing, top) = cut_arch(|p| p * 400.0 / 3e6);
        let found = fill(&t, &f, &p, &cut, 1e5, 0.0).expect("an estimate");
        // Straight lines between samples at 1 ms bend by less than 1e-6 of the thrust; the cut's ends lie between samples.
        assert!((found.added / missing - 1.0).abs() < 1e-3, "{} {missing}", found.added);
        assert!((found.peak_n / top - 1.0).abs() < 1e-6);
    }

    #[test]
    fn a_nozzle_against_the_air_is_within_what_is_said() {
        // Throat 0.83 cm², coefficient in vacuum 1.7, exit six throats.
        let (t, f, p, cut, missing, top) = cut_arch(|p| 0.83e-4 * (1.7 * (p + 1e5) - 6e5));
        let found = fill(&t, &f, &p, &cut, 1e5, 0.0).expect("an estimate");
        assert!((found.added - missing).abs() < 2.0 * found.model_u * found.filled, "{} {missing}", found.added);
        assert!((found.peak_n - top).abs() < 2.0 * found.model_u * top, "{} {top} {}", found.peak_n, found.model_u);
    }

    #[test]
    fn no_estimate_where_nothing_but_the_cut_is_left_or_both_contradict() {
        let (t, f, p, cut, ..) = cut_arch(|p| p * 400.0 / 3e6);
        assert!(fill(&t, &f, &p, &vec![true; cut.len()], 1e5, 0.0).is_err());
        let flat: Vec<f64> = p.iter().zip(&cut).map(|(p, c)| if *c { 1e6 } else { *p }).collect();
        assert!(fill(&t, &f, &flat, &cut, 1e5, 0.0).is_err_and(|why| why.contains("contradict")));
    }
}
