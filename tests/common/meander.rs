//! A curved serpentine of any length.

use shotwright::geom::{Figure, Point, Ring};

/// A band 44 nm wide along a sine-generated curve (Langbein and Leopold, US Geological Survey Professional Paper 422-H, 1966): its
/// heading swings by ±1.5 rad every 640 nm, so that its inner edge bends by no less than 46 nm radius. Vertices about every 4 nm on a 1 nm
/// grid. `outline` is the length of its boundary, nm, to within a turn.
pub(crate) fn meander(outline: f64) -> Figure {
    const SWING: f64 = 1.5;
    const PERIOD: f64 = 640.0;
    const HALF_WIDTH: f64 = 22.0;
    const STEP: f64 = 4.0;
    let (mut left, mut right) = (Vec::new(), Vec::new());
    let (mut at, mut s) = ([0.0_f64; 2], 0.0);
    let grid = |x: f64, y: f64| {
        #[allow(clippy::cast_possible_truncation, reason = "under 1 mm")]
        Point::from_nm(x.round() as i64, y.round() as i64)
    };
    let heading = |s: f64| SWING * (std::f64::consts::TAU * s / PERIOD).cos();
    while s <= 0.5 * outline {
        let (sin, cos) = heading(s).sin_cos();
        left.push(grid(at[0] - HALF_WIDTH * sin, at[1] + HALF_WIDTH * cos));
        right.push(grid(at[0] + HALF_WIDTH * sin, at[1] - HALF_WIDTH * cos));
        let (sin, cos) = heading(s + 0.5 * STEP).sin_cos();
        at = [at[0] + STEP * cos, at[1] + STEP * sin];
        s += STEP;
    }
    let cap = |centre: [f64; 2], from: f64| {
        (1..17).map(move |i| {
            let (sin, cos) = (from + std::f64::consts::PI * f64::from(i) / 17.0).sin_cos();
            grid(centre[0] + HALF_WIDTH * cos, centre[1] + HALF_WIDTH * sin)
        })
    };
    let last = heading(s - STEP);
    let end = {
        let (sin, cos) = heading(s - 0.5 * STEP).sin_cos();
        [at[0] - STEP * cos, at[1] - STEP * sin]
    };
    let quarter = std::f64::consts::FRAC_PI_2;
    let mut points = right;
    points.extend(cap(end, last - quarter));
    points.extend(left.into_iter().rev());
    points.extend(cap([0.0; 2], heading(0.0) + quarter));
    points.dedup();
    Figure::new(Ring::new(points).expect("a long ring"), Vec::new())
}
