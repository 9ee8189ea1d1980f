//! Simulated firings against the truth behind them.
//!
//! `BURNTALLY_DUMP=DIR cargo test --test known_truth` also keeps the simulated run folders, each with its `truth.txt`.
//! `BURNTALLY_FIRST_SEED=N` takes other firings than those the limits are held on by default.
//! `-- --nocapture` shows the errors of every kind as a table.

mod simulator;

use burntally::firing::Figure;
use burntally::load::load_run;
use burntally::reduce::{Reduction, reduce};
use rayon::prelude::*;
use simulator::random::{Kind, random_scenario_kind};
use simulator::{Scenario, Truth};

/// Largest relative error allowed each, and in the median where that is held too.
#[derive(Clone, Copy)]
struct Tolerance {
    each: f64,
    median: Option<f64>,
}

const fn each(each: f64) -> Tolerance {
    Tolerance { each, median: None }
}

const fn both(each: f64, median: f64) -> Tolerance {
    Tolerance { each, median: Some(median) }
}

struct Case {
    scenario: Scenario,
    truth: Truth,
    reduction: Result<Reduction, String>,
}

fn run_kind(kind: Kind, count: u64) -> Vec<Case> {
    let first: u64 = std::env::var("BURNTALLY_FIRST_SEED").ok().and_then(|s| s.parse().ok()).unwrap_or(1);
    (first..first + count).into_par_iter().map(|seed| run(random_scenario_kind(kind, seed))).collect()
}

/// Simulates, writes the run folder, reads it back and reduces it.
fn run(scenario: Scenario) -> Case {
    let simulated = scenario.simulate();
    if let Some(dump) = std::env::var_os("BURNTALLY_DUMP") {
        let dir = std::path::Path::new(&dump).join(&scenario.id);
        simulated.write_to(&dir).expect("the dump folder can be written");
        let words = format!("{:#?}\n\n{scenario:#?}\n", simulated.truth);
        std::fs::write(dir.join("truth.txt"), words).expect("the dump folder can be written");
    }
    let dir = tempfile::tempdir().expect("a temporary folder");
    let path = simulated.write_to(dir.path()).expect("the temporary folder can be written");
    Case { scenario, truth: simulated.truth, reduction: reduce_run(&path) }
}

fn reduce_run(path: &std::path::Path) -> Result<Reduction, String> {
    let inputs = load_run(path).map_err(|problem| problem.to_string())?;
    reduce(&inputs).map_err(|problem| problem.to_string())
}

/// Which figure, its truth and how far it may be off.
struct Row {
    name: &'static str,
    found: fn(&Reduction) -> Option<f64>,
    truth: fn(&Truth) -> f64,
    tolerance: Option<Tolerance>,
}

fn value(figure: &Option<Figure>) -> Option<f64> {
    figure.as_ref().map(|f| f.value)
}

fn rows(impulse: Tolerance, peak: Tolerance, burn_time: Option<Tolerance>) -> Vec<Row> {
    vec![
        Row {
            name: "total impulse",
            found: |r| value(&r.firing.quantities.total_impulse),
            truth: |t| t.total_impulse_n_s,
            tolerance: Some(impulse),
        },
        Row {
            name: "peak thrust",
            found: |r| value(&r.firing.quantities.peak_thrust),
            truth: |t| t.peak_thrust_n,
            tolerance: Some(peak),
        },
        Row {
            name: "burn time",
            found: |r| value(&r.firing.quantities.burn_time),
            truth: |t| t.burn_time_s,
            tolerance: burn_time,
        },
        Row {
            name: "action time",
            found: |r| value(&r.firing.quantities.action_time),
            truth: |t| t.action_time_s,
            tolerance: None,
        },
        Row {
            name: "average thrust",
            found: |r| value(&r.firing.quantities.average_thrust),
            truth: |t| t.average_thrust_n,
            tolerance: None,
        },
        Row {
            name: "initial thrust",
            found: |r| value(&r.firing.quantities.initial_thrust),
            truth: |t| t.initial_thrust_n,
            tolerance: None,
        },
        Row {
            name: "rise time",
            found: |r| value(&r.firing.quantities.rise_time),
            truth: |t| t.rise_time_s,
            tolerance: None,
        },
        Row {
            name: "specific impulse",
            found: |r| value(&r.firing.quantities.specific_impulse),
            truth: |t| t.specific_impulse_s,
            tolerance: None,
        },
    ]
}

