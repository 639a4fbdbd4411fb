//! The fractures of a quote, side by side.

use serde::{Deserialize, Serialize};

/// The three fractures that a quote compares.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Method {
    /// The plain geometric staircase in tiles: the baseline.
    Staircase,
    /// Shots that do not overlap.
    Tile,
    /// Shots that may overlap.
    Overlap,
}

impl Method {
    /// All, in the order of every report.
    pub const ALL: [Self; 3] = [Self::Staircase, Self::Tile, Self::Overlap];

    /// One word for tables and file names.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Staircase => "staircase",
            Self::Tile => "tile",
            Self::Overlap => "overlap",
        }
    }
}

/// One value per fracture; `None` where that fracture was not made.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ByMethod<T> {
    /// For [`Method::Staircase`].
    pub staircase: Option<T>,
    /// For [`Method::Tile`].
    pub tile: Option<T>,
    /// For [`Method::Overlap`].
    pub overlap: Option<T>,
}

impl<T> Default for ByMethod<T> {
    fn default() -> Self {
        Self {
            staircase: None,
            tile: None,
            overlap: None,
        }
    }
}

impl<T> ByMethod<T> {
    /// The value for one fracture.
    #[must_use]
    pub fn get(&self, method: Method) -> Option<&T> {
        match method {
            Method::Staircase => self.staircase.as_ref(),
            Method::Tile => self.tile.as_ref(),
            Method::Overlap => self.overlap.as_ref(),
        }
    }

    /// Where the value for one fracture is kept.
    pub fn slot(&mut self, method: Method) -> &mut Option<T> {
        match method {
            Method::Staircase => &mut self.staircase,
            Method::Tile => &mut self.tile,
            Method::Overlap => &mut self.overlap,
        }
    }

    /// All three in the order of every report.
    pub fn iter(&self) -> impl Iterator<Item = (Method, Option<&T>)> {
        Method::ALL.into_iter().map(|m| (m, self.get(m)))
    }
}
