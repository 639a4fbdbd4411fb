//! Counted, not copied.

use shotwright::geom::Point;
use shotwright::layout::{Placement, Shape};
use shotwright::mask::{self, DistinctFigure, MaskError};
use shotwright::units::Nm;

use crate::common::*;

#[test]
fn an_array_is_one_figure_with_one_place() {
    let l = layout(vec![
        cell(
            "top",
            Vec::new(),
            vec![Placement {
                repetition: array(10_000, 10_000, (200, 200)),
                ..place(1, 0, 0)
            }],
        ),
        cell("square", vec![rect(0, 0, 100, 100)], Vec::new()),
    ]);
    let mask = build(&l, 60.0);
    assert_eq!((mask.figures.len(), mask.figures[0].places.len()), (1, 1));
    assert_eq!(mask.place_count(), 100_000_000);
    assert_nm2(&mask, 1e12);
    assert_eq!(
        mask.extent.map(|r| r.max),
        Some(Point::from_nm(200 * 9_999 + 100, 200 * 9_999 + 100))
    );
}

#[test]
fn nested_arrays_of_1e18_placements_give_a_count() {
    // Pitches that no single lattice can hold: 1000 × 1000, three levels deep.
    let level = |child, pitch| {
        vec![Placement {
            repetition: array(1_000, 1_000, (pitch, pitch)),
            ..place(child, 0, 0)
        }]
    };
    let l = layout(vec![
        cell("top", Vec::new(), level(1, 200_000_000 + 7_000_000)),
        cell("block", Vec::new(), level(2, 200_000 + 3_000)),
        cell("row", Vec::new(), level(3, 200)),
        cell("square", vec![rect(0, 0, 50, 50)], Vec::new()),
    ]);
    let mask = build(&l, 60.0);
    assert_eq!(mask.figures.len(), 1);
    assert_eq!(mask.place_count(), 1_000_000_000_000_000_000);
    assert_nm2(&mask, 2_500.0 * 1e18);
}

#[test]
fn arrays_that_interact_beyond_the_limit_are_refused_with_the_number() {
    let l = flat(vec![Shape {
        repetition: array(100_000, 100_000, (90, 90)),
        ..rect(0, 0, 50, 50)
    }]);
    let error = mask::build(&l, &options(60.0)).expect_err("too many");
    assert!(
        matches!(
            error,
            MaskError::TooMany {
                found: 10_000_000_000,
                limit: mask::MAX_PARTS,
                ..
            }
        ),
        "{error}"
    );
    assert_eq!(
        build(&l, 30.0).place_count(),
        10_000_000_000,
        "with less reach they stand apart"
    );
}

#[test]
fn what_touches_an_array_is_resolved_there_and_the_rest_stays_counted() {
    let l = layout(vec![
        cell(
            "top",
            vec![rect(100_000, 100_040, 30, 30)],
            vec![Placement {
                repetition: array(100_000, 100_000, (200, 200)),
                ..place(1, 0, 0)
            }],
        ),
        cell("square", vec![rect(0, 0, 100, 100)], Vec::new()),
    ]);
    let mask = build(&l, 60.0);
    // The small square lies within the square at (500, 500) and vanishes in it.
    assert_eq!(mask.figures.len(), 1);
    assert_eq!(mask.place_count(), 10_000_000_000);
    let beside = layout(vec![
        cell(
            "top",
            vec![rect(100_110, 100_040, 30, 30)],
            l.cells[0].placements.clone(),
        ),
        l.cells[1].clone(),
    ]);
    let mask = build(&beside, 60.0);
    // Itself, its left neighbour at 10 nm and, at exactly 60 nm, none to the right.
    assert_eq!(mask.place_count(), 10_000_000_001);
    assert_eq!(mask.figures.len(), 3);
}

#[test]
fn a_frame_around_an_array_does_not_unpack_it() {
    let side = 200 * 100_000;
    let o = 1_000;
    let frame = shape(&[
        (-2 * o, -2 * o),
        (side + 2 * o, -2 * o),
        (side + 2 * o, side + 2 * o),
        (-2 * o, side + 2 * o),
        (-2 * o, -o),
        (-o, -o),
        (-o, side + o),
        (side + o, side + o),
        (side + o, -o),
        (-2 * o, -o),
    ]);
    let l = layout(vec![
        cell(
            "top",
            vec![frame],
            vec![Placement {
                repetition: array(100_000, 100_000, (200, 200)),
                ..place(1, 0, 0)
            }],
        ),
        cell("square", vec![rect(0, 0, 100, 100)], Vec::new()),
    ]);
    let mask = build(&l, 60.0);
    assert_eq!(
        (mask.figures.len(), mask.place_count()),
        (2, 10_000_000_001)
    );
}

#[test]
fn crosses_drawn_as_two_repeated_bars_stay_counted() {
    let repetition = array(10_000, 10_000, (300, 300));
    let bars = [rect(0, 40, 100, 20), rect(40, 0, 20, 100)].map(|s| Shape {
        repetition: repetition.clone(),
        ..s
    });
    let mask = build(&flat(bars.to_vec()), 60.0);
    assert_eq!((mask.figures.len(), mask.place_count()), (1, 100_000_000));
    assert_nm2(&mask, 1e8 * (2.0 * 2_000.0 - 400.0));
}

#[test]
fn the_parts_of_a_cell_that_keep_clear_stay_counted_when_others_meet() {
    // Bars reach into the next copy and make long lines; the squares between stay alone.
    let l = layout(vec![
        cell(
            "top",
            Vec::new(),
            vec![Placement {
                repetition: array(100, 50, (300, 400)),
                ..place(1, 0, 0)
            }],
        ),
        cell(
            "pair",
            vec![rect(0, 0, 310, 50), rect(100, 200, 50, 50)],
            Vec::new(),
        ),
    ]);
    let mask = build(&l, 60.0);
    assert_eq!(mask.place_count(), 50 + 5_000);
    assert_eq!(mask.figures.len(), 2);
    same_mask(&mask, &build(&flattened(&l), 60.0));
}

#[test]
fn a_pitch_off_the_address_grid_gives_one_figure_for_each_position_on_it() {
    let mut l = flat(vec![Shape {
        repetition: array(1_000, 1, (801, 0)),
        ..rect(0, 0, 400, 400)
    }]);
    l.unit = Nm(0.25);
    let mask = build(&l, 50.0);
    assert_eq!(mask.place_count(), 1_000);
    let corners: Vec<i64> = mask
        .figures
        .iter()
        .map(|f| f.figure.bounds().min.x)
        .collect();
    // Positions 0, 0.25, 0.5 and 0.75 nm; a square at 0.75 mirrors into one at 0.25.
    assert_eq!(corners.len(), 3, "{corners:?}");
    assert_eq!(
        mask.figures.iter().map(DistinctFigure::place_count).max(),
        Some(500)
    );
    for place in mask.figures.iter().flat_map(|f| &f.places) {
        assert_eq!(
            (
                place.transform.shift.x % 1_000,
                place.transform.shift.y % 1_000
            ),
            (0, 0)
        );
        for d in place.repetition.displacements() {
            assert_eq!((d.x % 1_000, d.y % 1_000), (0, 0));
        }
    }
}
