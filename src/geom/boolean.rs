//! Booleans behind one adaptor around `i_overlay` (its `i64` engine on picometres).
//!
//! Exact for rectilinear input. Where slanted edges cross, the crossing is rounded to a whole picometre.

use i_overlay::core::fill_rule::FillRule;
use i_overlay::core::overlay::{Overlay, ShapeType};
use i_overlay::core::overlay_rule::OverlayRule;
use i_overlay::i_float::int::point::IntPoint;

use super::{Figure, Point, Ring};

pub(super) type Path = Vec<IntPoint<i64>>;

/// The union of rings of either sense (each counts as filled by the non-zero rule), as figures with real holes.
///
/// Keyhole bridges vanish, duplicates and overlaps unite. Figures come normalized and sorted.
#[must_use]
pub fn merge<'a>(rings: impl IntoIterator<Item = &'a Ring>) -> Vec<Figure> {
    // Opposite senses must not cancel where two polygons overlap.
    let paths: Vec<Path> = rings
        .into_iter()
        .map(|r| path(r, r.area_two() < 0))
        .collect();
    run(&paths, &[], OverlayRule::Subject)
}

/// What rings together wind round, each counted in its own sense (the non-zero rule); normalized and sorted.
#[must_use]
pub fn wound(rings: &[Ring]) -> Vec<Figure> {
    let paths: Vec<Path> = rings.iter().map(|r| path(r, false)).collect();
    run(&paths, &[], OverlayRule::Subject)
}

/// The union of figures, holes kept where nothing covers them; normalized and sorted.
#[must_use]
pub fn unite(figures: &[Figure]) -> Vec<Figure> {
    run(&paths_of(figures), &[], OverlayRule::Subject)
}

/// What `subject` covers and `clip` does not.
#[must_use]
pub fn subtract(subject: &[Figure], clip: &[Figure]) -> Vec<Figure> {
    run(&paths_of(subject), &paths_of(clip), OverlayRule::Difference)
}

/// What both cover.
#[must_use]
pub fn intersect(subject: &[Figure], clip: &[Figure]) -> Vec<Figure> {
    run(&paths_of(subject), &paths_of(clip), OverlayRule::Intersect)
}

pub(super) fn paths_of(figures: &[Figure]) -> Vec<Path> {
    figures
        .iter()
        .flat_map(Figure::rings)
        .map(|r| path(r, false))
        .collect()
}

fn path(ring: &Ring, reverse: bool) -> Path {
    let mut path: Path = ring
        .points()
        .iter()
        .map(|p| IntPoint::new(p.x, p.y))
        .collect();
    if reverse {
        path.reverse();
    }
    path
}

fn run(subject: &[Path], clip: &[Path], rule: OverlayRule) -> Vec<Figure> {
    let edges = subject.iter().chain(clip).map(Vec::len).sum();
    let mut overlay = Overlay::<i64>::new(edges);
    overlay.add_source(subject, ShapeType::Subject);
    overlay.add_source(clip, ShapeType::Clip);
    figures_of(overlay.overlay(rule, FillRule::NonZero))
}

/// Shapes of the library as figures, normalized and sorted.
pub(super) fn figures_of(shapes: Vec<Vec<Path>>) -> Vec<Figure> {
    let mut figures: Vec<Figure> = shapes
        .into_iter()
        .filter_map(|shape| {
            let mut rings = shape.into_iter().filter_map(|contour| {
                Ring::new(contour.into_iter().map(|p| Point::new(p.x, p.y)).collect())
            });
            let outer = rings.next()?;
            Some(Figure::new(outer, rings.collect()).normalized())
        })
        .collect();
    figures.sort();
    figures
}
