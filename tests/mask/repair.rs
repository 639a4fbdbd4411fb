//! Merging and repair.

use shotwright::geom::{Point, Rect};
use shotwright::layout::{self, Layout};
use shotwright::mask::{self, MaskError, MaskOptions};
use shotwright::units::Nm;

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

#[test]
fn an_outline_left_open_is_closed_and_counted_or_refused() {
    let open = "POLYGON ((0 0, 100 0, 100 100, 0 100))";
    let open = layout::read(open.as_bytes(), "open").expect("closed by rule");
    let mask = build(&open, 0.0);
    assert_nm2(&mask, 10_000.0);
    let note = "1 × outline that was not closed: closed by a straight edge";
    assert_eq!(mask.notes, [note]);
    let strict = MaskOptions {
        strict: true,
        ..options(0.0)
    };
    assert_eq!(
        mask::build(&open, &strict).err(),
        Some(MaskError::OpenOutlines { count: 1 })
    );
}

#[test]
fn polygons_that_are_rounded_are_counted() {
    let third = Layout {
        unit: Nm(1.0 / 3.0),
        ..flat(vec![rect(0, 0, 300, 600), rect(900, 0, 301, 600)])
    };
    let note = "1 polygon with points between whole picometres: each rounded to the nearest";
    assert_eq!(build(&third, 0.0).notes, [note]);
}

#[test]
fn a_mask_larger_than_any_plate_is_refused_before_work() {
    let scaled = |scale: f64| {
        let options = MaskOptions {
            scale,
            ..options(60.0)
        };
        let mask = mask::build(&flat(vec![rect(0, 0, 2_000, 500)]), &options).expect("sound");
        mask.check_size()
    };
    assert_eq!(scaled(1e6), Ok(()));
    let refused = scaled(1.01e6).expect_err("2.02 m");
    assert_eq!(
        refused.to_string(),
        "the mask would be 2.020000 m × 0.505000 m, expected at most 2 m a side; is the scale or the database unit right?"
    );
}
