//! Readings of the force channels to one force record.

use super::Inputs;
use crate::calibration::Calibration;
use crate::log::Column;
use crate::problem::Problem;
use crate::run::{ColumnRef, Role};

/// One force channel: its column, its calibration and its force in N as the calibration reads it.
pub struct Channel<'a> {
    pub column: &'a Column,
    pub calibration: &'a Calibration,
    pub force_n: Vec<f64>,
}

/// The column a channel names.
pub fn column<'a>(inputs: &'a Inputs, reference: &ColumnRef) -> Result<&'a Column, Problem> {
    let found = match reference {
        ColumnRef::Number(n) => inputs.log.columns.iter().find(|c| c.number == *n),
        ColumnRef::Name(name) => inputs
            .log
            .columns
            .iter()
            .find(|c| c.name == *name)
            .or_else(|| inputs.log.columns.iter().find(|c| c.name.trim().eq_ignore_ascii_case(name.trim()))),
    };
    found.ok_or_else(|| {
        Problem::new(format!("the log has no column {reference:?}"))
            .expected(format!("one of: {}", inputs.log.available.join(", ")))
            .in_file(&inputs.run.log.file)
    })
}

/// All force channels, each turned into newtons.
pub fn channels(inputs: &Inputs) -> Result<Vec<Channel<'_>>, Problem> {
    let mut out = Vec::new();
    for (spec, calibration) in inputs.run.channels.iter().zip(&inputs.calibrations) {
        if spec.role != Role::Force {
            continue;
        }
        let column = column(inputs, &spec.column)?;
        let calibration = calibration.as_ref().ok_or_else(|| {
            Problem::new(format!("force channel {} has no calibration and no unit of force", column.name))
                .remedy("give `calibration = \"...\"` or `unit = \"N\"` in its [[channel]]")
        })?;
        let (low, high) =
            column.values.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(*v), h.max(*v)));
        calibration.check_monotonic(low, high).map_err(|p| p.in_file(&inputs.run.log.file))?;
        let force_n = column.values.iter().map(|r| calibration.force_n(*r)).collect::<Result<Vec<f64>, Problem>>()?;
        out.push(Channel { column, calibration, force_n });
    }
    if out.is_empty() {
        return Err(Problem::new("no force channel")
            .remedy("add a [[channel]] with role = \"force\"")
            .in_file(inputs.run.path.clone().unwrap_or_else(|| inputs.run.log.file.clone())));
    }
    Ok(out)
}

/// Sum of the channels, sample by sample.
pub fn total(channels: &[Channel<'_>]) -> Vec<f64> {
    let mut sum = channels.first().map(|c| c.force_n.clone()).unwrap_or_default();
    for channel in channels.iter().skip(1) {
        sum.iter_mut().zip(&channel.force_n).for_each(|(s, f)| *s += f);
    }
    sum
}
