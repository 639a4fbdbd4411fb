//! A second engine: a Martinez-Rueda sweep in floats, folded one simple polygon at a time; counts by the maker of the clips; threads.

use geo_booleanop::boolean::BooleanOp;

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Shape};
use shotwright::mask::{self, MaskOptions};

use crate::common::*;

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
        let path = format!("{}/sample-masks/{name}.oas", env!("CARGO_MANIFEST_DIR"));
        let options = MaskOptions {
            layers: vec![LAYER],
            ..options(60.0)
        };
        let layout = layout::open(&path).expect(&path);
        let mask = mask::build(&layout, &options).expect(&path);
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
