//! Where a fit starts from: slabs of the figure.

use crate::geom::{Orientation, Point, Transform, spans};
use crate::target::Target;

use std::cmp::Reverse;
use std::collections::BinaryHeap;
use std::ops::Range;
use std::rc::Rc;

use super::core::Core;
use super::model::{Bins, Flash};
use super::samples::Sample;
use super::search::Setting;

mod mixed;

/// Horizontal scan lines through a figure, evenly spaced over its height.
struct Rows {
    low: f64,
    pitch: f64,
    sigma: f64,
    /// Crossings with the outline along each line; inside is between each first and second. What lies in the core is left out.
    crossings: Vec<Vec<f64>>,
    core: Option<Rc<Core>>,
}

/// A part of a figure that the scan lines cross in one span each, from line `line` on.
struct Branch {
    line: usize,
    spans: Vec<[f64; 2]>,
}

/// How many spans of the next line a span overlaps.
#[derive(Clone, Copy)]
enum Meeting {
    None,
    One(usize),
    Several,
}

/// For each of the `spans`, which of the `others` it overlaps; both are sorted and disjoint.
fn meeting(spans: &[[f64; 2]], others: &[[f64; 2]]) -> Vec<Meeting> {
    let mut first = 0;
    spans
        .iter()
        .map(|s| {
            while first < others.len() && others[first][1] <= s[0] {
                first += 1;
            }
            let overlaps = |k: usize| others.get(k).is_some_and(|o| o[0] < s[1]);
            match (overlaps(first), overlaps(first + 1)) {
                (false, _) => Meeting::None,
                (true, false) => Meeting::One(first),
                (true, true) => Meeting::Several,
            }
        })
        .collect()
}

/// The stretches between each first and second crossing.
fn spans_of(crossings: &[f64]) -> impl Iterator<Item = [f64; 2]> + '_ {
    crossings.chunks_exact(2).map(|c| [c[0], c[1]])
}

/// A slab smaller than this (σ²) prints nothing.
const LEAST_AREA: f64 = 0.4;

/// Distance of the scan lines, σ.
const PITCH: f64 = 0.12;

