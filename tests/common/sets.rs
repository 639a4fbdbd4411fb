//! The reference sets, and the jobs that are asked of their figures.

use std::str::FromStr;

use shotwright::blur::Blur;
use shotwright::fracture::Job;
use shotwright::geom::{Figure, Point, Ring};
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;
use wkt::Wkt;

pub(crate) const CURVY: &str = include_str!("../data/sets/curvy.wkt");
pub(crate) const ASSIST: &str = include_str!("../data/sets/assist.wkt");

/// One figure a line, in nm.
pub(crate) fn figures(text: &str) -> Vec<Figure> {
    text.lines().map(figure).collect()
}

fn figure(line: &str) -> Figure {
    let Ok(Wkt::Polygon(polygon)) = Wkt::<f64>::from_str(line) else {
        panic!("expected a POLYGON, found {line:.40}");
    };
    let mut rings = polygon.rings().iter().map(|ring| {
        let points = ring.coords().iter().map(|c| point(c.x, c.y)).collect();
        Ring::new(points).expect("three points or more")
    });
    Figure::new(rings.next().expect("an outer ring"), rings.collect())
}

/// A place in nm, to the nearest picometre.
pub(crate) fn point(x: f64, y: f64) -> Point {
    let pm = |v: f64| Nm(v).to_pm().expect("a place within 4 km");
    Point::new(pm(x), pm(y))
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
        blur: Blur::new(Nm(sigma)).expect("an ordinary blur"),
        tolerance: Nm(tolerance),
        limits: limits(),
    }
}
