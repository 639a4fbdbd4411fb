//! Exposure against values from outside: scipy 1.17, tables, closed forms and hand-worked cases.
//!
//! Values said to be "derived" were worked out from the definition with scipy 1.17, apart from this code.

mod budget;
mod contour;
mod correction;
mod cost;
mod dose;
mod raster;

use shotwright::blur::Blur;
use shotwright::expose::Exposure;
use shotwright::geom::{Point, Rect};
use shotwright::units::{Dose, Nm};

/// A shot and its dose.
type Flash = (Rect, f64);

/// A place and the dose there.
type Known = ([f64; 2], f64);

const FAR: f64 = 50_000.0;

fn blur(sigma: f64) -> Blur {
    Blur::new(Nm(sigma)).unwrap()
}

fn rect(x0: f64, y0: f64, x1: f64, y1: f64) -> Rect {
    let p = |x: f64, y: f64| Point::new(Nm(x).to_pm().unwrap(), Nm(y).to_pm().unwrap());
    Rect::new(p(x0, y0), p(x1, y1))
}

fn expose(sigma: f64, shots: &[(Rect, f64)]) -> Exposure {
    Exposure::new(blur(sigma), shots.iter().map(|(r, d)| (*r, Dose(*d))))
}

fn wide_edge(sigma: f64, dose: f64) -> Exposure {
    expose(sigma, &[(rect(-FAR, -FAR, 0.0, FAR), dose)])
}

fn corner(sigma: f64) -> Exposure {
    expose(sigma, &[(rect(-FAR, -FAR, 0.0, 0.0), 1.0)])
}

/// A vertical line of `width` σ from x = 0 leftwards.
fn line(sigma: f64, width: f64) -> Exposure {
    expose(sigma, &[(rect(-width * sigma, -FAR, 0.0, FAR), 1.0)])
}

fn near(found: f64, expected: f64, within: f64) {
    assert!(
        (found - expected).abs() <= within,
        "found {found}, expected {expected} ± {within}"
    );
}

/// Sixty overlapping shots and 400 places; see `make_dose.py` beside the data.
fn published() -> (Vec<Flash>, Vec<Known>) {
    let (mut shots, mut places) = (Vec::new(), Vec::new());
    let text = include_str!("../data/expose/dose.csv");
    for row in text
        .lines()
        .skip(2)
        .map(|l| l.split(',').collect::<Vec<_>>())
    {
        let v = |i: usize| row[i].parse::<f64>().unwrap();
        if row[0] == "shot" {
            shots.push((rect(v(1), v(2), v(1) + v(3), v(2) + v(4)), v(5)));
        } else {
            places.push(([v(1), v(2)], v(5)));
        }
    }
    assert_eq!((shots.len(), places.len()), (60, 400));
    (shots, places)
}
