//! What must not change a fracture, and what must.

use rayon::prelude::*;
use shotwright::fracture::{Fracturer, Job};
use shotwright::geom::{Figure, Orientation, Point, Ring, Transform};
use shotwright::shot::ShotList;

use super::kinds::arc;
use super::print::wrong_pixels;
use super::sets::{ASSIST, CURVY, figures, job};
use super::{BOTH, Faults, TILE};

/// A few figures of different kinds with their σ.
fn samples() -> Vec<(Figure, f64)> {
    let (curvy, assist) = (figures(CURVY), figures(ASSIST));
    let picked = [1, 5, 10, 15].map(|i| (curvy[i].clone(), 10.0));
    let picked = picked.into_iter();
    picked
        .chain([3, 15].map(|i| (assist[i].clone(), 12.0)))
        .collect()
}

fn shots(fracturer: &dyn Fracturer, figure: &Figure, sigma: f64) -> ShotList {
    fracturer.fracture(&job(figure, sigma, 2.0)).unwrap().shots
}

/// Asserts that a change of the figure leaves its shots as they are, but for a shift of the result.
fn assert_unchanged(what: &str, change: impl Fn(&Figure) -> Figure, shift: Point) {
    let back = Transform {
        orientation: Orientation::IDENTITY,
        shift,
    };
    for (i, (figure, sigma)) in samples().iter().enumerate() {
        let figure = figure.clone().normalized();
        for fracturer in BOTH {
            let expected = shots(fracturer, &figure, *sigma).transformed(back);
            let found = shots(fracturer, &change(&figure), *sigma);
            assert!(
                found == expected,
                "{what}: sample {i}, {}: {} shots became {}",
                fracturer.name(),
                expected.len(),
                found.len()
            );
        }
    }
}

#[test]
fn a_shift_by_whole_addresses_shifts_the_shots() {
    // 0.1 nm is 100 pm.
    for shift in [
        Point::new(100, -300),
        Point::new(12_345_600, -7_890_100),
        Point::new(66_000_000_100, 52_000_000_700),
    ] {
        assert_unchanged(&format!("{shift:?}"), |f| f.translated(shift), shift);
    }
}

#[test]
fn running_again_gives_the_same() {
    assert_unchanged("again", Figure::clone, Point::new(0, 0));
}

#[test]
fn the_sense_and_the_start_of_a_ring_do_not_matter() {
    let ring = |f: &Figure| f.outer().points().to_vec();
    let solid = |points| Figure::new(Ring::new(points).unwrap(), Vec::new());
    let reversed = |f: &Figure| solid(ring(f).into_iter().rev().collect()).normalized();
    assert_unchanged("reversed", reversed, Point::new(0, 0));
    let turned = |f: &Figure| {
        let mut points = ring(f);
        points.rotate_left(17);
        solid(points).normalized()
    };
    assert_unchanged("started elsewhere", turned, Point::new(0, 0));
}

/// Every way to lay a figure onto its image that keeps the address grid of 100 pm.
fn ways(figure: &Figure, image: &Figure) -> Vec<Transform> {
    let way = |orientation| {
        let shift = Point::new(0, 0);
        let low = figure.transformed(Transform { orientation, shift });
        let (low, to) = (low.bounds().min, image.bounds().min);
        Transform {
            orientation,
            shift: Point::new(to.x - low.x, to.y - low.y),
        }
    };
    Orientation::all()
        .into_iter()
        .map(way)
        .filter(|way| way.shift.x % 100 == 0 && way.shift.y % 100 == 0)
        .filter(|&way| figure.transformed(way).normalized() == *image)
        .collect()
}

