//! The places at which a fit is held to the print rule.

use super::core::Core;
use super::model::{Bins, Flash};
use crate::blur::{Blur, PhiTable, REACH, THRESHOLD};
use crate::fracture::Job;
use crate::geom::spans;
use crate::target::{Need, Target, Violation};

/// A place with what the rule asks there.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fracture) struct Sample {
    /// Where, nm.
    pub(super) place: [f64; 2],
    /// +1 where it must print, −1 where it must not.
    pub(super) sign: f32,
    /// Dose that the context gives: the least of it at a place that must print, else the most.
    pub(super) context: f32,
    /// Whether the dose is held under a peak here: `context` then counts from where that peak stands in for the threshold.
    pub(super) cap: bool,
}

/// Distance between samples along the rim, σ. Between two samples the dose may be off by up to `h²/8·max|F''| = 0.0075`; the check
/// at the end finds where it is, and adds samples there. Denser ones cost more than the repairs they save (measured: 0.36 takes
/// 1.4 times as long for the same counts; 0.7 needs more shots).
const RIM_STEP: f64 = 0.5;

/// Lattice step inside and outside, σ; the check at the end is four times as dense.
const LATTICE_STEP: f64 = 0.9;

/// Step of the lattice on which a dose is held under its peak, σ.
const CAP_STEP: f64 = 0.7;

/// How far outside the outline the lattice goes, in σ.
const LATTICE_REACH: f64 = 2.5;

/// Pairs along the outline and a lattice inside and around the figure.
///
/// None lie so deep in the core that they print for sure. With a `peak`, the lattice inside is held under it too, on a lattice of [`CAP_STEP`].
pub(in crate::fracture) fn samples_of(
    target: &Target,
    blur: Blur,
    context: &ContextDose,
    core: Option<&Core>,
    peak: Option<f64>,
) -> Vec<Sample> {
    let sigma = blur.sigma().0;
    let mut samples = Vec::new();
    // No creases: on a finely drawn curve they are all there is on its narrow side, and asking the guard of each costs one shot in
    // fifty; the check asks for them without the guard, and few are ever broken.
    // The rim comes edge by edge; on finely drawn curves that is denser than asked for, so it is thinned by distance.
    let mut last: [Option<[f64; 2]>; 2] = [None, None];
    let least = (0.6 * RIM_STEP * sigma).powi(2);
    target.rim(RIM_STEP * sigma, 0.0, false, |p, need| {
        let side = &mut last[usize::from(need == Need::Print)];
        if side.is_none_or(|q| (q[0] - p[0]).powi(2) + (q[1] - p[1]).powi(2) >= least) {
            *side = Some(p);
            samples.extend(Sample::asked(p, need, context));
        }
    });
    let reach = LATTICE_REACH * sigma;
    lattice(target, core, LATTICE_STEP * sigma, -reach, |p, inside| {
        let wanted =
            !target.outline_within(p, 0.5 * sigma) && (inside || target.outline_within(p, reach));
        if wanted {
            let need = if inside { Need::Print } else { Need::Clear };
            samples.extend(Sample::asked(p, need, context));
        }
    });
    if let Some(peak) = peak {
        let step = CAP_STEP * sigma;
        lattice(target, core, step, 0.5 * step, |p, inside| {
            if inside {
                samples.push(Sample::under(p, peak, context));
            }
        });
    }
    samples
}

