//! Layers subtracted, tone, mirror, shift, bias, window, strictness: by hand, and alike whatever the hierarchy.

use proptest::prelude::*;

use shotwright::geom::{self, Figure, Orientation, Point, Rect, Repetition, Transform};
use shotwright::layout::{Layer, Layout, Placement, Shape};
use shotwright::mask::{self, Defect, Expose, Mask, MaskError, MaskOptions};
use shotwright::units::Nm;

use crate::common::*;
use crate::laws::layouts;

const MINUS: Layer = Layer {
    layer: 2,
    datatype: 0,
};

fn nm(x0: i64, y0: i64, x1: i64, y1: i64) -> Rect {
    Rect::new(Point::from_nm(x0, y0), Point::from_nm(x1, y1))
}

fn on(layer: Layer, shape: Shape) -> Shape {
    Shape { layer, ..shape }
}

fn minus() -> MaskOptions {
    MaskOptions {
        layers: vec![LAYER],
        minus: vec![MINUS],
        ..options(60.0)
    }
}

fn background(frame: Rect) -> MaskOptions {
    MaskOptions {
        expose: Expose::Background { frame },
        ..options(60.0)
    }
}

fn biased(nm: f64) -> MaskOptions {
    MaskOptions {
        bias: Nm(nm),
        ..options(60.0)
    }
}

fn windowed(window: Rect) -> MaskOptions {
    MaskOptions {
        window: Some(window),
        ..options(60.0)
    }
}

fn with(layout: &Layout, options: &MaskOptions) -> Mask {
    mask::build(layout, options).expect("a sound layout")
}

/// The shapes as a cell in an array of the pitch.
fn arrayed(shapes: Vec<Shape>, side: u64, pitch: i64) -> Layout {
    let repetition = array(side, side, (pitch, pitch));
    let placement = Placement {
        repetition,
        ..place(1, 0, 0)
    };
    layout(vec![
        cell("top", Vec::new(), vec![placement]),
        cell("element", shapes, Vec::new()),
    ])
}

// ---- layers subtracted

#[test]
fn a_subtracted_layer_cuts_holes_and_pieces_and_repeats_like_any_other() {
    let shapes = vec![
        rect(0, 0, 100, 100),
        on(MINUS, rect(30, 30, 40, 40)),
        rect(200, 0, 90, 30),
        on(MINUS, rect(230, -10, 30, 60)),
    ];
    let mask = with(&flat(shapes.clone()), &minus());
    assert_eq!((mask.place_count(), mask.summary().holes), (3, 1));
    assert_nm2(&mask, 100.0 * 100.0 - 40.0 * 40.0 + 2.0 * 30.0 * 30.0);
    let many = with(&arrayed(shapes, 10_000, 400), &minus());
    assert_eq!((many.figures.len(), many.place_count()), (2, 300_000_000));
}

#[test]
fn what_lies_on_a_subtracted_layer_alone_exposes_nothing() {
    let mask = with(
        &flat(vec![
            rect(0, 0, 10, 10),
            on(MINUS, rect(0, 0, 10, 10)),
            on(MINUS, rect(500, 0, 10, 10)),
        ]),
        &minus(),
    );
    assert_eq!((mask.place_count(), mask.extent), (0, None));
}

#[test]
fn layers_to_subtract_are_checked() {
    let two = flat(vec![rect(0, 0, 10, 10), on(MINUS, rect(0, 0, 5, 5))]);
    let only_minus_named = MaskOptions {
        layers: Vec::new(),
        ..minus()
    };
    assert_nm2(&with(&two, &only_minus_named), 75.0);
    let twice = MaskOptions {
        layers: vec![LAYER, MINUS],
        ..minus()
    };
    let error = mask::build(&two, &twice).expect_err("both");
    assert_eq!(error.to_string(), "layer 2/0 is both taken and subtracted");
    let error = mask::build(&flat(vec![rect(0, 0, 10, 10)]), &minus()).expect_err("absent");
    assert!(error.to_string().starts_with("layer 2/0 holds no polygon"));
}

// ---- tone

#[test]
fn the_background_is_the_frame_without_the_figures() {
    let l = flat(vec![
        rect(100, 100, 100, 100),
        rect(300, 100, 100, 100),
        // Across the frame's right side, and beyond it.
        rect(950, 400, 100, 100),
        rect(5_000, 0, 100, 100),
    ]);
    let mask = with(&l, &background(nm(0, 0, 1_000, 1_000)));
    assert_eq!((mask.place_count(), mask.summary().holes), (1, 2));
    assert_nm2(&mask, 1e6 - 2.0 * 1e4 - 50.0 * 100.0);
    assert_eq!(mask.extent, Some(nm(0, 0, 1_000, 1_000)));
}

