//! The dose of many shots at a place: sums over the shots in reach, found by a grid of bins.

use crate::blur::{self, Blur, PhiTable, THRESHOLD};
use crate::geom::Rect;
use crate::target::{DoseField, EdgeSd, Printed, ShotErrors};
use crate::units::Dose;

use super::{budget, contour};

/// Beyond this many σ from a shot it adds nothing: `Φ(−6) = 1e-9`.
const REACH: f64 = 6.0;

/// Greatest error of the table dose for each unit of shot dose in reach: four Φ of 1.2e-9 each.
const TABLE_ERROR: f64 = 5e-9;

/// Shots under a blur, ready to answer for single places.
///
/// A place costs the shots within 6 σ of it, whatever the size of the mask; building is linear in the shots.
#[derive(Clone, Debug)]
pub struct Exposure {
    blur: Blur,
    flashes: Vec<Flash>,
    bins: Bins,
    extent: Option<[f64; 4]>,
}

/// One shot in nm.
#[derive(Clone, Copy, Debug)]
pub(super) struct Flash {
    pub(super) x: [f64; 2],
    pub(super) y: [f64; 2],
    pub(super) dose: f64,
}

/// Where the normal distribution comes from: `libm` or the table.
pub(super) trait Normal: Copy {
    fn cdf(self, x: f64) -> f64;
    fn both(self, x: f64) -> (f64, f64);
}

#[derive(Clone, Copy)]
pub(super) struct Exact;

impl Normal for Exact {
    #[inline]
    fn cdf(self, x: f64) -> f64 {
        blur::cdf(x)
    }
    #[inline]
    fn both(self, x: f64) -> (f64, f64) {
        (blur::cdf(x), blur::density(x))
    }
}

impl Normal for PhiTable {
    #[inline]
    fn cdf(self, x: f64) -> f64 {
        PhiTable::cdf(self, x)
    }
    #[inline]
    fn both(self, x: f64) -> (f64, f64) {
        PhiTable::both(self, x)
    }
}

impl Exposure {
    /// From placed shots (pm) with their doses, such as [`crate::shot::ShotList::rects`], in any order.
    #[must_use]
    pub fn new(blur: Blur, shots: impl IntoIterator<Item = (Rect, Dose)>) -> Self {
        let flashes: Vec<Flash> = shots
            .into_iter()
            .map(|(r, dose)| {
                let ([x0, y0], [x1, y1]) = (r.min.to_nm(), r.max.to_nm());
                Flash {
                    x: [x0, x1],
                    y: [y0, y1],
                    dose: dose.0,
                }
            })
            .collect();
        let extent = flashes
            .iter()
            .map(|f| [f.x[0], f.y[0], f.x[1], f.y[1]])
            .reduce(|a, b| {
                [
                    a[0].min(b[0]),
                    a[1].min(b[1]),
                    a[2].max(b[2]),
                    a[3].max(b[3]),
                ]
            });
        let bins = Bins::new(&flashes, extent.unwrap_or_default(), blur.sigma().0);
        Self {
            blur,
            flashes,
            bins,
            extent,
        }
    }

    /// The blur.
    #[must_use]
    pub fn blur(&self) -> Blur {
        self.blur
    }

    /// Dose by `libm`: within 1e-9 for each unit of shot dose in reach (what shots beyond 6 σ would add).
    #[must_use]
    pub fn dose_exact(&self, p: [f64; 2]) -> f64 {
        self.sum(p, Exact).0
    }

    /// Dose from the table of Φ: within 5e-9 of [`Exposure::dose_exact`] for each unit of shot dose in reach.
    #[must_use]
    pub fn dose_fast(&self, p: [f64; 2]) -> f64 {
        self.sum(p, PhiTable::get()).0
    }

    /// Dose and its gradient (per nm) by `libm`.
    #[must_use]
    pub fn dose_and_gradient(&self, p: [f64; 2]) -> (f64, [f64; 2]) {
        self.slope(p, Exact)
    }

    /// Dose, and the shot doses in reach added up.
    #[inline]
    fn sum(&self, p: [f64; 2], normal: impl Normal) -> (f64, f64) {
        let inverse = 1.0 / self.blur.sigma().0;
        let (mut dose, mut reaching) = (0.0, 0.0);
        for &i in self.bins.at(p) {
            let f = &self.flashes[i as usize];
            if let Some([a, b, c, d]) = f.in_reach(p, inverse) {
                dose += f.dose * (normal.cdf(a) - normal.cdf(b)) * (normal.cdf(c) - normal.cdf(d));
                reaching += f.dose;
            }
        }
        (dose, reaching)
    }

