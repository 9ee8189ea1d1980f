//! A known weight laid on the stand during the record: an end-to-end test of cell, lever and friction.

mod simulator;

use burntally::firing::Status;
use burntally::load::load_run;
use burntally::reduce::reduce;
use simulator::{CheckLoad, Scenario};

fn ratio(words: &str) -> f64 {
    let text = words.split("ratio ").nth(1).and_then(|r| r.split([':', ' ']).next());
    text.and_then(|r| r.parse().ok()).unwrap_or_else(|| panic!("{words}"))
}

/// Status and words of the check, with 5 kg on the stand from 2 s to 5 s and the burn 0.5 s later. `told`: the line of run.toml that gives
/// the share of force that reaches the cell.
fn check(force_ratio: f64, told: bool) -> (Status, String, f64) {
    let mut s = Scenario::default();
    s.stand.force_ratio = force_ratio;
    s.check_load = Some(CheckLoad { mass_kg: 5.0, from_s: 2.0, to_s: 5.0 });
    s.before_s = 5.5;
    let simulated = s.simulate();
    let dir = tempfile::tempdir().expect("a folder");
    let path = simulated.write_to(dir.path()).expect("a run folder");
    if !told {
        let file = &path;
        let text = std::fs::read_to_string(file).expect("run.toml as written");
        let kept: Vec<&str> = text.lines().filter(|l| !l.starts_with("force_ratio")).collect();
        std::fs::write(file, kept.join("\n") + "\n").expect("run.toml");
    }
    let firing = reduce(&load_run(&path).expect("inputs")).expect("a reduction").firing;
    let found = firing.checks.iter().find(|c| c.id == "check_load").expect("the check");
    let impulse = firing.quantities.total_impulse.as_ref().expect("an impulse").value;
    (found.status, found.message.clone(), impulse / simulated.truth.total_impulse_n_s - 1.0)
}

#[test]
fn a_sound_stand_reads_its_weight() {
    for (share, told) in [(1.0, true), (0.93, true)] {
        let (status, words, off) = check(share, told);
        assert_eq!(status, Status::Pass, "{words}");
        assert!(words.contains("5.0000 kg") && (ratio(&words) - 1.0).abs() < 0.001, "{words}");
        assert!(off.abs() < 0.002, "{off}");
    }
}

/// The weight and the impulse are off by the same share, and the check says so before anybody believes the impulse.
#[test]
fn friction_or_a_lever_not_told_shows_in_the_weight() {
    let (status, words, off) = check(0.99, false);
    assert_eq!(status, Status::Caution, "{words}");
    assert!((ratio(&words) - 0.99).abs() < 0.001 && words.contains("force_ratio"), "{words}");
    assert!((off + 0.01).abs() < 0.002, "{off}");
    let (status, words, off) = check(0.93, false);
    assert_eq!(status, Status::Fail, "{words}");
    assert!((ratio(&words) - 0.93).abs() < 0.001, "{words}");
    assert!((off + 0.07).abs() < 0.002, "{off}");
}
