//! The program as a person or another program meets it.

use assert_cmd::Command;
use std::fs;
use std::path::Path;

fn burntally(folder: &Path) -> Command {
    let mut command = Command::cargo_bin("burntally").unwrap();
    command.current_dir(folder).env_remove("NO_COLOR");
    command
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

fn names(folder: &Path) -> Vec<String> {
    let mut names: Vec<String> =
        fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
    names.sort();
    names
}

#[test]
fn wrong_usage_ends_with_2() {
    let dir = tempfile::tempdir().unwrap();
    for arguments in [
        &[][..],
        &["reduce"],
        &["no-such-command"],
        &["reduce", "x", "--no-such-flag"],
        &["reduce", "x", "--units", "furlong"],
        &["reduce", "x", "--table-rows", "4"],
        &["reduce", "x", "--table-rows", "many"],
        &["calibrate"],
        &["inspect"],
        &["new"],
    ] {
        let output = burntally(dir.path()).args(arguments).assert().code(2).get_output().clone();
        assert!(output.stdout.is_empty(), "{arguments:?}");
        assert!(!output.stderr.is_empty(), "{arguments:?}");
    }
    assert!(names(dir.path()).is_empty());
}

#[test]
fn help_and_version_end_with_0() {
    let dir = tempfile::tempdir().unwrap();
    for command in ["reduce", "calibrate", "inspect", "new"] {
        let output = burntally(dir.path()).args([command, "--help"]).assert().code(0).get_output().clone();
        for flag in ["--json", "--quiet", "--units"] {
            assert!(text(&output.stdout).contains(flag), "{command} {flag}");
        }
    }
    let output = burntally(dir.path()).arg("--version").assert().code(0).get_output().clone();
    assert_eq!(text(&output.stdout).trim(), format!("burntally {}", env!("CARGO_PKG_VERSION")));
}

#[test]
fn missing_files_are_refused_with_a_remedy_and_nothing_is_written() {
    let dir = tempfile::tempdir().unwrap();
    for arguments in [
        &["reduce", "gone/run.toml"][..],
        &["reduce", "gone.csv", "--unit", "N", "--json"],
        &["calibrate", "gone.toml"],
        &["inspect", "gone.csv"],
        &["new", "fresh", "--log", "gone.csv"],
    ] {
        let output = burntally(dir.path()).args(arguments).assert().code(1).get_output().clone();
        let message = text(&output.stderr);
        assert!(output.stdout.is_empty(), "{arguments:?}");
        assert!(message.contains("gone") && message.contains("do this:"), "{arguments:?}: {message}");
        assert_eq!(message.matches("burntally:").count(), 1, "one message: {message}");
        assert!(names(dir.path()).is_empty(), "{arguments:?}");
    }
}

#[test]
fn several_refused_runs_are_all_named() {
    let dir = tempfile::tempdir().unwrap();
    fs::create_dir(dir.path().join("empty")).unwrap();
    let output = burntally(dir.path()).args(["reduce", "one.csv", "empty"]).assert().code(1).get_output().clone();
    let message = text(&output.stderr);
    assert!(message.contains("one.csv") && message.contains("no run.toml"), "{message}");
    assert_eq!(names(dir.path()), ["empty"]);
}

#[test]
fn flags_of_a_bare_log_do_not_go_with_a_described_run() {
    let dir = tempfile::tempdir().unwrap();
    fs::write(dir.path().join("run.toml"), "").unwrap();
    burntally(dir.path()).args(["reduce", ".", "--unit", "N"]).assert().code(2);
}

#[test]
fn a_second_run_with_the_same_id_is_refused_and_both_are_named() {
    let dir = tempfile::tempdir().unwrap();
    for name in ["a", "b"] {
        fs::create_dir(dir.path().join(name)).unwrap();
        fs::write(dir.path().join(name).join("run.toml"), "[run]\nid = \"X-1\"\n").unwrap();
    }
    let output = burntally(dir.path()).args(["reduce", "."]).assert().code(1).get_output().clone();
    let message = text(&output.stderr);
    let twin = message.lines().find(|line| line.contains("\"X-1\" is taken")).unwrap_or_else(|| panic!("{message}"));
    assert!(twin.contains("a/run.toml") && twin.contains("b/run.toml"), "{twin}");
}

#[test]
fn new_starts_a_run_once_and_never_replaces_it() {
    let dir = tempfile::tempdir().unwrap();
    let output = burntally(dir.path()).args(["new", "runs/FM-07"]).assert().code(0).get_output().clone();
    assert!(text(&output.stdout).contains("run.toml"));
    let file = dir.path().join("runs/FM-07/run.toml");
    let first = fs::read_to_string(&file).unwrap();
    assert!(first.contains("id = \"FM-07\""));
    assert!(first.parse::<toml::Table>().is_ok());
    let output = burntally(dir.path()).args(["new", "runs/FM-07"]).assert().code(1).get_output().clone();
    assert!(text(&output.stderr).contains("not replaced"));
    assert_eq!(fs::read_to_string(&file).unwrap(), first);
    assert_eq!(names(&dir.path().join("runs/FM-07")), ["run.toml"]);
}

#[test]
fn quiet_says_nothing_and_json_says_only_json() {
    let dir = tempfile::tempdir().unwrap();
    burntally(dir.path()).args(["new", "a", "--quiet"]).assert().code(0).stdout("").stderr("");
    let output = burntally(dir.path()).args(["new", "b", "--json"]).assert().code(0).get_output().clone();
    let value: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert!(value["written"].as_str().unwrap().ends_with("run.toml"));
}

#[cfg(target_os = "linux")]
#[test]
fn a_reader_that_goes_away_is_no_trouble_and_a_full_device_is_said() {
    use std::process::{Command, Stdio};
    let dir = tempfile::tempdir().unwrap();
    let program = assert_cmd::cargo::cargo_bin("burntally");
    let (reader, writer) = std::io::pipe().unwrap();
    drop(reader);
    let status = Command::new(&program)
        .current_dir(dir.path())
        .args(["new", "a"])
        .stdout(writer)
        .stderr(Stdio::null())
        .status()
        .unwrap();
    assert_eq!(status.code(), Some(0));
    let full = fs::OpenOptions::new().write(true).open("/dev/full").unwrap();
    let status = Command::new(&program)
        .current_dir(dir.path())
        .args(["new", "b"])
        .stdout(full)
        .stderr(Stdio::null())
        .status()
        .unwrap();
    assert_eq!(status.code(), Some(1));
}

fn samples() -> std::path::PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("sample-runs")
}

