//! Points to a fitted curve with everything that may be wrong with it.

use super::degree::{self, Choice, Evidence};
use super::fit::{self, Fit, monotonic_within, slope, unscale_matrix, value};
use super::noise::noise_variance;
use super::plausible;
use super::report::{CalibrationPoint, CalibrationReport, quality};
use super::weights::{self, Tolerance, WeightErrors, levels};
use super::{Calibrated, Calibration, ErrorDirection, ErrorShape, ScaleSource};
use crate::problem::Problem;
use crate::quantity::{Dimension, Unit};
use crate::run::Gravity;
use crate::uncertainty::propagation;
use nalgebra::{DMatrix, DVector};

/// One point as listed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Listed {
    pub load: f64,
    pub reading: f64,
    pub rising: bool,
}

/// Everything a calibration by points says.
#[derive(Debug, Clone)]
pub(super) struct Points {
    pub name: String,
    pub capacity_n: Option<f64>,
    pub listed: Vec<Listed>,
    /// Of the loads: mass, force or pressure.
    pub unit: Unit,
    pub reading_unit: Unit,
    pub gravity: Gravity,
    pub density_kg_m3: f64,
    pub tolerance: Option<Tolerance>,
    pub weight_errors: WeightErrors,
    /// The file says itself how the errors hang together.
    pub weight_errors_stated: bool,
    pub degree: Option<usize>,
}

impl Points {
    fn by_mass(&self) -> bool {
        self.unit.dimension == Dimension::Mass
    }

    fn force_n(&self, load: f64) -> f64 {
        if self.by_mass() {
            weights::force_n(load * self.unit.factor, self.gravity.value_m_s2, self.density_kg_m3)
        } else {
            load * self.unit.factor
        }
    }
}

