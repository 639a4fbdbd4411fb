//! Layout → mask against areas by hand, a second boolean engine, and laws that must hold for every layout.

use geo_booleanop::boolean::BooleanOp;
use proptest::prelude::*;

use shotwright::geom::{Figure, Orientation, Point, Rect, Repetition, Ring, Transform};
use shotwright::layout::{Cell, CellId, Layer, Layout, Placement, Shape};
use shotwright::mask::{self, DistinctFigure, Mask, MaskError, MaskOptions};
use shotwright::shot::AddressUnit;
use shotwright::units::Nm;

const LAYER: Layer = Layer {
    layer: 1,
    datatype: 0,
};

fn options(reach_nm: f64) -> MaskOptions {
    MaskOptions {
        layers: Vec::new(),
        scale: 1.0,
        reach: Nm(reach_nm),
        address: AddressUnit::new(Nm(1.0)).expect("1 nm"),
    }
}

fn points(xy: &[(i64, i64)]) -> Vec<Point> {
    xy.iter().map(|&(x, y)| Point::new(x, y)).collect()
}

fn shape(xy: &[(i64, i64)]) -> Shape {
    Shape {
        layer: LAYER,
        points: points(xy),
        repetition: Repetition::Once,
    }
}

fn rect(x: i64, y: i64, w: i64, h: i64) -> Shape {
    shape(&[(x, y), (x + w, y), (x + w, y + h), (x, y + h)])
}

fn cell(name: &str, shapes: Vec<Shape>, placements: Vec<Placement>) -> Cell {
    Cell {
        name: name.to_owned(),
        shapes,
        placements,
    }
}

fn place(cell: usize, x: i64, y: i64) -> Placement {
    Placement {
        cell: CellId(cell),
        origin: Point::new(x, y),
        mirror: false,
        angle_deg: 0.0,
        magnification: 1.0,
        repetition: Repetition::Once,
    }
}

fn array(columns: u64, rows: u64, pitch: (i64, i64)) -> Repetition {
    Repetition::Lattice {
        columns,
        rows,
        a: Point::new(pitch.0, 0),
        b: Point::new(0, pitch.1),
    }
}

/// Cells in nanometres; the first is the top.
fn layout(cells: Vec<Cell>) -> Layout {
    Layout {
        unit: Nm(1.0),
        cells,
        notes: Vec::new(),
    }
}

fn flat(shapes: Vec<Shape>) -> Layout {
    layout(vec![cell("top", shapes, Vec::new())])
}

fn build(layout: &Layout, reach_nm: f64) -> Mask {
    mask::build(layout, &options(reach_nm)).expect("a sound layout")
}

fn assert_nm2(mask: &Mask, expected: f64) {
    let found = mask.area_nm2();
    assert!(
        (found - expected).abs() <= 1e-9 * expected,
        "area {found} nm², expected {expected}"
    );
}

/// All figures at all places, normalized and sorted: the mask with its hierarchy written out.
fn written_out(mask: &Mask) -> Vec<Figure> {
    let mut all: Vec<Figure> = mask
        .figures
        .iter()
        .flat_map(|f| {
            f.places
                .iter()
                .flat_map(move |p| p.repetition.displacements().map(move |d| (f, p, d)))
        })
        .map(|(f, p, d)| f.figure.transformed(p.transform).translated(d).normalized())
        .collect();
    all.sort();
    all
}

/// Every layout as one cell with every repetition and placement written out, by the definition and nothing clever.
fn flattened(layout: &Layout) -> Layout {
    fn walk(layout: &Layout, id: usize, at: Transform, out: &mut Vec<Shape>) {
        for s in &layout.cells[id].shapes {
            for d in s.repetition.displacements() {
                let points = s.points.iter().map(|&p| at.apply(p + d)).collect();
                out.push(Shape {
                    layer: s.layer,
                    points,
                    repetition: Repetition::Once,
                });
            }
        }
        for p in &layout.cells[id].placements {
            for d in p.repetition.displacements() {
                let quarters = (0..4_u8)
                    .find(|&q| f64::from(q) == (p.angle_deg / 90.0).rem_euclid(4.0))
                    .expect("a right angle");
                // y → −y is x → −x and a half turn.
                let orientation =
                    Orientation::new(p.mirror, quarters + if p.mirror { 2 } else { 0 });
                let own = Transform {
                    orientation,
                    shift: p.origin + d,
                };
                walk(layout, p.cell.0, own.then(at), out);
            }
        }
    }
    let mut shapes = Vec::new();
    walk(layout, 0, Transform::IDENTITY, &mut shapes);
    Layout {
        unit: layout.unit,
        ..flat(shapes)
    }
}

