//! Remedies tried on one figure: its shots with each, the seconds that they save, and the edge error against the outline as drawn.

use rayon::prelude::*;

use crate::fracture::tile::Staircase;
use crate::fracture::{Fracture, Fracturer, Job};
use crate::geom::{Figure, Rect, offset};
use crate::judge::{self, Fidelity, Pieces};
use crate::quote::made::{self, Made, Scene, Unmade, first_place};
use crate::quote::result::{FigureRemedies, Method, Remedy, Trial};
use crate::quote::{exposure, fracturer, hours, summary};
use crate::shot::{Shot, ShotList};
use crate::units::Nm;
use crate::write_time::{Sums, WriteTimeError};

use super::{Shop, Subject, Tested, Tried};

/// Looser tolerances tried, multiples of the mask's.
const LOOSER: [f64; 2] = [1.5, 2.0];
/// Radii of smoothing tried, σ: half of it changes what the blur hides anyway, a whole one what it does not quite.
const SMOOTHER: [f64; 2] = [0.5, 1.0];
/// Plain staircases tried, multiples of the tolerance.
const COARSER: [f64; 2] = [2.0, 3.0];
/// Doses tried.
const DOSES: [f64; 2] = [0.95, 1.05];
/// A remedy that strays further than this many tolerances, and the accuracy of a contour, is none.
const FURTHEST: f64 = 2.0;
/// To how much of a nm a contour is found.
const CONTOUR_NM: f64 = 0.01;

