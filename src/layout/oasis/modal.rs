//! Modal variables: what a record may leave out because the one before it said so (SEMI P39-0304E2, section 10).

use crate::geom::{Point, Repetition};

/// Everything that carries over from record to record within a cell.
#[derive(Clone, Debug, Default)]
pub(super) struct Modal {
    /// XYRELATIVE is in force.
    pub(super) relative: bool,
    pub(super) geometry: Point,
    pub(super) placement: Point,
    pub(super) text: Point,
    pub(super) layer: Option<u32>,
    pub(super) datatype: Option<u32>,
    pub(super) width: Option<i64>,
    pub(super) height: Option<i64>,
    /// Relative to its first point; empty while undefined.
    pub(super) outline: Vec<Point>,
    /// Relative to its first point; empty while undefined.
    pub(super) centre_line: Vec<Point>,
    pub(super) half_width: Option<i64>,
    pub(super) start_extension: Option<i64>,
    pub(super) end_extension: Option<i64>,
    pub(super) compact_kind: Option<u64>,
    pub(super) radius: Option<i64>,
    pub(super) repetition: Option<Repetition>,
    /// The cell placed last, by its number among the targets.
    pub(super) placed: Option<usize>,
    /// A text string was given.
    pub(super) has_text: bool,
}
