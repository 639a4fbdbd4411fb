//! Layout files as they are: cells, placements, repetitions and layers, nothing flattened.

use crate::geom::{Point, Repetition};
use crate::units::Nm;

/// A layer and its datatype, written `L/D`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Layer {
    /// Layer number.
    pub layer: u32,
    /// Datatype number (GDSII, OASIS); 0 where a format has none.
    pub datatype: u32,
}

/// Index of a cell in [`Layout::cells`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct CellId(pub usize);

/// What a file holds.
#[derive(Clone, Debug)]
pub struct Layout {
    /// Length of one database unit.
    pub unit: Nm,
    /// All cells; placements refer to them by index. No cycle: readers refuse it.
    pub cells: Vec<Cell>,
    /// What was repaired or skipped while reading, as sentences.
    pub notes: Vec<String>,
}

/// A named cell.
#[derive(Clone, Debug, Default)]
pub struct Cell {
    /// Its name in the file.
    pub name: String,
    /// Polygons (paths, boxes, trapezoids and circles arrive as polygons).
    pub shapes: Vec<Shape>,
    /// Other cells placed in it.
    pub placements: Vec<Placement>,
}

/// One polygon, perhaps repeated; database units.
#[derive(Clone, Debug, PartialEq)]
pub struct Shape {
    /// On which layer.
    pub layer: Layer,
    /// At least three points, the first not repeated at the end; either sense, keyholes and self-touching allowed.
    pub points: Vec<Point>,
    /// Where else.
    pub repetition: Repetition,
}

/// One cell placed in another, perhaps repeated: magnify, mirror `y → −y`, turn counter-clockwise, shift; in this order.
#[derive(Clone, Debug, PartialEq)]
pub struct Placement {
    /// The cell placed.
    pub cell: CellId,
    /// Where its origin goes, database units.
    pub origin: Point,
    /// Mirrored about its x axis before turning.
    pub mirror: bool,
    /// Turned counter-clockwise by this many degrees; any finite value.
    pub angle_deg: f64,
    /// Magnified; positive and finite.
    pub magnification: f64,
    /// Displacements of the origin in the parent's axes, database units.
    pub repetition: Repetition,
}
