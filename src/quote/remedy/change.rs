//! The shortest list of changes that brings a mask into its slot, and the mask quoted again with them.

use crate::fracture::Fracture;
use crate::judge::Fidelity;
use crate::number::brief as number;
use crate::quote::exposure::{Exposed, LongRange};
use crate::quote::hours::{self, Written};
use crate::quote::made::{self, Made, MadeMask, Unmade};
use crate::quote::result::{self, Change, DoseMap, FractureSummary, MustChange, Trial};
use crate::quote::{QuoteError, summary, uncertain};
use crate::units::Hours;

use super::{Shop, Subject, Tested, Tried};

/// Figures on which remedies are tried to bring the mask into its slot, most seconds first.
const MOST_CHANGED: usize = 96;

/// A change with its shots.
#[derive(Clone, Copy)]
struct Fix<'a> {
    change: Change,
    fracture: &'a Fracture,
}

/// How far the search for changes went.
#[derive(Clone, Copy, Debug)]
enum Reach {
    /// Nothing to search for: this is taken without a single flash.
    Beamless(Hours),
    /// As far as it matters.
    All,
    /// Only so many figures were tried.
    Some { tried: usize, of: usize },
}

impl<'a> Shop<'a> {
    /// The shortest list of changes, most seconds first, that brings the mask into the slot.
    ///
    /// A figure cannot save more than it takes. So with figures taken in the order of their seconds, the list is known to be the shortest as
    /// soon as its least saving is more than the seconds of the next figure.
    pub(super) fn must_change(
        &self,
        slot: Hours,
        all: &[Subject],
        tried: &mut Tried,
    ) -> Result<Option<MustChange>, QuoteError> {
        let beamless = hours::beamless(self.clips, self.terms)?;
        if beamless > slot {
            return Ok(Some(self.quoted_again(
                slot,
                &[],
                Reach::Beamless(beamless),
            )?));
        }
        let mut done = 0;
        loop {
            let changes = best(tried);
            let needed = self.fewest(slot, &changes)?;
            let next = all.get(done).map_or(0.0, |subject| subject.seconds);
            let shortest = match needed {
                Some(n) => changes
                    .get(n - 1)
                    .is_some_and(|last| last.change.trial.saved_s >= next),
                None => next <= 0.0,
            };
            if shortest || done >= all.len().min(MOST_CHANGED) {
                let n = needed.unwrap_or(changes.len());
                let reach = if shortest || done >= all.len() {
                    Reach::All
                } else {
                    Reach::Some {
                        tried: done,
                        of: all.len(),
                    }
                };
                return Ok(Some(self.quoted_again(slot, &changes[..n], reach)?));
            }
            let few: Vec<&Subject> = all[done..]
                .iter()
                .take(16.min(MOST_CHANGED - done))
                .collect();
            done += few.len();
            let few: Vec<&Subject> = few
                .into_iter()
                .filter(|s| !tried.contains_key(&s.key()))
                .collect();
            tried.append(&mut self.try_all(&few)?);
        }
    }

