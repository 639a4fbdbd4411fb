//! How densely the mask is written: coverage on a mesh, spread by the long-range Gaussians.

use crate::geom::{Point, Rect};
use crate::units::Nm;

use super::fold::{Folding, Folds};
use super::spread;

/// Cells that a map may have: 2²⁸, 2 GiB.
const MOST_CELLS: f64 = 268_435_456.0;

/// Why a map cannot be made.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum DensityError {
    /// A mesh that is no length.
    #[error("mesh is {found}, expected more than 0 nm")]
    Mesh {
        /// What was asked for.
        found: Nm,
    },
    /// More cells than memory should hold.
    #[error(
        "a mesh of {mesh} over {width} × {height} has too many cells, expected at most 2.7e8: take a coarser mesh"
    )]
    TooLarge {
        /// The mesh.
        mesh: Nm,
        /// Width of the frame.
        width: Nm,
        /// Height of the frame.
        height: Nm,
    },
    /// A coverage outside that is no share.
    #[error("coverage around the frame is {found}, expected 0 to 1")]
    Surroundings {
        /// What was asked for.
        found: f64,
    },
}

/// Mean of something per square cell of a mesh over a frame, with one value for everything around the frame.
#[derive(Clone, Debug, PartialEq)]
pub struct Density {
    /// Lower-left corner, pm.
    pub(super) origin: Point,
    /// Side of a cell, nm.
    pub(super) mesh: f64,
    pub(super) columns: usize,
    pub(super) rows: usize,
    pub(super) cells: Vec<f64>,
    pub(super) around: f64,
    /// Width and height of the frame, in cells.
    pub(super) extent: [f64; 2],
    /// Across and up; none where every cell stands for itself.
    pub(super) folds: [Folds; 2],
}

impl Density {
    /// An empty map over a frame, cells from its lower-left corner on; `around` is the coverage beyond the frame (0 for bare mask).
    ///
    /// Use a mesh of β/4 or finer. Cells reach up to one mesh beyond the frame; that part of them starts covered as `around` says.
    /// What is added outside the cells is not counted.
    ///
    /// # Errors
    /// A mesh or coverage that is none, or more than 2²⁸ cells.
    pub fn new(frame: Rect, mesh: Nm, around: f64) -> Result<Self, DensityError> {
        Self::folded(frame, mesh, around, Folding::none(frame, mesh))
    }

    /// As [`Density::new`], with stretches folded: what is added there is spread evenly over their cells, and [`Density::at`] gives the value of the
    /// middle of a fold anywhere deep inside it.
    ///
    /// # Errors
    /// As [`Density::new`], of the cells that are left.
    pub fn folded(
        frame: Rect,
        mesh: Nm,
        around: f64,
        folding: Folding,
    ) -> Result<Self, DensityError> {
        if !(mesh.0 > 0.0 && mesh.0.is_finite()) {
            return Err(DensityError::Mesh { found: mesh });
        }
        if !(0.0..=1.0).contains(&around) {
            return Err(DensityError::Surroundings { found: around });
        }
        let (width, height) = (Nm::from_pm(frame.width()), Nm::from_pm(frame.height()));
        let [columns, rows] = folding.size;
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        if columns as f64 * rows as f64 > MOST_CELLS {
            return Err(DensityError::TooLarge {
                mesh,
                width,
                height,
            });
        }
        let empty = Self {
            origin: frame.min,
            mesh: mesh.0,
            columns,
            rows,
            cells: Vec::new(),
            around,
            folds: folding.folds,
            extent: [width / mesh, height / mesh],
        };
        Ok(empty.emptied())
    }

