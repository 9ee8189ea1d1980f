pub mod clipping;
pub mod glitch;
