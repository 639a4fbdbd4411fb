//! Layouts written in a line, and masks compared.

use shotwright::geom::{Figure, Orientation, Point, Repetition, Transform};
use shotwright::layout::{Cell, CellId, Layer, Layout, Placement, Shape};
use shotwright::mask::{self, Mask, MaskOptions};
use shotwright::shot::AddressUnit;
use shotwright::units::Nm;

pub(crate) const LAYER: Layer = Layer {
    layer: 1,
    datatype: 0,
};

pub(crate) fn options(reach_nm: f64) -> MaskOptions {
    MaskOptions::new(Nm(reach_nm), AddressUnit::new(Nm(1.0)).expect("1 nm"))
}

pub(crate) fn points(xy: &[(i64, i64)]) -> Vec<Point> {
    xy.iter().map(|&(x, y)| Point::new(x, y)).collect()
}

pub(crate) fn shape(xy: &[(i64, i64)]) -> Shape {
    Shape {
        layer: LAYER,
        points: points(xy),
        repetition: Repetition::Once,
    }
}

pub(crate) fn rect(x: i64, y: i64, w: i64, h: i64) -> Shape {
    shape(&[(x, y), (x + w, y), (x + w, y + h), (x, y + h)])
}

pub(crate) fn cell(name: &str, shapes: Vec<Shape>, placements: Vec<Placement>) -> Cell {
    Cell {
        name: name.to_owned(),
        shapes: shapes.into(),
        placements,
    }
}

pub(crate) fn place(cell: usize, x: i64, y: i64) -> Placement {
    Placement {
        cell: CellId(cell),
        origin: Point::new(x, y),
        mirror: false,
        angle_deg: 0.0,
        magnification: 1.0,
        repetition: Repetition::Once,
    }
}

pub(crate) fn array(columns: u64, rows: u64, pitch: (i64, i64)) -> Repetition {
    Repetition::Lattice {
        columns,
        rows,
        a: Point::new(pitch.0, 0),
        b: Point::new(0, pitch.1),
    }
}

/// Cells in nanometres; the first is the top.
pub(crate) fn layout(cells: Vec<Cell>) -> Layout {
    Layout {
        unit: Nm(1.0),
        cells,
        open_outlines: 0,
        notes: Vec::new(),
    }
}

pub(crate) fn flat(shapes: Vec<Shape>) -> Layout {
    layout(vec![cell("top", shapes, Vec::new())])
}

pub(crate) fn build(layout: &Layout, reach_nm: f64) -> Mask {
    mask::build(layout, &options(reach_nm)).expect("a sound layout")
}

pub(crate) fn assert_nm2(mask: &Mask, expected: f64) {
    let found = mask.area_nm2();
    assert!(
        (found - expected).abs() <= 1e-9 * expected,
        "area {found} nm², expected {expected}"
    );
}

/// All figures at all places, normalized and sorted: the mask with its hierarchy written out.
pub(crate) fn written_out(mask: &Mask) -> Vec<Figure> {
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
pub(crate) fn flattened(layout: &Layout) -> Layout {
    fn walk(layout: &Layout, id: usize, at: Transform, out: &mut Vec<Shape>) {
        for s in layout.cells[id].shapes.iter() {
            for d in s.repetition.displacements() {
                let points = s.points.iter().map(|p| at.apply(p + d)).collect();
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

pub(crate) fn same_mask(a: &Mask, b: &Mask) {
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

/// An outline without symmetry.
pub(crate) const HOOK: [(i64, i64); 7] = [
    (0, 0),
    (90, 0),
    (90, 20),
    (35, 20),
    (20, 55),
    (20, 140),
    (0, 140),
];

/// Simple polygons that overlap at random: stars with 5 to 40 points and rectangles; no two vertices share a grid line by design.
pub(crate) fn random_polygons(seed: u64, count: usize) -> Vec<Vec<Point>> {
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
