//! Brings shots to the address grid, and checks the whole neighbourhood.

use crate::blur::{REACH, THRESHOLD};
use crate::shot::{AddressUnit, Shot, ShotLimits, ShotList};
use crate::target::{Mesh, Need, Target, Violation, peaks};
use crate::units::{Dose, Nm};

use super::core::Core;
use super::field::{Boxes, Field};
use super::model::{Flash, Model};
use super::samples::ContextDose;
use super::solve::Solver;

/// Dose that the check asks for beyond the threshold: what may lie between its places, which are 1 nm apart along the outline;
/// it falls with the square of their distance.
const SPARE: f64 = 0.001;

/// Step of the lattice on which peaks are looked for, σ.
const PEAK_STEP: f64 = 0.125;

/// A dose so little over the peak allowed is still under it: more than what the lattice hides.
const PEAK_SPARE: f64 = 5e-4;

/// What sums of coordinates that lie on the address grid may be off by, nm.
const ROUNDED: f64 = 1e-6;

/// Every place found where the shots break the rule, or keep it with no dose to spare.
///
/// What only lacks dose to spare is looked at again on a mesh so fine that next to nothing need be spared. Looks where dose of the
/// shots comes and in the figure, or only in some boxes; not so deep in the core that it prints for sure.
pub(super) fn check(
    target: &Target,
    model: &Model,
    context: &ContextDose,
    core: Option<&Core>,
    boxes: Option<&[[f64; 4]]>,
) -> Vec<Violation> {
    let mut all = Vec::new();
    for around in context.around() {
        let field = Field::new(model, around);
        all.extend(broken(target, &field, model, context, core, boxes));
    }
    all
}

/// [`check`] with one list of neighbours' shots.
fn broken(
    target: &Target,
    field: &Field<'_>,
    model: &Model,
    context: &ContextDose,
    core: Option<&Core>,
    boxes: Option<&[[f64; 4]]>,
) -> Vec<Violation> {
    let sigma = model.sigma;
    let look = |part: &mut Boxes, step: f64, lattice: f64, spare: f64| {
        let mesh = Mesh {
            rim_step: step,
            lattice_step: sigma / lattice,
            margin: 3.0 * sigma,
        };
        let mut found = target.violations_in(part, field, mesh, spare);
        found.retain(|v| v.need == Need::Print || !context.may_print(v.place));
        found
    };
    let mut part = match boxes {
        Some(boxes) => Boxes::only(boxes.to_vec(), sigma).but(core),
        None => Boxes::and_figure(
            model
                .flashes()
                .map(|(_, f)| f.grown(REACH * sigma).side)
                .collect(),
        )
        .but(core),
    };
    let (mut broken, bare): (Vec<Violation>, Vec<Violation>) = look(&mut part, 1.0, 4.0, SPARE)
        .into_iter()
        .partition(|v| (v.need == Need::Print) != (v.dose >= THRESHOLD));
    if !bare.is_empty() {
        let about = |v: &Violation| {
            let [x, y] = v.place;
            Flash::new([x, y, x, y]).grown(0.5 * sigma).side
        };
        let mut part = Boxes::only(bare.iter().map(about).collect(), sigma).but(core);
        broken.extend(look(&mut part, 0.25, 8.0, SPARE / 16.0));
    }
    broken
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
        let field = Field::new(model, around);
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
    let (least, greatest) = (limits.least_side.0, limits.greatest_side.0);
    let clashes =
        |slot: usize, f: &Flash| disjoint && model.overlapped(slot, f, ROUNDED).next().is_some();
    model
        .flashes()
        .filter(|(slot, f)| !f.fits(least, greatest, ROUNDED) || clashes(*slot, f))
        .map(|(_, f)| f)
        .collect()
}

/// Moves every side of some shots (slots ascending) to the address grid, where those of all others are, then single sides by one
/// address as long as that mends what the rounding broke.
pub(super) fn snap(model: &mut Model, solver: &mut Solver, address: AddressUnit, slots: &[usize]) {
    let unit = address.nm().0;
    for &slot in slots {
        let Some(flash) = model.get(slot) else {
            continue;
        };
        let mut snapped = flash;
        snapped.side = flash
            .side
            .map(|v| address.coordinate(address.nearest(Nm(v))).0);
        keep_apart(model, solver, slot, slots, &mut snapped, unit);
        if snapped != flash {
            solver.set(model, slot, Some(snapped));
        }
    }
    // Each improving move lowers the cost; a few rounds do, since the guard covers most of the rounding.
    for _ in 0..4 {
        let mut better = false;
        for slot in near_broken(model) {
            better |= nudge(model, solver, slot, unit);
        }
        if !better {
            return;
        }
    }
}

/// Slots of the shots whose sides tell at a sample where the rule is broken, ascending.
fn near_broken(model: &Model) -> Vec<usize> {
    let mut slots = Vec::new();
    for (sample, &dose) in model.samples().iter().zip(model.doses()) {
        if sample.sign * (dose - 0.5) < 0.0 {
            let [x, y] = sample.place;
            let here = Flash::new([x, y, x, y]).grown(3.0 * model.sigma);
            let near = model.near(here.side).into_iter();
            let reaches = |s: usize| model.get(s).is_some_and(|f| f.gap(&here) < 0.0);
            slots.extend(near.filter(|&s| model.is_movable(s) && reaches(s)));
        }
    }
    slots.sort_unstable();
    slots.dedup();
    slots
}

/// Shrinks a freshly rounded tile by the addresses by which it overlaps one already rounded; those of `pending` (ascending) after it
/// are not.
fn keep_apart(
    model: &Model,
    solver: &Solver,
    slot: usize,
    pending: &[usize],
    tile: &mut Flash,
    unit: f64,
) {
    if !solver.rules.disjoint {
        return;
    }
    for other in model.near(tile.side) {
        let Some(g) = model.get(other).filter(|_| other != slot) else {
            continue;
        };
        // What is yet to be rounded may come one unit nearer; it will then give way itself.
        let rounded = other < slot || pending.binary_search(&other).is_err();
        let axis = usize::from(tile.gap_along(&g, 1) > tile.gap_along(&g, 0));
        if tile.gap(&g) < 0.0 && rounded && tile.gap(&g) > -3.0 * unit {
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
            let rules = &solver.rules;
            let fits = moved.fits(rules.least(&moved), rules.greatest_side, ROUNDED);
            let clashes =
                rules.disjoint && model.overlapped(slot, &moved, ROUNDED).next().is_some();
            if fits && !clashes {
                let cost = solver.score(model, &[slot], &[moved]);
                if cost < best.0 {
                    best = (cost, moved);
                }
            }
        }
    }
    let moved = best.1 != flash;
    if moved {
        solver.set(model, slot, Some(best.1));
    }
    moved
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