impl Rows {
    /// The lines of a target without its core.
    fn of(target: &Target, sigma: f64, core: Option<Rc<Core>>) -> Self {
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
            core,
        };
        let (mut taken, mut rest) = (Vec::new(), Vec::new());
        for i in 0..n {
            let y = rows.level(i) + 0.5 * pitch;
            let crossings = &mut rows.crossings[i];
            target.crossings(y, crossings);
            if let Some(core) = &rows.core {
                core.spans(y, &mut taken);
                let whole: Vec<[f64; 2]> = spans_of(crossings).collect();
                spans::without(&whole, &taken, &mut rest);
                *crossings = rest.concat();
            }
        }
        rows
    }

    /// Whether the side of the core beside a span begins, ends or jumps between it and the next one: slabs part there.
    fn parted(&self, span: [f64; 2], next: [f64; 2]) -> bool {
        self.core.as_ref().is_some_and(|core| {
            let border = |v: f64| core.is_border(v);
            (0..2).any(|k| span[k] != next[k] && (border(span[k]) || border(next[k])))
        })
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

    /// Cuts every branch of the figure into slabs as high as its two sides wander by at most `slack` σ within them (but no lower
    /// than `least` nm and about σ), each as wide as the branch is there on average.
    fn slabs(&self, slack: f64, least: f64) -> Vec<Flash> {
        let mut flashes = Vec::new();
        for branch in self.branches() {
            self.cut(&branch, 0..branch.spans.len(), slack, least, &mut flashes);
        }
        flashes
    }

    /// Cuts some lines of a branch into slabs; see [`Rows::slabs`].
    fn cut(
        &self,
        branch: &Branch,
        lines: Range<usize>,
        slack: f64,
        least: f64,
        flashes: &mut Vec<Flash>,
    ) {
        let least = self.lines(least.max(1.1 * self.sigma));
        let limit = slack * self.sigma;
        let mut from = lines.start;
        while from < lines.end {
            let (mut low, mut high) = (branch.spans[from], branch.spans[from]);
            let mut to = from + 1;
            while to < lines.end {
                for side in 0..2 {
                    low[side] = low[side].min(branch.spans[to][side]);
                    high[side] = high[side].max(branch.spans[to][side]);
                }
                if to - from >= least && (0..2).any(|side| high[side] - low[side] > limit) {
                    break;
                }
                to += 1;
            }
            // No low slab at the end.
            if 10 * (lines.end - to) < 7 * least {
                to = lines.end;
            }
            flashes.extend(self.slab(branch, from, to));
            from = to;
        }
    }

    /// Lines `from..to` of a branch as one shot, unless it is too small to matter.
    fn slab(&self, branch: &Branch, from: usize, to: usize) -> Option<Flash> {
        let spans = &branch.spans[from..to];
        #[allow(clippy::cast_precision_loss, reason = "at most 1e7 lines")]
        let mean = |side: usize| spans.iter().map(|s| s[side]).sum::<f64>() / spans.len() as f64;
        let side = [
            mean(0),
            self.level(branch.line + from),
            mean(1),
            self.level(branch.line + to),
        ];
        let flash = Flash::new(side);
        (flash.length(0) * flash.length(1) > LEAST_AREA * self.sigma * self.sigma).then_some(flash)
    }

    /// Runs of spans that follow one another line by line with neither a fork nor a join.
    fn branches(&self) -> Vec<Branch> {
        let mut done = Vec::new();
        let mut open: Vec<Branch> = Vec::new();
        for (line, crossings) in self.crossings.iter().enumerate() {
            let spans: Vec<[f64; 2]> = spans_of(crossings).collect();
            let last: Vec<[f64; 2]> = open.iter().map(|b| b.spans[b.spans.len() - 1]).collect();
            let (up, down) = (meeting(&last, &spans), meeting(&spans, &last));
            let mut next = Vec::with_capacity(spans.len());
            let mut running: Vec<Option<Branch>> = open.into_iter().map(Some).collect();
            for (i, span) in spans.into_iter().enumerate() {
                let follows = match down[i] {
                    Meeting::One(j)
                        if matches!(up[j], Meeting::One(_)) && !self.parted(last[j], span) =>
                    {
                        running[j].take()
                    }
                    _ => None,
                };
                let mut branch = follows.unwrap_or(Branch {
                    line,
                    spans: Vec::new(),
                });
                branch.spans.push(span);
                next.push(branch);
            }
            done.extend(running.into_iter().flatten());
            open = next;
        }
        done.extend(open);
        done
    }

    /// The shot made as high as the figure allows at its width, `inset` nm taken off at both ends.
    fn grown(&self, flash: &Flash, inset: f64) -> Flash {
        let [x0, y0, x1, y1] = flash.side;
        let (a, b) = (x0 + inset, x1 - inset);
        if b <= a {
            return *flash;
        }
        let fits = |i: usize| {
            // The crossing after `a` must be the end of a span, and beyond `b`.
            let after = self.crossings[i].partition_point(|&c| c <= a);
            after % 2 == 1 && b <= self.crossings[i][after]
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
            ..*flash
        }
    }
}

/// Scan lines along both axes.
pub(in crate::fracture) struct Slabs {
    rows: Rows,
    columns: Rows,
}

impl Slabs {
    /// Of a figure, around its core.
    pub(in crate::fracture) fn of(setting: &Setting<'_>) -> Self {
        let job = setting.job;
        let sigma = setting.sigma();
        let turned = job.figure.transformed(Transform {
            orientation: Orientation::DIAGONAL,
            shift: Point::default(),
        });
        let flipped = setting.core.as_ref().map(|core| Rc::new(core.flipped()));
        let turned = Target::new(&turned, job.blur, job.tolerance);
        Self {
            rows: Rows::of(&setting.target, sigma, setting.core.clone()),
            columns: Rows::of(&turned, sigma, flipped),
        }
    }

