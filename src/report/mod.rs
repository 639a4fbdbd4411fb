//! Showing results: terminal table, CSV files, pictures, progress.
//!
//! Everything here reads the nouns and [`crate::quote::result`]; nothing computes a result.

pub mod comparison;
mod fidelity;
pub mod figure_plot;
pub mod figures_csv;
pub mod html;
pub mod map_plot;
pub mod overview_plot;
mod plot;
pub mod progress;
pub mod remedies_csv;
mod remedy_text;
mod sample_text;
pub mod shots_csv;
pub mod stripes_csv;
pub mod stripes_plot;
pub mod sweep_csv;
pub mod sweep_plot;
pub mod sweep_text;
pub mod table;
pub mod text;
