//! OASIS from a layout: every cell in one CBLOCK, positions relative, modal values left out, repetitions kept.

use std::io::{self, Write};

use flate2::Compression;
use flate2::write::DeflateEncoder;

use super::super::write::{WriteError, listed};
use super::super::{Cell, Layer, Layout, Placement, ShapeRef};
use super::records::{id, info};
use super::{END_LENGTH, MAGIC};
use crate::geom::{Point, Repetition};

/// Identifiers of the records that are written within cells.
const XY_RELATIVE: u8 = 16;
const PLACEMENT: u8 = 17;
const FREE_PLACEMENT: u8 = 18;
const RECTANGLE: u8 = 20;
const POLYGON: u8 = 21;

/// CRC32 as validation.
const CRC32: u8 = 1;

/// Longest name: far beyond any, and a string's length must not be absurd.
const NAME: usize = 1 << 16;

/// Writes a whole file.
pub(in super::super) fn write(layout: &Layout, out: impl Write) -> Result<(), WriteError> {
    let mut out = Summed {
        out,
        crc: flate2::Crc::new(),
    };
    let mut head = MAGIC.to_vec();
    unsigned(&mut head, id::START);
    string(&mut head, b"1.0");
    real(&mut head, 1000.0 / layout.unit.0);
    // The table offsets stand in END.
    head.push(1);
    out.write_all(&head)?;
    for cell in &layout.cells {
        let name = cell.name.as_bytes();
        if name.is_empty() || name.len() > NAME {
            return Err(WriteError::Name {
                length: name.len(),
                limit: NAME,
            });
        }
        let contents = contents(layout, cell)?;
        let mut bytes = Vec::new();
        unsigned(&mut bytes, id::CELL_BY_NAME);
        string(&mut bytes, name);
        if !contents.is_empty() {
            let mut encoder = DeflateEncoder::new(Vec::new(), Compression::default());
            encoder.write_all(&contents)?;
            let deflated = encoder.finish()?;
            unsigned(&mut bytes, id::CBLOCK);
            bytes.push(0);
            unsigned(&mut bytes, contents.len() as u64);
            string(&mut bytes, &deflated);
        }
        out.write_all(&bytes)?;
    }
    let mut end = Vec::with_capacity(END_LENGTH);
    unsigned(&mut end, id::END);
    // No name tables: names stand where they are used.
    end.extend([0; 12]);
    // The length of the padding takes two bytes itself; scheme and sum follow.
    string(&mut end, &[0; END_LENGTH - 13 - 2 - 5]);
    end.push(CRC32);
    out.write_all(&end)?;
    let sum = out.crc.sum();
    out.write_all(&sum.to_le_bytes())?;
    Ok(out.out.flush()?)
}

/// What goes through, summed.
struct Summed<W> {
    out: W,
    crc: flate2::Crc,
}

impl<W: Write> Write for Summed<W> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let n = self.out.write(bytes)?;
        self.crc.update(&bytes[..n]);
        Ok(n)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.out.flush()
    }
}

/// The values that records carry over, as the reader of the file will have them.
#[derive(Default)]
struct Modal {
    layer: Option<u32>,
    datatype: Option<u32>,
    width: Option<i64>,
    height: Option<i64>,
    geometry: Point,
    placement: Point,
    placed: Option<usize>,
    repetition: Option<Repetition>,
}

fn contents(layout: &Layout, cell: &Cell) -> Result<Vec<u8>, WriteError> {
    let mut out = Vec::new();
    if cell.placements.is_empty() && cell.shapes.is_empty() {
        return Ok(out);
    }
    out.push(XY_RELATIVE);
    let mut modal = Modal::default();
    for placed in &cell.placements {
        placement(&mut out, &mut modal, layout, placed, &cell.name)?;
    }
    for drawn in cell.shapes.iter() {
        shape(&mut out, &mut modal, drawn, &cell.name)?;
    }
    Ok(out)
}

