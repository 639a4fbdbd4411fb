//! Every fixture holds what gdstk 1.0.2 reads from it (`tests/data/layout/make_fixtures.py`).

use std::collections::BTreeMap;

use serde::Deserialize;
use shotwright::layout::{self, Layer};

use super::{fixture, flat};

#[derive(Deserialize)]
struct Expected {
    unit_nm: f64,
    cells: usize,
    layers: BTreeMap<String, ExpectedLayer>,
}

#[derive(Deserialize)]
struct ExpectedLayer {
    polygons: u64,
    area: f64,
    #[serde(rename = "box")]
    bounds: [f64; 4],
}

/// How far areas (relative) and bounds (units) may lie from gdstk's, which keeps fractions of a unit where a layout has none.
fn tolerance(name: &str) -> (f64, f64) {
    match name {
        // Corners of slanted paths are rounded to the grid.
        "paths.gds" | "paths.oas" | "hand-paths.oas" => (1e-3, 1.0),
        // Arrays turned by 30° have a pitch of a fraction of a unit, magnified by 1.5.
        "turned.gds" => (1e-9, 1.5),
        // Chords and rounding, against a much finer polygon.
        "circles.oas" => (0.03, 1.0),
        _ => (1e-9, 1e-3),
    }
}

#[test]
fn every_fixture_holds_what_the_reference_reader_finds() {
    let expected: BTreeMap<String, Expected> =
        serde_json::from_slice(&fixture("expected.json")).expect("well-formed JSON");
    assert!(expected.len() >= 20, "only {} fixtures", expected.len());
    let mut wrong = Vec::new();
    for (name, want) in &expected {
        let layout = layout::read(&fixture(name), name).unwrap_or_else(|e| panic!("{e}"));
        assert_eq!(layout.unit.0, want.unit_nm, "{name}");
        assert_eq!(layout.cells.len(), want.cells, "{name}");
        let got = flat::measure(&layout);
        let keys = |k: &String| k.clone();
        assert_eq!(
            got.keys().map(keys).collect::<Vec<_>>(),
            want.layers.keys().map(keys).collect::<Vec<_>>(),
            "{name}"
        );
        let (relative, absolute) = tolerance(name);
        for (layer, want) in &want.layers {
            let got = &got[layer];
            let far = (0..4).any(|i| (got.bounds[i] - want.bounds[i]).abs() > absolute);
            let unequal = (got.area - want.area).abs() > relative * want.area.max(1.0);
            if got.polygons != want.polygons || far || unequal {
                wrong.push(format!(
                    "{name} {layer}: {got:?}, expected {} polygons, area {}, bounds {:?}",
                    want.polygons, want.area, want.bounds
                ));
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn counts_without_unfolding_agree_with_unfolding() {
    for name in ["nested.gds", "nested.oas", "turned.gds", "repetitions.oas"] {
        let layout = layout::read(&fixture(name), name).expect(name);
        let flat = flat::measure(&layout);
        let counted = layout.layers();
        assert_eq!(counted.len(), flat.len(), "{name}");
        for (Layer { layer, datatype }, count) in counted {
            let polygons = flat[&format!("{layer}/{datatype}")].polygons;
            assert_eq!(count, u128::from(polygons), "{name}");
        }
    }
}

#[test]
fn a_circle_covers_what_its_radius_says() {
    let layout = layout::read(&fixture("circles.oas"), "circles.oas").expect("reads");
    let flat = flat::measure(&layout);
    for (layer, radius) in [("1/0", 50.0), ("1/1", 400.0), ("1/2", 3000.0)] {
        let exact = std::f64::consts::PI * radius * radius;
        let error = (flat[layer].area - exact).abs();
        // Half a unit of sagitta and the rounding of every vertex to the grid.
        assert!(
            error <= std::f64::consts::TAU * radius * 0.6,
            "{layer}: {error}"
        );
    }
}

#[test]
fn gzip_changes_nothing() {
    use std::io::Write;
    for name in ["nested.gds", "figures-cblock.oas"] {
        let plain = fixture(name);
        let mut encoder = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::best());
        encoder.write_all(&plain).expect("writes to memory");
        let zipped = encoder.finish().expect("writes to memory");
        let [a, b] = [plain, zipped].map(|bytes| layout::read(&bytes, name).expect(name));
        assert_eq!(format!("{a:?}"), format!("{b:?}"), "{name}");
    }
}

#[test]
fn one_thread_and_four_read_the_same() {
    for name in ["nested.gds", "nested-cblock.oas", "figures-cblock.oas"] {
        let bytes = fixture(name);
        let [a, b] = [1, 4].map(|threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build();
            pool.expect("starts")
                .install(|| format!("{:?}", layout::read(&bytes, name)))
        });
        assert_eq!(a, b, "{name}");
    }
}

#[test]
fn sample_masks_hold_what_they_say() {
    let folder = format!("{}/sample-masks", env!("CARGO_MANIFEST_DIR"));
    let mut clips = 0;
    for name in ["iso", "dense", "lineends", "mixed"] {
        let layout = layout::open(format!("{folder}/{name}.oas")).unwrap_or_else(|e| panic!("{e}"));
        assert_eq!(layout.unit.0, 1.0);
        let layers: Vec<String> = layout
            .layers()
            .keys()
            .map(|l| format!("{}/{}", l.layer, l.datatype))
            .collect();
        assert_eq!(layers, ["1/0"], "{name}");
        clips += 1;
    }
    assert_eq!(clips, 4);
    let block = layout::open(format!("{folder}/array-block.gds")).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(block.layers().len(), 1);
    assert!(block.summary().placements > 100);
    let shapes = layout::open(format!("{folder}/shapes.wkt")).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(shapes.cells[0].shapes.len(), 8);
}
