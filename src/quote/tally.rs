//! The numbers of a whole mask from figures that stand for others.

use crate::judge::{Background, Fidelity};
use crate::mask::DistinctFigure;
use crate::units::Nm;

use super::exposure::Exposed;
use super::made::{Made, Unmade};
use super::result::{Count, FractureSummary};
use super::summary;

/// Figures added up, each by its weight. What a weight makes a fraction of is rounded at the end.
#[derive(Clone, Debug, Default)]
pub(super) struct Tally {
    fidelity: Fidelity,
    shots: f64,
    slivers: f64,
    distinct: f64,
    failing: f64,
    smallest: Option<Nm>,
    peak: f64,
}

/// Weights in scores are rounded to whole parts of one: they add up in whole numbers.
const PARTS: f64 = 64.0;

impl Tally {
    /// Adds a figure that stands for `weight` figures, counted by `scores` in what is judged, at the doses of its places.
    pub(super) fn add(
        &mut self,
        (distinct, number): (&DistinctFigure, usize),
        made: &Result<Made, Unmade>,
        (weight, scores): (f64, f64),
        (exposed, background): (&Exposed<'_>, Background),
        sliver: Nm,
    ) {
        let Ok(made) = made else {
            self.failing += weight;
            return;
        };
        let places = distinct.place_count() as f64;
        let list = &made.fracture.shots;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates; a weight under 0 counts as none"
        )]
        let times = (PARTS * scores).round() as u64;
        exposed.merge(
            number,
            (&made.fidelity, background, times),
            &mut self.fidelity,
        );
        self.shots += weight * places * list.len() as f64;
        self.slivers += weight * places * list.slivers(sliver) as f64;
        self.distinct += weight * list.len() as f64;
        if !made.fidelity.prints_within_tolerance() {
            self.failing += weight;
        }
        self.peak = self.peak.max(made.peak.0);
        let side = list.smallest_side();
        self.smallest = match (self.smallest, side) {
            (Some(a), Some(b)) => Some(if b < a { b } else { a }),
            (a, b) => a.or(b),
        };
    }

    /// Hours are left to be filled in.
    pub(super) fn summary(&self) -> FractureSummary {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates"
        )]
        let whole = |sum: f64| sum.round() as u64;
        // A figure that fails is not rounded away.
        let failing = whole(self.failing.ceil());
        FractureSummary {
            shots: Count::rounded(self.shots),
            shots_distinct: whole(self.distinct),
            smallest_side_nm: self.smallest.map(|side| side.0),
            slivers: Count::rounded(self.slivers),
            prints_within_tolerance: Some(failing == 0),
            figures_out_of_tolerance: Some(failing),
            peak_dose: (self.shots > 0.0).then_some(self.peak),
            ..summary::of_fidelity(&self.fidelity.summary())
        }
    }
}
