//! How densely the mask is written: coverage on a mesh, spread by the long-range Gaussians.

use crate::blur;
use crate::geom::Rect;
use crate::units::{Dose, Nm};

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
    origin: [f64; 2],
    mesh: f64,
    columns: usize,
    rows: usize,
    cells: Vec<f64>,
    around: f64,
}

impl Density {
    /// An empty map over a frame, cells from its lower-left corner on; `around` is the coverage beyond the frame (0 for bare mask).
    ///
    /// Use a mesh of β/4 or finer. Cells reach up to one mesh beyond the frame; what is added outside them is not counted.
    ///
    /// # Errors
    /// A mesh or coverage that is none, or more than 2²⁸ cells.
    pub fn new(frame: Rect, mesh: Nm, around: f64) -> Result<Self, DensityError> {
        if !(mesh.0 > 0.0 && mesh.0.is_finite()) {
            return Err(DensityError::Mesh { found: mesh });
        }
        if !(0.0..=1.0).contains(&around) {
            return Err(DensityError::Surroundings { found: around });
        }
        let (width, height) = (Nm::from_pm(frame.width()), Nm::from_pm(frame.height()));
        let (columns, rows) = (
            (width / mesh).ceil().max(1.0),
            (height / mesh).ceil().max(1.0),
        );
        if columns * rows > MOST_CELLS {
            return Err(DensityError::TooLarge {
                mesh,
                width,
                height,
            });
        }
        let (columns, rows) = (super::dose::count(columns), super::dose::count(rows));
        let cells = vec![0.0; columns * rows];
        Ok(Self {
            origin: frame.min.to_nm(),
            mesh: mesh.0,
            columns,
            rows,
            cells,
            around,
        })
    }

    /// Adds one shot (pm) of a dose: every cell gets the exact share of its area, times the dose.
    ///
    /// Dose 1 gives the plain coverage; where shots overlap it counts twice, as it is flashed.
    pub fn add(&mut self, shot: Rect, dose: Dose) {
        let (min, max) = (shot.min.to_nm(), shot.max.to_nm());
        let span = |axis: usize, cells: usize| {
            let (from, to) = (
                (min[axis] - self.origin[axis]) / self.mesh,
                (max[axis] - self.origin[axis]) / self.mesh,
            );
            (
                from,
                to,
                super::dose::count(from),
                super::dose::count(to.ceil()).min(cells),
            )
        };
        let ((x0, x1, i0, i1), (y0, y1, j0, j1)) = (span(0, self.columns), span(1, self.rows));
        #[allow(
            clippy::cast_precision_loss,
            reason = "an index of memory is below 2^53"
        )]
        let share = |cell: usize, from: f64, to: f64| {
            (to.min(cell as f64 + 1.0) - from.max(cell as f64)).max(0.0)
        };
        for j in j0..j1 {
            let height = dose.0 * share(j, y0, y1);
            for i in i0..i1 {
                self.cells[j * self.columns + i] += height * share(i, x0, x1);
            }
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

    /// Middle of a cell, nm.
    #[must_use]
    pub fn middle(&self, column: usize, row: usize) -> [f64; 2] {
        #[allow(
            clippy::cast_precision_loss,
            reason = "an index of memory is below 2^53"
        )]
        let at = |k: usize, axis: usize| self.origin[axis] + (k as f64 + 0.5) * self.mesh;
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

    /// Mean over all cells.
    #[must_use]
    pub fn mean(&self) -> f64 {
        #[allow(clippy::cast_precision_loss, reason = "at most 2^28 cells")]
        let cells = self.cells.len() as f64;
        self.cells.iter().sum::<f64>() / cells
    }

    /// The value at a place: linear between the middles of cells, constant beyond the outermost middles.
    #[must_use]
    pub fn at(&self, p: [f64; 2]) -> f64 {
        let span = |axis: usize, cells: usize| {
            #[allow(
                clippy::cast_precision_loss,
                reason = "an index of memory is below 2^53"
            )]
            let t =
                ((p[axis] - self.origin[axis]) / self.mesh - 0.5).clamp(0.0, (cells - 1) as f64);
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

    /// Convolved with the unit-area Gaussian of 1/e radius `radius` (σ = radius/√2), at the middle of each cell.
    ///
    /// Exact for values that are constant in each cell; the kernel ends at 6 σ. Beyond the frame stands [`Density::around`].
    #[must_use]
    pub fn spread(&self, radius: Nm) -> Self {
        self.separably(&kernel(
            radius.0 * std::f64::consts::FRAC_1_SQRT_2 / self.mesh,
        ))
    }

    /// Convolved with a symmetric kernel (weights at distance 0, 1, 2 … cells), rows then columns.
    pub(super) fn separably(&self, kernel: &[f64]) -> Self {
        let mut cells = self.cells.clone();
        let mut line = Vec::new();
        for row in cells.chunks_exact_mut(self.columns) {
            line.clear();
            line.extend_from_slice(row);
            convolve(&line, kernel, self.around, row);
        }
        // Around the frame the half-spread map has the same value still.
        let mut out = vec![0.0; self.rows];
        for i in 0..self.columns {
            line.clear();
            line.extend(cells.iter().skip(i).step_by(self.columns));
            convolve(&line, kernel, self.around, &mut out);
            for (j, value) in out.iter().enumerate() {
                cells[j * self.columns + i] = *value;
            }
        }
        Self {
            cells,
            ..self.clone()
        }
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
            ..self.clone()
        }
    }

    /// The same mesh with another value in each cell, `around` included.
    #[must_use]
    pub(super) fn map(&self, f: impl Fn(f64) -> f64) -> Self {
        self.zip(self, |a, _| f(a))
    }
}

/// Weights of the cells at distance 0, 1, 2 … of a Gaussian of `sigma` cells: its integral over each.
fn kernel(sigma: f64) -> Vec<f64> {
    let reach = super::dose::count(6.0 * sigma) + 1;
    #[allow(clippy::cast_precision_loss, reason = "a kernel is short")]
    let weight =
        |k: usize| blur::cdf((k as f64 + 0.5) / sigma) - blur::cdf((k as f64 - 0.5) / sigma);
    (0..=reach).map(weight).collect()
}

/// A symmetric kernel over a line that goes on as `around` at both ends.
fn convolve(line: &[f64], kernel: &[f64], around: f64, out: &mut [f64]) {
    let n = line.len();
    for (i, value) in out.iter_mut().enumerate() {
        let mut sum = kernel[0] * line[i];
        for (k, weight) in kernel.iter().enumerate().skip(1) {
            let left = if k <= i { line[i - k] } else { around };
            let right = if i + k < n { line[i + k] } else { around };
            sum += weight * (left + right);
        }
        *value = sum;
    }
}
