//! The quote: what a mask costs to write and how true it prints, with verdict and flags.
//!
//! The only module that knows the order of the stages: a mask's distinct figures are fractured in three ways, each is judged
//! on the dose that its shots and its neighbours' give, the shots are timed where they stand, and all is put side by side.

pub mod compare;
pub mod exposure;
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
mod uncertain;
mod verdict;
mod width;
pub mod witness;

use std::sync::Arc;

pub use hours::Correction;
pub use kept::Kept;
pub use made::{Made, MadeMask, Setup};
pub use remedy::remedies;
pub use result::Quote;
pub use sampled::{Sampling, quote_sampled};

use crate::blur::{Blur, BlurError, REACH};
use crate::expose::{CorrectionError, DensityError};
use crate::fracture::overlap::{DoseLevels, Overlap};
use crate::fracture::tile::{Staircase, Tile};
use crate::fracture::{Effort, Fracturer};
use crate::geom::Rect;
use crate::judge::{Background, Settings};
use crate::layout::{Layer, Layout};
use crate::mask::{self, Expose, Mask, MaskError, MaskOptions};
use crate::profile::{Kind, Profile};
use crate::units::{Dose, Hours, Nm, Seconds};
use crate::write_time::{Field, WriteTimeError};

use exposure::{Exposed, LongRange, shot_errors};
use hours::{Spread, Written};
use result::{
    ByMethod, CAUTION, DoseCorrection, FigureFracture, FigureResult, FlagKind, Fractures, Method,
    ProfileUsed, ScaledToField, Source, StripeRow,
};

/// Why there is no quote.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum QuoteError {
    /// The writer flashes no shots.
    #[error(
        "profile {profile}: a raster writer flashes no shots, expected the profile of a shaped-beam writer"
    )]
    NoShots {
        /// Its name.
        profile: String,
    },
    /// Nothing is known of the blur.
    #[error("profile {profile}: states no `sigma_nm`, expected the standard deviation of the blur")]
    NoSigma {
        /// Its name.
        profile: String,
    },
    /// The blur is none.
    #[error(transparent)]
    Blur(#[from] BlurError),
    /// No mask could be made of the layout.
    #[error(transparent)]
    Mask(#[from] MaskError),
    /// Clips that neither stand for a field nor for themselves.
    #[error(
        "{clips} layouts, {shares} of them with a share, {}, expected one layout alone, or a field and a share of it for each",
        if *.field { "a field" } else { "no field" }
    )]
    Shares {
        /// How many there are.
        clips: usize,
        /// Of them, those with a share.
        shares: usize,
        /// Whether there is a field.
        field: bool,
    },
    /// A raster line was asked for from the profile of another writer.
    #[error("profile {profile}: flashes shots, expected the profile of a raster writer")]
    NoRaster {
        /// Its name.
        profile: String,
    },
    /// The chosen layers hold no figure.
    #[error("no figure of any area on the chosen layers, or none in the window")]
    NoFigure,
    /// The dose cannot be corrected.
    #[error(transparent)]
    Correction(#[from] CorrectionError),
    /// No density map can be made.
    #[error(transparent)]
    Density(#[from] DensityError),
    /// The writer model refuses the pattern.
    #[error(transparent)]
    WriteTime(#[from] WriteTimeError),
}

/// What is asked.
#[derive(Clone, Copy, Debug)]
pub struct Terms<'a> {
    /// Writer and process.
    pub profile: &'a Profile,
    /// How far the contour may stray from the outline.
    pub tolerance: Nm,
    /// How far the plain staircase may stray from it.
    pub within: Nm,
    /// How hard to search.
    pub effort: Effort,
    /// The field that the clips stand for; `None` for one layout alone.
    pub field: Option<Field>,
    /// Hours the writer is booked for.
    pub slot: Option<Hours>,
    /// Greatest dose that may pile up anywhere, a multiple of dose-to-size.
    pub peak_dose: Option<Dose>,
    /// The raster multi-beam writer to compare with.
    pub raster: Option<&'a Profile>,
    /// Doses that a shot of the overlap fracture may have.
    pub dose_levels: DoseLevels,
}

impl Terms<'_> {
    /// What figures are fractured for under the profile.
    ///
    /// # Errors
    /// When the profile is that of a raster writer, or states no blur or an impossible one.
    pub fn setup(&self) -> Result<Setup, QuoteError> {
        let profile = || self.profile.name().to_owned();
        let limits = match self.profile.kind() {
            Kind::Shaped => self.profile.shot_limits(),
            Kind::Raster => None,
        };
        Ok(Setup {
            limits: limits.ok_or_else(|| QuoteError::NoShots { profile: profile() })?,
            blur: Blur::new(
                self.profile
                    .sigma()
                    .ok_or_else(|| QuoteError::NoSigma { profile: profile() })?,
            )?,
            tolerance: self.tolerance,
        })
    }
}

