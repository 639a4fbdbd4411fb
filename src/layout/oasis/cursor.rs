//! The primitive values of OASIS: integers, reals, strings, deltas (SEMI P39-0304E2, section 7).

use super::super::error::{Fault, Parsed, Place};
use super::super::{MAX_COORDINATE, coordinate};
use crate::geom::Point;

/// A place in the file or in an inflated CBLOCK, moving on as values are read.
#[derive(Clone, Debug)]
pub(super) struct Cursor<'a> {
    bytes: &'a [u8],
    at: usize,
    /// Offset of the CBLOCK that `bytes` were inflated from.
    block: Option<u64>,
}

impl<'a> Cursor<'a> {
    pub(super) fn in_file(bytes: &'a [u8], at: usize) -> Self {
        Self {
            bytes,
            at,
            block: None,
        }
    }

    pub(super) fn in_block(bytes: &'a [u8], block: u64) -> Self {
        Self {
            bytes,
            at: 0,
            block: Some(block),
        }
    }

    /// The same place in the same bytes, which now end at `end`.
    pub(super) fn up_to(&self, end: usize) -> Self {
        Self {
            bytes: &self.bytes[..end],
            ..*self
        }
    }

    pub(super) fn is_inflated(&self) -> bool {
        self.block.is_some()
    }

    pub(super) fn at(&self) -> usize {
        self.at
    }

    pub(super) fn remaining(&self) -> usize {
        self.bytes.len() - self.at
    }

    pub(super) fn place(&self) -> Place {
        self.place_of(self.at)
    }

    pub(super) fn place_of(&self, at: usize) -> Place {
        let byte = at as u64;
        self.block
            .map_or(Place::Byte(byte), |block| Place::Inflated { block, byte })
    }

    /// What was read last is not what it should be.
    #[cold]
    pub(super) fn fault(
        &self,
        from: usize,
        found: impl Into<String>,
        expected: impl Into<String>,
    ) -> Box<Fault> {
        Fault::new(self.place_of(from), found, expected)
    }

    #[cold]
    fn ends(&self, what: &str) -> Box<Fault> {
        Fault::ends(self.place(), what)
    }

    #[inline]
    pub(super) fn byte(&mut self) -> Parsed<u8> {
        let Some(&b) = self.bytes.get(self.at) else {
            return Err(self.ends("one more byte"));
        };
        self.at += 1;
        Ok(b)
    }

