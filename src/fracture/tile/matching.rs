//! Maximum matching and largest independent set of crossing chords, without writing the crossings down.
//!
//! Horizontal chords against vertical ones make a bipartite graph that may have a quadratic number of edges. As Imai
//! and Asano (SIAM J. Comput. 15 (1986) 478) do, the edges are searched for when needed: each phase of Hopcroft and
//! Karp (SIAM J. Comput. 2 (1973) 225) asks a segment tree for *some* vertical chord not seen yet that crosses a given
//! horizontal one. Memory is `O(c log c)` for `c` chords, time `O(√c · c log² c)`; their one `log` less needs
//! fractional cascading, which pays only for graphs far larger than any figure.

use super::outline::Wall;
use super::sweep::order;

const NONE: u32 = u32::MAX;

/// A maximum matching between horizontal and vertical chords that meet (closed: sharing an end is meeting).
#[derive(Debug)]
pub(super) struct Matching {
    /// For each horizontal chord, whether it is in the largest independent set found by König's theorem.
    pub(super) keep_horizontal: Vec<bool>,
    /// The same for each vertical chord.
    pub(super) keep_vertical: Vec<bool>,
    /// Number of matched pairs.
    #[cfg(test)]
    pub(super) size: usize,
}

/// Matches and chooses: kept chords are pairwise disjoint, and no larger set is.
pub(super) fn independent_chords(horizontal: &[Wall], vertical: &[Wall]) -> Matching {
    let index = Heights::new(horizontal);
    let mut mate_h = vec![NONE; horizontal.len()];
    let mut mate_v = vec![NONE; vertical.len()];

    let mut all = Crossings::new(&index, vertical, (0..vertical.len()).map(|v| (0, id(v))));
    // Short chords have the least choice: matching them first leaves fewer phases to come.
    for h in order(horizontal.len(), |h| horizontal[h].hi - horizontal[h].lo) {
        if let Some(v) = all.take(index.of[h], &horizontal[h], 0) {
            mate_h[h] = v;
            mate_v[idx(v)] = id(h);
        }
    }

    // Every other phase goes on beyond the layer of the nearest free chord. Where the graph falls into many pieces each of
    // them then takes its own number of phases, not all the longest; the strict phases keep the bound.
    let mut strict = true;
    loop {
        strict = !strict;
        all.put_back();
        let reach = breadth_first(&index, horizontal, &mut all, &mate_h, &mate_v, strict);
        if !reach.augmenting {
            let keep_horizontal = reach.horizontal;
            let mut keep_vertical = vec![true; vertical.len()];
            reach
                .vertical
                .iter()
                .for_each(|&(_, v)| keep_vertical[idx(v)] = false);
            return Matching {
                keep_horizontal,
                keep_vertical,
                #[cfg(test)]
                size: mate_h.iter().filter(|&&v| v != NONE).count(),
            };
        }
        let mut unseen = Crossings::new(&index, vertical, reach.vertical.iter().copied());
        let free: Vec<usize> = (0..horizontal.len())
            .filter(|&h| mate_h[h] == NONE)
            .collect();
        for root in free {
            augment(
                root,
                &index,
                horizontal,
                &mut unseen,
                &mut mate_h,
                &mut mate_v,
            );
        }
    }
}

/// What alternating paths from the free horizontal chords reach.
struct Reach {
    horizontal: Vec<bool>,
    /// Steps to each vertical chord that is reached, and the chord.
    vertical: Vec<(u32, u32)>,
    /// Whether a free vertical chord was reached.
    augmenting: bool,
}

fn breadth_first(
    index: &Heights,
    horizontal: &[Wall],
    unseen: &mut Crossings,
    mate_h: &[u32],
    mate_v: &[u32],
    strict: bool,
) -> Reach {
    let mut reach = Reach {
        horizontal: mate_h.iter().map(|&v| v == NONE).collect(),
        vertical: Vec::new(),
        augmenting: false,
    };
    let mut front: Vec<usize> = (0..horizontal.len())
        .filter(|&h| mate_h[h] == NONE)
        .collect();
    let mut depth = 0;
    while !front.is_empty() {
        // Chords beyond the layer of the first free vertical one are on no shortest path.
        if strict && reach.augmenting {
            break;
        }
        let mut next = Vec::new();
        for &h in &front {
            while let Some(v) = unseen.take(index.of[h], &horizontal[h], 0) {
                reach.vertical.push((depth, v));
                match mate_v[idx(v)] {
                    NONE => reach.augmenting = true,
                    mate => {
                        reach.horizontal[idx(mate)] = true;
                        next.push(idx(mate));
                    }
                }
            }
        }
        front = next;
        depth += 1;
    }
    reach
}