/// Goes over a square lattice that begins `inset` nm within the bounds of a figure, row by row, and says of each place whether it
/// lies inside the figure. Leaves out places that are neither inside nor within -`inset` of the outline, and those so deep in the
/// core that they print for sure.
fn lattice(
    target: &Target,
    core: Option<&Core>,
    step: f64,
    inset: f64,
    mut each: impl FnMut([f64; 2], bool),
) {
    let [x0, y0, x1, y1] = target.bounds();
    let beyond = (-inset).max(0.0);
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "positive; bounds are at most 4.5e12 nm"
    )]
    let steps = |length: f64| (length / step).max(0.0) as usize;
    #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
    let at = |low: f64, i: usize| low + inset + i as f64 * step;
    let (mut crossings, mut wanted) = (Vec::new(), Vec::new());
    let (mut sure, mut rest) = (Vec::new(), Vec::new());
    for j in 0..=steps(y1 + beyond - at(y0, 0)) {
        let y = at(y0, j);
        target.crossings(y, &mut crossings);
        target.spans_near(y, beyond, &crossings, &mut wanted);
        if let Some(core) = core {
            core.sure_spans(y, &mut sure);
            spans::without(&wanted, &sure, &mut rest);
            std::mem::swap(&mut wanted, &mut rest);
        }
        let (mut passed, mut next) = (0, 0);
        for &[from, to] in &wanted {
            let end = steps(to.min(x1 + beyond) - at(x0, 0)) + 1;
            for i in steps(from - at(x0, 0)).max(next)..end {
                let x = at(x0, i);
                while passed < crossings.len() && crossings[passed] <= x {
                    passed += 1;
                }
                each([x, y], passed % 2 == 1);
            }
            next = next.max(end);
        }
    }
}

impl Sample {
    /// A place with its need and the context's dose there.
    pub(in crate::fracture) fn new(place: [f64; 2], need: Need, context: &ContextDose) -> Self {
        let (least, most) = context.range(place);
        let (sign, dose) = match need {
            Need::Print => (1.0, least),
            _ => (-1.0, most),
        };
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a dose needs no more than single precision here"
        )]
        Self {
            place,
            sign,
            context: dose as f32,
            cap: false,
        }
    }

    /// A place whose dose must stay under `peak`.
    ///
    /// `dose ≤ peak` is `dose − (peak − ½) ≤ ½`: the rule of a place that must not print, with that much less dose.
    pub(super) fn under(place: [f64; 2], peak: f64, context: &ContextDose) -> Self {
        let mut sample = Self::new(place, Need::Clear, context);
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a dose needs no more than single precision here"
        )]
        let lower = (peak - THRESHOLD) as f32;
        sample.context -= lower;
        sample.cap = true;
        sample
    }

    /// A place with its need, unless it must stay clear only of this figure.
    fn asked(place: [f64; 2], need: Need, context: &ContextDose) -> Option<Self> {
        (need == Need::Print || !context.may_print(place)).then(|| Self::new(place, need, context))
    }

    /// The violation that it is when no shot is flashed.
    pub(super) fn unprinted(&self) -> Option<Violation> {
        (self.sign > 0.0).then(|| Violation {
            place: self.place,
            need: Need::Print,
            dose: f64::from(self.context),
        })
    }
}

/// The dose that other figures give: that of their shots where these are known, else as if they printed ideally, each in bands
/// of exact width.
#[derive(Clone, Debug)]
pub(in crate::fracture) struct ContextDose {
    figures: Vec<Target>,
    /// Figures by where they may print; none without context.
    printed: Option<Bins>,
    /// What is flashed around the figure, one entry for each kind of place; at least one.
    around: Vec<Around>,
}

/// What is flashed around a figure, by where its dose reaches.
#[derive(Clone, Debug)]
pub(super) struct Around {
    flashes: Vec<Flash>,
    reached: Option<Bins>,
    sigma: f64,
    phi: PhiTable,
}

impl Around {
    fn new(flashes: Vec<Flash>, sigma: f64) -> Self {
        let boxes: Vec<[f64; 4]> = flashes
            .iter()
            .map(|f| f.grown(REACH * sigma).side)
            .collect();
        Self {
            reached: bins(&boxes, sigma),
            flashes,
            sigma,
            phi: PhiTable::get(),
        }
    }

    /// The dose at a place.
    pub(super) fn dose(&self, p: [f64; 2]) -> f64 {
        let near = self.reached.iter().flat_map(|bins| bins.at(p));
        let here = Flash::new([p[0], p[1], p[0], p[1]]);
        near.map(|id| self.flashes[id as usize])
            .filter(|f| f.gap(&here) <= REACH * self.sigma)
            .map(|f| f.dose_at(self.phi, 1.0 / self.sigma, p))
            .sum()
    }
}