fn placement(
    out: &mut Vec<u8>,
    modal: &mut Modal,
    layout: &Layout,
    placed: &Placement,
    cell: &str,
) -> Result<(), WriteError> {
    let (start, repetition) = plain(&placed.repetition, cell)?;
    let step = placed.origin + start - modal.placement;
    let quarters = [0.0, 90.0, 180.0, 270.0];
    let quarter = quarters.iter().position(|&q| q == placed.angle_deg);
    let is_free = placed.magnification != 1.0 || quarter.is_none();
    let is_named = modal.placed != Some(placed.cell.0);
    let mut flags = u8::from(placed.mirror) | if is_named { 0x80 } else { 0 };
    flags |= place_flags(step, &repetition) << 1;
    if is_free {
        flags |= if placed.magnification == 1.0 { 0 } else { 0x04 };
        flags |= if placed.angle_deg == 0.0 { 0 } else { 0x02 };
    } else {
        flags |= u8::try_from(quarter.unwrap_or(0)).unwrap_or(0) << 1;
    }
    out.push(if is_free { FREE_PLACEMENT } else { PLACEMENT });
    out.push(flags);
    if is_named {
        string(out, layout.cells[placed.cell.0].name.as_bytes());
        modal.placed = Some(placed.cell.0);
    }
    if is_free && placed.magnification != 1.0 {
        real(out, placed.magnification);
    }
    if is_free && placed.angle_deg != 0.0 {
        real(out, placed.angle_deg);
    }
    place(out, step, repetition, modal);
    modal.placement = placed.origin + start;
    Ok(())
}

fn shape(
    out: &mut Vec<u8>,
    modal: &mut Modal,
    drawn: ShapeRef<'_>,
    cell: &str,
) -> Result<(), WriteError> {
    let points: Vec<Point> = drawn.points.iter().collect();
    if points.len() < 3 {
        return Err(WriteError::NoOutline {
            cell: cell.to_owned(),
            points: points.len(),
        });
    }
    let (start, repetition) = plain(drawn.repetition, cell)?;
    let rectangle = rectangle(&points);
    let origin = rectangle.map_or(points[0], |(low, _)| low) + start;
    let step = origin - modal.geometry;
    let mut flags = place_flags(step, &repetition);
    let Layer { layer, datatype } = drawn.layer;
    let mut values = Vec::new();
    if modal.layer != Some(layer) {
        flags |= info::LAYER;
        unsigned(&mut values, layer.into());
        modal.layer = Some(layer);
    }
    if modal.datatype != Some(datatype) {
        flags |= info::DATATYPE;
        unsigned(&mut values, datatype.into());
        modal.datatype = Some(datatype);
    }
    if let Some((_, size)) = rectangle {
        let is_square = size.x == size.y;
        if modal.width != Some(size.x) {
            flags |= 0x40;
            unsigned(&mut values, size.x.unsigned_abs());
        }
        if is_square {
            flags |= 0x80;
        } else if modal.height != Some(size.y) {
            flags |= 0x20;
            unsigned(&mut values, size.y.unsigned_abs());
        }
        modal.width = Some(size.x);
        // What a square leaves as height, readers disagree about.
        modal.height = Some(size.y).filter(|_| !is_square);
        out.push(RECTANGLE);
    } else {
        flags |= 0x20;
        point_list(&mut values, &points);
        out.push(POLYGON);
    }
    out.push(flags);
    out.append(&mut values);
    place(out, step, repetition, modal);
    modal.geometry = origin;
    Ok(())
}

/// Lower-left corner and size of an axis-parallel rectangle that starts there and runs counter-clockwise.
///
/// Others are polygons, so that their points come back as they were.
fn rectangle(points: &[Point]) -> Option<(Point, Point)> {
    let [p, q, r, s] = *points else {
        return None;
    };
    let size = r - p;
    let is_one = q == p + Point::new(size.x, 0) && s == p + Point::new(0, size.y);
    (is_one && size.x > 0 && size.y > 0).then_some((p, size))
}

/// Steps from the first point: horizontal and vertical in turn where they are, else free.
fn point_list(out: &mut Vec<u8>, points: &[Point]) {
    let n = points.len();
    let steps: Vec<Point> = (0..n).map(|i| points[(i + 1) % n] - points[i]).collect();
    let alternates = |first: usize| {
        n.is_multiple_of(2)
            && (0..n).all(|i| {
                if i % 2 == first {
                    steps[i].y == 0
                } else {
                    steps[i].x == 0
                }
            })
    };
    for kind in [0, 1] {
        if alternates(kind) {
            // The last two steps follow from the others.
            out.push(u8::try_from(kind).unwrap_or(0));
            unsigned(out, n as u64 - 2);
            for step in &steps[..n - 2] {
                signed(out, step.x + step.y);
            }
            return;
        }
    }
    out.push(4);
    unsigned(out, n as u64 - 1);
    for &step in &steps[..n - 1] {
        delta(out, step);
    }
}

