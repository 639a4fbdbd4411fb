//! Fractures and scores made so far, kept by what they depend on, so that quotes of one mask under changed terms share them.

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::fracture::Effort;
use crate::judge::Settings;
use crate::mask::Mask;

use super::made::{self, MadeMask, Setup};
use super::result::Method;
use super::{Terms, fracturer};

/// What has been made, by mask and terms. Masks are told apart by the number that the caller gives them.
#[derive(Debug, Default)]
pub struct Kept {
    made: BTreeMap<MadeKey, Arc<MadeMask>>,
    fractured: u64,
    reused: u64,
}

/// All that a score depends on: the fracture, the backscatter ratio and density under it, and the errors of the error budget.
type MadeKey = (FractureKey, [u64; 5]);

/// All that a fracture depends on. Numbers by their bits: equal numbers, equal keys.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
struct FractureKey {
    mask: usize,
    method: Method,
    sigma: u64,
    tolerance: u64,
    address: i64,
    sides: [u64; 3],
    /// How far the plain staircase may stray; of no matter to the others.
    within: Option<u64>,
    /// How hard is searched; of no matter to the plain staircase.
    effort: Option<Effort>,
    /// Peak and levels of the doses; of the overlap fracture.
    doses: Option<(Option<u64>, Vec<u64>)>,
}

impl FractureKey {
    fn new(mask: usize, method: Method, terms: &Terms<'_>, setup: &Setup) -> Self {
        let limits = setup.limits;
        let plain = method == Method::Staircase;
        Self {
            mask,
            method,
            sigma: setup.blur.sigma().0.to_bits(),
            tolerance: setup.tolerance.0.to_bits(),
            address: limits.address.pm(),
            sides: [limits.least_side, limits.greatest_side, limits.sliver].map(|s| s.0.to_bits()),
            within: plain.then(|| terms.within.0.to_bits()),
            effort: (!plain).then_some(terms.effort),
            doses: (method == Method::Overlap).then(|| {
                let levels = terms.dose_levels.iter().map(f64::to_bits);
                (
                    terms.peak_dose.map(|dose| dose.0.to_bits()),
                    levels.collect(),
                )
            }),
        }
    }
}

impl Kept {
    /// Figures fractured so far, counted for each method and each setup that they were fractured for.
    #[must_use]
    pub fn fractured(&self) -> u64 {
        self.fractured
    }

    /// Figures whose fracture was asked for again and taken from here.
    #[must_use]
    pub fn reused(&self) -> u64 {
        self.reused
    }

    /// Shots and scores of every distinct figure; `tick` is called twice for each, whether made anew or not.
    pub(super) fn made(
        &mut self,
        (number, mask): (usize, &Mask),
        method: Method,
        (terms, setup): (&Terms<'_>, &Setup),
        settings: &Settings,
        tick: &(dyn Fn() + Sync),
    ) -> Arc<MadeMask> {
        let fracture = FractureKey::new(number, method, terms, setup);
        let (background, errors) = (settings.background, settings.errors.unwrap_or_default());
        let base_dose = errors.base_dose.map_or(0.0, |dose| dose.0);
        let numbers = [
            background.ratio,
            background.density,
            errors.edge.0,
            errors.dose,
            base_dose,
        ];
        let key = (fracture.clone(), numbers.map(f64::to_bits));
        let figures = mask.figures.len() as u64;
        let skip = |ticks: u64| (0..ticks).for_each(|_| tick());
        if let Some(made) = self.made.get(&key) {
            self.reused += figures;
            skip(2 * figures);
            return Arc::clone(made);
        }
        // The same shots may have been judged over another background.
        let (from, to) = ((fracture.clone(), [0; 5]), (fracture, [u64::MAX; 5]));
        let fractures = match self.made.range(from..=to).next() {
            Some((_, made)) => {
                self.reused += figures;
                skip(figures);
                made::fractures_of(made)
            }
            None => {
                self.fractured += figures;
                made::fracture(mask, fracturer(method, terms).as_ref(), setup, tick)
            }
        };
        let made = Arc::new(made::judge(mask, fractures, settings, tick));
        self.made.insert(key, Arc::clone(&made));
        made
    }
}
