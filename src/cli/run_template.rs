//! The commented run.toml that `burntally new` starts a run with.

use crate::log::{Column, Log};

/// What a log tells about a run.
pub struct FromLog<'a> {
    /// Path of the log as run.toml is to name it.
    pub file: String,
    pub log: &'a Log,
    /// The log has no time column.
    pub needs_rate: bool,
}

const READINGS: [&str; 4] = ["count", "V", "mV", "mV/V"];
const FORCES: [&str; 8] = ["N", "kN", "lbf", "kgf", "gf", "kg", "g", "lb"];
const PRESSURES: [&str; 6] = ["Pa", "hPa", "kPa", "MPa", "bar", "psi"];
/// Parts of column names that stand for thrust, likelier ones first, and for time.
const FORCE_NAMES: [&str; 9] = ["thrust", "force", "load", "cell", "newton", "weight", "adc", "count", "raw"];
const TIME_NAMES: [&str; 5] = ["time", "stamp", "millis", "micros", "sec"];
/// Stands where a person must write something; a run.toml that still holds it is refused.
const PLACEHOLDER: &str = "FILL IN";

/// Text as a TOML string.
fn quoted(text: &str) -> String {
    toml::Value::String(text.to_owned()).to_string()
}

/// The text of a run.toml for a run of this id.
pub fn run_toml(id: &str, from: Option<&FromLog>) -> String {
    let mut text =
        String::from("# One firing. A quantity is text with its unit; limits go after ±: \"412.3 ± 0.5 g\".\n");
    text.push_str("# Lines that start with # are optional: take the # away and write your own value.\n");
    text.push_str(&format!("# {} marks what only you can tell.\n", quoted(PLACEHOLDER)));
    text.push_str(&format!("\n[run]\nid = {}\n", quoted(id)));
    text.push_str("# pour = \"FM\"              # the batch of propellant the motor came from\n");
    text.push_str("# date = \"2026-05-14\"\n");
    log_section(&mut text, from);
    channel_section(&mut text, from.map(|from| from.log));
    text.push_str(REST);
    text
}

fn log_section(text: &mut String, from: Option<&FromLog>) {
    let file = from.map_or_else(|| format!("{PLACEHOLDER}: the log, relative to this file"), |from| from.file.clone());
    text.push_str(&format!("\n[log]\nfile = {}\n", quoted(&file)));
    match from {
        Some(from) if from.needs_rate => {
            text.push_str(&format!(
                "rate = {}   # the log has no time column: samples a second, \"80 Hz\"\n",
                quoted(PLACEHOLDER)
            ));
        }
        Some(from) => match time_column(from.log) {
            Some(name) => text.push_str(&format!(
                "time = {{ column = {} }}   # its unit is inferred; unit = \"ms\" beside column would set it\n",
                quoted(name)
            )),
            None => text.push_str("# time = { column = \"t_ms\", unit = \"ms\" }   # inferred when left out\n"),
        },
        None => {
            text.push_str("# time = { column = \"t_ms\", unit = \"ms\" }   # inferred when left out\n");
            text.push_str("# rate = \"80 Hz\"           # for a log without a time column\n");
        }
    }
    text.push_str("# clock_tolerance = \"0.5 %\" # limits of the logger's clock error\n");
    text.push_str("# averaging = \"12.5 ms\"     # the converter averages over this long before each stamp\n");
}

/// The column of the log that is no channel and has a name like time, or the only one that is no channel.
fn time_column(log: &Log) -> Option<&str> {
    let others: Vec<&String> =
        log.available.iter().filter(|name| log.columns.iter().all(|column| column.name != **name)).collect();
    let named = others.iter().find(|name| {
        let lower = name.to_lowercase();
        lower == "t" || lower.starts_with("t_") || TIME_NAMES.iter().any(|part| lower.contains(part))
    });
    match (named, others.as_slice()) {
        (Some(name), _) => Some(name.as_str()),
        (None, [only]) => Some(only.as_str()),
        _ => None,
    }
}

/// The column that carries the force: the only one, or the one named most like it.
pub(super) fn force_column(log: &Log) -> Option<&Column> {
    let candidates: Vec<&Column> = log.columns.iter().filter(|column| !is_pressure(column)).collect();
    match candidates.as_slice() {
        [only] => Some(only),
        _ => FORCE_NAMES
            .iter()
            .find_map(|part| candidates.iter().find(|column| column.name.to_lowercase().contains(part)).copied()),
    }
}

