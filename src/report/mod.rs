//! Summary text, plots, page.

pub mod advice;
pub mod plot;
pub mod residuals;
pub mod units;

mod canvas;
