//! Composes the steps above into a firing. Pure: same inputs, same numbers.

use crate::calibration::Calibration;
use crate::firing::{Curves, Firing, InputFile};
use crate::log::Log;
use crate::problem::Problem;
use crate::run::RunSpec;

/// All that a reduction depends on, already read.
#[derive(Debug, Clone)]
pub struct Inputs {
    pub run: RunSpec,
    pub log: Log,
    /// One a channel of `run.channels`, in that order; `None` for channels that carry no force.
    pub calibrations: Vec<Option<Calibration>>,
    pub files: Vec<InputFile>,
}

/// A firing with the curves behind it.
#[derive(Debug, Clone)]
pub struct Reduction {
    pub firing: Firing,
    pub curves: Curves,
}

/// Reduces one firing.
///
/// # Errors
/// No burst found, a wrong column or unit, readings beyond what the calibration can invert.
pub fn reduce(inputs: &Inputs) -> Result<Reduction, Problem> {
    let _ = inputs;
    Err(Problem::new("not built"))
}