fn is_pressure(column: &Column) -> bool {
    column.unit.as_deref().is_some_and(|unit| PRESSURES.contains(&unit)) || column.name.to_lowercase().contains("press")
}

fn channel_section(text: &mut String, log: Option<&Log>) {
    let force = log.and_then(force_column);
    text.push_str("\n[[channel]]\nrole = \"force\"            # several force channels are added up\n");
    match force {
        Some(column) => text.push_str(&format!("column = {}\n", reference(column))),
        None => {
            text.push_str(&format!("column = {}\n", quoted(&format!("{PLACEHOLDER}: name or number of the column"))))
        }
    }
    let unit = force.and_then(|column| column.unit.as_deref());
    let known = unit.filter(|unit| READINGS.contains(unit) || FORCES.contains(unit));
    match known {
        Some(unit) => text.push_str(&format!("unit = {}            # as the log says\n", quoted(unit))),
        None => {
            if let Some(unit) = unit {
                text.push_str(&format!("# the log says {}\n", quoted(unit)));
            }
            let wanted = format!("{PLACEHOLDER}: count, V, mV, mV/V, N, lbf, kg, ...");
            text.push_str(&format!("unit = {}\n", quoted(&wanted)));
        }
    }
    if known.is_some_and(|unit| READINGS.contains(&unit)) {
        let wanted = format!("{PLACEHOLDER}: the cell's calibration file, relative to this file");
        text.push_str(&format!("calibration = {}\n", quoted(&wanted)));
    } else {
        text.push_str("# calibration = \"../calibration/cell.toml\"   # count, V, mV and mV/V need one\n");
        text.push_str(
            "# accuracy = \"0.2 %\"        # of reading, without a calibration; without either no ± can be given\n",
        );
    }
    if let Some(column) = log.and_then(|log| log.columns.iter().find(|column| is_pressure(column))) {
        let unit = column.unit.as_deref().unwrap_or("bar");
        text.push_str(&format!(
            "\n# [[channel]]\n# role = \"pressure\"\n# column = {}\n# unit = {}\n# reference = \"gauge\"     # or absolute\n# accuracy = \"0.5 %\"        # of reading; without it, or a calibration, no ± of pressure can be given\n",
            reference(column),
            quoted(unit)
        ));
    }
}

/// A column by its name, or by its number where the log names none.
fn reference(column: &Column) -> String {
    if column.name == format!("column {}", column.number) { column.number.to_string() } else { quoted(&column.name) }
}

const REST: &str = r#"
[stand]
# orientation = "horizontal"     # horizontal | nozzle-up (motor weight adds to the reading) | nozzle-down
# natural_frequency = "38 Hz"    # from a tap test; else found from the record where it rings
# damping_ratio = 0.03
# force_ratio = "1.000 ± 0.002"  # lever, misalignment or friction between motor and cell

[site]
# gravity = "9.8017 m/s2"        # or latitude and height:
# latitude = "44.7 deg"
# height = "310 m"

[motor]
# propellant_mass = "412.3 ± 0.5 g"
# mass_before = "1402.0 ± 0.5 g"
# mass_after = "987.5 ± 0.5 g"
# throat_diameter = "9.50 ± 0.02 mm"        # with pressure: characteristic velocity and thrust coefficient
# throat_diameter_after = "9.70 ± 0.02 mm"  # the mean area is used
# web_thickness = "11.0 ± 0.1 mm"           # with pressure: burn rate

# [conditions]
# motor_temperature = "21 degC"
# air_temperature = "17 degC"
# air_pressure = "978 ± 1 hPa"   # added to a gauge pressure

# [tags]                         # any names of your own
# cure_days = 9

# [[check_load]]                 # a known weight on the stand during the record, log time
# mass = "10 kg"
# from = "12 s"
# to = "18 s"

# [reduction]                    # your own decisions, always reported as such
# burn_start = "128.31 s"        # log time
# burn_end = "135.90 s"
# burst = 2                      # which burst is the burn
# lowpass = "60 Hz"              # or "off"
"#;

#[cfg(test)]
pub(crate) mod tests {
    use super::*;
    use crate::log::{Records, Repair};

