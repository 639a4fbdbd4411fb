//! An independent witness of what shots print: the rule on a raster of 1 nm pixels.
//!
//! It shares no code with the crate: doses are products of error functions, the inside is even–odd by scan line, and
//! distances come from another geometry library.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    clippy::cast_precision_loss,
    reason = "pixels of test figures"
)]

use std::collections::BTreeMap;

use geo::{Distance, Euclidean, Line, Point};
use shotwright::geom::Figure;
use shotwright::shot::ShotList;

/// Pull-back of a blurred right angle in σ (derived: the dose on the diagonal at distance t is Φ(t/√2)², which is ½ at 0.770679).
const PULL_BACK: f64 = 0.771;

/// A pixel that breaks the rule.
#[derive(Debug)]
#[allow(dead_code, reason = "read when a test fails and prints it")]
pub(crate) struct Wrong {
    pub(crate) at: [f64; 2],
    pub(crate) inside: bool,
    pub(crate) dose: f64,
}

/// Pixels where the shots break the rule: inside the figures and further than the tolerance from their outline the dose
/// is at least ½, outside and further below; within 2 σ of a drawn corner the tolerance is 0.771 σ more.
pub(crate) fn wrong_pixels(
    figures: &[&Figure],
    lists: &[&ShotList],
    sigma: f64,
    tolerance: f64,
) -> Vec<Wrong> {
    let outline = Outline::new(figures, sigma, tolerance);
    let flashes: Vec<Flash> = lists
        .iter()
        .flat_map(|l| l.rects())
        .map(|(r, dose)| Flash::new(r.min.to_nm(), r.max.to_nm(), dose.0, sigma))
        .collect();
    let mut bounds = outline.bounds;
    for f in &flashes {
        for axis in 0..2 {
            bounds[axis] = bounds[axis].min(f.low[axis]);
            bounds[axis + 2] = bounds[axis + 2].max(f.high[axis]);
        }
    }
    let pad = 3.0 * sigma;
    let (left, low) = ((bounds[0] - pad).floor(), (bounds[1] - pad).floor());
    let (columns, rows) = (
        (bounds[2] + pad - left).ceil() as usize,
        (bounds[3] + pad - low).ceil() as usize,
    );
    let mut wrong = Vec::new();
    let mut doses = vec![0.0; columns];
    for row in 0..rows {
        let y = low + row as f64 + 0.5;
        doses.fill(0.0);
        for flash in &flashes {
            flash.add(y, left, sigma, &mut doses);
        }
        let crossings = outline.crossings(y);
        let mut passed = 0;
        for (column, &dose) in doses.iter().enumerate() {
            let x = left + column as f64 + 0.5;
            while passed < crossings.len() && crossings[passed] <= x {
                passed += 1;
            }
            let inside = passed % 2 == 1;
            if inside != (dose >= 0.5) && outline.binds([x, y]) {
                wrong.push(Wrong {
                    at: [x, y],
                    inside,
                    dose,
                });
            }
        }
    }
    wrong
}

/// The greatest dose at the centres of pixels of 1 nm.
pub(crate) fn peak(list: &ShotList, sigma: f64) -> f64 {
    let flashes: Vec<Flash> = list
        .rects()
        .map(|(r, dose)| Flash::new(r.min.to_nm(), r.max.to_nm(), dose.0, sigma))
        .collect();
    let bound = |of: fn(f64, f64) -> f64, start: f64, pick: &dyn Fn(&Flash) -> f64| {
        flashes.iter().map(pick).fold(start, of)
    };
    let left = bound(f64::min, f64::INFINITY, &|f| f.low[0]).floor();
    let low = bound(f64::min, f64::INFINITY, &|f| f.low[1]).floor();
    let right = bound(f64::max, f64::NEG_INFINITY, &|f| f.high[0]);
    let high = bound(f64::max, f64::NEG_INFINITY, &|f| f.high[1]);
    let mut doses = vec![0.0; (right - left).ceil() as usize];
    let mut peak = 0.0_f64;
    for row in 0..(high - low).ceil() as usize {
        doses.fill(0.0);
        for flash in &flashes {
            flash.add(low + row as f64 + 0.5, left, sigma, &mut doses);
        }
        peak = doses.iter().copied().fold(peak, f64::max);
    }
    peak
}

/// Φ((at − from)/σ) − Φ((at − to)/σ).
fn share(at: f64, from: f64, to: f64, sigma: f64) -> f64 {
    let root = sigma * std::f64::consts::SQRT_2;
    0.5 * (libm::erf((at - from) / root) - libm::erf((at - to) / root))
}

struct Flash {
    low: [f64; 2],
    high: [f64; 2],
    dose: f64,
    /// Shares along x at pixel centres from `start` on.
    start: f64,
    across: Vec<f64>,
}

impl Flash {
    fn new(low: [f64; 2], high: [f64; 2], dose: f64, sigma: f64) -> Self {
        let reach = 6.0 * sigma;
        let start = (low[0] - reach).floor() + 0.5;
        let n = (high[0] + reach - start).ceil() as usize;
        let across = (0..n).map(|i| share(start + i as f64, low[0], high[0], sigma));
        Self {
            low,
            high,
            dose,
            start,
            across: across.collect(),
        }
    }

    fn add(&self, y: f64, left: f64, sigma: f64, doses: &mut [f64]) {
        let reach = 6.0 * sigma;
        if y < self.low[1] - reach || y > self.high[1] + reach {
            return;
        }
        let up = self.dose * share(y, self.low[1], self.high[1], sigma);
        let shift = (self.start - 0.5 - left) as i64;
        for (i, share) in self.across.iter().enumerate() {
            let at = usize::try_from(i as i64 + shift).ok();
            if let Some(dose) = at.and_then(|i| doses.get_mut(i)) {
                *dose += up * share;
            }
        }
    }
}

