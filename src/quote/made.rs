//! Every distinct figure fractured once and judged once, with its neighbours' shots.

use rayon::prelude::*;

use crate::blur::{Blur, REACH};
use crate::expose::Exposure;
use crate::fracture::{Fracture, FractureError, Fracturer, Job, MissReason};
use crate::geom::{Figure, Point, Rect, Transform};
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

/// Why a figure has no score.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum Unmade {
    /// It cannot be cut.
    #[error(transparent)]
    Fracture(#[from] FractureError),
    /// It is not in the sample that stands for all.
    #[error("not drawn in the sample")]
    NotDrawn,
}

/// Every distinct figure of a mask, in its order.
pub type MadeMask = Vec<Result<Made, Unmade>>;

/// The fractures alone.
#[must_use]
pub fn fractures_of(made: &MadeMask) -> Vec<Result<Fracture, Unmade>> {
    let of = |made: &Result<Made, Unmade>| match made {
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
) -> Vec<Result<Fracture, Unmade>> {
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
        made.map_err(Unmade::from)
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
    fractures: Vec<Result<Fracture, Unmade>>,
    settings: &judge::Settings,
    tick: &(dyn Fn() + Sync),
) -> MadeMask {
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
    let made = |(fracture, judged): (Result<Fracture, Unmade>, _)| {
        let (fidelity, peak) = match judged {
            Some(judged) => judged,
            None => (Fidelity::default(), Dose(0.0)),
        };
        let made = |fracture| Made {
            fracture,
            fidelity,
            peak,
        };
        fracture.map(made)
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
    /// Around figure number `figure`; a neighbour that cannot be cut adds no dose, one that was not drawn that of its outline.
    #[must_use]
    pub fn of(
        mask: &Mask,
        standings: &Standings<'_>,
        fractures: &[Result<Fracture, Unmade>],
        figure: usize,
        blur: Blur,
    ) -> Self {
        Self::with(
            mask,
            standings,
            figure,
            blur,
            |other, window| match &fractures[other] {
                Ok(fracture) => fracture.shots.rects().collect(),
                Err(Unmade::NotDrawn) => stand_in(&mask.figures[other].figure, window, blur),
                Err(Unmade::Fracture(_)) => Vec::new(),
            },
        )
    }

    /// Around figure number `figure`; `flashes` gives what is flashed for a figure within a window, both in its own frame.
    pub(super) fn with(
        mask: &Mask,
        standings: &Standings<'_>,
        figure: usize,
        blur: Blur,
        flashes: impl Fn(usize, Rect) -> Vec<(Rect, Dose)>,
    ) -> Self {
        let of_figure = flashes;
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
            let seen = into_frame.inverse().apply_rect(window);
            let rects = of_figure(other, seen).into_iter();
            let moved = rects.map(|(rect, dose)| (into_frame.apply_rect(rect), dose));
            flashes.extend(moved.filter(|(rect, _)| own || rect.touches(window)));
        }
        Self {
            neighbours,
            dose: Exposure::new(blur, flashes),
        }
    }
}

/// Height of the slabs that stand in for a figure's own shots, σ: what they stray from the outline within a slab is far under the blur.
const SLAB: f64 = 0.125;

/// A figure that is not fractured, as good as drawn: slabs as wide as it is at their middle, those that touch the window.
pub(super) fn stand_in(figure: &Figure, window: Rect, blur: Blur) -> Vec<(Rect, Dose)> {
    let step = (blur.sigma() * SLAB).to_pm().unwrap_or_default().max(1);
    let slabs = slabs_in(figure, window, step).into_iter();
    slabs.map(|slab| (slab, Dose(1.0))).collect()
}

/// Height of the slabs that a figure not fractured has on a density map, σ: far under the mesh, and few to a figure.
const COARSE_SLAB: f64 = 8.0;

/// A figure as it lies on a density map; its bounds where slabs miss it.
pub(super) fn slabs(figure: &Figure, blur: Blur) -> Vec<Rect> {
    let step = (blur.sigma() * COARSE_SLAB)
        .to_pm()
        .unwrap_or_default()
        .max(1);
    let slabs = slabs_in(figure, figure.bounds(), step);
    if slabs.is_empty() {
        return vec![figure.bounds()];
    }
    slabs
}

fn slabs_in(figure: &Figure, window: Rect, step: i64) -> Vec<Rect> {
    let bounds = figure.bounds();
    let first = (window.min.y - bounds.min.y).max(0) / step;
    let mut y = bounds.min.y + first * step;
    let mut slabs = Vec::new();
    while y < bounds.max.y.min(window.max.y) {
        let above = (y + step).min(bounds.max.y);
        let middle = y + (above - y) / 2;
        let crossing = |(a, b): (Point, Point)| {
            let (low, high) = if a.y < b.y { (a, b) } else { (b, a) };
            let along = i128::from(high.x - low.x) * i128::from(middle - low.y);
            let x =
                || low.x + i64::try_from(along / i128::from(high.y - low.y)).unwrap_or_default();
            (low.y <= middle && middle < high.y).then(x)
        };
        let edges = figure.rings().flat_map(|ring| ring.edges());
        let mut crossings: Vec<i64> = edges.filter_map(crossing).collect();
        crossings.sort_unstable();
        let slab = |ends: &[i64]| Rect {
            min: Point::new(ends[0], y),
            max: Point::new(ends[1], above),
        };
        let here = crossings.chunks_exact(2).map(slab);
        slabs.extend(here.filter(|s| s.width() > 0 && s.touches(window)));
        y = above;
    }
    slabs
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
pub(super) fn peak(dose: &Exposure, fracture: &Fracture) -> Dose {
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