#[test]
fn a_mirrored_or_turned_figure_gives_the_mirrored_or_turned_tiles() {
    // A figure that is its own image may lie in several ways that look the same: its tiles are the image by one of them.
    let mut seen = 0;
    for (i, (figure, sigma)) in samples().iter().enumerate() {
        let figure = figure.clone().normalized();
        let expected = shots(&TILE, &figure, *sigma);
        for orientation in Orientation::all() {
            let turn = Transform {
                orientation,
                shift: Point::new(-12_300, 45_600),
            };
            let turned = figure.transformed(turn).normalized();
            let found = shots(&TILE, &turned, *sigma);
            let images = ways(&figure, &turned);
            assert!(images.contains(&turn));
            assert!(
                images.iter().any(|&way| expected.transformed(way) == found),
                "sample {i} {orientation:?}: {found:?}"
            );
            seen += 1;
        }
    }
    assert_eq!(seen, 6 * 8);
}

#[test]
fn every_orientation_prints() {
    let mut faults = Faults::default();
    for (i, (figure, sigma)) in samples().iter().enumerate() {
        for orientation in Orientation::all() {
            let turned = figure.transformed(Transform {
                orientation,
                shift: Point::new(0, 0),
            });
            for fracturer in BOTH {
                let name = format!("sample {i} {orientation:?}");
                faults.count(&name, fracturer, &job(&turned, *sigma, 2.0));
            }
        }
    }
    faults.assert_none();
}

#[test]
fn one_thread_and_two_give_the_same_shots() {
    let figures = figures(CURVY);
    for fracturer in BOTH {
        let [one, two] = [1, 2].map(|threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads);
            let all = || {
                figures
                    .par_iter()
                    .map(|f| shots(fracturer, f, 10.0))
                    .collect::<Vec<_>>()
            };
            pool.build().unwrap().install(all)
        });
        assert_eq!(one, two, "{}", fracturer.name());
    }
}

/// A bar 60 nm wide and about 300 nm long with round ends, and one beside it across a gap; both bend about one centre.
fn bars(gap: f64) -> [Figure; 2] {
    [2000.0, 2060.0 + gap].map(|radius| Figure::new(arc(30.0, radius, 300.0, 0.0), Vec::new()))
}

#[test]
fn a_figure_out_of_reach_is_no_context() {
    const SIGMA: f64 = 12.0;
    let [bar, far] = bars(5.0 * SIGMA + 4.0);
    for fracturer in BOTH {
        let alone = shots(fracturer, &bar, SIGMA);
        let context = std::slice::from_ref(&far);
        let job = Job {
            context,
            ..job(&bar, SIGMA, 2.0)
        };
        let beside = fracturer.fracture(&job).unwrap();
        assert!(beside.misses.is_empty());
        assert_eq!(alone, beside.shots, "{}", fracturer.name());
    }
}

#[test]
fn neighbours_print_together() {
    const SIGMA: f64 = 12.0;
    for gap in [40.0, 24.0] {
        let bars = bars(gap);
        for fracturer in BOTH {
            let lists = [(0, 1), (1, 0)].map(|(own, other)| {
                let job = Job {
                    context: std::slice::from_ref(&bars[other]),
                    ..job(&bars[own], SIGMA, 2.0)
                };
                let fracture = fracturer.fracture(&job).unwrap();
                assert!(
                    fracture.misses.is_empty(),
                    "gap {gap}, {}: {:?}",
                    fracturer.name(),
                    fracture.misses
                );
                fracture.shots
            });
            let [a, b] = &lists;
            let wrong = wrong_pixels(&[&bars[0], &bars[1]], &[a, b], SIGMA, 2.0);
            assert!(
                wrong.is_empty(),
                "gap {gap}, {}: {wrong:?}",
                fracturer.name()
            );
        }
    }
}

#[test]
fn a_near_neighbour_changes_the_shots() {
    // At 12 nm, one σ, the neighbour gives Φ(−1) = 0.16 at the edge: more than the 2 nm of tolerance.
    const SIGMA: f64 = 12.0;
    let [bar, near] = bars(12.0);
    for fracturer in BOTH {
        let job = Job {
            context: std::slice::from_ref(&near),
            ..job(&bar, SIGMA, 2.0)
        };
        let beside = fracturer.fracture(&job).unwrap().shots;
        assert_ne!(
            shots(fracturer, &bar, SIGMA),
            beside,
            "{}",
            fracturer.name()
        );
    }
}
