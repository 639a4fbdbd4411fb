//! Figures that cannot print, degenerate ones, enormous ones: an answer that does not lie, soon.

use std::time::{Duration, Instant};

use shotwright::fracture::{Fracture, Fracturer, MissReason};
use shotwright::geom::{Figure, Point, Rect, Ring};

use super::kinds::arc;
use super::print::wrong_pixels;
use super::sets::{job, limits};
use super::{BOTH, OVERLAP, TILE};

const SIGMA: f64 = 10.0;

fn ring(points: &[(i64, i64)]) -> Figure {
    let points = points.iter().map(|&(x, y)| Point::from_nm(x, y)).collect();
    Figure::new(Ring::new(points).unwrap(), Vec::new())
}

fn bar(width: i64, height: i64) -> Figure {
    Figure::from_rect(Rect::new(Point::new(0, 0), Point::from_nm(width, height)))
}

/// Fractures within half a minute (generous: a busy machine), and claims no print that the witness denies.
fn honest(name: &str, fracturer: &dyn Fracturer, figure: &Figure) -> Fracture {
    let start = Instant::now();
    let fracture = fracturer.fracture(&job(figure, SIGMA, 2.0)).unwrap();
    let took = start.elapsed();
    assert!(
        took < Duration::from_secs(30),
        "{name}, {}: {took:?}",
        fracturer.name()
    );
    if fracture.misses.is_empty() {
        let wrong = wrong_pixels(&[figure], &[&fracture.shots], SIGMA, 2.0);
        assert!(wrong.is_empty(), "{name}, {}: {wrong:?}", fracturer.name());
        for shot in fracture.shots.shots() {
            let side = |addresses| fracture.shots.address().coordinate(addresses).0;
            let (short, long) = (side(shot.short_side()), side(shot.long_side()));
            let lawful =
                short >= limits().least_side.0 - 1e-9 && long <= limits().greatest_side.0 + 1e-9;
            assert!(
                lawful || !fracture.notes.is_empty(),
                "{name}, {}: a shot of {short} nm by {long} nm without a word",
                fracturer.name()
            );
        }
    }
    fracture
}

#[test]
fn a_line_under_the_narrowest_misses_as_too_narrow() {
    // CHECKS: the narrowest line that prints is 1.34898 σ, 13.5 nm here; an exact cut prints it as drawn.
    let fracture = honest("line", &TILE, &bar(400, 12));
    assert!(!fracture.misses.is_empty());
    assert!(fracture.misses.iter().all(|m| m.must_print));
    assert!(
        fracture
            .misses
            .iter()
            .any(|m| m.reason == MissReason::TooNarrow)
    );
    assert!(honest("line", &TILE, &bar(400, 20)).misses.is_empty());
}

#[test]
fn a_square_under_the_smallest_misses() {
    // CHECKS: the narrowest square that prints is 2.10359 σ, 21 nm here.
    let fracture = honest("square", &TILE, &bar(19, 19));
    assert!(
        fracture
            .misses
            .iter()
            .any(|m| m.reason == MissReason::TooNarrow),
        "{:?}",
        fracture.misses
    );
    assert!(honest("square", &TILE, &bar(24, 24)).misses.is_empty());
}

#[test]
fn a_comb_finer_than_the_blur_misses_and_its_bar_prints() {
    // Slanted teeth 5 nm wide at a pitch of 12 nm on a bar: at σ = 10 nm the blur leaves exp(−2π²σ²/p²) ≈ 1e-6 of their contrast.
    let mut points = vec![(0, 0), (240, 0)];
    for tooth in (0..20).rev() {
        let x = 12 * tooth;
        points.extend([(x + 7, 60), (x + 6, 120), (x + 1, 120), (x, 60)]);
    }
    let comb = ring(&points);
    for fracturer in BOTH {
        let fracture = honest("comb", fracturer, &comb);
        assert!(!fracture.misses.is_empty(), "{}", fracturer.name());
        assert!(
            !fracture.shots.is_empty(),
            "{}: the bar prints all the same",
            fracturer.name()
        );
    }
}

#[test]
fn thin_and_tiny_figures_get_an_honest_answer() {
    let thin = Figure::new(arc(6.0, 150.0, 400.0, 0.3), Vec::new());
    let hair = Figure::new(arc(2.0, 150.0, 400.0, 0.3), Vec::new());
    let needle = ring(&[(0, 0), (600, 20), (0, 40)]);
    let sliver = ring(&[(0, 0), (1000, 1), (3, 1)]);
    let star = ring(&[
        (0, 0),
        (60, 25),
        (120, 0),
        (95, 60),
        (120, 120),
        (60, 95),
        (0, 120),
        (25, 60),
    ]);
    let figures = [
        ("thin arc", thin),
        ("hair", hair),
        ("needle", needle),
        ("sliver", sliver),
        ("star", star),
        ("dot", bar(1, 1)),
        ("speck", ring(&[(0, 0), (9, 2), (4, 11)])),
    ];
    for (name, figure) in &figures {
        for fracturer in BOTH {
            honest(name, fracturer, figure);
        }
    }
}

#[test]
fn a_figure_without_area_is_refused_or_gets_no_shot() {
    let flat = ring(&[(0, 0), (100, 0), (50, 0)]);
    for fracturer in BOTH {
        let made = fracturer.fracture(&job(&flat, SIGMA, 2.0));
        assert!(
            made.is_err() || made.is_ok_and(|f| f.shots.is_empty()),
            "{}",
            fracturer.name()
        );
    }
}

#[test]
fn a_bar_of_a_millimetre_takes_a_thousand_tiles_at_once() {
    let start = Instant::now();
    let fracture = TILE
        .fracture(&job(&bar(1_000_000, 100), SIGMA, 2.0))
        .unwrap();
    assert!(fracture.misses.is_empty());
    assert_eq!(fracture.shots.len(), 1000);
    assert!(
        start.elapsed() < Duration::from_secs(60),
        "{:?}",
        start.elapsed()
    );
}

#[test]
fn a_long_bar_takes_no_more_overlaps_than_its_length_asks_for() {
    let fracture = honest("long bar", &OVERLAP, &bar(20_000, 100));
    assert!(fracture.misses.is_empty(), "{:?}", fracture.misses[0]);
    // 20 shots of 1000 nm are as long as the bar, and its ends may fall short by 2 nm; one more for what has to overlap.
    let count = fracture.shots.len();
    assert!((20..=21).contains(&count), "{count} shots");
}
