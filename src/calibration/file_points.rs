//! `[points]`, `[weights]` and `[fit]` of a calibration file.

use super::file::{Calibrated, Cell, capacity_of};
use super::points::{self, Listed, Points};
use super::table;
use super::weights::{AIR_DENSITY_KG_M3, CONVENTIONAL_DENSITY_KG_M3, Tolerance, WeightErrors};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Unit};
use crate::run::Gravity;
use crate::run::document::{Document, Table};
use std::path::PathBuf;

pub(super) fn from_points(
    root: &Table<'_>,
    cell: &Cell,
    gravity: Gravity,
    files: &mut Vec<PathBuf>,
) -> Result<Calibrated, Problem> {
    let Some(table) = root.table("points")? else { return Err(Problem::new("[points] is missing")) };
    table.only(&["unit", "reading_unit", "up", "down", "file"])?;
    let unit = unit_among(
        &table,
        "unit",
        &[Dimension::Mass, Dimension::Force, Dimension::Pressure],
        "unit = \"kg\" for weights, or \"N\" for forces",
    )?;
    let reading_unit = unit_among(
        &table,
        "reading_unit",
        &[
            Dimension::Count,
            Dimension::Voltage,
            Dimension::VoltageRatio,
            Dimension::Force,
            Dimension::Mass,
            Dimension::Pressure,
        ],
        "reading_unit = \"count\"",
    )?;
    let listed = listed(&table, files)?;
    let weights = weights(root, unit, &gravity)?;
    let degree = match root.table("fit")? {
        Some(fit) => {
            fit.only(&["degree"])?;
            let degree = fit.counting("degree")?;
            if let Some(found) = &degree
                && found.value > 3
            {
                let problem = Problem::new(format!("fit.degree is {}", found.value))
                    .expected("1, 2 or 3")
                    .remedy("write degree = 1");
                return Err(fit.problem_at(&found.span, problem));
            }
            degree.map(|found| found.value)
        }
        None => None,
    };
    let measures = if unit.dimension == Dimension::Pressure { Dimension::Pressure } else { Dimension::Force };
    let points = Points {
        name: cell.name.clone(),
        capacity_n: capacity_of(cell, measures),
        listed,
        unit,
        reading_unit,
        gravity,
        density_kg_m3: weights.density_kg_m3,
        tolerance: weights.tolerance,
        weight_errors: weights.errors,
        weight_errors_stated: weights.errors_stated,
        degree,
    };
    points::calibrate(&points).map_err(|problem| table.problem(problem))
}

fn unit_among(table: &Table<'_>, key: &str, dimensions: &[Dimension], remedy: &str) -> Result<Unit, Problem> {
    let allowed: Vec<&str> =
        quantity::all().iter().filter(|unit| dimensions.contains(&unit.dimension)).map(|unit| unit.symbol).collect();
    let expected = format!("one of: {}", allowed.join(", "));
    let Some(found) = table.text(key)? else {
        return Err(table.missing(key, &expected, &format!("write {remedy} under [{}]", table.name)));
    };
    match quantity::find(&found.value) {
        Some(unit) if dimensions.contains(&unit.dimension) => Ok(unit),
        Some(unit) => {
            let problem = Problem::new(format!("{} is {}, {}", table.full(key), unit.symbol, unit.dimension.words()));
            Err(table.problem_at(&found.span, problem.expected(expected).remedy(format!("write {remedy}"))))
        }
        None => Err(table.problem_at(&found.span, quantity::unknown_unit(&found.value, None).expected(expected))),
    }
}

fn listed(table: &Table<'_>, files: &mut Vec<PathBuf>) -> Result<Vec<Listed>, Problem> {
    let mut listed = Vec::new();
    for (key, rising) in [("up", true), ("down", false)] {
        for found in table.pairs(key)?.unwrap_or_default() {
            let [load, reading] = found.value;
            listed.push(Listed { load, reading, rising });
        }
    }
    match table.text("file")? {
        Some(file) if listed.is_empty() => {
            let path = table.document().resolve(&file.value);
            listed = table::read(&Document::read(&path)?)?;
            files.push(path);
        }
        Some(file) => {
            let problem = Problem::new("[points] holds points and names a file of them")
                .expected("one of the two")
                .remedy("remove file, or up and down");
            return Err(table.problem_at(&file.span, problem));
        }
        None => {}
    }
    if listed.len() < 2 {
        return Err(table.problem(
            Problem::new(format!("[points] holds {} point(s)", listed.len()))
                .expected("at least two loads with their readings")
                .remedy("write up = [[0, 8123.4], [5, 52311.0], [10, 96490.2]]: load, reading"),
        ));
    }
    Ok(listed)
}

struct Weights {
    density_kg_m3: f64,
    tolerance: Option<Tolerance>,
    errors: WeightErrors,
    errors_stated: bool,
}

fn weights(root: &Table<'_>, unit: Unit, gravity: &Gravity) -> Result<Weights, Problem> {
    let mut weights = Weights {
        density_kg_m3: CONVENTIONAL_DENSITY_KG_M3,
        tolerance: None,
        errors: WeightErrors::Each,
        errors_stated: false,
    };
    let Some(table) = root.table("weights")? else { return Ok(weights) };
    table.only(&["density", "tolerance", "errors"])?;
    if let Some(density) = table.positive("density", Dimension::Density)? {
        if density.value < 500.0 || density.value > 25000.0 {
            let problem = Problem::new(format!("weights.density is {} kg/m3", density.value))
                .expected("the density of a solid weight, 500 to 25000 kg/m3")
                .remedy("write density = \"7850 kg/m3\" for steel, or leave it out for conventional masses");
            return Err(table.problem_with("density", problem));
        }
        weights.density_kg_m3 = density.value;
    }
    let kinds = match unit.dimension {
        Dimension::Mass => vec![Dimension::Ratio, Dimension::Mass, Dimension::Force],
        other => vec![Dimension::Ratio, other],
    };
    if let Some(found) = table.quantity_among("tolerance", &kinds)? {
        let (measured, written) = found.value;
        let negative = measured.value < 0.0 || measured.standard_uncertainty.is_some();
        if negative || written.dimension == Dimension::Ratio && measured.value >= 1.0 {
            let problem = Problem::new("weights.tolerance is not a half-width")
                .expected("limits of a weight's error: the half-width alone, from 0 up")
                .remedy("write tolerance = \"0.05 %\", or \"0.5 g\"");
            return Err(table.problem_at(&found.span, problem));
        }
        let in_air = gravity.value_m_s2 * (1.0 - AIR_DENSITY_KG_M3 / weights.density_kg_m3);
        weights.tolerance = Some(match written.dimension {
            Dimension::Ratio => Tolerance::Relative(measured.value),
            Dimension::Mass => Tolerance::ForceN(measured.value * in_air),
            _ => Tolerance::ForceN(measured.value),
        });
    }
    let words = [("each", WeightErrors::Each), ("stack", WeightErrors::Stack), ("common", WeightErrors::Common)];
    if let Some(errors) = table.word("errors", &words)? {
        weights.errors = errors;
        weights.errors_stated = errors != WeightErrors::Each;
    }
    Ok(weights)
}
