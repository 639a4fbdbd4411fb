//! Laws that hold for every layout.

use proptest::prelude::*;

use shotwright::geom::{Figure, Orientation, Point, Repetition, Ring};
use shotwright::layout::{CellId, Layout, Placement, Shape};
use shotwright::mask::Mask;
use shotwright::units::Nm;

use crate::common::*;

/// A layout with two levels of hierarchy, overlaps and arrays, within a few µm. Rectilinear ones have all
/// orientations; slanted ones none, for where slanted edges cross the place is rounded, and a turned cell rounds another way.
fn any_layout() -> impl Strategy<Value = Layout> {
    prop_oneof![layouts(true), layouts(false)]
}

pub(crate) fn layouts(slanted: bool) -> impl Strategy<Value = Layout> {
    let coordinate = || -400i64..400;
    let corners = |n| prop::collection::vec((coordinate(), coordinate()), n);
    let polygon = move || {
        let any = if slanted {
            prop_oneof![
                corners(3..7).prop_map(|xy| shape(&xy)),
                (coordinate(), coordinate())
                    .prop_map(|(x, y)| shape(&HOOK.map(|(u, v)| (x + u, y + v)))),
            ]
            .boxed()
        } else {
            // Steps through the corners, crossing themselves more often than not.
            let stepped = |xy: Vec<(i64, i64)>| {
                let next = |k: usize| xy[(k + 1) % xy.len()];
                (0..xy.len())
                    .flat_map(|k| [xy[k], (next(k).0, xy[k].1)])
                    .collect::<Vec<_>>()
            };
            corners(2..5)
                .prop_map(move |xy| shape(&stepped(xy)))
                .boxed()
        };
        let bar = (coordinate(), coordinate(), 1i64..200, 1i64..200);
        prop_oneof![bar.prop_map(|(x, y, w, h)| rect(x, y, w, h)), any]
    };
    let repetition = || {
        prop_oneof![
            3 => Just(Repetition::Once),
            2 => (1u64..4, 1u64..4, 100i64..1_500, 100i64..1_500, -60i64..60).prop_map(|(columns, rows, x, y, skew)| Repetition::Lattice {
                columns, rows, a: Point::new(x, 0), b: Point::new(skew / 30 * 30, y),
            }),
            1 => prop::collection::vec((coordinate(), coordinate()), 0..3).prop_map(|xy| {
                let mut list = vec![Point::default()];
                list.extend(points(&xy));
                Repetition::List(list)
            }),
        ]
    };
    let repeated =
        move || (polygon(), repetition()).prop_map(|(s, repetition)| Shape { repetition, ..s });
    let placement = move |child: usize| {
        (
            -3_000i64..3_000,
            -3_000i64..3_000,
            if slanted {
                Just(false).boxed()
            } else {
                any::<bool>().boxed()
            },
            if slanted { 0..1 } else { 0..4 },
            repetition(),
        )
            .prop_map(move |(x, y, mirror, quarters, repetition)| Placement {
                mirror,
                angle_deg: 90.0 * f64::from(quarters),
                repetition,
                ..place(child, x, y)
            })
    };
    let shapes = move |n| prop::collection::vec(repeated(), 0..n);
    (
        (
            shapes(3),
            prop::collection::vec(prop_oneof![placement(1), placement(2)], 1..4),
        ),
        (shapes(3), prop::collection::vec(placement(2), 0..3)),
        prop::collection::vec(polygon(), 1..3),
    )
        .prop_map(|(top, middle, leaf)| {
            layout(vec![
                cell("top", top.0, top.1),
                cell("middle", middle.0, middle.1),
                cell("leaf", leaf, Vec::new()),
            ])
        })
        // A cell nothing places would be a second top.
        .prop_filter("every cell is placed", |l| {
            (1..3).all(|id| {
                l.cells
                    .iter()
                    .any(|c| c.placements.iter().any(|p| p.cell == CellId(id)))
            })
        })
}