fn same_mask(a: &Mask, b: &Mask) {
    assert_eq!(written_out(a), written_out(b));
    let keys = |m: &Mask| {
        let mut keys: Vec<_> = m
            .figures
            .iter()
            .map(|f| (f.figure.clone(), f.context.clone(), f.place_count()))
            .collect();
        keys.sort();
        keys
    };
    assert_eq!(keys(a), keys(b));
    assert_eq!(a.extent, b.extent);
}

// ---- merging and repair

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

// ---- layers, units, errors

#[test]
fn layers_are_chosen_or_listed() {
    let mut two = flat(vec![
        rect(0, 0, 10, 10),
        rect(100, 0, 10, 10),
        rect(0, 0, 50, 50),
    ]);
    two.cells[0].shapes[2].layer = Layer {
        layer: 7,
        datatype: 3,
    };
    let error = mask::build(&two, &options(0.0)).expect_err("two layers");
    assert_eq!(
        error.to_string(),
        "no layer named, expected exactly one in the layout; found: 1/0 (2 polygons), 7/3 (1 polygon)"
    );
    let named = |layers: &[Layer]| {
        mask::build(
            &two,
            &MaskOptions {
                layers: layers.to_vec(),
                ..options(0.0)
            },
        )
    };
    assert_nm2(&named(&[LAYER]).expect("there"), 200.0);
    assert_nm2(
        &named(&[
            LAYER,
            Layer {
                layer: 7,
                datatype: 3,
            },
        ])
        .expect("both"),
        2_600.0,
    );
    assert_eq!(
        named(&[Layer {
            layer: 2,
            datatype: 0
        }])
        .expect_err("not there")
        .to_string(),
        "layer 2/0 holds no polygon; layers found: 1/0 (2 polygons), 7/3 (1 polygon)"
    );
}

#[test]
fn scale_multiplies_and_odd_units_round_to_the_nearest_picometre() {
    let scaled = mask::build(
        &flat(vec![rect(0, 0, 25, 10)]),
        &MaskOptions {
            scale: 4.0,
            ..options(0.0)
        },
    );
    assert_nm2(&scaled.expect("sound"), 4_000.0);
    // A stored real a hair under 1 nm is 1 nm.
    let hair = Layout {
        unit: Nm(0.999_999_999_999_999_9),
        ..flat(vec![rect(0, 0, 1_000_000, 1)])
    };
    assert_eq!(
        build(&hair, 0.0).extent.map(|r| r.max),
        Some(Point::from_nm(1_000_000, 1))
    );
    // A third of a nanometre: 1, 2, 3 units are 333, 667, 1000 pm.
    let third = Layout {
        unit: Nm(1.0 / 3.0),
        ..flat(vec![rect(1, 2, 2, 1)])
    };
    let extent = build(&third, 0.0).extent.expect("not empty");
    assert_eq!(
        extent,
        Rect::new(Point::new(333, 667), Point::new(1_000, 1_000))
    );
}

#[test]
fn a_lattice_that_is_no_whole_picometres_keeps_its_last_element_in_place() {
    let third = Layout {
        unit: Nm(1.0 / 3.0),
        ..flat(vec![Shape {
            repetition: array(3_000, 1, (1_000, 0)),
            ..rect(0, 0, 30, 30)
        }])
    };
    let mask = build(&third, 0.0);
    assert_eq!(mask.place_count(), 3_000);
    // 2 999 × 1 000 / 3 nm = 999 666.667 nm, plus 10 nm.
    assert_eq!(mask.extent.map(|r| r.max.x), Some(999_676_667));
}

