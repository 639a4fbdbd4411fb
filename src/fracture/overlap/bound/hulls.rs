//! The rectangles that stand for all admissible shots; the argument is in [`super`].

use crate::blur::{THRESHOLD, cdf};
use crate::shot::ShotLimits;

/// Finest and coarsest distance of the lines, σ.
const SPACING: [f64; 2] = [0.12, 1.0];

/// Places looked at in the search for largest rectangles, one by one, before lines are laid coarser.
const WORK: f64 = 4e7;

/// What single precision may lose of a dose.
const ROUNDING: f32 = 1e-6;

/// What a figure, or a window of it, asks.
pub(super) struct Places {
    /// Of the blur, nm.
    pub(super) sigma: f64,
    /// Where the lines go, nm.
    pub(super) bounds: [f64; 4],
    /// Places that must print with the dose they need.
    pub(super) print: Vec<([f64; 2], f64)>,
    /// Places that must not print, by x.
    pub(super) clear: Vec<[f64; 2]>,
}

/// For each hull its shares of the needs of all places, one row each.
pub(super) struct Shares {
    /// How many places there are.
    pub(super) places: usize,
    /// Row after row.
    pub(super) rows: Vec<f32>,
}

/// Lines across one axis, with Φ of each line as seen from each place: their difference is the share of a flash between two lines.
struct Axis {
    lines: Vec<f64>,
    print: Vec<f32>,
    clear: Vec<f32>,
}

impl Axis {
    fn new(places: &Places, axis: usize, spacing: f64) -> Self {
        let sigma = places.sigma;
        let (from, to) = (
            places.bounds[axis] - 1.5 * sigma,
            places.bounds[axis + 2] + 1.5 * sigma,
        );
        let step = spacing * sigma;
        let mut lines = vec![f64::NEG_INFINITY, from];
        while let Some(next) = lines.last().map(|l| l + step).filter(|&l| l < to + step) {
            lines.push(next);
        }
        lines.push(f64::INFINITY);
        #[allow(
            clippy::cast_possible_truncation,
            reason = "what is lost is allowed for by `ROUNDING`"
        )]
        let phi = |line: f64, p: [f64; 2]| cdf((line - p[axis]) / sigma) as f32;
        Self {
            print: lines
                .iter()
                .flat_map(|&l| places.print.iter().map(move |q| phi(l, q.0)))
                .collect(),
            clear: lines
                .iter()
                .flat_map(|&l| places.clear.iter().map(move |&q| phi(l, q)))
                .collect(),
            lines,
        }
    }

    /// The last line that a shot can hold.
    fn last(&self) -> usize {
        self.lines.len() - 2
    }

    fn length(&self, from: usize, to: usize) -> f64 {
        self.lines[to] - self.lines[from]
    }
}

/// A rectangle by the numbers of its lines: left, lower, right, upper.
type Lines = [usize; 4];

/// The search for largest admissible rectangles.
struct Search<'a> {
    axes: [Axis; 2],
    greatest: f64,
    /// Places that must not print, by x.
    clear: &'a [[f64; 2]],
    /// How many of them are left of each line across x.
    starts: Vec<usize>,
    /// The place that forbade a rectangle last: it is likely to forbid the next one. The lowest of those that did, so that it
    /// does so for long while the upper line is brought down.
    blocker: usize,
}

