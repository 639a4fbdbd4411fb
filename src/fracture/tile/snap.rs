//! Puts a rectilinear figure on the address grid.

use crate::geom::{Figure, Point, Ring, subtract};
use crate::shot::AddressUnit;
use crate::units::Nm;

/// A rectilinear figure on the address grid.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Snapped {
    /// What is left of it: usually one figure, more where a neck closed, none where all of it was too narrow.
    pub figures: Vec<Figure>,
    /// Whether pieces and holes are as many as drawn; if not, a part narrower than an address unit is gone.
    pub same_topology: bool,
}

/// Rounds every coordinate of a rectilinear figure once, to the nearest address.
///
/// Rounding keeps the order of coordinates, so rings never cross; steps under half a unit vanish without a trace, parts
/// that collapse (necks, slits, holes, the figure itself) vanish and are reported. A figure on the grid is unchanged.
#[must_use]
pub fn snap(figure: &Figure, address: AddressUnit) -> Snapped {
    let round = |pm: i64| address.nearest(Nm::from_pm(pm)) * address.pm();
    let mut changed = false;
    let mut snapped = |ring: &Ring| {
        let moved = |p: &Point| Point::new(round(p.x), round(p.y));
        let points: Vec<Point> = ring.points().iter().map(moved).collect();
        changed |= points != ring.points();
        Ring::new(points)
    };
    let outer = snapped(figure.outer());
    let holes: Vec<Option<Ring>> = figure.holes().iter().map(&mut snapped).collect();
    if !changed {
        return Snapped {
            figures: vec![figure.clone()],
            same_topology: true,
        };
    }
    let whole: Vec<Figure> = outer
        .map(|r| Figure::new(r, Vec::new()))
        .into_iter()
        .collect();
    let holes: Vec<Figure> = holes
        .into_iter()
        .flatten()
        .map(|r| Figure::new(r, Vec::new()))
        .collect();
    let figures = subtract(&whole, &holes);
    let same_topology = figures.len() == 1 && figures[0].holes().len() == figure.holes().len();
    Snapped {
        figures,
        same_topology,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn figure(points: &[(i64, i64)]) -> Figure {
        let points = points.iter().map(|&(x, y)| Point::new(x, y)).collect();
        Figure::new(Ring::new(points).unwrap(), Vec::new())
    }

    fn grid() -> AddressUnit {
        AddressUnit::new(Nm(1.0)).unwrap()
    }

    #[test]
    fn a_jog_under_half_an_address_unit_vanishes() {
        let jogged = figure(&[
            (0, 0),
            (9_000, 0),
            (9_000, 5_000),
            (9_400, 5_000),
            (9_400, 9_000),
            (0, 9_000),
        ]);
        let snapped = snap(&jogged, grid());
        assert!(snapped.same_topology);
        assert_eq!(
            snapped.figures,
            [figure(&[(0, 0), (9_000, 0), (9_000, 9_000), (0, 9_000)])]
        );
    }

    #[test]
    fn a_neck_that_collapses_is_reported() {
        let neck = figure(&[
            (0, 0),
            (9_000, 0),
            (9_000, 4_100),
            (20_000, 4_100),
            (20_000, 0),
            (30_000, 0),
            (30_000, 9_000),
            (20_000, 9_000),
            (20_000, 4_400),
            (9_000, 4_400),
            (9_000, 9_000),
            (0, 9_000),
        ]);
        let snapped = snap(&neck, grid());
        assert!(!snapped.same_topology);
        assert_eq!(snapped.figures.len(), 2);
    }

    #[test]
    fn a_figure_that_collapses_leaves_nothing() {
        let thin = figure(&[(0, 100), (9_000, 100), (9_000, 400), (0, 400)]);
        assert_eq!(
            snap(&thin, grid()),
            Snapped {
                figures: vec![],
                same_topology: false
            }
        );
    }

    #[test]
    fn a_figure_on_the_grid_is_left_alone() {
        let square = figure(&[(-9_000, 0), (9_000, 0), (9_000, 9_000), (-9_000, 9_000)]);
        assert_eq!(
            snap(&square, grid()),
            Snapped {
                figures: vec![square],
                same_topology: true
            }
        );
    }
}
