//! `burntally compare` as a person or another program meets it, on the sample runs.

use assert_cmd::Command;
use serde_json::Value;
use std::path::Path;

fn burntally(folder: &Path) -> Command {
    let mut command = Command::cargo_bin("burntally").expect("the program");
    command.current_dir(folder);
    command
}

/// Sample runs reduced in a folder of its own, once for all tests.
fn reduced() -> &'static Path {
    static FOLDER: std::sync::OnceLock<tempfile::TempDir> = std::sync::OnceLock::new();
    let folder = FOLDER.get_or_init(|| {
        let dir = tempfile::tempdir().expect("a folder");
        let runs = Path::new(env!("CARGO_MANIFEST_DIR")).join("sample-runs");
        let status = burntally(dir.path()).arg("reduce").arg(runs).args(["--no-pictures", "--quiet"]).output();
        assert_eq!(status.expect("it runs").status.code(), Some(3));
        dir
    });
    folder.path()
}

fn compare(out: &Path, arguments: &[&str]) -> (Option<i32>, String, String) {
    let output = burntally(reduced()).arg("compare").args(arguments).arg("--out").arg(out).output().expect("it runs");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code(), text(&output.stdout), text(&output.stderr))
}

fn json(out: &Path, arguments: &[&str]) -> Value {
    let mut all = arguments.to_vec();
    all.extend(["--json", "--no-pictures"]);
    let (code, stdout, stderr) = compare(out, &all);
    assert!(matches!(code, Some(0 | 3)), "{stderr}");
    serde_json::from_str(&stdout).expect("one line of JSON")
}

fn group<'a>(c: &'a Value, name: &str) -> &'a Value {
    let groups = c["groups"].as_array().expect("groups");
    groups.iter().find(|g| g["pour"] == name).unwrap_or_else(|| panic!("{name}"))
}

