//! Figures to look at or to send back, each with place, number and remedy.

use std::sync::Arc;

use rayon::prelude::*;

use crate::blur::{CORNER_PULL_BACK, NARROWEST_LINE, NARROWEST_SQUARE, THRESHOLD};
use crate::fracture::MissReason;
use crate::geom::Point;
use crate::mask::DistinctFigure;
use crate::number::brief as number;
use crate::target::Need;
use crate::units::{Dose, Nm, Seconds};
use crate::write_time::Field;

use super::Clip;
use super::made::{Made, MadeMask, Setup, Unmade, first_place};
use super::result::{ByMethod, Flag, FlagKind, Method};
use super::summary::beyond_limits;
use super::width::widest_under;

/// A figure costs more than its share if it takes over this many times the mask's median time per outline …
const TIMES_MEDIAN: f64 = 3.0;
/// … and at least this share of all flashing and settling.
const LEAST_SHARE: f64 = 0.01;

/// A peak found is right to this.
const PEAK_ERROR: f64 = 2e-3;

/// What flags are found in.
pub(super) struct Evidence<'a> {
    pub(super) clips: &'a [Clip<'a>],
    /// By clip.
    pub(super) made: &'a [ByMethod<Arc<MadeMask>>],
    /// By clip.
    pub(super) seconds: &'a [ByMethod<Vec<Option<f64>>>],
    pub(super) field: Option<Field>,
    pub(super) recommended: Option<Method>,
    pub(super) setup: &'a Setup,
    pub(super) peak_dose: Option<Dose>,
    /// Flashing and settling of the recommended fracture, where the figures made are only some of all.
    pub(super) beam: Option<Seconds>,
}

/// All flags: what cannot print first, what only costs last; within a kind the gravest first.
pub(super) fn find(evidence: &Evidence<'_>) -> Vec<Flag> {
    let mut flags = costly(evidence);
    let subjects: Vec<Subject<'_>> = subjects(evidence).collect();
    let found: Vec<Vec<Flag>> = subjects.par_iter().map(|s| s.all(evidence)).collect();
    flags.extend(found.into_iter().flatten());
    let rank = |kind| match kind {
        FlagKind::BrokenOutline => 0,
        FlagKind::NotPrintableAtThisBlur => 1,
        FlagKind::ToleranceNotReached => 2,
        FlagKind::ShotLimitsNotMet => 3,
        FlagKind::PeakDoseOverLimit => 4,
        FlagKind::CostsMoreThanItsShare => 5,
    };
    let gravity = |flag: &Flag| match (flag.kind, flag.number) {
        (_, None) => 0.0,
        // The narrower the worse.
        (FlagKind::NotPrintableAtThisBlur, Some(n)) => -n,
        (_, Some(n)) => n,
    };
    flags.sort_by(|a, b| {
        (rank(a.kind).cmp(&rank(b.kind)))
            .then(gravity(b).total_cmp(&gravity(a)))
            .then((a.clip, a.figure).cmp(&(b.clip, b.figure)))
    });
    flags
}

/// A figure with its clip and its number there, both from 0.
#[derive(Clone, Copy)]
struct Subject<'a> {
    clip: usize,
    number: usize,
    distinct: &'a DistinctFigure,
}

/// All figures of all clips.
fn subjects<'a>(evidence: &Evidence<'a>) -> impl Iterator<Item = Subject<'a>> + use<'a> {
    let clips = evidence.clips.iter().enumerate();
    clips.flat_map(|(clip, of_clip)| {
        let figures = of_clip.mask.figures.iter().enumerate();
        figures.map(move |(number, distinct)| Subject {
            clip,
            number,
            distinct,
        })
    })
}

