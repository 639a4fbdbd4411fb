//! Drops and merges shots as long as the others can be moved to mend what that breaks.

use std::cmp::Ordering;
use std::collections::{BinaryHeap, HashSet};

use super::model::{Flash, Model};
use super::solve::Solver;

/// How much work a search may be.
#[derive(Clone, Copy, Debug)]
pub(in crate::fracture) struct Budget {
    /// Shots moved together in one trial.
    pub(in crate::fracture) window: usize,
    /// Shots further apart than this (σ) are not merged when they may overlap others.
    pub(in crate::fracture) apart: f64,
    /// Steps of one trial.
    pub(in crate::fracture) steps: usize,
    /// Trials whose first cost is over this are not made.
    pub(in crate::fracture) hopeless: f64,
}

impl Budget {
    /// What tiles need at normal effort.
    pub(in crate::fracture) const TILES: Self = Self {
        window: 8,
        apart: 0.5,
        steps: 20,
        hopeless: 0.5,
    };
}

/// A shot whose sides all move by less than this (σ) keeps the moves it has queued, and those that failed stay failed.
const STILL: f64 = 0.2;

/// One way to have a shot less: what goes and what comes in its place.
struct Move {
    score: f64,
    number: u64,
    removed: Vec<(usize, u32)>,
    added: Vec<Flash>,
}

impl PartialEq for Move {
    fn eq(&self, other: &Self) -> bool {
        self.number == other.number
    }
}

impl Eq for Move {}

impl PartialOrd for Move {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Move {
    /// The cheapest first out of a max-heap; the older first among equals.
    fn cmp(&self, other: &Self) -> Ordering {
        other
            .score
            .total_cmp(&self.score)
            .then(other.number.cmp(&self.number))
    }
}

/// The search for shots that can go.
struct Reduction<'a> {
    model: &'a mut Model,
    solver: &'a mut Solver,
    budget: Budget,
    moves: BinaryHeap<Move>,
    offered: u64,
    /// Raised whenever a slot's shot changes: older moves of it are void.
    version: Vec<u32>,
}

/// Takes shots away until no single drop or merge that involves one of `slots`, or a shot moved for it, can be mended any more.
pub(super) fn reduce(model: &mut Model, solver: &mut Solver, budget: Budget, slots: &[usize]) {
    let version = vec![0; model.slots()];
    let mut reduction = Reduction {
        model,
        solver,
        budget,
        moves: BinaryHeap::new(),
        offered: 0,
        version,
    };
    reduction.offer(slots);
    while let Some(m) = reduction.moves.pop() {
        let current = m
            .removed
            .iter()
            .all(|&(slot, version)| reduction.version[slot] == version);
        if current && let Some(changed) = reduction.attempt(&m) {
            reduction.offer(&changed);
        }
    }
}

