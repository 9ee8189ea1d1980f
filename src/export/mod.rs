//! Thrust table, JSON, files that appear whole or not at all.

pub mod files;
pub mod json;
pub mod thrust_table;

#[cfg(test)]
pub(crate) mod sample;
