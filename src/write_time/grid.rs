//! Stripes and sub-fields as a grid over the frame, and counts of cells by arithmetic.
//!
//! The one rule for cuts: a border cuts a shot that reaches over it by more than the profile's border reach on both sides; any
//! other shot is flashed whole from the side that holds most of it, since neighbouring fields overlap by that much. So with a
//! reach of the sliver limit no cut leaves a sliver; with less, the slivers that cuts leave are counted.

use crate::geom::{Copies, Line, Rect};
use crate::profile::{Key, Profile};
use crate::units::{Area, Nm};

/// The stripes of one pass, stacked upward from `bottom`, each cut into rows and columns of sub-fields.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Grid {
    frame: Rect,
    left: i64,
    bottom: i64,
    stripe: i64,
    rows_per_stripe: i64,
    column: Option<i64>,
    /// How far a shot may reach over a border uncut.
    reach: i64,
    /// A piece thinner than this is a sliver.
    sliver: i64,
    /// How many stripes touch the frame.
    pub(super) stripes: i64,
}

/// What borders make of a shot: pieces, and how many of them are slivers though the shot is none.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct Pieces<T> {
    pub(super) all: T,
    pub(super) slivers: T,
}

impl Pieces<f64> {
    /// Of a shot that no border cuts.
    pub(super) const UNCUT: Self = Self {
        all: 1.0,
        slivers: 0.0,
    };
}

/// The rows of sub-fields over which borders cut a side.
struct Rows {
    /// From where to where it reaches, pm.
    side: (i64, i64),
    /// Where the part of it ends within which borders cut, pm.
    top: i64,
    first: i64,
    last: i64,
}

/// Rows gathered for one stripe before they are given to it.
#[derive(Default)]
struct Filled {
    stripe: usize,
    rows: u128,
}

impl Filled {
    fn add(&mut self, stripe: usize, rows: u128, give: &mut impl FnMut(usize, u128)) {
        if stripe != self.stripe {
            self.flush(give);
            self.stripe = stripe;
        }
        self.rows += rows;
    }

    fn flush(&mut self, give: &mut impl FnMut(usize, u128)) {
        if self.rows > 0 {
            give(self.stripe, self.rows);
        }
        self.rows = 0;
    }
}

impl Grid {
    /// The grid of each pass; equal ones once, with their number. `frame` is not empty and within ±1 m.
    pub(super) fn of_passes(profile: &Profile, frame: Rect) -> Vec<(u32, Self)> {
        let mut grids: Vec<(u32, Self)> = Vec::new();
        for pass in 0..profile.passes() {
            let shift = (f64::from(pass) * profile.plain(Key::PassShift)).fract();
            let grid = Self::new(profile, frame, shift);
            match grids.iter_mut().find(|(_, g)| *g == grid) {
                Some((times, _)) => *times += 1,
                None => grids.push((1, grid)),
            }
        }
        grids
    }

    /// `shift`: how far the grid starts outside the frame, as a part of a cell.
    fn new(profile: &Profile, frame: Rect, shift: f64) -> Self {
        let pm_of = |key| {
            let um = profile.value(key)?;
            Nm::from_um(um).to_pm()
        };
        let before = |cell: i64| (Nm::from_pm(cell) * shift).to_pm().unwrap_or(0);
        let stated = pm_of(Key::Stripe);
        let stripe = stated.unwrap_or(frame.height());
        let column = pm_of(Key::Subfield);
        let plain_pm = |key| Nm(profile.plain(key)).to_pm().unwrap_or(0);
        let bottom = frame.min.y - stated.map_or(0, before);
        Self {
            frame,
            left: frame.min.x - column.map_or(0, before),
            bottom,
            stripe,
            // Sub-fields share the stripe evenly, so that stripe borders are sub-field borders too.
            rows_per_stripe: column.map_or(1, |side| ceil_div(stripe, side)),
            column,
            reach: plain_pm(Key::BorderReach),
            sliver: plain_pm(Key::Sliver),
            stripes: ceil_div(frame.max.y - bottom, stripe),
        }
    }

    /// Height of the part of a stripe that lies in the frame, pm.
    pub(super) fn height_of(&self, stripe: i64) -> i64 {
        let bottom = self.bottom + stripe * self.stripe;
        (bottom + self.stripe).min(self.frame.max.y) - bottom.max(self.frame.min.y)
    }

    /// Area of that part.
    pub(super) fn area_of(&self, stripe: i64) -> Area {
        Nm::from_pm(self.frame.width()).by(Nm::from_pm(self.height_of(stripe)))
    }

