//! `burntally preflight`: a vehicle and a measured thrust in, the check before a flight out.

use super::args::PreflightArguments;
use super::console::{Console, Ending, end};
use super::runs::unreadable;
use crate::compare::failed_checks;
use crate::export::files::{self, OutputFile};
use crate::export::{comparison, json, thrust_table, thrust_table_read, two_columns};
use crate::firing::Firing;
use crate::preflight::rail::Thrust;
use crate::preflight::vehicle::Vehicle;
use crate::preflight::{Source, check, parse};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured};
use crate::report::{plot, preflight_page, preflight_plot, preflight_summary, summary};
use std::path::Path;

const FILE: &str = "preflight.json";
const FILES: [&str; 4] = [FILE, preflight_page::FILE, preflight_plot::SVG_FILE, preflight_plot::PNG_FILE];
const RESULT: &str = "result.json";

pub fn run(arguments: &PreflightArguments) -> Ending {
    end(preflight(arguments))
}

fn preflight(arguments: &PreflightArguments) -> Result<Ending, Problem> {
    let console = Console::new(arguments.common);
    let vehicle = parse::read(&arguments.vehicle)?;
    let assumed_n = arguments.assumed.as_deref().map(assumed_thrust).transpose()?;
    let source = match (&arguments.thrust, assumed_n) {
        (Some(path), _) => source(path, arguments.pour.as_deref())?,
        (None, Some(newtons)) => constant(&vehicle, newtons)?,
        (None, None) => {
            return Err(Problem::new("there is no thrust to check with")
                .expected("--thrust with a measured curve")
                .remedy("give --thrust reduced/FM-07, or --assumed \"150 N\" for a constant one"));
        }
    };
    let mut found = check::check(&vehicle, &source).map_err(|problem| problem.in_file(&arguments.vehicle))?;
    if let (Some(newtons), true) = (assumed_n, arguments.thrust.is_some()) {
        found.assumed = check::assume_constant(&vehicle, &source, newtons);
        if found.assumed.is_none() {
            found.findings.push(format!("with the assumed {newtons} N the vehicle does not leave its rail"));
        }
    }
    let text = serde_json::to_string_pretty(&found).map_err(|error| Problem::new(error.to_string()))?;
    let mut made = vec![OutputFile::new(FILE, text + "\n")];
    if !arguments.no_pictures {
        let svg = preflight_plot::preflight_svg(&vehicle, &found, arguments.common.units.into())?;
        made.push(OutputFile::new(
            preflight_page::FILE,
            preflight_page::page(&found, Some(&svg), arguments.common.units.into())?,
        ));
        made.push(OutputFile::new(preflight_plot::PNG_FILE, plot::png(&svg)?));
        made.push(OutputFile::new(preflight_plot::SVG_FILE, svg));
    }
    files::write_set(&arguments.out, &made, &FILES, std::slice::from_ref(&arguments.vehicle))?;
    let names: Vec<&str> = made.iter().map(|file| file.name).collect();
    let place = format!("written to {}: {}", summary::plain(&arguments.out.display().to_string()), names.join(", "));
    console.say(&preflight_summary::summary(&found, console.view(), &place))?;
    console.emit(&serde_json::to_string(&found).map_err(|error| Problem::new(error.to_string()))?)?;
    Ok(if found.verdict == "go" { Ending::Done } else { Ending::CheckFailed })
}

fn assumed_thrust(text: &str) -> Result<f64, Problem> {
    let measured = quantity::parse(text, Dimension::Force)?;
    if measured.value > 0.0 {
        return Ok(measured.value);
    }
    Err(Problem::new(format!("an assumed thrust of {text:?}"))
        .expected("a thrust above nil")
        .remedy("--assumed \"150 N\""))
}

/// A thrust that nobody measured, for as long as any rail needs.
fn constant(vehicle: &Vehicle, newtons: f64) -> Result<Source, Problem> {
    if vehicle.motor.propellant_mass_kg.is_none() {
        return Err(Problem::new("an assumed thrust carries no propellant mass, and vehicle.toml gives none")
            .expected("propellant_mass under [motor]")
            .remedy("write propellant_mass = \"412 g\" under [motor] of vehicle.toml"));
    }
    Ok(Source {
        description: format!("constant {newtons} N, assumed"),
        thrust: Thrust::new(vec![0.0, 10.0], vec![newtons; 2]),
        mean: None,
        relative_u: None,
        propellant_kg: None,
        qualifications: vec!["the thrust is assumed: nothing was measured".into()],
    })
}

