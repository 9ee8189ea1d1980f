//! How often the stated 95 % intervals hold the truth, and how wide they are.
//!
//! Every firing has its own hidden errors: each weight within ± 0.1 %, drift, noise, and for every second firing a clock within ± 0.5 %.
//! `BURNTALLY_COVERAGE=60 cargo test --test coverage -- --nocapture` takes 60 firings of a kind (300 of the plain one) in place of 12, and
//! `BURNTALLY_FIRST_SEED=N` others.

mod simulator;

use burntally::firing::{Figure, Quantities};
use burntally::load::load_run;
use burntally::reduce::reduce;
use rand::{RngExt, SeedableRng};
use rayon::prelude::*;
use simulator::Truth;
use simulator::random::{KINDS, Kind, random_scenario_kind};

/// Firings with a loose clock of this, limits.
const LOOSE_CLOCK: f64 = 0.005;

struct Outcome {
    kind: Kind,
    loose_clock: bool,
    quantities: Quantities,
    truth: Truth,
}

fn environment(name: &str, default: u64) -> u64 {
    std::env::var(name).ok().and_then(|s| s.parse().ok()).unwrap_or(default)
}

fn fire(kind: Kind, seed: u64) -> Outcome {
    let mut scenario = random_scenario_kind(kind, seed);
    let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed.wrapping_mul(31) ^ kind as u64);
    scenario.cell.weight_tolerance = 1e-3;
    let loose_clock = seed.is_multiple_of(2);
    if loose_clock {
        scenario.logger.clock_error = LOOSE_CLOCK * rng.random_range(-1.0..1.0);
        scenario.logger.clock_tolerance = Some(format!("{} %", 100.0 * LOOSE_CLOCK));
    }
    let simulated = scenario.simulate();
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    let inputs = load_run(&path).unwrap_or_else(|problem| panic!("{}: {problem}", scenario.id));
    let firing = reduce(&inputs).unwrap_or_else(|problem| panic!("{}: {problem}", scenario.id)).firing;
    Outcome { kind, loose_clock, quantities: firing.quantities, truth: simulated.truth }
}

struct Row {
    name: &'static str,
    found: fn(&Quantities) -> &Option<Figure>,
    truth: fn(&Truth) -> f64,
    /// Largest median half-width, in % of the truth.
    half_width: f64,
}

const ROWS: [Row; 5] = [
    Row { name: "total impulse", found: |q| &q.total_impulse, truth: |t| t.total_impulse_n_s, half_width: 0.15 },
    Row { name: "peak thrust", found: |q| &q.peak_thrust, truth: |t| t.peak_thrust_n, half_width: 0.8 },
    Row { name: "burn time", found: |q| &q.burn_time, truth: |t| t.burn_time_s, half_width: 0.3 },
    Row { name: "average thrust", found: |q| &q.average_thrust, truth: |t| t.average_thrust_n, half_width: 0.25 },
    Row { name: "specific impulse", found: |q| &q.specific_impulse, truth: |t| t.specific_impulse_s, half_width: 0.25 },
];
/// Impulse where the clock is known to 0.5 % only, in %; what else the clock stretches is allowed the same.
const LOOSE_HALF_WIDTH: f64 = 0.6;

/// Share of the outcomes whose interval holds the truth, and the median half-width in %.
fn coverage<'a>(outcomes: impl Iterator<Item = &'a Outcome>, row: &Row) -> (usize, f64, f64) {
    let (mut within, mut widths) = (0, Vec::new());
    for outcome in outcomes {
        let figure = (row.found)(&outcome.quantities).as_ref().expect(row.name);
        let [low, high] = figure.interval_95.expect("an interval");
        let truth = (row.truth)(&outcome.truth);
        within += usize::from((low..=high).contains(&truth));
        widths.push(50.0 * (high - low) / truth);
    }
    widths.sort_by(f64::total_cmp);
    let n = widths.len();
    (n, within as f64 / n.max(1) as f64, widths.get(n / 2).copied().unwrap_or(f64::NAN))
}

#[test]
fn intervals_hold_the_truth_as_often_as_they_say() {
    let (count, first) = (environment("BURNTALLY_COVERAGE", 12), environment("BURNTALLY_FIRST_SEED", 50_001));
    let outcomes: Vec<Outcome> = KINDS
        .iter()
        // Half of the firings are plain ones (80 Hz to 10 kHz, all three orientations of the stand), half are shared by the special kinds.
        .flat_map(|kind| {
            let share = if *kind == Kind::Plain { 5 } else { 1 };
            (first..first + share * count).map(move |seed| (*kind, seed))
        })
        .collect::<Vec<_>>()
        .into_par_iter()
        .map(|(kind, seed)| fire(kind, seed))
        .collect();
    println!("{} firings: share of the intervals that hold the truth, median half-width in %", outcomes.len());
    let mut failures = Vec::new();
    for row in &ROWS {
        let (n, share, _) = coverage(outcomes.iter(), row);
        // The widths themselves are spread over about a decade (standard deviation 0.9 in the logarithm), so that a median of n of them
        // scatters by 1.1/√n; two of that.
        let wider = |n: usize| 1.0 + 2.2 / (n as f64).sqrt();
        // A clock's error stretches impulse and times; in average thrust and peak it cancels, and all firings speak for those.
        let stretched = matches!(row.name, "total impulse" | "burn time" | "specific impulse");
        let (tight_n, _, tight) = coverage(outcomes.iter().filter(|o| !stretched || !o.loose_clock), row);
        let (loose_n, _, loose) = coverage(outcomes.iter().filter(|o| o.loose_clock), row);
        println!(
            "{:<18} {share:.3}  clock of 0.01 % (all, where it cancels) {tight:.3}  clock of 0.5 % {loose:.3}",
            row.name
        );
        for kind in KINDS {
            let (_, share, half) = coverage(outcomes.iter().filter(|o| o.kind == kind), row);
            println!("    {kind:<16?} {share:.3}  {half:.3}");
        }
        // 92 to 98 % is asked for over many firings; a sample of n scatters by its own binomial spread (two standard deviations).
        let scatter = 2.0 * (0.05 * 0.95 / n as f64).sqrt();
        if !(0.92 - scatter..=0.98 + scatter).contains(&share) {
            failures.push(format!("{}: {share:.3} of {n} intervals hold the truth", row.name));
        }
        if tight > row.half_width * wider(tight_n) {
            failures.push(format!("{}: median half-width {tight:.3} %", row.name));
        }
        if stretched && loose > LOOSE_HALF_WIDTH * wider(loose_n) {
            failures.push(format!("{}: median half-width {loose:.3} % with a loose clock", row.name));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}
