//! `burntally preflight` as a person or another program meets it.

use assert_cmd::Command;
use serde_json::Value;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn burntally(folder: &Path) -> Command {
    let mut command = Command::cargo_bin("burntally").expect("the program");
    command.current_dir(folder);
    command
}

/// Three pours of sample runs, reduced and compared, once for all tests.
fn reduced() -> &'static Path {
    static FOLDER: std::sync::OnceLock<tempfile::TempDir> = std::sync::OnceLock::new();
    FOLDER
        .get_or_init(|| {
            let dir = tempfile::tempdir().expect("a folder");
            let runs = ["bw1-1", "bw1-2", "bw1-3", "bw2-2", "bs1-1"].map(|r| root().join("sample-runs").join(r));
            let run = |command: &mut Command| command.output().expect("it runs").status.code();
            run(burntally(dir.path()).arg("reduce").args(&runs).args(["--no-pictures", "--quiet"]));
            let code = run(burntally(dir.path()).args(["compare", "reduced", "--no-pictures", "--quiet"]));
            assert_eq!(code, Some(3));
            dir
        })
        .path()
}

fn vehicle() -> String {
    std::fs::read_to_string(root().join("sample-runs/vehicle.toml")).expect("the sample vehicle")
}

/// Status, standard output and standard error with a vehicle of this text.
fn check(text: &str, arguments: &[&str]) -> (Option<i32>, String, String) {
    let dir = tempfile::tempdir().expect("a folder");
    let file = dir.path().join("vehicle.toml");
    std::fs::write(&file, text).expect("a vehicle");
    let out = dir.path().join("out");
    let output = burntally(reduced())
        .arg("preflight")
        .arg(&file)
        .args(arguments)
        .arg("--out")
        .arg(&out)
        .output()
        .expect("it runs");
    let code = output.status.code();
    assert_eq!(out.join("preflight.json").exists(), matches!(code, Some(0 | 3)), "all or nothing");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (code, text(&output.stdout), text(&output.stderr))
}

fn json(text: &str, arguments: &[&str]) -> Value {
    let mut all = arguments.to_vec();
    all.extend(["--json", "--no-pictures"]);
    let (code, stdout, stderr) = check(text, &all);
    assert!(matches!(code, Some(0 | 3)), "{stderr}");
    serde_json::from_str(&stdout).expect("one line of JSON")
}

fn number(v: &Value) -> f64 {
    v.as_f64().unwrap_or_else(|| panic!("{v} is no number"))
}

fn limit<'a>(p: &'a Value, id: &str) -> &'a Value {
    p["checks"].as_array().expect("checks").iter().find(|c| c["id"] == id).expect(id)
}

#[test]
fn a_go_says_what_it_rests_on_and_no_more() {
    let (code, said, _) = check(&vehicle(), &["--thrust", "reduced/BW1-1", "--assumed", "150 lbf"]);
    assert_eq!(code, Some(0), "{said}");
    assert!(said.starts_with("GO, QUALIFIED"), "{said}");
    for words in [
        "one firing only",
        "nothing more: not that the vehicle is safe",
        "range's safety code",
        "common practice, no source",
        "probability of 0.975",
        "time average of thrust from first motion to exit",
        "assumed constant thrust",
        "by side area",
    ] {
        assert!(said.replace("\n    ", " ").replace('\n', " ").contains(words), "{words} in\n{said}");
    }
    assert!(said.lines().all(|l| l.chars().count() <= 80), "{said}");
}

