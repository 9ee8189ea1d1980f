//! Baseline, repairs, clipping, spectrum, low-pass, weight of the motor.

pub mod adaptive;
pub mod averaging;
pub mod baseline;
pub mod conditioned;
pub mod lowpass;
pub mod peak;
pub mod quiet;
pub mod ringing;
pub mod spectrum;
pub mod clipping;
pub mod glitch;