    pub(crate) fn log() -> Log {
        Log {
            time_s: vec![0.0, 0.0125, 0.025, 0.0375],
            line: vec![2, 3, 4, 5],
            columns: vec![Column {
                name: "load".to_owned(),
                number: 2,
                unit: Some("count".to_owned()),
                values: vec![8000.0, 9000.0, f64::NAN, 8500.0],
            }],
            available: vec!["t_ms".to_owned(), "load".to_owned()],
            interval_s: 0.0125,
            clock_resolution_s: 0.0,
            gaps: Vec::new(),
            records: Records { read: 4, kept: 3, repaired: 1, dropped: 0 },
            repairs: vec![Repair {
                line: Some(3),
                column: Some("load".to_owned()),
                kind: "glitch".to_owned(),
                message: "zero row \u{1b}[2J".to_owned(),
            }],
            findings: vec!["the delimiter is a comma".to_owned()],
            sha256: "00".repeat(32),
            bytes: 99,
        }
    }

    fn table(text: &str) -> toml::Table {
        text.parse().unwrap_or_else(|error| panic!("{error} in\n{text}"))
    }

    #[test]
    fn what_the_log_tells_is_filled_in() {
        let log = log();
        let text =
            run_toml("FM-07", Some(&FromLog { file: "../logs/a \"b\".csv".to_owned(), log: &log, needs_rate: false }));
        let table = table(&text);
        assert_eq!(table["run"]["id"].as_str(), Some("FM-07"));
        assert_eq!(table["log"]["file"].as_str(), Some("../logs/a \"b\".csv"));
        assert_eq!(table["log"]["time"]["column"].as_str(), Some("t_ms"));
        let channel = &table["channel"][0];
        assert_eq!((channel["column"].as_str(), channel["unit"].as_str()), (Some("load"), Some("count")));
        assert!(channel["calibration"].as_str().unwrap().starts_with(PLACEHOLDER), "counts need a calibration");
    }

    #[test]
    fn without_a_log_the_placeholders_are_there() {
        let table = table(&run_toml("FM-07", None));
        assert!(table["log"]["file"].as_str().unwrap().starts_with(PLACEHOLDER));
        assert!(table["channel"][0]["unit"].as_str().unwrap().starts_with(PLACEHOLDER));
    }

    #[test]
    fn optional_lines_are_sound_once_the_comment_sign_is_taken_away() {
        let text = run_toml("FM-07", None);
        let opened: String = text
            .lines()
            .filter(|line| {
                !line.starts_with("# One firing") && !line.starts_with("# Lines that") && !line.starts_with("# \"")
            })
            .map(|line| line.strip_prefix("# ").unwrap_or(line).to_owned() + "\n")
            .collect();
        let table = table(&opened);
        assert_eq!(table["check_load"][0]["mass"].as_str(), Some("10 kg"));
        assert_eq!(table["motor"]["web_thickness"].as_str(), Some("11.0 ± 0.1 mm"));
    }

    #[test]
    fn columns_are_told_apart_by_name_and_unit() {
        let mut log = log();
        let column = |name: &str, number, unit: &str| Column {
            name: name.to_owned(),
            number,
            unit: (!unit.is_empty()).then(|| unit.to_owned()),
            values: vec![0.0; 4],
        };
        log.columns = vec![column("temp", 2, ""), column("pc", 3, "psi"), column("thrust", 4, "lbf")];
        let from = FromLog { file: "a.csv".to_owned(), log: &log, needs_rate: true };
        let text = run_toml("X", Some(&from));
        let parsed = table(&text);
        assert_eq!(parsed["channel"][0]["column"].as_str(), Some("thrust"));
        assert_eq!(parsed["channel"][0]["unit"].as_str(), Some("lbf"));
        assert_eq!(parsed["log"]["rate"].as_str(), Some(PLACEHOLDER));
        assert!(text.contains("# column = \"pc\"\n# unit = \"psi\""));
        log.columns = vec![column("column 3", 3, "furlong")];
        let text = run_toml("X", Some(&FromLog { file: "a.csv".to_owned(), log: &log, needs_rate: false }));
        assert_eq!(table(&text)["channel"][0]["column"].as_integer(), Some(3));
        assert!(text.contains("# the log says \"furlong\""));
    }
}
