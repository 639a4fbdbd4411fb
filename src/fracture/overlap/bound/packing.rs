//! The linear program behind the bound: most weight on the places such that no hull holds more than 1 of it.
//!
//! Cutting planes: the program is solved for a few hulls, those that hold too much are added, and so on (dual simplex on the
//! condensed tableau, which has as many columns as there are places). Whatever weights are reached, divided by the most that
//! a hull holds of them they keep the rule for all hulls: so the bound holds wherever the iteration stops and whatever it rounds.

use super::hulls::Shares;

/// Rounds of cutting planes.
const ROUNDS: usize = 60;

/// Pivots in one round.
const PIVOTS: usize = 2000;

/// Numbers nearer to zero count as zero.
const ZERO: f64 = 1e-9;

/// A cell this near to zero is no pivot.
const SMALLEST_PIVOT: f64 = 1e-7;

/// Taken off before rounding up, for what double precision may lose in sums and for what far shots add; relative and absolute.
const LOST: f64 = 1e-6;

/// Weights of the places such that no hull holds more than 1, as great in total as was found worth the time.
pub(super) fn weights(shares: &Shares) -> Vec<f64> {
    let mut tableau = Tableau::new(shares.places);
    let mut best = (0.0, vec![0.0; shares.places]);
    for _ in 0..ROUNDS {
        let optimal = tableau.optimise();
        let mut weights = tableau.weights();
        let total: f64 = weights.iter().sum();
        let (most, heavy) = held(shares, &weights);
        let most = most.max(1.0);
        if total / most > best.0 {
            weights.iter_mut().for_each(|u| *u /= most);
            best = (total / most, weights);
        }
        // The program with all hulls allows no more than that with some.
        if !optimal || heavy.is_empty() || whole(best.0) >= whole(total) {
            break;
        }
        tableau.drop_slack();
        for row in heavy {
            tableau.cut(&shares.rows[row * shares.places..][..shares.places]);
        }
    }
    best.1
}

/// The least number of shots that a total weight proves.
pub(super) fn whole(total: f64) -> usize {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "at most the number of places; negative saturates to 0"
    )]
    let count = (total * (1.0 - LOST) - LOST).ceil() as usize;
    count
}

/// The most that a hull holds, and the hulls over 1 that hold most among those that do half for the same place.
fn held(shares: &Shares, weights: &[f64]) -> (f64, Vec<usize>) {
    let mut most = 0.0_f64;
    let mut heaviest: Vec<(f64, Option<usize>)> = vec![(1.0 + ZERO.sqrt(), None); shares.places];
    for (i, row) in shares.rows.chunks_exact(shares.places).enumerate() {
        let total: f64 = row
            .iter()
            .zip(weights)
            .map(|(&a, u)| f64::from(a) * u)
            .sum();
        most = most.max(total);
        if total > 1.0 + ZERO.sqrt() {
            for (best, _) in heaviest.iter_mut().zip(row).filter(|(_, a)| **a >= 0.5) {
                if total > best.0 {
                    *best = (total, Some(i));
                }
            }
        }
    }
    let mut heavy: Vec<usize> = heaviest.into_iter().filter_map(|(_, i)| i).collect();
    heavy.sort_unstable();
    heavy.dedup();
    (most, heavy)
}

/// Weights up to `places`, slacks from there on: every row gives one variable as `right side − Σ cell·column variable`.
struct Tableau {
    places: usize,
    /// Variables of the rows.
    basic: Vec<usize>,
    /// Variables of the columns, all at 0.
    columns: Vec<usize>,
    /// Rows of one cell a column and the right side.
    rows: Vec<Vec<f64>>,
    /// The total weight in the same form; its cells are never negative.
    total: Vec<f64>,
    variables: usize,
}