/// Depth first from one free horizontal chord, one layer a step; flips the path when it ends at a free vertical chord.
fn augment(
    root: usize,
    index: &Heights,
    horizontal: &[Wall],
    unseen: &mut Crossings,
    mate_h: &mut [u32],
    mate_v: &mut [u32],
) {
    let mut path = vec![root];
    while let Some(&h) = path.last() {
        let depth = id(path.len() - 1);
        match unseen.take(index.of[h], &horizontal[h], depth) {
            None => {
                path.pop();
            }
            Some(v) if mate_v[idx(v)] == NONE => {
                let mut v = v;
                for &h in path.iter().rev() {
                    mate_v[idx(v)] = id(h);
                    v = std::mem::replace(&mut mate_h[h], v);
                }
                return;
            }
            Some(v) => path.push(idx(mate_v[idx(v)])),
        }
    }
}

/// The distinct heights of the horizontal chords: leaves of the segment tree.
struct Heights {
    sorted: Vec<i64>,
    /// Leaf of each horizontal chord.
    of: Vec<usize>,
}

impl Heights {
    fn new(horizontal: &[Wall]) -> Self {
        let mut sorted: Vec<i64> = horizontal.iter().map(|h| h.at).collect();
        sorted.sort_unstable();
        sorted.dedup();
        let of = horizontal
            .iter()
            .map(|h| sorted.partition_point(|&y| y < h.at))
            .collect();
        Self { sorted, of }
    }
}

/// Vertical chords not taken yet: a segment tree over the heights, each node holding its chords by layer, then place.
struct Crossings {
    leaves: usize,
    /// Where each node's entries begin; one more for the end.
    begin: Vec<usize>,
    /// Layer, place and chord of each entry.
    entries: Vec<(u32, i64, u32)>,
    /// First entry at or after each one that may still be there (path-halving skip list).
    skip: Vec<usize>,
    taken: Vec<bool>,
    /// Entries skipped and chords taken so far, for putting them back.
    skipped: Vec<usize>,
    took: Vec<u32>,
}

impl Crossings {
    /// The given vertical chords with their layers.
    fn new(index: &Heights, vertical: &[Wall], chords: impl Iterator<Item = (u32, u32)>) -> Self {
        let leaves = index.sorted.len();
        let mut sorted: Vec<(u32, i64, u32)> = chords
            .map(|(layer, v)| (layer, vertical[idx(v)].at, v))
            .collect();
        sorted.sort_unstable();

        let range = |&(_, _, v): &(u32, i64, u32)| {
            let chord = &vertical[idx(v)];
            let lo = index.sorted.partition_point(|&y| y < chord.lo);
            let hi = index.sorted.partition_point(|&y| y <= chord.hi);
            (lo, hi)
        };
        let ranges: Vec<(usize, usize)> = sorted.iter().map(range).collect();
        let mut begin = vec![0; 2 * leaves + 1];
        for &range in &ranges {
            for_each_node(leaves, range, |node| begin[node + 1] += 1);
        }
        for node in 1..begin.len() {
            begin[node] += begin[node - 1];
        }
        let total = begin.last().copied().unwrap_or(0);
        let mut fill = begin.clone();
        let mut entries = vec![(0, 0, 0); total];
        for (&entry, &range) in sorted.iter().zip(&ranges) {
            for_each_node(leaves, range, |node| {
                entries[fill[node]] = entry;
                fill[node] += 1;
            });
        }
        Self {
            leaves,
            begin,
            entries,
            skip: (0..=total).collect(),
            taken: vec![false; vertical.len()],
            skipped: Vec::new(),
            took: Vec::new(),
        }
    }

    /// Takes one chord of the layer that meets the horizontal `chord` standing at `leaf`.
    fn take(&mut self, leaf: usize, chord: &Wall, layer: u32) -> Option<u32> {
        let mut node = leaf + self.leaves;
        while node > 0 {
            let (begin, end) = (self.begin[node], self.begin[node + 1]);
            let at = begin
                + self.entries[begin..end].partition_point(|&(l, x, _)| (l, x) < (layer, chord.lo));
            let at = self.next_left(at);
            if at < end {
                let (l, x, v) = self.entries[at];
                if l == layer && x <= chord.hi {
                    self.taken[idx(v)] = true;
                    self.took.push(v);
                    return Some(v);
                }
            }
            node /= 2;
        }
        None
    }

