//! How long it takes: `cargo bench`. Wanted: 100,000 trials in about a second, a log of 3,000 samples reduced in under 0.25 s, on two cores.

#[path = "../tests/simulator/mod.rs"]
mod simulator;

use burntally::load::load_run;
use burntally::reduce::reduce;
use burntally::uncertainty::distribution::Shape;
use burntally::uncertainty::effects::{self, Acts, DRAWN, Effect, Found};
use burntally::uncertainty::monte_carlo;
use simulator::Scenario;
use simulator::logger::Logger;
use std::time::Instant;

/// The least of a few times, s.
fn least(mut what: impl FnMut()) -> f64 {
    (0..7)
        .map(|_| {
            let start = Instant::now();
            what();
            start.elapsed().as_secs_f64()
        })
        .fold(f64::INFINITY, f64::min)
}

/// Figures of some size, and as many sources as a firing has whose cell was calibrated with seven weights.
fn sources() -> (Found, Vec<Effect>) {
    let amounts = Effect {
        total_impulse: 800.0,
        burn_impulse: 795.0,
        burn_time: 3.0,
        action_time: 2.9,
        peak_thrust: 400.0,
        initial_thrust: 300.0,
        propellant_mass: 0.4,
        action_impulse: 790.0,
        pressure_total: 1e7,
        pressure_action: 9e6,
        throat_area: 7e-5,
        web_time: 2.8,
        web_thickness: 0.011,
        ..Effect::default()
    };
    let shapes = [Shape::Normal, Shape::Rectangular, Shape::Triangular, Shape::StudentT(13.0)];
    let mut effects: Vec<Effect> = (0..24)
        .map(|i| Effect {
            total_impulse: 0.3,
            burn_time: 0.001,
            peak_thrust: 0.2,
            propellant_mass: 1e-4,
            ..Effect::of(format!("source {i}")).shaped(shapes[i % 4])
        })
        .collect();
    effects.push(Effect { acts: Acts::StretchesTime(1e-3), ..Effect::of("clock") });
    (Found { amounts, mass_from_force: false }, effects)
}

fn main() {
    let (found, effects) = sources();
    for trials in [monte_carlo::TRIALS, 100_000] {
        let time_s = least(|| {
            for mut drawn in effects::trials(&found, &effects, trials) {
                std::hint::black_box(monte_carlo::spread(&mut drawn));
            }
        });
        println!("{trials} trials of {} figures from {} sources: {time_s:.3} s", DRAWN.len(), effects.len());
    }
    // 13.1 s of record.
    let scenario = Scenario { logger: Logger { rate_hz: 230.0, ..Logger::default() }, ..Scenario::default() };
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = scenario.simulate().write_to(dir.path()).expect("a run folder");
    let samples = load_run(&path).expect("inputs").log.time_s.len();
    let time_s = least(|| {
        let inputs = load_run(&path).expect("inputs");
        std::hint::black_box(reduce(&inputs).expect("a firing"));
    });
    println!("a log of {samples} samples read and reduced: {time_s:.3} s");
}
