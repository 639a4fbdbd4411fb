//! GDSII from a layout.

use std::io::Write;

use super::super::write::{WriteError, listed};
use super::super::{Cell, Layer, Layout, Placement};
use super::record::tag;
use crate::geom::{Point, Repetition};

/// Points of an XY record: 8 bytes each, in a record of at most 65 535.
const XY_POINTS: usize = 8191;

/// Columns or rows of an AREF: a signed number of 16 bits.
const AREF_SIDE: u64 = 32_767;

/// Longest name that fits a record.
const NAME: usize = 65_530;

/// Year, month, day, hour, minute, second, twice: no clock, so that equal layouts are equal files.
const DATE: [u16; 12] = [2000, 1, 1, 0, 0, 0, 2000, 1, 1, 0, 0, 0];

/// Writes a whole library.
pub(in super::super) fn write(layout: &Layout, out: impl Write) -> Result<(), WriteError> {
    let mut writer = Writer {
        out,
        layout,
        cell: "",
    };
    let date = DATE.map(u16::to_be_bytes).concat();
    let metres = layout.unit.0 * 1e-9;
    // In micrometres, as is the custom.
    let units = [real(layout.unit.0 * 1e-3), real(metres)].concat();
    writer.record(tag::HEADER, &600_u16.to_be_bytes())?;
    writer.record(tag::BGNLIB, &date)?;
    writer.record(tag::LIBNAME, b"LAYOUT")?;
    writer.record(tag::UNITS, &units)?;
    for cell in &layout.cells {
        writer.cell = &cell.name;
        writer.record(tag::BGNSTR, &date)?;
        writer.name(tag::STRNAME, &cell.name)?;
        writer.contents(cell)?;
        writer.record(tag::ENDSTR, &[])?;
    }
    writer.record(tag::ENDLIB, &[])?;
    Ok(writer.out.flush()?)
}

struct Writer<'a, W> {
    out: W,
    layout: &'a Layout,
    /// The cell being written, for errors.
    cell: &'a str,
}

impl<W: Write> Writer<'_, W> {
    fn contents(&mut self, cell: &Cell) -> Result<(), WriteError> {
        for placement in &cell.placements {
            self.placement(placement)?;
        }
        for shape in cell.shapes.iter() {
            let points: Vec<Point> = shape.points.iter().collect();
            if points.len() < 3 {
                return Err(WriteError::NoOutline {
                    cell: self.cell.to_owned(),
                    points: points.len(),
                });
            }
            for by in listed(shape.repetition, self.cell)? {
                self.boundary(shape.layer, &points, by)?;
            }
        }
        Ok(())
    }

    fn boundary(&mut self, layer: Layer, points: &[Point], by: Point) -> Result<(), WriteError> {
        self.record(tag::BOUNDARY, &[])?;
        self.layer(layer)?;
        let closed: Vec<Point> = points.iter().chain(&points[..1]).map(|&p| p + by).collect();
        for part in closed.chunks(XY_POINTS) {
            self.xy(part)?;
        }
        self.record(tag::ENDEL, &[])
    }

    fn layer(&mut self, layer: Layer) -> Result<(), WriteError> {
        for (tag, number) in [(tag::LAYER, layer.layer), (tag::DATATYPE, layer.datatype)] {
            let number = u16::try_from(number).map_err(|_| WriteError::LayerTooHigh {
                cell: self.cell.to_owned(),
                layer,
            })?;
            self.record(tag, &number.to_be_bytes())?;
        }
        Ok(())
    }

    fn placement(&mut self, placement: &Placement) -> Result<(), WriteError> {
        let &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } = &placement.repetition
        else {
            for by in listed(&placement.repetition, self.cell)? {
                self.reference(placement, tag::SREF, None, &[placement.origin + by])?;
            }
            return Ok(());
        };
        for (j, part_rows) in parts(rows) {
            for (i, part_columns) in parts(columns) {
                let origin = placement.origin + times(a, i) + times(b, j);
                let corners = [
                    origin,
                    origin + times(a, part_columns),
                    origin + times(b, part_rows),
                ];
                self.reference(
                    placement,
                    tag::AREF,
                    Some([part_columns, part_rows]),
                    &corners,
                )?;
            }
        }
        Ok(())
    }

    fn reference(
        &mut self,
        placement: &Placement,
        kind: u16,
        sides: Option<[u64; 2]>,
        points: &[Point],
    ) -> Result<(), WriteError> {
        self.record(kind, &[])?;
        let layout = self.layout;
        self.name(tag::SNAME, &layout.cells[placement.cell.0].name)?;
        let (mirror, angle) = (placement.mirror, placement.angle_deg);
        let magnification = placement.magnification;
        if mirror || angle != 0.0 || magnification != 1.0 {
            let flags = if mirror { 0x8000_u16 } else { 0 };
            self.record(tag::STRANS, &flags.to_be_bytes())?;
            if magnification != 1.0 {
                self.record(tag::MAG, &real(magnification))?;
            }
            if angle != 0.0 {
                self.record(tag::ANGLE, &real(angle))?;
            }
        }
        if let Some(sides) = sides {
            let sides = sides.map(|n| u16::try_from(n).unwrap_or(u16::MAX).to_be_bytes());
            self.record(tag::COLROW, &sides.concat())?;
        }
        self.xy(points)?;
        self.record(tag::ENDEL, &[])
    }

    fn xy(&mut self, points: &[Point]) -> Result<(), WriteError> {
        let mut data = Vec::with_capacity(8 * points.len());
        for found in points.iter().flat_map(|p| [p.x, p.y]) {
            let narrow = i32::try_from(found).map_err(|_| WriteError::TooFar {
                cell: self.cell.to_owned(),
                found,
                unit_nm: self.layout.unit.0,
            })?;
            data.extend(narrow.to_be_bytes());
        }
        self.record(tag::XY, &data)
    }

    fn name(&mut self, tag: u16, name: &str) -> Result<(), WriteError> {
        if name.is_empty() || name.len() > NAME {
            return Err(WriteError::Name {
                length: name.len(),
                limit: NAME,
            });
        }
        let mut data = name.as_bytes().to_vec();
        data.resize(data.len().next_multiple_of(2), 0);
        self.record(tag, &data)
    }

    fn record(&mut self, tag: u16, data: &[u8]) -> Result<(), WriteError> {
        let length = u16::try_from(data.len() + 4).unwrap_or(u16::MAX);
        self.out.write_all(&length.to_be_bytes())?;
        self.out.write_all(&tag.to_be_bytes())?;
        Ok(self.out.write_all(data)?)
    }
}