/// Prints the errors and gives what is beyond its tolerance.
fn judge(title: &str, cases: &[&Case], rows: &[Row]) -> Vec<String> {
    let mut failures = Vec::new();
    let mut table = format!("\n{title}: {} firings; relative errors in %\n", cases.len());
    table.push_str("figure              median   largest   allowed  covered  of firing\n");
    for case in cases {
        if let Err(problem) = &case.reduction {
            failures.push(format!("{title}: {} refused: {problem}", case.scenario.id));
        }
    }
    for row in rows {
        let mut errors = Vec::new();
        for case in cases {
            let Ok(reduction) = &case.reduction else { continue };
            let truth = (row.truth)(&case.truth);
            match (row.found)(reduction) {
                Some(found) => errors.push(((found / truth - 1.0).abs(), found / truth - 1.0, &case.scenario)),
                None => failures.push(format!("{title}: {}: no {}", case.scenario.id, row.name)),
            }
        }
        errors.sort_by(|a, b| a.0.total_cmp(&b.0));
        let Some(worst) = errors.last() else { continue };
        let median = errors[errors.len() / 2].0;
        let allowed = row.tolerance.map_or("-".to_string(), |t| format!("{:.2}", 100.0 * t.each));
        table.push_str(&format!(
            "{:<18} {:>7.4}  {:>8.4}  {allowed:>8}  {} ({} Hz)\n",
            row.name,
            100.0 * median,
            100.0 * worst.1,
            worst.2.id,
            worst.2.logger.rate_hz
        ));
        if let Some(tolerance) = row.tolerance {
            for (error, signed, scenario) in errors.iter().rev() {
                if *error > tolerance.each || error.is_nan() {
                    failures.push(format!("{title}: {}: {} off by {:.3} %", scenario.id, row.name, 100.0 * signed));
                }
            }
            if let Some(limit) = tolerance.median
                && median > limit
            {
                failures.push(format!("{title}: {} off by {:.4} % in the median", row.name, 100.0 * median));
            }
        }
    }
    println!("{table}");
    failures
}

/// The letter class of an impulse: A from 1.25 to 2.5 N s, doubling, upper edges inclusive.
fn letter(impulse_n_s: f64) -> Option<char> {
    let mut upper = 2.5;
    for letter in 'A'..='Z' {
        if impulse_n_s <= upper {
            return (impulse_n_s > upper / 2.0).then_some(letter);
        }
        upper *= 2.0;
    }
    None
}

fn wrong_classes(cases: &[Case]) -> Vec<String> {
    let mut failures = Vec::new();
    for case in cases {
        let impulse = case.truth.total_impulse_n_s;
        let truth = letter(impulse);
        // Only where the truth is 1 % and more from an edge.
        if truth.is_none() || letter(impulse * 1.01) != truth || letter(impulse / 1.01) != truth {
            continue;
        }
        let Ok(reduction) = &case.reduction else { continue };
        let found = reduction.firing.motor_class.as_ref().map(|c| c.letter.clone());
        if found.as_deref() != truth.map(String::from).as_deref() {
            failures.push(format!("{}: class {found:?}, true {truth:?}", case.scenario.id));
        }
    }
    failures
}

fn all_hold(failures: &[String]) {
    assert!(failures.is_empty(), "{} failures:\n{}", failures.len(), failures.join("\n"));
}

/// Impulse and burn time are held together for all rates from 80 Hz up, point samples and averages alike; the peak by rate.
/// At 80 Hz alone the noise of these firings leaves the impulse uncertain by 0.035 % (standard uncertainty), so a median of
/// 0.02 % says something of all rates together only. Other seeds go beyond these limits now and then (DEVELOPERS.md, known limits).
#[test]
fn plain_firings_come_out_true() {
    let mut cases = run_kind(Kind::Plain, 60);
    cases.extend(run_kind(Kind::Averaging80Hz, 20));
    let all: Vec<&Case> = cases.iter().collect();
    let no_peak = Tolerance { each: 0.02, median: None };
    let mut failures = judge("80 Hz and more", &all, &rows(both(0.0015, 0.0002), no_peak, Some(both(0.007, 0.001))));
    let (fast, slow): (Vec<&Case>, Vec<&Case>) = cases.iter().partition(|c| c.scenario.logger.rate_hz >= 300.0);
    let impulse = each(0.0015);
    failures.extend(judge("300 Hz and more", &fast, &rows(impulse, each(0.005), None)));
    failures.extend(judge("80 to 200 Hz", &slow, &rows(impulse, both(0.02, 0.002), None)));
    failures.extend(wrong_classes(&cases));
    all_hold(&failures);
}

/// A tail with a time constant of 0.9 s under a falling drift looks level for 0.7 s at 2 % of peak, long before it is gone.
#[test]
fn a_tail_that_seems_level_for_a_moment_belongs_to_the_burn() {
    let case = run(random_scenario_kind(Kind::Plain, 24_044));
    let found = case.reduction.expect("a reduction").firing.quantities.total_impulse.expect("an impulse").value;
    let error = found / case.truth.total_impulse_n_s - 1.0;
    assert!(error.abs() < 0.0015, "{error}");
}

fn kind_holds(kind: Kind, count: u64, rows: &[Row]) {
    let cases = run_kind(kind, count);
    let mut failures = judge(&format!("{kind:?}"), &cases.iter().collect::<Vec<_>>(), rows);
    failures.extend(wrong_classes(&cases));
    all_hold(&failures);
}

#[test]
fn a_10_hz_converter_that_averages_comes_out_true() {
    kind_holds(Kind::Averaging10Hz, 20, &rows(each(0.0015), each(0.025), Some(each(0.02))));
}

