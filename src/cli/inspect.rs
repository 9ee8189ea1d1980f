//! `burntally inspect`: what is in a log. Writes nothing.

use super::args::InspectArguments;
use super::console::{Console, Ending, end};
use super::inputs::{self, InspectFindings};
use crate::log::{Log, ReadRequest};
use crate::problem::Problem;
use crate::report::summary::{plain, wrapped};
use crate::report::units::{fixed, significant};
use serde_json::json;

/// Gaps and repairs shown one by one; the rest is counted.
const MOST_LISTED: usize = 8;

pub fn run(arguments: &InspectArguments) -> Ending {
    end(inspect(arguments))
}

fn inspect(arguments: &InspectArguments) -> Result<Ending, Problem> {
    let console = Console::new(arguments.common);
    let log = inputs::read_log(&arguments.log, &ReadRequest::default())?;
    let findings = inputs::findings(&log);
    console.say(&describe(&arguments.log.display().to_string(), &log, &findings))?;
    console.emit(&as_json(&arguments.log.display().to_string(), &log, &findings).to_string())?;
    Ok(Ending::Done)
}

/// Lowest and highest value of a column that is a number.
fn range(values: &[f64]) -> Option<[f64; 2]> {
    let mut finite = values.iter().copied().filter(|value| value.is_finite());
    let first = finite.next()?;
    Some(finite.fold([first, first], |[low, high], value| [low.min(value), high.max(value)]))
}

fn duration_s(log: &Log) -> f64 {
    match (log.time_s.first(), log.time_s.last()) {
        (Some(first), Some(last)) => last - first,
        _ => 0.0,
    }
}

fn rate_hz(log: &Log) -> Option<f64> {
    (log.interval_s > 0.0).then(|| 1.0 / log.interval_s)
}

fn describe(name: &str, log: &Log, found: &InspectFindings) -> String {
    let mut lines = vec![plain(name), String::new()];
    let records = &log.records;
    lines.push(format!(
        "  {} records read: {} kept, {} repaired, {} dropped; {} bytes",
        records.read, records.kept, records.repaired, records.dropped, log.bytes
    ));
    let rate = rate_hz(log)
        .map_or_else(|| "rate not known".to_owned(), |hz| format!("{} samples a second", significant(hz, 4)));
    lines.push(format!("  {} s at {rate}", fixed(duration_s(log), 3)));
    if log.clock_resolution_s > 0.0 {
        lines.push(format!("  the clock steps by {} s", significant(log.clock_resolution_s, 2)));
    }
    lines.push(String::new());
    lines.push("  columns".to_owned());
    for column in &log.columns {
        let unit = column.unit.as_deref().map_or_else(|| "unit not given".to_owned(), plain);
        let values = range(&column.values).map_or_else(
            || "no numbers".to_owned(),
            |[low, high]| format!("{} to {}", significant(low, 5), significant(high, 5)),
        );
        let mut text = format!("{:>3}  {:<18} {values}, {unit}", column.number, plain(&column.name));
        let missing = column.values.iter().filter(|value| value.is_nan()).count();
        if missing > 0 {
            text.push_str(&format!(", {missing} missing"));
        }
        if let Some((_, sd)) = found.noise.iter().find(|(name, _)| *name == column.name) {
            text.push_str(&format!(", noise {} (1 sd)", significant(*sd, 2)));
        }
        lines.push(format!("  {text}"));
    }
    let others: Vec<String> = log
        .available
        .iter()
        .filter(|name| log.columns.iter().all(|column| column.name != **name))
        .map(|name| plain(name))
        .collect();
    if !others.is_empty() {
        lines.extend(wrapped(&format!("time or text: {}", others.join(", ")), "       ", "       "));
    }
    section(&mut lines, "how it is written", log.findings.iter().map(|text| plain(text)).collect());
    let gaps = log
        .gaps
        .iter()
        .map(|gap| format!("{} to {} s, {} records missing", fixed(gap.start_s, 3), fixed(gap.end_s, 3), gap.missing));
    section(&mut lines, "gaps", gaps.collect());
    let repairs = log.repairs.iter().map(|repair| {
        let line = repair.line.map(|line| format!("line {line}: ")).unwrap_or_default();
        let column = repair.column.as_deref().map(|column| format!(" ({})", plain(column))).unwrap_or_default();
        format!("{line}{}{column}: {}", plain(&repair.kind), plain(&repair.message))
    });
    section(&mut lines, "repairs and drops", repairs.collect());
    if let Some(hz) = found.resonance_hz {
        let damping = found.resonance_damping_ratio.map(|z| format!(", damping ratio about {}", significant(z, 2)));
        let ring = format!("the stand rings at about {} Hz{}", significant(hz, 3), damping.unwrap_or_default());
        section(&mut lines, "resonance", vec![ring]);
    }
    let bursts = found.bursts.iter().map(|(column, start_s, end_s, peak)| {
        format!("{}: {} to {} s, peak {}", plain(column), fixed(*start_s, 2), fixed(*end_s, 2), significant(*peak, 4))
    });
    section(&mut lines, "bursts", bursts.collect());
    lines.push(String::new());
    lines.join("\n")
}