impl Reduction<'_> {
    /// Queues all moves that involve the shots in `slots`.
    fn offer(&mut self, slots: &[usize]) {
        let sigma = self.model.sigma;
        let mut offered = HashSet::with_capacity(slots.len());
        for &i in slots {
            let Some(f) = self.model.get(i) else { continue };
            self.queue(&[i], Vec::new());
            let apart = if self.solver.rules.disjoint {
                0.5 * sigma
            } else {
                self.budget.apart * sigma
            };
            for j in self.model.near(f.grown(apart).side) {
                // A pair with a shot offered before is queued already.
                if j == i || !self.model.is_movable(j) || offered.contains(&j) {
                    continue;
                }
                let Some(g) = self.model.get(j).filter(|g| f.gap(g) < apart) else {
                    continue;
                };
                let levels = self.solver.rules.levels;
                for dose in levels.iter() {
                    self.queue(&[i, j], vec![merged(&f, &g).with(dose)]);
                    if !self.solver.rules.disjoint {
                        self.queue(&[i, j], vec![f.hull(&g).with(dose)]);
                    }
                    // One of the two goes, the other takes over at another dose.
                    for one in [f, g] {
                        if levels.several() && dose != one.dose {
                            self.queue(&[i, j], vec![one.with(dose)]);
                        }
                    }
                }
            }
            offered.insert(i);
        }
    }

    fn queue(&mut self, removed: &[usize], added: Vec<Flash>) {
        // A sample deeper than 1 σ inside a shot gets at least Φ(1)² = 0.708: 0.2 too much where it must not print.
        let deep = |f: &Flash| {
            let samples = self.model.clear_samples_in(f.grown(-self.model.sigma).side);
            #[allow(clippy::cast_precision_loss, reason = "a count of samples")]
            let samples = samples as f64;
            // Exactly 0.04 at dose 1.
            samples * 0.04 * (5.0 * (0.7 * f.dose - 0.5)).max(0.0).powi(2)
        };
        if added.iter().map(deep).sum::<f64>() > self.budget.hopeless {
            return;
        }
        let score = self.solver.estimate(self.model, removed, &added);
        if score > self.budget.hopeless {
            return;
        }
        self.offered += 1;
        let removed = removed
            .iter()
            .map(|&slot| (slot, self.version[slot]))
            .collect();
        self.moves.push(Move {
            score,
            number: self.offered,
            removed,
            added,
        });
    }

    /// Makes the move if the neighbours can mend it; the slots whose shots are new or moved by enough to matter.
    fn attempt(&mut self, m: &Move) -> Option<Vec<usize>> {
        let core: Vec<usize> = m.removed.iter().map(|&(slot, _)| slot).collect();
        let mut removed = neighbours(self.model, &core, &m.added, self.budget.window);
        let before: Vec<Flash> = removed.iter().filter_map(|&s| self.model.get(s)).collect();
        // Neighbours first, so that they keep their slots.
        let mut window = before.clone();
        window.extend_from_slice(&m.added);
        removed.extend(&core);
        let steps = self.budget.steps;
        if !self
            .solver
            .solve(self.model, &removed, &mut window, steps)
            .solved
        {
            return None;
        }
        let slots = self.solver.commit(self.model, &removed, &window);
        let still = STILL * self.model.sigma;
        let rests = |i: usize| {
            before
                .get(i)
                .is_some_and(|f| (0..4).all(|k| (f.side[k] - window[i].side[k]).abs() < still))
        };
        let changed: Vec<usize> = (0..slots.len())
            .filter(|&i| !rests(i))
            .map(|i| slots[i])
            .collect();
        self.version.resize(self.model.slots(), 0);
        for &slot in changed.iter().chain(&core) {
            self.version[slot] += 1;
        }
        Some(changed)
    }
}

/// Two shots as one: spans both along the axis that they are strung along, and their mean across it.
fn merged(f: &Flash, g: &Flash) -> Flash {
    let mut one = f.hull(g);
    let along = usize::from(f.gap_along(g, 1) > f.gap_along(g, 0));
    let across = 1 - along;
    let (lf, lg) = (f.length(along), g.length(along));
    for end in [across, across + 2] {
        one.side[end] = (f.side[end] * lf + g.side[end] * lg) / (lf + lg);
    }
    one
}

/// Slots of the shots nearest to some that go or come, nearest first, so that there are at most `most` in all.
pub(super) fn neighbours(
    model: &Model,
    removed: &[usize],
    added: &[Flash],
    most: usize,
) -> Vec<usize> {
    let core: Vec<Flash> = removed
        .iter()
        .filter_map(|&s| model.get(s))
        .chain(added.iter().copied())
        .collect();
    let Some(hull) = core.iter().copied().reduce(|a, b| a.hull(&b)) else {
        return Vec::new();
    };
    let mut near: Vec<(f64, usize)> = model
        .near(hull.grown(6.0 * model.sigma).side)
        .into_iter()
        .filter(|&s| model.is_movable(s) && !removed.contains(&s))
        .filter_map(|s| {
            model.get(s).map(|f| {
                (
                    core.iter().map(|c| f.gap(c)).fold(f64::INFINITY, f64::min),
                    s,
                )
            })
        })
        .collect();
    near.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    near.truncate(most.saturating_sub(added.len()));
    near.into_iter().map(|(_, s)| s).collect()
}
