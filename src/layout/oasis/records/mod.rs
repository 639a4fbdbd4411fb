//! The records between START and END, and the cells they make.

mod shapes;

use flate2::{Decompress, FlushDecompress, Status};

use super::super::error::{Fault, Parsed, Remarks};
use super::super::hierarchy::{Interner, RawCell};
use super::super::{CellId, Placement};
use super::budget::Budget;
use super::cursor::Cursor;
use super::modal::Modal;
use super::repetition::repetition;
use crate::geom::{Point, Repetition};

/// Record identifiers that the file level needs, too.
pub(super) mod id {
    pub(crate) const PAD: u64 = 0;
    pub(crate) const START: u64 = 1;
    pub(crate) const END: u64 = 2;
    pub(crate) const CELL_BY_NUMBER: u64 = 13;
    pub(crate) const CELL_BY_NAME: u64 = 14;
    pub(crate) const CBLOCK: u64 = 34;
}

/// How a cell is referred to.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub(super) enum CellKey {
    /// By reference number, which a CELLNAME record explains anywhere in the file.
    Number(u64),
    /// By name.
    Name(Vec<u8>),
}

/// What a stretch of records holds.
#[derive(Debug, Default)]
pub(super) struct Part {
    /// Cells; their placements index `targets`.
    pub(super) cells: Vec<(CellKey, RawCell)>,
    pub(super) targets: Interner<CellKey>,
    /// CELLNAME records, with their number where it is explicit.
    pub(super) names: Vec<(Option<u64>, Vec<u8>)>,
    pub(super) remarks: Remarks,
}

/// Reads records one after the other.
#[derive(Debug)]
pub(super) struct Reader<'b> {
    budget: &'b Budget,
    modal: Modal,
    /// The last cell is open.
    in_cell: bool,
    pub(super) part: Part,
}

/// Bits of the info byte that shapes share.
pub(super) mod info {
    pub(crate) const LAYER: u8 = 0x01;
    pub(crate) const DATATYPE: u8 = 0x02;
    pub(crate) const REPETITION: u8 = 0x04;
    pub(crate) const Y: u8 = 0x08;
    pub(crate) const X: u8 = 0x10;
}

impl<'b> Reader<'b> {
    pub(super) fn new(budget: &'b Budget) -> Self {
        Self {
            budget,
            modal: Modal::default(),
            in_cell: false,
            part: Part::default(),
        }
    }

    /// All records up to the end of the cursor.
    pub(super) fn read_all(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        while cur.remaining() > 0 {
            let at = cur.at();
            let id = cur.unsigned()?;
            self.read(id, at, cur)?;
        }
        Ok(())
    }

    /// The record of which the identifier, at `at`, was just read.
    pub(super) fn read(&mut self, id: u64, at: usize, cur: &mut Cursor<'_>) -> Parsed<()> {
        match id {
            id::PAD => Ok(()),
            3..=12 => self.name_table(id, cur),
            id::CELL_BY_NUMBER => {
                let key = CellKey::Number(cur.unsigned()?);
                self.open_cell(key);
                Ok(())
            }
            id::CELL_BY_NAME => {
                let key = CellKey::Name(cur.name()?.to_vec());
                self.open_cell(key);
                Ok(())
            }
            15..=27 | 32 | 33 if !self.in_cell => Err(cur.fault(
                at,
                format!("record {id} outside a cell"),
                "a CELL record first",
            )),
            15 | 16 => {
                self.modal.relative = id == 16;
                Ok(())
            }
            17 | 18 => self.placement(id == 18, cur),
            19 => self.text(cur),
            20 => self.rectangle(cur),
            21 => self.polygon(cur),
            22 => self.path(cur),
            23..=25 => self.trapezoid(id, cur),
            26 => self.compact_trapezoid(cur),
            27 => self.circle(cur),
            28 => property(cur),
            // Repeats the last property: nothing follows.
            29 => Ok(()),
            30 | 31 => {
                self.close_cell();
                cur.unsigned()?;
                cur.string()?;
                if id == 31 {
                    cur.unsigned()?;
                }
                Ok(())
            }
            32 => {
                cur.unsigned()?;
                cur.string()?;
                self.part.remarks.add("XELEMENT skipped");
                Ok(())
            }
            33 => self.extension_geometry(cur),
            id::CBLOCK => self.block(at, cur),
            id::START | id::END => {
                let found = if id == id::START { "START" } else { "END" };
                Err(cur.fault(
                    at,
                    format!("{found} within the file"),
                    "one at either end of the file",
                ))
            }
            _ => Err(cur.fault(at, format!("record identifier {id}"), "0 to 34")),
        }
    }

