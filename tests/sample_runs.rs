//! `sample-runs/` and `calibration/` are what the simulator makes of the invented firings.
//!
//! `BURNTALLY_WRITE_SAMPLES=1 cargo test --test sample_runs` writes them anew.

mod simulator;

use serde_json::{Map, Value, json};
use simulator::samples::{INVENTED_CELL, cells, firings};
use simulator::{Scenario, Truth};
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn folder(scenario: &Scenario) -> String {
    scenario.id.to_lowercase()
}

/// Every made file, by path from the project's root; `sample-runs/README.md` alone is written by hand.
fn made() -> Vec<(PathBuf, Vec<u8>)> {
    let mut files = Vec::new();
    for (name, cell) in cells() {
        let text = cell.calibration_file(INVENTED_CELL).expect("a cell with a calibration");
        files.push((Path::new("calibration").join(name), text.into_bytes()));
    }
    let mut truths = Map::new();
    for scenario in firings() {
        let simulated = scenario.simulate();
        truths.insert(scenario.id.clone(), truth_json(&scenario, &simulated.truth));
        for (path, bytes) in simulated.files {
            files.push((Path::new("sample-runs").join(folder(&scenario)).join(path), bytes));
        }
    }
    let mut text = serde_json::to_string_pretty(&Value::Object(truths)).expect("plain JSON");
    text.push('\n');
    files.push((PathBuf::from("sample-runs/truth.json"), text.into_bytes()));
    files
}

/// The true figures, SI, to nine digits; null where the record cannot tell.
fn truth_json(scenario: &Scenario, t: &Truth) -> Value {
    let n = |value: f64| format!("{value:.8e}").parse::<f64>().map_or(Value::Null, |v| json!(v));
    let o = |value: Option<f64>| value.map_or(Value::Null, n);
    json!({
        "folder": folder(scenario),
        "pour": scenario.pour,
        "total_impulse": n(t.total_impulse_n_s),
        "burn_impulse": n(t.burn_impulse_n_s),
        "burn_time": n(t.burn_time_s),
        "action_time": n(t.action_time_s),
        "average_thrust": n(t.average_thrust_n),
        "peak_thrust": n(t.peak_thrust_n),
        "initial_thrust": n(t.initial_thrust_n),
        "rise_time": n(t.rise_time_s),
        "ignition_delay": o(t.ignition_delay_s),
        "propellant_mass": n(t.propellant_mass_kg),
        "expelled_mass": o(t.expelled_mass_kg),
        "specific_impulse": n(t.specific_impulse_s),
        "peak_pressure": o(t.peak_pressure_pa),
        "mean_pressure": o(t.mean_pressure_pa),
        "characteristic_velocity": o(t.characteristic_velocity_m_s),
        "thrust_coefficient": o(t.thrust_coefficient),
        "burn_rate": o(t.burn_rate_m_s),
        "burn": {
            "thrust_start_s": n(t.thrust_start_s), "start_s": n(t.start_s),
            "end_s": n(t.end_s), "thrust_end_s": n(t.thrust_end_s),
        },
        "chuffs": u32::from(t.chuff_s.is_some()),
        "hits": t.hits,
        "records": {
            "read": t.log.records, "glitches": t.log.glitch_lines.len(), "spoilt": t.log.spoilt_lines.len(),
            "missing": t.log.missing, "clipped": t.log.clipped,
        },
    })
}

/// Equal, but for a last digit here and there: sine and exponential differ in the last place from one C library to the
/// next, which turns a rounded count now and then.
fn alike(made: &[u8], found: &[u8]) -> bool {
    if made == found {
        return true;
    }
    let made: Vec<&[u8]> = made.split(|b| *b == b'\n').collect();
    let found: Vec<&[u8]> = found.split(|b| *b == b'\n').collect();
    let differing = made.iter().zip(&found).filter(|(a, b)| a != b).count();
    made.len() == found.len() && differing * 1000 <= made.len()
}

#[test]
fn the_files_on_disk_are_what_the_simulator_makes() {
    let write = std::env::var_os("BURNTALLY_WRITE_SAMPLES").is_some();
    let mut wrong = Vec::new();
    for (path, bytes) in made() {
        let path = root().join(path);
        if write {
            std::fs::create_dir_all(path.parent().expect("a folder")).expect("the folder can be made");
            std::fs::write(&path, &bytes).expect("the file can be written");
        } else if !std::fs::read(&path).is_ok_and(|found| alike(&bytes, &found)) {
            wrong.push(path);
        }
    }
    assert!(wrong.is_empty(), "not as made (BURNTALLY_WRITE_SAMPLES=1 writes them): {wrong:#?}");
    nothing_else_lies_there_and_it_is_small();
}

fn walk(dir: &Path, into: &mut BTreeSet<PathBuf>) {
    for entry in std::fs::read_dir(dir).expect("a folder") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            walk(&path, into);
        } else {
            into.insert(path.strip_prefix(root()).expect("inside").to_path_buf());
        }
    }
}

fn nothing_else_lies_there_and_it_is_small() {
    let mut found = BTreeSet::new();
    walk(&root().join("sample-runs"), &mut found);
    walk(&root().join("calibration"), &mut found);
    let size: u64 = found.iter().map(|p| std::fs::metadata(root().join(p)).map_or(0, |m| m.len())).sum();
    assert!(size < 4_000_000, "{size} bytes");
    let mut expected: BTreeSet<PathBuf> = made().into_iter().map(|(path, _)| path).collect();
    expected.insert("sample-runs/README.md".into());
    expected.insert("sample-runs/vehicle.toml".into());
    assert_eq!(found, expected);
}

#[test]
fn each_file_a_person_opens_says_that_it_is_invented() {
    for (path, bytes) in made() {
        if path.extension().is_some_and(|e| e == "toml") {
            let text = String::from_utf8(bytes).expect("plain text");
            assert!(text.lines().next().is_some_and(|l| l.starts_with("# Invented")), "{}", path.display());
        }
    }
}

#[test]
fn the_firings_show_what_the_samples_are_for() {
    let all: Vec<(Scenario, Truth)> = firings().into_iter().map(|s| (s.clone(), s.simulate().truth)).collect();
    let truth = |id: &str| &all.iter().find(|(s, _)| s.id == id).expect("a firing").1;
    assert!(truth("BW2-2").log.clipped > 200);
    assert_eq!(all.iter().filter(|(_, t)| t.log.clipped > 0 && t.hits == 0).count(), 1);
    assert_eq!(truth("BW1-3").log.glitch_lines.len(), 5);
    assert_eq!(truth("BW1-3").log.spoilt_lines.len(), 5);
    assert!(truth("BS1-2").chuff_s.is_some());
    let ids: BTreeSet<&str> = all.iter().map(|(s, _)| s.id.as_str()).collect();
    assert_eq!(ids.len(), all.len());
    for pour in ["BW1", "BW2", "BS1", "BS2"] {
        let impulses: Vec<f64> = all.iter().filter(|(s, _)| s.pour == pour).map(|(_, t)| t.total_impulse_n_s).collect();
        assert_eq!(impulses.len(), 3, "{pour}");
        let mean = impulses.iter().sum::<f64>() / 3.0;
        let spread = (impulses.iter().map(|i| (i - mean).powi(2)).sum::<f64>() / 2.0).sqrt() / mean;
        // Within a pour well below a percent, and not nothing.
        assert!((0.001..0.01).contains(&spread), "{pour}: {spread}");
    }
}