// ---- mirror and shift

#[test]
fn mirror_comes_before_shift_and_both_keep_arrays() {
    let l = arrayed(vec![rect(0, 0, 60, 40), rect(0, 0, 20, 90)], 1_000, 300);
    let moved = MaskOptions {
        mirror: true,
        shift: Point::from_nm(7_000, -50),
        ..options(60.0)
    };
    let mask = with(&l, &moved);
    assert_eq!((mask.figures.len(), mask.place_count()), (1, 1_000_000));
    let far = 299_700;
    assert_eq!(
        mask.extent,
        Some(nm(7_000 - far - 60, -50, 7_000, far - 50 + 90))
    );
    let too_far = MaskOptions {
        shift: Point::new(i64::MAX, 0),
        ..options(60.0)
    };
    assert!(matches!(
        mask::build(&l, &too_far),
        Err(MaskError::OutOfRange { .. })
    ));
}

// ---- bias

#[test]
fn bias_moves_every_edge_and_keeps_rectangles_rectangles() {
    let ring = vec![rect(0, 0, 300, 300), on(MINUS, rect(100, 100, 100, 100))];
    for bias in [-20.0, -0.5, 0.25, 12.5, 49.0] {
        let options = MaskOptions {
            bias: Nm(bias),
            ..minus()
        };
        let mask = with(&flat(ring.clone()), &options);
        assert_nm2(
            &mask,
            (300.0 + 2.0 * bias).powi(2) - (100.0 - 2.0 * bias).powi(2),
        );
        assert_eq!(mask.summary().vertices, 8, "bias {bias}");
    }
}

#[test]
fn a_hole_beyond_the_window_grows_into_it() {
    let ring = vec![rect(0, 0, 300, 300), on(MINUS, rect(100, 100, 100, 100))];
    let options = MaskOptions {
        bias: Nm(-20.0),
        window: Some(nm(0, 0, 90, 300)),
        ..minus()
    };
    assert_nm2(&with(&flat(ring), &options), 70.0 * 260.0 - 10.0 * 140.0);
}

#[test]
fn bias_unites_splits_drops_and_stays_counted() {
    let pair = vec![rect(0, 0, 50, 50), rect(70, 0, 50, 50), rect(200, 0, 9, 50)];
    let grown = with(&arrayed(pair.clone(), 10_000, 400), &biased(10.0));
    assert_eq!((grown.figures.len(), grown.place_count()), (2, 200_000_000));
    assert_nm2(&grown, 1e8 * (140.0 * 70.0 + 29.0 * 70.0));
    let shrunk = with(&arrayed(pair, 10_000, 400), &biased(-5.0));
    assert_eq!(
        (shrunk.figures.len(), shrunk.place_count()),
        (1, 200_000_000)
    );
}

#[test]
fn elements_of_an_array_that_bias_brings_together_unite() {
    let bars = arrayed(vec![rect(0, 0, 50, 400)], 20, 90);
    assert_eq!(
        with(&bars, &biased(20.0)).extent,
        Some(nm(-20, -20, 19 * 90 + 70, 19 * 90 + 420))
    );
    assert_eq!(with(&bars, &biased(20.0)).place_count(), 1);
}

#[test]
fn a_biased_background_grows_at_its_figures_and_not_at_its_frame() {
    let options = MaskOptions {
        bias: Nm(10.0),
        ..background(nm(0, 0, 1_000, 1_000))
    };
    let mask = with(&flat(vec![rect(100, 100, 100, 100)]), &options);
    assert_nm2(&mask, 1e6 - 80.0 * 80.0);
}

#[test]
fn a_sharp_corner_is_cut_off_within_twice_the_bias() {
    // Half angle h of the needle's tip: an uncut mitre would end 11.5 times the bias beyond it. Its edges, moved by the bias d,
    // are prolonged by √3 d: to √3 d cos h + d sin h beyond the tip.
    let needle = flat(vec![shape(&[(0, 0), (11_430, -1_000), (11_430, 1_000)])]);
    let mask = with(&needle, &biased(100.0));
    let [left, _] = mask.extent.expect("not empty").min.to_nm();
    let (sin, cos) = (1_000_f64 / 11_430.0).atan().sin_cos();
    let expected = 100.0 * (3_f64.sqrt() * cos + sin);
    assert!((left + expected).abs() < 0.01, "{left} {expected}");
}

