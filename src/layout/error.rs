//! What can be wrong with a layout file, said with place, found and expected.

use std::collections::BTreeMap;
use std::fmt;
use std::io;

/// Where in a layout file something is wrong.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// Offset from the start of the file (of the decompressed file, if it is gzip-compressed).
    Byte(u64),
    /// Offset within the inflated contents of the OASIS CBLOCK whose record starts at `block`.
    Inflated {
        /// Offset of the CBLOCK record in the file.
        block: u64,
        /// Offset within its inflated contents.
        byte: u64,
    },
    /// A place in a text file, both counted from 1; columns count characters.
    Text {
        /// Line.
        line: usize,
        /// Column.
        column: usize,
    },
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Byte(byte) => write!(f, "byte {byte}"),
            Self::Inflated { block, byte } => {
                write!(f, "byte {byte} within the CBLOCK at byte {block}")
            }
            Self::Text { line, column } => write!(f, "line {line}, column {column}"),
        }
    }
}

/// Why a file is not taken as a layout. Every variant names the file.
#[derive(Debug, thiserror::Error)]
pub enum LayoutError {
    /// The operating system or the decompressor could not deliver the bytes.
    #[error("{file}: cannot be read: {cause}")]
    Unreadable {
        /// Which file.
        file: String,
        /// Why.
        cause: io::Error,
    },
    /// The first bytes belong to no accepted format.
    #[error(
        "{file}: starts with {found}, expected GDSII (also gzip-compressed), OASIS, or WKT text with POLYGON or MULTIPOLYGON"
    )]
    UnknownFormat {
        /// Which file.
        file: String,
        /// Its first bytes, readable.
        found: String,
    },
    /// The contents break the rules of their format or a limit of this reader.
    #[error("{file}: {place}: found {found}, expected {expected}{}", hint.map(|h| format!("\nhint: {h}")).unwrap_or_default())]
    Malformed {
        /// Which file.
        file: String,
        /// Where.
        place: Place,
        /// What stands there.
        found: String,
        /// What should.
        expected: String,
        /// What probably happened, where there is evidence.
        hint: Option<&'static str>,
    },
    /// Cells are placed that the file does not define.
    #[error("{file}: places cells that it does not define: {}", quoted(names))]
    MissingCells {
        /// Which file.
        file: String,
        /// Their names, sorted.
        names: Vec<String>,
    },
    /// One name stands for two cells.
    #[error("{file}: cell `{name}` is defined twice")]
    DuplicateCell {
        /// Which file.
        file: String,
        /// The name.
        name: String,
    },
    /// Cells contain themselves.
    #[error("{file}: cells place each other in a circle: {}", quoted(names))]
    RecursiveCells {
        /// Which file.
        file: String,
        /// The circle, each cell placing the next and the last the first.
        names: Vec<String>,
    },
    /// Cells nest deeper than any sane layout.
    #[error("{file}: cells nest {depth} deep, expected at most {limit}")]
    TooDeep {
        /// Which file.
        file: String,
        /// Longest chain of placements.
        depth: usize,
        /// What is accepted.
        limit: usize,
    },
}

fn quoted(names: &[String]) -> String {
    const SHOWN: usize = 10;
    let mut text = names
        .iter()
        .take(SHOWN)
        .map(|n| format!("`{n}`"))
        .collect::<Vec<_>>()
        .join(", ");
    if names.len() > SHOWN {
        text += &format!(" and {} more", names.len() - SHOWN);
    }
    text
}

/// A [`LayoutError::Malformed`] before the file's name is known; boxed to keep the parsers' results small.
#[derive(Debug)]
pub(super) struct Fault {
    pub(super) place: Place,
    pub(super) found: String,
    pub(super) expected: String,
    pub(super) hint: Option<&'static str>,
}

pub(super) type Parsed<T> = Result<T, Box<Fault>>;

impl Fault {
    #[cold]
    pub(super) fn new(
        place: Place,
        found: impl Into<String>,
        expected: impl Into<String>,
    ) -> Box<Self> {
        Box::new(Self {
            place,
            found: found.into(),
            expected: expected.into(),
            hint: None,
        })
    }

    /// The bytes end where more are needed.
    #[cold]
    pub(super) fn ends(place: Place, expected: impl Into<String>) -> Box<Self> {
        let mut fault = Self::new(place, "the end of the data", expected);
        fault.hint = Some("the file ends early; it may have been cut short when it was copied");
        fault
    }

    pub(super) fn in_file(self, file: &str) -> LayoutError {
        LayoutError::Malformed {
            file: file.to_owned(),
            place: self.place,
            found: self.found,
            expected: self.expected,
            hint: self.hint,
        }
    }
}

/// An outline whose last point does not repeat its first, in a format that wants that.
pub(super) const OPEN: &str = "outline that was not closed: closed by a straight edge";

/// What was repaired or skipped, counted by kind.
#[derive(Clone, Debug, Default)]
pub(super) struct Remarks(BTreeMap<&'static str, u64>);

impl Remarks {
    pub(super) fn add(&mut self, what: &'static str) {
        *self.0.entry(what).or_default() += 1;
    }

    pub(super) fn merge(&mut self, other: Self) {
        for (what, count) in other.0 {
            *self.0.entry(what).or_default() += count;
        }
    }

    /// How often an outline was left open.
    pub(super) fn open_outlines(&self) -> u64 {
        self.0.get(OPEN).copied().unwrap_or(0)
    }

    /// One sentence for each kind, with its count.
    pub(super) fn sentences(&self) -> Vec<String> {
        self.0
            .iter()
            .map(|(what, count)| format!("{count} × {what}"))
            .collect()
    }
}