#[test]
fn a_sample_run_is_reduced_to_all_its_files() {
    let dir = tempfile::tempdir().unwrap();
    let run = samples().join("bw1-1");
    let output = burntally(dir.path()).arg("reduce").arg(&run).assert().code(0).get_output().clone();
    let said = text(&output.stdout);
    assert!(said.contains("BW1-1") && said.contains("total impulse") && said.contains("±"), "{said}");
    let folder = dir.path().join("reduced/BW1-1");
    let expected = [
        "report.html",
        "result.json",
        "thrust-table.csv",
        "thrust-table.csv-metadata.json",
        "thrust.png",
        "thrust.svg",
    ];
    assert_eq!(names(&folder), expected);

    // The table carries the impulse and the peak of result.json, within what the contract allows it.
    let result: serde_json::Value =
        serde_json::from_str(&fs::read_to_string(folder.join("result.json")).unwrap()).unwrap();
    let figure = |key: &str| result["quantities"][key]["value"].as_f64().unwrap();
    let table = fs::read_to_string(folder.join("thrust-table.csv")).unwrap();
    let rows: Vec<[f64; 2]> = table
        .lines()
        .skip(1)
        .map(|line| {
            let mut fields = line.split(',').map(|field| field.parse().unwrap());
            [fields.next().unwrap(), fields.next().unwrap()]
        })
        .collect();
    let impulse: f64 = rows.windows(2).map(|w| (w[1][0] - w[0][0]) * (w[0][1] + w[1][1]) / 2.0).sum();
    let peak = rows.iter().map(|row| row[1]).fold(0.0, f64::max);
    assert!(rows.len() <= 400 && rows[0] == [0.0, 0.0] && rows[rows.len() - 1][1] == 0.0);
    assert!((impulse / figure("total_impulse") - 1.0).abs() < 2e-4, "{impulse}");
    assert!((peak / figure("peak_thrust") - 1.0).abs() < 5e-3, "{peak}");

    // Once more, numbers only: the pictures of the first time would contradict, notes of a person would not.
    fs::write(folder.join("notes.txt"), "mine").unwrap();
    let arguments = ["--json", "--no-pictures"];
    let output = burntally(dir.path()).arg("reduce").arg(&run).args(arguments).assert().code(0).get_output().clone();
    let said: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(said, result);
    assert_eq!(names(&folder), ["notes.txt", "result.json", "thrust-table.csv", "thrust-table.csv-metadata.json"]);
}

