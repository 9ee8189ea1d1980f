//! Composes the steps above into a firing. Pure: same inputs, same numbers.

mod bursts;
mod checks;
mod clipped;
mod curve;
mod figures;
mod force;
mod pressure;
mod sources;
mod stand;
mod steady;
mod zero;

use crate::burn::events::{self, Event, Expectation, Segmentation};
use crate::calibration::Calibration;
use crate::condition::clipping;
use crate::firing::{
    Burst, BurstKind, Conditioning, Curves, Firing, InputFile, MonteCarlo, Provenance, RunRecord, SCHEMA, StandRecord,
};
use crate::log::Log;
use crate::problem::Problem;
use crate::run::{self, Gravity, Orientation, RunSpec};
use crate::uncertainty::monte_carlo;

/// All that a reduction depends on, already read.
#[derive(Debug, Clone)]
pub struct Inputs {
    pub run: RunSpec,
    pub log: Log,
    /// One a channel of `run.channels`, in that order; `None` for channels that carry no force.
    pub calibrations: Vec<Option<Calibration>>,
    pub files: Vec<InputFile>,
}

/// A firing with the curves behind it.
#[derive(Debug, Clone)]
pub struct Reduction {
    pub firing: Firing,
    pub curves: Curves,
}

/// Share of the peak by which the zero may move across a burst: on a stand that does not carry the motor's weight, and on
/// one that does where the propellant was not weighed.
const SHIFT_HORIZONTAL: f64 = 0.02;
const SHIFT_VERTICAL: f64 = 0.06;

/// From this share of the peak on, a swing that may be the stand's leaves no more than an upper bound of the peak.
const SWING_SHARE: f64 = 0.01;

/// The record on its way through the steps.
struct Record<'a> {
    inputs: &'a Inputs,
    gravity: Gravity,
    orientation: Orientation,
    channels: Vec<force::Channel<'a>>,
    /// Time at the centre of what each reading stands for, s.
    time_s: Vec<f64>,
    /// Force on the motor's side of the stand, thrust positive, N.
    force_n: Vec<f64>,
    /// +1, or -1 where thrust pulls what the weights pushed.
    sign: f64,
    /// Share of the motor's force that reaches the cells.
    force_ratio: f64,
    segmentation: Segmentation,
    burn: Event,
    /// Samples cut by the converter or the amplifier, as ranges.
    clipped: Vec<std::ops::Range<usize>>,
    clipped_at: Option<f64>,
    findings: Vec<String>,
}

impl Record<'_> {
    fn interval_s(&self) -> f64 {
        self.inputs.log.interval_s
    }

    /// The converter's averaging time where it covers about one sample interval, so that readings are means of cells.
    fn averaged_cells(&self) -> bool {
        self.inputs.run.log.averaging_s.is_some_and(|a| (0.7..1.4).contains(&(a / self.interval_s())))
    }
}