#[test]
fn a_biased_disc_gains_its_rim() {
    #[allow(clippy::cast_possible_truncation, reason = "a few thousand nanometres")]
    let disc: Vec<(i64, i64)> = (0..720)
        .map(|k| f64::from(k).to_radians() / 2.0)
        .map(|t| {
            (
                (5_000.0 * t.cos()).round() as i64,
                (5_000.0 * t.sin()).round() as i64,
            )
        })
        .collect();
    let drawn = build(&flat(vec![shape(&disc)]), 60.0);
    let (area, outline) = (drawn.area_nm2(), drawn.summary().outline_nm);
    for bias in [-30.0, 30.0] {
        let mask = with(&flat(vec![shape(&disc)]), &biased(bias));
        // Steiner: area + outline · d + π d².
        let expected = area + outline * bias + std::f64::consts::PI * bias * bias;
        assert!(
            (mask.area_nm2() - expected).abs() < 1e-4 * area,
            "{} {expected}",
            mask.area_nm2()
        );
        assert!(mask.summary().vertices < 800, "{:?}", mask.summary());
    }
}

// ---- window

#[test]
fn a_window_into_a_large_array_keeps_its_inside_counted() {
    let squares = arrayed(vec![rect(0, 0, 100, 100)], 1_000_000, 200);
    // From within the square at 1000 to within the one at 200 000: 996 whole ones each way, 997 cut or whole.
    let mask = with(&squares, &windowed(nm(1_050, 1_150, 200_050, 200_150)));
    // x: half a square, 994 whole ones, half a square; y: 995 whole ones.
    assert_nm2(&mask, (994.0 + 0.5 + 0.5) * 995.0 * 10_000.0);
    assert_eq!(mask.place_count(), 996 * 995);
    assert_eq!(mask.extent, Some(nm(1_050, 1_200, 200_050, 200_100)));
    assert!(mask.figures.iter().map(|f| f.places.len()).sum::<usize>() < 10);
}

#[test]
fn a_window_beside_everything_is_an_empty_mask() {
    let l = flat(vec![rect(0, 0, 100, 100)]);
    assert_eq!(with(&l, &windowed(nm(200, 200, 300, 300))).extent, None);
    let flat_window = Rect::new(Point::default(), Point::new(0, 5));
    assert!(matches!(
        mask::build(&l, &windowed(flat_window)),
        Err(MaskError::EmptyRectangle { what: "window", .. })
    ));
    assert!(matches!(
        mask::build(&l, &background(flat_window)),
        Err(MaskError::EmptyRectangle { what: "frame", .. })
    ));
}

// ---- strictness

#[test]
fn strictness_names_the_first_polygon_that_needs_repair() {
    let strict = MaskOptions {
        strict: true,
        ..options(60.0)
    };
    let clockwise = shape(&[(0, 0), (0, 50), (50, 50), (50, 0)]);
    let mask = with(&flat(vec![rect(100, 0, 10, 10), clockwise]), &strict);
    assert_eq!(
        mask.notes,
        ["1 polygon drawn clockwise: filled like any other"]
    );
    let bow_tie = shape(&[(0, 0), (100, 100), (100, 0), (0, 100)]);
    let spike = shape(&[(0, 0), (50, 0), (50, 90), (50, 50), (0, 50)]);
    let dirty = layout(vec![
        cell(
            "top",
            vec![rect(0, 0, 1, 1), spike, bow_tie.clone()],
            vec![place(1, 0, 0)],
        ),
        cell("below", vec![bow_tie], Vec::new()),
    ]);
    let error = mask::build(&dirty, &strict).expect_err("refused");
    assert!(matches!(
        error,
        MaskError::Unsound {
            polygon: 1,
            defect: Defect::Spike,
            ..
        }
    ));
    assert_eq!(
        error.to_string(),
        "cell `top`: polygon 1 with a spike that has no area; expected a sound outline, repairs are refused"
    );
}

// ---- laws

fn area_two(figures: &[Figure]) -> i128 {
    figures.iter().map(Figure::area_two).sum()
}

