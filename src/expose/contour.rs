//! Where the dose crosses a level: along a line, and as whole level lines for pictures.

use std::collections::{BTreeMap, BTreeSet};

use crate::blur;
use crate::target::{DoseField, Printed};

/// The first change of sign of a level going outward (from a positive start) or inward (from a negative one).
///
/// `value` gives the level above the threshold and its slope at a distance; it is looked at every `step` up to
/// `range`, then a Newton iteration kept inside the bracket (halved where Newton would leave it) ends at 1e-5 nm.
pub(super) fn crossing(value: impl Fn(f64) -> (f64, f64), step: f64, range: f64) -> Option<f64> {
    let (mut near, mut seen) = (0.0, value(0.0));
    let prints = seen.0 >= 0.0;
    let sense = if prints { 1.0 } else { -1.0 };
    loop {
        if near >= range {
            return None;
        }
        let far = (near + step).min(range);
        let next = value(sense * far);
        if (next.0 >= 0.0) != prints {
            return Some(
                sense
                    * newton(
                        |t| along(&value, sense, t),
                        prints,
                        [near, far],
                        along_of(seen, sense),
                    ),
            );
        }
        (near, seen) = (far, next);
    }
}

fn along(value: &impl Fn(f64) -> (f64, f64), sense: f64, t: f64) -> (f64, f64) {
    along_of(value(sense * t), sense)
}

fn along_of((level, slope): (f64, f64), sense: f64) -> (f64, f64) {
    (level, sense * slope)
}

/// Newton from the near end of a bracket across which the sign changes.
fn newton(
    value: impl Fn(f64) -> (f64, f64),
    prints: bool,
    bracket: [f64; 2],
    start: (f64, f64),
) -> f64 {
    let [mut low, mut high] = bracket;
    let (mut t, (mut level, mut slope)) = (low, start);
    for _ in 0..60 {
        let mut next = t - level / slope;
        if !(next > low && next < high) {
            next = 0.5 * (low + high);
        }
        let moved = (next - t).abs();
        t = next;
        if moved < 1e-5 {
            break;
        }
        (level, slope) = value(t);
        if (level >= 0.0) == prints {
            low = t;
        } else {
            high = t;
        }
    }
    t
}

/// The level at which a dose without backscatter prints when all doses change by a share (+0.05 for +5 %): `½/(1 + change)`.
#[must_use]
pub fn level_at(change: f64) -> f64 {
    blur::level_at(change, 1.0)
}

/// A level line: the higher dose lies to its left.
#[derive(Clone, Debug, PartialEq)]
pub struct LevelLine {
    /// Places in order, nm; a closed line does not repeat the first.
    pub points: Vec<[f64; 2]>,
    /// Whether the last place joins the first; open lines end at the window.
    pub closed: bool,
}

/// Level lines of a dose within `window` (least x, least y, greatest x, greatest y; nm) by marching squares at `step` nm.
///
/// Crossings are interpolated: off by at most `0.07·step²/σ`. A saddle is decided by the dose at its middle.
/// Features smaller than a step may be missed. [`polish`] puts the places on the exact level.
#[must_use]
pub fn level_lines(
    dose: &impl DoseField,
    window: [f64; 4],
    step: f64,
    level: f64,
) -> Vec<LevelLine> {
    let columns = super::dose::count((window[2] - window[0]) / step) + 2;
    let rows = super::dose::count((window[3] - window[1]) / step) + 2;
    #[allow(
        clippy::cast_precision_loss,
        reason = "an index of memory is below 2^53"
    )]
    let at = |i: usize, j: usize| [window[0] + i as f64 * step, window[1] + j as f64 * step];
    let mut below = vec![0.0; columns];
    let mut above = vec![0.0; columns];
    dose.row(window[1], window[0], step, &mut below);
    // One crossing per grid edge, named by the edge; each has at most one line out and one in.
    let (mut place, mut next) = (BTreeMap::new(), BTreeMap::new());
    for j in 0..rows - 1 {
        dose.row(at(0, j + 1)[1], window[0], step, &mut above);
        for i in 0..columns - 1 {
            let corner = [at(i, j), at(i + 1, j), at(i + 1, j + 1), at(i, j + 1)];
            let value = [below[i], below[i + 1], above[i + 1], above[i]];
            let base = 2 * (j * columns + i);
            let name = [base, base + 3, base + 2 * columns, base + 1];
            let mut crossed: Vec<(bool, usize)> = Vec::with_capacity(4);
            for k in 0..4 {
                let (a, b) = (value[k], value[(k + 1) % 4]);
                if (a >= level) != (b >= level) {
                    let (p, q, t) = (corner[k], corner[(k + 1) % 4], (level - a) / (b - a));
                    place.insert(
                        name[k],
                        [p[0] + t * (q[0] - p[0]), p[1] + t * (q[1] - p[1])],
                    );
                    // Counter-clockwise around the cell, the line comes in where the dose falls.
                    crossed.push((a >= level, name[k]));
                }
            }
            let full = crossed.len() == 4
                && dose.dose([corner[0][0] + 0.5 * step, corner[0][1] + 0.5 * step]) >= level;
            let n = crossed.len();
            for k in 0..n {
                if crossed[k].0 {
                    // A saddle with a high middle cuts off its low corners, else its high ones.
                    let partner = if n == 2 || full {
                        (k + 1) % n
                    } else {
                        (k + n - 1) % n
                    };
                    next.insert(crossed[k].1, crossed[partner].1);
                }
            }
        }
        std::mem::swap(&mut below, &mut above);
    }
    stitch(&place, next)
}

/// Joins directed pieces: open lines from the names that nothing leads to, then the closed ones.
fn stitch(place: &BTreeMap<usize, [f64; 2]>, mut next: BTreeMap<usize, usize>) -> Vec<LevelLine> {
    let led_to: BTreeSet<usize> = next.values().copied().collect();
    let starts: Vec<usize> = next
        .keys()
        .copied()
        .filter(|k| !led_to.contains(k))
        .collect();
    let mut lines = Vec::new();
    let mut follow = |start: usize, next: &mut BTreeMap<usize, usize>| {
        let mut points = vec![place[&start]];
        let mut at = start;
        while let Some(to) = next.remove(&at) {
            if to == start {
                return lines.push(LevelLine {
                    points,
                    closed: true,
                });
            }
            points.push(place[&to]);
            at = to;
        }
        lines.push(LevelLine {
            points,
            closed: false,
        });
    };
    for start in starts {
        follow(start, &mut next);
    }
    while let Some((&start, _)) = next.first_key_value() {
        follow(start, &mut next);
    }
    lines
}

/// Moves every place of a level line onto the level by Newton along the gradient, at most `limit` nm.
pub fn polish(dose: &impl Printed, lines: &mut [LevelLine], level: f64, limit: f64) {
    for p in lines.iter_mut().flat_map(|l| &mut l.points) {
        let mut q = *p;
        for _ in 0..4 {
            let g = dose.gradient(q);
            let g2 = g[0] * g[0] + g[1] * g[1];
            if g2 == 0.0 {
                break;
            }
            let t = (level - dose.dose(q)) / g2;
            q = [q[0] + t * g[0], q[1] + t * g[1]];
        }
        // A place beside a summit that barely reaches the level has nowhere to go: it stays where it was.
        if (q[0] - p[0]).hypot(q[1] - p[1]) <= limit {
            *p = q;
        }
    }
}
