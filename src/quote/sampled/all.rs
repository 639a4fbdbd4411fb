//! The pattern that a sample stands for: figures that were not drawn in their places, with what is expected of them.

use crate::geom::{Point, Rect};
use crate::quote::Terms;
use crate::quote::hours::Spread;
use crate::quote::sample::Weights;
use crate::write_time::{Field, Summed, Sums};

use super::known::PlacedSums;
use super::unit::Unit;

/// What every figure adds, drawn or expected.
pub(super) struct All {
    /// By figure: at all its places, on the field; and whether it was drawn.
    sums: Vec<(Sums, bool)>,
    /// By how much the figures not drawn are greater together at the end of the interval, as a share.
    swing: f64,
}

impl All {
    pub(super) fn new(
        weights: &Weights<'_>,
        units: &[Unit<'_>],
        placed: &PlacedSums<'_>,
        terms: &Terms<'_>,
    ) -> Self {
        let sums = |i: usize| placed.sums[i];
        let mut all: Vec<(Sums, bool)> = vec![(Sums::default(), false); units.len()];
        for &(i, _) in weights.of_figures() {
            all[i] = (sums(i), true);
        }
        type Part = (fn(&Sums) -> f64, fn(&mut Sums) -> &mut f64);
        let parts: [Part; 5] = [
            (|s| s.shots, |s| &mut s.shots),
            (|s| s.flashes, |s| &mut s.flashes),
            (|s| s.dose, |s| &mut s.dose),
            (|s| s.jump.0, |s| &mut s.jump.0),
            (|s| s.side.0, |s| &mut s.side.0),
        ];
        for (get, slot) in parts {
            let cost = |i: usize| get(&sums(i));
            let total = weights.total(&cost).value;
            let fitted = weights.fitted(&cost);
            let drawn: f64 = all
                .iter()
                .filter(|(_, drawn)| *drawn)
                .map(|(s, _)| get(s))
                .sum();
            let expected: Vec<f64> = (0..units.len())
                .map(|i| if all[i].1 { 0.0 } else { fitted(i).max(0.0) })
                .collect();
            let of_rest: f64 = expected.iter().sum();
            let scale = if of_rest > 0.0 {
                ((total - drawn) / of_rest).max(0.0)
            } else {
                0.0
            };
            for ((sums, drawn), expected) in all.iter_mut().zip(expected) {
                if !*drawn {
                    *slot(sums) = scale * expected;
                }
            }
        }
        let drawn: f64 = all
            .iter()
            .filter(|(_, drawn)| *drawn)
            .map(|(s, _)| s.time(terms.profile).0)
            .sum();
        let rest = placed.beam.value - drawn;
        Self {
            sums: all,
            swing: if rest > 0.0 {
                placed.beam.half_width / rest
            } else {
                0.0
            },
        }
    }

    /// Where it all stands, the figures not drawn `shift` half widths of the interval away from the estimate.
    pub(super) fn spread<'a>(
        &self,
        units: &[Unit<'a>],
        shift: f64,
        (frame, field): (Rect, Option<Field>),
    ) -> Spread<'a> {
        let factor = |drawn: bool| {
            if drawn {
                1.0
            } else {
                (1.0 + shift * self.swing).max(0.0)
            }
        };
        let sums = self.sums.iter().map(|(sums, drawn)| *sums * factor(*drawn));
        let places = |(sums, unit): (Sums, &Unit<'a>)| {
            let bounds = unit.distinct.figure.bounds();
            let sums = sums * (1.0 / unit.places);
            unit.distinct.places.iter().map(move |place| {
                let bounds = place.transform.apply_rect(bounds);
                Summed {
                    sums,
                    at: Point::new(
                        (bounds.min.x + bounds.max.x) / 2,
                        (bounds.min.y + bounds.max.y) / 2,
                    ),
                    repetition: &place.repetition,
                }
            })
        };
        Spread {
            total: sums.clone().fold(Sums::default(), |all, one| all + one),
            figures: sums.zip(units).flat_map(places).collect(),
            frame,
            field,
        }
    }
}
