//! GDSII stream files.
//!
//! Read in stretches cut between elements, as many at a time as there are threads, so that memory holds the layout and a few stretches and
//! never the file. An element needs nothing from its neighbours; only the stitching of stretches into cells is sequential.
//!
//! A reader of its own: the general-purpose parser at hand wants the file in one piece, refuses names beyond ASCII, and its grammar errors name no place.
//!
//! Accepted beyond the letter of the format: outlines continued in further XY records, unclosed outlines, 16-bit layers and counts read as unsigned,
//! names of any bytes, anything after ENDLIB.

mod element;
mod record;
mod write;

use std::io::{self, Read};

use rayon::prelude::*;

use self::element::{Contents, Context};
use self::record::{Records, tag};
pub(super) use self::write::write;
use super::error::{Fault, Parsed, Place, Remarks};
use super::hierarchy::{Interner, RawCell, link};
use super::{CellId, Layer, Layout, LayoutError, unit_from_nm};
use crate::units::Nm;

/// First bytes of every file: a HEADER record of six bytes.
pub(super) const MAGIC: [u8; 4] = [0x00, 0x06, 0x00, 0x02];

/// Bytes in a stretch; longer only where one element is. Larger ones brought no speed, smaller ones lost some.
const STRETCH: usize = 1 << 21;

/// Reads a whole library.
pub(super) fn read(source: impl Read + Send, file: &str) -> Result<Layout, LayoutError> {
    let fault = |fault: Box<Fault>| fault.in_file(file);
    let unreadable = |cause| LayoutError::Unreadable {
        file: file.to_owned(),
        cause,
    };
    let mut stretches = Stretches::new(source);
    let threads = rayon::current_num_threads();
    let mut group = stretches.next_group(threads).map_err(unreadable)?;
    let unit = match group.first_mut() {
        Some(first) => read_library_head(first).map_err(fault)?,
        None => return Err(fault(Fault::ends(Place::Byte(0), "HEADER"))),
    };
    let mut library = Library::default();
    while !group.is_empty() {
        let (parts, next) = rayon::join(
            || group.par_iter().map(parse).collect::<Vec<_>>(),
            || stretches.next_group(threads),
        );
        for part in parts {
            library.stitch(part.map_err(fault)?).map_err(fault)?;
        }
        if library.ended {
            break;
        }
        let read = std::mem::replace(&mut group, next.map_err(unreadable)?);
        stretches.take_back(read);
    }
    if !library.ended {
        let end = Place::Byte(stretches.base);
        return Err(fault(Fault::ends(end, "ENDLIB")));
    }
    let cells = link(library.cells, &library.names.into_keys(), file)?;
    Ok(Layout {
        unit,
        cells,
        open_outlines: library.remarks.open_outlines(),
        notes: library.remarks.sentences(),
    })
}

/// Consecutive bytes of the file that start and end between elements.
struct Stretch {
    bytes: Vec<u8>,
    base: u64,
}

/// Cuts a stream into stretches.
struct Stretches<R> {
    source: R,
    /// Read but not yet given out: the start of an element.
    tail: Vec<u8>,
    /// Offset of `tail` in the file.
    base: u64,
    ended: bool,
    /// Memory of stretches that are done with.
    spare: Vec<Vec<u8>>,
}

impl<R: Read> Stretches<R> {
    fn new(source: R) -> Self {
        Self {
            source,
            tail: Vec::new(),
            base: 0,
            ended: false,
            spare: Vec::new(),
        }
    }

    fn take_back(&mut self, read: Vec<Stretch>) {
        self.spare
            .extend(read.into_iter().map(|stretch| stretch.bytes));
    }

    fn next_group(&mut self, size: usize) -> io::Result<Vec<Stretch>> {
        let mut group = Vec::with_capacity(size);
        while group.len() < size {
            match self.next()? {
                Some(stretch) => group.push(stretch),
                None => break,
            }
        }
        Ok(group)
    }

    fn next(&mut self) -> io::Result<Option<Stretch>> {
        let mut bytes = self.spare.pop().unwrap_or_default();
        bytes.clear();
        bytes.append(&mut self.tail);
        let mut cut = 0;
        while cut == 0 && !self.ended {
            let wanted = STRETCH.max(bytes.len());
            bytes.reserve_exact(wanted);
            let got = (&mut self.source)
                .take(wanted as u64)
                .read_to_end(&mut bytes)?;
            self.ended = got < wanted;
            cut = last_cut(&bytes);
        }
        // What follows the last cut of the file is its end, or broken: the parser says which.
        if self.ended {
            cut = bytes.len();
        }
        self.tail.extend_from_slice(&bytes[cut..]);
        bytes.truncate(cut);
        let base = self.base;
        self.base += cut as u64;
        Ok((cut > 0).then_some(Stretch { bytes, base }))
    }
}

/// End of the last element in `bytes`; all of them if a record is broken, so that the parser meets it.
fn last_cut(bytes: &[u8]) -> usize {
    let (mut at, mut cut) = (0, 0);
    while let Some(&[l0, l1, t0, t1]) = bytes.get(at..at + 4) {
        let length = usize::from(u16::from_be_bytes([l0, l1]));
        if length < 4 {
            return bytes.len();
        }
        at += length;
        if u16::from_be_bytes([t0, t1]) == tag::ENDEL && at <= bytes.len() {
            cut = at;
        }
    }
    cut
}

