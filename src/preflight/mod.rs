//! The check before a flight: rail, thrust-to-weight and stability with the measured thrust. Pure: same inputs, same numbers.

pub mod atmosphere;
pub mod pressure_centre;
pub mod rail;
pub mod vehicle;