impl Search<'_> {
    /// Whether a rectangle of lines lies on lines that a shot can hold, is no longer than a shot may be, and prints no place that must not print.
    fn admissible(&mut self, [i0, j0, i1, j1]: Lines) -> bool {
        let [x, y] = &self.axes;
        if i0 == 0
            || j0 == 0
            || i1 > x.last()
            || j1 > y.last()
            || x.length(i0, i1) > self.greatest
            || y.length(j0, j1) > self.greatest
        {
            return false;
        }
        let n = self.clear.len();
        // A shot gives less than half to a place it does not hold.
        let held = self.starts[i0]..self.starts[i1];
        let (a, b) = (&x.clear[i0 * n..][..n], &x.clear[i1 * n..][..n]);
        let (c, d) = (&y.clear[j0 * n..][..n], &y.clear[j1 * n..][..n]);
        #[allow(clippy::cast_possible_truncation, reason = "½ is exact")]
        let level = THRESHOLD as f32 + ROUNDING;
        let printed = |k: usize| (b[k] - a[k]) * (d[k] - c[k]) >= level;
        if held.contains(&self.blocker) && printed(self.blocker) {
            return false;
        }
        // Without an early exit the loop is vector code.
        if !held.clone().fold(false, |any, k| any | printed(k)) {
            return true;
        }
        let lowest = held
            .filter(|&k| printed(k))
            .min_by(|&k, &l| self.clear[k][1].total_cmp(&self.clear[l][1]));
        self.blocker = lowest.unwrap_or(self.blocker);
        false
    }

    /// All admissible rectangles that lie in no other one.
    ///
    /// `tops[i0][i1]` is the highest upper line of an admissible rectangle over the lower line at hand, 0 if there is none. It
    /// only grows when the left or the lower line moves inwards; where it does not, nothing needs to be tried and no
    /// rectangle is largest.
    fn largest(&mut self) -> Vec<Lines> {
        let (right, top) = (self.axes[0].last(), self.axes[1].last());
        let width = right + 2;
        let mut tops = vec![0; width * width];
        let mut found = Vec::new();
        for j0 in 1..=top {
            for i0 in 1..=right {
                let mut j1 = top;
                // Upper line of the rectangle to the left, if it lies in no wider or deeper one.
                let mut open = None;
                for i1 in i0..=right {
                    let known = tops[(i0 - 1) * width + i1].max(tops[i0 * width + i1]);
                    while j1 >= j0 && j1 > known && !self.admissible([i0, j0, i1, j1]) {
                        j1 -= 1;
                    }
                    let reached = if j1 < j0 { 0 } else { j1 };
                    tops[i0 * width + i1] = reached;
                    if let Some(upper) = open.filter(|&upper| upper > reached) {
                        found.push([i0, j0, i1 - 1, upper]);
                    }
                    open = (reached > known).then_some(reached);
                }
                found.extend(open.map(|upper| [i0, j0, right, upper]));
            }
        }
        found
    }
}

/// The hulls that can hold a shot, by what they share.
pub(super) fn hulls(places: &Places, limits: &ShotLimits) -> Shares {
    let spacing = spacing(places);
    let axes = [0, 1].map(|axis| Axis::new(places, axis, spacing));
    let left = |&line: &f64| places.clear.partition_point(|p| p[0] < line);
    let mut search = Search {
        starts: axes[0].lines.iter().map(left).collect(),
        axes,
        greatest: limits.greatest_side.0,
        clear: &places.clear,
        blocker: 0,
    };
    let largest = search.largest();
    let [x, y] = &search.axes;
    let n = places.print.len();
    let mut rows = Vec::with_capacity(n * largest.len());
    for [i0, j0, i1, j1] in largest {
        let (i0, j0, i1, j1) = (i0 - 1, j0 - 1, i1 + 1, j1 + 1);
        if x.length(i0, i1).min(y.length(j0, j1)) < limits.least_side.0 {
            continue;
        }
        let (a, b) = (&x.print[i0 * n..][..n], &x.print[i1 * n..][..n]);
        let (c, d) = (&y.print[j0 * n..][..n], &y.print[j1 * n..][..n]);
        rows.extend((0..n).map(|k| {
            #[allow(
                clippy::cast_possible_truncation,
                reason = "what is lost is allowed for by `ROUNDING`"
            )]
            let needed = places.print[k].1 as f32;
            (((b[k] - a[k]) * (d[k] - c[k]) + ROUNDING) / needed).min(1.0)
        }));
    }
    Shares { places: n, rows }
}

/// As fine as the work allows.
fn spacing(places: &Places) -> f64 {
    let [x0, y0, x1, y1] = places.bounds.map(|b| b / places.sigma);
    #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
    let clear = places.clear.len() as f64;
    let work = |h: f64| {
        let (columns, rows) = ((x1 - x0 + 3.0) / h, (y1 - y0 + 3.0) / h);
        0.25 * columns * rows * (columns + rows) * clear
    };
    let [finest, coarsest] = SPACING;
    // The work goes with the cube of the number of lines.
    (finest * (work(finest) / WORK).cbrt()).clamp(finest, coarsest)
}
