//! GDSII records: a length, a type, a data type and the data, all big-endian.

use super::super::MAX_OUTLINE;
use super::super::error::{Fault, Parsed, Place};
use crate::geom::Point;

/// Record type and data type as one number, as the format's tables list them.
pub(super) mod tag {
    pub(crate) const HEADER: u16 = 0x0002;
    pub(crate) const BGNLIB: u16 = 0x0102;
    pub(crate) const LIBNAME: u16 = 0x0206;
    pub(crate) const UNITS: u16 = 0x0305;
    pub(crate) const ENDLIB: u16 = 0x0400;
    pub(crate) const BGNSTR: u16 = 0x0502;
    pub(crate) const STRNAME: u16 = 0x0606;
    pub(crate) const ENDSTR: u16 = 0x0700;
    pub(crate) const BOUNDARY: u16 = 0x0800;
    pub(crate) const PATH: u16 = 0x0900;
    pub(crate) const SREF: u16 = 0x0A00;
    pub(crate) const AREF: u16 = 0x0B00;
    pub(crate) const TEXT: u16 = 0x0C00;
    pub(crate) const LAYER: u16 = 0x0D02;
    pub(crate) const DATATYPE: u16 = 0x0E02;
    pub(crate) const WIDTH: u16 = 0x0F03;
    pub(crate) const XY: u16 = 0x1003;
    pub(crate) const ENDEL: u16 = 0x1100;
    pub(crate) const SNAME: u16 = 0x1206;
    pub(crate) const COLROW: u16 = 0x1302;
    pub(crate) const NODE: u16 = 0x1500;
    pub(crate) const TEXTTYPE: u16 = 0x1602;
    pub(crate) const PRESENTATION: u16 = 0x1701;
    pub(crate) const STRING: u16 = 0x1906;
    pub(crate) const STRANS: u16 = 0x1A01;
    pub(crate) const MAG: u16 = 0x1B05;
    pub(crate) const ANGLE: u16 = 0x1C05;
    pub(crate) const REFLIBS: u16 = 0x1F06;
    pub(crate) const FONTS: u16 = 0x2006;
    pub(crate) const PATHTYPE: u16 = 0x2102;
    pub(crate) const GENERATIONS: u16 = 0x2202;
    pub(crate) const ATTRTABLE: u16 = 0x2306;
    pub(crate) const ELFLAGS: u16 = 0x2601;
    pub(crate) const NODETYPE: u16 = 0x2A02;
    pub(crate) const PROPATTR: u16 = 0x2B02;
    pub(crate) const PROPVALUE: u16 = 0x2C06;
    pub(crate) const BOX: u16 = 0x2D00;
    pub(crate) const BOXTYPE: u16 = 0x2E02;
    pub(crate) const PLEX: u16 = 0x2F03;
    pub(crate) const BGNEXTN: u16 = 0x3003;
    pub(crate) const ENDEXTN: u16 = 0x3103;
    pub(crate) const STRCLASS: u16 = 0x3401;
    pub(crate) const FORMAT: u16 = 0x3602;
    pub(crate) const MASK: u16 = 0x3706;
    pub(crate) const ENDMASKS: u16 = 0x3800;
    pub(crate) const LIBDIRSIZE: u16 = 0x3902;
    pub(crate) const SRFNAME: u16 = 0x3A06;
    pub(crate) const LIBSECUR: u16 = 0x3B02;
}

/// One record.
#[derive(Clone, Copy, Debug)]
pub(super) struct Record<'a> {
    pub(super) tag: u16,
    pub(super) data: &'a [u8],
    /// Where it starts in the file.
    pub(super) at: u64,
}

impl<'a> Record<'a> {
    pub(super) fn place(&self) -> Place {
        Place::Byte(self.at)
    }

    #[cold]
    pub(super) fn unexpected(&self, expected: &str) -> Box<Fault> {
        Fault::new(self.place(), format!("record {:04X}", self.tag), expected)
    }