    /// Sub-fields of a stripe within the frame; 0 where the profile states none.
    pub(super) fn subfields_of(&self, stripe: i64) -> u128 {
        let Some(side) = self.column else { return 0 };
        let rows = ceil_div(self.height_of(stripe) * self.rows_per_stripe, self.stripe);
        let columns = ceil_div(self.frame.max.x - self.left, side);
        u128::from(rows.unsigned_abs()) * u128::from(columns.unsigned_abs())
    }

    /// Pieces of all copies of `rect`. `give` gets each stripe with the pieces in it, a stripe more than once where copies come back to it;
    /// what overhangs the frame is written in the nearest stripe.
    pub(super) fn spread(
        &self,
        rect: Rect,
        copies: &Copies<'_>,
        mut give: impl FnMut(usize, u128),
    ) -> Pieces<u128> {
        let wide = rect.width().min(rect.height()) >= self.sliver;
        let mut pieces: Pieces<u128> = Pieces::default();
        for by in copies.rest() {
            let rect = rect.translated(by);
            // Copies above one another are cut by the same columns.
            let columns = self.columns(rect, copies);
            let mut filled = Filled::default();
            copies.up(|start, line| {
                let (mut low, mut left) = (rect.min.y + start, line.count);
                while left > 0 {
                    let rows = self.rows(low, low + rect.height());
                    let alike = self.alike(&rows, line.step).min(left);
                    let times = u128::from(alike);
                    for (stripe, n) in self.by_stripe(&rows) {
                        filled.add(stripe, times * n, &mut |stripe, rows| {
                            give(stripe, rows * columns.all);
                        });
                        let all = columns.all.saturating_mul(times * n);
                        pieces.all = pieces.all.saturating_add(all);
                    }
                    if wide {
                        pieces.slivers += times * self.slivers(&rows, columns);
                    }
                    left -= alike;
                    low += i64::try_from(alike)
                        .unwrap_or(i64::MAX)
                        .saturating_mul(line.step);
                }
            });
            filled.flush(&mut |stripe, rows| give(stripe, rows * columns.all));
        }
        pieces
    }

    fn rows(&self, low: i64, high: i64) -> Rows {
        let uncut = self.uncut(low, high);
        let (first, last) = self.row_span(uncut.0, uncut.1);
        Rows {
            side: (low, high),
            top: uncut.1,
            first,
            last,
        }
    }

    /// How many copies of a side, each `step` above the one before, lie in the one row that the first lies in; 1 where a border cuts it.
    fn alike(&self, rows: &Rows, step: i64) -> u64 {
        let per = self.rows_per_stripe;
        if step == 0 || (rows.first == rows.last && rows.last == self.stripes * per - 1) {
            return u64::MAX;
        }
        if rows.first != rows.last {
            return 1;
        }
        let border = self.bottom + ((rows.last + 1) * self.stripe).div_euclid(per);
        1 + ((border - rows.top) / step).unsigned_abs()
    }

    /// Stripes with the rows of sub-fields in each.
    fn by_stripe(&self, rows: &Rows) -> impl Iterator<Item = (usize, u128)> + use<> {
        let (per, first, last) = (self.rows_per_stripe, rows.first, rows.last);
        (first / per..=last / per).map(move |stripe| {
            let rows = last.min(stripe * per + per - 1) - first.max(stripe * per) + 1;
            let stripe = usize::try_from(stripe).unwrap_or_default();
            (stripe, u128::from(rows.unsigned_abs()))
        })
    }

    /// The first and the last row of sub-fields that an interval of heights lies in.
    fn row_span(&self, low: i64, high: i64) -> (i64, i64) {
        let per = self.rows_per_stripe;
        let last_row = self.stripes * per - 1;
        let first = ((low - self.bottom) * per).div_euclid(self.stripe);
        // The upper side belongs to the row under it.
        let last = ceil_div((high - self.bottom) * per, self.stripe) - 1;
        (first.clamp(0, last_row), last.clamp(0, last_row))
    }

    /// The part of a side within which borders cut it; where there is none, its middle.
    fn uncut(&self, low: i64, high: i64) -> (i64, i64) {
        if high - low > 2 * self.reach {
            (low + self.reach, high - self.reach)
        } else {
            let middle = (low + high).div_euclid(2);
            (middle, middle + 1)
        }
    }

    /// The parts of a side within which a border leaves a sliver.
    fn slim(&self, low: i64, high: i64) -> [(i64, i64); 2] {
        let (from, to) = (low + self.reach, high - self.reach);
        [
            (from, (low + self.sliver).min(to)),
            ((high - self.sliver).max(from), to),
        ]
    }

