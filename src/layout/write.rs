//! Layouts back into files for any viewer: GDSII, or OASIS with its cells compressed.
//!
//! Same layout, same bytes: no date, no name of the program. What is read back is the same layout, cell by cell, with two exceptions: GDSII
//! lists what repeats other than as an array, and both list arrays of arrays.

use std::fmt;
use std::io::{self, Write};

use super::{Layer, Layout, gdsii, oasis};
use crate::geom::{Point, Repetition};

/// Most places of one thing that are written one by one.
pub(super) const MAX_LISTED: u128 = 1 << 22;

/// In which format.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Format {
    /// 32-bit coordinates, 16-bit layers, no compression.
    Gdsii,
    /// Any coordinates and layers; contents of cells compressed, checked by a CRC32.
    Oasis,
}

/// Why a layout could not be written.
#[derive(Debug, thiserror::Error)]
pub enum WriteError {
    /// The output cannot be written.
    #[error(transparent)]
    Io(#[from] io::Error),
    /// A coordinate does not fit the format.
    #[error(
        "cell `{cell}`: coordinate {found} of units of {unit_nm} nm, but GDSII holds 32 bits\nhint: OASIS holds any"
    )]
    TooFar {
        /// In which cell.
        cell: String,
        /// What does not fit.
        found: i64,
        /// Length of a unit.
        unit_nm: f64,
    },
    /// A layer does not fit the format.
    #[error("cell `{cell}`: layer {}/{}, but GDSII holds 16 bits\nhint: OASIS holds 32", layer.layer, layer.datatype)]
    LayerTooHigh {
        /// In which cell.
        cell: String,
        /// Which.
        layer: Layer,
    },
    /// An outline of fewer than three points.
    #[error("cell `{cell}`: an outline of {points} points, expected at least three")]
    NoOutline {
        /// In which cell.
        cell: String,
        /// How many it has.
        points: usize,
    },
    /// A repetition that the format has no word for, of too many places to be listed.
    #[error(
        "cell `{cell}`: {found} places that the format cannot hold as an array, expected at most {MAX_LISTED}"
    )]
    TooMany {
        /// In which cell.
        cell: String,
        /// How many.
        found: u128,
    },
    /// A cell's name is empty or too long.
    #[error("a cell's name of {length} bytes, expected 1 to {limit}")]
    Name {
        /// How long it is.
        length: usize,
        /// How long it may be.
        limit: usize,
    },
}

impl Layout {
    /// Writes the layout; writes are small: hand in a buffered stream.
    ///
    /// # Errors
    /// [`WriteError`] where the format cannot hold the layout or the output fails.
    pub fn write(&self, format: Format, out: impl Write) -> Result<(), WriteError> {
        match format {
            Format::Gdsii => gdsii::write(self, out),
            Format::Oasis => oasis::write(self, out),
        }
    }
}

impl fmt::Display for Format {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Gdsii => "GDSII",
            Self::Oasis => "OASIS",
        })
    }
}

/// All displacements, if they are few enough to be listed.
pub(super) fn listed(repetition: &Repetition, cell: &str) -> Result<Vec<Point>, WriteError> {
    let found = repetition.count();
    if found > MAX_LISTED {
        return Err(WriteError::TooMany {
            cell: cell.to_owned(),
            found,
        });
    }
    Ok(repetition.displacements().collect())
}
