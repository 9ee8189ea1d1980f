//! burntally reduces the log of a static firing to a trusted thrust curve and motor figures with uncertainty.
//!
//! Data flows one way, from the top of this list to the bottom; `tests/architecture.rs` holds the modules to it.

/// Bursts, the burn among them, its start and end by each definition.
pub mod burn;
/// Points, constants or data sheet to a fitted curve; readings to newtons.
pub mod calibration;
/// Arguments in, library call, words out.
pub mod cli;
/// Baseline, repairs, clipping, spectrum, low-pass, weight of the motor.
pub mod condition;
/// Thrust table, JSON, files that appear whole or not at all.
pub mod export;
/// The reduced firing: figures, checks, provenance; what result.json holds.
pub mod firing;
/// What a run names, read into the inputs of its reduction.
pub mod load;
/// Bytes to columns to a time base, with every repair and drop counted.
pub mod log;
/// Impulse, thrust, times, class.
pub mod measure;
/// One error type a person can act on.
pub mod problem;
/// Units, quantity strings, a value with its uncertainty.
pub mod quantity;
/// Composes the steps above into a firing.
pub mod reduce;
/// Summary text, plots, page.
pub mod report;
/// The firing as its run.toml describes it, and the gravity of its site.
pub mod run;
/// How far each figure may be off, and what it owes that to.
pub mod uncertainty;