/// Which part of which layout.
#[derive(Clone, Copy, Debug)]
pub struct Chosen<'a> {
    /// File name as given.
    pub name: &'a str,
    /// What it holds.
    pub layout: &'a Layout,
    /// What of it is taken, and how it goes onto the mask; reach and address unit are those of the setup instead.
    pub options: &'a MaskOptions,
}

impl Chosen<'_> {
    /// The mask, with contexts as far as the blur reaches.
    ///
    /// # Errors
    /// As [`mask::build`].
    pub fn mask(&self, setup: &Setup) -> Result<Mask, MaskError> {
        let mask = mask::build(
            self.layout,
            &MaskOptions {
                reach: setup.blur.sigma() * REACH,
                address: setup.limits.address,
                ..self.options.clone()
            },
        )?;
        mask.check_size()?;
        Ok(mask)
    }

    fn source(&self, mask: &Mask, coverage: Option<f64>) -> Source {
        let name = |layer: &Layer| format!("{}/{}", layer.layer, layer.datatype);
        let options = self.options;
        let layers = if options.layers.is_empty() {
            let present = mask::layer_counts(self.layout).0;
            let present = present.iter().map(|(layer, _)| layer);
            let taken = present.filter(|layer| !options.minus.contains(layer));
            taken.map(name).collect()
        } else {
            options.layers.iter().map(name).collect()
        };
        let corners = |rect: Rect| {
            let ([x0, y0], [x1, y1]) = (rect.min.to_nm(), rect.max.to_nm());
            [x0, y0, x1, y1]
        };
        Source {
            name: self.name.to_owned(),
            layers,
            minus: options.minus.iter().map(name).collect(),
            scale: options.scale,
            mirror: options.mirror,
            shift_nm: options.shift.to_nm(),
            bias_nm: options.bias.0,
            background_of_nm: match options.expose {
                Expose::Figures => None,
                Expose::Background { frame } => Some(corners(frame)),
            },
            window_nm: options.window.map(corners),
            extent_nm: mask
                .extent
                .map(|extent| [extent.width(), extent.height()].map(|side| Nm::from_pm(side).0)),
            coverage,
            figures_distinct: mask.figures.len() as u64,
            figures_placed: result::Count(mask.place_count()),
        }
    }
}

/// A layout of a quote with its mask.
#[derive(Clone, Copy, Debug)]
pub struct Clip<'a> {
    /// What was taken of which layout.
    pub chosen: Chosen<'a>,
    /// Its mask.
    pub mask: &'a Mask,
    /// The share of the field that copies of it fill, over 0, up to 1; `None` if it stands for itself.
    pub coverage: Option<f64>,
}

