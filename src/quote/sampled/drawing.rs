//! Figures drawn: fractured, judged beside their neighbours' outlines, and timed.

use rayon::prelude::*;

use crate::fracture::{Fracture, Fracturer, Job};
use crate::geom::Rect;
use crate::judge::{self, Settings};
use crate::mask::Standings;
use crate::quote::exposure;
use crate::quote::hours::{self, Correction};
use crate::quote::made::{self, Made, Scene, Setup, Unmade};
use crate::quote::result::{ByMethod, Method};
use crate::quote::{Basis, Clip, Terms, fracturer};
use crate::units::Nm;
use crate::write_time::{Borders, Sums, WriteTimeError};

use super::unit::Unit;

/// A figure drawn: its shots and scores, and what they add up to at all places of its clip.
pub(super) struct Measured {
    pub(super) made: ByMethod<Result<Made, Unmade>>,
    pub(super) sums: ByMethod<Sums>,
}

/// Fractures and judges figures one by one.
pub(super) struct Drawing<'a> {
    clips: &'a [Clip<'a>],
    standings: Vec<Standings<'a>>,
    /// Where shots are cut, and the jump to the first shot of a figure; by clip.
    borders: Vec<(Borders, Nm)>,
    fracturers: [(Method, Box<dyn Fracturer>); 3],
    terms: &'a Terms<'a>,
    setup: Setup,
    settings: Settings,
    correction: Correction,
    tick: &'a (dyn Fn() + Sync),
}

impl<'a> Drawing<'a> {
    pub(super) fn new(
        clips: &'a [Clip<'a>],
        terms: &'a Terms<'a>,
        basis: &Basis,
        tick: &'a (dyn Fn() + Sync),
    ) -> Self {
        Self {
            clips,
            standings: clips.iter().map(|clip| Standings::new(clip.mask)).collect(),
            borders: clips
                .iter()
                .map(|clip| hours::borders(clip, terms.field))
                .collect(),
            fracturers: Method::ALL.map(|method| (method, fracturer(method, terms))),
            terms,
            setup: basis.setup,
            settings: basis.settings,
            correction: basis.correction,
            tick,
        }
    }

    pub(super) fn measure(
        &self,
        units: &[Unit<'_>],
        figures: &[usize],
    ) -> Result<Vec<Measured>, WriteTimeError> {
        figures.par_iter().map(|&i| self.one(&units[i])).collect()
    }

    fn one(&self, unit: &Unit<'_>) -> Result<Measured, WriteTimeError> {
        let mut measured = Measured {
            made: ByMethod::default(),
            sums: ByMethod::default(),
        };
        let job = Job {
            flashed: &[],
            figure: &unit.distinct.figure,
            context: &unit.distinct.context,
            blur: self.setup.blur,
            tolerance: self.setup.tolerance,
            limits: self.setup.limits,
        };
        for (method, fracturer) in &self.fracturers {
            let made = fracturer
                .fracture(&job)
                .map(|fracture| self.judged(unit, fracture))
                .map_err(Unmade::from);
            (self.tick)();
            (self.tick)();
            let sums = match &made {
                Ok(made) => {
                    // The dose of the mean coverage, until it is known what lies around.
                    let shots = &made.fracture.shots;
                    let portions = exposure::evenly(unit.distinct, shots, self.correction.dose);
                    let placed = hours::placed(&portions);
                    let (borders, spacing) = self.borders[unit.clip];
                    Sums::new(self.terms.profile, &placed, borders, spacing)? * unit.copies
                }
                Err(_) => Sums::default(),
            };
            *measured.sums.slot(*method) = Some(sums);
            *measured.made.slot(*method) = Some(made);
        }
        Ok(measured)
    }

    fn judged(&self, unit: &Unit<'_>, fracture: Fracture) -> Made {
        let mask = self.clips[unit.clip].mask;
        let flashes = |other: usize, window: Rect| {
            if other == unit.figure {
                fracture.shots.rects().collect()
            } else {
                made::stand_in(&mask.figures[other].figure, window, self.setup.blur)
            }
        };
        let scene = Scene::with(
            mask,
            &self.standings[unit.clip],
            unit.figure,
            self.setup.blur,
            flashes,
        );
        let figure = &unit.distinct.figure;
        Made {
            fidelity: judge::judge(figure, &scene.neighbours, &scene.dose, &self.settings),
            peak: made::peak(&scene.dose, &fracture),
            fracture,
        }
    }
}
