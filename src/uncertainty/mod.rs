//! How far each figure may be off, and what it owes that to.

pub mod effects;
pub mod statistics;