    /// The same mesh with nothing written within the frame.
    #[must_use]
    pub fn emptied(&self) -> Self {
        let mut cells = vec![0.0; self.columns * self.rows];
        if self.around > 0.0 {
            let within = |axis: usize, kept: usize| {
                // Folded cells lie within the frame whole.
                let (start, whole) = self.folds[axis].stretch(kept);
                #[allow(
                    clippy::cast_precision_loss,
                    reason = "an index of memory is below 2^53"
                )]
                let reach = self.extent[axis] - (start + whole - 1) as f64;
                reach.clamp(0.0, 1.0)
            };
            for (k, cell) in cells.iter_mut().enumerate() {
                let inside = within(0, k % self.columns) * within(1, k / self.columns);
                *cell = self.around * (1.0 - inside);
            }
        }
        Self {
            cells,
            ..self.bare()
        }
    }

    /// Columns and rows.
    #[must_use]
    pub fn size(&self) -> [usize; 2] {
        [self.columns, self.rows]
    }

    /// Side of a cell.
    #[must_use]
    pub fn mesh(&self) -> Nm {
        Nm(self.mesh)
    }

    /// Middle of a cell, nm; of the stretch that it stands for in a fold.
    #[must_use]
    pub fn middle(&self, column: usize, row: usize) -> [f64; 2] {
        #[allow(
            clippy::cast_precision_loss,
            reason = "an index of memory is below 2^53"
        )]
        let at = |k: usize, axis: usize| {
            let (start, whole) = self.folds[axis].stretch(k);
            self.origin.to_nm()[axis] + (start as f64 + 0.5 * whole as f64) * self.mesh
        };
        [at(column, 0), at(row, 1)]
    }

    /// Cell values, row by row from below, left to right.
    #[must_use]
    pub fn cells(&self) -> &[f64] {
        &self.cells
    }

    /// The value beyond the frame.
    #[must_use]
    pub fn around(&self) -> f64 {
        self.around
    }

    /// Mean over the mesh.
    #[must_use]
    pub fn mean(&self) -> f64 {
        let [across, up] = &self.folds;
        let weights: Vec<f64> = (0..self.columns).map(|k| across.weight(k)).collect();
        let (mut sum, mut all) = (0.0, 0.0);
        for (row, cells) in self.cells.chunks(self.columns).enumerate() {
            let weight = up.weight(row);
            for (cell, across) in cells.iter().zip(&weights) {
                sum += cell * (weight * across);
                all += weight * across;
            }
        }
        sum / all
    }

    /// The value at a place (nm): linear between the middles of cells, constant beyond the outermost middles.
    #[must_use]
    pub fn at(&self, p: [f64; 2]) -> f64 {
        let [x, y] = self.origin.to_nm();
        self.between([p[0] - x, p[1] - y])
    }

    /// The value at a place as [`Density::at`]; the same bits wherever mask and map lie together.
    #[must_use]
    pub fn at_point(&self, p: Point) -> f64 {
        self.between((p - self.origin).to_nm())
    }

    fn between(&self, from_origin: [f64; 2]) -> f64 {
        self.among_cells([0, 1].map(|axis| self.place(from_origin, axis)))
    }

    /// A place (nm from the origin) along an axis, in kept cells.
    fn place(&self, from_origin: [f64; 2], axis: usize) -> f64 {
        self.folds[axis].place(from_origin[axis] / self.mesh)
    }

    fn among_cells(&self, at: [f64; 2]) -> f64 {
        let span = |axis: usize, cells: usize| {
            #[allow(
                clippy::cast_precision_loss,
                reason = "an index of memory is below 2^53"
            )]
            let t = (at[axis] - 0.5).clamp(0.0, (cells - 1) as f64);
            let i = super::dose::count(t).min(cells.saturating_sub(2));
            #[allow(
                clippy::cast_precision_loss,
                reason = "an index of memory is below 2^53"
            )]
            (i, (i + 1).min(cells - 1), t - i as f64)
        };
        let ((i0, i1, u), (j0, j1, v)) = (span(0, self.columns), span(1, self.rows));
        let cell = |i: usize, j: usize| self.cells[j * self.columns + i];
        let low = cell(i0, j0) + u * (cell(i1, j0) - cell(i0, j0));
        let high = cell(i0, j1) + u * (cell(i1, j1) - cell(i0, j1));
        low + v * (high - low)
    }

    /// The middle of all values that [`Density::at`] gives in a window (pm), if they differ by no more than a share of the least.
    ///
    /// Between middles of cells the value is linear in x and in y, so it is extreme at the window's corners, at middles, or where its
    /// sides pass them.
    #[must_use]
    pub fn even_in(&self, window: Rect, share: f64) -> Option<f64> {
        let [from, to] = [window.min, window.max].map(|p| (p - self.origin).to_nm());
        let stops = |axis: usize, cells: usize| {
            let ends = [from, to].map(|corner| self.place(corner, axis));
            let index = |at: f64| super::dose::count((at - 0.5).ceil()).min(cells);
            #[allow(
                clippy::cast_precision_loss,
                reason = "an index of memory is below 2^53"
            )]
            let middles = (index(ends[0])..index(ends[1])).map(|k| k as f64 + 0.5);
            ends.into_iter().chain(middles).collect::<Vec<f64>>()
        };
        let (across, up) = (stops(0, self.columns), stops(1, self.rows));
        let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
        for y in &up {
            for x in &across {
                let value = self.among_cells([*x, *y]);
                (low, high) = (low.min(value), high.max(value));
                if high - low > share * low {
                    return None;
                }
            }
        }
        Some(0.5 * (low + high))
    }

    /// Convolved with the unit-area Gaussian of 1/e radius `radius` (σ = radius/√2), at the middle of each cell.
    ///
    /// Exact for values that are constant in each cell; the kernel ends at 6 σ. Beyond the frame stands [`Density::around`].
    /// The time does not grow with the radius.
    #[must_use]
    pub fn spread(&self, radius: Nm) -> Self {
        spread::separably(
            self,
            &spread::gaussian(radius.0 * std::f64::consts::FRAC_1_SQRT_2 / self.mesh),
        )
    }

    /// Cell by cell the product with another map of the same mesh, `around` included.
    #[must_use]
    pub fn times(&self, other: &Self) -> Self {
        self.zip(other, |a, b| a * b)
    }

    /// The same mesh with values made from pairs of values of two maps, `around` included.
    #[must_use]
    pub(super) fn zip(&self, other: &Self, f: impl Fn(f64, f64) -> f64) -> Self {
        let cells = self
            .cells
            .iter()
            .zip(&other.cells)
            .map(|(a, b)| f(*a, *b))
            .collect();
        Self {
            cells,
            around: f(self.around, other.around),
            ..self.bare()
        }
    }

    /// The same mesh with another value in each cell, and this one around.
    #[must_use]
    pub(super) fn within(&self, f: impl Fn(f64) -> f64, around: f64) -> Self {
        Self {
            cells: self.cells.iter().map(|c| f(*c)).collect(),
            around,
            ..self.bare()
        }
    }

    /// Sum of the products of cells, in their order.
    #[must_use]
    pub(super) fn dot(&self, other: &Self) -> f64 {
        self.cells
            .iter()
            .zip(&other.cells)
            .map(|(a, b)| a * b)
            .sum()
    }

    /// The same mesh without its cells.
    pub(super) fn bare(&self) -> Self {
        Self {
            cells: Vec::new(),
            folds: self.folds.clone(),
            ..*self
        }
    }

    /// The same mesh with another value in each cell, `around` included.
    #[must_use]
    pub(super) fn map(&self, f: impl Fn(f64) -> f64) -> Self {
        self.zip(self, |a, _| f(a))
    }

    /// Least and greatest cell.
    #[must_use]
    pub fn range(&self) -> [f64; 2] {
        self.cells
            .iter()
            .fold([f64::INFINITY, f64::NEG_INFINITY], |[low, high], v| {
                [low.min(*v), high.max(*v)]
            })
    }
}