    pub(super) fn bytes(&mut self, n: u64) -> Parsed<&'a [u8]> {
        let end = usize::try_from(n).ok().and_then(|n| self.at.checked_add(n));
        let Some(slice) = end.and_then(|end| self.bytes.get(self.at..end)) else {
            return Err(self.ends(&format!("{n} more bytes")));
        };
        self.at += slice.len();
        Ok(slice)
    }

    /// Seven bits a byte, least first.
    #[inline]
    pub(super) fn unsigned(&mut self) -> Parsed<u64> {
        if let Some(&eight) = self.bytes[self.at..].first_chunk::<8>() {
            if eight[0] < 0x80 {
                self.at += 1;
                return Ok(u64::from(eight[0]));
            }
            if eight[1] < 0x80 {
                self.at += 2;
                return Ok(u64::from(eight[0] & 0x7F) | u64::from(eight[1]) << 7);
            }
            // Longer ones without a branch for each byte, which would be guessed wrong as often as lengths change.
            let eight = u64::from_le_bytes(eight);
            let ends = !eight & 0x8080_8080_8080_8080;
            if ends != 0 {
                self.at += ends.trailing_zeros() as usize / 8 + 1;
                // All bits up to the last byte's, each byte's highest left out.
                let v = eight & (ends ^ (ends - 1)) & 0x7F7F_7F7F_7F7F_7F7F;
                let v = v & 0x007F_007F_007F_007F | (v & 0x7F00_7F00_7F00_7F00) >> 1;
                let v = v & 0x0000_3FFF_0000_3FFF | (v & 0x3FFF_0000_3FFF_0000) >> 2;
                return Ok(v & 0x0FFF_FFFF | (v & 0x0FFF_FFFF_0000_0000) >> 4);
            }
        }
        let first = self.byte()?;
        if first < 0x80 {
            return Ok(u64::from(first));
        }
        self.long_unsigned(first)
    }

    #[cold]
    fn long_unsigned(&mut self, first: u8) -> Parsed<u64> {
        let from = self.at - 1;
        let mut value = u64::from(first & 0x7F);
        let mut shift = 7;
        loop {
            let byte = self.byte()?;
            let bits = u64::from(byte & 0x7F);
            if bits != 0 && (shift > 63 || bits << shift >> shift != bits) {
                return Err(self.fault(from, "an integer of more than 64 bits", "at most 64"));
            }
            if shift <= 63 {
                value |= bits << shift;
            }
            if byte < 0x80 {
                return Ok(value);
            }
            shift = (shift + 7).min(70);
        }
    }

    /// The sign in the lowest bit.
    #[inline]
    pub(super) fn signed(&mut self) -> Parsed<i64> {
        let from = self.at;
        let value = self.unsigned()?;
        let size = self.length(from, value >> 1)?;
        Ok(with_sign(size, value & 1 == 1))
    }

    /// A length or coordinate that is not negative.
    #[inline]
    pub(super) fn extent(&mut self) -> Parsed<i64> {
        let from = self.at;
        let value = self.unsigned()?;
        self.length(from, value)
    }

    #[inline]
    fn length(&self, from: usize, value: u64) -> Parsed<i64> {
        match i64::try_from(value) {
            Ok(v) if v <= MAX_COORDINATE => Ok(v),
            _ => Err(self.too_long(from, value)),
        }
    }

    #[cold]
    fn too_long(&self, from: usize, value: u64) -> Box<Fault> {
        self.fault(from, format!("a length of {value}"), "at most 2^52 units")
    }

    #[cold]
    fn too_far(&self) -> Box<Fault> {
        self.fault(self.at, "a coordinate beyond 2^52 units", "a smaller one")
    }

    /// A 32-bit number: layer, datatype.
    #[inline]
    pub(super) fn unsigned32(&mut self) -> Parsed<u32> {
        let from = self.at;
        let value = self.unsigned()?;
        u32::try_from(value).map_err(|_| self.fault(from, value.to_string(), "at most 2^32 − 1"))
    }

    /// One of eight forms, named by the leading integer; finite.
    pub(super) fn real(&mut self) -> Parsed<f64> {
        let from = self.at;
        let form = self.unsigned()?;
        self.real_of_form(form, from)
    }

    pub(super) fn real_of_form(&mut self, form: u64, from: usize) -> Parsed<f64> {
        #[allow(
            clippy::cast_precision_loss,
            reason = "a real is a double; the nearest is meant"
        )]
        let mut whole = || self.unsigned().map(|v| v as f64);
        let value = match form {
            0 => whole()?,
            1 => -whole()?,
            2 => 1.0 / whole()?,
            3 => -1.0 / whole()?,
            4 => whole()? / whole()?,
            5 => -whole()? / whole()?,
            6 => {
                let b = self.bytes(4)?;
                f64::from(f32::from_le_bytes([b[0], b[1], b[2], b[3]]))
            }
            7 => {
                let b = self.bytes(8)?;
                f64::from_le_bytes([b[0], b[1], b[2], b[3], b[4], b[5], b[6], b[7]])
            }
            _ => return Err(self.fault(from, format!("a real of type {form}"), "0 to 7")),
        };
        if value.is_finite() {
            Ok(value)
        } else {
            Err(self.fault(from, format!("a real of {value}"), "a finite number"))
        }
    }

    pub(super) fn string(&mut self) -> Parsed<&'a [u8]> {
        let n = self.unsigned()?;
        self.bytes(n)
    }

    /// A string with at least one character.
    pub(super) fn name(&mut self) -> Parsed<&'a [u8]> {
        let from = self.at;
        let name = self.string()?;
        if name.is_empty() {
            return Err(self.fault(from, "an empty name", "at least one character"));
        }
        Ok(name)
    }

    /// Direction in the two lowest bits: east, north, west, south.
    #[inline]
    pub(super) fn delta2(&mut self) -> Parsed<Point> {
        let from = self.at;
        let value = self.unsigned()?;
        let size = self.length(from, value >> 2)?;
        Ok(compass(value & 3, size))
    }

    /// Direction in the three lowest bits: the four of [`Cursor::delta2`], then north-east and on.
    #[inline]
    pub(super) fn delta3(&mut self) -> Parsed<Point> {
        let from = self.at;
        let value = self.unsigned()?;
        let size = self.length(from, value >> 3)?;
        Ok(compass(value & 7, size))
    }

    /// Either a 3-delta behind a 0 bit, or x and y of their own.
    #[inline]
    pub(super) fn delta(&mut self) -> Parsed<Point> {
        let from = self.at;
        let value = self.unsigned()?;
        if value & 1 == 0 {
            let size = self.length(from, value >> 4)?;
            return Ok(compass(value >> 1 & 7, size));
        }
        let size = self.length(from, value >> 2)?;
        let x = with_sign(size, value & 2 == 2);
        Ok(Point::new(x, self.signed()?))
    }

    /// The sum of two places, held within the range of coordinates.
    #[inline]
    pub(super) fn sum(&self, a: Point, b: Point) -> Parsed<Point> {
        match (coordinate(a.x + b.x), coordinate(a.y + b.y)) {
            (Some(x), Some(y)) => Ok(Point::new(x, y)),
            _ => Err(self.too_far()),
        }
    }

    /// A length times a factor of the file, held within the range of coordinates.
    pub(super) fn product(&self, length: i64, factor: i64) -> Parsed<i64> {
        length
            .checked_mul(factor)
            .and_then(coordinate)
            .ok_or_else(|| self.too_far())
    }

    /// A count of things that take at least one byte each, and so a safe capacity.
    pub(super) fn count(&mut self, extra: u64) -> Parsed<usize> {
        let from = self.at;
        let n = self.unsigned()?.saturating_add(extra);
        match usize::try_from(n) {
            Ok(n) if n <= self.remaining() + 2 => Ok(n),
            _ => Err(Fault::ends(self.place_of(from), format!("{n} values"))),
        }
    }
}

