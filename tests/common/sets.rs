//! The reference sets, and the jobs that are asked of their figures.

use shotwright::blur::Blur;
use shotwright::fracture::Job;
use shotwright::geom::{Figure, Ring};
use shotwright::layout;
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;

pub(crate) const CURVY: &str = include_str!("../data/sets/curvy.wkt");
pub(crate) const ASSIST: &str = include_str!("../data/sets/assist.wkt");

/// One figure without holes for each polygon, in the order of the text.
pub(crate) fn figures(text: &str) -> Vec<Figure> {
    let layout = layout::read(text.as_bytes(), "set").expect("WKT");
    let shapes = layout
        .cells
        .into_iter()
        .flat_map(|cell| cell.shapes.to_vec());
    shapes
        .map(|shape| Figure::new(Ring::new(shape.points).expect("three points"), Vec::new()))
        .collect()
}

/// Address 0.1 nm, sides from 8 nm to 1000 nm: the limits that the references of the sets were found under.
pub(crate) fn limits() -> ShotLimits {
    ShotLimits {
        address: AddressUnit::new(Nm(0.1)).expect("100 pm"),
        least_side: Nm(8.0),
        greatest_side: Nm(1000.0),
        sliver: Nm(8.0),
    }
}

/// Print a figure alone at a blur (σ, nm) within a tolerance (nm).
pub(crate) fn job(figure: &Figure, sigma: f64, tolerance: f64) -> Job<'_> {
    Job {
        figure,
        context: &[],
        flashed: &[],
        blur: Blur::new(Nm(sigma)).expect("an ordinary blur"),
        tolerance: Nm(tolerance),
        limits: limits(),
    }
}
