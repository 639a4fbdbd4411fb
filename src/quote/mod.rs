//! The quote: what a mask costs to write and how true it prints, with verdict and flags.
//!
//! The only module that knows the order of the stages: a mask's distinct figures are fractured in three ways, each is judged
//! on the dose that its shots and its neighbours' give, the shots are timed where they stand, and all is put side by side.

mod clip;
pub mod compare;
mod error;
pub mod exposure;
mod figures;
mod fingerprint;
mod flags;
pub mod hours;
mod kept;
pub mod made;
mod remedy;
mod repair;
pub mod result;
pub mod sample;
mod sampled;
pub mod shots;
pub mod summary;
pub mod sweep;
mod tally;
mod terms;
mod uncertain;
mod verdict;
mod width;
pub mod witness;

use std::sync::Arc;

pub use clip::{Chosen, Clip};
pub use error::QuoteError;
pub use hours::Correction;
pub use kept::Kept;
pub use made::{Made, MadeMask, Setup};
pub use remedy::remedies;
pub use result::Quote;
pub use sampled::{Sampling, quote_sampled};
pub use terms::{Terms, fracturer};

use crate::judge::{Background, Settings};
use crate::mask::Mask;
use crate::units::{Nm, Seconds};

use exposure::{Exposed, LongRange, shot_errors};
use hours::{Spread, Written};
use result::{
    ByMethod, CAUTION, DoseCorrection, FigureResult, Fractures, Method, ProfileUsed, ScaledToField,
    StripeRow,
};

/// A quote with what it rests on.
#[derive(Clone, Debug)]
pub struct Answer {
    /// The result.
    pub quote: Quote,
    /// Every distinct figure, clip by clip in the order of the mask.
    pub figures: Vec<FigureResult>,
    /// The time of each stripe.
    pub stripes: ByMethod<Vec<StripeRow>>,
    /// By clip: shots and scores of every distinct figure, in the order of the mask.
    pub made: Vec<ByMethod<Arc<MadeMask>>>,
}

/// How often [`quote`] calls `tick` at most.
#[must_use]
pub fn ticks<'a>(masks: impl IntoIterator<Item = &'a Mask>) -> u64 {
    let figures = masks.into_iter().map(|mask| mask.figures.len() as u64);
    2 * Method::ALL.len() as u64 * figures.sum::<u64>()
}

/// Fractures, judges and times the clips; `tick` is called after each figure's fracture and after each figure's judgement.
///
/// The same for any number of threads.
///
/// # Errors
/// When the terms do not fit the clips, or one is empty.
pub fn quote(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    tick: &(dyn Fn() + Sync),
) -> Result<Answer, QuoteError> {
    let numbers: Vec<usize> = (0..clips.len()).collect();
    quote_again(clips, &numbers, terms, &mut Kept::default(), tick)
}

/// As [`quote`], with what was kept of other quotes. `masks` holds the number of each clip's mask: equal numbers, equal masks.
///
/// # Errors
/// As [`quote`].
pub fn quote_again(
    clips: &[Clip<'_>],
    masks: &[usize],
    terms: &Terms<'_>,
    kept: &mut Kept,
    tick: &(dyn Fn() + Sync),
) -> Result<Answer, QuoteError> {
    check(clips, terms)?;
    let basis = Basis::new(clips, terms)?;
    exact(clips, terms, &basis, &mut |clip, method| {
        let mask = (masks[clip], clips[clip].mask);
        kept.made(mask, method, (terms, &basis.setup), &basis.settings, tick)
    })
}

/// What all figures are fractured, judged and dosed with.
struct Basis {
    setup: Setup,
    correction: Correction,
    settings: Settings,
}

impl Basis {
    fn new(clips: &[Clip<'_>], terms: &Terms<'_>) -> Result<Self, QuoteError> {
        let setup = terms.setup()?;
        let correction = Correction::new(clips, terms.profile)?;
        let background = Background {
            ratio: correction.ratio,
            density: correction.density,
        };
        Ok(Self {
            setup,
            correction,
            settings: Settings {
                background,
                errors: Some(shot_errors(terms.profile, correction.dose)),
                ..Settings::new(setup.blur, setup.tolerance)
            },
        })
    }
}

/// What a quote is put together from.
struct Parts<'a> {
    /// By clip: the doses of what was made.
    exposed: ByMethod<Vec<Exposed<'a>>>,
    fractures: Fractures,
    stripes: ByMethod<Vec<StripeRow>>,
    /// By clip and figure.
    seconds: Vec<ByMethod<Vec<Option<f64>>>>,
    /// In place of the shots made, where they are a sample.
    spread: ByMethod<Spread<'a>>,
    sample: Option<result::SampleUsed>,
}

impl Parts<'_> {
    fn empty(clips: usize) -> Self {
        Self {
            exposed: ByMethod::default(),
            fractures: Fractures::default(),
            stripes: ByMethod::default(),
            seconds: vec![ByMethod::default(); clips],
            spread: ByMethod::default(),
            sample: None,
        }
    }
}