/// Fits the points.
///
/// # Errors
/// Fewer than two distinct loads, too few for the degree asked for, readings that do not change with the load.
pub(super) fn calibrate(points: &Points) -> Result<Calibrated, Problem> {
    let forces_n: Vec<f64> = points.listed.iter().map(|point| points.force_n(point.load)).collect();
    let readings: Vec<f64> = points.listed.iter().map(|point| point.reading).collect();
    if let Some(words) = plausible::beyond_belief(&forces_n, points.capacity_n, points.unit.dimension) {
        return Err(Problem::new(words)
            .expected("loads that the cell can carry")
            .remedy("check the unit of the loads, and that load and reading of each point are not swapped"));
    }
    let (distinct, _) = levels(&forces_n);
    let (Some(&low), Some(&high)) = (distinct.first(), distinct.last()) else {
        return Err(Problem::new("there are no points").expected("at least two loads with their readings"));
    };
    let weight_errors = match &points.tolerance {
        Some(tolerance) => weights::independent_errors(&forces_n, tolerance, points.weight_errors),
        None => Vec::new(),
    };
    let evidence = Evidence { forces_n: &forces_n, readings: &readings, weight_errors: &weight_errors };
    let choice = chosen(points, evidence, &distinct)?;
    let coefficients = choice.fit.coefficients();
    let span = (value(&coefficients, high) - value(&coefficients, low)).abs();
    let largest = readings.iter().fold(0.0f64, |largest, reading| largest.max(reading.abs()));
    if span <= 1e-12 * largest || !span.is_finite() || !coefficients.iter().all(|coefficient| coefficient.is_finite()) {
        return Err(Problem::new("the readings do not change with the load")
            .expected("readings that follow the weights")
            .remedy("check the columns of the points and their unit"));
    }
    if !monotonic_within(&coefficients, low, high) {
        return Err(Problem::new(format!("a curve of degree {} turns over within the weights", choice.degree))
            .expected("readings that rise or fall throughout")
            .remedy("check the points for a swapped pair, or force degree = 1 under [fit]"));
    }
    let changes = coefficient_changes(&choice, evidence);
    let noise = noise_variance(&choice.fit, evidence);
    let mut calibration = Calibration {
        name: points.name.clone(),
        reading_unit: points.reading_unit,
        coefficients: coefficients.clone(),
        range_n: Some([low, high]),
        capacity_n: points.capacity_n,
        errors: None,
        measures: if points.unit.dimension == Dimension::Pressure { Dimension::Pressure } else { Dimension::Force },
        fit_degrees_of_freedom: (choice.fit.dof > 0).then_some(choice.fit.dof as f64),
        findings: vec![choice.reason.clone()],
        cautions: Vec::new(),
    };
    let mut errors = Vec::new();
    if let Some(noise) = noise {
        if noise > 0.0 {
            push_directions(&mut errors, ScaleSource::Fit, &(&choice.fit.inverse * noise), &choice.fit);
        } else {
            calibration.findings.push(
                "the points scatter no more than the weights' tolerance makes them: nothing is added for scatter"
                    .into(),
            );
        }
    }
    if let Some(suspected) = &choice.suspected {
        calibration
            .findings
            .push("curvature is suspected but not established: it counts as an error of the curve".into());
        errors.push(ErrorDirection { source: ScaleSource::Fit, shape: ErrorShape::Coefficients(suspected.clone()) });
    }
    match (&points.tolerance, points.weight_errors) {
        (Some(Tolerance::Relative(relative)), WeightErrors::Common) => {
            let size = relative / 3f64.sqrt();
            errors.push(ErrorDirection { source: ScaleSource::Weights, shape: ErrorShape::Relative(size) });
        }
        // Each weight by itself: its limits are then the source's own.
        _ => errors.extend(changes.iter().map(|change| ErrorDirection {
            source: ScaleSource::Weights,
            shape: ErrorShape::Coefficients(choice.fit.unscale(change)),
        })),
    }
    if points.by_mass() {
        let gravity = points.gravity.standard_uncertainty / points.gravity.value_m_s2;
        errors.push(ErrorDirection { source: ScaleSource::Gravity, shape: ErrorShape::Relative(gravity) });
        let buoyancy = weights::buoyancy_relative(points.density_kg_m3);
        errors.push(ErrorDirection { source: ScaleSource::Buoyancy, shape: ErrorShape::Relative(buoyancy) });
        calibration.findings.push(format!(
            "weights times gravity {:.5} m/s2 ({}), less air buoyancy",
            points.gravity.value_m_s2, points.gravity.source
        ));
    }
    let side = f64::from(i8::from(low >= 0.0) - i8::from(high <= 0.0));
    match extrapolation(evidence, &choice, low.abs().max(high.abs()), side) {
        Some(direction) => errors.push(direction),
        None => calibration
            .cautions
            .push("too few loads to say how far the curve may bend beyond the heaviest weight".into()),
    }
    judge(points, &mut calibration, noise.is_some(), distinct.len());
    let slips = &mut calibration.cautions;
    slips.extend(plausible::of_capacity(&forces_n, points.capacity_n, calibration.measures.ucum()));
    if let Some((at, share)) = plausible::odd_point(&forces_n, &readings) {
        slips.push(format!(
            "point {} (load {}, reading {}) lies {:.1} % of the span off the line through all others: mistyped?",
            at + 1,
            points.listed[at].load,
            points.listed[at].reading,
            100.0 * share
        ));
    }
    // scatter alone is an answer only where every weight errs on its own: then it shows in the scatter
    let known = noise.is_some() && !points.weight_errors_stated || points.tolerance.is_some();
    calibration.errors = known.then_some(errors);

    let found = quality(&forces_n, &readings, &points.listed.iter().map(|point| point.rising).collect::<Vec<_>>());
    let report_points = points.listed.iter().zip(&forces_n).map(|(listed, force)| {
        let fitted = value(&coefficients, *force);
        let residual = listed.reading - fitted;
        CalibrationPoint {
            listed: listed.load,
            force_n: *force,
            reading: listed.reading,
            direction: if listed.rising { "up" } else { "down" }.to_string(),
            fitted,
            residual,
            residual_n: residual / slope(&coefficients, *force),
        }
    });
    let report = CalibrationReport {
        name: points.name.clone(),
        force_unit: calibration.measures.ucum().to_string(),
        degree: choice.degree,
        reason: choice.reason.clone(),
        coefficients: coefficients.clone(),
        covariance: choice.fit.residual_variance().map(|variance| choice.fit.covariance(variance)),
        residual_standard_deviation: choice.fit.residual_variance().map(f64::sqrt),
        residual_degrees_of_freedom: choice.fit.dof,
        weights_covariance: points
            .tolerance
            .map(|_| unscale_matrix(&gram(&changes, choice.degree + 1), choice.fit.scale_n)),
        noise_standard_deviation: noise.map(f64::sqrt),
        reading_unit: points.reading_unit.symbol.to_string(),
        nonlinearity_percent: found.nonlinearity_percent,
        hysteresis_percent: found.hysteresis_percent,
        repeatability_percent: found.repeatability_percent,
        range_n: calibration.range_n,
        capacity_n: points.capacity_n,
        gravity_m_s2: points.by_mass().then_some(points.gravity.value_m_s2),
        points: report_points.collect(),
        findings: calibration.findings.clone(),
        cautions: calibration.cautions.clone(),
    };
    Ok(Calibrated { calibration, report, files: Vec::new() })
}

