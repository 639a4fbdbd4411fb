//! Distinct figures: seen in the least of their eight orientations, with what stands near them.

use std::collections::HashMap;

use rayon::prelude::*;

use crate::geom::{Figure, Orientation, Point, Rect, Transform};

use super::clip::Piece;
use super::index::BoxIndex;
use super::outline::Outline;

/// A figure with its context in its own frame.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub(super) struct Canonical {
    pub(super) figure: Figure,
    /// Cut to the figure's bounds grown by the reach, sorted.
    pub(super) context: Vec<Figure>,
}

/// For each figure the indices of those nearer than `reach`, ascending.
pub(super) fn neighbours(outlines: &[Outline], reach: i64) -> Vec<Vec<usize>> {
    let boxes: Vec<Rect> = outlines.iter().map(|o| o.bounds).collect();
    let index = BoxIndex::new(&boxes);
    let near = |i: usize| {
        let mut near = Vec::new();
        index.touching(boxes[i].grown(reach), |j| {
            if j != i && outlines[i].nearer_than(&outlines[j], reach) {
                near.push(j);
            }
        });
        near.sort_unstable();
        near
    };
    (0..outlines.len()).into_par_iter().map(near).collect()
}

/// A figure and the pieces of others within reach, shifted by whole address units to the origin.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub(super) struct Neighbourhood {
    figure: Figure,
    near: Vec<Piece>,
}

/// The distinct neighbourhoods up to shifts by whole address units, `phase` added to all coordinates first, in the
/// order of their first figures: each with the shifts back to its figures.
///
/// What is drawn again and again one by one is turned and cut in [`canonical`] once.
pub(super) fn neighbourhoods(
    outlines: &[Outline],
    near: &[Vec<usize>],
    phase: Point,
    address: i64,
    reach: i64,
) -> Vec<(Neighbourhood, Vec<Point>)> {
    /// Neighbourhoods written out at a time: most are known already, and memory is held for the distinct ones only.
    const BLOCK: usize = 1 << 14;
    let at = |i: usize| {
        let own = &outlines[i];
        let corner = own.bounds.min + phase;
        let back = Point::new(
            corner.x - corner.x.rem_euclid(address),
            corner.y - corner.y.rem_euclid(address),
        );
        let (by, window) = (phase - back, own.bounds.grown(reach));
        let pieces = near[i]
            .iter()
            .filter_map(|&j| Piece::of(&outlines[j], window, by));
        let mut near: Vec<Piece> = pieces.collect();
        near.sort_unstable();
        let figure = own.figure.translated(by);
        (Neighbourhood { figure, near }, back)
    };
    let mut slots: HashMap<Neighbourhood, usize> = HashMap::new();
    let mut shifts: Vec<Vec<Point>> = Vec::new();
    for start in (0..outlines.len()).step_by(BLOCK) {
        let block = start..outlines.len().min(start + BLOCK);
        let found: Vec<(Neighbourhood, Point)> = block.into_par_iter().map(at).collect();
        for (neighbourhood, back) in found {
            let slot = *slots.entry(neighbourhood).or_insert(shifts.len());
            if slot == shifts.len() {
                shifts.push(Vec::new());
            }
            shifts[slot].push(back);
        }
    }
    let mut distinct: Vec<(usize, Neighbourhood)> = slots
        .into_iter()
        .map(|(neighbourhood, slot)| (slot, neighbourhood))
        .collect();
    distinct.par_sort_unstable_by_key(|(slot, _)| *slot);
    distinct
        .into_iter()
        .map(|(_, neighbourhood)| neighbourhood)
        .zip(shifts)
        .collect()
}

/// A neighbourhood in the figure's own frame, and all ways from there back (more than one if symmetric).
///
/// The least figure of the eight orientations wins, among equals the least context. Slanted edges are cut in the own frame, so a mirrored
/// copy of the same surroundings is cut alike to the picometre.
pub(super) fn canonical(
    Neighbourhood { figure, near }: &Neighbourhood,
    address: i64,
    reach: i64,
) -> (Canonical, Vec<Transform>) {
    let mut least: Option<Figure> = None;
    let mut into: Vec<Transform> = Vec::new();
    for orientation in Orientation::all() {
        let turn = Transform {
            orientation,
            shift: Point::default(),
        };
        let corner = turn.apply_rect(figure.bounds()).min;
        let shift = Point::new(
            -(corner.x - corner.x.rem_euclid(address)),
            -(corner.y - corner.y.rem_euclid(address)),
        );
        let way = Transform { orientation, shift };
        let own = figure.transformed(way).normalized();
        match least.as_ref().map(|l| own.cmp(l)) {
            Some(std::cmp::Ordering::Greater) => {}
            Some(std::cmp::Ordering::Equal) => into.push(way),
            _ => {
                least = Some(own);
                into = vec![way];
            }
        }
    }
    let own = least.unwrap_or_else(|| figure.clone());
    let mut context: Option<Vec<Figure>> = near.is_empty().then(Vec::new);
    if !near.is_empty() {
        let window = own.bounds().grown(reach);
        let mut ways = Vec::new();
        for way in into {
            let mut cut: Vec<Figure> = near
                .iter()
                .flat_map(|piece| piece.cut(way, window))
                .collect();
            cut.sort();
            match context.as_ref().map(|c| cut.cmp(c)) {
                Some(std::cmp::Ordering::Greater) => {}
                Some(std::cmp::Ordering::Equal) => ways.push(way),
                _ => {
                    context = Some(cut);
                    ways = vec![way];
                }
            }
        }
        into = ways;
    }
    let back = into.into_iter().map(Transform::inverse).collect();
    (
        Canonical {
            figure: own,
            context: context.unwrap_or_default(),
        },
        back,
    )
}
