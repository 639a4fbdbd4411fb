//! The same thing at many places, counted and not copied.

use super::{Point, Rect, Transform};

/// Spans saturate here: far beyond any mask, and sums of a few stay in range.
const FAR: i64 = 1 << 60;

/// Displacements at which one thing stands, its own place (0, 0) included.
///
/// Units are those of the owner: database units in a layout, picometres in a mask.
#[derive(Clone, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Repetition {
    /// At its own place only.
    #[default]
    Once,
    /// A lattice: `i·a + j·b` for `0 ≤ i < columns`, `0 ≤ j < rows`; both counts at least 1.
    Lattice {
        /// Count along `a`.
        columns: u64,
        /// Count along `b`.
        rows: u64,
        /// Step from column to column.
        a: Point,
        /// Step from row to row.
        b: Point,
    },
    /// Explicit displacements; not empty, the first usually (0, 0).
    List(Vec<Point>),
    /// Sums of one displacement of each, innermost first: arrays of arrays, counted and not copied.
    Nested(Vec<Repetition>),
}

impl Repetition {
    /// Sums of one displacement of each part, written the shortest way.
    #[must_use]
    pub fn nested(parts: Vec<Self>) -> Self {
        let mut parts: Vec<Self> = parts.into_iter().filter(|p| *p != Self::Once).collect();
        match parts.len() {
            0 => Self::Once,
            1 => parts.remove(0),
            _ => Self::Nested(parts),
        }
    }

    /// `i·a + j·b` for `0 ≤ i < columns`, `0 ≤ j < rows`, written the shortest way: counts of one are dropped with their steps.
    #[must_use]
    pub fn lattice(columns: u64, rows: u64, a: Point, b: Point) -> Self {
        match (columns, rows) {
            (0 | 1, 0 | 1) => Self::Once,
            (_, 0 | 1) => Self::Lattice {
                columns,
                rows: 1,
                a,
                b: Point::default(),
            },
            (0 | 1, _) => Self::Lattice {
                columns: rows,
                rows: 1,
                a: b,
                b: Point::default(),
            },
            _ => Self::Lattice {
                columns,
                rows,
                a,
                b,
            },
        }
    }

    /// At how many places; `u128::MAX` stands for that many or more.
    #[must_use]
    pub fn count(&self) -> u128 {
        match self {
            Self::Once => 1,
            Self::Lattice { columns, rows, .. } => u128::from(*columns) * u128::from(*rows),
            Self::List(list) => list.len() as u128,
            Self::Nested(parts) => parts
                .iter()
                .fold(1, |product, part| product.saturating_mul(part.count())),
        }
    }