#[test]
fn noise_of_4_percent_of_peak_leaves_the_figures_standing() {
    kind_holds(Kind::Noisy, 20, &rows(each(0.006), each(0.03), Some(each(0.035))));
}

#[test]
fn half_a_second_before_and_a_cut_tail_leave_the_impulse_standing() {
    kind_holds(Kind::Truncated, 20, &rows(each(0.005), each(0.005), None));
}

/// The swing makes the naive peak 8 to 90 % high.
#[test]
fn a_ringing_stand_is_seen_through() {
    kind_holds(Kind::Ringing, 20, &rows(each(0.0015), each(0.005), Some(each(0.003))));
}

/// Firings that gave trouble once: spikes right after the rise, a glitch within the ring after burn-out, stamps off by some per cent.
#[test]
fn ringing_firings_that_gave_trouble() {
    let seeds = [3001, 4002, 4010, 4016, 4017, 7008, 14_011, 14_017, 20_036, 20_058, 94_001];
    let cases: Vec<Case> = seeds.into_par_iter().map(|seed| run(random_scenario_kind(Kind::Ringing, seed))).collect();
    let cases: Vec<&Case> = cases.iter().collect();
    all_hold(&judge("once troublesome", &cases, &rows(each(0.0015), each(0.005), Some(each(0.003)))));
    // What the swinging stand holds back at the first crossing belongs to the burn: without it the average is up to 0.17 % high.
    for case in cases {
        let reduction = case.reduction.as_ref().expect("a reduction");
        let average = reduction.firing.quantities.average_thrust.as_ref().expect("an average");
        let off = (average.value - case.truth.average_thrust_n) / average.standard_uncertainty.expect("an uncertainty");
        assert!(off.abs() < 3.0, "{}: {average:?} {}", case.scenario.id, case.truth.average_thrust_n);
    }
}

/// Undoing a swing that was not there is worse than leaving one.
#[test]
fn nothing_is_taken_out_of_a_stiff_stand() {
    for kind in [Kind::Plain, Kind::Averaging10Hz, Kind::Noisy, Kind::Truncated, Kind::Averaging80Hz] {
        for case in run_kind(kind, 20) {
            let Ok(reduction) = &case.reduction else { continue };
            let filter = &reduction.firing.conditioning.filter;
            assert!(!filter.contains("response of the stand"), "{}: {filter}", case.scenario.id);
        }
    }
}

/// Largest relative errors of total impulse, peak thrust and burn time for the sample runs, by what each run allows.
fn sample_tolerances(id: &str) -> (f64, f64, f64) {
    match id {
        // Slope known to 0.4 % only (limits, of which most is used up), clock to 0.5 %; an ignition peak of 0.15 s
        // under a window of 0.1 s.
        "BS2-1" | "BS2-2" => (0.0075, 0.03, 0.02),
        // An 80 Hz converter.
        id if id.starts_with("BS") => (0.0015, 0.02, 0.007),
        // Weights added in turn, each good to 0.05 %.
        _ => (0.0015, 0.005, 0.007),
    }
}

#[test]
fn the_sample_runs_come_out_true() {
    let root = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("sample-runs");
    let text = std::fs::read_to_string(root.join("truth.json")).expect("truth.json");
    let truths: serde_json::Map<String, serde_json::Value> = serde_json::from_str(&text).expect("JSON");
    let mut failures = Vec::new();
    for (id, truth) in &truths {
        let folder = truth["folder"].as_str().expect("a folder");
        let reduction = match reduce_run(&root.join(folder).join("run.toml")) {
            Ok(reduction) => reduction,
            Err(problem) => {
                failures.push(format!("{id}: {problem}"));
                continue;
            }
        };
        let q = &reduction.firing.quantities;
        let (impulse, peak, burn_time) = sample_tolerances(id);
        let figures = [
            ("total_impulse", &q.total_impulse, impulse),
            ("peak_thrust", &q.peak_thrust, peak),
            ("burn_time", &q.burn_time, burn_time),
        ];
        for (name, figure, tolerance) in figures {
            let expected = truth[name].as_f64().expect("a number");
            let Some(figure) = figure else {
                failures.push(format!("{id}: no {name}"));
                continue;
            };
            let error = figure.value / expected - 1.0;
            println!("{id:<6} {name:<14} {:>8.3} %  {}", 100.0 * error, figure.bound.as_deref().unwrap_or(""));
            let clipped = id == "BW2-2" && name != "burn_time";
            // A clipped figure is a lower bound: below the truth, and no further than the clipped part.
            let held = if clipped {
                figure.bound.as_deref() == Some("lower") && error < 0.0 && error > -0.15
            } else {
                error.abs() <= tolerance && figure.bound.is_none()
            };
            if !held {
                failures.push(format!("{id}: {name} off by {:.3} %, bound {:?}", 100.0 * error, figure.bound));
            }
        }
    }
    assert_eq!(truths.len(), 12);
    all_hold(&failures);
}
