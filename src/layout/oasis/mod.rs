//! OASIS files (SEMI P39-0304E2), read whole: all record types, modal variables, names in any order, CBLOCKs, validation.
//!
//! The last 256 bytes are the END record, so its checksum is verified before anything else is believed. Then the records are walked in order;
//! a cell whose contents lie in CBLOCKs is only noted, and all noted cells are inflated and read in parallel.
//!
//! Texts, properties and extension records are read past, the first and last with a note; the table offsets are not needed.

mod budget;
mod cursor;
mod modal;
mod records;
mod repetition;
mod trapezoid;
mod write;

use std::collections::HashMap;

use rayon::prelude::*;

use self::budget::Budget;
use self::cursor::Cursor;
use self::records::{CellKey, Part, Reader, block_contents, id};
pub(super) use self::write::write;
use super::error::{Fault, Parsed, Place, Remarks};
use super::hierarchy::{RawCell, link};
use super::{CellId, Layout, LayoutError, UNIT_RANGE, unit_from_nm};
use crate::units::Nm;

/// First bytes of every file.
pub(super) const MAGIC: &[u8] = b"%SEMI-OASIS\r\n";

/// Length of the END record.
const END_LENGTH: usize = 256;

/// Reads a whole file.
pub(super) fn read(bytes: &[u8], file: &str) -> Result<Layout, LayoutError> {
    let raw = read_raw(bytes).map_err(|fault| fault.in_file(file))?;
    Ok(Layout {
        unit: raw.unit,
        cells: link(raw.cells, &raw.targets, file)?,
        // The format closes them all.
        open_outlines: 0,
        notes: raw.remarks.sentences(),
    })
}

/// Everything with names in place of numbers, before the hierarchy is linked.
struct Raw {
    unit: Nm,
    cells: Vec<RawCell>,
    targets: Vec<Vec<u8>>,
    remarks: Remarks,
}

fn read_raw(bytes: &[u8]) -> Parsed<Raw> {
    let mut cur = Cursor::in_file(bytes, MAGIC.len());
    let (unit, offsets_at_end) = start(&mut cur)?;
    let end = end(bytes, cur.at(), offsets_at_end)?;
    let budget = Budget::for_file_of(bytes.len());
    let mut cur = Cursor::in_file(&bytes[..end], cur.at());
    let stretches = walk(&mut cur, &budget)?;
    let parts: Vec<Parsed<Part>> = stretches
        .into_par_iter()
        .map(|stretch| match stretch {
            Stretch::Read(part) => Ok(part),
            Stretch::Noted(mut cur) => {
                let mut reader = Reader::new(&budget);
                reader.read_all(&mut cur)?;
                Ok(reader.part)
            }
        })
        .collect();
    let parts = parts.into_iter().collect::<Parsed<Vec<Part>>>()?;
    resolve(unit, parts, Place::Byte(end as u64))
}

/// START: the unit, and whether the table offsets stand in END.
fn start(cur: &mut Cursor<'_>) -> Parsed<(Nm, bool)> {
    let at = cur.at();
    let first = cur.unsigned()?;
    if first != id::START {
        return Err(cur.fault(at, format!("record identifier {first}"), "START (1)"));
    }
    let at = cur.at();
    let version = cur.string()?;
    if version != b"1.0" {
        let found = format!("version `{}`", version.escape_ascii());
        return Err(cur.fault(at, found, "`1.0`"));
    }
    let at = cur.at();
    let per_micron = cur.real()?;
    let unit = unit_from_nm(1000.0 / per_micron).ok_or_else(|| {
        let found = format!("{per_micron} database units to a micrometre");
        cur.fault(at, found, UNIT_RANGE)
    })?;
    let at = cur.at();
    match cur.unsigned()? {
        0 => {
            table_offsets(cur)?;
            Ok((unit, false))
        }
        1 => Ok((unit, true)),
        flag => Err(cur.fault(at, format!("offset flag {flag}"), "0 or 1")),
    }
}

/// A flag and an offset for each of the six name tables.
fn table_offsets(cur: &mut Cursor<'_>) -> Parsed<()> {
    for _ in 0..12 {
        cur.unsigned()?;
    }
    Ok(())
}

