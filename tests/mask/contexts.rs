//! Distinct figures and contexts.

use shotwright::geom::{Point, Rect};
use shotwright::layout::Placement;
use shotwright::mask::{DistinctFigure, Mask};

use crate::common::*;

#[test]
fn figures_equal_under_the_eight_orientations_are_one() {
    let placements = (0..8_i32).map(|k| Placement {
        mirror: k >= 4,
        angle_deg: 90.0 * f64::from(k % 4) - 360.0 * f64::from(k % 2),
        ..place(1, 1_000 * i64::from(k), 0)
    });
    let by_placement = layout(vec![
        cell("top", Vec::new(), placements.collect()),
        cell("hook", vec![shape(&HOOK)], Vec::new()),
    ]);
    let by_shape = flattened(&by_placement);
    assert_eq!(by_shape.cells[0].shapes.len(), 8);
    for l in [&by_placement, &by_shape] {
        let mask = build(l, 60.0);
        assert_eq!(mask.figures.len(), 1);
        let orientations: std::collections::BTreeSet<_> = mask.figures[0]
            .places
            .iter()
            .map(|p| p.transform.orientation)
            .collect();
        assert_eq!(orientations.len(), 8);
    }
    same_mask(&build(&by_placement, 60.0), &build(&by_shape, 60.0));
}

#[test]
fn context_enters_only_within_reach_and_is_cut_to_it() {
    let at_gap = |gap: i64| {
        flat(vec![
            rect(0, 0, 100, 100),
            rect(100 + gap, -1_000, 50, 3_000),
        ])
    };
    let square = |m: &Mask| {
        m.figures
            .iter()
            .find(|f| f.figure.area_nm2() == 10_000.0)
            .cloned()
            .expect("the square")
    };
    assert!(
        square(&build(&at_gap(60), 60.0)).context.is_empty(),
        "exactly at the reach is outside"
    );
    let near = square(&build(&at_gap(59), 60.0));
    assert_eq!(near.context.len(), 1);
    // One nanometre wide, from 60 below to 60 above the square.
    assert_eq!(near.context[0].area_nm2(), 220.0);
    // Diagonal: boxes within reach, outlines not (50·√2 = 70.7).
    let diagonal = flat(vec![rect(0, 0, 100, 100), rect(150, 150, 100, 100)]);
    assert_eq!(build(&diagonal, 60.0).figures.len(), 1);
    assert!(build(&diagonal, 60.0).figures[0].context.is_empty());
    assert_eq!(build(&diagonal, 71.0).figures[0].context.len(), 1);
}

#[test]
fn the_same_figure_in_other_surroundings_is_another_figure() {
    let l = flat(vec![
        rect(0, 0, 100, 100),
        rect(140, 0, 100, 100),
        rect(1_000, 0, 100, 100),
    ]);
    let mask = build(&l, 60.0);
    // The pair sees each other, mirrored; the third stands alone.
    assert_eq!(
        mask.figures
            .iter()
            .map(DistinctFigure::place_count)
            .collect::<Vec<_>>(),
        [2, 1]
    );
}

#[test]
fn a_mirrored_neighbourhood_of_slanted_figures_is_the_same_job() {
    let neighbour: [(i64, i64); 4] = [(60, -301), (113, -299), (353, 507), (300, 511)];
    let mirrored = |xy: &[(i64, i64)]| xy.iter().map(|&(x, y)| (-x - 5_000, y)).collect::<Vec<_>>();
    let l = flat(vec![
        shape(&HOOK),
        shape(&neighbour),
        shape(&mirrored(&HOOK)),
        shape(&mirrored(&neighbour)),
    ]);
    let mask = build(&l, 70.0);
    assert_eq!(mask.figures.len(), 2);
    assert!(
        mask.figures
            .iter()
            .all(|f| f.place_count() == 2 && f.context.len() == 1)
    );
}

#[test]
fn arbitrary_angles_and_magnifications_are_turned_in_floats_and_rounded_once() {
    let at = |angle_deg, magnification, mirror| {
        layout(vec![
            cell(
                "top",
                Vec::new(),
                vec![Placement {
                    angle_deg,
                    magnification,
                    mirror,
                    ..place(1, 5_000, 0)
                }],
            ),
            cell(
                "mid",
                Vec::new(),
                vec![Placement {
                    angle_deg: 15.0,
                    ..place(2, 0, 0)
                }],
            ),
            cell("square", vec![rect(0, 0, 1_000, 1_000)], Vec::new()),
        ])
    };
    // 30° + 15°, doubled: a diamond whose half diagonal is 2·1000/√2 nm; area 4·10⁶ nm² to within rounding.
    let mask = build(&at(30.0, 2.0, false), 0.0);
    let extent = mask.extent.expect("not empty");
    assert_eq!(extent.max.y, 2_828_427, "2·1000·√2 nm in whole pm");
    assert_eq!(
        (extent.min.x, extent.max.x),
        (5_000_000 - 1_414_214, 5_000_000 + 1_414_214)
    );
    assert!((mask.area_nm2() - 4e6).abs() < 5.0, "{}", mask.area_nm2());
    // 75° + 15° is a right angle again, exactly; mirrored, 15° − 15° is none at all.
    assert_eq!(
        build(&at(75.0, 1.0, false), 0.0).extent,
        Some(Rect::new(
            Point::from_nm(4_000, 0),
            Point::from_nm(5_000, 1_000)
        ))
    );
    assert_eq!(
        build(&at(15.0, 1.0, true), 0.0).extent,
        Some(Rect::new(
            Point::from_nm(5_000, -1_000),
            Point::from_nm(6_000, 0)
        ))
    );
}
