//! Where cells and figures stand on the mask: the hierarchy joined from the top, split by position on the address grid.

use std::collections::BTreeMap;

use crate::geom::{Orientation, Point, Repetition, Transform};

use super::resolve::Resolved;
use super::{MAX_PARTS, MaskError, Place};

/// One standing of a cell on the mask, at all sums of its repetitions (innermost first).
#[derive(Clone, Debug)]
pub(super) struct Standing {
    pub(super) transform: Transform,
    pub(super) repetitions: Vec<Repetition>,
}

/// For every cell where it stands, given the cells taken apart (`None` for those not needed) and the top.
pub(super) fn standings(
    resolved: &[Option<Resolved>],
    top: usize,
    name: impl Fn(usize) -> String,
) -> Result<Vec<Vec<Standing>>, MaskError> {
    let children = |cell: usize| resolved[cell].iter().flat_map(|r| &r.children);
    let mut waiting = vec![0_usize; resolved.len()];
    for child in (0..resolved.len()).flat_map(children) {
        waiting[child.cell] += 1;
    }
    let mut standings: Vec<Vec<Standing>> = vec![Vec::new(); resolved.len()];
    standings[top].push(Standing {
        transform: Transform::IDENTITY,
        repetitions: Vec::new(),
    });
    let mut total = 0_u128;
    let mut ready = vec![top];
    while let Some(cell) = ready.pop() {
        let here = gathered(std::mem::take(&mut standings[cell]));
        for child in children(cell) {
            for standing in &here {
                let repetitions = child
                    .repetitions
                    .iter()
                    .map(|r| r.turned(standing.transform));
                standings[child.cell].push(Standing {
                    transform: child.transform.then(standing.transform),
                    repetitions: repetitions
                        .chain(standing.repetitions.iter().cloned())
                        .collect(),
                });
            }
            total += here.len() as u128;
            if total > MAX_PARTS {
                return Err(MaskError::TooMany {
                    cell: name(child.cell),
                    found: total,
                    limit: MAX_PARTS,
                });
            }
            waiting[child.cell] -= 1;
            if waiting[child.cell] == 0 {
                ready.push(child.cell);
            }
        }
        standings[cell] = here;
    }
    Ok(standings)
}

/// Joins explicit places of one orientation into one list; the rest is kept.
fn gathered(standings: Vec<Standing>) -> Vec<Standing> {
    let mut lists: BTreeMap<Orientation, Vec<Point>> = BTreeMap::new();
    let mut rest = Vec::new();
    for standing in standings {
        let shift = standing.transform.shift;
        let list = lists.entry(standing.transform.orientation);
        match &standing.repetitions[..] {
            [] => list.or_default().push(shift),
            [Repetition::List(displacements)] => list
                .or_default()
                .extend(displacements.iter().map(|&d| shift + d)),
            _ => rest.push(standing),
        }
    }
    let explicit = lists.into_iter().filter_map(|(orientation, mut shifts)| {
        shifts.sort_unstable_by_key(|s| (s.y, s.x));
        shifts.dedup();
        let &first = shifts.first()?;
        let repetitions = match shifts.len() {
            1 => Vec::new(),
            _ => vec![Repetition::List(
                shifts.iter().map(|&s| s - first).collect(),
            )],
        };
        Some(Standing {
            transform: Transform {
                orientation,
                shift: first,
            },
            repetitions,
        })
    });
    explicit.chain(rest).collect()
}

/// The same standings in pieces, each of whose displacements are whole address units.
///
/// An array whose pitch is no multiple of the address unit becomes as many arrays as there are positions on the grid.
pub(super) fn on_grid(
    standing: Standing,
    address: i64,
    cell: &str,
) -> Result<Vec<Standing>, MaskError> {
    let Standing {
        transform,
        repetitions,
    } = standing;
    let mut pieces = vec![(transform.shift, Vec::new())];
    for repetition in repetitions {
        let split = split(&repetition, address);
        let found = split.len() as u128 * pieces.len() as u128;
        if found > MAX_PARTS {
            return Err(MaskError::TooMany {
                cell: cell.to_owned(),
                found,
                limit: MAX_PARTS,
            });
        }
        let mut joined = Vec::with_capacity(split.len() * pieces.len());
        for (shift, stack) in pieces {
            for (by, part) in &split {
                let mut stack: Vec<Repetition> = stack.clone();
                stack.extend((*part != Repetition::Once).then(|| part.clone()));
                joined.push((shift + *by, stack));
            }
        }
        pieces = joined;
    }
    let standing = |(shift, repetitions)| Standing {
        transform: Transform { shift, ..transform },
        repetitions,
    };
    Ok(pieces.into_iter().map(standing).collect())
}