/// A count in parts that an AREF holds: start and length of each.
fn parts(count: u64) -> impl Iterator<Item = (u64, u64)> {
    (0..count.div_ceil(AREF_SIDE)).map(move |k| {
        let start = k * AREF_SIDE;
        (start, AREF_SIDE.min(count - start))
    })
}

/// Saturates: what is too far is refused when it is written.
fn times(step: Point, n: u64) -> Point {
    let n = i64::try_from(n).unwrap_or(i64::MAX);
    let far = |v: i64| v.saturating_mul(n).clamp(-(1 << 60), 1 << 60);
    Point::new(far(step.x), far(step.y))
}

/// An excess-64 real; the inverse of [`super::record::real`], exact for what 56 bits hold.
fn real(value: f64) -> [u8; 8] {
    let mut fraction = value.abs();
    if fraction == 0.0 || !fraction.is_finite() {
        return [0; 8];
    }
    let mut exponent = 64_u8;
    // Powers of 16 are exact; the format ends at 16^±64.
    while fraction >= 1.0 && exponent < 127 {
        fraction /= 16.0;
        exponent += 1;
    }
    while fraction < 1.0 / 16.0 && exponent > 0 {
        fraction *= 16.0;
        exponent -= 1;
    }
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "below 2^56, a whole number of 53 bits"
    )]
    let mantissa = (fraction * 2f64.powi(56)) as u64;
    let mut bytes = mantissa.to_be_bytes();
    bytes[0] = exponent | if value < 0.0 { 0x80 } else { 0 };
    bytes
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reals_come_back() {
        for value in [1.0, -0.5, 1e-3, 1e-9, 90.0, 359.999, 1.5e-12, 4.25e10] {
            assert_eq!(super::super::record::real(real(value)), value);
        }
        // As every library of 1 nm states it.
        let nano = [0x39, 0x44, 0xB8, 0x2F, 0xA0, 0x9B, 0x5A, 0x54];
        assert_eq!(real(1e-9)[..7], nano[..7]);
    }
}