fn chosen(points: &Points, evidence: Evidence<'_>, distinct: &[f64]) -> Result<Choice, Problem> {
    let too_few = |degree: usize| {
        Problem::new(format!("{} distinct loads cannot carry a curve of degree {degree}", distinct.len()))
            .expected(format!("at least {} distinct loads", degree + 1))
            .remedy("hang more weights, from nothing up to the thrust expected")
    };
    match points.degree {
        None => degree::choose(evidence).ok_or_else(|| too_few(1)),
        Some(degree) => {
            if distinct.len() < degree + 1 {
                return Err(too_few(degree));
            }
            let fit = fit::fit(evidence.forces_n, evidence.readings, degree).ok_or_else(|| too_few(degree))?;
            Ok(Choice { degree, fit, reason: format!("degree {degree}, as asked for under [fit]"), suspected: None })
        }
    }
}

/// What one standard uncertainty of each independent error of the weights does to the scaled coefficients: the forces
/// are perturbed and the curve is fitted again.
fn coefficient_changes(choice: &Choice, evidence: Evidence<'_>) -> Vec<DVector<f64>> {
    let base = choice.fit.coefficients();
    let rescale = |coefficients: Vec<f64>| {
        let change = coefficients.iter().zip(&base).enumerate();
        DVector::from_iterator(
            base.len(),
            change.map(|(power, (moved, base))| (moved - base) * choice.fit.scale_n.powi(power as i32)),
        )
    };
    let refit = |shift: &Vec<f64>| {
        let forces: Vec<f64> = evidence.forces_n.iter().zip(shift).map(|(force, shift)| force + shift).collect();
        fit::fit(&forces, evidence.readings, choice.degree)
    };
    evidence.weight_errors.iter().filter_map(refit).map(|moved| rescale(moved.coefficients())).collect()
}

/// Covariance that independent changes of one standard uncertainty each add up to.
fn gram(changes: &[DVector<f64>], terms: usize) -> DMatrix<f64> {
    changes.iter().fold(DMatrix::zeros(terms, terms), |sum, change| sum + change * change.transpose())
}

/// Independent directions of a covariance in the scaled coefficients.
fn push_directions(errors: &mut Vec<ErrorDirection>, source: ScaleSource, covariance: &DMatrix<f64>, fit: &Fit) {
    errors.extend(propagation::directions(covariance).into_iter().map(|direction| ErrorDirection {
        source,
        shape: ErrorShape::Coefficients(fit.unscale(&DVector::from_vec(direction))),
    }));
}

/// What the next degree could add beyond the heaviest weight, or on the side where no weight was: its coefficient as the points give it, and its standard
/// error, as one standard uncertainty; `None` where the points cannot carry that degree.
fn extrapolation(evidence: Evidence<'_>, choice: &Choice, from_n: f64, side: f64) -> Option<ErrorDirection> {
    let degree = choice.degree + 1;
    let next = fit::fit(evidence.forces_n, evidence.readings, degree)?;
    let power = next.scale_n.powi(degree as i32);
    let coefficient = next.scaled[degree] / power;
    let error =
        next.residual_variance().map_or(0.0, |variance| (variance * next.inverse[(degree, degree)]).sqrt()) / power;
    let per_newton = slope(&choice.fit.coefficients(), from_n).abs();
    let coefficient = coefficient.hypot(error) / per_newton;
    coefficient.is_finite().then_some(ErrorDirection {
        source: ScaleSource::Extrapolation,
        shape: ErrorShape::Beyond { from_n, degree, coefficient, side },
    })
}

/// What makes the calibration less than it should be.
fn judge(points: &Points, calibration: &mut Calibration, has_scatter: bool, loads: usize) {
    let cautions = &mut calibration.cautions;
    if !has_scatter {
        cautions.push(
            "as many coefficients as points: nothing shows how well the readings repeat or how straight the cell is"
                .into(),
        );
    } else if loads < 3 {
        cautions.push("two loads only: nothing shows whether the cell is straight between them".into());
    }
    if points.tolerance.is_none() && points.by_mass() {
        cautions.push(if points.weight_errors_stated {
            "no tolerance is stated for the weights: their shared error, and so the scale error, is not known".into()
        } else {
            "no tolerance is stated for the weights: only what shows in the scatter of the points is counted"
                .to_string()
        });
    }
    if points.by_mass() && points.gravity.standard_uncertainty > 5e-4 * points.gravity.value_m_s2 {
        cautions.push(
            "gravity where the weights hung is poorly known: give gravity, or latitude and height, under [site]".into(),
        );
    }
}
