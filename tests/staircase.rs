//! The plain staircase against distances computed by another library, and its counts on the reference figures.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "numbers of test figures are small"
)]

use geo::{Distance, Euclidean, InterpolatePoint, LineString, Point as GeoPoint};
use proptest::prelude::*;
use shotwright::fracture::tile::{
    Prefer, StaircaseError, fracture_staircase, is_pixel_curve, partition, staircase,
};
use shotwright::geom::{Figure, Orientation, Point, Rect, Ring, Transform, merge, subtract};
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;

fn ring(points: impl Iterator<Item = (f64, f64)>) -> Ring {
    Ring::new(
        points
            .map(|(x, y)| Point::new((1e3 * x).round() as i64, (1e3 * y).round() as i64))
            .collect(),
    )
    .unwrap()
}

/// Radius `mean·(1 + wave·cos(lobes·φ))`, turned and shifted off the grid.
fn blob(mean: f64, wave: f64, lobes: u32, turn: f64) -> Ring {
    let n = (mean * 2.0) as u32 + 16;
    ring((0..n).map(|i| {
        let phi = std::f64::consts::TAU * f64::from(i) / f64::from(n);
        let r = mean * (1.0 + wave * (f64::from(lobes) * phi).cos());
        (r * (phi + turn).cos() + 0.37, r * (phi + turn).sin() - 0.81)
    }))
}

fn address(nm: f64) -> AddressUnit {
    AddressUnit::new(Nm(nm)).unwrap()
}

fn lines(figure: &Figure) -> Vec<LineString> {
    let line = |r: &Ring| {
        let mut points: Vec<(f64, f64)> = r.points().iter().map(|p| p.to_nm().into()).collect();
        points.push(points[0]);
        LineString::from(points)
    };
    figure.rings().map(line).collect()
}

/// The greatest distance from any place on one outline, sampled every half nanometre, to the other outline, nm.
fn strays(from: &Figure, to: &Figure) -> f64 {
    let to = lines(to);
    let mut worst: f64 = 0.0;
    for line in lines(from)
        .iter()
        .flat_map(|l| l.lines().collect::<Vec<_>>())
    {
        let (a, b): (GeoPoint, GeoPoint) = (line.start.into(), line.end.into());
        let steps = (2.0 * Euclidean.distance(a, b)).ceil().max(1.0);
        for i in 0..=steps as u32 {
            let p = Euclidean.point_at_ratio_between(a, b, f64::from(i) / steps);
            let distance = to
                .iter()
                .map(|l| Euclidean.distance(&p, l))
                .fold(f64::INFINITY, f64::min);
            worst = worst.max(distance);
        }
    }
    worst
}

fn assert_within(figure: &Figure, stairs: &Figure, within: f64, unit: i64) {
    assert!(stairs.is_rectilinear());
    assert!(
        stairs
            .rings()
            .flat_map(Ring::points)
            .all(|p| p.x % unit == 0 && p.y % unit == 0),
        "off the grid"
    );
    assert_eq!(stairs.holes().len(), figure.holes().len());
    // 2 pm for the rounding of offset outlines to whole picometres.
    let (out, back) = (strays(stairs, figure), strays(figure, stairs));
    assert!(
        out <= within + 0.002 && back <= within + 0.002,
        "strays by {out} and {back} nm, at most {within}"
    );
}

#[test]
fn blobs_rings_and_lobes_stay_within() {
    let mut seen = 0;
    for (mean, wave, lobes) in [
        (40.0, 0.0, 1),
        (120.0, 0.3, 3),
        (90.0, 0.5, 5),
        (200.0, 0.1, 7),
    ] {
        for (within, unit) in [(2.0, 1.0), (4.0, 0.25), (1.0, 0.1)] {
            for hole in [false, true] {
                let holes = hole
                    .then(|| blob(mean * 0.35, 0.1, 2, 1.0))
                    .into_iter()
                    .collect();
                let figure = Figure::new(blob(mean, wave, lobes, 0.3), holes);
                let stairs = staircase(&figure, Nm(within), address(unit)).unwrap();
                assert_within(&figure, &stairs, within, (1e3 * unit) as i64);
                seen += 1;
            }
        }
    }
    assert_eq!(seen, 24);
}

#[test]
fn a_long_slanted_edge_takes_steps_of_the_greatest_size_that_fits() {
    // A step of height h on a 45° edge strays by h/(2√2) each way: h = 2√2 · 4 nm = 11.3 nm, so 1000 nm take 89.
    let edge = [(0.0, 0.0), (60.0, 0.0), (1060.0, 1000.0), (1000.0, 1000.0)];
    let figure = Figure::new(ring(edge.into_iter()), vec![]);
    let stairs = staircase(&figure, Nm(4.0), address(0.1)).unwrap();
    assert_within(&figure, &stairs, 4.0, 100);
    let steps = stairs.vertices() / 4;
    assert!((89..=91).contains(&steps), "{steps} steps");
}

#[test]
fn a_disc_takes_as_many_slabs_as_its_slopes_ask_for() {
    // Derived: where the edge slopes by θ a step may be 2E/(sin θ cos θ) long, so a quadrant of radius R takes
    // ∫ R sin θ cos θ / 2E dθ = R/4E slabs, and the disc R/2E; each is one tile.
    for (radius, within) in [(200.0, 2.0), (400.0, 2.0), (400.0, 4.0)] {
        let figure = Figure::new(blob(radius, 0.0, 1, 0.0), vec![]);
        let stairs = staircase(&figure, Nm(within), address(0.05)).unwrap();
        let tiles = partition(&stairs, Nm(0.0), Prefer::FewTiles).unwrap().least as f64;
        let slabs = radius / (2.0 * within);
        assert!(
            (tiles / slabs - 1.0).abs() < 0.05,
            "{tiles} tiles, {slabs} slabs"
        );
    }
}

