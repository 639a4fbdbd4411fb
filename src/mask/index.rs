//! A packed tree of rectangles: what touches a window, and which rectangles hang together.

use rayon::prelude::*;

use crate::geom::Rect;

/// Children of one node; 16 keeps a node within a few cache lines.
const FAN: usize = 16;

/// A static tree over rectangles, packed by strips of x, then y (sort-tile-recursive: Leutenegger et al., ICDE 1997).
#[derive(Clone, Debug)]
pub(super) struct BoxIndex {
    /// Which rectangle each leaf is.
    order: Vec<usize>,
    /// Leaves first; every level holds the hulls of `FAN` consecutive nodes of the level below.
    levels: Vec<Vec<Rect>>,
}

impl BoxIndex {
    pub(super) fn new(boxes: &[Rect]) -> Self {
        let mut order: Vec<usize> = (0..boxes.len()).collect();
        order.par_sort_unstable_by_key(|&i| (boxes[i].min.x + boxes[i].max.x, i));
        let strips = boxes.len().div_ceil(FAN).isqrt().max(1);
        order
            .par_chunks_mut(boxes.len().div_ceil(strips).max(1))
            .for_each(|strip| {
                strip.sort_unstable_by_key(|&i| (boxes[i].min.y + boxes[i].max.y, i));
            });
        let mut levels = vec![order.iter().map(|&i| boxes[i]).collect::<Vec<_>>()];
        while let Some(below) = levels.last().filter(|level| level.len() > 1) {
            let hulls = below
                .chunks(FAN)
                .filter_map(|nodes| nodes.iter().copied().reduce(Rect::hull))
                .collect();
            levels.push(hulls);
        }
        Self { order, levels }
    }

    /// Calls `visit` with every rectangle that shares at least a point with the window.
    pub(super) fn touching(&self, window: Rect, mut visit: impl FnMut(usize)) {
        let top = self.levels.len() - 1;
        let mut stack: Vec<(usize, usize)> = Vec::new();
        stack.extend((0..self.levels[top].len()).map(|node| (top, node)));
        while let Some((level, node)) = stack.pop() {
            if !self.levels[level][node].touches(window) {
                continue;
            }
            if level == 0 {
                visit(self.order[node]);
            } else {
                let below = self.levels[level - 1].len();
                let children = node * FAN..((node + 1) * FAN).min(below);
                stack.extend(children.map(|child| (level - 1, child)));
            }
        }
    }
}

/// Connected groups of rectangles, where two are linked if they touch and `linked` agrees.
///
/// Members ascend; groups ascend by their first member.
pub(super) fn clusters(
    boxes: &[Rect],
    linked: impl Fn(usize, usize) -> bool + Sync,
) -> Vec<Vec<usize>> {
    /// Queries run in parallel a block at a time, so that the pairs of a dense mask never stand in memory at once.
    const BLOCK: usize = 1 << 16;
    let index = BoxIndex::new(boxes);
    let mut parent: Vec<usize> = (0..boxes.len()).collect();
    for start in (0..boxes.len()).step_by(BLOCK) {
        let pairs: Vec<Vec<usize>> = (start..boxes.len().min(start + BLOCK))
            .into_par_iter()
            .map(|i| {
                let mut later = Vec::new();
                index.touching(boxes[i], |j| {
                    if j > i && linked(i, j) {
                        later.push(j);
                    }
                });
                later
            })
            .collect();
        for (i, later) in (start..).zip(pairs) {
            for j in later {
                let (a, b) = (root(&mut parent, i), root(&mut parent, j));
                parent[a.max(b)] = a.min(b);
            }
        }
    }
    let mut slot = vec![usize::MAX; boxes.len()];
    let mut groups: Vec<Vec<usize>> = Vec::new();
    for i in 0..boxes.len() {
        let r = root(&mut parent, i);
        if slot[r] == usize::MAX {
            slot[r] = groups.len();
            groups.push(Vec::new());
        }
        groups[slot[r]].push(i);
    }
    groups
}

fn root(parent: &mut [usize], mut i: usize) -> usize {
    while parent[i] != i {
        parent[i] = parent[parent[i]];
        i = parent[i];
    }
    i
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::geom::Point;

    proptest! {
        #[test]
        fn a_window_finds_what_a_full_scan_finds(
            corners in prop::collection::vec((-300i64..300, -300i64..300, 0i64..60, 0i64..60), 0..200),
            window in (-300i64..300, -300i64..300, 0i64..200, 0i64..200),
        ) {
            let rect = |(x, y, w, h)| Rect::new(Point::new(x, y), Point::new(x + w, y + h));
            let boxes: Vec<Rect> = corners.into_iter().map(rect).collect();
            let window = rect(window);
            let mut found = Vec::new();
            BoxIndex::new(&boxes).touching(window, |i| found.push(i));
            found.sort_unstable();
            let scan: Vec<usize> = (0..boxes.len()).filter(|&i| boxes[i].touches(window)).collect();
            prop_assert_eq!(found, scan);
        }
    }

    #[test]
    fn a_chain_of_rectangles_is_one_cluster_and_a_loner_another() {
        let at = |x: i64| Rect::new(Point::new(x, 0), Point::new(x + 10, 10));
        let boxes = [at(20), at(100), at(10), at(0)];
        assert_eq!(clusters(&boxes, |_, _| true), [vec![0, 2, 3], vec![1]]);
        assert_eq!(clusters(&boxes, |_, _| false).len(), 4);
    }
}
