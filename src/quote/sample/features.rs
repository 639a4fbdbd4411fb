//! What is known of a figure before it is fractured, and goes along with what its fracture will cost.

use std::f64::consts::FRAC_PI_2;

use crate::blur::Blur;
use crate::geom::{Figure, Point, Ring};
use crate::units::Nm;

/// Cheap measures of one distinct figure.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Features {
    /// At how many places it stands.
    pub places: f64,
    /// Length of all its rings, nm.
    pub outline_nm: f64,
    /// How far its outline climbs beside an axis, nm: `Σ min(|Δx|, |Δy|)` over chords of σ or more. A staircase takes steps for it.
    pub rise_nm: f64,
    /// By how much the chords turn in all, quarter turns: 4 for a disc or a rectangle, the number of corners for a rectilinear figure.
    pub turning: f64,
    /// Area, nm².
    pub area_nm2: f64,
    /// Whether every edge is axis-parallel.
    pub rectilinear: bool,
}

impl Features {
    /// Of a figure at so many places.
    #[must_use]
    pub fn of(figure: &Figure, places: u128, blur: Blur) -> Self {
        let (mut rise_nm, mut turning) = (0.0, 0.0);
        for ring in figure.rings() {
            let chords = chords(ring, blur.sigma());
            rise_nm += chords
                .iter()
                .map(|[x, y]| x.abs().min(y.abs()))
                .sum::<f64>();
            let next = chords.iter().cycle().skip(1);
            turning += chords
                .iter()
                .zip(next)
                .map(|(a, b)| angle(*a, *b))
                .sum::<f64>()
                / FRAC_PI_2;
        }
        Self {
            places: places as f64,
            outline_nm: figure.outline_nm(),
            rise_nm,
            turning,
            area_nm2: figure.area_nm2(),
            rectilinear: figure.is_rectilinear(),
        }
    }
}

/// The ring walked in steps from vertex to vertex, each at least σ long but perhaps the last: what a pixel grid does to the outline is no rise.
fn chords(ring: &Ring, sigma: Nm) -> Vec<[f64; 2]> {
    let points = ring.points();
    let Some(&start) = points.first() else {
        return Vec::new();
    };
    let (mut chords, mut from) = (Vec::new(), start);
    let step = |a: Point, b: Point| {
        let ([ax, ay], [bx, by]) = (a.to_nm(), b.to_nm());
        [bx - ax, by - ay]
    };
    for &to in points[1..].iter().chain([&start]) {
        let [x, y] = step(from, to);
        if x.hypot(y) >= sigma.0 || (to == start && (x, y) != (0.0, 0.0)) {
            chords.push([x, y]);
            from = to;
        }
    }
    chords
}

/// Angle between two directions, 0 to π.
fn angle(a: [f64; 2], b: [f64; 2]) -> f64 {
    let cross = a[0] * b[1] - a[1] * b[0];
    libm::atan2(cross.abs(), a[0] * b[0] + a[1] * b[1])
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::Rect;

    fn of(points: Vec<Point>) -> Features {
        let figure = Figure::new(Ring::new(points).unwrap(), Vec::new());
        Features::of(&figure, 1, Blur::new(Nm(10.0)).unwrap())
    }

    #[test]
    fn a_rectangle_has_four_quarter_turns_and_no_rise() {
        let bar = Figure::from_rect(Rect::new(Point::default(), Point::from_nm(300, 40)));
        let bar = Features::of(&bar, 7, Blur::new(Nm(10.0)).unwrap());
        assert_eq!((bar.turning, bar.rise_nm, bar.places), (4.0, 0.0, 7.0));
        assert!(bar.rectilinear);
    }

    #[test]
    fn a_disc_turns_once_and_climbs_by_its_radius_and_more() {
        // Σ min(|Δx|, |Δy|) over a circle: 8 · r · (1 − cos 45°).
        let r = 1000.0_f64;
        let point = |i: i32| {
            let a = f64::from(i) * std::f64::consts::TAU / 400.0;
            let pm = |v: f64| Nm(v).to_pm().unwrap();
            Point::new(pm(r * a.cos()), pm(r * a.sin()))
        };
        let disc = of((0..400).map(point).collect());
        assert!((disc.turning - 4.0).abs() < 1e-3, "{disc:?}");
        let rise = 8.0 * r * (1.0 - std::f64::consts::FRAC_1_SQRT_2);
        assert!((disc.rise_nm - rise).abs() < 0.01 * rise, "{disc:?}");
    }

    #[test]
    fn steps_of_a_pixel_grid_are_climbed_like_the_line_they_stand_for() {
        // 45°, pixels of 2 nm, closed by two long edges. Chords of 10 nm from corner to corner are (8, 6) and (6, 8) in turn: 12 nm of
        // climb for every 14 of the line.
        let mut points: Vec<Point> = Vec::new();
        for i in 0..100 {
            points.push(Point::from_nm(2 * i, 2 * i));
            points.push(Point::from_nm(2 * i + 2, 2 * i));
        }
        points.push(Point::from_nm(200, 400));
        points.push(Point::from_nm(0, 400));
        let figure = of(points);
        assert!(
            (figure.rise_nm - 200.0 * 12.0 / 14.0).abs() < 2.0,
            "{figure:?}"
        );
    }
}
