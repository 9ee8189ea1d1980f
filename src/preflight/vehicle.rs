//! The vehicle as vehicle.toml describes it. Stations are metres from the nose tip.

use crate::quantity::Measured;

/// A number that is an input of the check, with what is known of its error.
pub type Input = Measured;

#[derive(Debug, Clone, PartialEq)]
pub struct Vehicle {
    pub name: String,
    /// Largest body diameter, one calibre.
    pub diameter_m: Input,
    /// Nose tip to aft end.
    pub length_m: Option<Input>,
    /// Without the motor.
    pub airframe_mass_kg: Input,
    pub airframe_cg_m: Input,
    pub cp_m: Option<Input>,
    pub shape: Option<Shape>,
    /// On the body cross-section; `None`: no drag on the rail.
    pub drag_coefficient: Option<f64>,
    pub motor: Motor,
    pub rail: Rail,
    pub site: Site,
    pub limits: Limits,
    /// What was not given and taken as something, one sentence each.
    pub defaults: Vec<String>,
}

/// Outline and fins.
#[derive(Debug, Clone, PartialEq)]
pub struct Shape {
    pub nose: Nose,
    pub transitions: Vec<Transition>,
    pub fins: Vec<Fins>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum NoseShape {
    Cone,
    Ogive,
    Paraboloid,
    Ellipsoid,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Nose {
    pub shape: NoseShape,
    pub length_m: f64,
    pub diameter_m: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Transition {
    pub station_m: f64,
    pub length_m: f64,
    pub diameter_ahead_m: f64,
    pub diameter_behind_m: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fins {
    pub count: usize,
    /// Root leading edge.
    pub station_m: f64,
    pub root_chord_m: f64,
    pub tip_chord_m: f64,
    pub exposed_semispan_m: f64,
    /// Root leading edge to tip leading edge, along the body.
    pub sweep_distance_m: f64,
    pub body_diameter_m: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Motor {
    /// Without propellant.
    pub hardware_mass_kg: Input,
    pub hardware_cg_m: Input,
    pub propellant_cg_m: Input,
    /// Where the thrust source does not carry it.
    pub propellant_mass_kg: Option<Input>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Rail {
    pub length_m: Input,
    /// Forward guide to aft guide.
    pub guide_spacing_m: Input,
    /// Height of the aft guide above the rail's foot at rest.
    pub foot_clearance_m: Input,
    /// Above the horizontal.
    pub elevation_rad: Input,
    pub friction_coefficient: f64,
}

impl Rail {
    /// Travel until the forward guide leaves.
    pub fn effective_length_m(&self) -> f64 {
        self.length_m.value - self.guide_spacing_m.value - self.foot_clearance_m.value
    }
}

#[derive(Debug, Clone, PartialEq)]
pub struct Site {
    pub gravity_m_s2: Input,
    pub gravity_source: String,
    pub temperature_k: Input,
    pub temperature_given: bool,
    pub height_m: f64,
    pub wind_m_s: Option<f64>,
}

/// What is held against; each with whether the person gave it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limits {
    pub rail_exit_speed_m_s: (f64, bool),
    pub thrust_to_weight: (f64, bool),
    pub stability_margin: (f64, bool),
}

/// 50 ft/s off the rail, five times weight, one calibre: common practice, no source.
impl Default for Limits {
    fn default() -> Self {
        Limits {
            rail_exit_speed_m_s: (50.0 * 0.3048, false),
            thrust_to_weight: (5.0, false),
            stability_margin: (1.0, false),
        }
    }
}
