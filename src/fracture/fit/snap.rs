//! Brings shots to the address grid, and checks the whole neighbourhood.

use crate::blur::{PhiTable, THRESHOLD};
use crate::shot::{AddressUnit, Shot, ShotLimits, ShotList};
use crate::target::{Need, Target, Violation, peaks};
use crate::units::{Dose, Nm};

use super::model::{Field, Flash, Model};
use super::samples::ContextDose;
use super::solve::Solver;

/// Dose that the check asks for beyond the threshold: what may lie between its places, which are 1 nm apart along the outline;
/// it falls with the square of their distance.
const SPARE: f64 = 0.001;

/// Step of the lattice on which peaks are looked for, σ.
const PEAK_STEP: f64 = 0.125;

/// A dose so little over the peak allowed is still under it: more than what the lattice hides.
const PEAK_SPARE: f64 = 5e-4;

/// Every place found where the shots break the rule, or keep it with no dose to spare.
///
/// What only lacks dose to spare is looked at again on a mesh so fine that next to nothing need be spared.
pub(in crate::fracture) fn check(
    target: &Target,
    model: &Model,
    context: &ContextDose,
) -> Vec<Violation> {
    let mut all = Vec::new();
    for around in context.around() {
        let field = Field {
            model,
            context: around,
            phi: PhiTable::get(),
        };
        all.extend(broken(target, &field, model.sigma, context));
    }
    all
}

/// [`check`] with one list of neighbours' shots.
fn broken(target: &Target, field: &Field<'_>, sigma: f64, context: &ContextDose) -> Vec<Violation> {
    let margin = 3.0 * sigma;
    let look = |step: f64, lattice: f64, spare: f64| {
        let mut found = target.violations(field, step, sigma / lattice, margin, spare);
        found.retain(|v| v.need == Need::Print || !context.may_print(v.place));
        found
    };
    let found = look(1.0, 4.0, SPARE);
    let broken = |v: &Violation| (v.need == Need::Print) != (v.dose >= THRESHOLD);
    if found.is_empty() || found.iter().any(broken) {
        found
    } else {
        look(0.25, 8.0, SPARE / 16.0)
    }
}

/// Places where the dose piles up to more than `peak` allows, with the dose there.
pub(in crate::fracture) fn piles(
    model: &Model,
    context: &ContextDose,
    peak: f64,
) -> Vec<([f64; 2], f64)> {
    let hull = model.flashes().map(|(_, f)| f).reduce(|a, b| a.hull(&b));
    let Some(hull) = hull else {
        return Vec::new();
    };
    let found = context.around().iter().flat_map(|around| {
        let field = Field {
            model,
            context: around,
            phi: PhiTable::get(),
        };
        peaks(
            &field,
            hull.side,
            PEAK_STEP * model.sigma,
            peak + PEAK_SPARE,
        )
    });
    found.collect()
}

/// Shots that the writer would refuse: sides outside the limits, or (tiles) on another shot.
pub(in crate::fracture) fn unfit(model: &Model, limits: &ShotLimits, disjoint: bool) -> Vec<Flash> {
    let off = |f: &Flash, axis: usize| {
        f.length(axis) < limits.least_side.0 - 1e-6
            || f.length(axis) > limits.greatest_side.0 + 1e-6
    };
    let clashes =
        |slot: usize, f: &Flash| disjoint && model.overlapped(slot, f, 1e-6).next().is_some();
    model
        .flashes()
        .filter(|(slot, f)| off(f, 0) || off(f, 1) || clashes(*slot, f))
        .map(|(_, f)| f)
        .collect()
}

/// Moves every side to the address grid, then single sides by one address as long as that mends what the rounding broke.
pub(in crate::fracture) fn snap(model: &mut Model, solver: &mut Solver, address: AddressUnit) {
    let unit = address.nm().0;
    let slots: Vec<usize> = model.flashes().map(|(s, _)| s).collect();
    for &slot in &slots {
        let Some(flash) = model.get(slot) else {
            continue;
        };
        let mut snapped = flash;
        snapped.side = flash
            .side
            .map(|v| address.coordinate(address.nearest(Nm(v))).0);
        keep_apart(model, solver, slot, &mut snapped, unit);
        if snapped != flash {
            replace(model, solver, slot, snapped);
        }
    }
    // Each improving move lowers the cost; a few rounds do, since the guard covers most of the rounding.
    for _ in 0..4 {
        if model.worst() <= 0.0 {
            return;
        }
        let mut better = false;
        for &slot in &slots {
            better |= nudge(model, solver, slot, unit);
        }
        if !better {
            return;
        }
    }
}

/// Shrinks a freshly rounded tile by the addresses by which it overlaps one already rounded or yet to be.
fn keep_apart(model: &Model, solver: &Solver, slot: usize, tile: &mut Flash, unit: f64) {
    if !solver.rules.disjoint {
        return;
    }
    for other in model.near(tile.side) {
        let Some(g) = model.get(other).filter(|_| other != slot) else {
            continue;
        };
        // What is yet to be rounded may come one unit nearer; it will then give way itself.
        let axis = usize::from(tile.gap_along(&g, 1) > tile.gap_along(&g, 0));
        if tile.gap(&g) < 0.0 && other < slot && tile.gap(&g) > -3.0 * unit {
            if tile.side[axis] < g.side[axis] {
                tile.side[axis + 2] = g.side[axis];
            } else {
                tile.side[axis] = g.side[axis + 2];
            }
        }
    }
}

/// Moves one side of a shot by one address if that lowers the cost; whether it did.
fn nudge(model: &mut Model, solver: &mut Solver, slot: usize, unit: f64) -> bool {
    let Some(flash) = model.get(slot) else {
        return false;
    };
    let now = solver.score(model, &[slot], &[flash]);
    if now == 0.0 {
        return false;
    }
    let mut best = (now, flash);
    for side in 0..4 {
        for by in [-unit, unit] {
            let mut moved = flash;
            moved.side[side] += by;
            let fits = (0..2).all(|axis| {
                let length = moved.length(axis);
                length >= solver.rules.least_side - 1e-6
                    && length <= solver.rules.greatest_side + 1e-6
            });
            let apart = !solver.rules.disjoint
                || model
                    .near(moved.side)
                    .into_iter()
                    .filter(|&s| s != slot)
                    .filter_map(|s| model.get(s))
                    .all(|g| moved.gap(&g) > -1e-6);
            if fits && apart {
                let cost = solver.score(model, &[slot], &[moved]);
                if cost < best.0 {
                    best = (cost, moved);
                }
            }
        }
    }
    let moved = best.1 != flash;
    if moved {
        replace(model, solver, slot, best.1);
    }
    moved
}

fn replace(model: &mut Model, solver: &mut Solver, slot: usize, flash: Flash) {
    solver.score(model, &[slot], &[flash]);
    solver.commit(model, &[slot], &[flash]);
}

/// The shots of a model whose sides lie on the address grid.
pub(in crate::fracture) fn shots(model: &Model, address: AddressUnit) -> ShotList {
    let shots = model.flashes().map(|(_, f)| {
        let [x0, y0, x1, y1] = f.side.map(|v| address.nearest(Nm(v)));
        Shot {
            x0,
            y0,
            x1,
            y1,
            dose: Dose(f.dose),
        }
    });
    ShotList::new(address, shots.collect())
}
