//! Every distinct figure fractured once and judged once, with its neighbours' shots.

use rayon::prelude::*;

use crate::blur::{Blur, REACH};
use crate::expose::Exposure;
use crate::fracture::{Fracture, FractureError, Fracturer, Job, MissReason};
use crate::geom::{Figure, Rect, Transform};
use crate::judge::{self, Fidelity};
use crate::mask::{DistinctFigure, Mask, Standings};
use crate::shot::ShotLimits;
use crate::target::peaks;
use crate::units::{Dose, Nm};

use super::repair::repair;

/// What all figures of a mask are fractured for.
#[derive(Clone, Copy, Debug)]
pub struct Setup {
    /// The short-range blur.
    pub blur: Blur,
    /// How far the contour may stray from the outline.
    pub tolerance: Nm,
    /// What the writer can flash.
    pub limits: ShotLimits,
}

/// One fracture of one distinct figure with its score.
#[derive(Clone, Debug)]
pub struct Made {
    /// Shots in the figure's own frame, and what the fracturer says of them.
    pub fracture: Fracture,
    /// How they print together with the shots of the neighbours at the figure's first place.
    pub fidelity: Fidelity,
    /// Greatest dose over what is flashed, neighbours included; right to 1e-3 of it.
    pub peak: Dose,
}

/// Every distinct figure of a mask, in its order.
pub type MadeMask = Vec<Result<Made, FractureError>>;

/// The fractures alone.
#[must_use]
pub fn fractures_of(made: &MadeMask) -> Vec<Result<Fracture, FractureError>> {
    let of = |made: &Result<Made, FractureError>| match made {
        Ok(made) => Ok(made.fracture.clone()),
        Err(error) => Err(error.clone()),
    };
    made.iter().map(of).collect()
}

/// Fractures every distinct figure, `tick` called after each; those that their neighbours' shots then undo are fitted anew.
#[must_use]
pub fn fracture(
    mask: &Mask,
    fracturer: &dyn Fracturer,
    setup: &Setup,
    tick: &(dyn Fn() + Sync),
) -> Vec<Result<Fracture, FractureError>> {
    let one = |distinct: &DistinctFigure| {
        let made = fracturer.fracture(&Job {
            figure: &distinct.figure,
            context: &distinct.context,
            flashed: &[],
            blur: setup.blur,
            tolerance: setup.tolerance,
            limits: setup.limits,
        });
        tick();
        made
    };
    let mut fractures: Vec<_> = mask.figures.par_iter().map(one).collect();
    repair(mask, &mut fractures, fracturer, setup);
    fractures
}

/// Judges every distinct figure on the dose of its own shots and of those its neighbours got; `tick` is called after each.
///
/// Neighbours are those at the figure's first place: at its other places the same figures stand, fractured for their own
/// contexts, which may differ beyond the reach of the blur.
#[must_use]
pub fn judge(
    mask: &Mask,
    fractures: Vec<Result<Fracture, FractureError>>,
    settings: &judge::Settings,
    tick: &(dyn Fn() + Sync),
) -> Vec<Result<Made, FractureError>> {
    let standings = Standings::new(mask);
    let judged: Vec<Option<(Fidelity, Dose)>> = (0..fractures.len())
        .into_par_iter()
        .map(|i| {
            let own = fractures[i].as_ref().ok()?;
            let scene = Scene::of(mask, &standings, &fractures, i, settings.blur);
            let fidelity = judge::judge(
                &mask.figures[i].figure,
                &scene.neighbours,
                &scene.dose,
                settings,
            );
            let peak = peak(&scene.dose, own);
            tick();
            Some((fidelity, peak))
        })
        .collect();
    let made = |(fracture, judged): (Result<Fracture, FractureError>, _)| {
        let (fidelity, peak) = match judged {
            Some(judged) => judged,
            None => (Fidelity::default(), Dose(0.0)),
        };
        fracture.map(|fracture| Made {
            fracture,
            fidelity,
            peak,
        })
    };
    fractures.into_iter().zip(judged).map(made).collect()
}

/// A figure at its first place with all that reaches it, in its own frame.
pub struct Scene {
    /// Other figures whose bounds come within 5 σ of its bounds.
    pub neighbours: Vec<Figure>,
    /// The dose of all their shots and its own.
    pub dose: Exposure,
}

impl Scene {
    /// Around figure number `figure`; a neighbour without shots adds no dose.
    #[must_use]
    pub fn of(
        mask: &Mask,
        standings: &Standings<'_>,
        fractures: &[Result<Fracture, FractureError>],
        figure: usize,
        blur: Blur,
    ) -> Self {
        let distinct = &mask.figures[figure];
        let first = first_place(distinct);
        let back = first.inverse();
        let window = window(distinct, blur);
        let (mut neighbours, mut flashes) = (Vec::new(), Vec::new());
        for (other, transform) in standings.touching(first.apply_rect(window)) {
            let own = other == figure && transform == first;
            let into_frame = transform.then(back);
            if !own {
                neighbours.push(mask.figures[other].figure.transformed(into_frame));
            }
            if let Ok(fracture) = &fractures[other] {
                let rects = fracture.shots.rects();
                let moved = rects.map(|(rect, dose)| (into_frame.apply_rect(rect), dose));
                flashes.extend(moved.filter(|(rect, _)| own || rect.touches(window)));
            }
        }
        Self {
            neighbours,
            dose: Exposure::new(blur, flashes),
        }
    }
}

/// Own frame → mask at the first place of a figure.
#[must_use]
pub fn first_place(distinct: &DistinctFigure) -> Transform {
    distinct
        .places
        .first()
        .map_or(Transform::IDENTITY, |place| {
            let by = place.repetition.displacements().next().unwrap_or_default();
            Transform {
                shift: place.transform.shift + by,
                ..place.transform
            }
        })
}

/// Why a place is missed, in words.
#[must_use]
pub const fn why(reason: MissReason) -> &'static str {
    match reason {
        MissReason::TooNarrow => "narrower than the blur can print",
        MissReason::TooSharp => "turns more sharply than the blur can follow",
        MissReason::Limits => "the limits of sides or of the peak dose stand in the way",
        MissReason::NotFound => "no better shots were found",
    }
}

/// What the blur carries to a figure, in its own frame.
pub(super) fn window(distinct: &DistinctFigure, blur: Blur) -> Rect {
    let reach = (blur.sigma() * REACH).to_pm().unwrap_or_default();
    distinct.figure.bounds().grown(reach)
}

/// Step of the lattice on which the peak is looked for, σ.
const PEAK_STEP: f64 = 0.25;

/// Greatest dose over a figure's shots.
fn peak(dose: &Exposure, fracture: &Fracture) -> Dose {
    let rects = fracture.shots.rects().map(|(rect, _)| rect);
    let Some(around) = rects.reduce(Rect::hull) else {
        return Dose(0.0);
    };
    let ([x0, y0], [x1, y1]) = (around.min.to_nm(), around.max.to_nm());
    let step = PEAK_STEP * dose.blur().sigma().0;
    let found = peaks(dose, [x0, y0, x1, y1], step, 0.0);
    let peak = found.iter().map(|&(_, peak)| peak).fold(0.0, f64::max);
    Dose(peak)
}