impl Subject<'_> {
    /// All but what needs the times of all figures.
    fn all(&self, evidence: &Evidence<'_>) -> Vec<Flag> {
        let narrow = self.not_printable(evidence.setup);
        let print = narrow.or_else(|| self.tolerance(evidence));
        let flags = [
            self.broken(evidence),
            print,
            self.limits(evidence),
            self.peak(evidence),
        ];
        flags.into_iter().flatten().collect()
    }

    /// A flag at a place of the mask.
    fn flag(
        &self,
        at: Point,
        kind: FlagKind,
        number: Option<f64>,
        unit: &str,
        remedy: String,
    ) -> Flag {
        Flag {
            clip: self.clip as u64 + 1,
            figure: self.number as u64,
            place_nm: at.to_nm(),
            kind,
            number,
            unit: unit.to_owned(),
            remedy,
            picture: None,
        }
    }

    /// Lower-left corner of its bounds at its first place.
    fn corner(&self) -> Point {
        let bounds = self.distinct.figure.bounds();
        first_place(self.distinct).apply_rect(bounds).min
    }

    /// Tile and overlap of the figure, those that were made.
    fn made<'e>(&self, evidence: &'e Evidence<'_>) -> impl Iterator<Item = (Method, &'e Made)> {
        let (clip, number) = (self.clip, self.number);
        [Method::Tile, Method::Overlap]
            .into_iter()
            .filter_map(move |method| {
                let made = evidence.made.get(clip)?.get(method)?.get(number)?;
                Some((method, made.as_ref().ok()?))
            })
    }

    fn broken(&self, evidence: &Evidence<'_>) -> Option<Flag> {
        let of_clip = evidence.made.get(self.clip)?;
        let error = of_clip
            .iter()
            .find_map(|(_, made)| match made?.get(self.number)? {
                Err(Unmade::Fracture(error)) => Some(error),
                Ok(_) | Err(Unmade::NotDrawn) => None,
            })?;
        let remedy = format!("repair the outline: {error}");
        Some(self.flag(self.corner(), FlagKind::BrokenOutline, None, "", remedy))
    }

    fn not_printable(&self, setup: &Setup) -> Option<Flag> {
        let sigma = setup.blur.sigma().0;
        let bounds = self.distinct.figure.bounds();
        let longest = Nm::from_pm(bounds.width().max(bounds.height())).0;
        let (line, square) = (NARROWEST_LINE * sigma, NARROWEST_SQUARE * sigma);
        let kind = FlagKind::NotPrintableAtThisBlur;
        let remedy = |least: f64| {
            format!(
                "widen it to {} nm or more, leave it out, or have it written with a smaller blur",
                number(least)
            )
        };
        if longest < square {
            let unit = "nm greatest side";
            return Some(self.flag(self.corner(), kind, Some(longest), unit, remedy(square)));
        }
        let width = widest_under(&self.distinct.figure, line, setup.blur)?;
        Some(self.flag(
            self.corner(),
            kind,
            Some(width),
            "nm wide at most",
            remedy(line),
        ))
    }

    /// The worse of tile and overlap where either does not print.
    fn tolerance(&self, evidence: &Evidence<'_>) -> Option<Flag> {
        let (setup, sigma) = (evidence.setup, evidence.setup.blur.sigma().0);
        let failing: Vec<(Method, &Made)> = self
            .made(evidence)
            .filter(|(_, made)| !made.fidelity.prints_within_tolerance())
            .collect();
        let names: Vec<&str> = failing.iter().map(|(method, _)| method.name()).collect();
        let names = names.join(" and ");
        let worst = failing
            .iter()
            .filter_map(|(_, made)| made.fidelity.worst_violations.first().map(|v| (*made, v)))
            .max_by(|(_, a), (_, b)| off(a.dose).total_cmp(&off(b.dose)));
        let Some((made, violation)) = worst else {
            let (_, made) = failing.first()?;
            let pieces = made.fidelity.pieces;
            let remedy = format!(
                "its pieces or holes do not print as drawn ({} lost, {} split, {} bridged, {} extra, {} with other holes): widen the neck or the gap",
                pieces.lost, pieces.split, pieces.bridged, pieces.extra, pieces.holes
            );
            let kind = FlagKind::ToleranceNotReached;
            return Some(self.flag(self.corner(), kind, None, "", remedy));
        };
        let pm = |v: f64| Nm(v).to_pm().unwrap_or_default();
        let at = Point::new(pm(violation.place[0]), pm(violation.place[1]));
        let nearest = made.fracture.misses.iter().min_by_key(|miss| {
            let d = miss.place - at;
            i128::from(d.x).pow(2) + i128::from(d.y).pow(2)
        });
        let printing = self
            .made(evidence)
            .find(|(_, made)| made.fidelity.prints_within_tolerance())
            .map(|(method, _)| format!("order {}, which prints it, or ", method.name()));
        let remedy = match nearest.map(|miss| miss.reason) {
            Some(MissReason::TooNarrow) => format!(
                "widen it there to {} nm or more",
                number(NARROWEST_LINE * sigma)
            ),
            Some(MissReason::TooSharp) => format!(
                "round the corner there: a blurred right angle pulls back by {} nm whatever the shots",
                number(CORNER_PULL_BACK * sigma)
            ),
            Some(MissReason::Limits) => format!(
                "smooth it there or allow sides outside {} to {} nm or a higher peak dose",
                number(setup.limits.least_side.0),
                number(setup.limits.greatest_side.0)
            ),
            Some(MissReason::NotFound) => format!(
                "smooth the outline there, allow more than {} nm, or search with --effort thorough",
                number(setup.tolerance.0)
            ),
            None => "its neighbours' shots reach it there: look at them first, or move it away"
                .to_owned(),
        };
        let remedy = printing.unwrap_or_default() + &remedy;
        let (side, rule) = if violation.need == Need::Print {
            ("inside", "0.5 or more")
        } else {
            ("outside", "less than 0.5")
        };
        let unit = format!("dose {side}, expected {rule} ({names})");
        let kind = FlagKind::ToleranceNotReached;
        let place = first_place(self.distinct).apply(at);
        Some(self.flag(place, kind, Some(violation.dose), &unit, remedy))
    }

    fn limits(&self, evidence: &Evidence<'_>) -> Option<Flag> {
        let limits = evidence.setup.limits;
        let (method, beyond, smallest) = self
            .made(evidence)
            .map(|(method, made)| {
                let shots = &made.fracture.shots;
                let beyond = beyond_limits(shots, limits.least_side, limits.greatest_side);
                (method, beyond, shots.smallest_side())
            })
            .find(|(_, beyond, _)| *beyond > 0)?;
        let remedy = format!(
            "{beyond} shots of its {} fracture are outside {} to {} nm: widen its narrow parts or allow such sides",
            method.name(),
            number(limits.least_side.0),
            number(limits.greatest_side.0)
        );
        let kind = FlagKind::ShotLimitsNotMet;
        Some(self.flag(
            self.corner(),
            kind,
            smallest.map(|side| side.0),
            "nm smallest side",
            remedy,
        ))
    }

    fn peak(&self, evidence: &Evidence<'_>) -> Option<Flag> {
        let limit = evidence.peak_dose?;
        let (method, made) = self
            .made(evidence)
            .filter(|(_, made)| made.peak.0 > limit.0 + PEAK_ERROR)
            .max_by(|(_, a), (_, b)| a.peak.0.total_cmp(&b.peak.0))?;
        let remedy = format!(
            "its {} fracture piles up more than {}, and no other was found: order it as tile, or allow more",
            method.name(),
            number(limit.0)
        );
        let kind = FlagKind::PeakDoseOverLimit;
        Some(self.flag(
            self.corner(),
            kind,
            Some(made.peak.0),
            "× dose-to-size",
            remedy,
        ))
    }
}

