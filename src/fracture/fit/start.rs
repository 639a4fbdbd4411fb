//! Where a fit starts from: slabs of the figure.

use crate::fracture::Job;
use crate::geom::{Orientation, Point, Transform};
use crate::target::Target;

use super::model::Flash;
use super::samples::Sample;

/// Horizontal scan lines through a figure, evenly spaced over its height.
struct Rows {
    low: f64,
    pitch: f64,
    sigma: f64,
    /// Crossings with the outline along each line; inside is between each first and second.
    crossings: Vec<Vec<f64>>,
}

/// Distance of the scan lines, σ.
const PITCH: f64 = 0.12;

impl Rows {
    /// The lines of a target.
    fn of(target: &Target, sigma: f64) -> Self {
        let [_, low, _, high] = target.bounds();
        let height = high - low;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "positive and clamped"
        )]
        let n = (height / (PITCH * sigma)).ceil().clamp(1.0, 1e7) as usize;
        #[allow(clippy::cast_precision_loss, reason = "n is at most 1e7")]
        let pitch = height / n as f64;
        let mut rows = Self {
            low,
            pitch,
            sigma,
            crossings: vec![Vec::new(); n],
        };
        for i in 0..n {
            let y = rows.level(i) + 0.5 * pitch;
            target.crossings(y, &mut rows.crossings[i]);
        }
        rows
    }

    /// Lower border of the band about line `i`; `i` may be the number of lines.
    fn level(&self, i: usize) -> f64 {
        #[allow(clippy::cast_precision_loss, reason = "at most 1e7 lines")]
        let i = i as f64;
        self.low + i * self.pitch
    }

    /// How many lines are nearest to a length.
    fn lines(&self, length: f64) -> usize {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "clamped to be positive and small"
        )]
        let n = (length / self.pitch).ceil().clamp(1.0, 1e7) as usize;
        n
    }

    /// Cuts the figure into slabs as high as the outline wanders by at most `slack` σ within them (but no lower than about
    /// σ), each filled where at least half of its height is figure.
    fn slabs(&self, slack: f64) -> Vec<Flash> {
        let n = self.crossings.len();
        let least = self.lines(1.1 * self.sigma);
        let mut flashes = Vec::new();
        let mut from = 0;
        while from < n {
            let mut to = from + 1;
            while to < n
                && (to - from < least || alike(&self.crossings[from..=to], slack * self.sigma))
            {
                to += 1;
            }
            // No low slab at the end.
            if 10 * (n - to) < 7 * least {
                to = n;
            }
            for [a, b] in majority(&self.crossings[from..to]) {
                if b - a > 0.4 * self.sigma {
                    flashes.push(Flash::new([a, self.level(from), b, self.level(to)]));
                }
            }
            from = to;
        }
        flashes
    }

    /// The shot made as high as the figure allows at its width, `inset` nm taken off at both ends.
    fn grown(&self, flash: &Flash, inset: f64) -> Flash {
        let [x0, y0, x1, y1] = flash.side;
        let (a, b) = (x0 + inset, x1 - inset);
        if b <= a {
            return *flash;
        }
        let fits = |i: usize| {
            self.crossings[i]
                .chunks_exact(2)
                .any(|c| c[0] <= a && b <= c[1])
        };
        let n = self.crossings.len();
        let middle = ((0.5 * (y0 + y1) - self.low) / self.pitch).max(0.0);
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "not negative; saturates"
        )]
        let middle = (middle as usize).min(n - 1);
        let (mut from, mut to) = (middle, middle);
        while from > 0 && fits(from - 1) {
            from -= 1;
        }
        while to + 1 < n && fits(to + 1) {
            to += 1;
        }
        Flash {
            side: [x0, self.level(from).min(y0), x1, self.level(to + 1).max(y1)],
            dose: flash.dose,
        }
    }
}

