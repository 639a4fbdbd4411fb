//! Sweep that finds the first wall in front of each of many parallel rays.

use std::collections::BTreeSet;

use super::outline::Wall;

/// A half-line along the axis across the walls: starts at `from`, at the height `level` along them.
#[derive(Clone, Copy, Debug)]
pub(super) struct Ray {
    pub(super) from: i64,
    pub(super) level: i64,
    /// Toward greater coordinates.
    pub(super) forward: bool,
}

/// For each ray the index of the first wall strictly in front of it; walls hold their ends.
///
/// `O((w + r) log (w + r))`. Where two walls touch end to end in front of a ray, the one of lower index is taken.
pub(super) fn cast(walls: &[Wall], rays: &[Ray]) -> Vec<Option<usize>> {
    let mut starts = order(walls.len(), |i| walls[i].lo);
    let mut stops = order(walls.len(), |i| walls[i].hi);
    let queries = order(rays.len(), |i| rays[i].level);
    starts.reverse();
    stops.reverse();

    let mut hits = vec![None; rays.len()];
    let mut active: BTreeSet<(i64, usize)> = BTreeSet::new();
    for q in queries {
        let ray = rays[q];
        while let Some(&i) = starts.last().filter(|&&i| walls[i].lo <= ray.level) {
            active.insert((walls[i].at, i));
            starts.pop();
        }
        while let Some(&i) = stops.last().filter(|&&i| walls[i].hi < ray.level) {
            active.remove(&(walls[i].at, i));
            stops.pop();
        }
        hits[q] = if ray.forward {
            active.range((ray.from + 1, 0)..).next().map(|&(_, i)| i)
        } else {
            active
                .range(..(ray.from, 0))
                .next_back()
                .and_then(|&(at, _)| active.range((at, 0)..).next())
                .map(|&(_, i)| i)
        };
    }
    hits
}

/// Indices below `n` sorted by a key, ties by index.
pub(super) fn order<K: Ord>(n: usize, key: impl Fn(usize) -> K) -> Vec<usize> {
    let mut keyed: Vec<(K, usize)> = (0..n).map(|i| (key(i), i)).collect();
    keyed.sort_unstable();
    keyed.into_iter().map(|(_, i)| i).collect()
}
