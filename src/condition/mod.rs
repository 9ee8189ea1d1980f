//! Baseline, repairs, clipping, spectrum, low-pass, weight of the motor.

pub mod adaptive;
pub mod averaging;
pub mod baseline;
pub mod clipping;
pub mod conditioned;
pub mod corner;
pub mod forward;
pub mod glitch;
pub mod ignition;
pub mod lowpass;
pub mod median;
pub mod peak;
pub mod quiet;
pub mod response;
pub mod ringing;
pub mod rise;
pub mod scatter;
pub mod spectrum;