/// Reads and removes everything up to UNITS; gives the length of a database unit.
fn read_library_head(first: &mut Stretch) -> Parsed<Nm> {
    let mut records = Records::new(&first.bytes, first.base);
    let header = records.expect("HEADER")?;
    if header.tag != tag::HEADER {
        return Err(header.unexpected("HEADER"));
    }
    let unit = loop {
        let record = records.expect("UNITS")?;
        match record.tag {
            tag::UNITS => {
                let [_, metres] = record.real_pair()?;
                break unit_from_nm(metres * 1e9).ok_or_else(|| {
                    let found = format!("a database unit of {metres} m");
                    Fault::new(record.place(), found, super::UNIT_RANGE)
                })?;
            }
            tag::BGNLIB
            | tag::LIBNAME
            | tag::REFLIBS
            | tag::FONTS
            | tag::GENERATIONS
            | tag::ATTRTABLE
            | tag::FORMAT
            | tag::MASK
            | tag::ENDMASKS
            | tag::LIBDIRSIZE
            | tag::SRFNAME
            | tag::LIBSECUR => {}
            _ => return Err(record.unexpected("a record of the library's head, or UNITS")),
        }
    };
    let consumed = records.consumed();
    first.bytes.drain(..consumed);
    first.base += consumed as u64;
    Ok(unit)
}

/// What one stretch holds. The first run of contents belongs to the cell left open by the stretch before.
struct Part {
    runs: Vec<Run>,
    names: Vec<Vec<u8>>,
    remarks: Remarks,
    /// Where ENDLIB was met.
    ended: Option<Place>,
}

/// Contents of one cell, or of a part of it.
struct Run {
    /// Where its first record stands.
    place: Place,
    /// Name of the cell that starts with this run.
    starts: Option<Vec<u8>>,
    contents: Contents,
    /// The cell ends with this run.
    ends: bool,
}

impl Run {
    fn new(place: Place) -> Self {
        Self {
            place,
            starts: None,
            contents: Contents::default(),
            ends: false,
        }
    }
}

fn parse(stretch: &Stretch) -> Parsed<Part> {
    let mut records = Records::new(&stretch.bytes, stretch.base);
    let mut context = Context::default();
    let mut runs = Vec::new();
    let mut open: Option<Run> = None;
    let mut ended = None;
    loop {
        if let Some(run) = &mut open {
            while let Some(plain) = records.plain_boundary() {
                let layer = Layer {
                    layer: plain.layer.into(),
                    datatype: plain.datatype.into(),
                };
                run.contents.shapes.add_narrow(layer, plain.points());
            }
        }
        let Some(record) = records.next()? else {
            break;
        };
        match record.tag {
            tag::BGNSTR => {
                let name = records.expect("STRNAME")?;
                if name.tag != tag::STRNAME {
                    return Err(name.unexpected("STRNAME"));
                }
                runs.extend(open.take());
                let mut run = Run::new(record.place());
                run.starts = Some(name.name()?.to_vec());
                open = Some(run);
            }
            tag::STRCLASS => {}
            tag::ENDSTR => {
                let mut run = open.take().unwrap_or_else(|| Run::new(record.place()));
                run.ends = true;
                runs.push(run);
            }
            tag::ENDLIB => {
                if records.rest().iter().any(|&b| b != 0) {
                    context.remarks.add("stretch of data after ENDLIB ignored");
                }
                ended = Some(record.place());
                break;
            }
            _ => {
                let run = open.get_or_insert_with(|| Run::new(record.place()));
                element::read(&record, &mut records, &mut context, &mut run.contents)?;
            }
        }
    }
    runs.extend(open);
    for run in &mut runs {
        run.contents.shapes.shrink();
    }
    Ok(Part {
        runs,
        names: context.names.into_keys(),
        remarks: context.remarks,
        ended,
    })
}

/// The cells so far.
#[derive(Default)]
struct Library {
    cells: Vec<RawCell>,
    /// The last cell is not closed yet.
    open: bool,
    names: Interner<Vec<u8>>,
    remarks: Remarks,
    ended: bool,
}

impl Library {
    fn stitch(&mut self, part: Part) -> Parsed<()> {
        if self.ended {
            return Ok(());
        }
        let numbers: Vec<usize> = part.names.iter().map(|n| self.names.number(n)).collect();
        for mut run in part.runs {
            if let Some(name) = run.starts {
                if self.open {
                    let found = "BGNSTR within a cell";
                    return Err(Fault::new(run.place, found, "ENDSTR first"));
                }
                self.open = true;
                self.cells.push(RawCell {
                    name,
                    ..RawCell::default()
                });
            }
            let cell = match self.cells.last_mut() {
                Some(cell) if self.open => cell,
                _ => {
                    let found = "contents of a cell outside any";
                    return Err(Fault::new(run.place, found, "BGNSTR first"));
                }
            };
            for placement in &mut run.contents.placements {
                placement.cell = CellId(numbers[placement.cell.0]);
            }
            cell.shapes.append(run.contents.shapes);
            cell.placements.append(&mut run.contents.placements);
            self.open = !run.ends;
        }
        if let (Some(place), true) = (part.ended, self.open) {
            return Err(Fault::new(place, "ENDLIB within a cell", "ENDSTR first"));
        }
        self.ended = part.ended.is_some();
        self.remarks.merge(part.remarks);
        Ok(())
    }
}
