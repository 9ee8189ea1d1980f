//! Units, quantity strings, a value with its uncertainty.

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