impl Clip<'_> {
    /// How many copies of it a field holds, fractions too; 1 without a field.
    fn copies_exactly(&self, field: Option<Field>) -> f64 {
        let area = |width: Nm, height: Nm| width.0 * height.0;
        let own = self.mask.extent.map_or(0.0, |extent| {
            area(Nm::from_pm(extent.width()), Nm::from_pm(extent.height()))
        });
        let (Some(field), Some(coverage)) = (field, self.coverage) else {
            return 1.0;
        };
        coverage * area(field.width, field.height) / own.max(1.0)
    }

    /// How many copies of it a field holds, at least one.
    fn copies(&self, field: Option<Field>) -> u64 {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates"
        )]
        let copies = self.copies_exactly(field).round() as u64;
        copies.max(1)
    }
}

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
        let of_clips: Vec<summary::Part<'_>> = clips
            .iter()
            .zip(lists)
            .zip(&doses)
            .map(|((clip, made), exposed)| summary::Part {
                figures: &clip.mask.figures,
                made,
                exposed,
                weight: if clips.len() > 1 {
                    clip.copies(terms.field)
                } else {
                    1
                },
            })
            .collect();
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
    let mut figures = Vec::with_capacity(figures_distinct);
    for (clip, of_clip) in (1..).zip(clips) {
        let raised = |figure: usize| {
            let here = |flag: &&result::Flag| flag.clip == clip && flag.figure == figure as u64;
            flags.iter().filter(here).map(|flag| flag.kind).collect()
        };
        let numbers = 0..of_clip.mask.figures.len();
        let at = usize::try_from(clip - 1).unwrap_or(usize::MAX);
        figures.extend(numbers.map(|figure| {
            let dose = |method| exposed.get(method)?.get(at)?.mean_dose(figure);
            let found = (
                &made[at],
                &seconds[at],
                &dose as &dyn Fn(Method) -> Option<Dose>,
            );
            figure_result((clip, of_clip.mask), figure, found, raised(figure))
        }));
    }
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

/// The fracturer of a method.
#[must_use]
pub fn fracturer(method: Method, terms: &Terms<'_>) -> Box<dyn Fracturer> {
    match method {
        Method::Staircase => Box::new(Staircase {
            within: terms.within,
        }),
        Method::Tile => Box::new(Tile {
            effort: terms.effort,
            ..Tile::default()
        }),
        Method::Overlap => Box::new(Overlap {
            peak_dose: terms.peak_dose,
            dose_levels: terms.dose_levels,
            ..Overlap::with(terms.effort)
        }),
    }
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

/// By method: the masks, the seconds of their figures, and the mean dose of the figure.
type Evidence<'a> = (
    &'a ByMethod<Arc<MadeMask>>,
    &'a ByMethod<Vec<Option<f64>>>,
    &'a dyn Fn(Method) -> Option<Dose>,
);

fn figure_result(
    (clip, mask): (u64, &Mask),
    figure: usize,
    (made, seconds, dose): Evidence<'_>,
    flags: Vec<FlagKind>,
) -> FigureResult {
    let distinct = &mask.figures[figure];
    let mut fractures = ByMethod::default();
    for method in Method::ALL {
        let made = made.get(method).and_then(|all| all.get(figure));
        let Some(Ok(made)) = made else { continue };
        let scores = made.fidelity.summary();
        *fractures.slot(method) = Some(FigureFracture {
            shots: made.fracture.shots.len() as u64,
            edge_error_nm: summary::edge_error(&scores),
            prints_within_tolerance: Some(scores.prints_within_tolerance),
            scores: Some(scores),
            mean_dose: dose(method).map(|dose| dose.0),
            seconds: seconds
                .get(method)
                .and_then(|all| all.get(figure).copied().flatten()),
        });
    }
    let corner = made::first_place(distinct)
        .apply_rect(distinct.figure.bounds())
        .min;
    FigureResult {
        clip,
        figure: figure as u64,
        place_nm: corner.to_nm(),
        fingerprint: fingerprint::of(&distinct.figure),
        places: result::Count(distinct.place_count()),
        outline_nm: distinct.figure.outline_nm(),
        vertices: distinct.figure.vertices() as u64,
        rectilinear: distinct.figure.is_rectilinear(),
        fractures,
        flags,
    }
}