    /// The figure as horizontal and as vertical slabs (see [`Rows::slabs`]); the rim of a core has both in each, see [`Slabs::mixed`].
    pub(in crate::fracture) fn both(&self, slack: f64, least: f64) -> [Vec<Flash>; 2] {
        if self.rows.core.is_some() {
            return self.mixed(slack, least);
        }
        [
            self.rows.slabs(slack, least),
            self.columns
                .slabs(slack, least)
                .iter()
                .map(Flash::flipped)
                .collect(),
        ]
    }

    /// Slabs of both directions, each part of the figure cut across the way its outline runs: first the horizontal ones where they
    /// serve, then the other way round; see [`Rows::mixed`].
    pub(in crate::fracture) fn mixed(&self, slack: f64, least: f64) -> [Vec<Flash>; 2] {
        let mut upright = self.columns.mixed(&self.rows, slack, least);
        for flash in &mut upright {
            *flash = flash.flipped();
        }
        [self.rows.mixed(&self.columns, slack, least), upright].map(|slabs| self.abutted(slabs))
    }

    /// The slabs of both directions, each grown across as far as the figure allows; see [`Rows::grown`].
    pub(in crate::fracture) fn grown(&self, slack: f64, inset: f64) -> Vec<Flash> {
        let horizontal = self
            .rows
            .slabs(slack, 0.0)
            .into_iter()
            .map(|f| self.rows.grown(&f, inset));
        let vertical = self
            .columns
            .slabs(slack, 0.0)
            .into_iter()
            .map(|f| self.columns.grown(&f, inset).flipped());
        self.abutted(horizontal.chain(vertical).collect())
    }

    /// Slabs moved to the core where a scan line between them kept them off it, or brought them onto it.
    fn abutted(&self, mut slabs: Vec<Flash>) -> Vec<Flash> {
        if let Some(core) = &self.rows.core {
            let reach = 1.5 * self.rows.pitch.max(self.columns.pitch);
            for slab in &mut slabs {
                *slab = core.abutted(slab, reach);
            }
        }
        slabs
    }
}

/// Chooses from candidates so that every place that must print lies in one, the one that adds most places first.
///
/// The gain of a candidate only falls as others are chosen, so it is counted anew only when it comes up (Minoux 1978).
pub(in crate::fracture) fn cover(
    candidates: &[Flash],
    samples: &[Sample],
    sigma: f64,
) -> Vec<Flash> {
    let Some(hull) = candidates.iter().copied().reduce(|a, b| a.hull(&b)) else {
        return Vec::new();
    };
    let mut bins = Bins::new(hull.side, 4.0 * sigma);
    let print: Vec<&Sample> = samples.iter().filter(|s| s.sign > 0.0).collect();
    for (id, sample) in (0_u32..).zip(&print) {
        bins.insert(id, sample.place);
    }
    let mut open = vec![true; print.len()];
    let within = |f: &Flash| {
        let side = f.side;
        let inside = move |p: [f64; 2]| {
            (0..2).all(|axis| side[axis] <= p[axis] && p[axis] <= side[axis + 2])
        };
        bins.items(side)
            .filter(|&id| inside(print[id as usize].place))
            .map(|id| id as usize)
            .collect::<Vec<_>>()
    };
    let gain = |open: &[bool], f: &Flash| within(f).into_iter().filter(|&id| open[id]).count();
    // Largest gain first, the earlier candidate among equals.
    let mut queue: BinaryHeap<(usize, Reverse<usize>)> = candidates
        .iter()
        .enumerate()
        .map(|(i, f)| (gain(&open, f), Reverse(i)))
        .collect();
    let mut chosen = Vec::new();
    while let Some((stale, Reverse(i))) = queue.pop() {
        let now = gain(&open, &candidates[i]);
        if now < stale {
            queue.push((now, Reverse(i)));
        } else if now > 0 {
            within(&candidates[i])
                .into_iter()
                .for_each(|id| open[id] = false);
            chosen.push(candidates[i]);
        }
    }
    chosen
}