/// A repetition the format has a word for, and where its first place is.
fn plain(repetition: &Repetition, cell: &str) -> Result<(Point, Repetition), WriteError> {
    Ok(match repetition {
        Repetition::Once => (Point::default(), Repetition::Once),
        &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            // A step that is never taken is not written.
            (Point::default(), Repetition::lattice(columns, rows, a, b))
        }
        other => {
            let list = listed(other, cell)?;
            let first = list.first().copied().unwrap_or_default();
            if list.len() < 2 {
                (first, Repetition::Once)
            } else {
                let list = list.into_iter().map(|p| p - first).collect();
                (first, Repetition::List(list))
            }
        }
    })
}

/// Which of x, y and repetition a shape's info byte announces.
fn place_flags(step: Point, repetition: &Repetition) -> u8 {
    let mut flags = 0;
    if step.x != 0 {
        flags |= info::X;
    }
    if step.y != 0 {
        flags |= info::Y;
    }
    if *repetition != Repetition::Once {
        flags |= info::REPETITION;
    }
    flags
}

fn place(out: &mut Vec<u8>, step: Point, repetition: Repetition, modal: &mut Modal) {
    for coordinate in [step.x, step.y] {
        if coordinate != 0 {
            signed(out, coordinate);
        }
    }
    if repetition == Repetition::Once {
        return;
    }
    if modal.repetition.as_ref() == Some(&repetition) {
        out.push(0);
        return;
    }
    match &repetition {
        Repetition::Once | Repetition::Nested(_) => {}
        &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => lattice(out, columns, rows, a, b),
        Repetition::List(list) => {
            out.push(10);
            unsigned(out, list.len() as u64 - 2);
            for pair in list.windows(2) {
                delta(out, pair[1] - pair[0]);
            }
        }
    }
    modal.repetition = Some(repetition);
}

fn lattice(out: &mut Vec<u8>, columns: u64, rows: u64, a: Point, b: Point) {
    let east = a.y == 0 && a.x >= 0;
    match rows {
        1 if east => {
            out.push(2);
            unsigned(out, columns - 2);
            unsigned(out, a.x.unsigned_abs());
        }
        1 if a.x == 0 && a.y >= 0 => {
            out.push(3);
            unsigned(out, columns - 2);
            unsigned(out, a.y.unsigned_abs());
        }
        1 => {
            out.push(9);
            unsigned(out, columns - 2);
            delta(out, a);
        }
        _ if east && b.x == 0 && b.y >= 0 => {
            out.push(1);
            for value in [
                columns - 2,
                rows - 2,
                a.x.unsigned_abs(),
                b.y.unsigned_abs(),
            ] {
                unsigned(out, value);
            }
        }
        _ => {
            out.push(8);
            unsigned(out, columns - 2);
            unsigned(out, rows - 2);
            delta(out, a);
            delta(out, b);
        }
    }
}

/// The general form: x with its sign and a mark, then y.
fn delta(out: &mut Vec<u8>, d: Point) {
    unsigned(out, d.x.unsigned_abs() << 2 | u64::from(d.x < 0) << 1 | 1);
    signed(out, d.y);
}

fn signed(out: &mut Vec<u8>, value: i64) {
    unsigned(out, value.unsigned_abs() << 1 | u64::from(value < 0));
}

fn unsigned(out: &mut Vec<u8>, mut value: u64) {
    while value > 0x7F {
        out.push(0x80 | value.to_le_bytes()[0] & 0x7F);
        value >>= 7;
    }
    out.push(value.to_le_bytes()[0]);
}

fn string(out: &mut Vec<u8>, bytes: &[u8]) {
    unsigned(out, bytes.len() as u64);
    out.extend_from_slice(bytes);
}

/// A whole number, the inverse of one, or a double.
fn real(out: &mut Vec<u8>, value: f64) {
    let is_whole = |v: f64| v.fract() == 0.0 && (1.0..9e15).contains(&v);
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "whole and below 2^53"
    )]
    let whole = |v: f64| v as u64;
    if is_whole(value) {
        out.push(0);
        unsigned(out, whole(value));
    } else if is_whole(1.0 / value) && 1.0 / (1.0 / value) == value {
        out.push(2);
        unsigned(out, whole(1.0 / value));
    } else {
        out.push(7);
        out.extend(value.to_le_bytes());
    }
}
