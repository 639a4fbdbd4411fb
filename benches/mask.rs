//! Layout → mask: how the time grows with the number of polygons, and that arrays cost what one element costs.

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Cell, CellId, Layout, Placement, Shape, Shapes};
use shotwright::mask::{self, MaskOptions};
use shotwright::shot::AddressUnit;
use shotwright::units::Nm;

#[path = "../tests/common/flat.rs"]
mod flat;

use flat::{LAYER, flat};

fn options() -> MaskOptions {
    MaskOptions {
        layers: vec![LAYER],
        ..MaskOptions::new(Nm(60.0), AddressUnit::new(Nm(1.0)).expect("1 nm"))
    }
}

fn shape(points: Vec<Point>, repetition: Repetition) -> Shape {
    Shape {
        layer: LAYER,
        points,
        repetition,
    }
}

fn rect(x: i64, y: i64, w: i64, h: i64) -> Shape {
    let points = vec![
        Point::new(x, y),
        Point::new(x + w, y),
        Point::new(x + w, y + h),
        Point::new(x, y + h),
    ];
    shape(points, Repetition::Once)
}

/// Rectangles of 40 to 140 nm at random, about a third of them overlapping another; xorshift64, seed fixed.
fn random_rects(count: i64) -> Layout {
    let side = (count * 30_000).isqrt();
    let mut state = 0x2545_F491_4F6C_DD1D_u64;
    let mut below = move |n: i64| {
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        i64::try_from(state % n.unsigned_abs()).expect("below n")
    };
    flat(
        (0..count)
            .map(|_| rect(below(side), below(side), 40 + below(100), 40 + below(100)))
            .collect(),
    )
}

/// Squares of 60 nm at a pitch of 110 nm, drawn one by one: every one is context of eight others.
fn contacts(side: i64) -> Layout {
    flat(
        (0..side * side)
            .map(|k| rect(k % side * 110, k / side * 110, 60, 60))
            .collect(),
    )
}

fn array(columns: u64) -> Layout {
    let lattice = Repetition::Lattice {
        columns,
        rows: columns,
        a: Point::new(400, 0),
        b: Point::new(0, 400),
    };
    let placement = Placement {
        cell: CellId(1),
        origin: Point::default(),
        mirror: false,
        angle_deg: 0.0,
        magnification: 1.0,
        repetition: lattice,
    };
    let top = Cell {
        name: "top".to_owned(),
        shapes: Shapes::default(),
        placements: vec![placement],
    };
    let cross = Cell {
        name: "cross".to_owned(),
        shapes: vec![rect(0, 100, 300, 100), rect(100, 0, 100, 300)].into(),
        placements: Vec::new(),
    };
    Layout {
        unit: Nm(1.0),
        cells: vec![top, cross],
        open_outlines: 0,
        notes: Vec::new(),
    }
}

/// A cell of a thousand crosses, placed `side` × `side` times.
fn block_array(side: u64) -> Layout {
    let mut layout = array(side);
    let crosses = (0..500).flat_map(|k| {
        let (x, y) = (k % 25 * 400, k / 25 * 400);
        [
            rect(x, y + 100, 300, 100),
            rect(x + 100, y, 100, 300 + k % 7),
        ]
    });
    layout.cells[1].shapes = crosses.collect();
    layout.cells[0].placements[0].repetition = Repetition::Lattice {
        columns: side,
        rows: side,
        a: Point::new(10_400, 0),
        b: Point::new(0, 8_400),
    };
    layout
}

/// One curved figure of many vertices with small squares in its reach all along.
fn large_beside_small(vertices: u32, squares: u32) -> Layout {
    let at = |k: u32, n: u32, radius: f64| {
        let t = std::f64::consts::TAU * f64::from(k) / f64::from(n);
        let whole = |v: f64| {
            #[allow(clippy::cast_possible_truncation, reason = "less than a millimetre")]
            let v = v.round() as i64;
            v
        };
        Point::new(whole(radius * t.cos()), whole(radius * t.sin()))
    };
    let star =
        (0..vertices).map(|k| at(k, vertices, if k % 2 == 0 { 400_000.0 } else { 399_700.0 }));
    let mut shapes = vec![shape(star.collect(), Repetition::Once)];
    shapes.extend((0..squares).map(|k| {
        let p = at(k, squares, 400_040.0);
        rect(p.x - 10, p.y - 10, 20, 20)
    }));
    flat(shapes)
}

fn clip(name: &str) -> Layout {
    layout::open(format!(
        "{}/sample-masks/{name}.oas",
        env!("CARGO_MANIFEST_DIR")
    ))
    .expect("a sample")
}

fn bench(c: &mut Criterion) {
    let mut run = |group: &str, parameter: String, layout: &Layout| {
        let mut group = c.benchmark_group(group);
        let shapes: usize = layout.cells.iter().map(|c| c.shapes.len()).sum();
        group
            .sample_size(10)
            .throughput(Throughput::Elements(u64::try_from(shapes).expect("fits")));
        group.bench_function(BenchmarkId::from_parameter(parameter), |b| {
            b.iter(|| mask::build(layout, &options()).expect("sound"))
        });
        group.finish();
    };
    for count in [10_000, 100_000, 1_000_000] {
        run("mask/random_rects", count.to_string(), &random_rects(count));
    }
    for side in [100, 300, 1_000] {
        run(
            "mask/contacts_in_context",
            (side * side).to_string(),
            &contacts(side),
        );
    }
    for columns in [1, 10_000] {
        run("mask/array_side", columns.to_string(), &array(columns));
    }
    for side in [1, 10_000] {
        run(
            "mask/block_array_side",
            side.to_string(),
            &block_array(side),
        );
    }
    for (vertices, squares) in [(10_000, 1_000), (100_000, 10_000)] {
        let parameter = format!("{vertices}+{squares}");
        run(
            "mask/large_beside_small",
            parameter,
            &large_beside_small(vertices, squares),
        );
    }
    for name in ["iso", "dense", "lineends", "mixed"] {
        run("mask/clip", name.to_owned(), &clip(name));
    }
}

criterion_group!(benches, bench);
criterion_main!(benches);
