//! What can be written on the command line.

use crate::report::units::Units;
use clap::{Args, Parser, Subcommand, ValueEnum};
use std::path::PathBuf;

/// Reduces static-fire logs of solid rocket motors to a trusted thrust curve and motor figures with uncertainty.
///
/// A measured motor is not a certified one. Local law, the range's safety code and licensed practice rule.
#[derive(Debug, Parser)]
#[command(name = "burntally", version, arg_required_else_help = true)]
pub struct Arguments {
    #[command(subcommand)]
    pub command: Command,
}

#[derive(Debug, Subcommand)]
pub enum Command {
    /// Reduce one or several firings to thrust curve and figures
    #[command(
        after_help = "Exit status: 0 done, 1 refused (that run wrote nothing), 2 wrong usage, 3 done but a check failed."
    )]
    Reduce(ReduceArguments),
    /// Hold reduced firings against each other: spread, differences, odd ones, the next motor
    #[command(
        after_help = "Exit status: 0 done, 1 refused (nothing written), 2 wrong usage, 3 done but a run was set aside."
    )]
    Compare(CompareArguments),
    /// Check rail, thrust-to-weight and stability of a vehicle with a measured thrust
    #[command(
        after_help = "Exit status: 0 go by its limits, 1 refused (nothing written), 2 wrong usage, 3 a limit is not met.\n\nA go says that the limits named were met on paper, and nothing more. Local law and the range's safety code rule."
    )]
    Preflight(PreflightArguments),
    /// Fit a load cell's calibration and draw its residuals
    Calibrate(CalibrateArguments),
    /// Say what is in a log; writes nothing
    Inspect(InspectArguments),
    /// Start a run folder with a commented run.toml
    New(NewArguments),
}

/// Flags of every command.
#[derive(Debug, Clone, Copy, Args)]
pub struct Common {
    /// The result as JSON on standard output, nothing else there
    #[arg(long)]
    pub json: bool,
    /// Say nothing but what is refused
    #[arg(long, short)]
    pub quiet: bool,
    /// Units a person reads; result.json and the tables stay SI
    #[arg(long, value_enum, default_value_t = UnitsArgument::Si)]
    pub units: UnitsArgument,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum UnitsArgument {
    /// newtons, seconds, kilograms
    Si,
    /// pounds-force, seconds, pounds
    Us,
}

impl From<UnitsArgument> for Units {
    fn from(argument: UnitsArgument) -> Self {
        match argument {
            UnitsArgument::Si => Units::Si,
            UnitsArgument::Us => Units::Us,
        }
    }
}

#[derive(Debug, Args)]
pub struct ReduceArguments {
    /// A run.toml, a folder holding one (or many, searched), or a bare log
    #[arg(required = true, value_name = "RUN")]
    pub runs: Vec<PathBuf>,
    /// Folder for the results; each run gets a folder of its own in it
    #[arg(long, value_name = "DIR", default_value = "reduced")]
    pub out: PathBuf,
    /// Calibration of a bare log
    #[arg(long, value_name = "FILE")]
    pub calibration: Option<PathBuf>,
    /// Unit of a bare log's readings, such as count, mV/V, N or lbf
    #[arg(long, value_name = "UNIT")]
    pub unit: Option<String>,
    /// Numbers and tables only: no pictures and no page
    #[arg(long)]
    pub no_pictures: bool,
    /// Most rows of the thrust table
    #[arg(long, value_name = "ROWS", default_value_t = 400, value_parser = clap::value_parser!(u32).range(5..=1_000_000))]
    pub table_rows: u32,
    #[command(flatten)]
    pub common: Common,
}

#[derive(Debug, Args)]
pub struct CompareArguments {
    /// A reduced run's folder, its result.json, or a folder of such
    #[arg(required = true, value_name = "RESULT")]
    pub results: Vec<PathBuf>,
    /// Folder for the comparison
    #[arg(long, value_name = "DIR", default_value = "comparison")]
    pub out: PathBuf,
    /// What makes a group: pour, date, tags.NAME or conditions.NAME
    #[arg(long, value_name = "KEY", default_value = "pour")]
    pub by: String,
    /// Leave this run out; it is said in the result
    #[arg(long, value_name = "ID")]
    pub leave_out: Vec<String>,
    /// Margin within which two groups count as alike, % of the mean
    #[arg(long, value_name = "PERCENT", default_value_t = 5.0, value_parser = positive)]
    pub alike: f64,
    /// Average runs that failed a check, too
    #[arg(long)]
    pub with_failed: bool,
    /// Compare curves at equal shares of the burn time
    #[arg(long)]
    pub by_burn_time: bool,
    /// Numbers and tables only: no picture
    #[arg(long)]
    pub no_pictures: bool,
    #[command(flatten)]
    pub common: Common,
}

#[derive(Debug, Args)]
pub struct PreflightArguments {
    /// The vehicle
    #[arg(value_name = "VEHICLE.toml")]
    pub vehicle: PathBuf,
    /// Measured thrust: a reduced run's folder, a thrust-table.csv, a plain CSV (seconds, newtons), or a comparison's folder
    #[arg(long, value_name = "SOURCE")]
    pub thrust: Option<PathBuf>,
    /// Group of a comparison
    #[arg(long, value_name = "NAME")]
    pub pour: Option<String>,
    /// A constant thrust beside the measured one, or instead, such as "150 N"
    #[arg(long, value_name = "THRUST")]
    pub assumed: Option<String>,
    /// Folder for the check
    #[arg(long, value_name = "DIR", default_value = "preflight")]
    pub out: PathBuf,
    /// Numbers only: no picture
    #[arg(long)]
    pub no_pictures: bool,
    #[command(flatten)]
    pub common: Common,
}

fn positive(text: &str) -> Result<f64, String> {
    let number: f64 = text.trim_end_matches('%').trim().parse().map_err(|_| format!("{text:?} is not a number"))?;
    if number.is_finite() && number > 0.0 { Ok(number) } else { Err("it must be above nil".into()) }
}

#[derive(Debug, Args)]
pub struct CalibrateArguments {
    /// The calibration file
    #[arg(value_name = "CAL.toml")]
    pub file: PathBuf,
    /// Folder for the results; `calibrated/` and the file's name without its ending, when absent
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Numbers only: no picture
    #[arg(long)]
    pub no_pictures: bool,
    #[command(flatten)]
    pub common: Common,
}

#[derive(Debug, Args)]
pub struct InspectArguments {
    /// The log
    pub log: PathBuf,
    #[command(flatten)]
    pub common: Common,
}

#[derive(Debug, Args)]
pub struct NewArguments {
    /// Folder of the run; made if it is not there
    pub dir: PathBuf,
    /// Log to fill the run.toml from
    #[arg(long)]
    pub log: Option<PathBuf>,
    #[command(flatten)]
    pub common: Common,
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_definitions_are_sound() {
        Arguments::command().debug_assert();
    }
}
