//! Brings a model to where the rule holds at every sample: moves shots, and where that does not do, adds some.

use super::model::{Flash, Model};
use super::reduce::neighbours;
use super::solve::Solver;

/// Rounds over the whole figure at most.
const ROUNDS: usize = 8;

/// Steps of one fit.
const STEPS: usize = 30;

/// Whether the rule holds at all samples, after moving what had to move, `window` shots at a time.
pub(in crate::fracture) fn relax(model: &mut Model, solver: &mut Solver, window: usize) -> bool {
    for _ in 0..ROUNDS {
        let bad = offenders(model, solver);
        if bad.is_empty() {
            return true;
        }
        let mut moved = false;
        let mut done = vec![false; model.slots()];
        for slot in bad {
            if done[slot] {
                continue;
            }
            let (before, outcome, slots) = settle(model, solver, &[slot], Vec::new(), window);
            moved |= outcome.cost < 0.9 * before;
            if outcome.solved {
                slots.into_iter().for_each(|s| done[s] = true);
            }
        }
        if !moved {
            break;
        }
    }
    offenders(model, solver).is_empty()
}

/// Adds or splits shots where moving them does not do, at most `most` times; whether the rule holds in the end.
pub(in crate::fracture) fn mend(
    model: &mut Model,
    solver: &mut Solver,
    window: usize,
    most: usize,
) -> bool {
    for _ in 0..most {
        if relax(model, solver, window) {
            return true;
        }
        let Some((place, must_print)) = worst(model) else {
            return false;
        };
        let options = options(model, place, must_print);
        let tried = options.into_iter().map(|(removed, added)| {
            let mut copy = model.clone();
            let (_, outcome, _) = settle(&mut copy, solver, &removed, added, window);
            (outcome.cost, copy)
        });
        // The first of equals wins, so the result does not hang on the order of a float sort.
        let Some((_, best)) = tried.reduce(|a, b| if b.0 < a.0 { b } else { a }) else {
            return false;
        };
        *model = best;
    }
    relax(model, solver, window)
}

/// Fits the neighbourhood of `removed` with `added` in their place (themselves when that is empty) and keeps what is better.
///
/// Gives the cost before, the outcome, and the slots that were moved.
fn settle(
    model: &mut Model,
    solver: &mut Solver,
    removed: &[usize],
    added: Vec<Flash>,
    window: usize,
) -> (f64, super::solve::Outcome, Vec<usize>) {
    let fresh = !added.is_empty();
    let mut removed = removed.to_vec();
    let mut flashes = if fresh {
        added
    } else {
        removed.iter().filter_map(|&s| model.get(s)).collect()
    };
    for slot in neighbours(model, &removed, &flashes, window) {
        removed.push(slot);
        flashes.extend(model.get(slot));
    }
    let before = solver.score(model, &removed, &flashes);
    let outcome = solver.solve(model, &removed, &mut flashes, STEPS);
    if fresh || outcome.cost < before {
        removed = solver.commit(model, &removed, &flashes);
    }
    (before, outcome, removed)
}

/// Ways to have one shot more about a place.
fn options(model: &Model, place: [f64; 2], must_print: bool) -> Vec<(Vec<usize>, Vec<Flash>)> {
    let sigma = model.sigma;
    let here = Flash::new([place[0], place[1], place[0], place[1]]);
    let mut near: Vec<(f64, usize)> = model
        .near(here.grown(3.0 * sigma).side)
        .into_iter()
        .filter_map(|s| model.get(s).map(|f| (f.gap(&here), s)))
        .collect();
    near.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut options = Vec::new();
    if must_print {
        options.push((Vec::new(), vec![here.grown(sigma)]));
    }
    for &(_, slot) in near.iter().take(2) {
        let Some(f) = model.get(slot) else { continue };
        for axis in 0..2 {
            let (low, high) = (f.side[axis], f.side[axis + 2]);
            let cut = place[axis].clamp(low + 0.3 * (high - low), high - 0.3 * (high - low));
            let (mut a, mut b) = (f, f);
            a.side[axis + 2] = cut;
            b.side[axis] = cut;
            options.push((vec![slot], vec![a, b]));
        }
    }
    options
}

/// Slots of shots that come nearest to a sample where the rule is broken, ascending.
fn offenders(model: &Model, solver: &Solver) -> Vec<usize> {
    let reach = 3.0 * model.sigma;
    let mut slots = Vec::new();
    for (sample, &dose) in model.samples().iter().zip(model.doses()) {
        if sample.sign * (dose - 0.5) >= solver.rules.guard {
            continue;
        }
        let [x, y] = sample.place;
        let here = Flash::new([x, y, x, y]);
        let near = model
            .near(here.grown(reach).side)
            .into_iter()
            .filter_map(|s| model.get(s).map(|f| (f.gap(&here), s)));
        if let Some((_, slot)) = near.min_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1))) {
            slots.push(slot);
        } else if sample.sign > 0.0 {
            // Nothing near: any shot will do to say that the rule is broken; mending adds one here.
            slots.extend(model.flashes().next().map(|(s, _)| s));
        }
    }
    slots.sort_unstable();
    slots.dedup();
    slots
}

/// The sample that misses the rule by most, and whether it must print.
fn worst(model: &Model) -> Option<([f64; 2], bool)> {
    let missed =
        |(s, d): (&super::samples::Sample, &f32)| (s.sign * (0.5 - d), s.place, s.sign > 0.0);
    let worst = model
        .samples()
        .iter()
        .zip(model.doses())
        .map(missed)
        .reduce(|a, b| if b.0 > a.0 { b } else { a })?;
    Some((worst.1, worst.2))
}
