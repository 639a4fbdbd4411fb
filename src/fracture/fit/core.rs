//! The deep inside of a wide figure, filled with shots of the greatest size that stay as they are: only the rim is fitted.
//!
//! A slab across a wide figure is cut to the greatest side anyway; with a core, each step of the outline costs one shot of a rim
//! instead of several across. Every core shot abuts its neighbours exactly, so what lies 2 σ within the core is known to print.

use std::collections::HashSet;

use crate::shot::{ShotLimits, ShotList};
use crate::target::Target;

use super::model::Flash;

/// Cells along the greatest side at most.
const CELLS: usize = 8;

/// Least size of a cell, σ.
const LEAST_CELL: f64 = 4.0;

/// Least distance of the core from the outline, σ: what a rim shot needs, and far enough that the core does not print outside.
const DEPTH: f64 = 4.0;

/// Cells along the lesser side of a core shot of less than the greatest size.
const LEAST_SIDES: [usize; 2] = [6, 4];

/// Greatest side where the writer sets none, σ.
const GREATEST: f64 = 64.0;

/// Deeper than this in the core (σ) at least `(Φ(2) − Φ(−2))² = 0.91` of dose 1 comes from it alone.
const SURE: f64 = 2.0;

/// Cells of a core at most; a greater box has greater cells.
const MOST_CELLS: f64 = 2e7;

/// Shots of dose 1 on square cells aligned to the frame's origin.
#[derive(Clone, Debug)]
pub(in crate::fracture) struct Core {
    /// Side of a cell, nm.
    cell: f64,
    sigma: f64,
    columns: usize,
    rows: usize,
    /// For each cell, row by row, the number of its shot from 1 on; 0 without one.
    owner: Vec<u32>,
    shots: Vec<Flash>,
}