/// The quote of every figure; `made_of` gives the shots of a clip's figures.
fn exact(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    basis: &Basis,
    made_of: &mut dyn FnMut(usize, Method) -> Arc<MadeMask>,
) -> Result<Answer, QuoteError> {
    let Basis {
        setup, correction, ..
    } = *basis;
    let mut made: Vec<ByMethod<Arc<MadeMask>>> = vec![ByMethod::default(); clips.len()];
    for method in Method::ALL {
        for (clip, made) in made.iter_mut().enumerate() {
            *made.slot(method) = Some(made_of(clip, method));
        }
    }
    let long_range = LongRange::new(terms.profile);
    let mut parts = Parts::empty(clips.len());
    for method in Method::ALL {
        let lists: Vec<&MadeMask> = made
            .iter()
            .filter_map(|made| made.get(method))
            .map(AsRef::as_ref)
            .collect();
        let doses = long_range.expose_clips(clips, &lists)?;
        let of_clips = summary::parts(clips, &lists, &doses, terms.field);
        let background = basis.settings.background;
        let mut summary = summary::of_parts(&of_clips, background, setup.limits.sliver);
        let written = Written::new(clips, &doses, terms.field);
        let timed = written.time(terms.profile)?;
        let even = uncertain::of_map(correction, summary.dose_map)?;
        let hours = uncertain::widened(timed.hours, &written, terms.profile, even)?;
        summary.hours = Some(hours);
        *parts.fractures.slot(method) = Some(summary);
        *parts.stripes.slot(method) = Some(hours::rows(&timed.time));
        for (all, of_clip) in parts.seconds.iter_mut().zip(timed.seconds) {
            *all.slot(method) = Some(of_clip);
        }
        *parts.exposed.slot(method) = Some(doses);
    }
    finish(clips, terms, basis, &made, parts)
}

