//! run.toml to [`RunSpec`]: every key checked, every refusal with its line and what to write instead.

use super::document::{Document, Table};
use super::{
    ChannelSpec, CheckLoadSpec, LogSpec, Lowpass, MotorSpec, Orientation, PressureReference, ReductionSpec, Role,
    RunSpec, SiteSpec, StandSpec, TimeSpec, read_site,
};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured, Unit};
use std::path::Path;

/// Reads a run.toml. The files it names are resolved against its folder, and not opened.
///
/// # Errors
/// A missing file, bad TOML, unknown or missing keys, wrong units, values out of range.
pub fn read(path: &Path) -> Result<RunSpec, Problem> {
    run_spec(&Document::read(path)?)
}

/// As [`read`], from text at hand; `path` is for messages and for what is relative to it.
///
/// # Errors
/// As [`read`].
pub fn read_text(path: &Path, text: &str) -> Result<RunSpec, Problem> {
    run_spec(&Document::from_text(path, text))
}

/// Whether a run id can name a folder.
///
/// # Errors
/// It is empty, too long, or holds a path separator, `..` or a control character.
pub fn check_id(id: &str) -> Result<(), Problem> {
    let why = if id.trim().is_empty() {
        "is empty"
    } else if id.contains(['/', '\\']) {
        "holds a path separator"
    } else if id.contains("..") {
        "holds dots that lead out of the folder"
    } else if id.starts_with('.') {
        "starts with a dot, which hides the folder"
    } else if id.chars().any(char::is_control) {
        "holds a control character"
    } else if id.trim() != id {
        "starts or ends with a space"
    } else if id.len() > 200 {
        "is longer than 200 bytes"
    } else {
        return Ok(());
    };
    Err(Problem::new(format!("the run id {id:?} {why}"))
        .expected("a name that can be a folder's name")
        .remedy("write id = \"FM-07\", with the name of your firing"))
}

fn run_spec(document: &Document) -> Result<RunSpec, Problem> {
    let parsed = document.parse()?;
    let root = parsed.root();
    let known = ["run", "log", "channel", "stand", "site", "motor", "conditions", "tags", "check_load", "reduction"];
    root.only(&known)?;
    let Some(run) = root.table("run")? else {
        return Err(root.missing("run", "a table [run] with the id of the firing", "write [run] and id = \"FM-07\""));
    };
    run.only(&["id", "pour", "date"])?;
    let Some(id) = run.text("id")? else {
        return Err(run.missing("id", "a unique name of the firing", "write id = \"FM-07\" under [run]"));
    };
    check_id(&id.value).map_err(|problem| run.problem_at(&id.span, problem))?;
    let Some(log) = root.table("log")? else {
        return Err(root.missing("log", "a table [log] with the log's file", "write [log] and file = \"fm-07.csv\""));
    };
    let record = |key: &str| root.table(key)?.map_or(Ok(serde_json::Map::new()), |table| table.record());
    Ok(RunSpec {
        path: Some(document.path.clone()),
        id: id.value,
        pour: run.text("pour")?.map(|found| found.value),
        date: run.date("date")?,
        log: log_spec(&log)?,
        channels: channels(&root)?,
        stand: root.table("stand")?.map_or(Ok(StandSpec::default()), |table| stand(&table))?,
        site: root.table("site")?.map_or(Ok(SiteSpec::default()), |table| {
            table.only(&["gravity", "latitude", "height"])?;
            read_site(&table)
        })?,
        motor: root.table("motor")?.map_or(Ok(MotorSpec::default()), |table| motor(&table))?,
        conditions: record("conditions")?,
        tags: record("tags")?,
        check_loads: root.tables("check_load")?.iter().map(check_load).collect::<Result<_, _>>()?,
        reduction: root.table("reduction")?.map_or(Ok(ReductionSpec::default()), |table| reduction(&table))?,
    })
}