/// How far a dose is from the threshold.
fn off(dose: f64) -> f64 {
    (dose - THRESHOLD).abs()
}

/// Figures that take much more time per length of outline than the mask's median, in the recommended fracture.
fn costly(evidence: &Evidence<'_>) -> Vec<Flag> {
    let Some(method) = evidence.recommended else {
        return Vec::new();
    };
    // Seconds and outline of all places (µm) of each figure; on the whole field where clips stand for one.
    let mut rates: Vec<(Subject<'_>, f64, f64)> = Vec::new();
    for figure in subjects(evidence) {
        let of_clip = evidence.seconds.get(figure.clip);
        let seconds = of_clip.and_then(|all| all.get(method)?.get(figure.number).copied()?);
        let Some(seconds) = seconds else {
            continue;
        };
        let copies = evidence.clips[figure.clip].copies(evidence.field) as f64;
        let distinct = figure.distinct;
        let outline = Nm(distinct.figure.outline_nm()).um() * distinct.place_count() as f64;
        rates.push((figure, seconds, copies * outline));
    }
    let made: f64 = rates.iter().map(|(_, seconds, _)| seconds).sum();
    let total = evidence.beam.map_or(made, |beam| beam.0);
    let outlines: f64 = rates.iter().map(|(_, _, outline)| outline).sum();
    let rate = |(_, seconds, outline): &(Subject<'_>, f64, f64)| seconds / outline;
    let mut sorted = rates.clone();
    sorted.sort_by(|a, b| rate(a).total_cmp(&rate(b)));
    let mut passed = 0.0;
    let median = sorted.iter().find_map(|one| {
        passed += one.2;
        (passed >= 0.5 * outlines).then(|| rate(one))
    });
    let Some(median) = median else {
        return Vec::new();
    };
    let too_much = |one: &&(Subject<'_>, f64, f64)| {
        rate(one) > TIMES_MEDIAN * median && one.1 >= LEAST_SHARE * total
    };
    let flag = |one: &(Subject<'_>, f64, f64)| {
        let figure = one.0;
        let remedy = format!(
            "smooth its outline: it takes {} times the mask's median time per outline, at the median it would save {} s",
            number(rate(one) / median),
            number(one.1 - median * one.2)
        );
        figure.flag(
            figure.corner(),
            FlagKind::CostsMoreThanItsShare,
            Some(100.0 * one.1 / total),
            "% of flashing and settling",
            remedy,
        )
    };
    rates.iter().filter(too_much).map(flag).collect()
}
