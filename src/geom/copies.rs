//! The copies of a repetition taken apart along the axes, so that they are counted and not walked.

use std::borrow::Cow;

use super::{Point, Repetition};

/// Copies at 0, `step`, … along one axis, `count` in all; `step` is not negative.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Line {
    pub(crate) count: u64,
    pub(crate) step: i64,
}

impl Line {
    /// The place of the last copy.
    pub(crate) fn last(self) -> i64 {
        let last = i64::try_from(self.count - 1).unwrap_or(i64::MAX);
        self.step.saturating_mul(last)
    }
}

/// Displacements as sums: of one place of each line across, one of each line up, and one of each of the rest. Sums do not depend on
/// the order of their terms, so the lines of all arrays in arrays are taken together.
pub(crate) struct Copies<'a> {
    start: Point,
    /// The longest last.
    across: Vec<Line>,
    /// The longest last.
    up: Vec<Line>,
    /// Lists, and sides of lattices along neither axis: taken copy by copy.
    rest: Vec<Cow<'a, Repetition>>,
}

impl<'a> Copies<'a> {
    pub(crate) fn new(repetition: &'a Repetition) -> Self {
        let mut copies = Self {
            start: Point::default(),
            across: Vec::new(),
            up: Vec::new(),
            rest: Vec::new(),
        };
        copies.take(repetition);
        for lines in [&mut copies.across, &mut copies.up] {
            join(lines);
            lines.sort_unstable_by_key(|line| (line.count, line.step));
        }
        copies
    }

    fn take(&mut self, repetition: &'a Repetition) {
        match repetition {
            Repetition::Once => {}
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                self.take_side(*columns, *a);
                self.take_side(*rows, *b);
            }
            Repetition::List(_) => self.rest.push(Cow::Borrowed(repetition)),
            Repetition::Nested(parts) => parts.iter().for_each(|part| self.take(part)),
        }
    }

    fn take_side(&mut self, count: u64, step: Point) {
        if count == 1 {
            return;
        }
        let last = i64::try_from(count - 1).unwrap_or(i64::MAX);
        let line = |along: i64| Line {
            count,
            step: along.saturating_abs(),
        };
        // Upward and to the right, from the least place on.
        let least = |along: i64| along.min(0).saturating_mul(last);
        match step {
            Point { x, y: 0 } => {
                self.start.x += least(x);
                self.across.push(line(x));
            }
            Point { x: 0, y } => {
                self.start.y += least(y);
                self.up.push(line(y));
            }
            slanted => self.rest.push(Cow::Owned(Repetition::Lattice {
                columns: count,
                rows: 1,
                a: slanted,
                b: Point::default(),
            })),
        }
    }

    /// How many times the longest lines across and up are visited in all.
    pub(crate) fn parts(&self) -> u128 {
        let others = |lines: &[Line]| {
            let others = lines.split_last().map_or(&[][..], |(_, others)| others);
            product(others.iter().map(|line| line.count.into()))
        };
        let rest = product(self.rest.iter().map(|part| part.count()));
        rest.saturating_mul(others(&self.across).saturating_add(others(&self.up)))
    }

    /// Displacements that are no lines along an axis.
    pub(crate) fn rest(&self) -> Box<dyn Iterator<Item = Point> + '_> {
        let start: Box<dyn Iterator<Item = Point>> = Box::new(std::iter::once(self.start));
        self.rest.iter().fold(start, |sums, part| {
            Box::new(sums.flat_map(move |sum| part.displacements().map(move |by| sum + by)))
        })
    }

    /// The longest line across, from each sum of the others on.
    pub(crate) fn across(&self, visit: impl FnMut(i64, Line)) {
        visit_lines(&self.across, visit);
    }

    /// The longest line up, from each sum of the others on.
    pub(crate) fn up(&self, visit: impl FnMut(i64, Line)) {
        visit_lines(&self.up, visit);
    }
}

fn product(counts: impl Iterator<Item = u128>) -> u128 {
    counts.fold(1, u128::saturating_mul)
}

/// Makes one line of two where the second goes on where the first ends.
fn join(lines: &mut Vec<Line>) {
    lines.sort_unstable_by_key(|line| line.step);
    lines.dedup_by(|next, line| {
        let reach = u64::try_from(line.step)
            .ok()
            .and_then(|step| step.checked_mul(line.count));
        let joined = line.count.checked_mul(next.count);
        match (reach == u64::try_from(next.step).ok(), joined) {
            (true, Some(count)) => {
                line.count = count;
                true
            }
            _ => false,
        }
    });
}

fn visit_lines(lines: &[Line], mut visit: impl FnMut(i64, Line)) {
    match lines.split_last() {
        None => visit(0, Line { count: 1, step: 0 }),
        Some((longest, others)) => each_sum(others, 0, &mut |start| visit(start, *longest)),
    }
}

fn each_sum(lines: &[Line], start: i64, visit: &mut dyn FnMut(i64)) {
    let Some((line, others)) = lines.split_first() else {
        return visit(start);
    };
    let mut at = start;
    for _ in 0..line.count {
        each_sum(others, at, visit);
        at += line.step;
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn lattice() -> impl Strategy<Value = Repetition> {
        let step = (-9i64..10, -9i64..10, 0..4).prop_map(|(x, y, kind)| match kind {
            0 => Point::new(x, 0),
            1 => Point::new(0, y),
            2 => Point::new(3 * x, 0),
            _ => Point::new(x, y),
        });
        (1u64..5, 1u64..5, step.clone(), step).prop_map(|(columns, rows, a, b)| {
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            }
        })
    }

    fn sorted(places: impl Iterator<Item = Point>) -> Vec<Point> {
        let mut places: Vec<Point> = places.collect();
        places.sort_unstable();
        places
    }

    proptest! {
        #[test]
        fn lines_and_the_rest_make_all_displacements(
            lattices in prop::collection::vec(lattice(), 1..4),
            listed in prop::collection::vec((-9i64..10, -9i64..10), 0..4),
        ) {
            let mut parts = lattices;
            if !listed.is_empty() {
                let list = listed.into_iter().map(|(x, y)| Point::new(x, y)).collect();
                parts.push(Repetition::List(list));
            }
            let whole = Repetition::nested(parts);
            let copies = Copies::new(&whole);
            let mut made = Vec::new();
            let places = |line: Line| (0..i64::try_from(line.count).unwrap()).map(move |k| k * line.step);
            for by in copies.rest() {
                copies.across(|x, across| {
                    copies.up(|y, up| {
                        for i in places(across) {
                            made.extend(places(up).map(|j| by + Point::new(x + i, y + j)));
                        }
                    });
                });
            }
            prop_assert_eq!(sorted(made.into_iter()), sorted(whole.displacements()));
        }
    }

    #[test]
    fn an_array_of_arrays_that_goes_on_is_one_line() {
        let line = |columns, step| Repetition::Lattice {
            columns,
            rows: 1,
            a: Point::new(step, 0),
            b: Point::default(),
        };
        let whole = Repetition::nested(vec![line(10, 7), line(100, 70), line(3, 7000)]);
        let mut found = Vec::new();
        Copies::new(&whole).across(|start, line| found.push((start, line)));
        assert_eq!(
            found,
            [(
                0,
                Line {
                    count: 3000,
                    step: 7
                }
            )]
        );
    }
}
