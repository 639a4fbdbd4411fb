//! Pieces and holes: the printed region as runs on a lattice, joined, against the figure as drawn.

use serde::{Deserialize, Serialize};

use crate::blur::THRESHOLD;
use crate::target::{DoseField, Need, Target};

/// Figures whose pieces or holes are not as drawn; each kind counts a figure at each place once. All 0 is right.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Pieces {
    /// Nothing of the figure prints.
    pub lost: u128,
    /// The figure prints in more than one piece.
    pub split: u128,
    /// The figure prints as one with a neighbour.
    pub bridged: u128,
    /// Something prints that is no figure's.
    pub extra: u128,
    /// More or fewer holes print than were drawn.
    pub holes: u128,
    /// Something is flashed further away than was looked.
    pub beyond: u128,
}

impl Pieces {
    pub(super) fn merge(&mut self, other: &Self, times: u128) {
        self.lost += other.lost * times;
        self.split += other.split * times;
        self.bridged += other.bridged * times;
        self.extra += other.extra * times;
        self.holes += other.holes * times;
        self.beyond += other.beyond * times;
    }
}

pub(super) struct Found {
    pub(super) pieces: Pieces,
    /// Of all pieces that hold part of the figure.
    pub(super) area_nm2: f64,
}

/// What prints within `around` nm of the figure's bounds, on a lattice of `step` nm.
pub(super) fn find(
    target: &Target,
    drawn_holes: usize,
    others: &[Target],
    dose: &impl DoseField,
    step: f64,
    around: f64,
) -> Found {
    let b = target.bounds();
    let (x0, y0) = (b[0] - around, b[1] - around);
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "positive; bounds are at most 4.5e12 nm"
    )]
    let size = |from: f64, to: f64| ((to + around - from) / step) as usize + 2;
    let (columns, rows) = (size(x0, b[2]), size(y0, b[3]));
    let (mut values, mut below) = (vec![0.0; columns], vec![0.0; columns]);
    let (mut owner, mut owner_below) = (vec![0; columns], vec![0; columns]);
    let mut crossings = Vec::new();
    let (mut printed, mut marks) = (Runs::default(), Vec::<Mark>::new());
    for j in 0..rows {
        #[allow(
            clippy::cast_precision_loss,
            reason = "an index of memory is below 2^53"
        )]
        let (y, x) = (y0 + j as f64 * step, |i: f64| x0 + i * step);
        dose.row(y, x0, step, &mut values);
        let start = printed.runs.len();
        printed.push_row(values.iter().map(|v| *v >= THRESHOLD));
        marks.resize(printed.runs.len(), Mark::default());
        for (run, r) in printed.runs.iter().enumerate().skip(start) {
            owner[r.from..r.to].fill(run);
        }
        for i in 0..columns - 1 {
            let cell = [below[i], below[i + 1], values[i + 1], values[i]];
            if let Some(k) = cell.iter().position(|v| *v >= THRESHOLD) {
                let run = [owner_below[i], owner_below[i + 1], owner[i + 1], owner[i]][k];
                marks[run].cells += share_printed(cell);
            }
        }
        for (of_figure, t) in
            std::iter::once((true, target)).chain(others.iter().map(|o| (false, o)))
        {
            if printed.runs.len() == start {
                break;
            }
            t.crossings(y, &mut crossings);
            for (run, mark) in printed.runs[start..].iter().zip(&mut marks[start..]) {
                #[allow(
                    clippy::cast_precision_loss,
                    reason = "an index of memory is below 2^53"
                )]
                let (from, to) = (x(run.from as f64), x((run.to - 1) as f64));
                let inside = crossings
                    .chunks_exact(2)
                    .any(|c| c[0] <= to && from <= c[1]);
                *(if of_figure {
                    &mut mark.figure
                } else {
                    &mut mark.other
                }) |= inside;
            }
        }
        // The print of a neighbour beyond the lattice may reach onto it, within the tolerance of its outline.
        let clear = |p: [f64; 2]| {
            let mut all = std::iter::once(target).chain(others);
            all.all(|t| t.need(p) == Need::Clear)
        };
        for (run, mark) in printed.runs[start..].iter().zip(&mut marks[start..]) {
            if !mark.figure && !mark.other {
                #[allow(
                    clippy::cast_precision_loss,
                    reason = "an index of memory is below 2^53"
                )]
                let stray = (run.from..run.to).any(|i| clear([x(i as f64), y]));
                mark.stray = stray;
            }
        }
        std::mem::swap(&mut values, &mut below);
        std::mem::swap(&mut owner, &mut owner_below);
    }
    let piece = printed.joined(false);
    let mut by_piece = vec![Mark::default(); piece.len()];
    for (root, mark) in piece.iter().zip(&marks) {
        let sum = &mut by_piece[*root];
        sum.figure |= mark.figure;
        sum.other |= mark.other;
        sum.stray |= mark.stray;
        sum.cells += mark.cells;
    }
    let roots = |wanted: &dyn Fn(&Mark) -> bool| {
        piece
            .iter()
            .enumerate()
            .filter(|(i, root)| i == *root && wanted(&by_piece[*i]))
            .count()
    };
    let own = roots(&|m| m.figure);
    let holes = printed
        .kept(|i| by_piece[piece[i]].figure)
        .gaps(columns)
        .enclosed(columns);
    let area = piece
        .iter()
        .enumerate()
        .filter(|(i, root)| i == *root && by_piece[*i].figure);
    Found {
        pieces: Pieces {
            lost: u128::from(own == 0),
            split: u128::from(own > 1),
            bridged: u128::from(roots(&|m| m.figure && m.other) > 0),
            extra: u128::from(roots(&|m| m.stray && !m.figure && !m.other) > 0),
            holes: u128::from(own > 0 && holes != drawn_holes),
            beyond: 0,
        },
        area_nm2: area.map(|(i, _)| by_piece[i].cells * step * step).sum(),
    }
}

