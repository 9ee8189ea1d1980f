//! Impulse, thrust, times, class, figures from pressure.

pub mod class;
pub mod integral;
pub mod pressure;