/// Boxes by place; none without a box.
fn bins(boxes: &[[f64; 4]], sigma: f64) -> Option<Bins> {
    let hull = boxes
        .iter()
        .map(|&b| Flash::new(b))
        .reduce(|a, b| a.hull(&b))?;
    Some(Bins::of(hull.side, 4.0 * sigma, boxes))
}

/// Height of a context band, in σ: a slanted edge in steps of σ/8 has the dose of the straight one to 1e-3.
const BAND: f64 = 0.125;

impl ContextDose {
    /// From the context of a job, as far as it lies within reach of what is to be printed.
    pub(in crate::fracture) fn of(job: &Job<'_>, target: &Target) -> Self {
        let sigma = job.blur.sigma().0;
        let figures: Vec<Target> = job
            .context
            .iter()
            .map(|f| Target::new(f, job.blur, job.tolerance))
            .filter(|other| within(target, other, REACH * sigma))
            .collect();
        let printed: Vec<[f64; 4]> = figures
            .iter()
            .map(|f| Flash::new(f.bounds()).grown(f.corner_tolerance()).side)
            .collect();
        let around = if job.flashed.is_empty() {
            let ideal = figures.iter().flat_map(|f| ideal(f, sigma)).collect();
            vec![Around::new(ideal, sigma)]
        } else {
            let lists = job.flashed.iter();
            let flashes = lists.map(|list| list.iter().copied().map(Flash::from).collect());
            flashes.map(|list| Around::new(list, sigma)).collect()
        };
        Self {
            printed: bins(&printed, sigma),
            figures,
            around,
        }
    }

    /// Whether another figure may print at a place, so that it need not stay clear.
    pub(in crate::fracture) fn may_print(&self, p: [f64; 2]) -> bool {
        let near = self.printed.iter().flat_map(|bins| bins.at(p));
        let mut figures = near.map(|id| &self.figures[id as usize]);
        figures.any(|figure| figure.need(p) != Need::Clear)
    }

    /// What is flashed at each kind of place.
    pub(super) fn around(&self) -> &[Around] {
        &self.around
    }

    /// The least and the most dose at a place.
    pub(in crate::fracture) fn range(&self, p: [f64; 2]) -> (f64, f64) {
        let doses = self.around.iter().map(|around| around.dose(p));
        doses.fold((f64::INFINITY, 0.0), |(least, most), d| {
            (least.min(d), most.max(d))
        })
    }
}

/// Whether two outlines come within `limit` nm of each other, or one lies in the other.
fn within(a: &Target, b: &Target, limit: f64) -> bool {
    // Where outlines that do not cross are nearest, one of them has a vertex.
    let reaches = |a: &Target, b: &Target| {
        let vertices = a.edges().iter().map(|edge| edge.a);
        let mut near = vertices.map(|p| b.outline_within(p, limit) || b.inside(p));
        near.any(|near| near)
    };
    reaches(a, b) || reaches(b, a)
}

/// A figure that prints ideally, in bands.
fn ideal(target: &Target, sigma: f64) -> Vec<Flash> {
    let [_, y0, _, y1] = target.bounds();
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "positive and clamped"
    )]
    let n = ((y1 - y0) / (BAND * sigma)).ceil().clamp(1.0, 1e5) as usize;
    #[allow(clippy::cast_precision_loss, reason = "n is at most 1e5")]
    let h = (y1 - y0) / n as f64;
    let (mut bands, mut crossings) = (Vec::new(), Vec::new());
    for i in 0..n {
        #[allow(clippy::cast_precision_loss, reason = "n is at most 1e5")]
        let low = y0 + i as f64 * h;
        target.crossings(low + 0.5 * h, &mut crossings);
        let spans = crossings.chunks_exact(2);
        bands.extend(spans.map(|c| Flash::new([c[0], low, c[1], low + h])));
    }
    bands
}
