//! The dose by another way: shots painted on pixels and blurred there. A second witness, not a faster path.
//!
//! It shares with the closed form nothing but the definition: shots are shared out to pixels by their nearness (cloud in cell: Birdsall and
//! Fuss, J. Comput. Phys. 3 (1969) 494), a sampled Gaussian blurs them, bicubic interpolation (Keys, IEEE Trans. ASSP 29 (1981) 1153)
//! reads between them.

use crate::blur::Blur;
use crate::geom::{Point, Rect};
use crate::target::{DoseField, Printed};
use crate::units::{Dose, Nm};

use super::density::{Density, DensityError};
use super::{contour, spread};

/// Why there is no raster.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum RasterError {
    /// Pixels too coarse for the blur.
    #[error("pixels of {found} are too coarse, expected at most half of sigma, {limit}")]
    Coarse {
        /// What was asked for.
        found: Nm,
        /// The most there can be.
        limit: Nm,
    },
    /// Too many pixels.
    #[error(transparent)]
    Size(#[from] DensityError),
}

/// What a raster may be off for each unit of dose that is piled up, at pixels of σ: 6e-5 at σ 20 nm and pixels of 1 nm.
const BOUND: f64 = 6e-5 * 20.0 * 20.0;

/// A blurred raster of shots.
///
/// What lies between the middles of two pixels of side h is shared by both, which keeps its place wherever a side lies and adds h²/6 to the
/// variance; it is blurred by that much less. To give a pixel all that lies on it would move what a side cuts off by up to h/2. What is left
/// is the cubic between pixels.
#[derive(Clone, Debug)]
pub struct Raster {
    dose: Density,
    sigma: f64,
    piled: f64,
    extent: Option<[f64; 4]>,
}

impl Raster {
    /// Shots (pm) with their doses on pixels of side `pixel`.
    ///
    /// # Errors
    /// Pixels over σ/2, or more than 2²⁸ of them.
    pub fn new(
        blur: Blur,
        pixel: Nm,
        shots: impl IntoIterator<Item = (Rect, Dose)>,
    ) -> Result<Self, RasterError> {
        let sigma = blur.sigma();
        if pixel.0.is_nan() || pixel.0 > sigma.0 / 2.0 {
            return Err(RasterError::Coarse {
                found: pixel,
                limit: sigma / 2.0,
            });
        }
        let shots: Vec<(Rect, Dose)> = shots.into_iter().collect();
        let bounds = shots.iter().map(|s| s.0).reduce(Rect::hull);
        let pad = (sigma * 8.0).to_pm().unwrap_or(0);
        let frame = bounds
            .unwrap_or(Rect::new(Point::default(), Point::default()))
            .grown(pad);
        let mut painted = Density::new(frame, pixel, 0.0)?;
        for (rect, dose) in &shots {
            paint(&mut painted, *rect, *dose);
        }
        let extent = bounds.map(|b| {
            let ([x0, y0], [x1, y1]) = (b.min.to_nm(), b.max.to_nm());
            [x0, y0, x1, y1]
        });
        Ok(Self {
            dose: blurred(&painted, sigma / pixel),
            sigma: sigma.0,
            piled: painted.range()[1],
            extent,
        })
    }

    /// What a dose of dose 1 may be off: `6e-5·(20·h/σ)²`.
    #[must_use]
    pub fn bound_for_each_dose(blur: Blur, pixel: Nm) -> f64 {
        BOUND * (pixel / blur.sigma()).powi(2)
    }

    /// What any dose of this raster may be off: that for each unit of the greatest dose piled up on one pixel, at least one.
    #[must_use]
    pub fn bound(&self) -> f64 {
        BOUND * (self.dose.mesh().0 / self.sigma).powi(2) * self.piled.max(1.0)
    }

    /// Dose and gradient: products of Keys' cubic and its derivative over 4 × 4 pixels; 0 outside the raster.
    fn local(&self, p: [f64; 2]) -> (f64, [f64; 2]) {
        let ([columns, rows], mesh) = (self.dose.size(), self.dose.mesh().0);
        let first = self.dose.middle(0, 0);
        let (u, v) = ((p[0] - first[0]) / mesh, (p[1] - first[1]) / mesh);
        #[allow(clippy::cast_precision_loss, reason = "at most 2^28 pixels")]
        let within = |t: f64, n: usize| t >= 1.0 && t < n as f64 - 2.0;
        if !within(u, columns) || !within(v, rows) {
            return (0.0, [0.0; 2]);
        }
        let (i, j) = (super::dose::count(u), super::dose::count(v));
        let ((wx, dx), (wy, dy)) = (keys(u.fract()), keys(v.fract()));
        let (mut dose, mut gx, mut gy) = (0.0, 0.0, 0.0);
        for b in 0..4 {
            let row = (j + b - 1) * columns + i - 1;
            for a in 0..4 {
                let value = self.dose.cells()[row + a];
                dose += value * wx[a] * wy[b];
                gx += value * dx[a] * wy[b];
                gy += value * wx[a] * dy[b];
            }
        }
        (dose, [gx / mesh, gy / mesh])
    }
}