    #[inline]
    fn slope(&self, p: [f64; 2], normal: impl Normal) -> (f64, [f64; 2]) {
        let inverse = 1.0 / self.blur.sigma().0;
        let (mut dose, mut gx, mut gy) = (0.0, 0.0, 0.0);
        for &i in self.bins.at(p) {
            let f = &self.flashes[i as usize];
            if let Some([a, b, c, d]) = f.in_reach(p, inverse) {
                let ((fa, da), (fb, db)) = (normal.both(a), normal.both(b));
                let ((fc, dc), (fd, dd)) = (normal.both(c), normal.both(d));
                let (sx, sy) = (f.dose * (fa - fb), fc - fd);
                dose += sx * sy;
                gx += f.dose * (da - db) * sy;
                gy += sx * (dc - dd);
            }
        }
        (dose, [gx * inverse, gy * inverse])
    }

    /// The shots in reach of a place.
    pub(super) fn reaching(&self, p: [f64; 2]) -> impl Iterator<Item = &Flash> + '_ {
        let inverse = 1.0 / self.blur.sigma().0;
        self.bins
            .at(p)
            .iter()
            .map(|&i| &self.flashes[i as usize])
            .filter(move |f| f.in_reach(p, inverse).is_some())
    }
}

impl Flash {
    /// Distances of a place from the four sides in σ; `None` beyond the reach.
    #[inline]
    fn in_reach(&self, p: [f64; 2], inverse: f64) -> Option<[f64; 4]> {
        let (a, b) = ((p[0] - self.x[0]) * inverse, (p[0] - self.x[1]) * inverse);
        let (c, d) = ((p[1] - self.y[0]) * inverse, (p[1] - self.y[1]) * inverse);
        (a > -REACH && b < REACH && c > -REACH && d < REACH).then_some([a, b, c, d])
    }
}

impl DoseField for Exposure {
    /// From the table, and by `libm` where that could change the side of the threshold.
    fn dose(&self, p: [f64; 2]) -> f64 {
        let (fast, reaching) = self.sum(p, PhiTable::get());
        if (fast - THRESHOLD).abs() <= TABLE_ERROR * reaching {
            self.dose_exact(p)
        } else {
            fast
        }
    }

    /// Separable: each shot in reach of the row adds its profile in x times its one share in y.
    ///
    /// From the table throughout, so within 5e-9 for each unit of shot dose in reach.
    fn row(&self, y: f64, x0: f64, step: f64, out: &mut [f64]) {
        out.fill(0.0);
        let (sigma, table) = (self.blur.sigma().0, PhiTable::get());
        let (inverse, reach) = (1.0 / sigma, REACH * sigma);
        for &i in self.bins.band(y) {
            let f = &self.flashes[i as usize];
            let height =
                f.dose * (table.cdf((y - f.y[0]) * inverse) - table.cdf((y - f.y[1]) * inverse));
            let from = count((f.x[0] - reach - x0) / step).min(out.len());
            let to = (count((f.x[1] + reach - x0) / step) + 1).min(out.len());
            if height == 0.0 || from >= to {
                continue;
            }
            for (k, value) in (from..to).zip(&mut out[from..to]) {
                #[allow(
                    clippy::cast_precision_loss,
                    reason = "an index of memory is below 2^53"
                )]
                let x = x0 + k as f64 * step;
                *value += height
                    * (table.cdf((x - f.x[0]) * inverse) - table.cdf((x - f.x[1]) * inverse));
            }
        }
    }
}

impl Printed for Exposure {
    fn gradient(&self, p: [f64; 2]) -> [f64; 2] {
        self.slope(p, PhiTable::get()).1
    }

    /// To 0.001 nm: found on the table dose, then one Newton step on the exact one.
    fn crossing_at(&self, p: [f64; 2], outward: [f64; 2], range: f64, level: f64) -> Option<f64> {
        let along =
            |(dose, g): (f64, [f64; 2])| (dose - level, g[0] * outward[0] + g[1] * outward[1]);
        let at = |t: f64| [p[0] + t * outward[0], p[1] + t * outward[1]];
        let table = PhiTable::get();
        let t = contour::crossing(
            |t| along(self.slope(at(t), table)),
            self.blur.sigma().0 / 4.0,
            range,
        )?;
        let (value, slope) = along(self.slope(at(t), Exact));
        let step = value / slope;
        // Where the dose is all but flat the table's answer is as good as any.
        Some(if step.abs() < 0.01 { t - step } else { t })
    }

    fn extent(&self) -> Option<[f64; 4]> {
        self.extent
    }