impl Shop<'_> {
    /// Every remedy on each of these figures.
    pub(super) fn try_all(&self, subjects: &[&Subject]) -> Result<Tried, WriteTimeError> {
        subjects
            .par_iter()
            .filter_map(|subject| {
                let tried = self.try_one(subject).transpose()?;
                Some(tried.map(|tried| (subject.key(), tried)))
            })
            .collect()
    }

    /// Every remedy on one figure; `None` where it has no shots.
    fn try_one(&self, subject: &Subject) -> Result<Option<Tested>, WriteTimeError> {
        let Ok(now) = &self.made[subject.clip][subject.figure] else {
            return Ok(None);
        };
        let before = self.seconds(subject, &now.fracture)?;
        let (mut trials, mut fractures) = (Vec::new(), Vec::new());
        for remedy in self.candidates() {
            let Some(fracture) = self.fractured(subject, now, remedy) else {
                continue;
            };
            let fidelity = self.judged(subject, &fracture);
            let seconds = self.seconds(subject, &fracture)?;
            let scores = fidelity.summary();
            let furthest = FURTHEST * self.basis.setup.tolerance.0 + CONTOUR_NM;
            let near = scores
                .edge_error_nm
                .worst
                .is_some_and(|worst| worst <= furthest);
            trials.push(Trial {
                remedy,
                shots: fracture.shots.len() as u64,
                seconds,
                saved_s: before - seconds,
                edge_error_nm: summary::edge_error(&scores),
                prints_within_tolerance: scores.prints_within_tolerance,
                acceptable: near
                    && fidelity.pieces == Pieces::default()
                    && scores.unmeasured_share == Some(0.0),
            });
            fractures.push(fracture);
        }
        let distinct = self.distinct(subject);
        let corner = first_place(distinct)
            .apply_rect(distinct.figure.bounds())
            .min;
        let remedies = FigureRemedies {
            clip: subject.clip as u64 + 1,
            figure: subject.figure as u64,
            place_nm: corner.to_nm(),
            method: self.method,
            shots: now.fracture.shots.len() as u64,
            seconds: before,
            edge_error_nm: summary::edge_error(&now.fidelity.summary()),
            trials,
        };
        Ok(Some(Tested {
            remedies,
            fractures,
        }))
    }

    fn candidates(&self) -> Vec<Remedy> {
        let (tolerance, sigma) = (
            self.basis.setup.tolerance.0,
            self.basis.setup.blur.sigma().0,
        );
        let other = match self.method {
            Method::Overlap => Method::Tile,
            Method::Tile | Method::Staircase => Method::Overlap,
        };
        let looser = LOOSER.map(|times| Remedy::LooserTolerance {
            tolerance_nm: times * tolerance,
        });
        let smoother = SMOOTHER.map(|times| Remedy::Smoother {
            radius_nm: times * sigma,
        });
        let coarser = COARSER.map(|times| Remedy::CoarserStaircase {
            within_nm: times * tolerance,
        });
        let doses = DOSES.map(|dose| Remedy::OtherDose { dose });
        let mut all = looser.to_vec();
        all.push(Remedy::OtherFracture { method: other });
        all.extend(smoother.into_iter().chain(coarser).chain(doses));
        all
    }

    /// The shots of a figure with the remedy; `None` where there are none to speak of.
    fn fractured(&self, subject: &Subject, now: &Made, remedy: Remedy) -> Option<Fracture> {
        let (setup, distinct) = (&self.basis.setup, self.distinct(subject));
        let own = fracturer(self.method, self.terms);
        let cut = |fracturer: &dyn Fracturer, figure: &Figure, tolerance: Nm| {
            let job = Job {
                flashed: &[],
                figure,
                context: &distinct.context,
                blur: setup.blur,
                tolerance,
                limits: setup.limits,
            };
            fracturer
                .fracture(&job)
                .ok()
                .filter(|made| !made.shots.is_empty())
        };
        match remedy {
            Remedy::LooserTolerance { tolerance_nm } => {
                cut(own.as_ref(), &distinct.figure, Nm(tolerance_nm))
            }
            Remedy::OtherFracture { method } => cut(
                fracturer(method, self.terms).as_ref(),
                &distinct.figure,
                setup.tolerance,
            ),
            Remedy::Smoother { radius_nm } => cut(
                own.as_ref(),
                &smooth(&distinct.figure, Nm(radius_nm))?,
                setup.tolerance,
            ),
            Remedy::CoarserStaircase { within_nm } => {
                let plain = Staircase {
                    within: Nm(within_nm),
                };
                cut(&plain, &distinct.figure, setup.tolerance)
            }
            Remedy::OtherDose { dose } => {
                let shots = now.fracture.shots.shots().iter();
                let shots = shots
                    .map(|shot| Shot {
                        dose: shot.dose * dose,
                        ..*shot
                    })
                    .collect();
                Some(Fracture {
                    shots: ShotList::new(now.fracture.shots.address(), shots),
                    ..now.fracture.clone()
                })
            }
        }
    }

    /// How these shots print the figure as drawn, beside the neighbours' as they are.
    fn judged(&self, subject: &Subject, fracture: &Fracture) -> Fidelity {
        let mask = self.clips[subject.clip].mask;
        let blur = self.basis.setup.blur;
        let of = |other: usize, window: Rect| match &self.fractures[subject.clip][other] {
            _ if other == subject.figure => fracture.shots.rects().collect(),
            Ok(fracture) => fracture.shots.rects().collect(),
            Err(Unmade::NotDrawn) => made::stand_in(&mask.figures[other].figure, window, blur),
            Err(Unmade::Fracture(_)) => Vec::new(),
        };
        let scene = Scene::with(
            mask,
            &self.standings[subject.clip],
            subject.figure,
            blur,
            of,
        );
        let figure = &self.distinct(subject).figure;
        judge::judge(figure, &scene.neighbours, &scene.dose, &self.basis.settings)
    }

    /// Flashing and settling at all places, on the field where clips stand for one.
    fn seconds(&self, subject: &Subject, fracture: &Fracture) -> Result<f64, WriteTimeError> {
        let clip = &self.clips[subject.clip];
        let portions = exposure::evenly(self.distinct(subject), &fracture.shots, subject.dose);
        let placed = hours::placed(&portions);
        let (borders, spacing) = hours::borders(clip, self.terms.field);
        let sums = Sums::new(self.terms.profile, &placed, borders, spacing)?;
        Ok(sums.time(self.terms.profile).0 * clip.copies_exactly(self.terms.field))
    }
}

/// Convex corners and bumps rounded by opening, concave ones by closing; `None` where less or more than one figure is left.
fn smooth(figure: &Figure, radius: Nm) -> Option<Figure> {
    let r = radius.to_pm()?;
    let opened = offset(&offset(std::slice::from_ref(figure), -r), r);
    let closed = offset(&offset(&opened, r), -r);
    match <[Figure; 1]>::try_from(closed) {
        Ok([one]) => Some(one),
        Err(_) => None,
    }
}