    /// The only number of `N` bytes that the record holds.
    fn array<const N: usize>(&self) -> Parsed<[u8; N]> {
        self.data.try_into().map_err(|_| {
            let found = format!(
                "record {:04X} with {} data bytes",
                self.tag,
                self.data.len()
            );
            Fault::new(self.place(), found, format!("{N} data bytes"))
        })
    }

    /// Layers, types and counts: the format says signed, writers use all 16 bits.
    pub(super) fn u16(&self) -> Parsed<u16> {
        self.array().map(u16::from_be_bytes)
    }

    pub(super) fn i32(&self) -> Parsed<i32> {
        self.array().map(i32::from_be_bytes)
    }

    pub(super) fn real(&self) -> Parsed<f64> {
        self.array().map(real)
    }

    pub(super) fn u16_pair(&self) -> Parsed<[u16; 2]> {
        let [a, b, c, d] = self.array()?;
        Ok([u16::from_be_bytes([a, b]), u16::from_be_bytes([c, d])])
    }

    pub(super) fn real_pair(&self) -> Parsed<[f64; 2]> {
        let bytes: [u8; 16] = self.array()?;
        let half = |from: usize| real(std::array::from_fn(|i| bytes[from + i]));
        Ok([half(0), half(8)])
    }

    /// A name without its padding; any bytes are accepted.
    pub(super) fn name(&self) -> Parsed<&'a [u8]> {
        let end = self.data.iter().rposition(|&b| b != 0).map_or(0, |i| i + 1);
        if end == 0 {
            return Err(Fault::new(
                self.place(),
                "an empty name",
                "at least one character",
            ));
        }
        Ok(&self.data[..end])
    }

    /// Adds the points of an XY record.
    #[inline]
    pub(super) fn xy(&self, points: &mut Vec<Point>) -> Parsed<()> {
        if !self.data.len().is_multiple_of(8) || self.data.is_empty() {
            let found = format!("XY with {} data bytes", self.data.len());
            return Err(Fault::new(self.place(), found, "a multiple of 8, not 0"));
        }
        if points.len() + self.data.len() / 8 > MAX_OUTLINE {
            let found = format!("an outline of more than {MAX_OUTLINE} points");
            return Err(Fault::new(self.place(), found, "fewer"));
        }
        points.extend(self.data.chunks_exact(8).map(|c| {
            Point::new(
                i64::from(i32::from_be_bytes([c[0], c[1], c[2], c[3]])),
                i64::from(i32::from_be_bytes([c[4], c[5], c[6], c[7]])),
            )
        }));
        Ok(())
    }
}

/// An excess-64 real: sign, seven bits of exponent to base 16, 56 bits of mantissa below the point.
pub(super) fn real(bytes: [u8; 8]) -> f64 {
    let bits = u64::from_be_bytes(bytes);
    let exponent = i32::from(bytes[0] & 0x7F) - 64;
    #[allow(
        clippy::cast_precision_loss,
        reason = "three bits of 56 are rounded, as in every double"
    )]
    let mantissa = (bits & ((1 << 56) - 1)) as f64;
    let value = mantissa * 2f64.powi(4 * exponent - 56);
    if bytes[0] & 0x80 != 0 { -value } else { value }
}

/// A BOUNDARY of LAYER, DATATYPE, one XY of a closed outline and ENDEL, in this order.
#[derive(Clone, Copy, Debug)]
pub(super) struct PlainBoundary<'a> {
    pub(super) layer: u16,
    pub(super) datatype: u16,
    /// At least three, the first not repeated.
    points: &'a [[u8; 8]],
}

impl<'a> PlainBoundary<'a> {
    #[inline]
    pub(super) fn points(&self) -> impl ExactSizeIterator<Item = [i32; 2]> + use<'a> {
        self.points.iter().map(|&[a, b, c, d, e, f, g, h]| {
            [
                i32::from_be_bytes([a, b, c, d]),
                i32::from_be_bytes([e, f, g, h]),
            ]
        })
    }
}

/// Walks the records of a stretch of file.
#[derive(Clone, Debug)]
pub(super) struct Records<'a> {
    bytes: &'a [u8],
    at: usize,
    /// Offset of `bytes` in the file.
    base: u64,
}