    fn open_cell(&mut self, key: CellKey) {
        self.close_cell();
        self.in_cell = true;
        self.part.cells.push((key, RawCell::default()));
    }

    fn close_cell(&mut self) {
        if let Some((_, cell)) = self.part.cells.last_mut().filter(|_| self.in_cell) {
            cell.shapes.shrink();
        }
        self.modal = Modal::default();
        self.in_cell = false;
    }

    /// CELLNAME, TEXTSTRING, PROPNAME, PROPSTRING (3 to 10), LAYERNAME (11, 12).
    fn name_table(&mut self, id: u64, cur: &mut Cursor<'_>) -> Parsed<()> {
        self.close_cell();
        if id >= 11 {
            cur.name()?;
            interval(cur)?;
            return interval(cur);
        }
        let name = if id <= 4 { cur.name()? } else { cur.string()? };
        let number = if id.is_multiple_of(2) {
            Some(cur.unsigned()?)
        } else {
            None
        };
        if id <= 4 {
            self.part.names.push((number, name.to_vec()));
        }
        Ok(())
    }

    fn block(&mut self, at: usize, cur: &mut Cursor<'_>) -> Parsed<()> {
        if cur.is_inflated() {
            return Err(cur.fault(at, "a CBLOCK within a CBLOCK", "any other record"));
        }
        let inflated = inflate(at, cur, self.budget)?;
        self.read_all(&mut Cursor::in_block(&inflated, at as u64))
    }

    /// PLACEMENT, `free` with a magnification and an angle of their own.
    fn placement(&mut self, free: bool, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        if flags & 0x80 != 0 {
            let key = if flags & 0x40 != 0 {
                CellKey::Number(cur.unsigned()?)
            } else {
                CellKey::Name(cur.name()?.to_vec())
            };
            self.modal.placed = Some(self.part.targets.number(&key));
        }
        let (mut magnification, mut angle_deg) = (1.0, 0.0);
        if free {
            if flags & 0x04 != 0 {
                magnification = cur.real()?;
            }
            if flags & 0x02 != 0 {
                angle_deg = cur.real()?;
            }
        } else {
            angle_deg = f64::from(flags >> 1 & 3) * 90.0;
        }
        if magnification <= 0.0 {
            let found = format!("a magnification of {magnification}");
            return Err(cur.fault(at, found, "a positive number"));
        }
        // Same meaning as in shapes, one bit to the left.
        let flags_of_shape = flags >> 1;
        let origin = place(
            cur,
            flags_of_shape,
            self.modal.relative,
            &mut self.modal.placement,
        )?;
        let repetition = self.repetition(flags_of_shape, cur)?;
        let cell = self
            .modal
            .placed
            .ok_or_else(|| undefined(cur, at, "the cell placed"))?;
        let placement = Placement {
            cell: CellId(cell),
            origin,
            mirror: flags & 0x01 != 0,
            angle_deg,
            magnification,
            repetition,
        };
        if let Some((_, cell)) = self.part.cells.last_mut() {
            cell.placements.push(placement);
        }
        Ok(())
    }

    fn text(&mut self, cur: &mut Cursor<'_>) -> Parsed<()> {
        let at = cur.at();
        let flags = cur.byte()?;
        if flags & 0x40 != 0 {
            if flags & 0x20 != 0 {
                cur.unsigned()?;
            } else {
                cur.string()?;
            }
            self.modal.has_text = true;
        }
        for bit in [info::LAYER, info::DATATYPE] {
            if flags & bit != 0 {
                cur.unsigned()?;
            }
        }
        place(cur, flags, self.modal.relative, &mut self.modal.text)?;
        self.repetition(flags, cur)?;
        if !self.modal.has_text {
            return Err(undefined(cur, at, "the text"));
        }
        self.part.remarks.add("text skipped");
        Ok(())
    }