/// Figures with contexts and counts, places left out.
fn jobs(mask: &Mask) -> Vec<(Figure, Vec<Figure>, u128)> {
    let mut jobs: Vec<_> = mask
        .figures
        .iter()
        .map(|f| (f.figure.clone(), f.context.clone(), f.place_count()))
        .collect();
    jobs.sort();
    jobs
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn hierarchy_changes_nothing(l in any_layout(), reach in 0i64..150) {
        let (kept, flat) = (build(&l, reach as f64), build(&flattened(&l), reach as f64));
        prop_assert_eq!(written_out(&kept), written_out(&flat));
        prop_assert_eq!(jobs(&kept), jobs(&flat));
        prop_assert_eq!(kept.extent, flat.extent);
    }

    #[test]
    fn the_order_of_cells_and_shapes_changes_nothing(l in any_layout(), turn in 0usize..3) {
        let mut permuted = l.clone();
        for c in &mut permuted.cells {
            let mut shapes = c.shapes.to_vec();
            shapes.reverse();
            c.shapes = shapes.into();
            let n = c.placements.len().max(1);
            c.placements.rotate_left(turn % n);
        }
        permuted.cells.rotate_right(turn);
        for p in permuted.cells.iter_mut().flat_map(|c| &mut c.placements) {
            p.cell = CellId((p.cell.0 + turn) % 3);
        }
        let (a, b) = (build(&l, 60.0), build(&permuted, 60.0));
        prop_assert_eq!(format!("{:?}", (&a.figures, a.extent)), format!("{:?}", (&b.figures, b.extent)));
    }

    #[test]
    fn a_shift_by_whole_address_units_changes_only_places(l in any_layout(), x in -90_000i64..90_000, y in -90_000i64..90_000) {
        let mut shifted = l.clone();
        shifted.cells.insert(0, cell("shift", Vec::new(), Vec::new()));
        for p in shifted.cells.iter_mut().flat_map(|c| &mut c.placements) {
            p.cell.0 += 1;
        }
        shifted.cells[0].placements.push(place(1, x, y));
        let moved: Vec<Figure> = written_out(&build(&l, 60.0)).iter().map(|f| f.translated(Point::from_nm(x, y))).collect();
        let shifted = build(&shifted, 60.0);
        prop_assert_eq!(jobs(&shifted), jobs(&build(&l, 60.0)));
        prop_assert_eq!(written_out(&shifted), moved);
    }

    #[test]
    fn a_mirror_changes_only_places(seed in 1u64..1_000, quarters in 0u8..4) {
        // Polygons apart from each other: where slanted edges cross, the rounded crossing may differ by a picometre.
        let polygons: Vec<Vec<Point>> = random_polygons(seed, 6)
            .into_iter()
            .enumerate()
            .map(|(k, p)| p.into_iter().map(|q| Point::new(q.x % 700 + 900 * k as i64, q.y % 700)).collect())
            .collect();
        let all = |t: Orientation| {
            let shapes = polygons.iter().map(|p| Shape { layer: LAYER, points: p.iter().map(|&q| t.apply(q)).collect(), repetition: Repetition::Once });
            build(&flat(shapes.collect()), 60.0)
        };
        let (a, b) = (all(Orientation::IDENTITY), all(Orientation::new(true, quarters)));
        prop_assert!((a.area_nm2() - b.area_nm2()).abs() < 1.0);
        if polygons.iter().all(|p| Ring::new(p.clone()).is_some_and(|r| shotwright::geom::merge([&r]).iter().map(Figure::area_two).sum::<i128>() == r.area_two().abs())) {
            prop_assert_eq!(jobs(&a), jobs(&b));
        }
    }

    #[test]
    fn reversing_every_ring_changes_nothing(l in any_layout()) {
        let mut reversed = l.clone();
        for c in &mut reversed.cells {
            let mut shapes = c.shapes.to_vec();
            for s in &mut shapes {
                s.points.reverse();
            }
            c.shapes = shapes.into();
        }
        let (a, b) = (build(&l, 60.0), build(&reversed, 60.0));
        prop_assert_eq!(format!("{:?}", (&a.figures, a.extent)), format!("{:?}", (&b.figures, b.extent)));
    }

    #[test]
    fn every_place_lies_on_the_address_grid(l in any_layout(), quarter_nm in 1i64..8) {
        let fine = Layout { unit: Nm(0.25 * quarter_nm as f64), ..l };
        let mask = build(&fine, 60.0);
        for f in &mask.figures {
            prop_assert!(!f.places.is_empty());
            let corner = f.figure.bounds().min;
            prop_assert!((0..1_000).contains(&corner.x) && (0..1_000).contains(&corner.y));
            for p in &f.places {
                for d in p.repetition.displacements() {
                    let at = p.transform.shift + d;
                    prop_assert_eq!((at.x % 1_000, at.y % 1_000), (0, 0));
                }
            }
        }
        prop_assert_eq!(written_out(&mask), written_out(&build(&flattened(&fine), 60.0)));
    }
}