    /// How many of the changes it takes; `None` if all are too few.
    fn fewest(&self, slot: Hours, changes: &[Fix<'_>]) -> Result<Option<usize>, QuoteError> {
        let fits = |n: usize| -> Result<bool, QuoteError> {
            Ok(self.timed(&changes[..n])?.high_h <= slot.0)
        };
        if changes.is_empty() || !fits(changes.len())? {
            return Ok(None);
        }
        let (mut too_few, mut enough) = (0, changes.len());
        while enough - too_few > 1 {
            let middle = (too_few + enough) / 2;
            if fits(middle)? {
                enough = middle
            } else {
                too_few = middle
            }
        }
        Ok(Some(enough))
    }

    /// The shots of all figures with the changes made; not judged.
    fn changed(&self, fixes: &[Fix<'_>]) -> Vec<Vec<Result<Fracture, Unmade>>> {
        let mut fractures = self.fractures.clone();
        for fix in fixes {
            let at = usize::try_from(fix.change.clip)
                .ok()
                .and_then(|clip| fractures.get_mut(clip - 1));
            let slot = at.and_then(|all| all.get_mut(usize::try_from(fix.change.figure).ok()?));
            if let Some(slot) = slot {
                *slot = Ok(fix.fracture.clone());
            }
        }
        fractures
    }

    /// Hours with the changes made.
    fn timed(&self, fixes: &[Fix<'_>]) -> Result<result::Hours, QuoteError> {
        let unjudged = |fracture: Result<Fracture, Unmade>| {
            fracture.map(|fracture| Made {
                fracture,
                fidelity: Fidelity::default(),
                peak: self.basis.correction.dose,
            })
        };
        let made: Vec<MadeMask> = self
            .changed(fixes)
            .into_iter()
            .map(|all| all.into_iter().map(unjudged).collect())
            .collect();
        self.hours_of(&made)
    }

    fn hours_of(&self, made: &[MadeMask]) -> Result<result::Hours, QuoteError> {
        self.hours_at(&self.exposed(made)?)
    }

    fn exposed<'m>(&self, made: &'m [MadeMask]) -> Result<Vec<Exposed<'m>>, QuoteError>
    where
        'a: 'm,
    {
        let lists: Vec<&MadeMask> = made.iter().collect();
        LongRange::new(self.terms.profile).expose_clips(self.clips, &lists)
    }

    fn hours_at(&self, exposed: &[Exposed<'_>]) -> Result<result::Hours, QuoteError> {
        let written = Written::new(self.clips, exposed, self.terms.field);
        let profile = self.terms.profile;
        let map = DoseMap::all(exposed.iter().filter_map(|of_clip| of_clip.map.as_ref()));
        let even = uncertain::of_map(self.basis.correction, map)?;
        let hours = written.hours(profile)?.0;
        uncertain::widened(hours, &written, profile, even)
    }

    /// The mask quoted with the changes made: timed and judged anew.
    fn quoted_again(
        &self,
        slot: Hours,
        fixes: &[Fix<'_>],
        reach: Reach,
    ) -> Result<MustChange, QuoteError> {
        let judged: Vec<MadeMask> = self
            .changed(fixes)
            .into_iter()
            .zip(self.clips)
            .map(|(fractures, clip)| {
                made::judge(clip.mask, fractures, &self.basis.settings, &|| ())
            })
            .collect();
        let doses = self.exposed(&judged)?;
        let hours = self.hours_at(&doses)?;
        let lists: Vec<&MadeMask> = judged.iter().collect();
        let parts = summary::parts(self.clips, &lists, &doses, self.terms.field);
        let after: FractureSummary = summary::of_parts(
            &parts,
            self.basis.settings.background,
            self.basis.setup.limits.sliver,
        );
        let fits = hours.fits(slot.0);
        let missing = Some(hours.high_h - slot.0).filter(|missing| *missing > 0.0);
        Ok(MustChange {
            method: self.method,
            changes: fixes.iter().map(|fix| fix.change).collect(),
            hours_after: hours,
            fits_after: fits,
            missing_h: missing,
            edge_error_after_nm: after.edge_error_nm,
            figures_out_of_tolerance_after: after.figures_out_of_tolerance.unwrap_or_default(),
            sentence: sentence(slot, fixes, &hours, missing, reach),
        })
    }
}

fn sentence(
    slot: Hours,
    fixes: &[Fix<'_>],
    hours: &result::Hours,
    missing: Option<f64>,
    reach: Reach,
) -> String {
    let saved: f64 = fixes.iter().map(|fix| fix.change.trial.saved_s).sum();
    let with = format!(
        "with {} changed it takes {} h (up to {} h), {} h less",
        figures(fixes.len()),
        number(hours.total_h),
        number(hours.high_h),
        number(saved / 3600.0)
    );
    let tried = match reach {
        Reach::Some { tried, of } => {
            format!("; remedies were tried on the {tried} figures of the most seconds, of {of}")
        }
        Reach::All | Reach::Beamless(_) => String::new(),
    };
    match (missing, reach) {
        (_, Reach::Beamless(hours)) => out_of_reach(slot, hours),
        (None, _) => format!(
            "To fit the slot of {} h {} must change: {with}{tried}.",
            number(slot.0),
            figures(fixes.len())
        ),
        (Some(missing), _) => format!(
            "No remedies bring it into the slot of {} h: {with}, and {} h are still missing{tried}.",
            number(slot.0),
            number(missing)
        ),
    }
}

/// That the writer is too slow whatever it writes.
pub(super) fn out_of_reach(slot: Hours, beamless: Hours) -> String {
    format!(
        "No change of figures brings it into the slot of {} h: without a single flash it takes {} h, {} h too many.",
        number(slot.0),
        number(beamless.0),
        number(beamless.0 - slot.0)
    )
}

/// The best remedy of each figure, most seconds saved first.
fn best(tried: &Tried) -> Vec<Fix<'_>> {
    let of = |tested: &'_ Tested| -> Option<usize> {
        let trials = tested.remedies.trials.iter().enumerate();
        let useful = trials.filter(|(_, trial)| trial.acceptable && trial.saved_s > 0.0);
        // The first of equals: what is changed least comes first.
        let best = useful.fold(None::<(usize, &Trial)>, |best, (i, trial)| match best {
            Some((at, best)) if best.saved_s >= trial.saved_s => Some((at, best)),
            _ => Some((i, trial)),
        });
        best.map(|(i, _)| i)
    };
    let mut fixes: Vec<Fix<'_>> = tried
        .values()
        .filter_map(|tested| Some((tested, of(tested)?)))
        .map(|(tested, i)| Fix {
            change: Change {
                clip: tested.remedies.clip,
                figure: tested.remedies.figure,
                trial: tested.remedies.trials[i],
            },
            fracture: &tested.fractures[i],
        })
        .collect();
    fixes.sort_by(|a, b| {
        let (a, b) = (&a.change, &b.change);
        let order = b.trial.saved_s.total_cmp(&a.trial.saved_s);
        order.then((a.clip, a.figure).cmp(&(b.clip, b.figure)))
    });
    fixes
}

/// How many figures, in words.
fn figures(n: usize) -> String {
    if n == 1 {
        "1 figure".to_owned()
    } else {
        format!("{n} figures")
    }
}
