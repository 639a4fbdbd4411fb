//! The figures that are drawn from: each with its clip, and the random number that it has wherever it stands.

use rayon::prelude::*;

use crate::mask::DistinctFigure;

use crate::quote::made::Setup;
use crate::quote::sample::{Features, Scale, Strata};
use crate::quote::{Clip, Terms};

/// A figure with its clip, both by number.
#[derive(Clone, Copy)]
pub(super) struct Unit<'a> {
    pub(super) clip: usize,
    pub(super) figure: usize,
    pub(super) distinct: &'a DistinctFigure,
    /// Places in its clip.
    pub(super) places: f64,
    /// How often the clip stands in the field.
    pub(super) copies: f64,
}

pub(super) fn units<'a>(clips: &[Clip<'a>], terms: &Terms<'_>) -> Vec<Unit<'a>> {
    let of_clip = |(number, clip): (usize, &Clip<'a>)| {
        let copies = clip.copies_exactly(terms.field);
        let figures = clip.mask.figures.iter().enumerate();
        figures
            .map(move |(figure, distinct)| Unit {
                clip: number,
                figure,
                distinct,
                places: distinct.place_count() as f64,
                copies,
            })
            .collect::<Vec<_>>()
    };
    clips.iter().enumerate().flat_map(of_clip).collect()
}

pub(super) fn strata(units: &[Unit<'_>], setup: &Setup, seed: u64) -> Strata {
    let of = |unit: &Unit<'_>| {
        let features = Features {
            places: unit.places * unit.copies,
            ..Features::of(&unit.distinct.figure, 1, setup.blur)
        };
        (features, number(unit, seed))
    };
    let figures: Vec<_> = units.par_iter().map(of).collect();
    let scale = Scale {
        sigma_nm: setup.blur.sigma().0,
        greatest_side_nm: setup.limits.greatest_side.0,
    };
    Strata::new(&figures, scale)
}

/// The random number of a figure: from the seed, its outline and those of its neighbours, so that it has the same wherever and in whatever order it stands.
fn number(unit: &Unit<'_>, seed: u64) -> u64 {
    let distinct = unit.distinct;
    let mut state = mix(seed ^ unit.clip as u64);
    let mut take = |n: u64| state = mix(state ^ n);
    for figure in std::iter::once(&distinct.figure).chain(&distinct.context) {
        for ring in figure.rings() {
            take(ring.points().len() as u64);
            for point in ring.points() {
                take(point.x.cast_unsigned());
                take(point.y.cast_unsigned());
            }
        }
    }
    state
}

/// One step of SplitMix64 (Steele, Lea, Flood, OOPSLA 2014).
fn mix(state: u64) -> u64 {
    let z = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
    let z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}