    /// Columns of sub-fields over which copies of `rect` are cut, summed over the lines across.
    fn columns(&self, rect: Rect, copies: &Copies<'_>) -> Pieces<u128> {
        let (low, high) = self.uncut(rect.min.x, rect.max.x);
        let slim = self.slim(rect.min.x, rect.max.x);
        let mut columns: Pieces<u128> = Pieces::default();
        copies.across(|start, line| {
            let borders = |low, high| self.borders(low + start, high + start, line);
            columns.all += borders(low, high) + u128::from(line.count);
            columns.slivers += slim.iter().map(|s| borders(s.0, s.1)).sum::<u128>();
        });
        columns
    }

    /// Borders of columns strictly between two places, over all copies in a line.
    fn borders(&self, low: i64, high: i64, line: Line) -> u128 {
        let Some(side) = self.column.filter(|_| high > low) else {
            return 0;
        };
        let from = low - self.left;
        let to = high - self.left - 1;
        if line.count == 1 {
            return u128::from((to.div_euclid(side) - from.div_euclid(side)).unsigned_abs());
        }
        let cells = |x: i64| floor_sum(line.count, side, line.step, x);
        (cells(to) - cells(from)).unsigned_abs()
    }

    /// Slivers that borders make of the copies of a shot in these rows, which `columns` cut it into so many columns.
    fn slivers(&self, rows: &Rows, columns: Pieces<u128>) -> u128 {
        let cut = (rows.last - rows.first).unsigned_abs();
        if cut == 0 {
            return columns.slivers;
        }
        let slim = self.slim(rows.side.0, rows.side.1);
        let slim: u64 = slim
            .into_iter()
            .filter(|(low, high)| high > low)
            .map(|(low, high)| self.row_span(low, high))
            .map(|(first, last)| (last - first).unsigned_abs())
            .sum();
        u128::from(cut + 1) * columns.all
            - u128::from(cut + 1 - slim) * (columns.all - columns.slivers)
    }

    /// Cells that a rectangle of this size is cut into on average over all its positions.
    pub(super) fn expected_cells(&self, rect: Rect) -> Pieces<f64> {
        let nm = |pm: i64| Nm::from_pm(pm.max(0)).0;
        let along = |length: i64, cell: Option<f64>| {
            let slim: f64 = self.slim(0, length).iter().map(|s| nm(s.1 - s.0)).sum();
            cell.map_or((1.0, 0.0), |cell| {
                (1.0 + nm(length - 2 * self.reach) / cell, slim / cell)
            })
        };
        let height = nm(self.stripe) / self.rows_per_stripe as f64;
        let (rows, slim_rows) = along(
            rect.height(),
            (self.stripes > 1 || self.rows_per_stripe > 1).then_some(height),
        );
        let (columns, slim_columns) = along(rect.width(), self.column.map(nm));
        let all = rows * columns;
        let wide = rect.width().min(rect.height()) >= self.sliver;
        Pieces {
            all,
            slivers: if wide {
                all - (rows - slim_rows) * (columns - slim_columns)
            } else {
                0.0
            },
        }
    }
}

/// `⌈a / b⌉` for positive `b`.
fn ceil_div(a: i64, b: i64) -> i64 {
    -(-a).div_euclid(b)
}

/// `Σ ⌊(step·i + start) / cell⌋` over `0 ≤ i < count`, exactly and in logarithmic time.
///
/// The Euclid-like reduction of lattice points under a line (Graham, Knuth, Patashnik, *Concrete Mathematics*,
/// section 3.5). `cell` is positive; `count · |step|` and `|start|` below 2⁶².
fn floor_sum(count: u64, cell: i64, step: i64, start: i64) -> i128 {
    let (mut n, mut m) = (i128::from(count), i128::from(cell));
    let (mut a, mut b) = (i128::from(step), i128::from(start));
    let mut sum = 0;
    while n > 0 && m > 0 {
        sum += n * (n - 1) / 2 * a.div_euclid(m) + n * b.div_euclid(m);
        (a, b) = (a.rem_euclid(m), b.rem_euclid(m));
        // Points (i, j) with i < n and 1 ≤ j ≤ (a·i + b)/m, counted by rows j instead of columns i.
        let top = a * n + b;
        (n, b) = (top / m, top % m);
        (m, a) = (a, m);
    }
    sum
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    proptest! {
        #[test]
        fn floor_sum_equals_the_sum_of_floors(count in 0u64..60, cell in 1i64..50, step in -120i64..120, start in -500i64..500) {
            let one_by_one: i128 = (0..i64::try_from(count).unwrap())
                .map(|i| i128::from((step * i + start).div_euclid(cell)))
                .sum();
            prop_assert_eq!(floor_sum(count, cell, step, start), one_by_one);
        }
    }
}