/// Scan lines along both axes.
pub(in crate::fracture) struct Slabs {
    rows: Rows,
    columns: Rows,
}

impl Slabs {
    /// Of a figure.
    pub(in crate::fracture) fn of(job: &Job<'_>, target: &Target) -> Self {
        let sigma = job.blur.sigma().0;
        let turned = job.figure.transformed(Transform {
            orientation: Orientation::DIAGONAL,
            shift: Point::default(),
        });
        let columns = Rows::of(&Target::new(&turned, job.blur, job.tolerance), sigma);
        Self {
            rows: Rows::of(target, sigma),
            columns,
        }
    }

    /// The figure as horizontal and as vertical slabs; see [`Rows::slabs`].
    pub(in crate::fracture) fn both(&self, slack: f64) -> [Vec<Flash>; 2] {
        [
            self.rows.slabs(slack),
            self.columns
                .slabs(slack)
                .iter()
                .map(Flash::flipped)
                .collect(),
        ]
    }

    /// The slabs of both directions, each grown across as far as the figure allows; see [`Rows::grown`].
    pub(in crate::fracture) fn grown(&self, slack: f64, inset: f64) -> Vec<Flash> {
        let horizontal = self
            .rows
            .slabs(slack)
            .into_iter()
            .map(|f| self.rows.grown(&f, inset));
        let vertical = self
            .columns
            .slabs(slack)
            .into_iter()
            .map(|f| self.columns.grown(&f, inset).flipped());
        horizontal.chain(vertical).collect()
    }
}

/// Chooses from candidates so that every place that must print lies in one, the one that adds most places first.
pub(in crate::fracture) fn cover(candidates: &[Flash], samples: &[Sample]) -> Vec<Flash> {
    let inside = |f: &Flash, s: &Sample| {
        (0..2).all(|axis| f.side[axis] <= s.place[axis] && s.place[axis] <= f.side[axis + 2])
    };
    let mut open: Vec<&Sample> = samples.iter().filter(|s| s.sign > 0.0).collect();
    let mut chosen = Vec::new();
    loop {
        let gain = |f: &Flash| open.iter().filter(|s| inside(f, s)).count();
        let best = candidates
            .iter()
            .map(|f| (gain(f), f))
            .fold(
                (0, None),
                |best, (g, f)| if g > best.0 { (g, Some(f)) } else { best },
            );
        let Some(f) = best.1 else { return chosen };
        chosen.push(*f);
        open.retain(|s| !inside(f, s));
    }
}

/// Whether all rows have the same number of crossings and none wanders by more than `limit`.
fn alike(rows: &[Vec<f64>], limit: f64) -> bool {
    let (first, last) = (&rows[0], &rows[rows.len() - 1]);
    first.len() == last.len()
        && (0..first.len()).all(|i| {
            let (low, high) = rows
                .iter()
                .map(|r| r.get(i).copied().unwrap_or(f64::NAN))
                .fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), x| {
                    (a.min(x), b.max(x))
                });
            high - low <= limit
        })
}

/// Where at least half of the rows are inside.
fn majority(rows: &[Vec<f64>]) -> Vec<[f64; 2]> {
    let mut events: Vec<(f64, i32)> = rows
        .iter()
        .flat_map(|r| {
            r.iter()
                .enumerate()
                .map(|(i, &x)| (x, if i % 2 == 0 { 1 } else { -1 }))
        })
        .collect();
    events.sort_by(|a, b| a.0.total_cmp(&b.0).then(b.1.cmp(&a.1)));
    let half = i32::try_from(rows.len().div_ceil(2)).unwrap_or(i32::MAX);
    let (mut depth, mut start, mut found) = (0, None, Vec::new());
    for (x, d) in events {
        depth += d;
        match start {
            None if depth >= half => start = Some(x),
            Some(a) if depth < half => {
                if x > a {
                    found.push([a, x]);
                }
                start = None;
            }
            _ => {}
        }
    }
    found
}
