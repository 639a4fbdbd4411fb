//! Growing and shrinking of figures.

use i_overlay::i_float::int::angle::Angle;
use i_overlay::mesh::int::arc::ArcOptions;
use i_overlay::mesh::int::outline::offset::IntOutlineOffset;
use i_overlay::mesh::int::style::{IntLineJoin, IntOutlineStyle};

use super::Figure;
use super::boolean::{figures_of, paths_of};

/// Greatest angle between points of a rounded corner: 1/64 turn, so a chord is 0.12 % of the radius inside its arc.
const ARC_STEP: Angle = Angle::from_bits(1 << 26);

/// All places within `by` pm of the figures; with `by` negative, all places of them at least `−by` from the outside.
///
/// Corners are rounded by chords that lie inside the arcs, so that the outline strays from the true one by 0.12 % of
/// `by` and a few pm of rounding, toward the figures drawn. Figures may unite, split or vanish.
#[must_use]
pub fn offset(figures: &[Figure], by: i64) -> Vec<Figure> {
    let arc = ArcOptions {
        max_step: ARC_STEP,
        ..ArcOptions::default()
    };
    let style = IntOutlineStyle::<i64>::new(by).line_join(IntLineJoin::Round(arc));
    // Construction cannot fail: the library only reports ranges when asked to check them.
    figures_of(paths_of(figures).outline(&style).unwrap_or_default())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Point, Rect};

    #[test]
    fn a_grown_rectangle_gains_its_rim_and_a_disc() {
        // Steiner: area + perimeter · d + π d².
        let square = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(100, 50)));
        let grown = offset(std::slice::from_ref(&square), 10_000);
        let expected = 5000.0 + 300.0 * 10.0 + std::f64::consts::PI * 100.0;
        assert!(
            (grown[0].area_nm2() - expected).abs() < 1.0,
            "{}",
            grown[0].area_nm2()
        );
        assert_eq!(offset(&[square], -10_000)[0].area_nm2(), 80.0 * 30.0);
    }

    #[test]
    fn a_figure_narrower_than_twice_the_distance_vanishes() {
        let bar = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(100, 19)));
        assert!(offset(&[bar], -10_000).is_empty());
    }
}
