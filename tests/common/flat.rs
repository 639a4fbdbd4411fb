//! A layout of one cell, for tests and benches that draw their own shapes.

use shotwright::layout::{Cell, Layer, Layout, Shape};
use shotwright::units::Nm;

/// The layer that shapes are drawn on.
pub(crate) const LAYER: Layer = Layer {
    layer: 1,
    datatype: 0,
};

/// Shapes in nanometres in one cell.
pub(crate) fn flat(shapes: Vec<Shape>) -> Layout {
    let cell = Cell {
        name: "top".to_owned(),
        shapes: shapes.into(),
        placements: Vec::new(),
    };
    Layout {
        unit: Nm(1.0),
        cells: vec![cell],
        open_outlines: 0,
        notes: Vec::new(),
    }
}
