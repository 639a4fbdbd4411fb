//! Layers, units, errors.

use shotwright::geom::{Point, Rect};
use shotwright::layout::{Cell, Layer, Layout, Placement, Shape};
use shotwright::mask::{self, MaskError, MaskOptions};
use shotwright::units::Nm;

use crate::common::*;

#[test]
fn layers_are_chosen_or_listed() {
    let mut two = flat(vec![
        rect(0, 0, 10, 10),
        rect(100, 0, 10, 10),
        rect(0, 0, 50, 50),
    ]);
    let mut shapes = two.cells[0].shapes.to_vec();
    shapes[2].layer = Layer {
        layer: 7,
        datatype: 3,
    };
    two.cells[0].shapes = shapes.into();
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
