//! Random rectilinear regions for tests and benches.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "numbers of test figures are small"
)]

use shotwright::geom::{Figure, Point, Ring};

#[path = "random.rs"]
mod random;
pub(crate) use random::Random;

/// Cells on a grid of unequal columns and rows, some filled.
pub(crate) struct Cells {
    pub(crate) xs: Vec<i64>,
    pub(crate) ys: Vec<i64>,
    /// Row by row.
    pub(crate) filled: Vec<bool>,
}

impl Cells {
    /// Each cell filled with probability `percent`; columns and rows 1 to `widest` nm wide; the largest piece that hangs
    /// together by sides is kept. `None` when nothing is filled.
    pub(crate) fn random(
        random: &mut Random,
        columns: usize,
        rows: usize,
        percent: u64,
        widest: u64,
    ) -> Option<Self> {
        let mut lines = |n: usize| {
            let mut at = 0;
            let mut lines = vec![0];
            for _ in 0..n {
                at += 1000 * (1 + random.below(widest) as i64);
                lines.push(at);
            }
            lines
        };
        let (xs, ys) = (lines(columns), lines(rows));
        let filled = (0..columns * rows)
            .map(|_| random.below(100) < percent)
            .collect();
        Self { xs, ys, filled }.largest_piece()
    }

    pub(crate) fn columns(&self) -> usize {
        self.xs.len() - 1
    }

    pub(crate) fn rows(&self) -> usize {
        self.ys.len() - 1
    }

    pub(crate) fn at(&self, i: usize, j: usize) -> bool {
        i < self.columns() && j < self.rows() && self.filled[j * self.columns() + i]
    }

    fn largest_piece(mut self) -> Option<Self> {
        let columns = self.columns();
        let mut piece = vec![0usize; self.filled.len()];
        let mut sizes = vec![0usize];
        for seed in 0..self.filled.len() {
            if !self.filled[seed] || piece[seed] != 0 {
                continue;
            }
            sizes.push(0);
            let mark = sizes.len() - 1;
            let mut stack = vec![seed];
            piece[seed] = mark;
            while let Some(c) = stack.pop() {
                sizes[mark] += 1;
                let (i, j) = (c % columns, c / columns);
                for (di, dj) in [(1, 0), (usize::MAX, 0), (0, 1), (0, usize::MAX)] {
                    let (i, j) = (i.wrapping_add(di), j.wrapping_add(dj));
                    if self.at(i, j) && piece[j * columns + i] == 0 {
                        piece[j * columns + i] = mark;
                        stack.push(j * columns + i);
                    }
                }
            }
        }
        let largest = (1..sizes.len()).max_by_key(|&m| (sizes[m], usize::MAX - m))?;
        self.filled = piece.into_iter().map(|m| m == largest).collect();
        Some(self)
    }

    /// The outline, interior to the left. At a point where the interior only touches itself the rings turn left
    /// (two rings that touch, or one that touches itself, each staying with its cell) or right (crossing over).
    pub(crate) fn figure(&self, turn_left_at_contacts: bool) -> Figure {
        const STEP: [(i64, i64); 4] = [(1, 0), (0, 1), (-1, 0), (0, -1)];
        let width = self.columns() + 1;
        let mut leaving = vec![0u8; width * (self.rows() + 1)];
        for j in 0..self.rows() {
            for i in 0..self.columns() {
                if self.at(i, j) {
                    let v = j * width + i;
                    let empty = |i: usize, j: usize| !self.at(i, j);
                    leaving[v] |= u8::from(empty(i, j.wrapping_sub(1)));
                    leaving[v + 1] |= u8::from(empty(i + 1, j)) << 1;
                    leaving[v + 1 + width] |= u8::from(empty(i, j + 1)) << 2;
                    leaving[v + width] |= u8::from(empty(i.wrapping_sub(1), j)) << 3;
                }
            }
        }
        let (mut outer, mut holes) = (None, Vec::new());
        for start in 0..leaving.len() {
            while leaving[start] != 0 {
                let mut direction = leaving[start].trailing_zeros() as usize;
                let (mut v, first) = (start, direction);
                let place = |v: usize| Point::new(self.xs[v % width], self.ys[v / width]);
                let mut points = vec![place(start)];
                loop {
                    leaving[v] &= !(1 << direction);
                    let (dx, dy) = STEP[direction];
                    v = (v as i64 + dx + dy * width as i64) as usize;
                    let turns = if turn_left_at_contacts {
                        [1, 0, 3]
                    } else {
                        [3, 0, 1]
                    };
                    let next = turns
                        .map(|t| (direction + t) % 4)
                        .into_iter()
                        .find(|&d| leaving[v] & (1 << d) != 0);
                    match next {
                        Some(d) if d == direction => {}
                        Some(d) => {
                            points.push(place(v));
                            direction = d;
                        }
                        None => break,
                    }
                }
                assert_eq!(v, start, "a ring that leaves by {first} comes back");
                let ring = Ring::new(points).expect("at least four points");
                if ring.area_two() > 0 {
                    assert!(outer.replace(ring).is_none(), "one outer ring");
                } else {
                    holes.push(ring);
                }
            }
        }
        Figure::new(outer.expect("a piece has an outer ring"), holes)
    }
}