fn log_spec(table: &Table<'_>) -> Result<LogSpec, Problem> {
    table.only(&["file", "time", "rate", "clock_tolerance", "averaging"])?;
    let Some(file) = table.text("file")?.filter(|file| !file.value.trim().is_empty()) else {
        return Err(table.missing(
            "file",
            "the name of the log, relative to run.toml",
            "write file = \"fm-07.csv\" under [log]",
        ));
    };
    let time = match table.table("time")? {
        Some(time) => {
            time.only(&["column", "unit"])?;
            let unit = unit_of(&time, "unit", &[Dimension::Time])?;
            Some(TimeSpec { column: time.column("column")?, unit })
        }
        None => None,
    };
    Ok(LogSpec {
        file: table.document().resolve(&file.value),
        time,
        rate_hz: table.positive("rate", Dimension::Frequency)?,
        clock_tolerance: table.limits("clock_tolerance")?.map(|found| Measured::of(found.value)),
        averaging_s: table.positive("averaging", Dimension::Time)?.map(|found| found.value),
    })
}

/// A unit of one of these dimensions, or `None` when the key is not there.
fn unit_of(table: &Table<'_>, key: &str, dimensions: &[Dimension]) -> Result<Option<Unit>, Problem> {
    let Some(found) = table.text(key)? else { return Ok(None) };
    let allowed: Vec<&str> =
        quantity::all().iter().filter(|unit| dimensions.contains(&unit.dimension)).map(|unit| unit.symbol).collect();
    let only = match dimensions {
        [one] => Some(*one),
        _ => None,
    };
    let unit = quantity::find(&found.value).ok_or_else(|| {
        let problem = quantity::unknown_unit(&found.value, only).expected(format!("one of: {}", allowed.join(", ")));
        table.problem_at(&found.span, problem)
    })?;
    if dimensions.contains(&unit.dimension) {
        return Ok(Some(unit));
    }
    let problem = Problem::new(format!("{} is {}, {}", table.full(key), unit.symbol, unit.dimension.words()))
        .expected(format!("one of: {}", allowed.join(", ")))
        .remedy(format!("write {key} = \"{}\", or whichever the readings are in", allowed.first().unwrap_or(&"N")));
    Err(table.problem_at(&found.span, problem))
}

fn channels(root: &Table<'_>) -> Result<Vec<ChannelSpec>, Problem> {
    let channels = root.tables("channel")?.iter().map(channel).collect::<Result<Vec<_>, _>>()?;
    if channels.iter().any(|channel| channel.role == Role::Force) {
        return Ok(channels);
    }
    let found = if channels.is_empty() { "there is no [[channel]]" } else { "no [[channel]] has role = \"force\"" };
    Err(root.problem_with(
        "channel",
        Problem::new(found).expected("at least one force channel").remedy(
            "write [[channel]], role = \"force\", column = \"load\", unit = \"count\" and calibration = \"cell.toml\"",
        ),
    ))
}

fn channel(table: &Table<'_>) -> Result<ChannelSpec, Problem> {
    table.only(&["role", "column", "unit", "calibration", "accuracy", "reference"])?;
    let roles = [("force", Role::Force), ("pressure", Role::Pressure), ("ignition", Role::Ignition)];
    let Some(role) = table.word("role", &roles)? else {
        return Err(table.missing("role", "force, pressure or ignition", "write role = \"force\" in this [[channel]]"));
    };
    let Some(column) = table.column("column")? else {
        return Err(table.missing(
            "column",
            "a header name, or the number of the column",
            "write column = \"load\" in this [[channel]]",
        ));
    };
    let raw = [Dimension::Count, Dimension::Voltage, Dimension::VoltageRatio];
    let unit = match role {
        Role::Force => unit_of(table, "unit", &[&raw[..], &[Dimension::Force, Dimension::Mass]].concat())?,
        Role::Pressure => unit_of(table, "unit", &[&raw[..], &[Dimension::Pressure]].concat())?,
        // only its steps matter, whatever the unit
        Role::Ignition => table.text("unit")?.and_then(|found| quantity::find(&found.value)),
    };
    let calibration = table.text("calibration")?;
    if let Some(unit) = unit
        && raw.contains(&unit.dimension)
        && calibration.is_none()
        && role != Role::Ignition
    {
        let problem = Problem::new(format!("a channel in {} has no calibration", unit.symbol))
            .expected("calibration = the file that turns readings into forces")
            .remedy("write calibration = \"../calibration/cell-2kn.toml\" in this [[channel]]");
        return Err(table.problem_with("unit", problem));
    }
    let references = [("gauge", PressureReference::Gauge), ("absolute", PressureReference::Absolute)];
    let reference = table.word("reference", &references)?;
    if role == Role::Pressure && reference.is_none() {
        return Err(table.missing(
            "reference",
            "gauge or absolute: what the transducer reads against",
            "write reference = \"gauge\" in this [[channel]]",
        ));
    }
    let accuracy = table.limits("accuracy")?;
    Ok(ChannelSpec {
        role,
        column,
        unit,
        calibration: calibration.map(|file| table.document().resolve(&file.value)),
        accuracy: accuracy.map(|found| found.value),
        reference,
        line: Some(table.line()),
    })
}

