//! Wide curved figures.

use shotwright::geom::{Figure, Point, Ring};

/// A disc of radius `outer` nm with a hole of radius `inner` nm about the same centre (none if 0), vertices about every 20 nm on a 1 nm
/// grid.
pub(crate) fn annulus(outer: f64, inner: f64) -> Figure {
    let circle = |radius: f64| {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "some thousand vertices"
        )]
        let n = (std::f64::consts::TAU * radius / 20.0).ceil() as u32;
        let points = (0..n).map(|i| {
            let (sin, cos) = (std::f64::consts::TAU * f64::from(i) / f64::from(n)).sin_cos();
            #[allow(clippy::cast_possible_truncation, reason = "some micrometres")]
            let grid = |v: f64| (radius * v).round() as i64;
            Point::from_nm(grid(cos), grid(sin))
        });
        Ring::new(points.collect()).expect("a ring of many vertices")
    };
    let holes = if inner > 0.0 {
        vec![circle(inner)]
    } else {
        Vec::new()
    };
    Figure::new(circle(outer), holes)
}
