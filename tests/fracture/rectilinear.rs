//! Rectilinear figures: cut exactly, or recognised as curves in pixels.

use shotwright::fracture::Fracturer;
use shotwright::fracture::tile::{Prefer, Tile};
use shotwright::geom::{Figure, Point, Rect, Ring, merge};

use super::sets::job;
use super::{TILE, examine};

fn figure(rings: &[&[(i64, i64)]]) -> Figure {
    let mut rings = rings.iter().map(|r| {
        let points = r.iter().map(|&(x, y)| Point::from_nm(x, y)).collect();
        Ring::new(points).unwrap()
    });
    Figure::new(rings.next().unwrap(), rings.collect())
}

/// Vertices of rings in nm, the outer first.
type Rings = &'static [&'static [(i64, i64)]];

/// A bar of a width and a height, nm.
fn bar(width: i64, height: i64) -> Figure {
    Figure::from_rect(Rect::new(Point::new(0, 0), Point::from_nm(width, height)))
}

fn area_two_of_shots(fracturer: &Tile, figure: &Figure) -> (usize, i128) {
    let (fracture, faults) = examine(fracturer, &job(figure, 10.0, 2.0));
    assert!(faults.is_empty(), "{faults:#?}");
    let area = |r: Rect| 2 * i128::from(r.width()) * i128::from(r.height());
    let total = fracture.shots.rects().map(|(r, _)| area(r)).sum();
    (fracture.shots.len(), total)
}

#[test]
fn letters_take_the_least_tiles() {
    // CHECKS of the partition, by hand: "rectangle 1, L 2, T 2, U 3, square ring 4".
    let cases: [(&str, Rings, usize); 5] = [
        ("rectangle", &[&[(0, 0), (300, 0), (300, 200), (0, 200)]], 1),
        (
            "L",
            &[&[
                (0, 0),
                (300, 0),
                (300, 100),
                (100, 100),
                (100, 300),
                (0, 300),
            ]],
            2,
        ),
        (
            "T",
            &[&[
                (100, 0),
                (200, 0),
                (200, 200),
                (300, 200),
                (300, 300),
                (0, 300),
                (0, 200),
                (100, 200),
            ]],
            2,
        ),
        (
            "U",
            &[&[
                (0, 0),
                (300, 0),
                (300, 300),
                (200, 300),
                (200, 100),
                (100, 100),
                (100, 300),
                (0, 300),
            ]],
            3,
        ),
        (
            "ring",
            &[
                &[(0, 0), (300, 0), (300, 300), (0, 300)],
                &[(100, 100), (200, 100), (200, 200), (100, 200)],
            ],
            4,
        ),
    ];
    for (name, rings, least) in cases {
        let figure = figure(rings);
        let (count, area) = area_two_of_shots(&TILE, &figure);
        assert_eq!(count, least, "{name}");
        // Disjoint (examined), so equal areas and a correct print mean a partition.
        assert_eq!(area, figure.area_two(), "{name}");
        let bound = TILE.fracture(&job(&figure, 10.0, 2.0)).unwrap().lower_bound;
        assert_eq!(bound, Some(least), "{name}");
    }
}

#[test]
fn the_greatest_side_is_kept_without_slivers() {
    // 1004 nm at a greatest side of 1000 nm: 1000 + 4 would leave a sliver.
    for (length, pieces) in [(1000, 1), (1004, 2), (2000, 2), (5003, 6)] {
        let (count, area) = area_two_of_shots(&TILE, &bar(length, 60));
        assert_eq!(count, pieces, "{length} nm");
        assert_eq!(area, bar(length, 60).area_two());
    }
}

/// A disc of a radius in pixels of 2 nm.
fn pixel_disc(radius: i32) -> Figure {
    let rows: Vec<Figure> = (-radius..radius)
        .map(|row| {
            let y = f64::from(row) + 0.5;
            #[allow(clippy::cast_possible_truncation, reason = "at most the radius")]
            let half = (f64::from(radius * radius) - y * y).sqrt().round().max(1.0) as i64;
            let (low, high) = (2 * i64::from(row), 2 * i64::from(row) + 2);
            Figure::from_rect(Rect::new(
                Point::from_nm(-2 * half, low),
                Point::from_nm(2 * half, high),
            ))
        })
        .collect();
    merge(rows.iter().map(Figure::outer)).remove(0)
}

#[test]
fn a_curve_in_pixels_is_fractured_as_a_curve_unless_exact() {
    let disc = pixel_disc(40);
    let (curve, faults) = examine(&TILE, &job(&disc, 10.0, 2.0));
    assert!(faults.is_empty(), "{faults:#?}");
    assert!(
        curve.notes.iter().any(|n| n.contains("pixels")),
        "{:?}",
        curve.notes
    );
    // A drawn disc of this radius takes 5 tiles in the reference set (curvy, figure 2); an exact partition one for each change of width.
    assert!(curve.shots.len() <= 7, "{} tiles", curve.shots.len());

    let exact = Tile {
        exact: true,
        ..TILE
    };
    let cut = exact.fracture(&job(&disc, 10.0, 2.0)).unwrap();
    let area = |r: Rect| 2 * i128::from(r.width()) * i128::from(r.height());
    let total: i128 = cut.shots.rects().map(|(r, _)| area(r)).sum();
    assert_eq!(total, disc.area_two());
    assert!(cut.shots.len() > 20, "{} tiles", cut.shots.len());
}

#[test]
fn few_slivers_are_bought_with_tiles_and_the_price_is_said() {
    // A 100 nm bar with a 4 nm step at one end of its top and another at the other end of its bottom: one chord fewer than cuts
    // that avoid both slivers.
    let steps = figure(&[&[
        (0, 0),
        (200, 0),
        (200, 4),
        (400, 4),
        (400, 100),
        (200, 100),
        (200, 104),
        (0, 104),
    ]]);
    let few = |prefer| {
        let mut job = job(&steps, 10.0, 4.0);
        job.limits.sliver = shotwright::units::Nm(20.0);
        let tile = Tile { prefer, ..TILE };
        let fracture = tile.fracture(&job).unwrap();
        let slivers = fracture.shots.slivers(job.limits.sliver);
        (fracture.shots.len(), slivers, fracture.notes)
    };
    let (tiles, slivers, notes) = few(Prefer::FewTiles);
    assert!(notes.is_empty(), "{notes:?}");
    let (more, fewer, notes) = few(Prefer::FewSlivers);
    assert!(fewer <= slivers && more >= tiles);
    assert_eq!(more > tiles, !notes.is_empty(), "{tiles} {more} {notes:?}");
}