fn stand(table: &Table<'_>) -> Result<StandSpec, Problem> {
    table.only(&["orientation", "natural_frequency", "damping_ratio", "force_ratio"])?;
    let orientations = [
        ("horizontal", Orientation::Horizontal),
        ("nozzle-up", Orientation::NozzleUp),
        ("nozzle-down", Orientation::NozzleDown),
    ];
    let damping = table.quantity("damping_ratio", Dimension::Ratio)?;
    if let Some(found) = &damping
        && !(0.0..1.0).contains(&found.value.value)
    {
        let problem = Problem::new(format!("stand.damping_ratio is {}", found.value.value))
            .expected("a fraction of critical damping, from 0 to below 1")
            .remedy("write damping_ratio = 0.03");
        return Err(table.problem_at(&found.span, problem));
    }
    Ok(StandSpec {
        orientation: table.word("orientation", &orientations)?,
        natural_frequency_hz: table.positive("natural_frequency", Dimension::Frequency)?,
        damping_ratio: damping.map(|found| found.value),
        force_ratio: table.positive("force_ratio", Dimension::Ratio)?,
    })
}

fn motor(table: &Table<'_>) -> Result<MotorSpec, Problem> {
    table.only(&[
        "propellant_mass",
        "mass_before",
        "mass_after",
        "throat_diameter",
        "throat_diameter_after",
        "web_thickness",
    ])?;
    let mass = |key| table.positive(key, Dimension::Mass);
    let length = |key| table.positive(key, Dimension::Length);
    let motor = MotorSpec {
        propellant_mass_kg: mass("propellant_mass")?,
        mass_before_kg: mass("mass_before")?,
        mass_after_kg: mass("mass_after")?,
        throat_diameter_m: length("throat_diameter")?,
        throat_diameter_after_m: length("throat_diameter_after")?,
        web_thickness_m: length("web_thickness")?,
    };
    if let (Some(before), Some(after)) = (motor.mass_before_kg, motor.mass_after_kg)
        && after.value >= before.value
    {
        let problem = Problem::new("motor.mass_after is not below motor.mass_before")
            .expected("a motor that is lighter after the firing")
            .remedy("swap the two, or correct the one that is wrong");
        return Err(table.problem_with("mass_after", problem));
    }
    Ok(motor)
}

fn check_load(table: &Table<'_>) -> Result<CheckLoadSpec, Problem> {
    table.only(&["mass", "from", "to"])?;
    let need = |key: &str, remedy: &str| table.missing(key, "mass, from and to of a weight on the stand", remedy);
    let mass_kg: Measured =
        table.positive("mass", Dimension::Mass)?.ok_or_else(|| need("mass", "write mass = \"10 kg\""))?;
    let from =
        table.quantity("from", Dimension::Time)?.ok_or_else(|| need("from", "write from = \"12 s\", log time"))?;
    let to = table.quantity("to", Dimension::Time)?.ok_or_else(|| need("to", "write to = \"18 s\", log time"))?;
    if to.value.value <= from.value.value {
        let problem = Problem::new("check_load.to is not after check_load.from")
            .expected("log times in order")
            .remedy("correct from and to; both are log time, in seconds from the first data record");
        return Err(table.problem_at(&to.span, problem));
    }
    Ok(CheckLoadSpec { mass_kg, from_s: from.value.value, to_s: to.value.value })
}

