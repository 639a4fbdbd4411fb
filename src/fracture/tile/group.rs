//! Exhaustive search for the best way to cut a few neighbouring tiles anew.

use std::cmp::Reverse;

use crate::geom::{Point, Rect};

/// How bad a set of tiles is; less is better.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) struct Score {
    pub(super) slivers: i32,
    pub(super) external: i32,
    pub(super) smallest: Reverse<i64>,
}

impl Score {
    pub(super) fn of(sliver: bool, external: bool, short_side: i64) -> Self {
        Self {
            slivers: i32::from(sliver),
            external: i32::from(external),
            smallest: Reverse(short_side),
        }
    }

    /// Of both sets together.
    pub(super) fn and(self, other: Self) -> Self {
        Self {
            slivers: self.slivers + other.slivers,
            external: self.external + other.external,
            smallest: self.smallest.max(other.smallest),
        }
    }
}

/// The union of a few tiles on the grid of their own coordinates, at most 8 × 8 cells: one bit each.
pub(super) struct Group {
    xs: Vec<i64>,
    ys: Vec<i64>,
    cells: u64,
}

/// A partial cut: cells still to cover, tiles still allowed, what was cut, and how bad that is.
struct State {
    open: u64,
    left: usize,
    pieces: Vec<Rect>,
    score: Option<Score>,
}

impl Group {
    /// `None` for more than 8 columns or rows.
    pub(super) fn new(tiles: &[Rect]) -> Option<Self> {
        let grid = |of: fn(&Rect) -> [i64; 2]| {
            let mut at: Vec<i64> = tiles.iter().flat_map(of).collect();
            at.sort_unstable();
            at.dedup();
            (at.len() <= 9).then_some(at)
        };
        let mut group = Self {
            xs: grid(|r| [r.min.x, r.max.x])?,
            ys: grid(|r| [r.min.y, r.max.y])?,
            cells: 0,
        };
        group.cells = tiles
            .iter()
            .fold(0, |cells, r| cells | group.under(r.min, r.max));
        Some(group)
    }

    /// Whether any of it lies in the open rectangle between two corners.
    pub(super) fn holds(&self, from: Point, to: Point) -> bool {
        self.cells & self.under(from, to) != 0
    }

    /// The cut into at most `most` rectangles that is best, if it is better than `bar`.
    pub(super) fn best(
        &self,
        most: usize,
        bar: Score,
        rate: &impl Fn(Rect) -> Score,
    ) -> Option<(Score, Vec<Rect>)> {
        let mut best = (bar, Vec::new());
        let mut state = State {
            open: self.cells,
            left: most,
            pieces: Vec::with_capacity(most),
            score: None,
        };
        self.search(&mut state, &mut best, rate);
        (!best.1.is_empty()).then_some(best)
    }

    fn search(
        &self,
        state: &mut State,
        best: &mut (Score, Vec<Rect>),
        rate: &impl Fn(Rect) -> Score,
    ) {
        if state.open == 0 {
            if let Some(score) = state.score {
                *best = (score, state.pieces.clone());
            }
            return;
        }
        if state.left == 0 {
            return;
        }
        // The lowest open cell, leftmost first, is the lower-left cell of its rectangle.
        let first = state.open.trailing_zeros() as usize;
        let (column, row) = (first % 8, first / 8);
        let mut widest = 8;
        for top in row..8 {
            let mut bits = 0;
            for right in column..widest {
                let bit = 1u64 << (top * 8 + right);
                if state.open & bit == 0 {
                    widest = right;
                    break;
                }
                bits |= bit;
                self.place(state, (column, row), (right, top), best, rate);
            }
            if bits == 0 {
                return;
            }
        }
    }

    /// Puts the rectangle of cells `from..=to` and searches on, unless that cannot beat the best.
    fn place(
        &self,
        state: &mut State,
        from: (usize, usize),
        to: (usize, usize),
        best: &mut (Score, Vec<Rect>),
        rate: &impl Fn(Rect) -> Score,
    ) {
        let piece = Rect {
            min: Point::new(self.xs[from.0], self.ys[from.1]),
            max: Point::new(self.xs[to.0 + 1], self.ys[to.1 + 1]),
        };
        let mask = self.under(piece.min, piece.max);
        if state.left == 1 && mask != state.open {
            return;
        }
        let before = state.score;
        let score = before.map_or(rate(piece), |s| s.and(rate(piece)));
        if score >= best.0 {
            return;
        }
        state.open &= !mask;
        state.left -= 1;
        state.score = Some(score);
        state.pieces.push(piece);
        self.search(state, best, rate);
        state.pieces.pop();
        state.score = before;
        state.left += 1;
        state.open |= mask;
    }

    /// The cells that share more than a side with a rectangle.
    fn under(&self, from: Point, to: Point) -> u64 {
        let span = |at: &[i64], lo: i64, hi: i64| {
            let begin = at.partition_point(|&c| c <= lo).saturating_sub(1);
            let end = at.partition_point(|&c| c < hi);
            begin..end.min(at.len() - 1)
        };
        let columns = span(&self.xs, from.x, to.x).fold(0u64, |bits, i| bits | 1 << i);
        span(&self.ys, from.y, to.y).fold(0, |bits, j| bits | columns << (8 * j))
    }
}
