//! Recognises a rectilinear outline that is a curve in pixels.

use crate::geom::{Figure, Point, Ring};
use crate::units::Nm;

/// Whether a rectilinear figure is really a curve drawn in pixels, to be fractured as a curve.
///
/// # Rule
/// A *step* is an edge shorter than σ between two turns of opposite sense; a line end, whose turns have the same sense,
/// is none. The outline is a curve in pixels when more than half of its corners end a step: blur wider than the steps
/// prints a smooth edge there, and an exact partition would shatter into slivers. Figures with a slanted edge are not
/// in pixels. Corners are the points where the outline turns; points on straight edges do not count.
#[must_use]
pub fn is_pixel_curve(figure: &Figure, sigma: Nm) -> bool {
    if !figure.is_rectilinear() {
        return false;
    }
    let counts = figure.rings().map(|ring| steps(ring, sigma));
    let (on_steps, corners) = counts.fold((0, 0), |sum, c| (sum.0 + c.0, sum.1 + c.1));
    2 * on_steps > corners
}

/// Corners that end a step, and all corners.
fn steps(ring: &Ring, sigma: Nm) -> (usize, usize) {
    let points = ring.points();
    let n = points.len();
    let turn = |i: usize| {
        let (came, goes) = (
            points[i] - points[(i + n - 1) % n],
            points[(i + 1) % n] - points[i],
        );
        came.x.signum() * goes.y.signum() - came.y.signum() * goes.x.signum()
    };
    let corners: Vec<(Point, i64)> = (0..n)
        .map(|i| (points[i], turn(i)))
        .filter(|c| c.1 != 0)
        .collect();
    let n = corners.len();
    let is_step = |i: usize| {
        let ((a, turn_a), (b, turn_b)) = (corners[i], corners[(i + 1) % n]);
        let length = (b.x - a.x).abs().max((b.y - a.y).abs());
        turn_a != turn_b && Nm::from_pm(length) < sigma
    };
    let on_steps = (0..n)
        .filter(|&i| is_step(i) || is_step((i + n - 1) % n))
        .count();
    (on_steps, n)
}