    #[inline]
    fn repetition(&mut self, flags: u8, cur: &mut Cursor<'_>) -> Parsed<Repetition> {
        if flags & info::REPETITION == 0 {
            return Ok(Repetition::Once);
        }
        repetition(cur, &mut self.modal.repetition, self.budget)
    }
}

/// Inflates the CBLOCK of which the identifier, at `at`, was just read.
fn inflate(at: usize, cur: &mut Cursor<'_>, budget: &Budget) -> Parsed<Vec<u8>> {
    let (size, deflated) = block_contents(cur)?;
    // No DEFLATE stream unfolds to more than 1032 times its length: do not take a false size for an order of memory.
    let possible = deflated.len() as u64 * 1032 + 64;
    let capacity = usize::try_from(size).ok().filter(|_| size <= possible);
    let Some(capacity) = capacity else {
        let found = format!(
            "a CBLOCK of {} bytes that states {size} inflated",
            deflated.len()
        );
        return Err(cur.fault(at, found, format!("at most {possible}")));
    };
    budget.inflate(size, cur)?;
    // One more, or a block of the right length could not be told from one that goes on.
    let mut inflated = Vec::with_capacity(capacity + 1);
    let status =
        Decompress::new(false).decompress_vec(deflated, &mut inflated, FlushDecompress::Finish);
    match status {
        Ok(Status::StreamEnd) if inflated.len() == capacity => Ok(inflated),
        Ok(_) => {
            let found = format!("a CBLOCK that inflates to {} bytes or on", inflated.len());
            Err(cur.fault(at, found, format!("{size}, as it states")))
        }
        Err(e) => Err(cur.fault(
            at,
            format!("a CBLOCK that does not inflate ({e})"),
            "DEFLATE data",
        )),
    }
}

/// Stated size and compressed bytes of the CBLOCK of which the identifier was just read.
pub(super) fn block_contents<'a>(cur: &mut Cursor<'a>) -> Parsed<(u64, &'a [u8])> {
    let at = cur.at();
    let kind = cur.unsigned()?;
    if kind != 0 {
        return Err(cur.fault(at, format!("compression type {kind}"), "0 (DEFLATE)"));
    }
    let size = cur.unsigned()?;
    let length = cur.unsigned()?;
    Ok((size, cur.bytes(length)?))
}

/// The next place, absolute or relative to the last.
#[inline]
fn place(cur: &mut Cursor<'_>, flags: u8, relative: bool, last: &mut Point) -> Parsed<Point> {
    let base = if relative { *last } else { Point::default() };
    let mut next = *last;
    if flags & info::X != 0 {
        next.x = base.x + cur.signed()?;
    }
    if flags & info::Y != 0 {
        next.y = base.y + cur.signed()?;
    }
    *last = cur.sum(next, Point::default())?;
    Ok(*last)
}

/// The span of layers or datatypes that a LAYERNAME stands for.
fn interval(cur: &mut Cursor<'_>) -> Parsed<()> {
    let at = cur.at();
    let bounds = match cur.unsigned()? {
        0 => 0,
        1..=3 => 1,
        4 => 2,
        kind => return Err(cur.fault(at, format!("interval type {kind}"), "0 to 4")),
    };
    for _ in 0..bounds {
        cur.unsigned()?;
    }
    Ok(())
}

fn property(cur: &mut Cursor<'_>) -> Parsed<()> {
    let flags = cur.byte()?;
    if flags & 0x04 != 0 {
        if flags & 0x02 != 0 {
            cur.unsigned()?;
        } else {
            cur.string()?;
        }
    }
    if flags & 0x08 != 0 {
        return Ok(());
    }
    let count = match flags >> 4 {
        15 => cur.unsigned()?,
        n => u64::from(n),
    };
    for _ in 0..count {
        let at = cur.at();
        match cur.unsigned()? {
            form @ 0..=7 => {
                cur.real_of_form(form, at)?;
            }
            // A signed integer is as long as an unsigned one.
            8 | 9 | 13..=15 => {
                cur.unsigned()?;
            }
            10..=12 => {
                cur.string()?;
            }
            kind => return Err(cur.fault(at, format!("property value type {kind}"), "0 to 15")),
        }
    }
    Ok(())
}

#[cold]
fn undefined(cur: &Cursor<'_>, at: usize, what: &str) -> Box<Fault> {
    let found = format!("a record that leaves out {what}");
    cur.fault(at, found, "one before it in the cell that gives it")
}
