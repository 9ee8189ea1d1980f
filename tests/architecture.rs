//! The shape of the code: data flows one way, each outside library has one door, files stay short.

use std::path::{Path, PathBuf};

/// Modules in the order data flows. A module may use those before it.
const FLOW: [&str; 17] = [
    "problem",
    "quantity",
    "run",
    "log",
    "calibration",
    "condition",
    "burn",
    "measure",
    "firing",
    "uncertainty",
    "reduce",
    "load",
    "compare",
    "preflight",
    "export",
    "report",
    "cli",
];

/// Imports against the flow that are meant, with the reason.
const MEANT: [(&str, &str, &str); 4] = [
    ("calibration", "uncertainty", "distributions (F, t) live in the one statistics module"),
    ("measure", "uncertainty", "the normal distribution of class probabilities lives there too"),
    ("measure", "firing", "the class is reported in the shape of result.json"),
    ("load", "reduce", "what is loaded is the reduction's input"),
];

/// Libraries with one door.
const DOORS: [(&str, &[&str]); 6] = [
    ("csv", &["log/", "export/", "calibration/"]),
    ("rustfft", &["condition/spectrum.rs"]),
    ("statrs", &["uncertainty/statistics.rs"]),
    ("plotters", &["report/"]),
    ("clap", &["cli/"]),
    ("resvg", &["report/"]),
];

/// Lines before the tests of a file.
const LONGEST: usize = 500;

fn sources(dir: &Path, out: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(dir).expect("folder") {
        let path = entry.expect("entry").path();
        if path.is_dir() {
            sources(&path, out);
        } else if path.extension().is_some_and(|e| e == "rs") {
            out.push(path);
        }
    }
}

/// What is wrong with one file, given its path below src/ and its text.
fn faults(place: &str, text: &str) -> Vec<String> {
    let text = text.split("#[cfg(test)]").next().unwrap_or("");
    let own = place.split(['/', '.']).next().unwrap_or("");
    let rank = |module: &str| FLOW.iter().position(|m| *m == module);
    let mut out = Vec::new();
    for line in text.lines() {
        let Some(rest) = line.trim_start().strip_prefix("use crate::") else {
            continue;
        };
        let used = rest.split([':', ';', '{']).next().unwrap_or("");
        if let (Some(a), Some(b)) = (rank(own), rank(used))
            && b > a
            && !MEANT.iter().any(|(from, to, _)| *from == own && *to == used)
        {
            out.push(format!("{place}: uses {used} against the flow"));
        }
    }
    for (library, doors) in DOORS {
        let imported = text.lines().any(|l| {
            let l = l.trim_start();
            l.starts_with(&format!("use {library}::")) || l.contains(&format!(" {library}::")) && !l.starts_with("//")
        });
        if imported && !doors.iter().any(|d| place.starts_with(d)) {
            out.push(format!("{place}: {library} has its door in {doors:?}"));
        }
    }
    if text.lines().count() > LONGEST {
        out.push(format!("{place}: {} lines, perhaps two ideas", text.lines().count()));
    }
    out
}

#[test]
fn the_code_keeps_its_shape() {
    let src = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&src, &mut files);
    assert!(files.len() > 40);
    let all: Vec<String> = files
        .iter()
        .flat_map(|f| {
            let place = f.strip_prefix(&src).expect("below src").to_string_lossy().replace('\\', "/");
            faults(&place, &std::fs::read_to_string(f).expect("text"))
        })
        .collect();
    assert!(all.is_empty(), "{}", all.join("\n"));
}

#[test]
fn a_fault_is_seen() {
    assert_eq!(faults("quantity/mod.rs", "use crate::cli::main;\n").len(), 1);
    assert_eq!(faults("burn/events.rs", "use rustfft::FftPlanner;\n").len(), 1);
    assert_eq!(faults("burn/events.rs", &"x\n".repeat(700)).len(), 1);
    assert!(faults("burn/events.rs", "use crate::condition::quiet;\n").is_empty());
}

#[test]
fn the_map_in_lib_rs_lists_every_module() {
    let text = std::fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("src/lib.rs")).expect("lib.rs");
    let listed: Vec<&str> = text.lines().filter_map(|l| l.strip_prefix("pub mod ")?.strip_suffix(';')).collect();
    assert_eq!(listed, FLOW, "lib.rs lists the modules in the order data flows");
}
