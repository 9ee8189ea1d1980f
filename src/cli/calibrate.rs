//! `burntally calibrate`: fit, calibration.json, residual picture.

use super::args::CalibrateArguments;
use super::console::{Console, Ending, end};
use super::inputs::{self, Fitted};
use crate::export::files::{self, OutputFile};
use crate::problem::Problem;
use crate::report::units::{Units, significant};
use crate::report::{plot, residuals, summary};
use serde_json::Value;
use std::path::PathBuf;

const REPORT_FILE: &str = "calibration.json";
const FILES: [&str; 3] = [REPORT_FILE, residuals::SVG_FILE, residuals::PNG_FILE];

pub fn run(arguments: &CalibrateArguments) -> Ending {
    end(calibrate(arguments))
}

fn calibrate(arguments: &CalibrateArguments) -> Result<Ending, Problem> {
    let console = Console::new(arguments.common);
    let units: Units = arguments.common.units.into();
    let fitted = inputs::fit(&arguments.file)?;
    let folder = match &arguments.out {
        // A folder that a person names may be a link to another; the one it stands for is written to.
        Some(out) => out.canonicalize().unwrap_or_else(|_| out.clone()),
        None => PathBuf::from("calibrated").join(arguments.file.file_stem().unwrap_or_default()),
    };
    let made = outputs(&fitted, units, !arguments.no_pictures)?;
    files::write_set(&folder, &made, &FILES, &fitted.files)?;
    let names: Vec<&str> = made.iter().map(|file| file.name).collect();
    let mut text = describe(&fitted, units);
    let place = format!("written to {}: {}", summary::plain(&folder.display().to_string()), names.join(", "));
    text.push_str(&summary::wrapped(&place, "", "  ").join("\n"));
    console.say(&text)?;
    console.emit(&fitted.report.to_string())?;
    Ok(Ending::Done)
}

fn outputs(fitted: &Fitted, units: Units, pictures: bool) -> Result<Vec<OutputFile>, Problem> {
    let mut report = serde_json::to_string_pretty(&fitted.report).map_err(|error| Problem::new(error.to_string()))?;
    report.push('\n');
    let mut made = vec![OutputFile::new(REPORT_FILE, report)];
    if pictures && !fitted.residuals.is_empty() {
        let svg = residuals::residual_svg(&fitted.name, &fitted.residuals, fitted.full_scale_n, units)?;
        made.push(OutputFile::new(residuals::PNG_FILE, plot::png(&svg)?));
        made.push(OutputFile::new(residuals::SVG_FILE, svg));
    }
    Ok(made)
}

/// The fit in a few lines, from the keys of calibration.json.
fn describe(fitted: &Fitted, units: Units) -> String {
    let report = &fitted.report;
    let mut lines = vec![summary::plain(&fitted.name), String::new()];
    let mut line = |name: &str, text: Option<String>| {
        let text = text.unwrap_or_else(|| "not known".to_owned());
        lines.extend(summary::wrapped(&text, &format!("  {name:<24} "), &" ".repeat(27)));
    };
    let number = |key: &str| report.get(key).and_then(Value::as_f64);
    let reading_unit = report.get("reading_unit").and_then(Value::as_str).unwrap_or("").to_owned();
    let force = units.force();
    line("degree", number("degree").map(|degree| degree.to_string()));
    line("why", report.get("reason").and_then(Value::as_str).map(summary::plain));
    let points = report.get("points").and_then(Value::as_array).map_or(0, Vec::len);
    line("points", Some(if points == 0 { "none: no fit".to_owned() } else { points.to_string() }));
    if let Some(slope) = report.get("coefficients").and_then(|list| list.get(1)).and_then(Value::as_f64) {
        let slope = significant(slope * force.size_si, 7);
        line("sensitivity at zero", Some(format!("{slope} {reading_unit}/{}", force.symbol)));
    }
    if let Some(range) = report.get("range_n").and_then(Value::as_array) {
        let ends: Vec<String> =
            range.iter().filter_map(Value::as_f64).map(|end| significant(end / force.size_si, 4)).collect();
        line("forces covered", Some(format!("{} {}", ends.join(" to "), force.symbol)));
    }
    line(
        "scatter about the fit",
        number("residual_standard_deviation")
            .map(|sd| format!("{} {reading_unit} (standard deviation)", significant(sd, 3))),
    );
    for (name, key) in [
        ("nonlinearity", "nonlinearity_percent"),
        ("hysteresis", "hysteresis_percent"),
        ("repeatability", "repeatability_percent"),
    ] {
        line(name, number(key).map(|percent| format!("{} % of full scale", significant(percent, 2))));
    }
    for (key, first) in [("cautions", "  caution "), ("findings", "  ")] {
        let texts = report.get(key).and_then(Value::as_array).into_iter().flatten().filter_map(Value::as_str);
        for text in texts.filter(|text| report.get("reason").and_then(Value::as_str) != Some(*text)) {
            lines.extend(summary::wrapped(&summary::plain(text), first, "    "));
        }
    }
    lines.push(String::new());
    lines.push(String::new());
    lines.join("\n")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::residuals::{Direction, ResidualPoint};

    fn fitted() -> Fitted {
        Fitted {
            name: "an invented cell".to_owned(),
            report: serde_json::json!({
                "degree": 1, "coefficients": [8123.4, 901.2], "covariance": [[1.0, 0.0], [0.0, 1e-6]],
                "residual_standard_deviation": 4.2, "reading_unit": "count", "nonlinearity_percent": 0.021,
                "hysteresis_percent": null, "repeatability_percent": 0.01, "range_n": [0.0, 1961.3], "points": [1, 2],
            }),
            residuals: vec![ResidualPoint { force_n: 0.0, residual_n: 0.1, direction: Direction::Up }],
            full_scale_n: 2000.0,
            files: Vec::new(),
        }
    }

    #[test]
    fn the_fit_in_words() {
        let text = describe(&fitted(), Units::Si);
        for part in ["901.2000 count/N", "0 to 1961 N", "0.021 % of full scale", "hysteresis               not known"] {
            assert!(text.contains(part), "{part} in\n{text}");
        }
        assert!(describe(&fitted(), Units::Us).contains("count/lbf"));
    }

    #[test]
    fn pictures_only_where_there_are_points() {
        let names = |fitted: &Fitted, pictures| -> Vec<&str> {
            outputs(fitted, Units::Si, pictures).unwrap().iter().map(|file| file.name).collect()
        };
        assert_eq!(names(&fitted(), true), ["calibration.json", "residuals.png", "residuals.svg"]);
        assert_eq!(names(&fitted(), false), ["calibration.json"]);
        let without = Fitted { residuals: Vec::new(), ..fitted() };
        assert_eq!(names(&without, true), ["calibration.json"]);
    }
}