    /// All chords as if none had been taken, at the cost of having taken them.
    fn put_back(&mut self) {
        self.skipped.drain(..).for_each(|at| self.skip[at] = at);
        self.took.drain(..).for_each(|v| self.taken[idx(v)] = false);
    }

    /// The first entry at or after `at` that is not taken; may lie beyond the node.
    fn next_left(&mut self, mut at: usize) -> usize {
        while at < self.entries.len() {
            if self.skip[at] == at {
                if !self.taken[idx(self.entries[at].2)] {
                    return at;
                }
                self.skip[at] = at + 1;
                self.skipped.push(at);
            }
            self.skip[at] = self.skip[self.skip[at]];
            at = self.skip[at];
        }
        at
    }
}

/// The nodes of an iterative segment tree that together cover the leaves `lo..hi`.
fn for_each_node(leaves: usize, (lo, hi): (usize, usize), mut visit: impl FnMut(usize)) {
    let (mut lo, mut hi) = (lo + leaves, hi + leaves);
    while lo < hi {
        if lo % 2 == 1 {
            visit(lo);
            lo += 1;
        }
        if hi % 2 == 1 {
            hi -= 1;
            visit(hi);
        }
        lo /= 2;
        hi /= 2;
    }
}

fn idx(id: u32) -> usize {
    id as usize
}

fn id(index: usize) -> u32 {
    // More chords than this do not fit in memory.
    u32::try_from(index).unwrap_or(NONE)
}

#[cfg(test)]
mod tests {
    use super::*;
    use petgraph::algo::maximum_matching;
    use petgraph::graph::UnGraph;

    fn meet(h: &Wall, v: &Wall) -> bool {
        (v.lo..=v.hi).contains(&h.at) && (h.lo..=h.hi).contains(&v.at)
    }

    /// Segments of random place and length (linear congruential generator of Knuth's MMIX).
    fn random_chords(seed: u64, count: usize, field: i64, longest: i64) -> Vec<Wall> {
        let mut state = seed;
        let mut below = |n: i64| {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            i64::try_from(state >> 33).unwrap() % n
        };
        (0..count)
            .map(|_| {
                let (at, lo) = (below(field), below(field));
                Wall::cut(at, lo, lo + 1 + below(longest))
            })
            .collect()
    }

    #[test]
    fn size_equals_a_general_matching_and_the_kept_chords_prove_it() {
        let mut largest = 0;
        for seed in 0..60 {
            let longest = [3, 12, 60, 200][usize::try_from(seed % 4).unwrap()];
            let horizontal = random_chords(2 * seed, 300, 100, longest);
            let vertical = random_chords(2 * seed + 1, 250, 100, longest);
            let matching = independent_chords(&horizontal, &vertical);

            let mut graph = UnGraph::<(), ()>::new_undirected();
            let left: Vec<_> = horizontal.iter().map(|_| graph.add_node(())).collect();
            let right: Vec<_> = vertical.iter().map(|_| graph.add_node(())).collect();
            let mut kept = 0;
            for (h, a) in left.iter().zip(&horizontal).map(|(&a, h)| (h, a)) {
                for (v, b) in right.iter().zip(&vertical).map(|(&b, v)| (v, b)) {
                    if meet(h, v) {
                        graph.add_edge(a, b, ());
                    }
                }
            }
            for (h, &keep_h) in horizontal.iter().zip(&matching.keep_horizontal) {
                kept += usize::from(keep_h);
                for (v, &keep_v) in vertical.iter().zip(&matching.keep_vertical) {
                    assert!(!(keep_h && keep_v && meet(h, v)), "{h:?} meets {v:?}");
                }
            }
            kept += matching.keep_vertical.iter().filter(|&&k| k).count();

            assert_eq!(
                matching.size,
                maximum_matching(&graph).edges().count(),
                "seed {seed}"
            );
            assert_eq!(
                kept,
                horizontal.len() + vertical.len() - matching.size,
                "König"
            );
            largest = largest.max(matching.size);
        }
        assert!(largest > 200);
    }

    #[test]
    fn no_chords_match_nothing() {
        let lone = [Wall::cut(0, 0, 5)];
        assert_eq!(independent_chords(&[], &[]).size, 0);
        assert_eq!(independent_chords(&lone, &[]).keep_horizontal, [true]);
        assert_eq!(independent_chords(&[], &lone).keep_vertical, [true]);
    }
}
