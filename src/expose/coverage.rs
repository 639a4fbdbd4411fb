//! Shots onto a density map: every cell gets the exact share of its area, times the dose. Repetitions are counted, not copied.

use crate::geom::{Point, Rect, Repetition};
use crate::units::{Dose, Nm};

use super::density::Density;
use super::dose::count;

/// Copies along one axis: how many, and the step from one to the next (pm).
type Steps = (u64, i64);

/// A first cell and the lengths of cells that are covered from there on, in cells; copies counted.
type Profile = (usize, Vec<f64>);

impl Density {
    /// Adds one shot (pm) of a dose.
    ///
    /// Dose 1 gives the plain coverage; where shots overlap it counts twice, as it is flashed.
    pub fn add(&mut self, shot: Rect, dose: Dose) {
        self.add_repeated(&[(shot, dose)], &Repetition::Once);
    }

    /// Adds shots (pm) with their doses at all displacements of a repetition (pm).
    ///
    /// An upright array costs the cells that it covers for each shot, whatever the number of its copies; so do arrays of it.
    /// Elsewhere a copy that lies within one cell costs one addition for all its shots.
    pub fn add_repeated(&mut self, shots: &[(Rect, Dose)], repetition: &Repetition) {
        let Some(bounds) = shots.iter().map(|(rect, _)| *rect).reduce(Rect::hull) else {
            return;
        };
        let charge = shots
            .iter()
            .map(|(rect, dose)| dose.0 * rect.area_nm2())
            .sum::<f64>();
        let group = Group {
            shots,
            bounds,
            share: charge / (self.mesh * self.mesh),
        };
        self.add_at(&group, repetition, Point::default());
    }

    fn add_at(&mut self, group: &Group<'_>, repetition: &Repetition, at: Point) {
        let (mut across, mut up) = (Vec::new(), Vec::new());
        if upright(repetition, &mut across, &mut up) {
            return self.add_array(group, &across, &up, at);
        }
        match repetition {
            // One axis at most is slanted: row by row, or column by column.
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                let (line, times, step) = if a.x == 0 || a.y == 0 {
                    (line(*columns, *a), *rows, *b)
                } else if b.x == 0 || b.y == 0 {
                    (line(*rows, *b), *columns, *a)
                } else {
                    for by in repetition.displacements() {
                        self.add_at(group, &Repetition::Once, at + by);
                    }
                    return;
                };
                let mut by = at;
                for _ in 0..times {
                    self.add_at(group, &line, by);
                    by = by + step;
                }
            }
            Repetition::Nested(parts) => {
                if let Some((outermost, inner)) = parts.split_last() {
                    let inner = Repetition::nested(inner.to_vec());
                    for by in outermost.displacements() {
                        self.add_at(group, &inner, at + by);
                    }
                }
            }
            Repetition::Once | Repetition::List(_) => {
                for by in repetition.displacements() {
                    self.add_at(group, &Repetition::Once, at + by);
                }
            }
        }
    }

    /// All copies of all shots that stand at sums of these steps.
    fn add_array(&mut self, group: &Group<'_>, across: &[Steps], up: &[Steps], at: Point) {
        let span = |steps: &[Steps]| {
            steps.iter().fold((0, 0), |(low, high), &(n, step)| {
                let far = step.saturating_mul(i64::try_from(n - 1).unwrap_or(i64::MAX));
                (low + far.min(0), high + far.max(0))
            })
        };
        let ((left, right), (low, high)) = (span(across), span(up));
        let from = group.bounds.min + at + Point::new(left, low) - self.origin;
        let to = group.bounds.max + at + Point::new(right, high) - self.origin;
        let cell = |from: i64, to: i64, axis: usize| {
            let (first, end) = (self.cells_along(from), self.cells_along(to));
            let (k, next) = self.folds[axis].kept(count(first));
            let within = first >= 0.0 && k < self.size()[axis] && end <= first.floor() + 1.0;
            (within && next == k + 1).then_some(k)
        };
        if let (Some(i), Some(j)) = (cell(from.x, to.x, 0), cell(from.y, to.y, 1)) {
            let copies = |steps: &[Steps]| steps.iter().map(|s| s.0 as f64).product::<f64>();
            self.cells[j * self.columns + i] += group.share * copies(across) * copies(up);
            return;
        }
        for (rect, dose) in group.shots {
            let rect = rect.translated(at - self.origin);
            let (i, widths) = self.profile(rect.min.x, rect.max.x, across, 0);
            let (j, heights) = self.profile(rect.min.y, rect.max.y, up, 1);
            for (row, height) in (j..).zip(&heights) {
                let height = dose.0 * height;
                let cells = &mut self.cells[row * self.columns + i..];
                for (cell, width) in cells.iter_mut().zip(&widths) {
                    *cell += height * width;
                }
            }
        }
    }

    /// A length from the origin, in cells.
    fn cells_along(&self, pm: i64) -> f64 {
        Nm::from_pm(pm).0 / self.mesh
    }

    /// How much of each cell all copies of `[from, to]` (pm from the origin) cover along one axis.
    fn profile(&self, from: i64, to: i64, steps: &[Steps], axis: usize) -> Profile {
        let mut steps = steps.to_vec();
        steps.retain(|s| s.0 > 1);
        steps.sort_unstable();
        // The longest array in closed form, the others copy by copy.
        let (n, step) = steps.pop().unwrap_or((1, 0));
        let mut starts = vec![from];
        for (count, step) in steps {
            let one = starts.clone();
            let mut by = 0_i64;
            for _ in 1..count {
                by = by.saturating_add(step);
                starts.extend(one.iter().map(|x| x.saturating_add(by)));
            }
        }
        let far = step.saturating_mul(i64::try_from(n - 1).unwrap_or(i64::MAX));
        // Runs from left to right, in cells.
        let runs: Vec<Run> = starts
            .iter()
            .map(|x| Run {
                first: self.cells_along(x.saturating_add(far.min(0))),
                step: self.cells_along(step.abs()),
                width: self.cells_along(to - from),
                copies: n,
            })
            .collect();
        let low = runs.iter().map(|r| r.first).fold(f64::INFINITY, f64::min);
        let high = runs.iter().map(Run::end).fold(f64::NEG_INFINITY, f64::max);
        let (folds, cells) = (&self.folds[axis], self.size()[axis]);
        let first_of = |at: f64| folds.kept(count(at)).0;
        let end_of = |at: f64| {
            count(at.ceil())
                .checked_sub(1)
                .map_or(0, |k| folds.kept(k).1)
        };
        let first = first_of(low).min(cells);
        let end = end_of(high).min(cells).max(first);
        let mut widths = vec![0.0; end - first];
        for run in &runs {
            let own = first_of(run.first).clamp(first, end)..end_of(run.end()).clamp(first, end);
            let mut border = if own.start > first {
                Passed::default()
            } else {
                run.upto(folds.stretch(first).0 as f64)
            };
            let mut k = own.start;
            while k < own.end {
                // All cells of a fold get the mean of what it covers.
                let (start, whole) = folds.stretch(k);
                let next = run.upto((start + whole) as f64);
                let covered = (next.whole - border.whole) * run.width + (next.part - border.part);
                for _ in 0..folds.kept(start).1 - k {
                    widths[k - first] += covered / whole as f64;
                    k += 1;
                }
                border = next;
            }
        }
        (first, widths)
    }
}

