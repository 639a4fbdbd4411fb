//! Brings a model to where the rule holds at every sample: moves shots, and where that does not do, adds some.

use super::model::{Bins, Flash, Model};
use super::reduce::neighbours;
use super::samples::Sample;
use super::solve::{Outcome, Solver};

/// Rounds over the whole figure at most.
const ROUNDS: usize = 8;

/// A side is outside the limits by more than this, nm: what the fit leaves is less.
const UNFIT: f64 = 0.06;

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
            let Some(flash) = model.get(slot) else {
                continue;
            };
            let trial = Trial::run(model, solver, &[slot], vec![flash], window);
            moved |= trial.outcome.cost < 0.9 * trial.outcome.before;
            if trial.outcome.solved {
                trial.removed.iter().for_each(|&s| done[s] = true);
            }
            if trial.gain() > 0.0 {
                trial.keep(model, solver);
            }
        }
        if !moved {
            break;
        }
    }
    offenders(model, solver).is_empty()
}

/// Adds or splits shots where moving them does not do, at most `most`; whether the rule holds in the end.
///
/// With `slim`, the shots concerned may become slivers.
pub(in crate::fracture) fn mend(
    model: &mut Model,
    solver: &mut Solver,
    window: usize,
    most: usize,
    slim: bool,
) -> bool {
    let mut left = most;
    loop {
        if relax(model, solver, window) {
            return true;
        }
        // One at a time where all are near one another, since one often mends several places.
        if hopeless(model) {
            return false;
        }
        let places = worst(model, left.min(1 + model.movable().count() / 16));
        if places.is_empty() {
            return drop_unfit(model, solver, window, slim);
        }
        left -= places.len();
        for (place, must_print) in places {
            let mut best: Option<Trial> = None;
            for (removed, mut added) in options(model, place, must_print, slim) {
                added.iter_mut().for_each(|f| f.slim |= slim);
                let trial = Trial::run(model, solver, &removed, added, window);
                // The first of equals stays.
                if best.as_ref().is_none_or(|b| trial.gain() > b.gain()) {
                    best = Some(trial);
                }
            }
            if let Some(trial) = best {
                trial.keep(model, solver);
            }
        }
    }
}

/// A fit of some shots in place of others, not yet made in the model.
struct Trial {
    removed: Vec<usize>,
    flashes: Vec<Flash>,
    outcome: Outcome,
}

impl Trial {
    /// Fits `added` in place of `removed` together with the neighbours, `window` shots at most.
    fn run(
        model: &Model,
        solver: &mut Solver,
        removed: &[usize],
        added: Vec<Flash>,
        window: usize,
    ) -> Self {
        // Neighbours first, so that they keep their slots.
        let mut slots = neighbours(model, removed, &added, window);
        let mut flashes: Vec<Flash> = slots.iter().filter_map(|&s| model.get(s)).collect();
        slots.extend(removed);
        flashes.extend(added);
        let outcome = solver.solve(model, &slots, &mut flashes, STEPS);
        Self {
            removed: slots,
            flashes,
            outcome,
        }
    }

    /// By how much the cost falls.
    fn gain(&self) -> f64 {
        self.outcome.before - self.outcome.cost
    }

    /// Makes it in the model.
    fn keep(self, model: &mut Model, solver: &mut Solver) {
        solver.score(model, &self.removed, &self.flashes);
        solver.commit(model, &self.removed, &self.flashes);
    }
}

/// Takes away shots that are outside the limits or (tiles) on another, where the rule holds without them; with `slim`, lets those
/// be slivers that do not. Whether that leaves nothing wrong.
fn drop_unfit(model: &mut Model, solver: &mut Solver, window: usize, slim: bool) -> bool {
    for slot in offenders(model, solver) {
        let Some(flash) = model.get(slot) else {
            continue;
        };
        let mut options = vec![Vec::new()];
        if slim {
            options.push(vec![Flash { slim, ..flash }]);
        }
        for added in options {
            let trial = Trial::run(model, solver, &[slot], added, window);
            if trial.outcome.solved {
                trial.keep(model, solver);
                break;
            }
        }
    }
    offenders(model, solver).is_empty()
}

/// Makes shots that may be slivers wide enough to be none, where the rule can be kept.
pub(in crate::fracture) fn widen(model: &mut Model, solver: &mut Solver, window: usize) {
    let slim: Vec<usize> = model
        .flashes()
        .filter(|(_, f)| f.slim)
        .map(|(s, _)| s)
        .collect();
    for slot in slim {
        let Some(flash) = model.get(slot) else {
            continue;
        };
        let wide = Flash {
            slim: false,
            ..flash
        };
        let trial = Trial::run(model, solver, &[slot], vec![wide], window);
        if trial.outcome.solved {
            trial.keep(model, solver);
        }
    }
}

