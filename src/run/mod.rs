//! The firing as its run.toml describes it.

pub mod document;
mod gravity;
mod parse;

pub use gravity::{Gravity, gravity, normal_gravity, read_site};
pub use parse::{check_id, read, read_text};

use crate::quantity::{Measured, Unit};
use std::path::PathBuf;

/// A column by header name or by 1-based number.
#[derive(Debug, Clone, PartialEq)]
pub enum ColumnRef {
    Name(String),
    Number(usize),
}

/// `time = { column = ..., unit = ... }`.
#[derive(Debug, Clone, PartialEq)]
pub struct TimeSpec {
    pub column: Option<ColumnRef>,
    /// `s`, `ms`, `us`, `min`; `None`: inferred from the log.
    pub unit: Option<Unit>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct LogSpec {
    /// Resolved against the folder of run.toml.
    pub file: PathBuf,
    pub time: Option<TimeSpec>,
    pub rate_hz: Option<Measured>,
    /// Relative limits of the logger's clock error, as a fraction.
    pub clock_tolerance: Option<Measured>,
    /// The converter averages over this long before each stamp.
    pub averaging_s: Option<f64>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Role {
    Force,
    Pressure,
    Ignition,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PressureReference {
    Gauge,
    Absolute,
}

#[derive(Debug, Clone, PartialEq)]
pub struct ChannelSpec {
    pub role: Role,
    pub column: ColumnRef,
    /// `None`: the unit the log itself gives (header or units row), else refused.
    pub unit: Option<Unit>,
    /// Resolved against the folder of run.toml.
    pub calibration: Option<PathBuf>,
    /// Relative limits, of reading, as a fraction.
    pub accuracy: Option<f64>,
    pub reference: Option<PressureReference>,
    /// Line of run.toml, for messages.
    pub line: Option<u64>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Orientation {
    Horizontal,
    /// Motor weight adds to the reading.
    NozzleUp,
    /// Motor weight takes away from the reading.
    NozzleDown,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct StandSpec {
    pub orientation: Option<Orientation>,
    pub natural_frequency_hz: Option<Measured>,
    pub damping_ratio: Option<Measured>,
    pub force_ratio: Option<Measured>,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct SiteSpec {
    pub gravity_m_s2: Option<Measured>,
    pub latitude_rad: Option<Measured>,
    pub height_m: Option<Measured>,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct MotorSpec {
    pub propellant_mass_kg: Option<Measured>,
    pub mass_before_kg: Option<Measured>,
    pub mass_after_kg: Option<Measured>,
    pub throat_diameter_m: Option<Measured>,
    pub throat_diameter_after_m: Option<Measured>,
    pub web_thickness_m: Option<Measured>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct CheckLoadSpec {
    pub mass_kg: Measured,
    pub from_s: f64,
    pub to_s: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Lowpass {
    Off,
    CutoffHz(f64),
}

/// A person's overrides; all log time.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct ReductionSpec {
    pub burn_start_s: Option<f64>,
    pub burn_end_s: Option<f64>,
    /// Which burst is the burn, counted from 1.
    pub burst: Option<usize>,
    pub lowpass: Option<Lowpass>,
}

/// Everything run.toml says.
#[derive(Debug, Clone, PartialEq)]
pub struct RunSpec {
    /// The run.toml; `None` for a bare log.
    pub path: Option<PathBuf>,
    pub id: String,
    pub pour: Option<String>,
    pub date: Option<String>,
    pub log: LogSpec,
    pub channels: Vec<ChannelSpec>,
    pub stand: StandSpec,
    pub site: SiteSpec,
    pub motor: MotorSpec,
    /// As written, for the record: name to text, SI value and UCUM unit.
    pub conditions: serde_json::Map<String, serde_json::Value>,
    pub tags: serde_json::Map<String, serde_json::Value>,
    pub check_loads: Vec<CheckLoadSpec>,
    pub reduction: ReductionSpec,
}