#[test]
fn bad_numbers_and_hierarchies_are_refused_by_name() {
    let sound = flat(vec![rect(0, 0, 10, 10)]);
    for scale in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        let error = mask::build(
            &sound,
            &MaskOptions {
                scale,
                ..options(0.0)
            },
        );
        assert!(matches!(error, Err(MaskError::Scale { .. })), "{scale}");
    }
    for reach in [-1.0, f64::NAN, 1e9] {
        assert!(
            matches!(
                mask::build(&sound, &options(reach)),
                Err(MaskError::Reach { .. })
            ),
            "{reach}"
        );
    }
    let refused = |cells: Vec<Cell>| {
        mask::build(&layout(cells), &options(0.0))
            .expect_err("must be refused")
            .to_string()
    };
    let square = || vec![rect(0, 0, 10, 10)];
    assert_eq!(
        refused(vec![cell("top", square(), vec![place(5, 0, 0)])]),
        "cell `top`, placement 0: refers to cell number 5, the layout has 1"
    );
    assert_eq!(
        refused(vec![
            cell("top", square(), vec![place(1, 0, 0)]),
            cell("a", square(), vec![place(2, 0, 0)]),
            cell("b", square(), vec![place(1, 9, 9)])
        ]),
        "cell `a` contains itself through its placements"
    );
    let grow = Placement {
        magnification: 2.0,
        ..place(0, 0, 0)
    };
    assert!(refused(vec![cell("self", square(), vec![grow])]).contains("`self` contains itself"));
    let nan = Placement {
        angle_deg: f64::NAN,
        ..place(1, 0, 0)
    };
    assert!(
        refused(vec![
            cell("top", square(), vec![nan]),
            cell("a", square(), Vec::new())
        ])
        .contains("placement 0")
    );
    let far = Shape {
        repetition: array(1 << 40, 1 << 40, (1_000_000, 1_000_000)),
        ..rect(0, 0, 10, 10)
    };
    assert!(
        refused(vec![cell("top", vec![rect(0, 0, 1, 1), far], Vec::new())])
            .starts_with("cell `top`: polygon 1 reaches beyond")
    );
    assert!(
        refused(vec![cell(
            "top",
            vec![shape(&[(i64::MAX, 0), (0, 0), (0, i64::MIN)])],
            Vec::new()
        )])
        .contains("polygon 0 reaches beyond")
    );
}

#[test]
fn a_layout_without_figures_is_an_empty_mask() {
    let mask = build(&flat(vec![shape(&[(0, 0), (10, 0), (20, 0)])]), 10.0);
    assert_eq!(
        (mask.figures.len(), mask.extent, mask.place_count()),
        (0, None, 0)
    );
    assert_eq!(mask.summary().curved_share, None);
}

// ---- counted, not copied

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
        repetition: array(1_000, 1, (800, 0)),
        ..rect(0, 0, 400, 400)
    }]);
    l.unit = Nm(0.25);
    l.cells[0].shapes[0].repetition = array(1_000, 1, (801, 0));
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

// ---- distinct figures and contexts

/// An outline without symmetry.
const HOOK: [(i64, i64); 7] = [
    (0, 0),
    (90, 0),
    (90, 20),
    (35, 20),
    (20, 55),
    (20, 140),
    (0, 140),
];

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

// ---- a second engine: Martinez-Rueda sweep in floats, folded one simple polygon at a time

fn oracle_area(polygons: &[Vec<Point>]) -> f64 {
    type Coordinate = geo_types_06::Coordinate<f64>;
    let polygon = |points: &[Point]| {
        let ring = points
            .iter()
            .map(|p| Coordinate {
                x: p.x as f64,
                y: p.y as f64,
            })
            .collect::<Vec<_>>();
        geo_types_06::Polygon::new(geo_types_06::LineString(ring), Vec::new())
    };
    let mut union = geo_types_06::MultiPolygon(Vec::new());
    for points in polygons {
        union = union.union(&polygon(points));
    }
    let ring_area = |ring: &geo_types_06::LineString<f64>| {
        ring.0
            .windows(2)
            .map(|w| w[0].x * w[1].y - w[1].x * w[0].y)
            .sum::<f64>()
            .abs()
            / 2.0
    };
    union
        .0
        .iter()
        .map(|p| ring_area(p.exterior()) - p.interiors().iter().map(ring_area).sum::<f64>())
        .sum()
}