/// Shares a shot out to pixels.
fn paint(painted: &mut Density, rect: Rect, dose: Dose) {
    let (min, max) = (rect.min - painted.origin, rect.max - painted.origin);
    let pixels = |pm: i64| Nm::from_pm(pm).0 / painted.mesh;
    let (i, across) = nearness(pixels(min.x), pixels(max.x), painted.columns);
    let (j, up) = nearness(pixels(min.y), pixels(max.y), painted.rows);
    for (row, height) in (j..).zip(&up) {
        let pixels = &mut painted.cells[row * painted.columns + i..];
        for (pixel, width) in pixels.iter_mut().zip(&across) {
            *pixel += dose.0 * height * width;
        }
    }
}

/// The first pixel along one axis that `[from, to]` (in pixels) gives to, and how much to each from there on.
fn nearness(from: f64, to: f64, pixels: usize) -> (usize, Vec<f64>) {
    // Integral of the hat `1 − |u|` up to u.
    let upto = |u: f64| {
        let u = u.clamp(-1.0, 1.0);
        0.5 + u - 0.5 * u * u.abs()
    };
    let first = super::dose::count(from - 1.5).min(pixels);
    let end = super::dose::count(to + 1.5).clamp(first, pixels);
    let share = |k: usize| {
        let middle = k as f64 + 0.5;
        upto(to - middle) - upto(from - middle)
    };
    (first, (first..end).map(share).collect())
}

/// Blurred by a Gaussian sampled at whole pixels and scaled to sum 1, rows then columns; `sigma` is that of the whole, in pixels.
fn blurred(painted: &Density, sigma: f64) -> Density {
    let sigma = (sigma * sigma - 1.0 / 6.0).sqrt();
    let reach = super::dose::count(6.0 * sigma) + 1;
    #[allow(clippy::cast_precision_loss, reason = "a kernel is short")]
    let mut kernel: Vec<f64> = (0..=reach)
        .map(|k| (-0.5 * (k as f64 / sigma).powi(2)).exp())
        .collect();
    let sum = 2.0 * kernel.iter().sum::<f64>() - kernel[0];
    kernel.iter_mut().for_each(|w| *w /= sum);
    spread::separably(painted, &kernel)
}

/// Weights of the four neighbours at a share of the way from the second to the third, and their derivatives.
fn keys(t: f64) -> ([f64; 4], [f64; 4]) {
    let (t2, t3) = (t * t, t * t * t);
    (
        [
            0.5 * (-t3 + 2.0 * t2 - t),
            0.5 * (3.0 * t3 - 5.0 * t2 + 2.0),
            0.5 * (-3.0 * t3 + 4.0 * t2 + t),
            0.5 * (t3 - t2),
        ],
        [
            0.5 * (-3.0 * t2 + 4.0 * t - 1.0),
            0.5 * (9.0 * t2 - 10.0 * t),
            0.5 * (-9.0 * t2 + 8.0 * t + 1.0),
            0.5 * (3.0 * t2 - 2.0 * t),
        ],
    )
}

impl DoseField for Raster {
    fn dose(&self, p: [f64; 2]) -> f64 {
        self.local(p).0
    }
}

impl Printed for Raster {
    fn gradient(&self, p: [f64; 2]) -> [f64; 2] {
        self.local(p).1
    }

    fn crossing_at(&self, p: [f64; 2], outward: [f64; 2], range: f64, level: f64) -> Option<f64> {
        let along = |t: f64| {
            let (dose, g) = self.local([p[0] + t * outward[0], p[1] + t * outward[1]]);
            (dose - level, g[0] * outward[0] + g[1] * outward[1])
        };
        contour::crossing(along, self.sigma / 4.0, range)
    }

    fn extent(&self) -> Option<[f64; 4]> {
        self.extent
    }
}
