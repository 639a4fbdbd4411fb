//! Slabs of both directions in one start: each part of a figure is cut across the way its outline runs.

use super::super::model::Flash;
use super::{Branch, Rows, spans_of};
use crate::geom::spans;

/// A side that wanders by less than this share of the height of a window is steep enough to be followed by slabs: 45°.
const STEEP: f64 = 1.2;

/// A part is cut across, not along: no slab is longer than this many times the chord through its middle the other way.
const ALONG: f64 = 1.5;

/// A slab is dropped when a side of it is under this share of the least one: its neighbours reach over.
const TIP: f64 = 0.5;

/// Lines of a branch, `from..to`.
type Run = std::ops::Range<usize>;

impl Rows {
    /// Slabs where the sides of the figure are steep, and slabs along the other axis, given by `columns`, of what is left.
    ///
    /// `columns` are the scan lines of the figure mirrored about the diagonal `x = y`.
    pub(super) fn mixed(&self, columns: &Self, slack: f64, least: f64) -> Vec<Flash> {
        let mut flashes = Vec::new();
        let mut covered = vec![Vec::new(); columns.crossings.len()];
        for branch in self.branches() {
            for run in self.steep(&branch, columns, slack, least) {
                self.cover(&branch, &run, columns, &mut covered);
                self.cut(&branch, run, slack, least, &mut flashes);
            }
        }
        let rest = columns.without(covered);
        let across = rest.slabs(slack, least).into_iter().map(|f| f.flipped());
        flashes.extend(across.filter(|f| f.length(0).min(f.length(1)) > TIP * least));
        flashes
    }

    /// The runs of lines of a branch about which its sides are steep or wander by little; no run and no gap between two is lower
    /// than the least slab.
    fn steep(&self, branch: &Branch, columns: &Self, slack: f64, least: f64) -> Vec<Run> {
        let lines = self.lines(least.max(1.1 * self.sigma));
        let n = branch.spans.len();
        let half = lines.div_ceil(2);
        let across = |i: usize| {
            let [a, b] = branch.spans[i];
            let middle = 0.5 * (a + b);
            let y = self.level(branch.line + i) + 0.5 * self.pitch;
            columns
                .length_at(middle, y)
                .is_none_or(|other| b - a <= ALONG * other)
        };
        let follows = |i: usize| {
            let window = &branch.spans[i.saturating_sub(half)..(i + half + 1).min(n)];
            #[allow(clippy::cast_precision_loss, reason = "at most 1e7 lines")]
            let height = (window.len() - 1) as f64 * self.pitch;
            (0..2).all(|side| {
                let low = window.iter().map(|s| s[side]).fold(f64::INFINITY, f64::min);
                let high = window
                    .iter()
                    .map(|s| s[side])
                    .fold(f64::NEG_INFINITY, f64::max);
                high - low <= (STEEP * height).max(slack * self.sigma)
            })
        };
        let mut runs: Vec<Run> = Vec::new();
        for i in (0..n).filter(|&i| across(i) && follows(i)) {
            match runs.last_mut() {
                Some(run) if i - run.end < lines => run.end = i + 1,
                _ => runs.push(i..i + 1),
            }
        }
        // Rounded ends too low for a slab of their own.
        if let Some(first) = runs.first_mut().filter(|r| r.start < lines) {
            first.start = 0;
        }
        if let Some(last) = runs.last_mut().filter(|r| n - r.end < lines) {
            last.end = n;
        }
        runs.retain(|r| r.len() >= lines);
        runs
    }

    /// Enters the run of a branch in the lists of what is covered along each of the `columns`.
    fn cover(&self, branch: &Branch, run: &Run, columns: &Self, covered: &mut [Vec<[f64; 2]>]) {
        let span = |i: usize| columns.between(branch.spans[i]);
        let mut since: Vec<(usize, f64)> = Vec::new();
        let mut open: Run = 0..0;
        for i in run.clone() {
            let y = self.level(branch.line + i);
            let next = span(i);
            for (column, from) in since.iter().filter(|(c, _)| !next.contains(c)) {
                covered[*column].push([*from, y]);
            }
            since.retain(|(c, _)| next.contains(c));
            since.extend(next.clone().filter(|c| !open.contains(c)).map(|c| (c, y)));
            open = next;
        }
        let y = self.level(branch.line + run.end);
        for (column, from) in since {
            covered[column].push([from, y]);
        }
    }

    /// The length of the span of the line nearest to `at` that a place along it lies in.
    fn length_at(&self, at: f64, place: f64) -> Option<f64> {
        let line = self.between([at - self.pitch, at]).next()?;
        let spans = self.crossings.get(line)?;
        let after = spans.partition_point(|&c| c <= place);
        (after % 2 == 1).then(|| spans[after] - spans[after - 1])
    }

    /// The lines whose middle lies in an interval.
    fn between(&self, [from, to]: [f64; 2]) -> Run {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "not negative; saturates"
        )]
        let line = |at: f64| {
            (((at - self.low) / self.pitch - 0.5).ceil().max(0.0) as usize)
                .min(self.crossings.len())
        };
        line(from)..line(to).max(line(from))
    }

    /// The same lines with what is covered along each taken out.
    fn without(&self, covered: Vec<Vec<[f64; 2]>>) -> Self {
        let rest = |(crossings, mut covered): (&Vec<f64>, Vec<[f64; 2]>)| {
            covered.sort_by(|a, b| a[0].total_cmp(&b[0]));
            let whole: Vec<[f64; 2]> = spans_of(crossings).collect();
            let mut left = Vec::new();
            spans::without(&whole, &covered, &mut left);
            left.retain(|s| s[1] - s[0] > self.pitch);
            left.concat()
        };
        Self {
            crossings: self.crossings.iter().zip(covered).map(rest).collect(),
            core: self.core.clone(),
            ..*self
        }
    }
}