/// Simple polygons that overlap at random: stars with 5 to 40 points and rectangles; no two vertices share a grid line by design.
fn random_polygons(seed: u64, count: usize) -> Vec<Vec<Point>> {
    let mut state = seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1;
    let mut below = move |n: u64| {
        // xorshift64 (Marsaglia, J. Stat. Software 8 (2003) 14).
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        state % n
    };
    (0..count)
        .map(|_| {
            let (x, y) = (below(3_000) as f64, below(3_000) as f64);
            let n = 5 + below(36);
            #[allow(clippy::cast_possible_truncation, reason = "a few thousand nanometres")]
            let star = |k: u64, r: f64| {
                let t = std::f64::consts::TAU * k as f64 / n as f64;
                Point::new(
                    (x + r * t.cos()).round() as i64,
                    (y + r * t.sin()).round() as i64,
                )
            };
            (0..n).map(|k| star(k, 80.0 + below(220) as f64)).collect()
        })
        .collect()
}

#[test]
fn merged_areas_agree_with_a_second_boolean_engine() {
    for seed in 1..=40 {
        let polygons = random_polygons(seed, 40);
        let shapes = polygons.iter().map(|p| Shape {
            layer: LAYER,
            points: p.clone(),
            repetition: Repetition::Once,
        });
        let found = build(&flat(shapes.collect()), 50.0).area_nm2();
        let expected = oracle_area(&polygons);
        // Crossings are rounded to 0.001 nm: over 10⁴ nm of outline that is far below 1 nm².
        assert!(
            (found - expected).abs() < 1.0,
            "seed {seed}: {found} nm², the other engine says {expected}"
        );
    }
}

/// Name, figures, holes, as counted by the maker of the clips (at mask scale, database unit 1 nm).
const CLIPS: [(&str, u128, u128); 4] = [
    ("iso", 7, 2),
    ("dense", 142, 1),
    ("lineends", 47, 0),
    ("mixed", 115, 0),
];

#[test]
fn the_sample_clips_have_the_figures_and_holes_their_maker_counted() {
    let mut seen = 0;
    for (name, figures, holes) in CLIPS {
        let path = format!(
            "{}/tests/fixtures/mask/{name}.json",
            env!("CARGO_MANIFEST_DIR")
        );
        let text = std::fs::read_to_string(&path).expect(&path);
        let rings: Vec<Vec<(i64, i64)>> = serde_json::from_str(&text).expect("rings");
        let mask = build(&flat(rings.iter().map(|r| shape(r)).collect()), 60.0);
        let summary = mask.summary();
        assert_eq!((summary.placed, summary.holes), (figures, holes), "{name}");
        assert!(summary.curved_share > Some(0.9), "{name}: {summary:?}");
        seen += 1;
    }
    assert_eq!(seen, 4);
}

#[test]
fn one_thread_and_four_make_the_same_mask() {
    let shapes = random_polygons(7, 400).into_iter().map(|points| Shape {
        layer: LAYER,
        points,
        repetition: Repetition::Once,
    });
    let l = flat(shapes.collect());
    let with = |threads| {
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()
            .expect("threads");
        format!("{:?}", pool.install(|| build(&l, 60.0)))
    };
    assert_eq!(with(1), with(4));
}

// ---- laws

/// A layout with two levels of hierarchy, overlaps and arrays, within a few µm. Rectilinear ones have all
/// orientations; slanted ones none, for where slanted edges cross the place is rounded, and a turned cell rounds another way.
fn any_layout() -> impl Strategy<Value = Layout> {
    prop_oneof![layouts(true), layouts(false)]
}

fn layouts(slanted: bool) -> impl Strategy<Value = Layout> {
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
            c.shapes.reverse();
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
        for s in reversed.cells.iter_mut().flat_map(|c| &mut c.shapes) {
            s.points.reverse();
        }
        let (a, b) = (build(&l, 60.0), build(&reversed, 60.0));
        prop_assert_eq!(format!("{a:?}"), format!("{b:?}"));
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