    /// All displacements, row by row. May be astronomically many: check [`Repetition::count`] first.
    pub fn displacements(&self) -> Box<dyn Iterator<Item = Point> + '_> {
        match self {
            Self::Once => Box::new(std::iter::once(Point::default())),
            Self::Lattice {
                columns,
                rows,
                a,
                b,
            } => Box::new((0..*rows).flat_map(move |j| {
                (0..*columns).map(move |i| {
                    let (i, j) = (
                        i64::try_from(i).unwrap_or(i64::MAX),
                        i64::try_from(j).unwrap_or(i64::MAX),
                    );
                    Point::new(
                        a.x.saturating_mul(i).saturating_add(b.x.saturating_mul(j)),
                        a.y.saturating_mul(i).saturating_add(b.y.saturating_mul(j)),
                    )
                })
            })),
            Self::List(list) => Box::new(list.iter().copied()),
            Self::Nested(parts) => parts.iter().rfold(
                Box::new(std::iter::once(Point::default())) as Box<dyn Iterator<Item = Point>>,
                |outer, part| {
                    Box::new(outer.flat_map(move |d| part.displacements().map(move |e| d + e)))
                },
            ),
        }
    }

    /// Displacements no further than `deep` elements from either end of every array, each once; all of a list.
    #[must_use]
    pub fn ends(&self, deep: u64) -> Vec<Point> {
        match self {
            Self::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                let near = |count: u64| {
                    let last = count.saturating_sub(deep).max(deep)..count;
                    let ends = (0..count.min(deep)).chain(last);
                    ends.map(|i| i64::try_from(i).unwrap_or(i64::MAX))
                };
                let times =
                    |p: &Point, n: i64| Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n));
                let row = |j: i64| near(*columns).map(move |i| times(a, i) + times(b, j));
                near(*rows).flat_map(row).collect()
            }
            Self::Nested(parts) => parts.iter().fold(vec![Point::default()], |sums, part| {
                let ends = part.ends(deep);
                sums.iter()
                    .flat_map(|&sum| ends.iter().map(move |&by| sum + by))
                    .collect()
            }),
            Self::Once | Self::List(_) => self.displacements().collect(),
        }
    }

    /// The least rectangle around all displacements; what lies beyond ±2⁶⁰ is put there.
    #[must_use]
    pub fn span(&self) -> Rect {
        let far = |p: Point| Point::new(p.x.clamp(-FAR, FAR), p.y.clamp(-FAR, FAR));
        let origin = Rect::new(Point::default(), Point::default());
        match self {
            Self::Once => origin,
            Self::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                let times = |p: &Point, n: u64| {
                    let n = i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX);
                    far(Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n)))
                };
                let (a, b) = (times(a, *columns), times(b, *rows));
                Rect::around([Point::default(), a, b, a + b]).unwrap_or(origin)
            }
            Self::List(list) => Rect::around(list.iter().map(|&p| far(p))).unwrap_or(origin),
            Self::Nested(parts) => parts.iter().fold(origin, |sum, part| {
                let span = part.span();
                Rect {
                    min: far(sum.min + span.min),
                    max: far(sum.max + span.max),
                }
            }),
        }
    }

    /// The same displacements turned by the orientation of `t` (its shift does not matter).
    #[must_use]
    pub fn turned(&self, t: Transform) -> Self {
        match self {
            Self::Once => Self::Once,
            Self::Lattice {
                columns,
                rows,
                a,
                b,
            } => Self::Lattice {
                columns: *columns,
                rows: *rows,
                a: t.orientation.apply(*a),
                b: t.orientation.apply(*b),
            },
            Self::List(list) => Self::List(list.iter().map(|&p| t.orientation.apply(p)).collect()),
            Self::Nested(parts) => Self::Nested(parts.iter().map(|p| p.turned(t)).collect()),
        }
    }
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeSet;

    use super::*;

    #[test]
    fn the_span_of_arrays_in_arrays_is_that_of_all_displacements() {
        let lattice = |columns, rows, a, b| Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        };
        let skewed = lattice(3, 2, Point::new(-20, 1), Point::new(5, 30));
        let list = Repetition::List(vec![Point::new(7, 7), Point::new(-100, 3)]);
        for repetition in [
            Repetition::Once,
            skewed.clone(),
            list.clone(),
            Repetition::nested(vec![skewed, list]),
        ] {
            assert_eq!(
                Some(repetition.span()),
                Rect::around(repetition.displacements())
            );
        }
    }

    #[test]
    fn the_ends_of_an_array_are_as_deep_as_asked_and_come_once() {
        let lattice = |columns, rows| Repetition::Lattice {
            columns,
            rows,
            a: Point::new(10, 0),
            b: Point::new(0, 7),
        };
        for (columns, rows, deep, expected) in [
            (1, 1, 3, 1),
            (4, 1, 3, 4),
            (7, 5, 3, 30),
            (1000, 1000, 3, 36),
            (1, 1, 1, 1),
            (9, 1, 1, 2),
            (9, 5, 1, 4),
        ] {
            let ends = lattice(columns, rows).ends(deep);
            let distinct: BTreeSet<Point> = ends.iter().copied().collect();
            assert_eq!((ends.len(), distinct.len()), (expected, expected));
        }
        let nested = Repetition::nested(vec![lattice(9, 1), lattice(1, 2)]);
        assert_eq!(nested.ends(3).len(), 12);
        assert_eq!(
            lattice(9, 5).ends(1),
            [(0, 0), (80, 0), (0, 28), (80, 28)].map(|(x, y)| Point::new(x, y))
        );
    }

    #[test]
    fn a_span_beyond_any_mask_saturates() {
        let endless = Repetition::Lattice {
            columns: u64::MAX,
            rows: 1,
            a: Point::new(1 << 40, 0),
            b: Point::default(),
        };
        let twice = Repetition::nested(vec![endless.clone(), endless]);
        assert_eq!(twice.span().max, Point::new(FAR, 0));
    }
}
