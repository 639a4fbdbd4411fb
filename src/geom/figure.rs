//! One connected region with its holes.

use super::{Orientation, Point, Rect, Ring, Transform};

/// One connected region: a counter-clockwise outer ring and clockwise holes, none crossing another.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Figure {
    outer: Ring,
    holes: Vec<Ring>,
}

impl Figure {
    /// A figure from rings that do not cross; their sense of rotation is set right.
    #[must_use]
    pub fn new(outer: Ring, holes: Vec<Ring>) -> Self {
        let outer = if outer.area_two() < 0 {
            outer.reversed()
        } else {
            outer
        };
        let holes = holes
            .into_iter()
            .map(|h| if h.area_two() > 0 { h.reversed() } else { h })
            .collect();
        Self { outer, holes }
    }

    /// The rectangle as a figure.
    #[must_use]
    pub fn from_rect(r: Rect) -> Self {
        Self {
            outer: Ring::from_rect(r),
            holes: Vec::new(),
        }
    }

    /// The outer ring, counter-clockwise.
    #[must_use]
    pub fn outer(&self) -> &Ring {
        &self.outer
    }

    /// The holes, clockwise.
    #[must_use]
    pub fn holes(&self) -> &[Ring] {
        &self.holes
    }

    /// All rings, the outer first.
    pub fn rings(&self) -> impl Iterator<Item = &Ring> {
        std::iter::once(&self.outer).chain(&self.holes)
    }

    /// Twice the area, pm².
    #[must_use]
    pub fn area_two(&self) -> i128 {
        self.rings().map(Ring::area_two).sum()
    }

    /// The area, nm².
    #[must_use]
    pub fn area_nm2(&self) -> f64 {
        #[allow(
            clippy::cast_precision_loss,
            reason = "an area in nm² needs no more than 53 bits"
        )]
        let area = self.area_two() as f64;
        area * 0.5e-6
    }

    /// Length of all rings, nm.
    #[must_use]
    pub fn outline_nm(&self) -> f64 {
        self.rings().map(Ring::length_nm).sum()
    }

    /// Vertices over all rings.
    #[must_use]
    pub fn vertices(&self) -> usize {
        self.rings().map(|r| r.points().len()).sum()
    }

    /// The least rectangle around it.
    #[must_use]
    pub fn bounds(&self) -> Rect {
        self.outer.bounds()
    }

    /// Whether every edge is axis-parallel.
    #[must_use]
    pub fn is_rectilinear(&self) -> bool {
        self.rings().all(Ring::is_rectilinear)
    }

    /// Moved by a transform, senses of rotation kept.
    #[must_use]
    pub fn transformed(&self, t: Transform) -> Self {
        Self {
            outer: self.outer.transformed(t),
            holes: self.holes.iter().map(|h| h.transformed(t)).collect(),
        }
    }

    /// Shifted by `by`.
    #[must_use]
    pub fn translated(&self, by: Point) -> Self {
        self.transformed(Transform {
            orientation: Orientation::IDENTITY,
            shift: by,
        })
    }

    /// The same figure written one way only: every ring from its least point, holes sorted.
    #[must_use]
    pub fn normalized(self) -> Self {
        let mut holes: Vec<Ring> = self.holes.into_iter().map(Ring::from_least_point).collect();
        holes.sort();
        Self {
            outer: self.outer.from_least_point(),
            holes,
        }
    }
}
