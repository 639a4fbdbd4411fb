//! Layout files as they are: cells, placements, repetitions and layers, nothing flattened.
//!
//! [`open`] and [`read`] tell the format by the contents, never by the file's name: GDSII, plain or gzip-compressed; OASIS; WKT.
//! [`Layout::write`] gives GDSII or OASIS back. Every reader refuses what it cannot take for certain with the place, what it found and what it expected, and counts what it skips or repairs in
//! [`Layout::notes`]. None trusts a count, a size or a name in the file with memory or time.

mod error;
mod gdsii;
mod hierarchy;
mod oasis;
mod path;
mod shapes;
mod wkt;
mod write;

use std::fs::File;
use std::io::{self, Read};
use std::path::Path;

use flate2::read::MultiGzDecoder;

pub use self::error::{LayoutError, Place};
pub use self::hierarchy::Summary;
pub use self::shapes::{Points, Shape, ShapeRef, Shapes};
pub use self::write::{Format, WriteError};
use crate::geom::{Point, Repetition};
use crate::units::Nm;

/// Greatest coordinate or length that the readers let through, database units: sums of a few still fit an `i64`, and each fits an `f64`.
const MAX_COORDINATE: i64 = 1 << 52;

/// Most points of one outline: far beyond any figure, and its square still fits an `i64`.
const MAX_OUTLINE: usize = 1 << 24;

/// Database units that the readers accept, nanometres.
const UNIT_RANGE: &str = "a database unit of 1e-6 to 1e6 nm";

/// First bytes of a gzip file.
const GZIP_MAGIC: [u8; 2] = [0x1F, 0x8B];

/// Bytes looked at to tell the format.
const HEAD: usize = 256;

/// Reads a layout file.
///
/// # Errors
/// [`LayoutError`], naming the file and, where there is one, the place.
pub fn open(path: impl AsRef<Path>) -> Result<Layout, LayoutError> {
    let path = path.as_ref();
    let file = path.display().to_string();
    let source = File::open(path).map_err(|cause| LayoutError::Unreadable {
        file: file.clone(),
        cause,
    })?;
    read_stream(source, &file)
}

/// Reads a layout from memory; `source_name` stands in errors for the file's name.
///
/// # Errors
/// [`LayoutError`], naming the source and, where there is one, the place.
pub fn read(bytes: &[u8], source_name: &str) -> Result<Layout, LayoutError> {
    read_stream(bytes, source_name)
}

fn read_stream(mut source: impl Read + Send, file: &str) -> Result<Layout, LayoutError> {
    let head = read_head(&mut source, file)?;
    if head.starts_with(&GZIP_MAGIC) {
        let mut inflated = Inflated::new(io::Cursor::new(head).chain(source));
        let head = read_head(&mut inflated, file)?;
        return read_plain(head, inflated, file);
    }
    read_plain(head, source, file)
}

fn read_plain(head: Vec<u8>, rest: impl Read + Send, file: &str) -> Result<Layout, LayoutError> {
    let is_gdsii = head.starts_with(&gdsii::MAGIC);
    let is_oasis = head.starts_with(oasis::MAGIC);
    if !is_gdsii && !is_oasis && !wkt::is_wkt(&head) {
        return Err(LayoutError::UnknownFormat {
            file: file.to_owned(),
            found: readable(&head),
        });
    }
    let mut source = io::Cursor::new(head).chain(rest);
    if is_gdsii {
        return gdsii::read(source, file);
    }
    let mut bytes = Vec::new();
    source
        .read_to_end(&mut bytes)
        .map_err(|cause| LayoutError::Unreadable {
            file: file.to_owned(),
            cause,
        })?;
    if is_oasis {
        oasis::read(&bytes, file)
    } else {
        wkt::read(&bytes, file)
    }
}

fn read_head(source: &mut impl Read, file: &str) -> Result<Vec<u8>, LayoutError> {
    let mut head = Vec::with_capacity(HEAD);
    source
        .take(HEAD as u64)
        .read_to_end(&mut head)
        .map_err(|cause| LayoutError::Unreadable {
            file: file.to_owned(),
            cause,
        })?;
    Ok(head)
}

/// The first few bytes as text, or as hexadecimal numbers where they are not.
fn readable(head: &[u8]) -> String {
    let shown = &head[..head.len().min(16)];
    if shown.is_empty() {
        return "nothing (it is empty)".to_owned();
    }
    if shown.iter().all(|b| (0x20..0x7F).contains(b)) {
        return format!("`{}`", String::from_utf8_lossy(shown));
    }
    let hex: Vec<String> = shown.iter().map(|b| format!("{b:02X}")).collect();
    format!("bytes {}", hex.join(" "))
}

/// A gzip stream that refuses to unfold without end: 64 MiB and 250 bytes for each compressed one.
struct Inflated<R> {
    decoder: MultiGzDecoder<Counted<R>>,
    delivered: u64,
}

impl<R: Read> Inflated<R> {
    fn new(source: R) -> Self {
        Self {
            decoder: MultiGzDecoder::new(Counted { source, read: 0 }),
            delivered: 0,
        }
    }
}

impl<R: Read> Read for Inflated<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let n = self.decoder.read(buffer)?;
        self.delivered += n as u64;
        if self.delivered > (64 << 20) + 250 * self.decoder.get_ref().read {
            return Err(io::Error::other("inflates to more than 250 times its size"));
        }
        Ok(n)
    }
}

/// Counts what is read from a source.
struct Counted<R> {
    source: R,
    read: u64,
}

impl<R: Read> Read for Counted<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let n = self.source.read(buffer)?;
        self.read += n as u64;
        Ok(n)
    }
}

/// The value if it is a coordinate the readers let through.
#[inline]
fn coordinate(value: i64) -> Option<i64> {
    (value.abs() <= MAX_COORDINATE).then_some(value)
}

/// A database unit from its length in nanometres; `None` outside [`UNIT_RANGE`].
///
/// Files state the unit as a power of ten in binary, or its inverse: within a few roundings of a whole number of femtometres, that number is meant.
fn unit_from_nm(nm: f64) -> Option<Nm> {
    let femtometres = (nm * 1e6).round();
    let whole = femtometres / 1e6;
    let meant = if (whole - nm).abs() <= 1e-12 * nm {
        whole
    } else {
        nm
    };
    (1e-6..=1e6).contains(&meant).then_some(Nm(meant))
}

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
    /// Outlines that the file leaves open where its format wants them closed: taken as closed by a straight edge.
    pub open_outlines: u64,
    /// What was repaired or skipped while reading, as sentences.
    pub notes: Vec<String>,
}

/// A named cell.
#[derive(Clone, Debug, Default)]
pub struct Cell {
    /// Its name in the file.
    pub name: String,
    /// Polygons (paths, boxes, trapezoids and circles arrive as polygons).
    pub shapes: Shapes,
    /// Other cells placed in it.
    pub placements: Vec<Placement>,
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
