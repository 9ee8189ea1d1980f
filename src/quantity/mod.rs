//! Units, quantity strings, a value with its uncertainty.

mod parse;
mod units;

pub use parse::{parse, parse_any, parse_number};
pub use units::{NEWTONS, STANDARD_GRAVITY_M_S2, STANDARD_GRAVITY_SOURCE, all, find, nearest, unknown_unit};

/// What a unit measures.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Dimension {
    Force,
    Mass,
    Length,
    Time,
    /// Bridge output as a voltage.
    Voltage,
    /// Bridge output per volt of excitation (mV/V).
    VoltageRatio,
    /// Raw converter counts.
    Count,
    ForcePerCount,
    ForcePerVolt,
    ForcePerVoltageRatio,
    /// Slope of an instrument adjusted with weights; times gravity it is a force per count.
    MassPerCount,
    MassPerVolt,
    MassPerVoltageRatio,
    PressurePerCount,
    PressurePerVolt,
    PressurePerVoltageRatio,
    Pressure,
    Temperature,
    Angle,
    Speed,
    Acceleration,
    Density,
    Frequency,
    Ratio,
}

/// A unit: `value_si = value * factor + offset`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Unit {
    /// As people write it: `lbf`, `mV/V`, `degC`.
    pub symbol: &'static str,
    pub dimension: Dimension,
    pub factor: f64,
    pub offset: f64,
}

/// A value in SI base units with what is known of its error.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Measured {
    /// SI.
    pub value: f64,
    /// Standard uncertainty, SI; `None` when nothing was stated.
    pub standard_uncertainty: Option<f64>,
    /// Half-width of the stated rectangular limits, SI, when limits (±) were given.
    pub limits: Option<f64>,
}

impl Dimension {
    /// UCUM code of the SI unit values of this dimension are kept in.
    pub fn ucum(self) -> &'static str {
        match self {
            Dimension::Force => "N",
            Dimension::Mass => "kg",
            Dimension::Length => "m",
            Dimension::Time => "s",
            Dimension::Voltage => "V",
            Dimension::VoltageRatio => "V/V",
            Dimension::Count => "{count}",
            Dimension::ForcePerCount => "N/{count}",
            Dimension::ForcePerVolt => "N/V",
            Dimension::ForcePerVoltageRatio => "N/(V/V)",
            Dimension::MassPerCount => "kg/{count}",
            Dimension::MassPerVolt => "kg/V",
            Dimension::MassPerVoltageRatio => "kg/(V/V)",
            Dimension::PressurePerCount => "Pa/{count}",
            Dimension::PressurePerVolt => "Pa/V",
            Dimension::PressurePerVoltageRatio => "Pa/(V/V)",
            Dimension::Pressure => "Pa",
            Dimension::Temperature => "K",
            Dimension::Angle => "rad",
            Dimension::Speed => "m/s",
            Dimension::Acceleration => "m/s2",
            Dimension::Density => "kg/m3",
            Dimension::Frequency => "Hz",
            Dimension::Ratio => "1",
        }
    }

    /// In plain words with its article, for messages.
    pub fn words(self) -> &'static str {
        match self {
            Dimension::Force => "a force",
            Dimension::Mass => "a mass",
            Dimension::Length => "a length",
            Dimension::Time => "a time",
            Dimension::Voltage => "a voltage",
            Dimension::VoltageRatio => "a bridge output per volt",
            Dimension::Count => "a number of counts",
            Dimension::ForcePerCount => "a force per count",
            Dimension::ForcePerVolt => "a force per volt",
            Dimension::ForcePerVoltageRatio => "a force per mV/V",
            Dimension::MassPerCount => "a mass per count",
            Dimension::MassPerVolt => "a mass per volt",
            Dimension::MassPerVoltageRatio => "a mass per mV/V",
            Dimension::PressurePerCount => "a pressure per count",
            Dimension::PressurePerVolt => "a pressure per volt",
            Dimension::PressurePerVoltageRatio => "a pressure per mV/V",
            Dimension::Pressure => "a pressure",
            Dimension::Temperature => "a temperature",
            Dimension::Angle => "an angle",
            Dimension::Speed => "a speed",
            Dimension::Acceleration => "an acceleration",
            Dimension::Density => "a density",
            Dimension::Frequency => "a frequency",
            Dimension::Ratio => "a plain ratio",
        }
    }

    /// How a quantity of this dimension is written, for messages.
    pub fn example(self) -> &'static str {
        match self {
            Dimension::Force => "\"150 N\"",
            Dimension::Mass => "\"412.3 ± 0.5 g\"",
            Dimension::Length => "\"9.5 mm\"",
            Dimension::Time => "\"12.5 ms\"",
            Dimension::Voltage => "\"5 V\"",
            Dimension::VoltageRatio => "\"2.0 mV/V\"",
            Dimension::Count => "\"8123 count\"",
            Dimension::ForcePerCount => "\"0.000113 N/count\"",
            Dimension::ForcePerVolt => "\"200 N/V\"",
            Dimension::ForcePerVoltageRatio => "\"1000 N/(mV/V)\"",
            Dimension::MassPerCount => "\"0.0115 g/count\"",
            Dimension::MassPerVolt => "\"20 kg/V\"",
            Dimension::MassPerVoltageRatio => "\"100 kg/(mV/V)\"",
            Dimension::PressurePerCount => "\"120 Pa/count\"",
            Dimension::PressurePerVolt => "\"20 bar/V\"",
            Dimension::PressurePerVoltageRatio => "\"50 bar/(mV/V)\"",
            Dimension::Pressure => "\"978 hPa\"",
            Dimension::Temperature => "\"21 degC\"",
            Dimension::Angle => "\"44.7 deg\"",
            Dimension::Speed => "\"4 m/s\"",
            Dimension::Acceleration => "\"9.8017 m/s2\"",
            Dimension::Density => "\"7850 kg/m3\"",
            Dimension::Frequency => "\"80 Hz\"",
            Dimension::Ratio => "\"0.5 %\"",
        }
    }

    /// Whether a value below zero is nonsense.
    pub fn never_negative(self) -> bool {
        matches!(self, Dimension::Mass | Dimension::Density | Dimension::Frequency | Dimension::Temperature)
    }
}

impl Measured {
    /// A value of which nothing more is known.
    pub fn of(value: f64) -> Self {
        Measured { value, standard_uncertainty: None, limits: None }
    }

    /// A value within rectangular limits: u = a/√3 (JCGM 100:2008, 4.3.7).
    pub fn within(value: f64, limits: f64) -> Self {
        Measured { value, standard_uncertainty: Some(limits / 3f64.sqrt()), limits: Some(limits) }
    }
}
