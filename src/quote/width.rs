//! Whether a figure is anywhere as wide as a line must be to print.

use crate::blur::Blur;
use crate::geom::{Figure, Rect, offset};
use crate::target::Edge;
use crate::units::Nm;

use super::made;

/// Width of the widest part of a figure (twice its inner radius), if that is under `limit` nm; to 0.1 nm.
pub(super) fn widest_under(figure: &Figure, limit: f64, blur: Blur) -> Option<f64> {
    if holds_disc(figure, limit, blur) {
        return None;
    }
    let vanishes = |width: f64| {
        let half = (Nm(0.5 * width)).to_pm().unwrap_or_default();
        offset(std::slice::from_ref(figure), -half).is_empty()
    };
    if !vanishes(limit) {
        return None;
    }
    let (mut low, mut high) = (0.0, limit);
    while high - low > 0.1 {
        let middle = 0.5 * (low + high);
        if vanishes(middle) {
            high = middle;
        } else {
            low = middle;
        }
    }
    Some(high)
}

/// By how much a disc must be wider than the limit: more than what chords in place of arcs and rounding take from an offset.
const CLEARLY: f64 = 1.01;

/// Whether a disc of this width about the middle of one of its slabs lies in the figure. Almost every figure is told by that in a hundredth
/// of the time of an offset; one that is not may still be wide enough elsewhere.
fn holds_disc(figure: &Figure, width: f64, blur: Blur) -> bool {
    let half = 0.5 * CLEARLY * width;
    let middle = |slab: Rect| {
        let ([x0, y0], [x1, y1]) = (slab.min.to_nm(), slab.max.to_nm());
        [0.5 * (x0 + x1), 0.5 * (y0 + y1)]
    };
    let clear = |at: [f64; 2]| {
        let mut edges = figure.rings().flat_map(|ring| ring.edges());
        edges.all(|(a, b)| {
            let (a, b) = (a.to_nm(), b.to_nm());
            Edge { a, b }.distance_squared(at) > half * half
        })
    };
    made::slabs(figure, blur)
        .into_iter()
        .any(|slab| clear(middle(slab)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Point, Ring};

    fn blur() -> Blur {
        Blur::new(Nm(12.0)).unwrap()
    }

    #[test]
    fn the_widest_part_of_a_bar_is_its_width() {
        let bar = |w| Figure::from_rect(Rect::new(Point::default(), Point::from_nm(300, w)));
        let width = widest_under(&bar(12), 16.0, blur()).unwrap();
        assert!((width - 12.0).abs() < 0.2, "{width}");
        assert_eq!(widest_under(&bar(20), 16.0, blur()), None);
    }

    /// A frame whose walls are a little too thin, so that only its corners are wide.
    #[test]
    fn what_no_slab_tells_the_offset_tells() {
        let square = |r: i64| {
            let corners = [(-r, -r), (r, -r), (r, r), (-r, r)];
            Ring::new(corners.map(|(x, y)| Point::from_nm(x, y)).to_vec()).unwrap()
        };
        let frame = |width: i64| Figure::new(square(40), vec![square(40 - width)]);
        assert_eq!(widest_under(&frame(16), 16.0, blur()), None);
        let found = widest_under(&frame(12), 16.0, blur()).unwrap();
        // The widest disc of a frame lies in its corners: 2r with w√2 = r + r√2.
        let expected = 2.0 * 12.0 * 2.0_f64.sqrt() / (1.0 + 2.0_f64.sqrt());
        assert!(
            (found - expected).abs() < 0.2,
            "{found}, expected {expected}"
        );
    }
}