#[test]
fn drawn_flats_and_walls_stay_where_drawn() {
    // A bar with one bevelled corner: the other sides are straight and lie on the grid.
    let figure = Figure::new(
        ring(
            [
                (0.0, 0.0),
                (200.0, 0.0),
                (200.0, 70.0),
                (170.0, 100.0),
                (0.0, 100.0),
            ]
            .into_iter(),
        ),
        vec![],
    );
    let stairs = staircase(&figure, Nm(3.0), address(1.0)).unwrap();
    assert_within(&figure, &stairs, 3.0, 1000);
    assert_eq!(
        stairs.bounds(),
        Rect::new(Point::from_nm(0, 0), Point::from_nm(200, 100))
    );
}

#[test]
fn a_rectilinear_figure_passes_unchanged() {
    let figure = Figure::from_rect(Rect::new(Point::new(17, 3), Point::from_nm(90, 40)));
    assert_eq!(staircase(&figure, Nm(2.0), address(1.0)).unwrap(), figure);
}

#[test]
fn a_tolerance_finer_than_the_grid_is_refused() {
    let figure = Figure::new(blob(50.0, 0.0, 1, 0.0), vec![]);
    let error = staircase(&figure, Nm(0.2), address(1.0)).unwrap_err();
    assert!(matches!(error, StaircaseError::NoRoom { .. }));
    assert!(
        error.to_string().contains("1 nm") && error.to_string().contains("0.2 nm"),
        "{error}"
    );
}

#[test]
fn shots_of_a_staircase_cover_it_once_and_keep_the_greatest_side() {
    let limits = ShotLimits {
        address: address(1.0),
        least_side: Nm(8.0),
        greatest_side: Nm(100.0),
        sliver: Nm(10.0),
    };
    let figure = Figure::new(blob(150.0, 0.2, 4, 0.2), vec![blob(50.0, 0.1, 3, 0.0)]);
    let fracture = fracture_staircase(&figure, Nm(2.0), &limits).unwrap();
    let stairs = staircase(&figure, Nm(2.0), limits.address).unwrap();
    let rects: Vec<Figure> = fracture
        .shots
        .rects()
        .map(|(r, _)| Figure::from_rect(r))
        .collect();
    let union = merge(rects.iter().map(Figure::outer));
    assert!(subtract(&union, std::slice::from_ref(&stairs)).is_empty());
    assert!(subtract(std::slice::from_ref(&stairs), &union).is_empty());
    assert_eq!(
        rects.iter().map(Figure::area_two).sum::<i128>(),
        stairs.area_two(),
        "disjoint"
    );
    assert!(fracture.shots.shots().iter().all(|s| s.long_side() <= 100));
    assert_eq!(
        fracture.under_least_side,
        fracture
            .shots
            .shots()
            .iter()
            .filter(|s| s.short_side() < 8)
            .count()
    );
    assert!(fracture.slivers >= fracture.under_least_side && fracture.same_topology);
}

/// A disc of a radius in pixels of `pixel` nm.
fn pixel_disc(radius: i64, pixel: i64) -> Figure {
    let rects: Vec<Figure> = (-radius..radius)
        .map(|row| {
            let y = row as f64 + 0.5;
            let half = ((radius * radius) as f64 - y * y).sqrt().round().max(1.0) as i64;
            Figure::from_rect(Rect::new(
                Point::from_nm(-half * pixel, row * pixel),
                Point::from_nm(half * pixel, (row + 1) * pixel),
            ))
        })
        .collect();
    merge(rects.iter().map(Figure::outer)).remove(0)
}

#[test]
fn curves_in_pixels_are_told_from_rectilinear_figures() {
    let disc = pixel_disc(40, 2);
    assert!(is_pixel_curve(&disc, Nm(10.0)));
    assert!(
        !is_pixel_curve(&disc, Nm(0.5)),
        "steps much longer than σ print as steps"
    );
    let thin = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(5, 400)));
    assert!(!is_pixel_curve(&thin, Nm(10.0)), "line ends are no steps");
    let jog = ring(
        [
            (0.0, 0.0),
            (40.0, 0.0),
            (40.0, 300.0),
            (43.0, 300.0),
            (43.0, 600.0),
            (0.0, 600.0),
        ]
        .into_iter(),
    );
    assert!(
        !is_pixel_curve(&Figure::new(jog, vec![]), Nm(10.0)),
        "one jog is no curve"
    );
    assert!(
        !is_pixel_curve(&Figure::new(blob(50.0, 0.0, 1, 0.0), vec![]), Nm(10.0)),
        "slanted"
    );
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 24, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_blob_in_any_orientation_stays_within(
        mean in 20.0..120.0f64, wave in 0.0..0.5f64, lobes in 1u32..7, turn in 0.0..6.3f64, within in 1.5..5.0f64, which in 0usize..8,
    ) {
        let figure = Figure::new(blob(mean, wave, lobes, turn), vec![]);
        let t = Transform { orientation: Orientation::all()[which], shift: Point::new(123, -77) };
        let figure = figure.transformed(t);
        match staircase(&figure, Nm(within), address(0.5)) {
            Ok(stairs) => assert_within(&figure, &stairs, within, 500),
            Err(error) => prop_assert!(false, "{error}"),
        }
    }
}