/// Without a branch: signs of coordinates are as good as random.
#[inline]
fn with_sign(size: i64, negative: bool) -> i64 {
    let mask = -i64::from(negative);
    (size ^ mask) - mask
}

#[inline]
fn compass(direction: u64, size: i64) -> Point {
    const UNIT: [(i64, i64); 8] = [
        (1, 0),
        (0, 1),
        (-1, 0),
        (0, -1),
        (1, 1),
        (-1, 1),
        (-1, -1),
        (1, -1),
    ];
    let (x, y) = UNIT[(direction & 7) as usize];
    Point::new(x * size, y * size)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cursor(bytes: &[u8]) -> Cursor<'_> {
        Cursor::in_file(bytes, 0)
    }

    /// Test vectors of SEMI P39-0304E2, section 7.
    #[test]
    fn integers_of_the_standard() {
        assert_eq!(cursor(&[0xE8, 0x07]).unsigned().ok(), Some(1000));
        let signed: [(&[u8], i64); 6] = [
            (&[0x02], 1),
            (&[0x03], -1),
            (&[0x7E], 63),
            (&[0x81, 0x01], -64),
            (&[0xFE, 0x7F], 8191),
            (&[0x81, 0x80, 0x01], -8192),
        ];
        for (bytes, value) in signed {
            assert_eq!(cursor(bytes).signed().ok(), Some(value));
        }
    }

    /// Test vectors of SEMI P39-0304E2, section 7.
    #[test]
    fn reals_of_the_standard() {
        let reals: [(&[u8], f64); 5] = [
            (&[0x00, 0x01], 1.0),
            (&[0x03, 0x02], -0.5),
            (&[0x04, 0x05, 0x10], 0.3125),
            (&[0x02, 0x03], 1.0 / 3.0),
            (&[0x05, 0x02, 0x0D], -2.0 / 13.0),
        ];
        for (bytes, value) in reals {
            assert_eq!(cursor(bytes).real().ok(), Some(value));
        }
        assert!(cursor(&[0x02, 0x00]).real().is_err());
        assert!(cursor(&[0x08, 0x00]).real().is_err());
    }

    /// Test vectors of SEMI P39-0304E2, section 7.
    #[test]
    fn deltas_of_the_standard() {
        assert_eq!(cursor(&[0xF8, 0x23]).signed().ok(), Some(2300));
        assert_eq!(cursor(&[0xF9, 0x23]).signed().ok(), Some(-2300));
        assert_eq!(
            cursor(&[0x98, 0x2A]).delta2().ok(),
            Some(Point::new(1350, 0))
        );
        assert_eq!(
            cursor(&[0x9B, 0x2A]).delta2().ok(),
            Some(Point::new(0, -1350))
        );
        assert_eq!(
            cursor(&[0xCD, 0x01]).delta3().ok(),
            Some(Point::new(-25, 25))
        );
        assert_eq!(
            cursor(&[0xD7, 0x07]).delta3().ok(),
            Some(Point::new(122, -122))
        );
        assert_eq!(
            cursor(&[0xE9, 0x03, 0x7A]).delta().ok(),
            Some(Point::new(122, 61))
        );
        assert_eq!(
            cursor(&[0xEC, 0x05]).delta().ok(),
            Some(Point::new(-46, -46))
        );
        let last = cursor(&[0xBB, 0x01, 0xB7, 0x0F]).delta().ok();
        assert_eq!(last, Some(Point::new(-46, -987)));
    }

    #[test]
    fn integers_of_every_length_read_alike_at_the_end_and_within() {
        for bits in 0..64 {
            let mut bytes = Vec::new();
            let value = u64::MAX >> bits & 0xA5A5_5A5A_F00F_1234;
            let mut rest = value;
            while rest > 0x7F {
                bytes.push(0x80 | (rest & 0x7F) as u8);
                rest >>= 7;
            }
            bytes.push(rest as u8);
            let length = bytes.len();
            for more in [0, 1, 9] {
                bytes.resize(length + more, 0xFF);
                let mut cursor = cursor(&bytes);
                assert_eq!(cursor.unsigned().ok(), Some(value));
                assert_eq!(cursor.at(), length);
            }
        }
    }

    #[test]
    fn integers_beyond_64_bits_are_refused_and_padding_is_not() {
        let mut bytes = vec![0xFF; 9];
        bytes.push(0x01);
        assert_eq!(cursor(&bytes).unsigned().ok(), Some(u64::MAX));
        bytes[9] = 0x02;
        assert!(cursor(&bytes).unsigned().is_err());
        let mut padded = vec![0x80; 40];
        padded.push(0x00);
        assert_eq!(cursor(&padded).unsigned().ok(), Some(0));
    }
}
