//! Thrust table, JSON, files that appear whole or not at all.

pub mod comparison;
pub mod files;
pub mod json;
pub mod thrust_table;
pub mod thrust_table_read;
pub mod two_columns;

#[cfg(test)]
pub(crate) mod sample;