/// Verdict, flags and all that follows from what was made and timed.
fn finish(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    basis: &Basis,
    made: &[ByMethod<Arc<MadeMask>>],
    parts: Parts<'_>,
) -> Result<Answer, QuoteError> {
    let Basis {
        setup, correction, ..
    } = *basis;
    let Parts {
        exposed,
        fractures,
        stripes,
        seconds,
        spread,
        sample,
    } = parts;
    let figures_distinct = clips.iter().map(|clip| clip.mask.figures.len()).sum();
    let mut choice = verdict::choose(&fractures, figures_distinct, terms.slot);
    if let Some(sample) = sample
        .as_ref()
        .filter(|s| s.figures_drawn < s.figures_distinct)
    {
        sampled::say(&mut choice.verdict, sample);
    }
    let flips = verdict::flips(&fractures, figures_distinct);
    let recommended = choice.recommended.and_then(|method| {
        Some(match spread.get(method) {
            Some(spread) => Written::of_sums(spread.clone()),
            None => Written::new(clips, exposed.get(method)?, terms.field),
        })
    });
    let map = choice
        .recommended
        .and_then(|method| fractures.get(method)?.dose_map);
    let sensitivity = match &recommended {
        Some(written) => {
            let even = uncertain::of_map(correction, map)?;
            uncertain::sensitivity(written, terms.profile, even)?
        }
        None => Vec::new(),
    };
    let raster = match terms.raster {
        Some(raster) => Some(hours::raster(raster, terms, clips, recommended.as_ref())?),
        None => None,
    };
    let flags = flags::find(&flags::Evidence {
        clips,
        made,
        seconds: &seconds,
        field: terms.field,
        recommended: choice.recommended,
        setup: &setup,
        peak_dose: terms.peak_dose,
        beam: sample.as_ref().and_then(|sample| {
            let beam = sample.beam_h.get(choice.recommended?)?;
            Some(Seconds::from_hours(beam.value))
        }),
    });
    let figures = figures::results(&figures::Evidence {
        clips,
        made,
        seconds: &seconds,
        exposed: &exposed,
        flags: &flags,
    });
    let quote = Quote {
        sources: clips
            .iter()
            .map(|clip| clip.chosen.source(clip.mask, clip.coverage))
            .collect(),
        profile: ProfileUsed {
            name: terms.profile.name().to_owned(),
            numbers: terms
                .profile
                .numbers()
                .map(|(key, number)| (key.to_string(), number.value))
                .collect(),
        },
        tolerance_nm: setup.tolerance.0,
        sigma_nm: setup.blur.sigma().0,
        scaled_to_field: terms.field.map(|field| ScaledToField {
            width_mm: field.width / Nm::from_mm(1.0),
            height_mm: field.height / Nm::from_mm(1.0),
            coverage: clips.iter().filter_map(|clip| clip.coverage).sum(),
        }),
        dose_correction: DoseCorrection {
            dose: correction.dose.0,
            backscatter_ratio: correction.ratio,
            density: correction.density,
        },
        notes: notes(clips, terms, sample.as_ref(), &fractures),
        fractures,
        verdict: choice.verdict,
        recommended: choice.recommended,
        reason: choice.reason,
        flips,
        sensitivity,
        raster,
        flags,
        sample,
        remedies: Vec::new(),
        must_change: None,
        must_change_unknown: None,
        caution: CAUTION.to_owned(),
    };
    Ok(Answer {
        quote,
        figures,
        stripes,
        made: made.to_vec(),
    })
}

/// Whether the clips stand for a field or one for itself, and each holds a figure.
fn check(clips: &[Clip<'_>], terms: &Terms<'_>) -> Result<(), QuoteError> {
    if clips.iter().any(|clip| clip.mask.figures.is_empty()) {
        return Err(QuoteError::NoFigure);
    }
    let shares = clips.iter().filter(|clip| clip.coverage.is_some()).count();
    let fine = match terms.field {
        None => clips.len() == 1 && shares == 0,
        Some(_) => !clips.is_empty() && shares == clips.len(),
    };
    if !fine {
        return Err(QuoteError::Shares {
            clips: clips.len(),
            shares,
            field: terms.field.is_some(),
        });
    }
    Ok(())
}

fn notes(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    sample: Option<&result::SampleUsed>,
    fractures: &Fractures,
) -> Vec<String> {
    let mut notes = Vec::new();
    for (number, clip) in (1..).zip(clips) {
        let own = clip.chosen.layout.notes.iter().chain(&clip.mask.notes);
        if clips.len() > 1 {
            notes.extend(own.map(|note| format!("clip {number}: {note}")));
        } else {
            notes.extend(own.cloned());
        }
    }
    notes.push(format!(
        "the plain staircase stays within {} nm of the outline; it is cut without a model of the blur",
        terms.within.0
    ));
    notes.extend(sample.and_then(|sample| sampled::note(sample, fractures)));
    if terms.field.is_some() {
        notes.push(
            "a clip is the box around its figures; shots on borders of stripes and sub-fields are counted as expected on average"
                .to_owned(),
        );
    }
    notes
}
