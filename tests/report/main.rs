//! What the user sees: CSV that round-trips, tables as text, JSON keys, pictures whose pixels are where they should be.

mod csv;
mod pictures;
mod words;

use shotwright::geom::{Orientation, Point, Transform};
use shotwright::shot::{AddressUnit, Shot};
use shotwright::units::{Dose, Nm};

fn address(nm: f64) -> AddressUnit {
    AddressUnit::new(Nm(nm)).unwrap()
}

fn shot(x0: i64, y0: i64, x1: i64, y1: i64, dose: f64) -> Shot {
    Shot {
        x0,
        y0,
        x1,
        y1,
        dose: Dose(dose),
    }
}

fn at(x: i64, y: i64) -> Transform {
    Transform {
        orientation: Orientation::IDENTITY,
        shift: Point::new(x, y),
    }
}
