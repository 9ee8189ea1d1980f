//! Bursts, the burn among them, its start and end by each definition.

pub mod crossings;
pub mod events;
pub mod tail;