/// Where END starts, once it is whole and its checksum holds.
fn end(bytes: &[u8], after_start: usize, has_offsets: bool) -> Parsed<usize> {
    let whole = Place::Byte(bytes.len() as u64);
    let expected = "END, 256 bytes long, as the last record";
    let at = match bytes.len().checked_sub(END_LENGTH) {
        Some(at) if at >= after_start && u64::from(bytes[at]) == id::END => at,
        _ => return Err(Fault::ends(whole, expected)),
    };
    let mut cur = Cursor::in_file(bytes, at + 1);
    if has_offsets {
        table_offsets(&mut cur)?;
    }
    cur.string()?;
    let scheme_at = cur.at();
    let scheme = cur.unsigned()?;
    let covered = &bytes[..cur.at()];
    let computed = match scheme {
        0 => None,
        1 => {
            let mut crc = flate2::Crc::new();
            crc.update(covered);
            Some(crc.sum())
        }
        2 => Some(
            covered
                .iter()
                .fold(0_u32, |sum, &b| sum.wrapping_add(u32::from(b))),
        ),
        _ => {
            let found = format!("validation scheme {scheme}");
            return Err(cur.fault(scheme_at, found, "0, 1 or 2"));
        }
    };
    if let Some(computed) = computed {
        let b = cur.bytes(4)?;
        let stated = u32::from_le_bytes([b[0], b[1], b[2], b[3]]);
        if stated != computed {
            let name = if scheme == 1 { "CRC32" } else { "CHECKSUM32" };
            let mut fault = cur.fault(
                scheme_at,
                format!("{name} {stated:08X}"),
                format!("{computed:08X}, that of the bytes before it"),
            );
            fault.hint = Some("the file was damaged or edited after it was written");
            return Err(fault);
        }
    }
    if cur.remaining() != 0 {
        let found = format!("END with {} bytes too many", cur.remaining());
        return Err(cur.fault(at, found, "256 bytes"));
    }
    Ok(at)
}

/// Consecutive records.
enum Stretch<'a> {
    /// Read already.
    Read(Part),
    /// A CELL record and the CBLOCKs that hold all its contents.
    Noted(Cursor<'a>),
}

/// Walks the records of the file; the cursor ends where END starts.
fn walk<'a>(cur: &mut Cursor<'a>, budget: &Budget) -> Parsed<Vec<Stretch<'a>>> {
    let mut stretches = Vec::new();
    let mut reader = Reader::new(budget);
    while cur.remaining() > 0 {
        if let Some((cell, after)) = compressed_cell(cur)? {
            let before = std::mem::replace(&mut reader, Reader::new(budget));
            stretches.push(Stretch::Read(before.part));
            stretches.push(Stretch::Noted(cell));
            *cur = after;
        } else {
            let at = cur.at();
            let id = cur.unsigned()?;
            reader.read(id, at, cur)?;
        }
    }
    stretches.push(Stretch::Read(reader.part));
    Ok(stretches)
}

/// If the next record is a CELL followed by CBLOCKs and nothing else: a cursor over them, and one behind.
fn compressed_cell<'a>(cur: &Cursor<'a>) -> Parsed<Option<(Cursor<'a>, Cursor<'a>)>> {
    let mut ahead = cur.clone();
    match ahead.unsigned()? {
        id::CELL_BY_NUMBER => {
            ahead.unsigned()?;
        }
        id::CELL_BY_NAME => {
            ahead.string()?;
        }
        _ => return Ok(None),
    }
    let mut blocks = 0;
    while ahead.remaining() > 0 {
        let mut peek = ahead.clone();
        match peek.unsigned()? {
            id::PAD => {}
            id::CBLOCK => {
                block_contents(&mut peek)?;
                blocks += 1;
            }
            // The next cell or a name table: the contents are complete.
            3..=14 | 30 | 31 => break,
            _ => return Ok(None),
        }
        ahead = peek;
    }
    Ok((blocks > 0).then(|| (cur.up_to(ahead.at()), ahead)))
}

/// Puts names in place of numbers.
fn resolve(unit: Nm, parts: Vec<Part>, end: Place) -> Parsed<Raw> {
    let mut names: HashMap<u64, Vec<u8>> = HashMap::new();
    let mut raw = Raw {
        unit,
        cells: Vec::new(),
        targets: Vec::new(),
        remarks: Remarks::default(),
    };
    let mut implicit = 0;
    let mut contents = Vec::with_capacity(parts.len());
    for part in parts {
        for (number, name) in part.names {
            let number = number.unwrap_or_else(|| {
                implicit += 1;
                implicit - 1
            });
            if names.insert(number, name).is_some() {
                let found = format!("two CELLNAME records for reference number {number}");
                return Err(Fault::new(end, found, "one"));
            }
        }
        raw.remarks.merge(part.remarks);
        contents.push((part.cells, part.targets.into_keys()));
    }
    let name_of = |key| match key {
        CellKey::Name(name) => Ok(name),
        CellKey::Number(number) => names.get(&number).cloned().ok_or_else(|| {
            let found = format!("cell reference number {number} without a name");
            Fault::new(end, found, "a CELLNAME record for it")
        }),
    };
    for (cells, targets) in contents {
        let base = raw.targets.len();
        for target in targets {
            raw.targets.push(name_of(target)?);
        }
        for (key, mut cell) in cells {
            cell.name = name_of(key)?;
            for placement in &mut cell.placements {
                placement.cell = CellId(base + placement.cell.0);
            }
            raw.cells.push(cell);
        }
    }
    Ok(raw)
}