fn source(path: &Path, pour: Option<&str>) -> Result<Source, Problem> {
    let table = path.join(thrust_table::FILE);
    if path.join(comparison::FILE).is_file() {
        return of_group(&path.join(comparison::FILE), pour);
    }
    if pour.is_some() {
        return Err(Problem::new("--pour is for a comparison, and this is none")
            .in_file(path)
            .remedy("leave --pour out, or name the folder that `burntally compare` wrote"));
    }
    if table.is_file() {
        return of_table(&table);
    }
    if path.is_dir() {
        return Err(Problem::new("this folder holds neither a thrust table nor a comparison")
            .in_file(path)
            .expected("a folder that `burntally reduce` or `burntally compare` wrote"));
    }
    let bytes = std::fs::read(path).map_err(|error| unreadable(path, &error))?;
    let first = bytes.split(|b| *b == b'\n').next().unwrap_or_default();
    if String::from_utf8_lossy(first).contains("thrust_u_n") {
        return of_table(path);
    }
    let (time_s, thrust_n) = two_columns::read(&bytes).map_err(|problem| problem.in_file(path))?;
    Ok(Source {
        description: path.display().to_string(),
        thrust: Thrust::new(time_s, thrust_n),
        mean: None,
        relative_u: None,
        propellant_kg: None,
        qualifications: vec!["where the thrust comes from is not known: one curve without its checks".into()],
    })
}

/// A thrust table, and the result beside it where there is one.
fn of_table(path: &Path) -> Result<Source, Problem> {
    let bytes = std::fs::read(path).map_err(|error| unreadable(path, &error))?;
    let table = thrust_table_read::read(&bytes).map_err(|problem| problem.in_file(path))?;
    let beside = path.with_file_name(RESULT);
    let firing: Option<Firing> = match std::fs::read_to_string(&beside) {
        Ok(text) => Some(json::read(&text).map_err(|problem| problem.in_file(&beside))?),
        Err(_) => None,
    };
    let mut qualifications = vec!["thrust from one firing only: how the next motor differs is not known".to_string()];
    match &firing {
        Some(firing) => {
            let failed = failed_checks(firing);
            if !failed.is_empty() {
                qualifications.push(format!("the firing failed {}", failed.join(", ")));
            }
            if firing.quantities.total_impulse.as_ref().is_some_and(|f| f.bound.is_some()) {
                qualifications.push("the thrust is a bound only".into());
            }
        }
        None => qualifications.push("the firing's checks are not beside its table".into()),
    }
    // The curve's error as a whole, weighted with thrust.
    let relative_u = table.thrust_u_n.as_ref().map(|u| {
        let (sum, weight) =
            u.iter().zip(&table.thrust_n).fold((0.0, 0.0), |(s, w), (u, f)| (s + u * f.max(0.0), w + f * f));
        if weight > 0.0 { sum / weight } else { 0.0 }
    });
    let propellant_kg = table.propellant_kg.as_ref().and_then(|left| left.first().copied()).map(|kg| {
        let u = firing.as_ref().and_then(|f| f.quantities.propellant_mass.as_ref()?.standard_uncertainty);
        Measured { value: kg, standard_uncertainty: u, limits: None }
    });
    Ok(Source {
        description: firing.map_or_else(|| path.display().to_string(), |f| format!("firing {}", f.run.id)),
        thrust: Thrust::new(table.time_s, table.thrust_n),
        mean: None,
        relative_u,
        propellant_kg,
        qualifications,
    })
}

fn of_group(path: &Path, pour: Option<&str>) -> Result<Source, Problem> {
    let text = std::fs::read_to_string(path).map_err(|error| unreadable(path, &error))?;
    let found = comparison::read(&text).map_err(|problem| problem.in_file(path))?;
    let names: Vec<&str> = found.groups.iter().map(|g| g.pour.as_str()).collect();
    let group = match pour {
        Some(name) => found.groups.iter().find(|g| g.pour == name),
        None if found.groups.len() == 1 => found.groups.first(),
        None => None,
    }
    .ok_or_else(|| {
        Problem::new(match pour {
            Some(name) => format!("the comparison has no group {name:?}"),
            None => format!("the comparison has {} groups", names.len()),
        })
        .in_file(path)
        .expected(format!("--pour with one of {}", names.join(", ")))
    })?;
    let band = group
        .thrust_band
        .as_ref()
        .filter(|b| !b.mean_n.is_empty())
        .ok_or_else(|| Problem::new(format!("the group {:?} has no thrust curves", group.pour)).in_file(path))?;
    let mut qualifications = Vec::new();
    let from = band.time_s.first().copied().unwrap_or(0.0);
    let time_s: Vec<f64> = band.time_s.iter().map(|t| t - from).collect();
    let lower = if band.lower_n.is_empty() {
        qualifications.push("thrust from one firing only: how the next motor differs is not known".to_string());
        band.mean_n.clone()
    } else {
        // A motor does not pull.
        band.lower_n.iter().map(|f| f.max(0.0)).collect()
    };
    if !group.set_aside.is_empty() {
        let ids: Vec<&str> = group.set_aside.iter().map(|s| s.id.as_str()).collect();
        qualifications.push(format!("{} failed a check and is not among the motors averaged", ids.join(", ")));
    }
    let mass = group.quantities.get("propellant_mass").map(|s| Measured {
        value: s.mean,
        standard_uncertainty: s.standard_deviation,
        limits: None,
    });
    Ok(Source {
        description: format!("lower 95/95 thrust of {} firings of {}", group.n, group.pour),
        thrust: Thrust::new(time_s.clone(), lower),
        mean: Some(Thrust::new(time_s, band.mean_n.clone())),
        // The band holds the shared error of calibration already.
        relative_u: Some(0.0),
        propellant_kg: mass,
        qualifications,
    })
}