fn split(repetition: &Repetition, address: i64) -> Vec<(Point, Repetition)> {
    match repetition {
        Repetition::Once => vec![(Point::default(), Repetition::Once)],
        &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let (every_a, every_b) = (steps_to_grid(a, address), steps_to_grid(b, address));
            let starts =
                |every: i64, count: u64| 0..every.min(i64::try_from(count).unwrap_or(i64::MAX));
            let count = |n: u64, start: i64, every: i64| {
                let (start, every) = (start.unsigned_abs(), every.unsigned_abs());
                (n - start).div_ceil(every)
            };
            starts(every_b, rows)
                .flat_map(|j| starts(every_a, columns).map(move |i| (i, j)))
                .map(|(i, j)| {
                    let part = Repetition::lattice(
                        count(columns, i, every_a),
                        count(rows, j, every_b),
                        Point::new(a.x * every_a, a.y * every_a),
                        Point::new(b.x * every_b, b.y * every_b),
                    );
                    (Point::new(i * a.x + j * b.x, i * a.y + j * b.y), part)
                })
                .collect()
        }
        other => {
            let mut by_phase: BTreeMap<Point, Vec<Point>> = BTreeMap::new();
            for d in other.displacements() {
                by_phase.entry(phase(d, address)).or_default().push(d);
            }
            let part = |list: Vec<Point>| {
                let first = list.first().copied().unwrap_or_default();
                match list.len() {
                    1 => (first, Repetition::Once),
                    _ => (
                        first,
                        Repetition::List(list.iter().map(|&d| d - first).collect()),
                    ),
                }
            };
            by_phase.into_values().map(part).collect()
        }
    }
}

/// Position within the address grid.
pub(super) fn phase(p: Point, address: i64) -> Point {
    Point::new(p.x.rem_euclid(address), p.y.rem_euclid(address))
}

/// After how many steps a displacement is whole address units in both axes.
fn steps_to_grid(step: Point, address: i64) -> i64 {
    let period = |v: i64| address / gcd(v.rem_euclid(address), address);
    let (x, y) = (period(step.x), period(step.y));
    x / gcd(x, y) * y
}

fn gcd(a: i64, b: i64) -> i64 {
    if b == 0 { a } else { gcd(b, a % b) }
}

/// Places from standings of one figure: explicit ones joined by orientation, all sorted by their first position.
pub(super) fn places(standings: Vec<Standing>) -> Vec<Place> {
    let place = |s: Standing| Place {
        transform: s.transform,
        repetition: Repetition::nested(s.repetitions),
    };
    gathered(standings).into_iter().map(place).collect()
}

/// The displacement that comes first, lowest then leftmost.
pub(super) fn first_displacement(repetition: &Repetition) -> Point {
    let order = |p: &Point| (p.y, p.x);
    match repetition {
        Repetition::Once => Point::default(),
        Repetition::List(list) => list.iter().copied().min_by_key(order).unwrap_or_default(),
        // Linear in both indices, so a corner of the lattice comes first.
        &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let last = |n: u64| i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX);
            let (c, r) = (last(columns), last(rows));
            let far_a = Point::new(a.x * c, a.y * c);
            let far_b = Point::new(b.x * r, b.y * r);
            [Point::default(), far_a, far_b, far_a + far_b]
                .into_iter()
                .min_by_key(order)
                .unwrap_or_default()
        }
        Repetition::Nested(parts) => parts
            .iter()
            .map(first_displacement)
            .fold(Point::default(), |sum, d| sum + d),
    }
}
