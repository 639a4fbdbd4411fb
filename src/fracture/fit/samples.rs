//! The places at which a fit is held to the print rule.

use super::model::{Bins, Flash};
use crate::blur::{Blur, PhiTable, REACH};
use crate::geom::Figure;
use crate::target::{Need, Target, Violation};
use crate::units::Nm;

/// A place with what the rule asks there.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fracture) struct Sample {
    /// Where, nm.
    pub(super) place: [f64; 2],
    /// +1 where it must print, −1 where it must not.
    pub(super) sign: f32,
    /// Dose that the context gives.
    pub(super) context: f32,
}

/// Distance between samples along the rim, σ. Between two samples the dose may be off by up to `h²/8·max|F''| = 0.0075`; the check
/// at the end finds where it is, and adds samples there. Denser ones cost more than the repairs they save (measured: 0.36 takes
/// 1.4 times as long for the same counts; 0.7 needs more shots).
const RIM_STEP: f64 = 0.5;

/// Lattice step inside and outside, σ; the check at the end is four times as dense.
const LATTICE_STEP: f64 = 0.9;

/// How far outside the outline the lattice goes, in σ.
const LATTICE_REACH: f64 = 2.5;

/// Pairs along the outline and a lattice inside and around the figure.
pub(in crate::fracture) fn samples_of(
    target: &Target,
    blur: Blur,
    context: &ContextDose,
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
    let step = LATTICE_STEP * sigma;
    let reach = LATTICE_REACH * sigma;
    let [x0, y0, x1, y1] = target.bounds();
    let mut crossings = Vec::new();
    let mut y = y0 - reach;
    while y <= y1 + reach {
        target.crossings(y, &mut crossings);
        let mut x = x0 - reach;
        let mut passed = 0;
        while x <= x1 + reach {
            while passed < crossings.len() && crossings[passed] <= x {
                passed += 1;
            }
            let inside = passed % 2 == 1;
            let wanted = !target.outline_within([x, y], 0.5 * sigma)
                && (inside || target.outline_within([x, y], reach));
            if wanted {
                samples.extend(Sample::asked(
                    [x, y],
                    if inside { Need::Print } else { Need::Clear },
                    context,
                ));
            }
            x += step;
        }
        y += step;
    }
    samples
}

impl Sample {
    /// A place with its need and the context's dose there.
    pub(in crate::fracture) fn new(place: [f64; 2], need: Need, context: &ContextDose) -> Self {
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a dose needs no more than single precision here"
        )]
        let context = context.dose(place) as f32;
        Self {
            place,
            sign: if need == Need::Print { 1.0 } else { -1.0 },
            context,
        }
    }
}

impl Sample {
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

/// The dose that other figures give, as if they printed ideally: each in bands of exact width.
#[derive(Clone, Debug)]
pub(in crate::fracture) struct ContextDose {
    figures: Vec<Target>,
    bands: Vec<[f64; 4]>,
    /// Bands by where their dose reaches, and figures by where they may print; none without context.
    reach: Option<[Bins; 2]>,
    sigma: f64,
    phi: PhiTable,
}

/// Height of a context band, in σ: a slanted edge in steps of σ/8 has the dose of the straight one to 1e-3.
const BAND: f64 = 0.125;

impl ContextDose {
    /// From the context figures of a job.
    pub(in crate::fracture) fn of(context: &[Figure], blur: Blur, tolerance: Nm) -> Self {
        let sigma = blur.sigma().0;
        let figures: Vec<Target> = context
            .iter()
            .map(|f| Target::new(f, blur, tolerance))
            .collect();
        let mut bands = Vec::new();
        let mut crossings = Vec::new();
        for target in &figures {
            let [_, y0, _, y1] = target.bounds();
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "positive and clamped"
            )]
            let n = ((y1 - y0) / (BAND * sigma)).ceil().clamp(1.0, 1e5) as usize;
            #[allow(clippy::cast_precision_loss, reason = "n is at most 1e5")]
            let h = (y1 - y0) / n as f64;
            for i in 0..n {
                #[allow(clippy::cast_precision_loss, reason = "n is at most 1e5")]
                let low = y0 + i as f64 * h;
                target.crossings(low + 0.5 * h, &mut crossings);
                bands.extend(
                    crossings
                        .chunks_exact(2)
                        .map(|c| [c[0], low, c[1], low + h]),
                );
            }
        }
        let reached: Vec<[f64; 4]> = bands
            .iter()
            .map(|&b| Flash::new(b).grown(REACH * sigma).side)
            .collect();
        let printed: Vec<[f64; 4]> = figures
            .iter()
            .map(|f| Flash::new(f.bounds()).grown(f.corner_tolerance()).side)
            .collect();
        let hull = reached
            .iter()
            .chain(&printed)
            .map(|&b| Flash::new(b))
            .reduce(|a, b| a.hull(&b));
        let reach = hull
            .map(|hull| [&reached, &printed].map(|boxes| Bins::of(hull.side, 4.0 * sigma, boxes)));
        Self {
            figures,
            bands,
            reach,
            sigma,
            phi: PhiTable::get(),
        }
    }

    /// Whether another figure may print at a place, so that it need not stay clear.
    pub(in crate::fracture) fn may_print(&self, p: [f64; 2]) -> bool {
        let Some([_, printed]) = &self.reach else {
            return false;
        };
        printed
            .at(p)
            .any(|id| self.figures[id as usize].need(p) != Need::Clear)
    }

    /// The dose at a place.
    pub(in crate::fracture) fn dose(&self, p: [f64; 2]) -> f64 {
        let Some([reached, _]) = &self.reach else {
            return 0.0;
        };
        let share = |at: f64, from: f64, to: f64| {
            self.phi.cdf((at - from) / self.sigma) - self.phi.cdf((at - to) / self.sigma)
        };
        let reach = REACH * self.sigma;
        let bands = reached.at(p).map(|id| self.bands[id as usize]).filter(|b| {
            (0..2).all(|axis| b[axis] - reach <= p[axis] && p[axis] <= b[axis + 2] + reach)
        });
        bands
            .map(|b| share(p[0], b[0], b[2]) * share(p[1], b[1], b[3]))
            .sum()
    }
}
