//! burntally reduces the log of a static firing to a trusted thrust curve and motor figures with uncertainty.
//!
//! Data flows one way, from the top of this list to the bottom; `tests/architecture.rs` holds the modules to it.

/// One error type a person can act on.
pub mod problem;
/// Units, quantity strings, a value with its uncertainty.
pub mod quantity;
/// The firing as its run.toml describes it, and the gravity of its site.
pub mod run;
/// Bytes to columns to a time base, with every repair and drop counted.
pub mod log;
/// Points, constants or data sheet to a fitted curve; readings to newtons.
pub mod calibration;
/// Baseline, repairs, clipping, spectrum, low-pass, weight of the motor.
pub mod condition;
/// Bursts, the burn among them, its start and end by each definition.
pub mod burn;
/// Impulse, thrust, times, class.
pub mod measure;
/// The reduced firing: figures, checks, provenance; what result.json holds.
pub mod firing;
/// How far each figure may be off, and what it owes that to.
pub mod uncertainty;
/// Composes the steps above into a firing.
pub mod reduce;
/// What a run names, read into the inputs of its reduction.
pub mod load;
/// Several firings held against each other: spread, components, differences, odd ones, curves, trends.
pub mod compare;
/// The check before a flight: rail, thrust-to-weight, stability.
pub mod preflight;
/// Thrust table, JSON, files that appear whole or not at all.
pub mod export;
/// Summary text, plots, page.
pub mod report;
/// Arguments in, library call, words out.
pub mod cli;