    fn edge_sd(&self, p: [f64; 2], errors: &ShotErrors) -> Option<EdgeSd> {
        budget::edge_sd(self, p, errors)
    }
}

/// Shots by square cell (each in every cell that it reaches) and by band of cells.
#[derive(Clone, Debug)]
struct Bins {
    origin: [f64; 2],
    inverse_size: f64,
    columns: usize,
    rows: usize,
    cells: Buckets,
    bands: Buckets,
}

#[derive(Clone, Debug)]
struct Buckets {
    starts: Vec<u32>,
    items: Vec<u32>,
}

impl Bins {
    fn new(flashes: &[Flash], extent: [f64; 4], sigma: f64) -> Self {
        let reach = REACH * sigma;
        let origin = [extent[0] - reach, extent[1] - reach];
        let (w, h) = (extent[2] + reach - origin[0], extent[3] + reach - origin[1]);
        #[allow(
            clippy::cast_precision_loss,
            reason = "a number of shots is below 2^53"
        )]
        let shots = flashes.len().max(1) as f64;
        let mean_side = flashes
            .iter()
            .map(|f| f.x[1] - f.x[0] + f.y[1] - f.y[0])
            .sum::<f64>()
            / (2.0 * shots);
        // Cells of 3 σ hold few shots out of reach; large shots would enter many of those, and cells beyond
        // 32 a shot would cost more memory than the shots.
        let size = (3.0 * sigma)
            .max(mean_side)
            .max((w * h / (32.0 * shots)).sqrt())
            .max(w.max(h) / 1e6);
        let (columns, rows) = (count(w / size) + 1, count(h / size) + 1);
        let mut bins = Self {
            origin,
            inverse_size: 1.0 / size,
            columns,
            rows,
            cells: Buckets {
                starts: Vec::new(),
                items: Vec::new(),
            },
            bands: Buckets {
                starts: Vec::new(),
                items: Vec::new(),
            },
        };
        let spans: Vec<[usize; 4]> = flashes
            .iter()
            .map(|f| {
                [
                    bins.index(f.x[0] - reach, 0).min(columns - 1),
                    bins.index(f.x[1] + reach, 0).min(columns - 1),
                    bins.index(f.y[0] - reach, 1).min(rows - 1),
                    bins.index(f.y[1] + reach, 1).min(rows - 1),
                ]
            })
            .collect();
        bins.bands = Buckets::new(rows, &spans, |s, each| (s[2]..=s[3]).for_each(each));
        bins.cells = Buckets::new(columns * rows, &spans, |s, each| {
            for j in s[2]..=s[3] {
                (s[0]..=s[1]).for_each(|i| each(j * columns + i));
            }
        });
        bins
    }

    #[inline]
    fn index(&self, at: f64, axis: usize) -> usize {
        count((at - self.origin[axis]) * self.inverse_size)
    }

    /// Shots that may reach a place; no place before the origin has any.
    #[inline]
    fn at(&self, p: [f64; 2]) -> &[u32] {
        let (i, j) = (self.index(p[0], 0), self.index(p[1], 1));
        if i < self.columns && j < self.rows {
            self.cells.get(j * self.columns + i)
        } else {
            &[]
        }
    }

    fn band(&self, y: f64) -> &[u32] {
        let j = self.index(y, 1);
        if j < self.rows {
            self.bands.get(j)
        } else {
            &[]
        }
    }
}

impl Buckets {
    /// A counting sort: twice over the items, in order within each bucket.
    fn new(
        buckets: usize,
        spans: &[[usize; 4]],
        visit: impl Fn(&[usize; 4], &mut dyn FnMut(usize)),
    ) -> Self {
        let mut starts = vec![0_u32; buckets + 1];
        for s in spans {
            visit(s, &mut |b| starts[b + 1] += 1);
        }
        for b in 0..buckets {
            starts[b + 1] += starts[b];
        }
        let mut next = starts.clone();
        let mut items = vec![0_u32; starts[buckets] as usize];
        for (k, s) in (0_u32..).zip(spans) {
            visit(s, &mut |b| {
                items[next[b] as usize] = k;
                next[b] += 1;
            });
        }
        Self { starts, items }
    }

    #[inline]
    fn get(&self, bucket: usize) -> &[u32] {
        &self.items[self.starts[bucket] as usize..self.starts[bucket + 1] as usize]
    }
}

/// The whole part of a number from 0 to 2³²; negative ones give 0.
#[inline]
pub(super) fn count(x: f64) -> usize {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "clamped just before"
    )]
    let n = x.clamp(0.0, 4_294_967_296.0) as usize;
    n
}
