//! Every example of the README is run, so that the manual cannot drift.
//!
//! `BURNTALLY_WRITE_README=1 cargo test --test readme` puts the program's present output into the README.

use std::path::{Path, PathBuf};
use std::process::Command;

struct Block {
    kind: String,
    text: String,
    /// Byte range of the text in the README.
    range: std::ops::Range<usize>,
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn readme() -> String {
    std::fs::read_to_string(root().join("README.md")).expect("README.md")
}

/// Fenced blocks, indented or not.
fn blocks(text: &str) -> Vec<Block> {
    let mut out = Vec::new();
    let mut open: Option<(String, usize)> = None;
    let mut at = 0;
    for line in text.split_inclusive('\n') {
        if let Some(kind) = line.trim().strip_prefix("```") {
            match open.take() {
                None => open = Some((kind.to_string(), at + line.len())),
                Some((kind, start)) => out.push(Block { kind, text: text[start..at].to_string(), range: start..at }),
            }
        }
        at += line.len();
    }
    assert!(open.is_none(), "a fence is left open");
    out
}

fn copy(from: &Path, to: &Path) {
    std::fs::create_dir_all(to).expect("folder");
    for entry in std::fs::read_dir(from).expect("folder") {
        let entry = entry.expect("entry");
        let target = to.join(entry.file_name());
        if entry.path().is_dir() {
            copy(&entry.path(), &target);
        } else {
            std::fs::copy(entry.path(), target).expect("copy");
        }
    }
}

fn workplace() -> tempfile::TempDir {
    let dir = tempfile::tempdir().expect("a temporary folder");
    for name in ["sample-runs", "calibration"] {
        copy(&root().join(name), &dir.path().join(name));
    }
    dir
}

#[test]
fn two_commands_do_all_the_set_up() {
    let text = readme();
    let commands: Vec<String> = blocks(&text)
        .iter()
        .filter(|b| b.kind == "sh")
        .flat_map(|b| b.text.lines().map(|l| l.trim().to_string()).collect::<Vec<_>>())
        .filter(|l| !l.starts_with("burntally "))
        .collect();
    assert_eq!(commands, ["cargo run --release -- reduce sample-runs", "cargo test"]);
    let gate = std::fs::read_to_string(root().join(".ci/run")).expect(".ci/run");
    assert!(gate.lines().any(|l| l.starts_with("cargo test")), "the gate calls the README's test command");
}

#[test]
fn every_command_runs_and_prints_what_is_shown() {
    let mut text = readme();
    let dir = workplace();
    let all = blocks(&text);
    let mut ran = 0;
    let mut rewritten: Vec<(std::ops::Range<usize>, String)> = Vec::new();
    for (i, block) in all.iter().enumerate().filter(|(_, b)| b.kind == "sh") {
        for line in block.text.lines().map(str::trim).filter(|l| l.starts_with("burntally ")) {
            let output = Command::new(env!("CARGO_BIN_EXE_burntally"))
                .args(line.split_whitespace().skip(1))
                .current_dir(dir.path())
                .output()
                .expect("the program runs");
            ran += 1;
            let shown = String::from_utf8_lossy(&output.stdout).to_string();
            assert!(
                matches!(output.status.code(), Some(0 | 3)),
                "`{line}` ended with {:?}: {}",
                output.status,
                String::from_utf8_lossy(&output.stderr)
            );
            if let Some(next) = all.get(i + 1).filter(|b| b.kind == "text") {
                if std::env::var_os("BURNTALLY_WRITE_README").is_some() {
                    rewritten.push((next.range.clone(), shown));
                } else {
                    assert_eq!(shown, next.text, "`{line}` prints something else now");
                }
            }
        }
    }
    assert!(ran >= 5, "{ran} commands in the README");
    for (range, shown) in rewritten.into_iter().rev() {
        text.replace_range(range, &shown);
        std::fs::write(root().join("README.md"), &text).expect("README.md can be written");
    }
}

#[test]
fn every_toml_example_loads() {
    let dir = workplace();
    let mut log = String::from("t_ms,load,chamber\n");
    for i in 0..4000 {
        let t = f64::from(i) * 2.0;
        let thrust = if (3000.0..5000.0).contains(&t) { 200.0 } else { 0.0 };
        let ripple = 0.3 * (f64::from(i) * 1.7).sin();
        log.push_str(&format!("{t},{},{}\n", thrust + ripple, 0.1 * (thrust + ripple)));
    }
    std::fs::write(dir.path().join("fm-07.csv"), log).expect("log");
    let (mut runs, mut cells, mut parts) = (0, 0, 0);
    for block in blocks(&readme()).iter().filter(|b| b.kind == "toml") {
        let text: String = block.text.lines().map(|l| format!("{}\n", l.trim_start())).collect();
        if text.starts_with("[[channel]]") {
            // A part of a run.toml: with a force channel before it, it is a whole one.
            let head = "[run]\nid = \"A\"\n[log]\nfile = \"fm-07.csv\"\ntime = { column = \"t_ms\", unit = \"ms\" }\n[[channel]]\nrole = \"force\"\ncolumn = \"load\"\nunit = \"N\"\naccuracy = \"0.2 %\"\n";
            let path = dir.path().join("part.toml");
            std::fs::write(&path, format!("{head}{text}")).expect("example");
            let inputs = burntally::load::load_run(&path).expect("the run loads");
            let q = burntally::reduce::reduce(&inputs).expect("the run reduces").firing.quantities;
            // 20 bar above 978 hPa, and 0.2 % of noise.
            let peak = q.peak_pressure.expect("a peak").value;
            assert!((peak / 2_097_800.0 - 1.0).abs() < 0.01, "{peak}");
            assert!(q.thrust_coefficient.is_some_and(|c| c.interval_95.is_some()));
            parts += 1;
            continue;
        }
        let is_run = text.starts_with("[run]");
        let path = dir.path().join(if is_run { "run.toml" } else { "cell.toml" });
        std::fs::write(&path, text).expect("example");
        if is_run {
            let inputs = burntally::load::load_run(&path).expect("the run loads");
            let firing = burntally::reduce::reduce(&inputs).expect("the run reduces").firing;
            let impulse = firing.quantities.total_impulse.expect("an impulse").value;
            assert!((impulse / 400.0 - 1.0).abs() < 0.01, "{impulse}");
            runs += 1;
        } else {
            let site = burntally::run::SiteSpec::default();
            burntally::calibration::load(&path, &site, None).expect("the calibration loads");
            cells += 1;
        }
    }
    assert_eq!((runs, cells, parts), (1, 1, 1));
}
