//! Points, constants or data sheet to a fitted curve; readings to newtons.

mod curve;
mod degree;
mod file;
mod file_points;
mod fit;
mod forms;
mod noise;
mod plausible;
mod points;
mod report;
mod table;
mod weights;

pub use file::{Calibrated, load, load_text};
pub use forms::scaled_identity;
pub use report::{CalibrationPoint, CalibrationReport};

use crate::quantity::{Dimension, Unit};

/// What an error of the force scale comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum ScaleSource {
    /// Scatter of the calibration points about the fit.
    Fit,
    /// Errors of the weights.
    Weights,
    /// Gravity where the weights hung, or where the instrument is used.
    Gravity,
    /// Air buoyancy on the weights.
    Buoyancy,
    /// What the next degree could add beyond the heaviest weight.
    Extrapolation,
    /// Stated slope uncertainty, data-sheet accuracy or the channel's stated accuracy.
    Stated,
}

/// One independent way in which the whole curve may be off: what one standard uncertainty of it does to the force.
#[derive(Debug, Clone, PartialEq)]
pub struct ErrorDirection {
    pub source: ScaleSource,
    pub shape: ErrorShape,
}

#[derive(Debug, Clone, PartialEq)]
pub enum ErrorShape {
    /// Change of the response polynomial's coefficients (reading as polynomial of force, lowest power first).
    Coefficients(Vec<f64>),
    /// Relative change of force.
    Relative(f64),
    /// Change of force that is nil while |F| is up to `from_n` and is `coefficient` |F|^(degree − 1) (|F| − from_n)
    /// beyond it, with the sign of F; the coefficient in N per N^degree. Against `side` (1: only forces above nil were calibrated,
    /// -1: only below, 0: both) nothing of the curve was seen, and a bend that the line hides on one side counts from nil on,
    /// `coefficient` |F|^(degree − 1) (|F| + from_n).
    Beyond { from_n: f64, degree: usize, coefficient: f64, side: f64 },
}

/// Readings to newtons; of a pressure transducer, to pascals, and every `_n` below is then in Pa.
#[derive(Debug, Clone, PartialEq)]
pub struct Calibration {
    /// For messages: the cell's name or the channel's unit.
    pub name: String,
    /// The unit readings come in.
    pub reading_unit: Unit,
    /// Reading as polynomial of force in newtons, lowest power first.
    pub coefficients: Vec<f64>,
    /// Forces the calibration covers, N; `None`: not bounded by points.
    pub range_n: Option<[f64; 2]>,
    pub capacity_n: Option<f64>,
    /// Independent errors of the scale; `None`: nothing is known of them.
    pub errors: Option<Vec<ErrorDirection>>,
    /// Force, or Pressure.
    pub measures: Dimension,
    /// Degrees of freedom behind the `Fit` directions; `None`: no scatter to judge by.
    pub fit_degrees_of_freedom: Option<f64>,
    /// What was found, chosen or assumed, one plain sentence each.
    pub findings: Vec<String>,
    /// What makes the calibration less than it should be, one plain sentence each; not empty: a caution on its quality.
    pub cautions: Vec<String>,
}