fn spread(values: &[f64]) -> (f64, f64) {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    (mean, (values.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt())
}

fn impulse(id: &str) -> f64 {
    let text = std::fs::read_to_string(reduced().join("reduced").join(id).join("result.json")).expect("a result");
    let result: Value = serde_json::from_str(&text).expect("JSON");
    result["quantities"]["total_impulse"]["value"].as_f64().expect("a number")
}

#[test]
fn pours_of_the_sample_runs() {
    let dir = tempfile::tempdir().expect("a folder");
    let (code, said, _) = compare(dir.path(), &["reduced"]);
    // BW2-2 is clipped: it is set aside, and that is said.
    assert_eq!(code, Some(3));
    assert!(said.contains("set aside BW2-2: failed clipping") && said.contains("12 firings in 4 groups"), "{said}");
    assert!(said.lines().all(|l| l.chars().count() <= 80) && said.lines().count() <= 40, "{said}");
    let text = std::fs::read_to_string(dir.path().join("comparison.json")).expect("comparison.json");
    let c: Value = serde_json::from_str(&text).expect("JSON");
    let bs1 = &group(&c, "BS1")["quantities"]["total_impulse"];
    let (mean, sd) = spread(&["BS1-1", "BS1-2", "BS1-3"].map(impulse));
    let number = |v: &Value| v.as_f64().expect("a number");
    assert!((number(&bs1["mean"]) - mean).abs() < 1e-9 * mean);
    assert!((number(&bs1["standard_deviation"]) - sd).abs() < 1e-9 * mean);
    assert!((number(&bs1["coefficient_of_variation"]) - sd / mean).abs() < 1e-12);
    // Student's t, 2 degrees of freedom.
    let half = 4.302_652_729_911_275 * sd / 3f64.sqrt();
    assert!((number(&bs1["mean_interval_95"][1]) - mean - half).abs() < 1e-6 * mean);
    // The error of one cell does not average out.
    assert!(number(&bs1["mean_interval_with_calibration"][1]) > number(&bs1["mean_interval_95"][1]));
    // Exact two-sided 95/95 factor for three (tests/reference/item03_handbook_stats.json).
    let factor = (number(&bs1["tolerance_interval_95_95"][1]) - mean) / sd;
    assert!((9.7..9.9).contains(&factor), "{factor}");
    let bw2 = group(&c, "BW2");
    assert_eq!((bw2["n"].as_u64(), bw2["runs"].as_array().map(Vec::len)), (Some(2), Some(3)));
    assert!(bw2["quantities"]["total_impulse"]["values"].get("BW2-2").is_none());
    let between = &c["between_pours"]["total_impulse"];
    assert_eq!(between["differences"].as_array().map(Vec::len), Some(6));
    assert!(number(&between["p_value"]) < 1e-6);
    assert!(number(&c["variance_components"]["total_impulse"]["between_pour_sd"]) > 100.0);
    let band = &bw2["thrust_band"];
    for key in ["time_s", "mean_n", "lower_n", "upper_n"] {
        assert_eq!(band[key].as_array().map(Vec::len), Some(201), "{key}");
    }
    // The mean curve carries the mean burn's impulse.
    let list = |key: &str| -> Vec<f64> { band[key].as_array().expect("a list").iter().map(number).collect() };
    let (t, f) = (list("time_s"), list("mean_n"));
    let area: f64 = (1..t.len()).map(|i| 0.5 * (t[i] - t[i - 1]) * (f[i] + f[i - 1])).sum();
    let mean = number(&bw2["quantities"]["total_impulse"]["mean"]);
    assert!((area / mean - 1.0).abs() < 0.003, "{area} {mean}");
    let trend = c["trends"].as_array().expect("trends").iter().find(|t| t["quantity"] == "total_impulse").expect("one");
    assert!(trend["n"] == 11 && trend["against"].as_str().is_some_and(|a| a.starts_with("date")), "{trend}");
    assert_eq!(c["burn_rate_law"], Value::Null);
    for name in ["comparison.csv", "thrust-bands.csv", "comparison.svg", "comparison.png"] {
        assert!(dir.path().join(name).is_file(), "{name}");
    }
}

/// Of one cell the calibration's error cancels in a difference; between cells it does not.
#[test]
fn calibrations_shared_and_not() {
    let dir = tempfile::tempdir().expect("a folder");
    let c = json(dir.path(), &["reduced"]);
    let differences = c["between_pours"]["total_impulse"]["differences"].as_array().expect("differences");
    let widened = |a: &str, b: &str| -> f64 {
        let d = differences.iter().find(|d| d["a"] == a && d["b"] == b).expect("a pair");
        let width = |key: &str| d[key][1].as_f64().expect("a number") - d[key][0].as_f64().expect("a number");
        width("interval_95_with_calibration") / width("interval_95") - 1.0
    };
    // BW1 and BW2 were fired on one cell, BS1 and most of BS2 on two.
    assert!(widened("BW1", "BW2") < 0.002, "{}", widened("BW1", "BW2"));
    assert!(widened("BS1", "BS2") > 0.005, "{}", widened("BS1", "BS2"));
}

#[test]
fn few_firings_say_little_and_say_so() {
    let dir = tempfile::tempdir().expect("a folder");
    // One firing a pour.
    let one = json(dir.path(), &["reduced/BS1-1", "reduced/BW1-1"]);
    let spread = &group(&one, "BS1")["quantities"]["total_impulse"];
    for key in ["standard_deviation", "mean_interval_95", "tolerance_interval_95_95"] {
        assert_eq!(spread[key], Value::Null, "{key}");
    }
    assert!(spread["words"].as_str().is_some_and(|w| w.contains("nothing can be said of the spread")));
    assert!(one["between_pours"].as_object().is_some_and(serde_json::Map::is_empty));
    // Two firings in all, one pour.
    let two = json(dir.path(), &["reduced/BS1-1", "reduced/BS1-2"]);
    assert!(
        group(&two, "BS1")["quantities"]["total_impulse"]["words"].as_str().is_some_and(|w| w.contains("too wide"))
    );
    let (code, said, _) = compare(dir.path(), &["reduced/BS1-1"]);
    assert!(code == Some(0) && said.contains("1 firing in 1 group"), "{said}");
}

#[test]
fn grouping_leaving_out_and_taking_in() {
    let dir = tempfile::tempdir().expect("a folder");
    let by = json(dir.path(), &["reduced", "--by", "tags.propellant"]);
    assert_eq!(by["groups"].as_array().map(Vec::len), Some(2));
    let (code, said, _) = compare(dir.path(), &["reduced", "--leave-out", "BW2-2"]);
    assert!(code == Some(0) && said.contains("BW2-2 left out by --leave-out"), "{said}");
    // Taken in with the rest it still lends no bound to a mean.
    let all = json(dir.path(), &["reduced", "--with-failed"]);
    let bw2 = &group(&all, "BW2")["quantities"];
    assert_eq!(bw2["total_impulse"]["n"], 2);
    assert_eq!(bw2["total_impulse"]["set_aside"][0]["reason"], "lower bound only");
    assert_eq!(bw2["burn_time"]["n"], 3);
    assert!(
        all["findings"].to_string().contains("BW2-2 is averaged although it failed clipping"),
        "{}",
        all["findings"]
    );
}

#[test]
fn what_cannot_be_compared_is_refused_and_nothing_written() {
    let dir = tempfile::tempdir().expect("a folder");
    let out = dir.path().join("out");
    for (arguments, words) in [
        (&["reduced", "--by", "tags.nozzle"][..], "no run has a value for"),
        (&["reduced", "--leave-out", "BW9-9"], "there is no run of that id"),
        (&["nowhere"], "there is no such"),
        (&["."], "there is no result of a reduction"),
    ] {
        let (code, _, complaint) = compare(&out, arguments);
        assert!(code == Some(1) && complaint.contains(words), "{arguments:?}: {complaint}");
        assert!(!out.exists());
    }
    // The same run twice is one; another with its id is refused, and so are other units.
    let copy = dir.path().join("copy");
    std::fs::create_dir(&copy).expect("a folder");
    let text = std::fs::read_to_string(reduced().join("reduced/BS1-1/result.json")).expect("a result");
    let copied = |text: &str| std::fs::write(copy.join("result.json"), text).expect("a copy");
    copied(&text);
    let copy = copy.to_str().expect("a path");
    let (code, _, complaint) = compare(&out, &["reduced/BS1-1", copy]);
    assert!(code == Some(1) && complaint.contains("two results with the run id"), "{complaint}");
    copied(&text.replace("\"BS1-1\"", "\"BS1-9\"").replace("\"N.s\"", "\"[lbf_av].s\""));
    let (code, _, complaint) = compare(&out, &["reduced/BS1-1", copy]);
    assert!(code == Some(1) && complaint.contains("total impulse in") && complaint.contains("BS1-9"), "{complaint}");
    copied(&text.replace("burntally.result/1", "burntally.result/7"));
    let (code, _, complaint) = compare(&out, &[copy]);
    assert!(code == Some(1) && complaint.contains("burntally.result/7"), "{complaint}");
    assert!(!out.exists());
}
