//! Which figures stand near a place, found without writing repetitions out.

use crate::geom::{Orientation, Point, Rect, Repetition, Transform};

use super::index::BoxIndex;
use super::repeat::{IndexRange, indices_in};
use super::{Mask, Place};

/// All places of a mask with their bounds, to be asked for those in a window.
#[derive(Clone, Debug)]
pub struct Standings<'a> {
    standings: Vec<Standing<'a>>,
    /// Over their hulls.
    index: BoxIndex,
}

#[derive(Clone, Debug)]
struct Standing<'a> {
    figure: usize,
    place: &'a Place,
    /// Of the figure without displacement, mask axes.
    bounds: Rect,
}

impl<'a> Standings<'a> {
    /// Of every figure of the mask.
    #[must_use]
    pub fn new(mask: &'a Mask) -> Self {
        let (mut standings, mut hulls) = (Vec::new(), Vec::new());
        for (figure, distinct) in mask.figures.iter().enumerate() {
            let own = distinct.figure.bounds();
            for place in &distinct.places {
                let (bounds, span) = (place.transform.apply_rect(own), place.repetition.span());
                hulls.push(Rect {
                    min: bounds.min + span.min,
                    max: bounds.max + span.max,
                });
                standings.push(Standing {
                    figure,
                    place,
                    bounds,
                });
            }
        }
        let index = BoxIndex::new(&hulls);
        Self { standings, index }
    }

    /// Every figure whose bounds touch the window, as its index and own frame → mask, in the order of the mask.
    ///
    /// Cost: the repetitions whose hulls touch the window; of each list its length, of arrays in arrays the elements of all but the
    /// innermost.
    #[must_use]
    pub fn touching(&self, window: Rect) -> Vec<(usize, Transform)> {
        let mut near: Vec<usize> = Vec::new();
        self.index.touching(window, |i| near.push(i));
        near.sort_unstable();
        let mut found = Vec::new();
        for standing in near.into_iter().map(|i| &self.standings[i]) {
            let near = Rect {
                min: window.min - standing.bounds.max,
                max: window.max - standing.bounds.min,
            };
            let mut displacements = Vec::new();
            within(&standing.place.repetition, near, &mut displacements);
            let transform = standing.place.transform;
            found.extend(displacements.into_iter().map(|by| {
                let by = Transform {
                    orientation: Orientation::IDENTITY,
                    shift: by,
                };
                (standing.figure, transform.then(by))
            }));
        }
        found
    }
}

/// The displacements that lie in a window.
fn within(repetition: &Repetition, window: Rect, found: &mut Vec<Point>) {
    match repetition {
        Repetition::Once => found.extend(Some(Point::default()).filter(|&d| window.contains(d))),
        Repetition::List(list) => found.extend(list.iter().filter(|&&d| window.contains(d))),
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let last = |n: u64| i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX);
            let all = IndexRange {
                columns: (0, last(*columns)),
                rows: (0, last(*rows)),
            };
            let Some(range) = indices_in(all, *a, *b, window) else {
                return;
            };
            for j in range.rows.0..=range.rows.1 {
                let row = (range.columns.0..=range.columns.1)
                    .map(|i| Point::new(i * a.x + j * b.x, i * a.y + j * b.y));
                found.extend(row.filter(|&d| window.contains(d)));
            }
        }
        Repetition::Nested(parts) => {
            let Some((innermost, outer)) = parts.split_first() else {
                return;
            };
            let outer = Repetition::nested(outer.to_vec());
            for by in outer.displacements() {
                let from = found.len();
                within(innermost, window.translated(-by), found);
                found[from..].iter_mut().for_each(|d| *d = *d + by);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn displacements_in_a_window_are_those_of_the_whole_list() {
        let lattice = |columns, rows, a, b| Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        };
        let upright = lattice(9, 7, Point::new(10, 0), Point::new(0, 15));
        let skewed = lattice(9, 7, Point::new(10, 3), Point::new(-4, 15));
        let list = Repetition::List(vec![Point::new(5, 5), Point::new(-200, 3)]);
        let nested = Repetition::nested(vec![upright.clone(), list.clone()]);
        let window = Rect::new(Point::new(12, 8), Point::new(41, 60));
        for repetition in [Repetition::Once, upright, skewed, list, nested] {
            let mut found = Vec::new();
            within(&repetition, window, &mut found);
            let mut expected: Vec<Point> = repetition
                .displacements()
                .filter(|&d| window.contains(d))
                .collect();
            found.sort_unstable();
            expected.sort_unstable();
            assert_eq!(found, expected, "{repetition:?}");
        }
    }
}
