//! The quote: what a mask costs to write and how true it prints, with verdict and flags.
//!
//! The only module that knows the order of the stages: a mask's distinct figures are fractured in three ways, each is judged
//! on the dose that its shots and its neighbours' give, the shots are timed where they stand, and all is put side by side.

mod flags;
pub mod hours;
pub mod made;
mod repair;
pub mod result;
pub mod shots;
pub mod summary;
mod verdict;

pub use hours::{Correction, Share};
pub use made::{Made, Setup};
pub use result::Quote;

use crate::blur::{Blur, BlurError, REACH};
use crate::expose::CorrectionError;
use crate::fracture::overlap::{DoseLevels, Overlap};
use crate::fracture::tile::{Staircase, Tile};
use crate::fracture::{Effort, FractureError, Fracturer};
use crate::geom::Rect;
use crate::judge::{Background, Settings};
use crate::layout::{Layer, Layout};
use crate::mask::{self, Expose, Mask, MaskError, MaskOptions};
use crate::profile::{Kind, Profile};
use crate::units::{Dose, Hours, Nm};
use crate::write_time::WriteTimeError;

use result::{
    ByMethod, CAUTION, DoseCorrection, FigureFracture, FigureResult, FlagKind, Method, ProfileUsed,
    ScaledToField, Source,
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
    /// The chosen layers hold no figure.
    #[error("no figure of any area on the chosen layers, or none in the window")]
    NoFigure,
    /// The dose cannot be corrected.
    #[error(transparent)]
    Correction(#[from] CorrectionError),
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
    /// The field that the layout stands for; `None` for the layout alone.
    pub share: Option<Share>,
    /// Hours the writer is booked for.
    pub slot: Option<Hours>,
    /// Greatest dose that may pile up anywhere, a multiple of dose-to-size.
    pub peak_dose: Option<Dose>,
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
        mask::build(
            self.layout,
            &MaskOptions {
                reach: setup.blur.sigma() * REACH,
                address: setup.limits.address,
                ..self.options.clone()
            },
        )
    }

    fn source(&self, mask: &Mask) -> Source {
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
            figures_distinct: mask.figures.len() as u64,
            figures_placed: result::Count(mask.place_count()),
        }
    }
}

/// A quote with what it rests on.
#[derive(Clone, Debug)]
pub struct Answer {
    /// The result.
    pub quote: Quote,
    /// Every distinct figure, in the order of the mask.
    pub figures: Vec<FigureResult>,
    /// Shots and scores of every distinct figure, in the order of the mask.
    pub made: ByMethod<Vec<Result<Made, FractureError>>>,
}

/// How often [`quote`] calls `tick` at most.
#[must_use]
pub fn ticks(mask: &Mask) -> u64 {
    2 * (Method::ALL.len() * mask.figures.len()) as u64
}

/// Fractures, judges and times a mask; `tick` is called after each figure's fracture and after each figure's judgement.
///
/// The same for any number of threads.
///
/// # Errors
/// When the terms do not fit the mask, or it is empty.
pub fn quote(
    chosen: &Chosen<'_>,
    mask: &Mask,
    terms: &Terms<'_>,
    tick: &(dyn Fn() + Sync),
) -> Result<Answer, QuoteError> {
    let setup = terms.setup()?;
    if mask.figures.is_empty() {
        return Err(QuoteError::NoFigure);
    }
    let correction = Correction::new(mask, terms.profile, terms.share)?;
    let settings = Settings {
        background: Background {
            ratio: correction.ratio,
            density: correction.density,
        },
        ..Settings::new(setup.blur, setup.tolerance)
    };
    let mut made = ByMethod::default();
    let mut fractures = ByMethod::default();
    let mut seconds = ByMethod::default();
    for method in Method::ALL {
        let shots = made::fracture(mask, fracturer(method, terms).as_ref(), &setup, tick);
        let judged = made::judge(mask, shots, &settings, tick);
        let mut summary = summary::of_mask(&mask.figures, &judged, setup.limits.sliver);
        let (hours, by_figure) =
            hours::of_mask(mask, &judged, terms.profile, terms.share, correction)?;
        summary.hours = Some(hours);
        *fractures.slot(method) = Some(summary);
        *seconds.slot(method) = Some(by_figure);
        *made.slot(method) = Some(judged);
    }
    let choice = verdict::choose(&fractures, mask.figures.len(), terms.slot);
    let flags = flags::find(&flags::Evidence {
        mask,
        made: &made,
        seconds: &seconds,
        recommended: choice.recommended,
        setup: &setup,
        peak_dose: terms.peak_dose,
    });
    let of_figure = |figure: usize| {
        let raised = flags.iter().filter(|flag| flag.figure == figure as u64);
        figure_result(
            mask,
            figure,
            &made,
            &seconds,
            raised.map(|flag| flag.kind).collect(),
        )
    };
    let figures = (0..mask.figures.len()).map(of_figure).collect();
    let quote = Quote {
        source: chosen.source(mask),
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
        scaled_to_field: terms.share.map(|Share { field, coverage }| ScaledToField {
            width_mm: field.width / Nm::from_mm(1.0),
            height_mm: field.height / Nm::from_mm(1.0),
            coverage,
        }),
        dose_correction: DoseCorrection {
            dose: correction.dose.0,
            backscatter_ratio: correction.ratio,
            density: correction.density,
        },
        notes: notes(chosen.layout, mask, terms),
        fractures,
        verdict: choice.verdict,
        recommended: choice.recommended,
        reason: choice.reason,
        flags,
        caution: CAUTION.to_owned(),
    };
    Ok(Answer {
        quote,
        figures,
        made,
    })
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

fn notes(layout: &Layout, mask: &Mask, terms: &Terms<'_>) -> Vec<String> {
    let mut notes: Vec<String> = layout.notes.iter().chain(&mask.notes).cloned().collect();
    notes.push(format!(
        "the plain staircase stays within {} nm of the outline; it is cut without a model of the blur",
        terms.within.0
    ));
    if terms.share.is_some() {
        notes.push(
            "the clip is the box around its figures; shots on borders of stripes and sub-fields are counted as expected on average"
                .to_owned(),
        );
    }
    notes
}

fn figure_result(
    mask: &Mask,
    figure: usize,
    made: &ByMethod<Vec<Result<Made, FractureError>>>,
    seconds: &ByMethod<Vec<Option<f64>>>,
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
            seconds: seconds
                .get(method)
                .and_then(|all| all.get(figure).copied().flatten()),
        });
    }
    let corner = made::first_place(distinct)
        .apply_rect(distinct.figure.bounds())
        .min;
    FigureResult {
        figure: figure as u64,
        place_nm: corner.to_nm(),
        places: result::Count(distinct.place_count()),
        outline_nm: distinct.figure.outline_nm(),
        vertices: distinct.figure.vertices() as u64,
        rectilinear: distinct.figure.is_rectilinear(),
        fractures,
        flags,
    }
}