/// Share of a lattice cell at or above the threshold, from the doses at its corners (in turn): its sides are cut linearly.
fn share_printed(dose: [f64; 4]) -> f64 {
    if dose.iter().all(|d| *d >= THRESHOLD) {
        return 1.0;
    }
    const CORNER: [[f64; 2]; 4] = [[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]];
    // Triangles that fan out from the first corner of the printed polygon.
    let mut first: Option<[f64; 2]> = None;
    let (mut last, mut twice) = ([0.0; 2], 0.0);
    let mut to = |p: [f64; 2]| {
        let o = *first.get_or_insert(p);
        let q = [p[0] - o[0], p[1] - o[1]];
        twice += last[0] * q[1] - q[0] * last[1];
        last = q;
    };
    for k in 0..4 {
        let next = (k + 1) % 4;
        let (p, q, a, b) = (CORNER[k], CORNER[next], dose[k], dose[next]);
        if a >= THRESHOLD {
            to(p);
        }
        if (a >= THRESHOLD) != (b >= THRESHOLD) {
            let t = (THRESHOLD - a) / (b - a);
            to([p[0] + t * (q[0] - p[0]), p[1] + t * (q[1] - p[1])]);
        }
    }
    0.5 * twice
}

/// What a run or piece belongs to, and the lattice cells that it fills.
#[derive(Clone, Copy, Default)]
struct Mark {
    figure: bool,
    other: bool,
    /// Beyond the tolerance of every outline.
    stray: bool,
    cells: f64,
}

/// Lattice places `from..to` of a row.
#[derive(Clone, Copy)]
struct Run {
    from: usize,
    to: usize,
}

/// Runs row by row: memory grows with the outline, not with the area.
struct Runs {
    runs: Vec<Run>,
    starts: Vec<usize>,
}

impl Default for Runs {
    fn default() -> Self {
        Self {
            runs: Vec::new(),
            starts: vec![0],
        }
    }
}

impl Runs {
    fn push_row(&mut self, row: impl Iterator<Item = bool>) {
        let mut open = None;
        let mut end = 0;
        for (i, on) in row.enumerate() {
            match (on, open) {
                (true, None) => open = Some(i),
                (false, Some(from)) => {
                    self.runs.push(Run { from, to: i });
                    open = None;
                }
                _ => {}
            }
            end = i + 1;
        }
        self.runs.extend(open.map(|from| Run { from, to: end }));
        self.starts.push(self.runs.len());
    }

    /// For each run the first run of its piece; runs in neighbouring rows touch along a side, or `diagonal`ly too.
    fn joined(&self, diagonal: bool) -> Vec<usize> {
        let mut root: Vec<usize> = (0..self.runs.len()).collect();
        let slack = usize::from(diagonal);
        for w in self.starts.windows(3) {
            let (mut i, mut j) = (w[0], w[1]);
            while i < w[1] && j < w[2] {
                let (a, b) = (self.runs[i], self.runs[j]);
                if a.from < b.to + slack && b.from < a.to + slack {
                    let (p, q) = (find_root(&mut root, i), find_root(&mut root, j));
                    root[p.max(q)] = p.min(q);
                }
                if a.to < b.to { i += 1 } else { j += 1 }
            }
        }
        (0..root.len()).map(|i| find_root(&mut root, i)).collect()
    }

    /// Only the runs asked for.
    fn kept(&self, keep: impl Fn(usize) -> bool) -> Self {
        let mut kept = Self::default();
        for w in self.starts.windows(2) {
            kept.runs
                .extend((w[0]..w[1]).filter(|i| keep(*i)).map(|i| self.runs[i]));
            kept.starts.push(kept.runs.len());
        }
        kept
    }

    /// The runs between these, over rows of `columns` places.
    fn gaps(&self, columns: usize) -> Self {
        let mut gaps = Self::default();
        for w in self.starts.windows(2) {
            let mut from = 0;
            for run in &self.runs[w[0]..w[1]] {
                if from < run.from {
                    gaps.runs.push(Run { from, to: run.from });
                }
                from = run.to;
            }
            if from < columns {
                gaps.runs.push(Run { from, to: columns });
            }
            gaps.starts.push(gaps.runs.len());
        }
        gaps
    }

    /// How many pieces do not touch the border of the lattice.
    fn enclosed(&self, columns: usize) -> usize {
        let piece = self.joined(true);
        let mut open = vec![false; piece.len()];
        let last = self.starts.len().saturating_sub(2);
        for (row, w) in self.starts.windows(2).enumerate() {
            for i in w[0]..w[1] {
                let run = self.runs[i];
                open[piece[i]] |= row == 0 || row == last || run.from == 0 || run.to == columns;
            }
        }
        piece
            .iter()
            .enumerate()
            .filter(|(i, root)| i == *root && !open[*i])
            .count()
    }
}

fn find_root(root: &mut [usize], mut i: usize) -> usize {
    while root[i] != i {
        root[i] = root[root[i]];
        i = root[i];
    }
    i
}