/// The same curve as table, as folder and as plain CSV.
#[test]
fn sources_of_one_curve_agree() {
    let with_mass = vehicle().replace("[rail]", "propellant_mass = \"463.2 g\"\n[rail]");
    let folder = json(&with_mass, &["--thrust", "reduced/BW1-1"]);
    let table = json(&with_mass, &["--thrust", "reduced/BW1-1/thrust-table.csv"]);
    assert_eq!(folder["rail"], table["rail"]);
    assert_eq!(folder["checks"], table["checks"]);
    let dir = tempfile::tempdir().expect("a folder");
    let text = std::fs::read_to_string(reduced().join("reduced/BW1-1/thrust-table.csv")).expect("a table");
    let rows: Vec<String> = text.lines().map(|l| l.split(',').take(2).collect::<Vec<_>>().join(",")).collect();
    let plain = dir.path().join("plain.csv");
    std::fs::write(&plain, rows.join("\n")).expect("a file");
    let plain = json(&with_mass, &["--thrust", plain.to_str().expect("a path")]);
    for key in ["exit_speed", "exit_time", "mean_thrust"] {
        let (a, b) = (number(&plain["rail"][key]["value"]), number(&folder["rail"][key]["value"]));
        assert!((a / b - 1.0).abs() < 1e-12, "{key}: {a} {b}");
    }
    // What is not known of it qualifies the go.
    let told = plain["qualifications"].to_string();
    assert!(told.contains("not known"), "{told}");
    for key in ["exit_speed", "exit_time", "mean_thrust"] {
        // Nobody said how far the plain curve may be off.
        assert!(plain["rail"][key]["interval_95"].is_null(), "{key}");
        assert!(folder["rail"][key]["interval_95"].is_array(), "{key}");
    }
    assert!(limit(&plain, "thrust_to_weight")["probability_met"].is_null());
    assert!(limit(&plain, "stability_margin")["probability_met"].is_number());
}

/// A table of 60 rows and one of 400 give one exit speed.
#[test]
fn rows_of_the_table_do_not_matter() {
    let dir = tempfile::tempdir().expect("a folder");
    let run = root().join("sample-runs/bw1-2");
    let status = burntally(dir.path())
        .arg("reduce")
        .arg(run)
        .args(["--no-pictures", "--quiet", "--table-rows", "60"])
        .output()
        .expect("it runs")
        .status;
    assert!(status.success());
    let coarse = dir.path().join("reduced/BW1-2");
    let coarse = json(&vehicle(), &["--thrust", coarse.to_str().expect("a path")]);
    let fine = json(&vehicle(), &["--thrust", "reduced/BW1-2"]);
    let speed = |p: &Value| number(&p["rail"]["exit_speed"]["value"]);
    assert!((speed(&coarse) / speed(&fine) - 1.0).abs() < 1e-3, "{} {}", speed(&coarse), speed(&fine));
}

#[test]
fn figures_hang_together() {
    let p = json(&vehicle(), &["--thrust", "reduced/BW1-1"]);
    let rail = &p["rail"];
    assert!((number(&rail["effective_length"]["value"]) - 1.88).abs() < 1e-12);
    let mass = number(&p["lift_off_mass_kg"]);
    assert!((mass - 3.42 - 0.81 - 0.4632).abs() < 1e-3, "{mass}");
    let weight = mass * 9.804_97;
    assert!(
        (number(&limit(&p, "thrust_to_weight")["value"]) * weight / number(&rail["mean_thrust"]["value"]) - 1.0).abs()
            < 1e-5
    );
    let s = &p["stability"];
    let cg = (3.42 * 0.84 + 0.81 * 1.38 + 0.4632 * 1.37) / mass;
    assert!((number(&s["cg_loaded_m"]) - cg).abs() < 1e-4);
    assert!((number(&s["cg_burnout_m"]) - (3.42 * 0.84 + 0.81 * 1.38) / 4.23).abs() < 1e-12);
    assert!((number(&s["margin_loaded"]) - (number(&s["cp_m"]) - number(&s["cg_loaded_m"])) / 0.079).abs() < 1e-9);
    let smallest = number(&s["margin_at_exit"]).min(number(&s["margin_burnout"]));
    assert_eq!(number(&s["margin_minimum"]), smallest);
    let exit = number(&rail["exit_speed"]["value"]);
    // A level wind of 4 m/s from behind on a rail of 86 deg.
    let rail_rad = 86f64.to_radians();
    let angle = (4.0 * rail_rad.sin() / (exit - 4.0 * rail_rad.cos())).atan().to_degrees();
    assert!((number(&p["wind_angle_at_exit_deg"]) - angle).abs() < 1e-9);
    // Impulse on momentum: without drag and with falling mass the speed lies between those of the lightest and the heaviest vehicle.
    let net = number(&rail["mean_thrust"]["value"]) * number(&rail["exit_time"]["value"]);
    assert!(exit < net / (mass - 0.4632) && exit > (net - weight * number(&rail["exit_time"]["value"])) / mass * 0.98);
    // The same trials each time.
    assert_eq!(p, json(&vehicle(), &["--thrust", "reduced/BW1-1"]));
}