/// A rectilinear layout whose every third polygon lies on the subtracted layer.
fn on_two_layers() -> impl Strategy<Value = Layout> {
    layouts(false).prop_map(|mut l| {
        let mut i = 0;
        for c in &mut l.cells {
            let mut shapes = c.shapes.to_vec();
            for s in &mut shapes {
                s.layer = if i % 3 == 1 { MINUS } else { LAYER };
                i += 1;
            }
            c.shapes = shapes.into();
        }
        l
    })
}

fn present(l: &Layout, layer: Layer) -> bool {
    l.cells
        .iter()
        .flat_map(|c| c.shapes.iter())
        .any(|s| s.layer == layer)
}

/// Options of every kind at once, for what the layout holds.
fn any_options() -> impl Strategy<Value = MaskOptions> {
    let side = || -2_500i64..2_500;
    let any_rect = move || {
        (side(), side(), 1i64..4_000, 1i64..4_000).prop_map(|(x, y, w, h)| nm(x, y, x + w, y + h))
    };
    (
        (any::<bool>(), -900i64..900, -900i64..900),
        prop_oneof![2 => Just(0), 3 => -25i64..40],
        prop::option::of(any_rect()),
        prop::option::weighted(0.3, any_rect()),
    )
        .prop_map(|((mirror, x, y), bias, window, frame)| MaskOptions {
            layers: vec![LAYER],
            mirror,
            shift: Point::from_nm(x, y),
            bias: Nm(bias as f64),
            window,
            expose: frame.map_or(Expose::Figures, |frame| Expose::Background { frame }),
            ..options(60.0)
        })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn hierarchy_changes_nothing_under_any_options(l in on_two_layers(), o in any_options()) {
        prop_assume!(present(&l, LAYER));
        let minus = if present(&l, MINUS) { vec![MINUS] } else { Vec::new() };
        let o = MaskOptions { minus, ..o };
        same_mask(&with(&l, &o), &with(&flattened(&l), &o));
    }

    #[test]
    fn options_are_the_booleans_they_stand_for(l in on_two_layers(), o in any_options()) {
        prop_assume!(present(&l, LAYER));
        let only = |layer| match present(&l, layer) {
            true => written_out(&with(&l, &MaskOptions { layers: vec![layer], ..options(0.0) })),
            false => Vec::new(),
        };
        let minus = if present(&l, MINUS) { vec![MINUS] } else { Vec::new() };
        let o = MaskOptions { minus, ..o };
        let way = Transform { orientation: Orientation::new(o.mirror, 0), shift: o.shift };
        let drawn = geom::subtract(&only(LAYER), &only(MINUS));
        let drawn: Vec<Figure> = drawn.iter().map(|f| f.transformed(way)).collect();
        let bias = o.bias.to_pm().expect("small");
        let mut expected = match o.expose {
            Expose::Figures => geom::offset_mitred(&drawn, bias),
            Expose::Background { frame } => geom::subtract(&[Figure::from_rect(frame)], &geom::offset_mitred(&drawn, -bias)),
        };
        if let Some(window) = o.window {
            expected = geom::intersect(&expected, &[Figure::from_rect(window)]);
        }
        let found = written_out(&with(&l, &o));
        prop_assert_eq!(area_two(&found), area_two(&expected));
        prop_assert_eq!(area_two(&geom::subtract(&found, &expected)), 0);
    }

    #[test]
    fn repeated_windows_tile_the_mask(l in layouts(false), x in -500i64..500, y in -500i64..500) {
        let all = build(&l, 60.0);
        let far = 20_000;
        let quarters = [nm(-far, -far, x, y), nm(x, -far, far, y), nm(-far, y, x, far), nm(x, y, far, far)];
        let parts: i128 = quarters.iter().map(|&q| area_two(&written_out(&with(&l, &windowed(q))))).sum();
        prop_assert_eq!(parts, area_two(&written_out(&all)));
    }
}

#[test]
fn one_thread_and_four_make_the_same_mask_under_options() {
    let l = flat(
        random_polygons(11, 200)
            .into_iter()
            .enumerate()
            .map(|(i, points)| Shape {
                layer: if i % 3 == 0 { MINUS } else { LAYER },
                points,
                repetition: Repetition::Once,
            })
            .collect(),
    );
    let options = MaskOptions {
        bias: Nm(7.0),
        window: Some(nm(200, 200, 2_500, 2_700)),
        ..minus()
    };
    let on = |threads| {
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()
            .expect("threads");
        format!("{:?}", pool.install(|| with(&l, &options)))
    };
    assert_eq!(on(1), on(4));
}
