//! Cuts to the greatest side of a shot.

use crate::geom::{Point, Rect};
use crate::shot::ShotLimits;

/// Tiles cut so that no side is over the greatest, with the fewest cuts and pieces as equal as the grid allows.
///
/// Sides of the pieces differ by one address unit at most, which makes the smallest as large as it can be: a piece is a
/// sliver, or under the least side, only if half the greatest side is, or if the tile was one. Tiles must lie on the
/// address grid. A greatest side under one address unit counts as one unit. Order is kept, pieces row by row.
#[must_use]
pub fn cut_to_greatest_side(tiles: &[Rect], limits: &ShotLimits) -> Vec<Rect> {
    let unit = limits.address.pm();
    let greatest = limits
        .greatest_side
        .to_pm()
        .unwrap_or(i64::MAX)
        .div_euclid(unit)
        .max(1);
    let mut pieces = Vec::with_capacity(tiles.len());
    for tile in tiles {
        let xs = equal_cuts(tile.min.x, tile.max.x, unit, greatest);
        let ys = equal_cuts(tile.min.y, tile.max.y, unit, greatest);
        for y in ys.windows(2) {
            pieces.extend(xs.windows(2).map(|x| Rect {
                min: Point::new(x[0], y[0]),
                max: Point::new(x[1], y[1]),
            }));
        }
    }
    pieces
}

/// The ends of equal parts of `from..to`, each at most `greatest` units long.
fn equal_cuts(from: i64, to: i64, unit: i64, greatest: i64) -> Vec<i64> {
    let units = (to - from) / unit;
    let parts = (units + greatest - 1) / greatest;
    let mut cuts = vec![from];
    cuts.extend((1..parts).map(|i| from + i * units / parts * unit));
    cuts.push(to);
    cuts
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::shot::AddressUnit;
    use crate::units::Nm;

    fn limits(greatest: f64) -> ShotLimits {
        ShotLimits {
            address: AddressUnit::new(Nm(1.0)).unwrap(),
            least_side: Nm(8.0),
            greatest_side: Nm(greatest),
            sliver: Nm(20.0),
        }
    }

    #[test]
    fn a_side_just_over_the_greatest_is_halved_and_leaves_no_sliver() {
        let tile = Rect::new(Point::from_nm(0, 0), Point::from_nm(501, 30));
        let widths: Vec<i64> = cut_to_greatest_side(&[tile], &limits(500.0))
            .iter()
            .map(|r| r.width())
            .collect();
        assert_eq!(widths, [250_000, 251_000]);
    }

    #[test]
    fn pieces_tile_the_tile_with_the_fewest_cuts() {
        let tile = Rect::new(Point::from_nm(-7, 3), Point::from_nm(1203, 993));
        let pieces = cut_to_greatest_side(&[tile], &limits(250.0));
        assert_eq!(pieces.len(), 5 * 4, "1210 / 250 and 990 / 250, rounded up");
        let area: i64 = pieces
            .iter()
            .map(|r| r.width() / 1000 * (r.height() / 1000))
            .sum();
        assert_eq!(area, 1210 * 990);
        assert!(
            pieces
                .iter()
                .all(|r| (240_000..=250_000).contains(&r.width().max(r.height())))
        );
    }

    #[test]
    fn a_tile_of_the_greatest_side_is_left_alone() {
        let tile = Rect::new(Point::from_nm(0, 0), Point::from_nm(250, 250));
        assert_eq!(cut_to_greatest_side(&[tile], &limits(250.0)), [tile]);
    }
}
