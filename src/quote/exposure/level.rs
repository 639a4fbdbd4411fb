//! What the correction found, and the level that edges see with the doses as they were handed out.

use std::borrow::Cow;

use crate::expose::{self, Density};
use crate::geom::Rect;
use crate::quote::result::DoseMap;
use crate::units::Dose;

use super::{LongRange, Portion, charge, middle};

/// What edges see.
struct Seen<'a> {
    /// Backscatter of what is written.
    back: &'a Density,
    /// The doses of the correction.
    dose: &'a Density,
    /// Of the forward and all other parts.
    total: f64,
    /// Greatest distance from the threshold, a share of it.
    error: f64,
    least: f64,
    greatest: f64,
}

impl Seen<'_> {
    /// A wide edge in the middle of a rectangle that was given this dose.
    fn look(&mut self, rect: Rect, dose: f64) {
        let level = (dose + 2.0 * self.back.at_point(middle(rect))) / self.total;
        self.error = self.error.max((level - 1.0).abs());
        (self.least, self.greatest) = (self.least.min(dose), self.greatest.max(dose));
    }

    /// Shots with doses of their own one by one, others in the middle of the figure at the ends of its arrays.
    fn look_at(&mut self, portion: &Portion<'_>) {
        let rects = portion.shots.rects().map(|(rect, _)| rect);
        match &portion.shots {
            Cow::Owned(_) => {
                for rect in rects {
                    let rect = portion.transform.apply_rect(rect);
                    self.look(rect, self.dose.at_point(middle(rect)));
                }
            }
            Cow::Borrowed(_) => {
                let Some(bounds) = rects.reduce(Rect::hull) else {
                    return;
                };
                let bounds = portion.transform.apply_rect(bounds);
                for by in portion.repetition.ends(1) {
                    self.look(bounds.translated(by), portion.dose.0);
                }
            }
        }
    }
}

impl LongRange {
    /// Of placed shots at the doses they were given; `coverage` and `found` are what these came from.
    pub(super) fn summary(
        &self,
        coverage: &Density,
        found: &expose::Correction,
        portions: &[Option<Vec<Portion<'_>>>],
    ) -> DoseMap {
        // Beyond the frame, and in what cells reach beyond it, stands what the correction took there.
        let mut written = coverage.emptied().times(&found.dose);
        let all = || portions.iter().flatten().flatten();
        for portion in all() {
            let placed: Vec<(Rect, Dose)> = portion
                .shots
                .rects()
                .map(|(rect, dose)| (portion.transform.apply_rect(rect), dose * portion.dose.0))
                .collect();
            written.add_repeated(&placed, &portion.repetition);
        }
        let mut seen = Seen {
            back: &expose::backscattered(&written, &self.terms),
            dose: &found.dose,
            total: 1.0 + self.ratio(),
            error: 0.0,
            least: f64::INFINITY,
            greatest: 0.0,
        };
        let (mut corrected, mut plain) = (0.0, 0.0);
        for portion in all() {
            seen.look_at(portion);
            let copies = portion.repetition.count() as f64;
            let area = charge(&portion.shots);
            corrected += copies * area * portion.dose.0;
            plain += copies * area * portion.dose.0 / portion.mean.0;
        }
        let [low, high] = found.uncorrected_where_written(coverage);
        DoseMap {
            mesh_nm: coverage.mesh().0,
            wanted_mesh_nm: self.wanted_mesh().map_or(f64::INFINITY, |mesh| mesh.0),
            surroundings: coverage.around(),
            least_dose: seen.least,
            greatest_dose: seen.greatest,
            mean_dose: corrected / plain,
            uncorrected_level: [low, high],
            level_error: seen.error,
            rounds: found.rounds,
        }
    }
}
