//! Merging and repair.

use shotwright::geom::{Point, Rect};

use crate::common::*;

#[test]
fn a_keyholed_ring_becomes_a_figure_with_a_hole() {
    let keyhole = shape(&[
        (0, 0),
        (100, 0),
        (100, 100),
        (0, 100),
        (0, 30),
        (30, 30),
        (30, 70),
        (70, 70),
        (70, 30),
        (0, 30),
    ]);
    let mask = build(&flat(vec![keyhole]), 0.0);
    assert_eq!(mask.figures.len(), 1);
    assert_eq!(mask.figures[0].figure.holes().len(), 1);
    assert_nm2(&mask, 100.0 * 100.0 - 40.0 * 40.0);
    assert!(
        mask.notes.is_empty(),
        "a keyhole is no defect: {:?}",
        mask.notes
    );
}

#[test]
fn overlapping_polygons_unite_whatever_their_sense() {
    let reversed = shape(&[(50, 50), (50, 150), (150, 150), (150, 50)]);
    let mask = build(
        &flat(vec![rect(0, 0, 100, 100), reversed, rect(0, 0, 100, 100)]),
        0.0,
    );
    assert_eq!(mask.place_count(), 1);
    assert_nm2(&mask, 2.0 * 10_000.0 - 2_500.0);
}

#[test]
fn defects_are_repaired_by_rule_and_counted() {
    let bow_tie = shape(&[(0, 0), (100, 100), (100, 0), (0, 100)]);
    let flat_line = shape(&[(0, 500), (100, 500), (50, 500)]);
    let stutter = shape(&[
        (300, 0),
        (300, 0),
        (400, 0),
        (400, 100),
        (400, 100),
        (300, 100),
    ]);
    let spike = shape(&[
        (600, 0),
        (700, 0),
        (700, 100),
        (650, 100),
        (650, 300),
        (650, 100),
        (600, 100),
    ]);
    let mask = build(&flat(vec![bow_tie, flat_line, stutter, spike]), 0.0);
    // Two triangles of 100 × 50 / 2, two squares.
    assert_nm2(&mask, 2.0 * 2_500.0 + 2.0 * 10_000.0);
    assert_eq!(
        mask.notes,
        [
            "1 polygon with a self-crossing outline: all it winds round was filled",
            "1 polygon without area: dropped",
            "1 polygon with repeated points: each kept once",
            "1 polygon with a spike that has no area: the spike was dropped",
        ]
    );
    assert_eq!(
        mask.extent,
        Some(Rect::new(Point::from_nm(0, 0), Point::from_nm(700, 100)))
    );
}

#[test]
fn a_negative_lobe_does_not_erase_what_lies_under_it() {
    let bow_tie = shape(&[(0, 0), (100, 100), (100, 0), (0, 100)]);
    let mask = build(&flat(vec![bow_tie, rect(0, 0, 100, 100)]), 0.0);
    assert_nm2(&mask, 10_000.0);
}

#[test]
fn a_figure_inside_a_hole_stays_apart_and_a_pad_over_it_swallows_both() {
    let ring = shape(&[
        (0, 0),
        (300, 0),
        (300, 300),
        (0, 300),
        (0, 50),
        (50, 50),
        (50, 250),
        (250, 250),
        (250, 50),
        (0, 50),
    ]);
    let inside = rect(120, 120, 60, 60);
    let mask = build(&flat(vec![ring.clone(), inside.clone()]), 0.0);
    assert_eq!(mask.place_count(), 2);
    let covered = build(&flat(vec![ring, inside, rect(0, 0, 300, 300)]), 0.0);
    assert_eq!(covered.place_count(), 1);
    assert_nm2(&covered, 90_000.0);
}
