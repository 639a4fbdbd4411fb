//! Places of one figure parted by the dose that they need.

use std::borrow::Cow;
use std::collections::BTreeMap;

use crate::expose::Density;
use crate::geom::{Orientation, Point, Rect, Repetition, Transform};
use crate::mask::Place;
use crate::shot::{Shot, ShotList};
use crate::units::{Dose, Nm};

use super::{Portion, middle};

/// Doses nearer than this share of each other are one: a thousandth moves an edge by a tenth of its margin.
const STEP: f64 = 1e-3;

/// Copies of figures larger than a cell that get a dose for each shot, in shots; what is beyond gets one for each copy.
const MOST_SHOTS: usize = 10_000_000;

/// Splits the places of one figure by dose.
pub(super) struct Splitter<'a, 'm> {
    dose: &'m Density,
    shots: &'a ShotList,
    place: Transform,
    /// Of the figure without displacement, mask axes.
    bounds: Rect,
    /// Copies that stand alone, by dose in steps.
    singles: BTreeMap<i64, Vec<(Point, f64)>>,
    portions: Vec<Portion<'a>>,
}

impl<'a, 'm> Splitter<'a, 'm> {
    /// Of a figure with these bounds in its own frame.
    pub(super) fn new(dose: &'m Density, shots: &'a ShotList, bounds: Rect, place: &Place) -> Self {
        Self {
            dose,
            shots,
            place: place.transform,
            bounds: place.transform.apply_rect(bounds),
            singles: BTreeMap::new(),
            portions: Vec::new(),
        }
    }

