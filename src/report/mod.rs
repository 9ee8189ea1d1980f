//! Summary text, plots, page.

pub mod advice;
pub mod figures;
pub mod outputs;
pub mod page;
pub mod plot;
pub mod residuals;
pub mod summary;
pub mod units;

mod canvas;
