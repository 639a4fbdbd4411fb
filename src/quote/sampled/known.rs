//! What the figures drawn say of all: totals at the doses that places have once it is known how densely the mask is written.

use std::sync::Arc;

use rayon::prelude::*;

use crate::blur::Blur;
use crate::geom::Rect;
use crate::quote::exposure::{self, Exposed, LongRange};
use crate::quote::hours;
use crate::quote::made::{self, MadeMask, Unmade};
use crate::quote::result::{ByMethod, DoseMap, FractureSummary, Method};
use crate::quote::sample::{Drawn, Strata, Total, Weights};
use crate::quote::tally::Tally;
use crate::quote::{Basis, Clip, QuoteError, Terms};
use crate::shot::{AddressUnit, Shot, ShotList};
use crate::units::{Dose, Nm};
use crate::write_time::{Borders, Sums, WriteTimeError};

use super::drawing::Measured;
use super::unit::Unit;

/// What the figures drawn say.
pub(super) struct Known<'a> {
    pub(super) units: &'a [Unit<'a>],
    pub(super) weights: Weights<'a>,
    /// By figure, those drawn.
    pub(super) by_unit: Vec<Option<&'a Measured>>,
    /// By clip.
    pub(super) made: Vec<ByMethod<Arc<MadeMask>>>,
    /// By figure, those not drawn.
    stand_ins: ByMethod<Vec<Option<ShotList>>>,
}

impl<'a> Known<'a> {
    pub(super) fn new(
        clips: &[Clip<'_>],
        units: &'a [Unit<'a>],
        strata: &'a Strata,
        drawn: &'a Drawn<Measured>,
        basis: &Basis,
    ) -> Self {
        let weights = Weights::new(strata, &drawn.taken);
        let mut by_unit: Vec<Option<&Measured>> = vec![None; units.len()];
        for (unit, measured) in &drawn.costs {
            by_unit[*unit] = Some(measured);
        }
        let mut stand_ins = ByMethod::default();
        for method in Method::ALL {
            let found = stood_in(units, &weights, &by_unit, method, basis.setup.blur);
            *stand_ins.slot(method) = Some(found);
        }
        Self {
            made: made_of(clips, units, &by_unit),
            units,
            weights,
            by_unit,
            stand_ins,
        }
    }

    /// By clip: the shots of figures drawn, what stands for those of the others.
    fn lists(&self, clips: usize, method: Method) -> Vec<Vec<Option<&ShotList>>> {
        let mut lists: Vec<Vec<Option<&ShotList>>> = vec![Vec::new(); clips];
        for (i, unit) in self.units.iter().enumerate() {
            let own = self.made[unit.clip]
                .get(method)
                .map(|all| &all[unit.figure]);
            let stand_in = || self.stand_ins.get(method).and_then(|all| all[i].as_ref());
            lists[unit.clip].push(match own {
                Some(Ok(made)) => Some(&made.fracture.shots),
                Some(Err(Unmade::Fracture(_))) => None,
                Some(Err(Unmade::NotDrawn)) | None => stand_in(),
            });
        }
        lists
    }

    /// The totals of a fracture at the doses of places.
    pub(super) fn placed<'k>(
        &'k self,
        clips: &[Clip<'k>],
        terms: &Terms<'_>,
        basis: &Basis,
        method: Method,
    ) -> Result<PlacedSums<'k>, QuoteError> {
        let lists = self.lists(clips.len(), method);
        let exposed = LongRange::new(terms.profile).expose_shot_clips(clips, &lists)?;
        let borders: Vec<(Borders, Nm)> = clips
            .iter()
            .map(|clip| hours::borders(clip, terms.field))
            .collect();
        let timed = |(unit, measured): (&Unit<'_>, &Option<&Measured>)| {
            let portions = exposed[unit.clip].portions[unit.figure].as_ref();
            match portions.filter(|_| measured.is_some()) {
                Some(portions) => {
                    let (borders, spacing) = borders[unit.clip];
                    let placed = hours::placed(portions);
                    Ok(Sums::new(terms.profile, &placed, borders, spacing)? * unit.copies)
                }
                None => Ok(Sums::default()),
            }
        };
        let all = self.units.par_iter().zip(&self.by_unit).map(timed);
        let sums = all.collect::<Result<Vec<Sums>, WriteTimeError>>()?;
        let map = DoseMap::all(exposed.iter().filter_map(|exposed| exposed.map.as_ref()));
        Ok(PlacedSums {
            method,
            shots: self.weights.total(&|i| sums[i].shots),
            beam: self.beam(terms, basis, method, &sums, map),
            exposed,
            map,
            sums,
        })
    }

    /// Scores and counts of all figures, those drawn by their weights. Where there are several clips each counts as often as it stands in the field.
    pub(super) fn scores(
        &self,
        placed: &PlacedSums<'_>,
        basis: &Basis,
        several: bool,
    ) -> FractureSummary {
        let mut tally = Tally::default();
        for &(i, weight) in self.weights.of_figures() {
            let unit = &self.units[i];
            let copies = if several { unit.copies } else { 1.0 };
            let Some(made) = self.by_unit[i].and_then(|m| m.made.get(placed.method)) else {
                continue;
            };
            tally.add(
                (unit.distinct, unit.figure),
                made,
                (weight, weight * copies),
                (&placed.exposed[unit.clip], basis.settings.background),
                basis.setup.limits.sliver,
            );
        }
        tally.summary()
    }

    /// Flashing and settling of all figures. Half its width holds what the charge of the figures not drawn, estimated from the same sample,
    /// does to every dose.
    ///
    /// Taylor linearisation (Särndal, Swensson and Wretman, *Model Assisted Survey Sampling* (1992), section 5.5): doses fall with the
    /// charge `C` of the mask as `d ln D = −κ·d ln C`, where `D = (1 + η)/(1 + 2ηU)` gives `κ = 2ηU/(1 + 2ηU) = 1 − D/(1 + η)`; so with
    /// `F` seconds of flashing in all a figure of charge `c` and time `t` scatters as `t − κ·F·c/C`.
    fn beam(
        &self,
        terms: &Terms<'_>,
        basis: &Basis,
        method: Method,
        sums: &[Sums],
        map: Option<DoseMap>,
    ) -> Total {
        let profile = terms.profile;
        let beam = self.weights.total(&|i| sums[i].time(profile).0);
        let charge = |i: usize| charge_of(&self.units[i], self.by_unit[i], method);
        let all_charge = self.weights.total(&charge).value;
        let Some(map) = map.filter(|_| all_charge > 0.0) else {
            return beam;
        };
        let settling = |sums: Sums| Sums { dose: 0.0, ..sums }.time(profile).0;
        let flashing = |i: usize| sums[i].time(profile).0 - settling(sums[i]);
        let by_charge = (1.0 - map.mean_dose / (1.0 + basis.correction.ratio)).clamp(0.0, 1.0)
            * self.weights.total(&flashing).value
            / all_charge;
        let linear = |i: usize| sums[i].time(profile).0 - by_charge * charge(i);
        Total {
            half_width: self.weights.total(&linear).half_width,
            ..beam
        }
    }
}

