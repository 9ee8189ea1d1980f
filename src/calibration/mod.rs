//! Points, constants or data sheet to a fitted curve; readings to newtons.

use crate::quantity::Unit;

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
    /// Change of force that is nil up to `from_n` and grows as the next power of force beyond it.
    Beyond { from_n: f64, degree: usize, coefficient: f64 },
}

/// Readings to newtons.
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
}
