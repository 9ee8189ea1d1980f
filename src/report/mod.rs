//! Summary text, plots, page.

pub mod advice;
pub mod comparison_plot;
pub mod comparison_summary;
pub mod figures;
pub mod outputs;
pub mod page;
pub mod plot;
pub mod preflight_page;
pub mod preflight_plot;
pub mod preflight_summary;
pub mod residuals;
pub mod summary;
pub mod units;

mod canvas;