/// One fracture at the doses of places, known from those drawn.
pub(super) struct PlacedSums<'a> {
    pub(super) method: Method,
    /// By clip.
    pub(super) exposed: Vec<Exposed<'a>>,
    pub(super) map: Option<DoseMap>,
    /// By figure, on the field; of those not drawn 0.
    pub(super) sums: Vec<Sums>,
    pub(super) shots: Total,
    pub(super) beam: Total,
}

impl PlacedSums<'_> {
    /// Whether its totals are as sure as asked; those of the plain staircase are not asked for.
    pub(super) fn is_within(&self, share: f64) -> bool {
        let sure = |total: Total| total.relative() <= share;
        self.method == Method::Staircase || (sure(self.shots) && sure(self.beam))
    }
}

/// Shots and scores by clip and figure, of those drawn.
fn made_of(
    clips: &[Clip<'_>],
    units: &[Unit<'_>],
    by_unit: &[Option<&Measured>],
) -> Vec<ByMethod<Arc<MadeMask>>> {
    let of_clip = |clip: usize| {
        let mut made = ByMethod::default();
        for method in Method::ALL {
            let one = |(_, measured): (&Unit<'_>, &Option<&Measured>)| {
                let made = measured.and_then(|m| m.made.get(method));
                made.cloned().unwrap_or(Err(Unmade::NotDrawn))
            };
            let all = units.iter().zip(by_unit);
            let own = all.filter(|(unit, _)| unit.clip == clip);
            *made.slot(method) = Some(Arc::new(own.map(one).collect()));
        }
        made
    };
    (0..clips.len()).map(of_clip).collect()
}

/// What stands on the density map for the shots of figures that were not drawn: slabs of their outlines, with as much dose times area to
/// the area of the outline as those drawn have.
fn stood_in(
    units: &[Unit<'_>],
    weights: &Weights<'_>,
    by_unit: &[Option<&Measured>],
    method: Method,
    blur: Blur,
) -> Vec<Option<ShotList>> {
    let places = |i: usize| units[i].places * units[i].copies;
    let charge = |i: usize| charge_of(&units[i], by_unit[i], method);
    let outlines: Vec<f64> = units
        .par_iter()
        .map(|u| u.distinct.figure.area_nm2())
        .collect();
    let outline: f64 = (0..units.len()).map(|i| places(i) * outlines[i]).sum();
    let ratio = weights.total(&charge).value / outline;
    let one = |(i, unit): (usize, &Unit<'_>)| {
        if by_unit[i].is_some() {
            return None;
        }
        let rects = made::slabs(&unit.distinct.figure, blur);
        let covered: f64 = rects.iter().copied().map(Rect::area_nm2).sum();
        let dose = Dose(ratio * outlines[i] / covered);
        let shot = |r: &Rect| Shot {
            x0: r.min.x,
            y0: r.min.y,
            x1: r.max.x,
            y1: r.max.y,
            dose,
        };
        let shots = rects.iter().map(shot).collect();
        (covered > 0.0).then(|| ShotList::new(AddressUnit::FINEST, shots))
    };
    units.par_iter().enumerate().map(one).collect()
}

/// Dose times area of a figure drawn at all its places, nm²; of one that was not drawn 0.
fn charge_of(unit: &Unit<'_>, measured: Option<&Measured>, method: Method) -> f64 {
    let made = measured.and_then(|measured| measured.made.get(method));
    let shots = made.and_then(|made| Some(&made.as_ref().ok()?.fracture.shots));
    let places = unit.places * unit.copies;
    shots.map_or(0.0, |shots| places * exposure::charge(shots))
}