/// Reduces one firing.
///
/// # Errors
/// No burst found, a wrong column or unit, readings beyond what the calibration can invert.
pub fn reduce(inputs: &Inputs) -> Result<Reduction, Problem> {
    let record = read_record(inputs)?;
    let zero = zero::correct(&record);
    let stand = stand::find(&record, &zero);
    let curve = curve::condition(&record, &zero, stand.as_ref())?;
    let mut figures = figures::measure(&record, &zero, &curve)?;
    if let Some(peak) = &mut figures.quantities.peak_thrust
        && peak.bound.is_none()
        && stand.as_ref().is_some_and(|s| !s.taken_out && s.share_of_peak.unwrap_or(0.0) > SWING_SHARE)
    {
        // The swing may be the stand's, and then the motor's own peak lies lower.
        peak.bound = Some("upper".to_string());
    }
    let checks = checks::all(&record, &zero, &curve, &figures, stand.as_ref());
    let bursts = describe_bursts(&record, &figures);
    let curves = curve::for_display(&record, &zero, &curve, &figures);
    let mut findings = inputs.log.findings.clone();
    findings.extend(record.findings.iter().cloned());
    findings.append(&mut figures.findings);
    if let Some(count) = stand.as_ref().map(|s| s.impossible).filter(|n| *n > 0) {
        findings.push(format!(
            "{count} readings that no mass on a spring can give are bridged in the curve; the impulse still counts them"
        ));
    }
    let firing = Firing {
        schema: SCHEMA.to_string(),
        run: RunRecord {
            id: inputs.run.id.clone(),
            pour: inputs.run.pour.clone(),
            date: inputs.run.date.clone(),
            conditions: inputs.run.conditions.clone(),
            tags: inputs.run.tags.clone(),
        },
        quantities: figures.quantities,
        burn: figures.times,
        bursts,
        motor_class: figures.class,
        stand: stand.as_ref().map(|s| StandRecord {
            natural_frequency_hz: s.frequency_hz,
            damping_ratio: Some(s.damping_ratio),
            source: s.source.to_string(),
        }),
        conditioning: Conditioning {
            sample_rate_hz: 1.0 / inputs.log.interval_s,
            noise_n: curve.quiet_sd_n,
            cutoff_hz: curve.conditioned.cutoff_hz,
            filter: curve.describe(stand.as_ref()),
            baseline_before_n: zero.baseline.before.map(|q| q.level * record.sign),
            baseline_after_n: zero.baseline.after.map(|q| q.level * record.sign),
        },
        uncertainty_budget: figures.budget,
        checks,
        provenance: Provenance {
            program: env!("CARGO_PKG_NAME").to_string(),
            version: env!("CARGO_PKG_VERSION").to_string(),
            inputs: inputs.files.clone(),
            records: inputs.log.records,
            repairs: inputs.log.repairs.clone(),
            monte_carlo: Some(MonteCarlo { trials: monte_carlo::TRIALS, seed: monte_carlo::SEED }),
            findings,
        },
    };
    Ok(Reduction { firing, curves })
}