impl Tableau {
    /// Every weight at most 1 (a hull prints most places alone) and nothing else asked.
    fn new(places: usize) -> Self {
        let row = |p: usize| {
            let mut row = vec![0.0; places + 1];
            row[p] = 1.0;
            row[places] = 1.0;
            row
        };
        let mut total = vec![1.0; places + 1];
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        {
            total[places] = places as f64;
        }
        Self {
            places,
            basic: (0..places).collect(),
            columns: (places..2 * places).collect(),
            rows: (0..places).map(row).collect(),
            total,
            variables: 2 * places,
        }
    }

    /// Adds `Σ share·weight ≤ 1`.
    fn cut(&mut self, shares: &[f32]) {
        let mut cut = vec![0.0; self.places + 1];
        cut[self.places] = 1.0;
        for (row, &variable) in self.rows.iter().zip(&self.basic) {
            if let Some(&a) = shares.get(variable).filter(|a| **a > 0.0) {
                subtract(&mut cut, row, f64::from(a));
            }
        }
        for (cell, &variable) in cut.iter_mut().zip(&self.columns) {
            *cell += shares.get(variable).map_or(0.0, |&a| f64::from(a));
        }
        self.rows.push(cut);
        self.basic.push(self.variables);
        self.variables += 1;
    }

    /// Dual simplex: until no variable is negative. Whether that was reached.
    fn optimise(&mut self) -> bool {
        for _ in 0..PIVOTS {
            let right = |row: &Vec<f64>| row[self.places];
            let Some(r) = (0..self.rows.len())
                .filter(|&r| right(&self.rows[r]) < -ZERO)
                .min_by(|&r, &s| right(&self.rows[r]).total_cmp(&right(&self.rows[s])))
            else {
                return true;
            };
            let Some(c) = self.entering(&self.rows[r]) else {
                return false;
            };
            self.exchange(r, c);
        }
        false
    }

    /// The column whose variable may grow until that of the row is 0: of those about equally good, the one with the greatest cell, as
    /// small ones ruin the tableau.
    fn entering(&self, row: &[f64]) -> Option<usize> {
        let open = || (0..self.places).filter(|&j| row[j] < -SMALLEST_PIVOT);
        let least = open()
            .map(|j| (self.total[j].max(0.0) + ZERO) / -row[j])
            .fold(f64::INFINITY, f64::min);
        open()
            .filter(|&j| self.total[j] <= least * -row[j])
            .min_by(|&j, &k| row[j].total_cmp(&row[k]))
    }

    /// Swaps the variable of a row for that of a column.
    fn exchange(&mut self, r: usize, c: usize) {
        let pivot = self.rows[r][c];
        let mut swapped = std::mem::take(&mut self.rows[r]);
        swapped[c] = 1.0;
        swapped.iter_mut().for_each(|cell| *cell /= pivot);
        for row in self.rows.iter_mut().chain([&mut self.total]) {
            // The row taken out is empty.
            let Some(factor) = row.get_mut(c).map(std::mem::take).filter(|f| *f != 0.0) else {
                continue;
            };
            subtract(row, &swapped, factor);
        }
        self.rows[r] = swapped;
        std::mem::swap(&mut self.basic[r], &mut self.columns[c]);
    }

    /// Drops the cuts that hold with room to spare.
    fn drop_slack(&mut self) {
        let spare = |r: usize| self.basic[r] >= self.places && self.rows[r][self.places] > 0.05;
        let kept: Vec<usize> = (0..self.rows.len()).filter(|&r| !spare(r)).collect();
        self.basic = kept.iter().map(|&r| self.basic[r]).collect();
        self.rows = kept
            .iter()
            .map(|&r| std::mem::take(&mut self.rows[r]))
            .collect();
    }

    /// The weights, none negative.
    fn weights(&self) -> Vec<f64> {
        let mut weights = vec![0.0; self.places];
        for (row, &variable) in self.rows.iter().zip(&self.basic) {
            if let Some(weight) = weights.get_mut(variable) {
                *weight = row[self.places].max(0.0);
            }
        }
        weights
    }
}

fn subtract(row: &mut [f64], other: &[f64], factor: f64) {
    for (a, b) in row.iter_mut().zip(other) {
        *a -= factor * b;
    }
}
