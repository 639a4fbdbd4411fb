//! What is written is read back: every fixture in both formats, and layouts of every kind of record.

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Cell, CellId, Format, Layer, Layout, Placement, Shape, WriteError};
use shotwright::units::Nm;

use super::{fixture, flat};

const FORMATS: [Format; 2] = [Format::Gdsii, Format::Oasis];

fn written(layout: &Layout, format: Format) -> Vec<u8> {
    let mut bytes = Vec::new();
    layout.write(format, &mut bytes).expect("writes to memory");
    bytes
}

fn back(layout: &Layout, format: Format) -> Layout {
    layout::read(&written(layout, format), "written").unwrap_or_else(|e| panic!("{format}: {e}"))
}

#[test]
fn every_fixture_comes_back() {
    let mut seen = 0;
    for entry in std::fs::read_dir(format!("{}/tests/data/layout", env!("CARGO_MANIFEST_DIR")))
        .expect("a folder")
    {
        let name = entry
            .expect("an entry")
            .file_name()
            .into_string()
            .expect("a plain name");
        if !name.ends_with(".gds") && !name.ends_with(".oas") {
            continue;
        }
        let layout = layout::read(&fixture(&name), &name).expect("reads");
        for format in FORMATS {
            let again = back(&layout, format);
            assert_eq!(again.unit, layout.unit, "{name} {format}");
            let names = |l: &Layout| l.cells.iter().map(|c| c.name.clone()).collect::<Vec<_>>();
            assert_eq!(names(&again), names(&layout), "{name} {format}");
            assert_eq!(
                format!("{:?}", flat::measure(&again)),
                format!("{:?}", flat::measure(&layout)),
                "{name} {format}"
            );
            if format == Format::Oasis {
                let contents = |l: &Layout| format!("{:?}", l.cells);
                let normal = back(&again, format);
                assert_eq!(contents(&normal), contents(&again), "{name}: written twice");
            }
        }
        seen += 1;
    }
    assert!(seen >= 20, "only {seen} fixtures");
}

fn shape(points: &[(i64, i64)], layer: u32, repetition: Repetition) -> Shape {
    Shape {
        layer: Layer {
            layer,
            datatype: layer % 3,
        },
        points: points.iter().map(|&(x, y)| Point::new(x, y)).collect(),
        repetition,
    }
}

fn lattice(columns: u64, rows: u64, a: (i64, i64), b: (i64, i64)) -> Repetition {
    Repetition::Lattice {
        columns,
        rows,
        a: Point::new(a.0, a.1),
        b: Point::new(b.0, b.1),
    }
}

/// Rectangles that share sizes or not, squares, steps, slants; every repetition; placements plain and free.
fn every_kind() -> Layout {
    let rect = |x: i64, y: i64, w: i64, h: i64| [(x, y), (x + w, y), (x + w, y + h), (x, y + h)];
    let list = Repetition::List(
        [(0, 0), (50, 7), (-20, 300)]
            .map(|(x, y)| Point::new(x, y))
            .to_vec(),
    );
    let repetitions = [
        Repetition::Once,
        lattice(4, 3, (1000, 0), (0, 2000)),
        lattice(5, 1, (1000, 0), (0, 0)),
        lattice(1, 6, (7, 7), (0, 2000)),
        lattice(1, 6, (7, 7), (30, -2000)),
        lattice(3, 2, (1000, 5), (-4, 2000)),
        lattice(1, 1, (9, 9), (9, 9)),
        list.clone(),
        list.clone(),
    ];
    let mut shapes = vec![
        shape(&rect(0, 0, 100, 50), 1, Repetition::Once),
        shape(&rect(10, 900, 100, 50), 1, Repetition::Once),
        shape(&rect(10, 900, 100, 100), 1, Repetition::Once),
        shape(&rect(-10, 900, 100, 50), 1, Repetition::Once),
        shape(&rect(-10, 900, 60, 50), 4, Repetition::Once),
        shape(&[(0, 0), (0, 10), (10, 10), (10, 0)], 4, Repetition::Once),
        shape(
            &[(0, 0), (20, 0), (20, 10), (10, 10), (10, 30), (0, 30)],
            2,
            Repetition::Once,
        ),
        shape(
            &[(0, 0), (0, 30), (10, 30), (10, 10), (20, 10), (20, 0)],
            2,
            Repetition::Once,
        ),
        shape(&[(5, 5), (30, 9), (-12, 40)], 2, Repetition::Once),
    ];
    shapes.extend(
        repetitions
            .iter()
            .map(|r| shape(&rect(3, 4, 5, 6), 7, r.clone())),
    );
    let place = |i: usize, repetition: Repetition| Placement {
        cell: CellId(i % 2),
        origin: Point::new(100 * i as i64, -30),
        mirror: i % 3 == 1,
        angle_deg: [0.0, 90.0, 180.0, 270.0, 33.5][i % 5],
        magnification: if i % 4 == 3 { 2.5 } else { 1.0 },
        repetition,
    };
    let placements = (0..20).map(|i| place(i, repetitions[i % repetitions.len()].clone()));
    let cell = |name: &str, shapes: Vec<Shape>, placements| Cell {
        name: name.to_owned(),
        shapes: shapes.into(),
        placements,
    };
    Layout {
        unit: Nm(0.1),
        cells: vec![
            cell("SHAPES", shapes, Vec::new()),
            cell("EMPTY", Vec::new(), Vec::new()),
            cell(
                "Größe",
                vec![shape(&[(0, 0), (1, 0), (0, 1)], 1, Repetition::Once)],
                placements.collect(),
            ),
        ],
        open_outlines: 0,
        notes: Vec::new(),
    }
}

