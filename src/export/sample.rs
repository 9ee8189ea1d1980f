//! An invented firing for the tests of export and report: a plateau that falls slightly, a soft tail, known impulse.

use crate::firing::*;
use crate::log::{Records, Repair};
use std::collections::BTreeMap;

/// Thrust of the invented motor in newtons, `time_s` from first thrust; zero at 0 and at 3.2 s.
pub(crate) fn thrust_n(time_s: f64) -> f64 {
    if !(0.0..=3.2).contains(&time_s) {
        return 0.0;
    }
    let rise = 1.0 - (-time_s / 0.03).exp();
    let body = 310.0 - 22.0 * (time_s - 0.9).powi(2);
    let fall = 1.0 / (1.0 + ((time_s - 2.6) / 0.06).exp());
    let end = ((3.2 - time_s) / 0.1).min(1.0);
    rise * body * fall * end
}

/// Curves of the invented motor with `points` points of thrust and a raw record with a little deterministic noise.
pub(crate) fn curves(points: usize) -> Curves {
    let first_s = 12.4;
    let step_s = 3.2 / (points - 1) as f64;
    let mut thrust: Vec<f64> = (0..points).map(|i| thrust_n(i as f64 * step_s)).collect();
    thrust[0] = 0.0;
    thrust[points - 1] = 0.0;
    let thrust_time_s: Vec<f64> = (0..points).map(|i| first_s + i as f64 * step_s).collect();
    let quiet = points / 3;
    let total = points + 2 * quiet;
    let time_s: Vec<f64> = (0..total).map(|i| first_s + (i as f64 - quiet as f64) * step_s).collect();
    let conditioned_n: Vec<f64> = time_s.iter().map(|t| thrust_n(t - first_s)).collect();
    let mut state = 7_u64;
    let raw_n = conditioned_n
        .iter()
        .map(|f| {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            f + ((state >> 33) as f64 / (1_u64 << 31) as f64 - 0.5) * 16.0
        })
        .collect();
    let peak = (0..points).max_by(|a, b| thrust[*a].total_cmp(&thrust[*b])).unwrap();
    Curves {
        conditioned_u_n: Some(conditioned_n.iter().map(|f| 0.4 + 0.002 * f).collect()),
        baseline_n: vec![3.0; total],
        raw_n,
        conditioned_n,
        time_s,
        thrust_u_n: Some(thrust.iter().map(|f| 0.4 + 0.002 * f).collect()),
        burn_threshold_n: 0.05 * thrust[peak],
        peak_time_s: thrust_time_s[peak],
        thrust_time_s,
        thrust_n: thrust,
        pressure_pa: None,
    }
}

pub(crate) fn figure(value: f64, unit: &str, standard_uncertainty: f64) -> Figure {
    Figure {
        value,
        unit: unit.to_owned(),
        standard_uncertainty: Some(standard_uncertainty),
        interval_95: Some([value - 1.96 * standard_uncertainty, value + 1.96 * standard_uncertainty]),
        bound: None,
        source: None,
    }
}

/// The invented firing.
pub(crate) fn firing() -> Firing {
    Firing {
        schema: SCHEMA.to_owned(),
        run: RunRecord {
            id: "QX-03".to_owned(),
            pour: Some("QX".to_owned()),
            date: Some("2026-05-14".to_owned()),
            conditions: serde_json::Map::new(),
            tags: serde_json::Map::new(),
        },
        quantities: Quantities {
            total_impulse: Some(figure(771.234_567, "N.s", 2.012)),
            burn_impulse: Some(figure(769.8, "N.s", 2.0)),
            burn_time: Some(figure(2.7123, "s", 0.0041)),
            action_time: Some(figure(2.655, "s", 0.004)),
            average_thrust: Some(figure(283.82, "N", 0.9)),
            peak_thrust: Some(figure(309.97, "N", 0.8)),
            initial_thrust: Some(figure(288.3, "N", 0.9)),
            rise_time: Some(figure(0.0661, "s", 0.0021)),
            propellant_mass: Some(figure(0.4123, "kg", 0.0003)),
            specific_impulse: Some(figure(190.73, "s", 0.6)),
            effective_exhaust_velocity: Some(figure(1870.4, "m/s", 5.6)),
            ..Quantities::default()
        },
        burn: BurnTimes { thrust_start_s: 12.4, start_s: 12.402, end_s: 15.11, thrust_end_s: 15.6 },
        bursts: vec![Burst { start_s: 12.4, end_s: 15.6, impulse: 771.2, peak: 310.0, kind: BurstKind::Burn }],
        motor_class: Some(MotorClass {
            letter: "J".to_owned(),
            designation: "J284".to_owned(),
            position: 0.205,
            probability: Some(BTreeMap::from([("J".to_owned(), 0.97), ("K".to_owned(), 0.03)])),
        }),
        stand: None,
        conditioning: Conditioning {
            sample_rate_hz: 312.5,
            noise_n: 1.9,
            cutoff_hz: Some(40.0),
            filter: "4th order, forward and back".to_owned(),
            baseline_before_n: Some(3.0),
            baseline_after_n: None,
        },
        uncertainty_budget: BTreeMap::from([(
            "total_impulse".to_owned(),
            vec![
                BudgetLine {
                    source: "calibration".to_owned(),
                    standard_uncertainty: 1.9,
                    share: 0.89,
                    improvement: Some(Improvement {
                        advice: "use better weights: half of this error would leave ± 2.3 instead of ± 3.9 N.s"
                            .to_owned(),
                        remedy: "use better weights".to_owned(),
                        half_width_95_if_halved: 2.27,
                    }),
                },
                BudgetLine {
                    source: "baseline".to_owned(),
                    standard_uncertainty: 0.66,
                    share: 0.11,
                    improvement: None,
                },
            ],
        )]),
        checks: vec![
            Check { id: "sampling".to_owned(), status: Status::Pass, message: "312 samples a second".to_owned() },
            Check {
                id: "baseline_after".to_owned(),
                status: Status::Caution,
                message: "no quiet record after the burn; the zero before it was used alone".to_owned(),
            },
        ],
        provenance: Provenance {
            program: "burntally".to_owned(),
            version: "0.1.0".to_owned(),
            inputs: vec![InputFile { file: "qx-03.csv".to_owned(), sha256: "ab".repeat(32) }],
            records: Records { read: 3000, kept: 2998, repaired: 1, dropped: 1 },
            repairs: vec![Repair {
                line: Some(412),
                column: Some("load".to_owned()),
                kind: "glitch".to_owned(),
                message: "one sample at full scale, replaced by its neighbours' line".to_owned(),
            }],
            monte_carlo: None,
            findings: vec!["the delimiter is a semicolon".to_owned()],
        },
    }
}