/// Ways to have one shot more about a place, and (`moved`) those that only move the nearest.
fn options(
    model: &Model,
    place: [f64; 2],
    must_print: bool,
    moved: bool,
) -> Vec<(Vec<usize>, Vec<Flash>)> {
    let sigma = model.sigma;
    let here = Flash::new([place[0], place[1], place[0], place[1]]);
    let mut near: Vec<(f64, usize)> = model
        .near(here.grown(3.0 * sigma).side)
        .into_iter()
        .filter(|&s| model.is_movable(s))
        .filter_map(|s| model.get(s).map(|f| (f.gap(&here), s)))
        .collect();
    near.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut options = Vec::new();
    if must_print {
        options.push((Vec::new(), vec![here.grown(sigma)]));
    }
    for &(_, slot) in near.iter().take(2) {
        let Some(f) = model.get(slot) else { continue };
        if moved {
            options.push((vec![slot], vec![f]));
        }
        for (axis, at) in place.iter().enumerate() {
            let (low, high) = (f.side[axis], f.side[axis + 2]);
            let cut = at.clamp(low + 0.3 * (high - low), high - 0.3 * (high - low));
            let (mut a, mut b) = (f, f);
            a.side[axis + 2] = cut;
            b.side[axis] = cut;
            options.push((vec![slot], vec![a, b]));
        }
    }
    options
}

/// Slots of shots that come nearest to a sample where the rule is broken, and of those outside the limits or (tiles) on another,
/// ascending.
pub(super) fn offenders(model: &Model, solver: &Solver) -> Vec<usize> {
    let reach = 3.0 * model.sigma;
    let rules = &solver.rules;
    let unfit = |slot: usize, f: &Flash| {
        !f.fits(rules.least(f), rules.greatest_side, UNFIT)
            || (rules.disjoint && model.overlapped(slot, f, UNFIT).next().is_some())
    };
    let mut slots: Vec<usize> = model
        .movable()
        .filter(|(slot, f)| unfit(*slot, f))
        .map(|(s, _)| s)
        .collect();
    for (sample, &dose) in model.samples().iter().zip(model.doses()) {
        if sample.sign * (dose - 0.5) >= solver.rules.guard {
            continue;
        }
        let [x, y] = sample.place;
        let here = Flash::new([x, y, x, y]);
        let near = model
            .near(here.grown(reach).side)
            .into_iter()
            .filter(|&s| model.is_movable(s))
            .filter_map(|s| model.get(s).map(|f| (f.gap(&here), s)));
        if let Some((_, slot)) = near.min_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1))) {
            slots.push(slot);
        } else if sample.sign > 0.0 {
            // Nothing near: any shot will do to say that the rule is broken; mending adds one here.
            slots.extend(model.movable().next().map(|(s, _)| s));
        }
    }
    slots.sort_unstable();
    slots.dedup();
    slots
}

/// Whether the rule is broken at so many samples that single shots cannot mend it.
fn hopeless(model: &Model) -> bool {
    let broken = model
        .samples()
        .iter()
        .zip(model.doses())
        .filter(|(s, d)| s.sign * (*d - 0.5) < 0.0)
        .count();
    5 * broken > model.samples().len()
}

/// Places that miss the rule by most, far enough apart to be mended one by one; each with whether it must print.
fn worst(model: &Model, most: usize) -> Vec<([f64; 2], bool)> {
    let missed = |(s, d): (&Sample, &f32)| (s.sign * (0.5 - d), s.place, s.sign > 0.0);
    let mut bad: Vec<_> = model
        .samples()
        .iter()
        .zip(model.doses())
        .map(missed)
        .filter(|m| m.0 > 0.0)
        .collect();
    bad.sort_by(|a, b| b.0.total_cmp(&a.0));
    let apart = 8.0 * model.sigma;
    let mut taken = Bins::new(model.bounds(), apart);
    let mut places: Vec<([f64; 2], bool)> = Vec::new();
    for (_, p, must_print) in bad {
        if places.len() == most {
            break;
        }
        let around = [p[0] - apart, p[1] - apart, p[0] + apart, p[1] + apart];
        if taken.items(around).next().is_none() {
            taken.insert(0, p);
            places.push((p, must_print));
        }
    }
    places
}