impl Core {
    /// Of a figure in its own frame (least x and y from 0 to one address); `None` where no shot of the greatest size fits in.
    pub(super) fn of(target: &Target, sigma: f64, limits: &ShotLimits) -> Option<Self> {
        let unit = limits.address.nm().0;
        let greatest = (limits.greatest_side.0 - unit).min(GREATEST * sigma.max(unit));
        let [_, _, x1, y1] = target.bounds();
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "small or checked to be"
        )]
        let whole = |v: f64| v.max(0.0).floor() as usize;
        let mut across = whole(greatest / (LEAST_CELL * sigma)).min(CELLS);
        let cell_of = |across: usize| {
            #[allow(clippy::cast_precision_loss, reason = "at most 8")]
            let across = across as f64;
            (greatest / across / unit).floor() * unit
        };
        let cells = |cell: f64| (x1 / cell + 1.0) * (y1 / cell + 1.0);
        while across > 1 && cells(cell_of(across)) > MOST_CELLS {
            across /= 2;
        }
        if across == 0 || cells(cell_of(across)) > MOST_CELLS {
            return None;
        }
        let cell = cell_of(across);
        #[allow(clippy::cast_precision_loss, reason = "at most 8")]
        let least = across as f64 * cell + 2.0 * DEPTH * sigma;
        if x1.min(y1) < least {
            return None;
        }
        let mut core = Self {
            cell,
            sigma,
            columns: whole(x1 / cell) + 1,
            rows: whole(y1 / cell) + 1,
            owner: Vec::new(),
            shots: Vec::new(),
        };
        let free = core.free(target);
        core.owner = vec![0; free.len()];
        core.fill(&free, across);
        (!core.shots.is_empty()).then_some(core)
    }

    /// Which cells lie in the figure, deep enough.
    fn free(&self, target: &Target) -> Vec<bool> {
        let mut free = vec![false; self.columns * self.rows];
        let (mut crossings, mut near) = (Vec::new(), Vec::new());
        for (j, row) in free.chunks_exact_mut(self.columns).enumerate() {
            let middle = self.at(j) + 0.5 * self.cell;
            target.crossings(middle, &mut crossings);
            // The outline alone: without crossings nothing is added for the inside.
            target.spans_near(middle, 0.5 * self.cell + DEPTH * self.sigma, &[], &mut near);
            let mut rim = 0;
            for inside in crossings.chunks_exact(2) {
                let first = self.cell_at(inside[0]) + 1;
                let end = self.cell_at(inside[1]).min(self.columns);
                for (i, free) in row.iter_mut().enumerate().take(end).skip(first) {
                    let (from, to) = (self.at(i), self.at(i + 1));
                    while near.get(rim).is_some_and(|s| s[1] <= from) {
                        rim += 1;
                    }
                    *free = near.get(rim).is_none_or(|s| s[0] >= to);
                }
            }
        }
        free
    }

    /// Covers free cells with shots: those of the greatest size first, then lesser ones beside these.
    fn fill(&mut self, free: &[bool], across: usize) {
        self.pass(free, across, across);
        let big = self.shots.len();
        if big == 0 {
            return;
        }
        for least in LEAST_SIDES.map(|share| (share * across).div_ceil(CELLS)) {
            self.pass(free, least, across);
        }
    }

    /// Places shots of at least `least` cells and at most `most` along each side, row by row; those of less than `most` only where
    /// they touch one of the greatest size.
    fn pass(&mut self, free: &[bool], least: usize, most: usize) {
        for j in 0..self.rows {
            for i in 0..self.columns {
                let open = |core: &Self, i: usize, j: usize| {
                    i < core.columns
                        && j < core.rows
                        && free[j * core.columns + i]
                        && core.owner[j * core.columns + i] == 0
                };
                if !open(self, i, j) {
                    continue;
                }
                let column = |core: &Self, i: usize, h: usize| (j..j + h).all(|j| open(core, i, j));
                let row = |core: &Self, j: usize, w: usize| (i..i + w).all(|i| open(core, i, j));
                let mut size = [0, least];
                while size[0] < most && column(self, i + size[0], least) {
                    size[0] += 1;
                }
                if size[0] < least {
                    continue;
                }
                while size[1] < most && row(self, j + size[1], size[0]) {
                    size[1] += 1;
                }
                if least == most || self.beside_great([i, j], size, most) {
                    self.place([i, j], size);
                }
            }
        }
    }

    /// Whether a rectangle of cells shares part of a side with a shot of the greatest size.
    fn beside_great(&self, [i, j]: [usize; 2], [w, h]: [usize; 2], most: usize) -> bool {
        #[allow(clippy::cast_precision_loss, reason = "at most 8")]
        let side = most as f64 * self.cell - 0.5 * self.cell;
        let great = |i: usize, j: usize| {
            let owner = if i < self.columns && j < self.rows {
                self.owner[j * self.columns + i]
            } else {
                0
            };
            owner > 0 && {
                let f = &self.shots[owner as usize - 1];
                f.length(0) > side && f.length(1) > side
            }
        };
        // Cells before the first column or row wrap to beyond the last.
        (j..j + h).any(|j| great(i.wrapping_sub(1), j) || great(i + w, j))
            || (i..i + w).any(|i| great(i, j.wrapping_sub(1)) || great(i, j + h))
    }

    fn place(&mut self, [i, j]: [usize; 2], [w, h]: [usize; 2]) {
        let side = [self.at(i), self.at(j), self.at(i + w), self.at(j + h)];
        self.shots.push(Flash::new(side));
        let number = u32::try_from(self.shots.len()).unwrap_or(u32::MAX);
        for j in j..j + h {
            self.owner[j * self.columns + i..j * self.columns + i + w].fill(number);
        }
    }

    /// The shots.
    pub(super) fn shots(&self) -> &[Flash] {
        &self.shots
    }

    /// Whether all its shots are among some.
    pub(super) fn is_among(&self, shots: &ShotList) -> bool {
        let key = |side: [f64; 4]| side.map(f64::to_bits);
        let flashed: HashSet<_> = shots
            .rects()
            .map(Flash::from)
            .filter(|f| f.dose == 1.0)
            .map(|f| key(self.rounded(f.side)))
            .collect();
        self.shots.iter().all(|f| flashed.contains(&key(f.side)))
    }

    /// Whether a shot is one of its own.
    pub(super) fn holds(&self, flash: &Flash) -> bool {
        let side = self.rounded(flash.side);
        let [i, j] = [self.cell_at(side[0]), self.cell_at(side[1])];
        let owner = self.owner.get(j * self.columns + i).copied().unwrap_or(0);
        owner > 0 && i < self.columns && self.shots[owner as usize - 1].side == side
    }

    /// Sides that are borders of cells but for rounding as these.
    fn rounded(&self, side: [f64; 4]) -> [f64; 4] {
        side.map(|v| {
            let border = self.cell * (v / self.cell).round();
            if (v - border).abs() < 1e-6 { border } else { v }
        })
    }

    /// Whether a coordinate is a border of cells, to the bit.
    pub(super) fn is_border(&self, v: f64) -> bool {
        self.cell * (v / self.cell).round() == v
    }

    /// The same mirrored about the diagonal `x = y`.
    pub(super) fn flipped(&self) -> Self {
        let mut owner = Vec::with_capacity(self.owner.len());
        for i in 0..self.columns {
            owner.extend((0..self.rows).map(|j| self.owner[j * self.columns + i]));
        }
        Self {
            columns: self.rows,
            rows: self.columns,
            owner,
            shots: self.shots.iter().map(Flash::flipped).collect(),
            ..*self
        }
    }

    /// Stretches of the horizontal at `y` in the core, sorted and disjoint.
    pub(super) fn spans(&self, y: f64, out: &mut Vec<[f64; 2]>) {
        self.spans_between([y, y], 0.0, out);
    }

    /// Stretches of the horizontal at `y` so deep in the core that they print for sure.
    pub(super) fn sure_spans(&self, y: f64, out: &mut Vec<[f64; 2]>) {
        let depth = SURE * self.sigma;
        self.spans_between([y - depth, y + depth], depth, out);
    }

    /// Stretches over which every height of a band lies in the core, shortened by `inset` at both ends.
    fn spans_between(&self, [low, high]: [f64; 2], inset: f64, out: &mut Vec<[f64; 2]>) {
        out.clear();
        if low < 0.0 {
            return;
        }
        let (from, to) = (self.cell_at(low), self.cell_at(high));
        if to >= self.rows {
            return;
        }
        let full = |i: usize| (from..=to).all(|j| self.owner[j * self.columns + i] > 0);
        let mut i = 0;
        while i < self.columns {
            if !full(i) {
                i += 1;
                continue;
            }
            let start = i;
            while i < self.columns && full(i) {
                i += 1;
            }
            let span = [self.at(start) + inset, self.at(i) - inset];
            if span[0] < span[1] {
                out.push(span);
            }
        }
    }

    /// A slab with each side that lies within `reach` of a core shot beside it moved to that.
    pub(super) fn abutted(&self, slab: &Flash, reach: f64) -> Flash {
        let mut slab = *slab;
        let around = slab.grown(reach).side.map(|v| self.cell_at(v));
        let (last_row, last_column) = (self.rows - 1, self.columns - 1);
        let mut seen: Vec<u32> = Vec::new();
        for j in around[1].min(last_row)..=around[3].min(last_row) {
            for i in around[0].min(last_column)..=around[2].min(last_column) {
                let owner = self.owner[j * self.columns + i];
                if owner == 0 || seen.contains(&owner) {
                    continue;
                }
                seen.push(owner);
                let shot = &self.shots[owner as usize - 1];
                let axis = usize::from(slab.gap_along(shot, 1) > slab.gap_along(shot, 0));
                if slab.gap(shot).abs() >= reach || slab.gap_along(shot, 1 - axis) > -reach {
                    continue;
                }
                if slab.side[axis] < shot.side[axis] {
                    slab.side[axis + 2] = shot.side[axis];
                } else {
                    slab.side[axis] = shot.side[axis + 2];
                }
            }
        }
        slab
    }

    /// Border of cells number `i`, nm.
    fn at(&self, i: usize) -> f64 {
        #[allow(clippy::cast_precision_loss, reason = "at most 5e7")]
        let i = i as f64;
        self.cell * i
    }

    /// The cell of a coordinate; 0 below the first.
    fn cell_at(&self, v: f64) -> usize {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "not negative; saturates"
        )]
        let i = (v / self.cell).max(0.0) as usize;
        i
    }
}