impl<'a> Records<'a> {
    pub(super) fn new(bytes: &'a [u8], base: u64) -> Self {
        Self { bytes, at: 0, base }
    }

    /// Bytes consumed so far.
    pub(super) fn consumed(&self) -> usize {
        self.at
    }

    pub(super) fn rest(&self) -> &'a [u8] {
        &self.bytes[self.at..]
    }

    pub(super) fn place(&self) -> Place {
        Place::Byte(self.base + self.at as u64)
    }

    /// The usual boundary at a glance; `None` for whatever must be read record by record.
    #[inline]
    pub(super) fn plain_boundary(&mut self) -> Option<PlainBoundary<'a>> {
        const ENDEL: [u8; 4] = [0, 4, 0x11, 0];
        let rest = self.rest();
        let head = rest.first_chunk::<20>()?;
        let [
            0,
            4,
            8,
            0,
            0,
            6,
            0x0D,
            2,
            l0,
            l1,
            0,
            6,
            0x0E,
            2,
            d0,
            d1,
            n0,
            n1,
            0x10,
            3,
        ] = *head
        else {
            return None;
        };
        let end = 16 + usize::from(u16::from_be_bytes([n0, n1]));
        let points = rest.get(20..end)?;
        let (points, odd) = points.as_chunks::<8>();
        let (last, open) = points.split_last()?;
        let is_plain = odd.is_empty()
            && open.len() >= 3
            && open[0] == *last
            && open[open.len() - 1] != *last
            && rest.get(end..end + 4) == Some(&ENDEL);
        is_plain.then(|| {
            self.at += end + 4;
            PlainBoundary {
                layer: u16::from_be_bytes([l0, l1]),
                datatype: u16::from_be_bytes([d0, d1]),
                points: open,
            }
        })
    }

    /// The next record; `None` at the end of the bytes.
    #[inline]
    pub(super) fn next(&mut self) -> Parsed<Option<Record<'a>>> {
        let rest = self.rest();
        let [l0, l1, t0, t1, ..] = *rest else {
            return if rest.is_empty() {
                Ok(None)
            } else {
                Err(Fault::ends(self.place(), "a record header of 4 bytes"))
            };
        };
        let length = usize::from(u16::from_be_bytes([l0, l1]));
        if length < 4 || length % 2 != 0 {
            return Err(Fault::new(
                self.place(),
                format!("a record length of {length}"),
                "an even number, at least 4",
            ));
        }
        let Some(data) = rest.get(4..length) else {
            return Err(Fault::ends(
                self.place(),
                format!("a record of {length} bytes"),
            ));
        };
        let record = Record {
            tag: u16::from_be_bytes([t0, t1]),
            data,
            at: self.base + self.at as u64,
        };
        self.at += length;
        Ok(Some(record))
    }

    /// The next record, which must be there.
    #[inline]
    pub(super) fn expect(&mut self, what: &str) -> Parsed<Record<'a>> {
        self.next()?.ok_or_else(|| Fault::ends(self.place(), what))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reals_have_base_sixteen_and_excess_64() {
        // By hand from the definition: 1 = 1/16 · 16^1; −0.5 = 8/16; and 1e-3, 1e-9 as every 1 nm library states them.
        assert_eq!(real([0x41, 0x10, 0, 0, 0, 0, 0, 0]), 1.0);
        assert_eq!(real([0xC0, 0x80, 0, 0, 0, 0, 0, 0]), -0.5);
        assert_eq!(real([0; 8]), 0.0);
        let milli = real([0x3E, 0x41, 0x89, 0x37, 0x4B, 0xC6, 0xA7, 0xF0]);
        assert!((milli - 1e-3).abs() < 1e-17);
        let nano = real([0x39, 0x44, 0xB8, 0x2F, 0xA0, 0x9B, 0x5A, 0x54]);
        assert!((nano - 1e-9).abs() < 1e-23);
    }

    #[test]
    fn odd_and_short_record_lengths_are_refused() {
        for length in [0_u8, 2, 3, 5, 7] {
            let bytes = [0, length, 4, 0, 0, 0, 0, 0];
            assert!(Records::new(&bytes, 0).next().is_err(), "length {length}");
        }
    }
}