#[test]
fn several_runs_stand_alone() {
    let dir = tempfile::tempdir().unwrap();
    let output = burntally(dir.path())
        .args(["reduce", "gone.csv", "--json", "--no-pictures", "--out", "there"])
        .args(["bw1-1", "bw2-2"].map(|run| samples().join(run)))
        .assert()
        .code(1)
        .get_output()
        .clone();
    let ids: Vec<String> = text(&output.stdout)
        .lines()
        .map(|line| serde_json::from_str::<serde_json::Value>(line).unwrap()["run"]["id"].as_str().unwrap().to_owned())
        .collect();
    assert_eq!(ids, ["BW1-1", "BW2-2"], "in the order they were named");
    assert!(text(&output.stderr).contains("gone.csv"));
    assert_eq!(names(&dir.path().join("there")), ids);
    // The clipped one alone: done, but a check failed.
    burntally(dir.path()).arg("reduce").arg(samples().join("bw2-2")).arg("-q").assert().code(3).stdout("");
}

#[test]
fn a_run_started_from_its_log_is_reduced_once_it_is_filled_in() {
    let dir = tempfile::tempdir().unwrap();
    let log = samples().join("bw1-1/bw1-1.csv");
    burntally(dir.path()).args(["new", "X-1", "--log"]).arg(&log).assert().code(0);
    burntally(dir.path()).args(["reduce", "X-1"]).assert().code(1);
    let file = dir.path().join("X-1/run.toml");
    let filled: String = fs::read_to_string(&file)
        .unwrap()
        .lines()
        .map(|line| if line.starts_with("unit = ") { "unit = \"N\"\n".to_owned() } else { format!("{line}\n") })
        .collect();
    fs::write(&file, filled).unwrap();
    let output = burntally(dir.path()).args(["reduce", "X-1"]).output().unwrap();
    assert!(matches!(output.status.code(), Some(0 | 3)), "{}", text(&output.stderr));
    assert!(dir.path().join("reduced/X-1/result.json").is_file());
}

#[test]
fn a_calibration_is_fitted_and_a_log_inspected() {
    let dir = tempfile::tempdir().unwrap();
    let cell = samples().join("../calibration/trough-2kn.toml");
    let output = burntally(dir.path()).arg("calibrate").arg(&cell).assert().code(0).get_output().clone();
    assert!(text(&output.stdout).contains("calibrated/trough-2kn"));
    let folder = dir.path().join("calibrated/trough-2kn");
    assert_eq!(names(&folder), ["calibration.json", "residuals.png", "residuals.svg"]);
    let log = samples().join("bw1-1/bw1-1.csv");
    let output = burntally(dir.path()).arg("inspect").arg(&log).assert().code(0).get_output().clone();
    assert!(text(&output.stdout).contains("samples a second"));
    let output = burntally(dir.path()).arg("inspect").arg(&log).arg("--json").assert().code(0).get_output().clone();
    let value: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert!(!value["bursts"].as_array().unwrap().is_empty());
    assert_eq!(names(dir.path()), ["calibrated"]);
}