    /// The portions of a repetition.
    pub(super) fn parted(mut self, repetition: &Repetition) -> Vec<Portion<'a>> {
        self.split(repetition, Point::default());
        self.done()
    }

    fn split(&mut self, repetition: &Repetition, shift: Point) {
        let span = repetition.span();
        // A figure that is small against the mesh has one dose, that of its middle.
        let own = if self.is_large() {
            self.bounds
        } else {
            let middle = middle(self.bounds);
            Rect::new(middle, middle)
        };
        let window = Rect {
            min: own.min + shift + span.min,
            max: own.max + shift + span.max,
        };
        let even = self.dose.even_in(window, STEP);
        if let Some(dose) = even.filter(|_| *repetition != Repetition::Once) {
            return self.push(repetition.clone(), shift, Dose(dose));
        }
        match repetition {
            Repetition::Once => self.single(shift, even.is_none()),
            Repetition::List(list) => {
                for by in list {
                    self.split(&Repetition::Once, shift + *by);
                }
            }
            &Repetition::Lattice { a, b, .. } => {
                let along = [a, b].map(|step| self.change_along(repetition, step, shift));
                for (half, by) in halves(repetition, along) {
                    self.split(&half, shift + by);
                }
            }
            Repetition::Nested(parts) => {
                let Some((outermost, inner)) = parts.split_last() else {
                    return self.split(&Repetition::Once, shift);
                };
                let parts: Vec<(Repetition, Point)> = match outermost {
                    &Repetition::Lattice { a, b, .. } => {
                        let along = [a, b].map(|step| self.change_along(outermost, step, shift));
                        halves(outermost, along)
                    }
                    _ => {
                        let each = outermost.displacements();
                        each.map(|by| (Repetition::Once, by)).collect()
                    }
                };
                for (part, by) in parts {
                    let mut all = inner.to_vec();
                    all.push(part);
                    self.split(&Repetition::nested(all), shift + by);
                }
            }
        }
    }

    /// How much the dose changes along one side of an array, through its middle.
    fn change_along(&self, array: &Repetition, step: Point, shift: Point) -> f64 {
        let &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } = array
        else {
            return 0.0;
        };
        let last = |n: u64| i64::try_from(n - 1).unwrap_or(i64::MAX);
        let times = |p: Point, n: i64| Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n));
        let (n, other) = if step == a {
            (last(columns), times(b, last(rows) / 2))
        } else {
            (last(rows), times(a, last(columns) / 2))
        };
        let at = |k: i64| {
            let by = shift + other + times(step, k);
            self.dose.at_point(middle(self.bounds.translated(by)))
        };
        let ends = [at(0), at(n / 2), at(n)];
        let [low, high] = ends
            .iter()
            .fold([f64::INFINITY, f64::NEG_INFINITY], |[l, h], d| {
                [l.min(*d), h.max(*d)]
            });
        high - low
    }

    fn is_large(&self) -> bool {
        let longest = self.bounds.width().max(self.bounds.height());
        Nm::from_pm(longest).0 > self.dose.mesh().0
    }

    /// One copy; if the dose changes over a large one, each of its shots gets its own.
    fn single(&mut self, shift: Point, changes: bool) {
        let many = (self.portions.len() + 1) * self.shots.len() > MOST_SHOTS;
        if !(changes && self.is_large()) || self.shots.is_empty() || many {
            let dose = self.dose.at_point(middle(self.bounds.translated(shift)));
            #[allow(
                clippy::cast_possible_truncation,
                reason = "a float to integer cast saturates"
            )]
            let step = (dose.ln() / STEP).round() as i64;
            return self.singles.entry(step).or_default().push((shift, dose));
        }
        let transform = self.moved(shift);
        let mut sum = 0.0;
        let corrected = |shot: &Shot| {
            let at = middle(transform.apply_rect(self.shots.rect(shot)));
            let dose = self.dose.at_point(at);
            sum += dose;
            Shot {
                dose: shot.dose * dose,
                ..*shot
            }
        };
        let shots: Vec<Shot> = self.shots.shots().iter().map(corrected).collect();
        let mean = Dose(sum / shots.len() as f64);
        self.portions.push(Portion {
            shots: Cow::Owned(ShotList::new(self.shots.address(), shots)),
            transform,
            repetition: Cow::Owned(Repetition::Once),
            dose: Dose(1.0),
            mean,
        });
    }

    fn moved(&self, shift: Point) -> Transform {
        self.place.then(Transform {
            orientation: Orientation::IDENTITY,
            shift,
        })
    }

    fn push(&mut self, repetition: Repetition, shift: Point, dose: Dose) {
        self.portions.push(Portion {
            shots: Cow::Borrowed(self.shots),
            transform: self.moved(shift),
            repetition: Cow::Owned(repetition),
            dose,
            mean: dose,
        });
    }

    /// All portions; single copies of like dose together, at their mean dose.
    fn done(mut self) -> Vec<Portion<'a>> {
        for (_, copies) in std::mem::take(&mut self.singles) {
            let mean = copies.iter().map(|(_, dose)| dose).sum::<f64>() / copies.len() as f64;
            let first = copies[0].0;
            let repetition = match copies.len() {
                1 => Repetition::Once,
                _ => Repetition::List(copies.iter().map(|(shift, _)| *shift - first).collect()),
            };
            self.push(repetition, first, Dose(mean));
        }
        self.portions
    }
}

/// An array cut in two across the side along which the dose changes more, of equal ones the longer; a single copy is no array.
fn halves(repetition: &Repetition, change: [f64; 2]) -> Vec<(Repetition, Point)> {
    let &Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    } = repetition
    else {
        return vec![(repetition.clone(), Point::default())];
    };
    let part = |columns: u64, rows: u64| {
        if columns * rows == 1 {
            Repetition::Once
        } else {
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            }
        }
    };
    let times = |p: Point, n: u64| {
        let n = i64::try_from(n).unwrap_or(i64::MAX);
        Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n))
    };
    let first = change[0] > change[1] || (change[0] == change[1] && columns >= rows);
    if columns > 1 && (first || rows == 1) {
        let left = columns / 2;
        vec![
            (part(left, rows), Point::default()),
            (part(columns - left, rows), times(a, left)),
        ]
    } else if rows > 1 {
        let low = rows / 2;
        vec![
            (part(columns, low), Point::default()),
            (part(columns, rows - low), times(b, low)),
        ]
    } else {
        vec![(Repetition::Once, Point::default())]
    }
}
