//! Impulse, thrust, times, class.

pub mod class;
pub mod integral;