#[test]
fn every_kind_of_record_comes_back() {
    let layout = every_kind();
    for format in FORMATS {
        let again = back(&layout, format);
        assert_eq!(again.unit, layout.unit);
        let measured = |l: &Layout| format!("{:?}", flat::measure(l));
        assert_eq!(measured(&again), measured(&layout), "{format}");
        assert_eq!(again.summary().layers, layout.summary().layers, "{format}");
    }
    // OASIS holds it as it is, but for lattices of a single row or place, which have two spellings.
    let again = back(&layout, Format::Oasis);
    let points = |l: &Layout| {
        l.cells
            .iter()
            .flat_map(|c| c.shapes.to_vec())
            .map(|s| s.points)
            .collect::<Vec<_>>()
    };
    assert_eq!(points(&again), points(&layout));
    assert_eq!(
        again.cells[2].placements.len(),
        layout.cells[2].placements.len()
    );
    for (a, b) in again.cells[2]
        .placements
        .iter()
        .zip(&layout.cells[2].placements)
    {
        assert_eq!(
            (a.cell, a.origin, a.mirror, a.angle_deg, a.magnification),
            (b.cell, b.origin, b.mirror, b.angle_deg, b.magnification)
        );
        let places = |p: &Placement| p.repetition.displacements().collect::<Vec<_>>();
        assert_eq!(places(a), places(b));
    }
}

#[test]
fn long_outlines_and_long_arrays_are_split_for_gdsii() {
    let outline: Vec<(i64, i64)> = (0..20_000).map(|i| (i, i * i % 1000)).collect();
    let mut layout = every_kind();
    layout.cells[1].shapes = vec![shape(&outline, 1, Repetition::Once)].into();
    layout.cells[2].placements = vec![Placement {
        cell: CellId(1),
        origin: Point::default(),
        mirror: false,
        angle_deg: 0.0,
        magnification: 1.0,
        repetition: lattice(70_000, 3, (20, 0), (0, 2000)),
    }];
    let again = back(&layout, Format::Gdsii);
    assert_eq!(again.cells[1].shapes, layout.cells[1].shapes);
    assert_eq!(again.summary().layers, layout.summary().layers);
    assert_eq!(again.cells[2].placements.len(), 3);
}

#[test]
fn what_a_format_cannot_hold_is_refused() {
    let with = |s: Shape| Layout {
        cells: vec![Cell {
            name: "TOP".to_owned(),
            shapes: vec![s].into(),
            placements: Vec::new(),
        }],
        ..every_kind()
    };
    let far = with(shape(&[(0, 0), (1 << 31, 0), (0, 5)], 1, Repetition::Once));
    let high = with(shape(&[(0, 0), (1, 0), (0, 5)], 70_000, Repetition::Once));
    let many = with(shape(
        &[(0, 0), (1, 0), (0, 5)],
        1,
        lattice(10_000, 10_000, (1, 0), (0, 1)),
    ));
    let mut unnamed = every_kind();
    unnamed.cells[0].name.clear();
    let result = |l: &Layout, format| l.write(format, &mut Vec::new());
    assert!(matches!(
        result(&far, Format::Gdsii),
        Err(WriteError::TooFar { .. })
    ));
    assert!(matches!(
        result(&high, Format::Gdsii),
        Err(WriteError::LayerTooHigh { .. })
    ));
    assert!(matches!(
        result(&many, Format::Gdsii),
        Err(WriteError::TooMany { .. })
    ));
    for layout in [far, high, many] {
        result(&layout, Format::Oasis).expect("OASIS holds it");
        assert_eq!(
            back(&layout, Format::Oasis).cells[0].shapes,
            layout.cells[0].shapes
        );
    }
    for format in FORMATS {
        assert!(matches!(
            result(&unnamed, format),
            Err(WriteError::Name { .. })
        ));
    }
}

#[test]
fn the_same_layout_gives_the_same_bytes() {
    for format in FORMATS {
        assert_eq!(
            written(&every_kind(), format),
            written(&every_kind(), format)
        );
    }
}