struct Outline {
    edges: Vec<Line>,
    corners: Vec<Point>,
    bounds: [f64; 4],
    sigma: f64,
    tolerance: f64,
    /// Edges by square cell.
    cells: BTreeMap<(i64, i64), Vec<usize>>,
    /// Edges by row of cells.
    rows: BTreeMap<i64, Vec<usize>>,
}

/// Side of a cell, nm: more than the greatest tolerance asked for.
const CELL: f64 = 32.0;

fn cell(v: f64) -> i64 {
    (v / CELL).floor() as i64
}

impl Outline {
    fn new(figures: &[&Figure], sigma: f64, tolerance: f64) -> Self {
        assert!(tolerance + PULL_BACK * sigma < CELL);
        let (mut edges, mut corners) = (Vec::new(), Vec::new());
        for ring in figures.iter().flat_map(|f| f.rings()) {
            let ring: Vec<Line> = ring
                .edges()
                .map(|(a, b)| Line::new(<(f64, f64)>::from(a.to_nm()), b.to_nm().into()))
                .collect();
            for (i, next) in ring.iter().enumerate() {
                let came = ring[(i + ring.len() - 1) % ring.len()];
                let (a, b) = (came.delta(), next.delta());
                let turn = (a.x * b.y - a.y * b.x).atan2(a.x * b.x + a.y * b.y).abs();
                let long = a.x.hypot(a.y).min(b.x.hypot(b.y)) >= 2.0 * sigma;
                if long && turn >= std::f64::consts::FRAC_PI_4 - 1e-9 {
                    corners.push(next.start_point());
                }
            }
            edges.extend(ring);
        }
        let mut bounds = [f64::INFINITY, f64::INFINITY, -f64::INFINITY, -f64::INFINITY];
        let mut cells: BTreeMap<_, Vec<usize>> = BTreeMap::new();
        let mut rows: BTreeMap<_, Vec<usize>> = BTreeMap::new();
        for (i, e) in edges.iter().enumerate() {
            let (x0, x1) = (e.start.x.min(e.end.x), e.start.x.max(e.end.x));
            let (y0, y1) = (e.start.y.min(e.end.y), e.start.y.max(e.end.y));
            bounds = [
                bounds[0].min(x0),
                bounds[1].min(y0),
                bounds[2].max(x1),
                bounds[3].max(y1),
            ];
            for row in cell(y0)..=cell(y1) {
                rows.entry(row).or_default().push(i);
                for column in cell(x0)..=cell(x1) {
                    cells.entry((column, row)).or_default().push(i);
                }
            }
        }
        Self {
            edges,
            corners,
            bounds,
            sigma,
            tolerance,
            cells,
            rows,
        }
    }

    fn crossings(&self, y: f64) -> Vec<f64> {
        let near = self.rows.get(&cell(y)).into_iter().flatten();
        let mut xs: Vec<f64> = near
            .map(|&i| self.edges[i])
            .filter(|e| (e.start.y > y) != (e.end.y > y))
            .map(|e| e.start.x + (y - e.start.y) / (e.end.y - e.start.y) * (e.end.x - e.start.x))
            .collect();
        xs.sort_by(f64::total_cmp);
        xs
    }

    /// Whether the place is further than its tolerance from the outline.
    fn binds(&self, p: [f64; 2]) -> bool {
        let at = Point::from(p);
        let in_corner = self
            .corners
            .iter()
            .any(|&c| Euclidean.distance(c, at) <= 2.0 * self.sigma);
        let tolerance = self.tolerance
            + if in_corner {
                PULL_BACK * self.sigma
            } else {
                0.0
            };
        let (column, row) = (cell(p[0]), cell(p[1]));
        let near = (column - 1..=column + 1)
            .flat_map(|c| (row - 1..=row + 1).filter_map(move |r| self.cells.get(&(c, r))))
            .flatten();
        near.map(|&i| Euclidean.distance(&at, &self.edges[i]))
            .all(|d| d > tolerance + 1e-9)
    }
}

/// The witness must itself be able to fail: a square printed by squares too large and too small, and by nothing.
#[test]
fn the_witness_sees_what_is_missing_and_what_is_too_much() {
    use shotwright::geom::{Point, Rect};
    use shotwright::shot::{AddressUnit, Shot};
    use shotwright::units::{Dose, Nm};
    let square = |half: i64| Rect::new(Point::from_nm(-half, -half), Point::from_nm(half, half));
    let figure = Figure::from_rect(square(50));
    let list = |half: i64| {
        let shot = Shot {
            x0: -half,
            y0: -half,
            x1: half,
            y1: half,
            dose: Dose(1.0),
        };
        ShotList::new(AddressUnit::new(Nm(1.0)).unwrap(), vec![shot])
    };
    let count = |half| wrong_pixels(&[&figure], &[&list(half)], 10.0, 2.0);
    assert!(count(50).is_empty() && count(51).is_empty());
    assert!(count(53).iter().all(|w| !w.inside) && !count(53).is_empty());
    assert!(count(47).iter().all(|w| w.inside) && !count(47).is_empty());
    let none = ShotList::new(AddressUnit::FINEST, Vec::new());
    // Derived, counted with an array library: pixels of the 96 nm square within the tolerance, less those within 9.71 nm of the outline
    // and 20 nm of a corner.
    let missing = wrong_pixels(&[&figure], &[&none], 10.0, 2.0).len();
    assert_eq!(missing, 8384);
}
