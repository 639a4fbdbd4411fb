//! Remedies that are computed: what each saves on a figure and what it costs in edge error, and the shortest list that brings a mask into its slot.

mod change;
mod trial;

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use crate::fracture::Fracture;
use crate::mask::{DistinctFigure, Standings};
use crate::units::Dose;

use super::made::{self, MadeMask, Unmade};
use super::result::{FigureRemedies, Fits, Method};
use super::{Answer, Basis, Clip, QuoteError, Terms, hours};

/// Flagged figures on which remedies are tried, most seconds first.
const MOST_FLAGGED: usize = 32;

/// Tries remedies on the flagged figures, and finds what must change if the mask misses its slot; writes both into the answer.
///
/// # Errors
/// As [`super::quote`].
pub fn remedies(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    answer: &mut Answer,
) -> Result<(), QuoteError> {
    let Some(method) = answer.quote.recommended else {
        return Ok(());
    };
    let basis = Basis::new(clips, terms)?;
    let shop = Shop::new(clips, terms, &basis, answer, method);
    let all = shop.by_seconds(answer);
    let flagged: Vec<&Subject> = all
        .iter()
        .filter(|subject| {
            answer
                .quote
                .flags
                .iter()
                .any(|flag| subject.is(flag.clip, flag.figure))
        })
        .take(MOST_FLAGGED)
        .collect();
    let mut tried = shop.try_all(&flagged)?;
    let late = answer.quote.verdict.fits != Fits::Yes;
    let sampled = answer
        .quote
        .sample
        .as_ref()
        .is_some_and(|s| s.figures_drawn < s.figures_distinct);
    let change = match terms.slot.filter(|_| late && !sampled) {
        Some(slot) => shop.must_change(slot, &all, &mut tried)?,
        None => None,
    };
    let (flags, quote) = (answer.quote.flags.clone(), &mut answer.quote);
    quote.remedies = flagged
        .iter()
        .filter_map(|subject| tried.get(&subject.key()))
        .map(|tested| tested.remedies.clone())
        .collect();
    let distinct: BTreeSet<(u64, u64)> =
        flags.iter().map(|flag| (flag.clip, flag.figure)).collect();
    if distinct.len() > quote.remedies.len() {
        quote.notes.push(format!(
            "remedies were tried on {} of {} flagged figures, those of the most seconds",
            quote.remedies.len(),
            distinct.len()
        ));
    }
    quote.must_change = change;
    if let Some(slot) = terms.slot.filter(|_| late && sampled) {
        let beamless = hours::beamless(clips, terms)?;
        quote.must_change_unknown = Some(if beamless > slot {
            change::out_of_reach(slot, beamless)
        } else {
            "not worked out from a sample, since the figures of the most seconds may not be among those drawn; quoted without \
             --within, --sample and --time-limit-min it is."
                .to_owned()
        });
    }
    Ok(())
}

/// A figure with its clip, both from 0, and its seconds.
struct Subject {
    clip: usize,
    figure: usize,
    seconds: f64,
    /// The mean of what its shots' doses are multiplied by.
    dose: Dose,
}

impl Subject {
    fn is(&self, clip: u64, figure: u64) -> bool {
        (self.clip as u64 + 1, self.figure as u64) == (clip, figure)
    }

    fn key(&self) -> (usize, usize) {
        (self.clip, self.figure)
    }
}

/// What was tried, by clip and figure.
type Tried = BTreeMap<(usize, usize), Tested>;

/// What was tried on one figure, and the shots of each trial.
struct Tested {
    remedies: FigureRemedies,
    fractures: Vec<Fracture>,
}

/// All that remedies are worked out with.
struct Shop<'a> {
    clips: &'a [Clip<'a>],
    terms: &'a Terms<'a>,
    basis: &'a Basis,
    method: Method,
    /// By clip: the fracture that is recommended, and its shots alone.
    made: Vec<Arc<MadeMask>>,
    fractures: Vec<Vec<Result<Fracture, Unmade>>>,
    standings: Vec<Standings<'a>>,
}

impl<'a> Shop<'a> {
    fn new(
        clips: &'a [Clip<'a>],
        terms: &'a Terms<'a>,
        basis: &'a Basis,
        answer: &Answer,
        method: Method,
    ) -> Self {
        let made: Vec<Arc<MadeMask>> = answer
            .made
            .iter()
            .filter_map(|made| made.get(method).cloned())
            .collect();
        Self {
            clips,
            terms,
            basis,
            method,
            fractures: made.iter().map(|made| made::fractures_of(made)).collect(),
            made,
            standings: clips.iter().map(|clip| Standings::new(clip.mask)).collect(),
        }
    }

    /// All figures made, most seconds first.
    fn by_seconds(&self, answer: &Answer) -> Vec<Subject> {
        let mut all: Vec<Subject> = answer
            .figures
            .iter()
            .filter_map(|figure| {
                let fracture = figure.fractures.get(self.method)?;
                Some(Subject {
                    clip: usize::try_from(figure.clip).ok()?.checked_sub(1)?,
                    figure: usize::try_from(figure.figure).ok()?,
                    seconds: fracture.seconds?,
                    dose: fracture.mean_dose.map_or(self.basis.correction.dose, Dose),
                })
            })
            .collect();
        all.sort_by(|a, b| b.seconds.total_cmp(&a.seconds).then(a.key().cmp(&b.key())));
        all
    }

    fn distinct(&self, subject: &Subject) -> &'a DistinctFigure {
        &self.clips[subject.clip].mask.figures[subject.figure]
    }
}