fn reduction(table: &Table<'_>) -> Result<ReductionSpec, Problem> {
    table.only(&["burn_start", "burn_end", "burst", "lowpass"])?;
    let time = |key| Ok::<_, Problem>(table.quantity(key, Dimension::Time)?.map(|found| found.value.value));
    let (burn_start_s, burn_end_s) = (time("burn_start")?, time("burn_end")?);
    if let (Some(start), Some(end)) = (burn_start_s, burn_end_s)
        && end <= start
    {
        let problem = Problem::new("reduction.burn_end is not after reduction.burn_start")
            .expected("log times in order")
            .remedy("correct burn_start and burn_end; both are log time, in seconds from the first data record");
        return Err(table.problem_with("burn_end", problem));
    }
    let lowpass = match table.raw_text("lowpass") {
        Some("off") => Some(Lowpass::Off),
        _ => table.positive("lowpass", Dimension::Frequency)?.map(|cutoff| Lowpass::CutoffHz(cutoff.value)),
    };
    Ok(ReductionSpec { burn_start_s, burn_end_s, burst: table.counting("burst")?.map(|found| found.value), lowpass })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::run::ColumnRef;
    use std::path::PathBuf;

    const FULL: &str = include_str!("../../tests/reference/full-run.toml");
    const SMALL: &str =
        "[run]\nid = \"A-1\"\n[log]\nfile = \"a.csv\"\n[[channel]]\nrole = \"force\"\ncolumn = 2\nunit = \"N\"\n";

    fn spec(text: &str) -> Result<RunSpec, Problem> {
        read_text(Path::new("bench/run.toml"), text)
    }

    #[test]
    fn every_key_of_a_full_file_is_read() {
        let run = spec(FULL).unwrap_or_else(|problem| panic!("{problem}"));
        assert_eq!(run.id, "FM-07");
        assert_eq!(run.pour.as_deref(), Some("FM"));
        assert_eq!(run.log.file, PathBuf::from("bench/fm-07.csv"));
        let time = run.log.time.unwrap();
        assert_eq!(time.column, Some(ColumnRef::Name("t_ms".into())));
        assert_eq!(time.unit.unwrap().symbol, "ms");
        assert_eq!(run.log.averaging_s, Some(0.0125));
        assert!((run.log.clock_tolerance.unwrap().value - 0.005).abs() < 1e-15);
        let channel = &run.channels[0];
        assert_eq!(channel.calibration, Some(PathBuf::from("bench/../calibration/cell-2kn.toml")));
        assert_eq!(channel.accuracy, Some(0.002));
        assert_eq!(run.channels[1].role, Role::Pressure);
        assert_eq!(run.channels[1].reference, Some(PressureReference::Gauge));
        assert_eq!(run.channels[2].column, ColumnRef::Number(4));
        assert_eq!(run.stand.orientation, Some(Orientation::Horizontal));
        assert_eq!(run.stand.damping_ratio.unwrap().value, 0.03);
        assert_eq!(run.stand.force_ratio.unwrap().limits, Some(0.002));
        assert!((run.motor.propellant_mass_kg.unwrap().value - 0.4123).abs() < 1e-15);
        let air = run.conditions["air_pressure"].as_object().unwrap();
        assert_eq!(air["value"].as_f64(), Some(97800.0));
        assert_eq!(air["unit"], "Pa");
        assert_eq!(air["text"], "978 hPa");
        assert_eq!(run.tags["cure_days"], 9);
        assert_eq!(run.tags["mix"], "second");
        assert_eq!(run.check_loads[0].to_s, 18.0);
        assert_eq!(run.reduction.lowpass, Some(Lowpass::CutoffHz(60.0)));
        assert_eq!(run.reduction.burst, Some(2));
    }

    #[test]
    fn the_least_that_is_needed() {
        let run = spec(SMALL).unwrap();
        assert_eq!(run.site, SiteSpec::default());
        assert_eq!(run.channels.len(), 1);
        assert_eq!(
            spec(&format!("{SMALL}[reduction]\nlowpass = \"off\"")).unwrap().reduction.lowpass,
            Some(Lowpass::Off)
        );
    }

    /// Each refusal names the line of the trouble and what to write.
    #[test]
    fn refusals_have_a_line_and_a_remedy() {
        let with = |extra: &str| format!("{SMALL}{extra}");
        let cases: Vec<(String, u64, &str)> = vec![
            (with("[motor]\npropellant_mass = 412.3\n"), 10, "412.3 g"),
            (with("[motor]\npropelant_mass = \"412 g\"\n"), 10, "propellant_mass"),
            (with("[motr]\n"), 9, "motor"),
            (with("[motor]\npropellant_mass = \"412 Hz\"\n"), 10, "a mass"),
            (with("[motor]\npropellant_mass = \"0 g\"\n"), 10, "above zero"),
            (with("[motor]\nmass_before = \"1 kg\"\nmass_after = \"2 kg\"\n"), 11, "lighter"),
            (with("[stand]\ndamping_ratio = 1.5\n"), 10, "critical"),
            (with("[stand]\norientation = \"up\"\n"), 10, "nozzle-up"),
            (with("[site]\ngravity = \"9.8 m/s\"\n"), 10, "acceleration"),
            (with("[site]\ngravity = \"98 m/s2\"\n"), 10, "9.8017"),
            (with("[site]\nheight = \"310 m\"\n"), 9, "latitude"),
            (with("[site]\nlatitude = \"95 deg\"\n"), 10, "pole"),
            (with("[reduction]\nburn_start = \"5 s\"\nburn_end = \"4 s\"\n"), 11, "in order"),
            (with("[reduction]\nlowpass = \"of\"\n"), 10, "80 Hz"),
            (with("[reduction]\nburst = 0\n"), 10, "from 1"),
            (with("[[check_load]]\nmass = \"1 kg\"\nfrom = \"3 s\"\nto = \"2 s\"\n"), 12, "in order"),
            (with("[[check_load]]\nmass = \"1 kg\"\nfrom = \"3 s\"\n"), 9, "to = "),
            (with("[channel]\n"), 9, "TOML"),
            (with("[[channel]]\nrole = \"pressure\"\ncolumn = \"p\"\nunit = \"bar\"\n"), 9, "gauge"),
            (with("[[channel]]\nrole = \"force\"\ncolumn = \"b\"\nunit = \"count\"\n"), 12, "calibration"),
            (with("[[channel]]\nrole = \"force\"\ncolumn = \"b\"\nunit = \"newton\"\n"), 12, "N"),
            (with("[[channel]]\nrole = \"force\"\ncolumn = \"b\"\nunit = \"bar\"\n"), 12, "pressure"),
            (with("[[channel]]\nrole = \"force\"\ncolumn = 0\n"), 11, "counted from 1"),
            (with("[[channel]]\nrole = \"thrust\"\ncolumn = 1\n"), 10, "force"),
            (with("[run]\n"), 9, "TOML"),
            (with("[conditions]\nlist = [1]\n"), 10, "quantity"),
            (SMALL.replace("A-1", "../A"), 2, "folder"),
            (SMALL.replace("A-1", ""), 2, "empty"),
            (SMALL.replace("id = \"A-1\"", "id = 7"), 2, "id = \"7\""),
            (SMALL.replace("id = \"A-1\"", ""), 1, "id = "),
            (SMALL.replace("file = \"a.csv\"", ""), 3, "fm-07.csv"),
            (SMALL.replace("role = \"force\"", "role = \"ignition\""), 5, "force channel"),
            ("[run]\nid = \"x\"\nid = \"y\"\n".to_string(), 3, "TOML"),
        ];
        for (text, line, part) in cases {
            let problem = spec(&text).expect_err(&text);
            let message = problem.to_string();
            assert_eq!(problem.line, Some(line), "{text}\n{message}");
            assert!(problem.remedy.is_some(), "{text}\n{message}");
            assert!(message.contains(part), "{text}\n{message}");
            assert_eq!(problem.file.as_deref(), Some(Path::new("bench/run.toml")));
        }
    }

    #[test]
    fn ids_that_could_leave_the_folder_are_refused() {
        for id in ["", " ", "a/b", "a\\b", "..", "a..b", "a\nb", ".", ".hidden", " a", "a\u{0}b"] {
            assert!(check_id(id).is_err(), "{id:?}");
        }
        for id in ["FM-07", "2026-05-14 second", "feu n° 3", "v1.2"] {
            assert!(check_id(id).is_ok(), "{id:?}");
        }
    }

    proptest::proptest! {
        #[test]
        fn never_panics(cut in 0usize..2000, junk in "\\PC{0,12}") {
            let mut at = cut.min(FULL.len());
            while !FULL.is_char_boundary(at) { at -= 1; }
            let _ = spec(&format!("{}{junk}{}", &FULL[..at], &FULL[at..]));
        }
    }
}
