//! Polygons made sound, and what was repaired.
//!
//! A polygon covers what its outline winds round at least once, either way (the non-zero rule); so crossings are
//! filled, spikes and keyhole bridges vanish, repeated points do not matter, and a polygon without area is dropped.

use crate::geom::{self, Figure, Point, Ring};

use super::Defect;

/// Polygons with each defect, counted as they stand in the file.
#[derive(Default)]
pub(super) struct Repairs {
    counts: [usize; Defect::ALL.len()],
    /// The first that is refused when repairs are: cell, polygon, defect.
    pub(super) first: Option<(usize, usize, Defect)>,
}

impl Repairs {
    pub(super) fn add(&mut self, cell: usize, polygon: usize, defects: &[Defect]) {
        for &defect in defects {
            self.counts[defect as usize] += 1;
            let here = (cell, polygon, defect);
            if defect.is_refused() && self.first.is_none_or(|first| here < first) {
                self.first = Some(here);
            }
        }
    }

    pub(super) fn notes(&self) -> Vec<String> {
        let sentence = |(defect, &n): (&Defect, &usize)| {
            let polygons = if n == 1 { "polygon" } else { "polygons" };
            (n > 0).then(|| format!("{n} {polygons} {defect}: {}", defect.rule()))
        };
        Defect::ALL
            .iter()
            .zip(&self.counts)
            .filter_map(sentence)
            .collect()
    }
}

/// The figures one polygon covers (one, unless it crosses itself), and what was wrong with it.
pub(super) fn sound(mut points: Vec<Point>) -> (Vec<Figure>, Vec<Defect>) {
    let mut defects = Vec::new();
    let before = points.len();
    points.dedup();
    if points.len() > 1 && points.first() == points.last() {
        points.pop();
    }
    if points.len() < before {
        defects.push(Defect::RepeatedPoints);
    }
    let Some(ring) = Ring::new(points) else {
        return (Vec::new(), vec![Defect::NoArea]);
    };
    let area_two = ring.area_two();
    if area_two < 0 {
        defects.push(Defect::Clockwise);
    }
    if is_rectangle(ring.points()) {
        return (vec![Figure::from_rect(ring.bounds())], defects);
    }
    let figures = geom::merge([&ring]);
    let covered: i128 = figures.iter().map(Figure::area_two).sum();
    if figures.is_empty() {
        return (figures, vec![Defect::NoArea]);
    }
    // An outline that winds once round all it encloses has exactly the covered area; bridges cancel.
    if covered != area_two.abs() {
        defects.push(Defect::SelfCrossing);
    }
    if has_spike(ring.points()) {
        defects.push(Defect::Spike);
    }
    (figures, defects)
}

fn is_rectangle(points: &[Point]) -> bool {
    match *points {
        [a, b, c, d] => {
            let horizontal_first = a.y == b.y && b.x == c.x && c.y == d.y && d.x == a.x;
            let vertical_first = a.x == b.x && b.y == c.y && c.x == d.x && d.y == a.y;
            (horizontal_first || vertical_first) && a.x != c.x && a.y != c.y
        }
        _ => false,
    }
}

/// Whether the outline turns straight back at a point.
fn has_spike(points: &[Point]) -> bool {
    let n = points.len();
    (0..n).any(|i| {
        let (p, q, r) = (points[i], points[(i + 1) % n], points[(i + 2) % n]);
        let (there, back) = (q - p, r - q);
        let product = |a: i64, b: i64| i128::from(a) * i128::from(b);
        product(there.x, back.y) == product(there.y, back.x)
            && product(there.x, back.x) + product(there.y, back.y) < 0
    })
}