/// Shots that stand together.
struct Group<'a> {
    shots: &'a [(Rect, Dose)],
    bounds: Rect,
    /// Dose times area of all, in cells.
    share: f64,
}

/// Copies of one interval at equal steps, in cells.
struct Run {
    first: f64,
    step: f64,
    width: f64,
    copies: u64,
}

/// What lies left of a border: copies that are over, and the covered length of those that are not.
#[derive(Clone, Copy, Default)]
struct Passed {
    whole: f64,
    part: f64,
}

impl Run {
    fn end(&self) -> f64 {
        self.first + self.step * (self.copies - 1) as f64 + self.width
    }

    /// Counted apart from the parts, so that a difference over many copies stays exact.
    fn upto(&self, border: f64) -> Passed {
        let (n, reach) = (self.copies as f64, border - self.first);
        if self.step == 0.0 {
            return Passed {
                whole: 0.0,
                part: n * reach.clamp(0.0, self.width),
            };
        }
        let whole = ((reach - self.width) / self.step + 1.0)
            .floor()
            .clamp(0.0, n);
        let begun = (reach / self.step).ceil().clamp(0.0, n);
        let mut part = 0.0;
        let mut k = whole;
        while k < begun {
            part += (reach - k * self.step).clamp(0.0, self.width);
            k += 1.0;
        }
        Passed { whole, part }
    }
}

/// Takes a repetition apart into steps across and up, if all its displacements are sums of such.
fn upright(repetition: &Repetition, across: &mut Vec<Steps>, up: &mut Vec<Steps>) -> bool {
    let mut along = |n: u64, step: Point| match step {
        _ if n == 1 => true,
        Point { x, y: 0 } => {
            across.push((n, x));
            true
        }
        Point { x: 0, y } => {
            up.push((n, y));
            true
        }
        Point { .. } => false,
    };
    match repetition {
        Repetition::Once => true,
        Repetition::List(_) => false,
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => along(*columns, *a) && along(*rows, *b),
        Repetition::Nested(parts) => parts.iter().all(|part| upright(part, across, up)),
    }
}

fn line(columns: u64, a: Point) -> Repetition {
    Repetition::Lattice {
        columns,
        rows: 1,
        a,
        b: Point::default(),
    }
}