fn read_record(inputs: &Inputs) -> Result<Record<'_>, Problem> {
    let run = &inputs.run;
    let log_file = &run.log.file;
    let mut findings = Vec::new();
    let gravity = run::gravity(&run.site);
    findings.push(format!("gravity {:.5} m/s²: {}", gravity.value_m_s2, gravity.source));
    let orientation = run.stand.orientation.unwrap_or_else(|| {
        findings
            .push("no stand orientation given: taken as horizontal, so no weight of the motor in the reading".into());
        Orientation::Horizontal
    });
    let channels = force::channels(inputs)?;
    let half_average_s = run.log.averaging_s.map_or(0.0, |a| 0.5 * a);
    if half_average_s > 0.0 {
        findings.push(format!(
            "converter averages over {:.4} s before each stamp: readings belong to the middle, {:.4} s earlier",
            2.0 * half_average_s,
            half_average_s
        ));
    }
    let time_s: Vec<f64> = inputs.log.time_s.iter().map(|t| t - half_average_s).collect();
    let force_ratio = run.stand.force_ratio.map_or(1.0, |r| r.value);
    if force_ratio != 1.0 {
        findings.push(format!(
            "force ratio {force_ratio}: thrust = force at the cell / {force_ratio} (the share of the motor's force that reaches the cell)"
        ));
    }
    let mut force_n = force::total(&channels);
    force_n.iter_mut().for_each(|f| *f /= force_ratio);
    if force_n.len() < 8 {
        return Err(Problem::new(format!("{} records with a force reading", force_n.len()))
            .expected("a log of a firing, at least 8 records")
            .in_file(log_file));
    }
    let weight_n = run.motor.propellant_mass_kg.map(|m| m.value * gravity.value_m_s2);
    let expectation = match orientation {
        Orientation::Horizontal => Expectation { relative_shift: SHIFT_HORIZONTAL, shift: 0.0 },
        _ => Expectation {
            relative_shift: if weight_n.is_some() { SHIFT_HORIZONTAL } else { SHIFT_VERTICAL },
            shift: weight_n.unwrap_or(0.0),
        },
    };
    let (mut clipped, mut clipped_at, mut never_quiet) = (Vec::new(), None, Vec::new());
    for channel in &channels {
        for found in clipping::find_clipping(&channel.column.values) {
            if found.is_away_from_rest(&channel.column.values) {
                never_quiet.extend(found.ranges.iter().cloned());
            }
            clipped_at = Some(found.limit);
            clipped.extend(found.ranges);
        }
    }
    let mut segmentation = events::find(&time_s, &force_n, inputs.log.interval_s, expectation, &never_quiet);
    let chosen =
        bursts::choose(&segmentation, &time_s, &run.check_loads, &run.reduction).map_err(|p| p.in_file(log_file))?;
    // Where the propellant was not weighed nobody knows where a vertical stand's zero will come to rest.
    let expected_shift = match (orientation, weight_n) {
        (Orientation::Horizontal, _) => Some(0.0),
        (Orientation::NozzleUp, Some(w)) => Some(-w),
        (Orientation::NozzleDown, Some(w)) => Some(w),
        _ => None,
    };
    if let Some(shift) = expected_shift {
        // The cell may pull where the weights pushed: then its zero moves the other way too.
        let turned = segmentation.events[chosen].impulse.signum();
        bursts::take_up_tail(&mut segmentation, chosen, turned * shift, &time_s, &force_n);
    }
    let mut burn = segmentation.events[chosen];
    let sign = if burn.impulse < 0.0 { -1.0 } else { 1.0 };
    if sign < 0.0 {
        force_n.iter_mut().for_each(|f| *f = -*f);
        for event in segmentation.events.iter_mut().chain([&mut burn]) {
            event.impulse = -event.impulse;
            event.peak = -event.peak;
            (event.level_before, event.level_after) = (-event.level_before, -event.level_after);
        }
    }
    if let Some(mass) = run.motor.propellant_mass_kg.filter(|m| m.value * gravity.value_m_s2 > burn.peak.abs()) {
        return Err(Problem::new(format!(
            "the propellant's {} kg weigh {:.0} N, more than the whole thrust of {:.4} N",
            mass.value,
            mass.value * gravity.value_m_s2,
            burn.peak.abs()
        ))
        .expected("a motor that lifts its own propellant many times over")
        .remedy("check the unit of propellant_mass (g or kg) in run.toml, and the unit of the calibration's loads"));
    }
    widen_to_overrides(inputs, &time_s, &mut burn);
    bursts::join_quiet(&mut segmentation, &burn);
    Ok(Record {
        inputs,
        gravity,
        orientation,
        channels,
        time_s,
        force_n,
        sign,
        force_ratio,
        segmentation,
        burn,
        clipped,
        clipped_at,
        findings,
    })
}

/// A person's start and end lie inside the burst by definition.
fn widen_to_overrides(inputs: &Inputs, time_s: &[f64], burn: &mut Event) {
    let reduction = &inputs.run.reduction;
    if let Some(start) = reduction.burn_start_s {
        burn.start = burn.start.min(time_s.partition_point(|t| *t < start).saturating_sub(1));
    }
    if let Some(end) = reduction.burn_end_s {
        burn.end = burn.end.max((time_s.partition_point(|t| *t <= end) + 1).min(time_s.len()));
    }
}

fn describe_bursts(record: &Record<'_>, figures: &figures::Figures) -> Vec<Burst> {
    record
        .segmentation
        .events
        .iter()
        .filter(|e| e.start == record.burn.start || e.peak.abs() > bursts::LEAST_PEAK * record.burn.peak.abs())
        .map(|event| {
            let kind = if event.end > record.burn.start && event.start < record.burn.end {
                BurstKind::Burn
            } else {
                bursts::kind(event, &record.burn, &record.time_s, &record.inputs.run.check_loads, 1.0)
            };
            let own = kind == BurstKind::Burn;
            Burst {
                start_s: if own { figures.times.thrust_start_s } else { record.time_s[event.start] },
                end_s: if own { figures.times.thrust_end_s } else { record.time_s[event.end - 1] },
                impulse: if own { figures.total_impulse } else { event.impulse },
                peak: if own { figures.peak_n } else { event.peak },
                kind,
            }
        })
        .collect()
}