/// The lower curve of a group decides, the mean is shown beside it.
#[test]
fn a_group_is_checked_by_its_lower_bound() {
    let p = json(&vehicle(), &["--thrust", "comparison", "--pour", "BW1"]);
    let (lower, mean) = (number(&p["rail"]["exit_speed"]["value"]), number(&p["mean_of_group"]["exit_speed_m_s"]));
    assert!(lower < mean && lower > 0.7 * mean, "{lower} {mean}");
    assert!(p["qualifications"].as_array().is_some_and(Vec::is_empty), "{}", p["qualifications"]);
    assert!(p["thrust_source"].as_str().is_some_and(|t| t.contains("lower 95/95 thrust of 3 firings of BW1")));
    let (code, said, _) = check(&vehicle(), &["--thrust", "comparison", "--pour", "BW1"]);
    assert!(code == Some(0) && said.starts_with("GO by the limits below"), "{said}");
    let (code, _, complaint) = check(&vehicle(), &["--thrust", "comparison"]);
    assert!(code == Some(1) && complaint.contains("BS1, BW1, BW2"), "{complaint}");
    let (code, _, complaint) = check(&vehicle(), &["--thrust", "comparison", "--pour", "BW9"]);
    assert!(code == Some(1) && complaint.contains("no group"), "{complaint}");
}

#[test]
fn a_failed_check_or_a_bound_qualifies() {
    let p = json(&vehicle(), &["--thrust", "reduced/BW2-2"]);
    let told = p["qualifications"].to_string();
    assert!(told.contains("failed clipping") && told.contains("bound only"), "{told}");
}

#[test]
fn limits_not_met_say_what_would_help() {
    let strict =
        vehicle() + "\n[limits]\nrail_exit_speed = \"90 ft/s\"\nthrust_to_weight = 15\nstability_margin = 3.4\n";
    let (code, said, _) = check(&strict, &["--thrust", "reduced/BW1-1"]);
    assert!(code == Some(3) && said.starts_with("NO-GO"), "{said}");
    for words in ["m more rail", "N more thrust", "kg at the nose tip", "vehicle.toml"] {
        assert!(said.contains(words), "{words} in\n{said}");
    }
    // The advice holds: with the rail that is asked for the limit is met.
    let extra: f64 = said
        .split(" m more rail")
        .next()
        .and_then(|t| t.rsplit(' ').next())
        .and_then(|n| n.parse().ok())
        .expect("a length");
    let longer = strict.replace("length = \"2.4 ± 0.01 m\"", &format!("length = \"{} ± 0.01 m\"", 2.4 + extra));
    assert_eq!(limit(&json(&longer, &["--thrust", "reduced/BW1-1"]), "rail_exit_speed")["status"], "pass");
    // And so does the weight in the nose.
    let kg: f64 = said
        .split(" kg at the nose tip")
        .next()
        .and_then(|t| t.rsplit(' ').next())
        .and_then(|n| n.parse().ok())
        .expect("a mass");
    let heavier = strict
        .replace("3.42 ± 0.02 kg", &format!("{} ± 0.02 kg", 3.42 + kg))
        .replace("0.84 ± 0.005 m", &format!("{} ± 0.005 m", 3.42 * 0.84 / (3.42 + kg)));
    assert_eq!(limit(&json(&heavier, &["--thrust", "reduced/BW1-1"]), "stability_margin")["status"], "pass");
}

/// A limit just met is no go: it must be met at 97.5 %.
#[test]
fn met_in_the_mean_is_not_enough() {
    let p = json(&vehicle(), &["--thrust", "reduced/BW1-1"]);
    let value = number(&limit(&p, "rail_exit_speed")["value"]);
    let u = number(&p["rail"]["exit_speed"]["standard_uncertainty"]);
    for (off, status) in [(1.0, "fail"), (1.8, "fail"), (2.2, "pass")] {
        let asked = vehicle() + &format!("\n[limits]\nrail_exit_speed = \"{} m/s\"\n", value - off * u);
        assert_eq!(limit(&json(&asked, &["--thrust", "reduced/BW1-1"]), "rail_exit_speed")["status"], status, "{off}");
    }
}

