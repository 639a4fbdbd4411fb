//! Showing results: terminal table, CSV files, pictures, progress.
//!
//! Everything here reads the nouns and [`crate::quote::result`]; nothing computes a result.

mod fidelity;
pub mod figure_plot;
pub mod figures_csv;
pub mod overview_plot;
mod plot;
pub mod progress;
pub mod shots_csv;
pub mod table;
