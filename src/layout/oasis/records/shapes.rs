//! The records that draw: RECTANGLE, POLYGON, PATH, TRAPEZOID, CTRAPEZOID, CIRCLE, XGEOMETRY.

use super::super::super::Layer;
use super::super::super::error::Parsed;
use super::super::super::path::{self, End};
use super::super::cursor::Cursor;
use super::super::repetition::points;
use super::super::trapezoid::{Given, compact, given, trapezoid};
use super::{Reader, info, place, undefined};
use crate::geom::{Point, Repetition};

impl Reader<'_> {
    pub(super) fn rectangle(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x40 != 0 {
            self.modal.width = Some(cur.extent()?);
        }
        if flags & 0x20 != 0 {
            self.modal.height = Some(cur.extent()?);
        }
        if flags & 0x80 != 0 {
            if flags & 0x20 != 0 {
                return Err(cur.fault(at, "a square with a height", "its width alone"));
            }
            self.modal.height = self.modal.width;
        }
        let (w, h) = self.size(at, cur)?;
        let (low, repetition) = self.place_and_repetition(flags, cur)?;
        let points = [(0, 0), (w, 0), (w, h), (0, h)].map(|(x, y)| Point::new(x, y));
        self.push(layer, &points, low, repetition, cur)
    }

    pub(super) fn polygon(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x20 != 0 {
            points(cur, true, &mut self.modal.outline)?;
            // An outline that comes back to its first point is closed by that.
            while let [first, .., last] = self.modal.outline[..]
                && first == last
            {
                self.modal.outline.pop();
            }
        } else {
            self.budget.copy(self.modal.outline.len(), cur)?;
        }
        let (origin, repetition) = self.place_and_repetition(flags, cur)?;
        if self.modal.outline.is_empty() {
            return Err(undefined(cur, at, "the point list"));
        }
        let outline = std::mem::take(&mut self.modal.outline);
        let pushed = self.push(layer, &outline, origin, repetition, cur);
        self.modal.outline = outline;
        pushed
    }

    pub(super) fn path(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x40 != 0 {
            self.modal.half_width = Some(cur.extent()?);
        }
        let half_width = self
            .modal
            .half_width
            .ok_or_else(|| undefined(cur, at, "the half width"))?;
        if flags & 0x80 != 0 {
            let scheme = cur.unsigned()?;
            let m = &mut self.modal;
            for (kind, extension) in [
                (scheme >> 2 & 3, &mut m.start_extension),
                (scheme & 3, &mut m.end_extension),
            ] {
                match kind {
                    0 => {}
                    1 => *extension = Some(0),
                    2 => *extension = Some(half_width),
                    _ => *extension = Some(cur.signed()?),
                }
            }
        }
        if flags & 0x20 != 0 {
            points(cur, false, &mut self.modal.centre_line)?;
        } else {
            self.budget.copy(self.modal.centre_line.len(), cur)?;
        }
        let (origin, repetition) = self.place_and_repetition(flags, cur)?;
        if self.modal.centre_line.is_empty() {
            return Err(undefined(cur, at, "the point list"));
        }
        let (Some(start), Some(end)) = (self.modal.start_extension, self.modal.end_extension)
        else {
            return Err(undefined(cur, at, "the end extensions"));
        };
        let line = shifted(&self.modal.centre_line, origin, cur)?;
        let end_at = |extension| End::Square(to_f64(extension));
        match path::widen(&line, to_f64(half_width), end_at(start), end_at(end)) {
            Some(ring) => self.push(layer, &ring, Point::default(), repetition, cur),
            None => {
                self.part.remarks.add("path that covers nothing skipped");
                Ok(())
            }
        }
    }

    /// TRAPEZOID with both slants (23), the left or bottom one (24), the right or top one (25).
    pub(super) fn trapezoid(&mut self, id: u64, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x40 != 0 {
            self.modal.width = Some(cur.extent()?);
        }
        if flags & 0x20 != 0 {
            self.modal.height = Some(cur.extent()?);
        }
        let a = if id == 25 { 0 } else { cur.signed()? };
        let b = if id == 24 { 0 } else { cur.signed()? };
        let (w, h) = self.size(at, cur)?;
        let (origin, repetition) = self.place_and_repetition(flags, cur)?;
        let ring = trapezoid(flags & 0x80 != 0, w, h, a, b).ok_or_else(|| {
            let found = format!("a trapezoid of {w} × {h} with slants {a} and {b}");
            cur.fault(at, found, "slants that do not cross")
        })?;
        self.push(layer, &ring, origin, repetition, cur)
    }

    pub(super) fn compact_trapezoid(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x80 != 0 {
            self.modal.compact_kind = Some(cur.unsigned()?);
        }
        if flags & 0x40 != 0 {
            self.modal.width = Some(cur.extent()?);
        }
        if flags & 0x20 != 0 {
            self.modal.height = Some(cur.extent()?);
        }
        let kind = self
            .modal
            .compact_kind
            .ok_or_else(|| undefined(cur, at, "the kind of compact trapezoid"))?;
        let unknown = || cur.fault(at, format!("compact trapezoid kind {kind}"), "0 to 25");
        match given(kind).ok_or_else(unknown)? {
            Given::Both => {}
            Given::Width(n) => {
                if let Some(w) = self.modal.width {
                    self.modal.height = Some(cur.product(w, n)?);
                }
            }
            Given::Height(n) => {
                if let Some(h) = self.modal.height {
                    self.modal.width = Some(cur.product(h, n)?);
                }
            }
        }
        let (w, h) = self.size(at, cur)?;
        let (origin, repetition) = self.place_and_repetition(flags, cur)?;
        let ring = compact(kind, w, h).ok_or_else(|| {
            let found = format!("compact trapezoid kind {kind} in {w} × {h}");
            cur.fault(at, found, "a box that holds its 45° slants")
        })?;
        self.push(layer, &ring, origin, repetition, cur)
    }

    pub(super) fn circle(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        let layer = self.layer(flags, at, cur)?;
        if flags & 0x20 != 0 {
            self.modal.radius = Some(cur.extent()?);
        }
        let (centre, repetition) = self.place_and_repetition(flags, cur)?;
        let radius = self
            .modal
            .radius
            .ok_or_else(|| undefined(cur, at, "the radius"))?;
        cur.sum(centre, Point::new(radius, radius))?;
        cur.sum(centre, Point::new(-radius, -radius))?;
        match path::circle(centre, to_f64(radius)) {
            Some(ring) => {
                self.budget.copy(ring.len(), cur)?;
                self.push(layer, &ring, Point::default(), repetition, cur)
            }
            None => {
                self.part.remarks.add("circle of no radius skipped");
                Ok(())
            }
        }
    }

    pub(super) fn extension_geometry(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        cur.unsigned()?;
        self.layer(flags, at, cur)?;
        cur.string()?;
        self.place_and_repetition(flags, cur)?;
        self.part.remarks.add("XGEOMETRY skipped");
        Ok(())
    }

    fn push(
        &mut self,
        layer: Layer,
        points: &[Point],
        origin: Point,
        repetition: Repetition,
        cur: &Cursor<'_>,
    ) -> Parsed<()> {
        if points.len() < 3 {
            let what = "outline of fewer than three points skipped";
            self.part.remarks.add(what);
            return Ok(());
        }
        // All bits that any coordinate has: enough to know that most outlines are well within range.
        let bits = points.iter().fold(0, |bits, &p| {
            let p = p + origin;
            bits | (p.x ^ p.x >> 63) | (p.y ^ p.y >> 63)
        });
        if bits > i64::from(i32::MAX) {
            for &p in points {
                cur.sum(p, origin)?;
            }
        }
        if let Some((_, cell)) = self.part.cells.last_mut() {
            cell.shapes.add(layer, points, origin, repetition);
        }
        Ok(())
    }

    #[inline]
    fn layer(&mut self, flags: u8, at: usize, cur: &mut Cursor<'_>) -> Parsed<Layer> {
        if flags & info::LAYER != 0 {
            self.modal.layer = Some(cur.unsigned32()?);
        }
        if flags & info::DATATYPE != 0 {
            self.modal.datatype = Some(cur.unsigned32()?);
        }
        match (self.modal.layer, self.modal.datatype) {
            (Some(layer), Some(datatype)) => Ok(Layer { layer, datatype }),
            _ => Err(undefined(cur, at, "the layer or datatype")),
        }
    }

    fn size(&self, at: usize, cur: &Cursor<'_>) -> Parsed<(i64, i64)> {
        match (self.modal.width, self.modal.height) {
            (Some(w), Some(h)) => Ok((w, h)),
            _ => Err(undefined(cur, at, "the width or height")),
        }
    }

    #[inline]
    fn place_and_repetition(
        &mut self,
        flags: u8,
        cur: &mut Cursor<'_>,
    ) -> Parsed<(Point, Repetition)> {
        let at = place(cur, flags, self.modal.relative, &mut self.modal.geometry)?;
        Ok((at, self.repetition(flags, cur)?))
    }
}

fn shifted(places: &[Point], by: Point, cur: &Cursor<'_>) -> Parsed<Vec<Point>> {
    let mut points = Vec::with_capacity(places.len());
    for &p in places {
        points.push(cur.sum(p, by)?);
    }
    Ok(points)
}

#[allow(
    clippy::cast_precision_loss,
    reason = "lengths are held within 2^52 when read"
)]
fn to_f64(length: i64) -> f64 {
    length as f64
}