fn section(lines: &mut Vec<String>, title: &str, entries: Vec<String>) {
    if entries.is_empty() {
        return;
    }
    lines.push(String::new());
    lines.push(format!("  {title}"));
    for entry in entries.iter().take(MOST_LISTED) {
        lines.extend(wrapped(entry, "    ", "      "));
    }
    if entries.len() > MOST_LISTED {
        lines.push(format!("    and {} more; --json lists all", entries.len() - MOST_LISTED));
    }
}

fn as_json(name: &str, log: &Log, found: &InspectFindings) -> serde_json::Value {
    let columns: Vec<serde_json::Value> = log
        .columns
        .iter()
        .map(|column| {
            json!({
                "name": column.name, "number": column.number, "unit": column.unit, "range": range(&column.values),
                "missing": column.values.iter().filter(|value| value.is_nan()).count(),
                "noise": found.noise.iter().find(|(name, _)| *name == column.name).map(|(_, sd)| sd),
            })
        })
        .collect();
    let bursts: Vec<serde_json::Value> = found
        .bursts
        .iter()
        .map(|(column, start_s, end_s, peak)| json!({ "column": column, "start_s": start_s, "end_s": end_s, "peak": peak }))
        .collect();
    json!({
        "file": name, "bytes": log.bytes, "sha256": log.sha256, "records": log.records, "duration_s": duration_s(log),
        "interval_s": log.interval_s, "rate_hz": rate_hz(log), "clock_resolution_s": log.clock_resolution_s,
        "available": log.available, "columns": columns, "gaps": log.gaps, "repairs": log.repairs,
        "findings": log.findings, "resonance_hz": found.resonance_hz,
        "resonance_damping_ratio": found.resonance_damping_ratio, "bursts": bursts,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cli::run_template::tests::log;

    #[test]
    fn a_log_in_words() {
        let found = InspectFindings {
            noise: vec![("load".to_owned(), 12.3)],
            resonance_hz: Some(38.2),
            resonance_damping_ratio: None,
            bursts: vec![("load".to_owned(), 128.3, 135.9, 41_234.0)],
        };
        let text = describe("a.csv", &log(), &found);
        for part in [
            "4 records read: 3 kept, 1 repaired, 0 dropped",
            "80.00 samples a second",
            "load",
            "count",
            "1 missing",
            "noise 12 (1 sd)",
            "t_ms",
            "rings at about 38.2 Hz",
            "128.30 to 135.90 s, peak 41230",
            "line 3: glitch (load)",
        ] {
            assert!(text.contains(part), "{part} in\n{text}");
        }
        assert!(!text.contains('\u{1b}'));
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
    }

    #[test]
    fn a_log_as_json() {
        let value = as_json("a.csv", &log(), &InspectFindings::default());
        assert_eq!(value["columns"][0]["range"], json!([8000.0, 9000.0]));
        assert_eq!(value["columns"][0]["noise"], serde_json::Value::Null);
        assert_eq!(value["records"]["read"], 4);
    }

    #[test]
    fn an_empty_log_is_described_too() {
        let empty = Log { time_s: Vec::new(), columns: Vec::new(), interval_s: 0.0, ..log() };
        assert!(describe("a.csv", &empty, &InspectFindings::default()).contains("rate not known"));
    }
}
