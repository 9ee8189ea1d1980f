//! How far each figure may be off, and what it owes that to.

pub mod distribution;
pub mod effects;
pub mod improvement;
pub mod monte_carlo;
pub mod propagation;
pub mod statistics;