#[test]
fn never_a_go_without_what_it_needs() {
    let v = vehicle();
    let without = |line: &str| v.lines().filter(|l| !l.starts_with(line)).collect::<Vec<_>>().join("\n");
    let dir = tempfile::tempdir().expect("a folder");
    let file = |name: &str, text: &str| {
        let path = dir.path().join(name);
        std::fs::write(&path, text).expect("a file");
        path.to_str().expect("a path").to_string()
    };
    let plain = file("plain.csv", "0,0\n0.05,600\n1.2,600\n1.3,0\n");
    let weak = file("weak.csv", "0,0\n0.05,30\n1.2,30\n1.3,0\n");
    let short = file("short.csv", "0,0\n0.01,300\n0.02,300\n0.03,0\n");
    let with_mass = v.replace("[rail]", "propellant_mass = \"463 g\"\n[rail]");
    let no_cp = {
        let from = v.find("[nose]").expect("a nose");
        let to = v.find("[motor]").expect("a motor");
        format!("{}{}", &v[..from], &v[to..])
    };
    let cases: Vec<(String, &str, &str)> = vec![
        (without("airframe_mass"), "reduced/BW1-1", "airframe_mass is missing"),
        (without("hardware_mass"), "reduced/BW1-1", "hardware_mass is missing"),
        (v.clone(), &plain, "carries no propellant mass"),
        (v.replace("0.52 ± 0.005 m", "2.6 m"), "reduced/BW1-1", "the forward one is off it at rest"),
        (without("guide_spacing"), "reduced/BW1-1", "guide_spacing is missing"),
        (with_mass.clone(), &weak, "the motor never lifts"),
        (with_mass, &short, "spent before the forward guide"),
        (no_cp, "reduced/BW1-1", "cp is missing"),
        (v.replace("count = 4", "count = 6"), "reduced/BW1-1", "6 fins"),
        (v.replace("1.38 ± 0.005 m", "13.8 m"), "reduced/BW1-1", "hardware_cg at 13.800 m"),
        (v.replace("drag_coefficient = 0.6", "cp = \"16.2 m\""), "reduced/BW1-1", "cp at 16.200 m"),
        (v.replace("1.62 m", "1.5 m"), "reduced/BW1-1", "a fin root's end at 1.610 m"),
        (v.replace("79 ± 0.3 mm", "7.9 ± 0.03 mm"), "reduced/BW1-1", "the shapes are 79.0 mm wide"),
        (v.replace("tip_chord = \"0.09 m\"", "tip_chord = \"-0.09 m\""), "reduced/BW1-1", "a tip chord below nil"),
        (v.replace("3.42 ± 0.02 kg", "3.42 ± 0.02"), "reduced/BW1-1", "airframe_mass"),
        (v.replace("wind =", "wnd ="), "reduced/BW1-1", "wnd"),
        (v.clone(), "nowhere", "there is no such"),
    ];
    for (text, thrust, words) in cases {
        let (code, _, complaint) = check(&text, &["--thrust", thrust]);
        assert!(code == Some(1) && complaint.contains(words), "{words}: {code:?} {complaint}");
    }
    let (code, _, complaint) = check(&v, &[]);
    assert!(code == Some(1) && complaint.contains("no thrust to check with"), "{complaint}");
    let (code, said, _) = check(&v.replace("[rail]", "propellant_mass = \"463 g\"\n[rail]"), &["--assumed", "600 N"]);
    assert!(code == Some(0) && said.contains("nothing was measured"), "{said}");
}

/// The page stands alone, holds the verdict with what qualifies it and the cautions, and a hostile name stays text.
#[test]
fn the_page_says_what_the_screen_says() {
    let dir = tempfile::tempdir().expect("a folder");
    let file = dir.path().join("vehicle.toml");
    std::fs::write(&file, vehicle().replace("Reedling 2", "<img src=x>")).expect("a vehicle");
    let out = dir.path().join("out");
    let made = burntally(reduced())
        .arg("preflight")
        .arg(&file)
        .args(["--thrust", "reduced/BW1-1", "--out"])
        .arg(&out)
        .output()
        .expect("it runs");
    assert!(matches!(made.status.code(), Some(0 | 3)));
    let html = std::fs::read_to_string(out.join("preflight.html")).expect("a page");
    for text in ["<svg", "one firing only", "safety code", "common practice, no source"] {
        assert!(html.contains(text), "{text}");
    }
    let verdict = if made.status.code() == Some(0) { "GO, QUALIFIED" } else { "NO-GO" };
    assert!(html.contains(verdict), "{verdict}");
    assert!(!html.contains("<img") && html.contains("&lt;img") && !html.contains("<script"));
}
