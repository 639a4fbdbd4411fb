//! Why a command could not be done, said with place, found and expected.

use std::io;

use crate::expose::RasterError;
use crate::layout::LayoutError;
use crate::mask::MaskError;
use crate::profile::ProfileErrors;
use crate::quote::QuoteError;
use crate::quote::shots::TooManyPlaces;
use crate::report::figure_plot::PlotError;
use crate::report::shots_csv::ShotsCsvError;
use crate::shot::AddressUnitError;
use crate::write_time::WriteTimeError;

/// Why a command could not be done.
#[derive(Debug, thiserror::Error)]
pub enum CliError {
    /// The layout cannot be read.
    #[error(transparent)]
    Layout(#[from] LayoutError),
    /// No mask can be made of the layout.
    #[error("{file}: {cause}{hint}")]
    Mask {
        /// The layout's file.
        file: String,
        /// Why.
        cause: MaskError,
        /// A line of its own, or empty.
        hint: &'static str,
    },
    /// The mask cannot be quoted.
    #[error("{file}: {cause}")]
    Quote {
        /// The layout's file.
        file: String,
        /// Why.
        cause: QuoteError,
    },
    /// The profile cannot be used.
    #[error(transparent)]
    Profile(#[from] ProfileErrors),
    /// A job file cannot be used.
    #[error("{place}: {message}")]
    Job {
        /// File and line.
        place: String,
        /// Found and expected.
        message: String,
    },
    /// Numbers that contradict each other.
    #[error("{0}")]
    Arguments(String),
    /// The address unit is none.
    #[error("--address-nm: {0}")]
    Address(#[from] AddressUnitError),
    /// No time can be given.
    #[error(transparent)]
    WriteTime(#[from] WriteTimeError),
    /// The shot list cannot be read.
    #[error("{file}: {cause}")]
    Shots {
        /// Its file.
        file: String,
        /// Why.
        cause: ShotsCsvError,
    },
    /// A shot list cannot be judged.
    #[error("{file}: {cause}")]
    TooManyPlaces {
        /// The layout's file.
        file: String,
        /// Why.
        cause: TooManyPlaces,
    },
    /// The second witness cannot be asked.
    #[error("--raster-nm: {0}")]
    Raster(#[from] RasterError),
    /// A file cannot be opened or written.
    #[error("{file}: {cause}")]
    File {
        /// Which.
        file: String,
        /// Why.
        cause: io::Error,
    },
    /// A picture cannot be made.
    #[error("{file}: {cause}")]
    Picture {
        /// Its file.
        file: String,
        /// Why.
        cause: PlotError,
    },
    /// The result cannot be printed.
    #[error("standard output: {0}")]
    Stdout(io::Error),
    /// The threads cannot be started.
    #[error("--threads: {0}")]
    Threads(String),
}

impl CliError {
    /// Whether the reader of standard output has gone: nobody is left to tell.
    #[must_use]
    pub fn is_broken_pipe(&self) -> bool {
        matches!(self, Self::Stdout(cause) if cause.kind() == io::ErrorKind::BrokenPipe)
    }

    /// Why no mask could be made of a file.
    pub(super) fn mask(file: &str, cause: MaskError) -> Self {
        let hint = match cause {
            MaskError::LayerNotChosen { ref present } if !present.0.is_empty() => {
                "\nhint: choose one with --layer L/D; give it again for each layer to be united"
            }
            _ => "",
        };
        Self::Mask {
            file: file.to_owned(),
            cause,
            hint,
        }
    }
}
