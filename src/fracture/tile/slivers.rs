//! Local search that cuts small groups of neighbouring tiles anew to get rid of slivers.

use std::cmp::Reverse;
use std::collections::{BTreeMap, BTreeSet};

use crate::geom::{Point, Rect};

use super::group::{Group, Score};

/// Most tiles that are cut anew together.
pub const GROUP: usize = 4;

/// Most groups tried around one tile: a sliver along a comb has more neighbours than are worth pairing up.
const GROUPS_TRIED: usize = 96;

/// A group that was cut anew.
struct Recut {
    gone: Vec<(usize, Rect)>,
    new: Vec<usize>,
}

/// Disjoint tiles with an index of their sides, so that neighbours are found in `O(log n)` each.
pub(super) struct Tiles {
    tiles: Vec<Option<Rect>>,
    limit: i64,
    /// Tiles by left side, right side, lower side, upper side: no two share a side and the place where it begins.
    left: BTreeMap<(i64, i64), usize>,
    right: BTreeMap<(i64, i64), usize>,
    lower: BTreeMap<(i64, i64), usize>,
    upper: BTreeMap<(i64, i64), usize>,
}

impl Recut {
    fn forget(&self, by_side: &mut BTreeSet<(i64, usize)>) {
        for &(i, r) in &self.gone {
            by_side.remove(&(short_side(r), i));
        }
    }
}

impl Tiles {
    /// `limit`: a short side under it, pm, makes a sliver.
    pub(super) fn new(tiles: Vec<Rect>, limit: i64) -> Self {
        let index = |key: fn(&Rect) -> (i64, i64)| {
            if limit > 0 {
                tiles.iter().map(key).zip(0..).collect()
            } else {
                BTreeMap::new()
            }
        };
        Self {
            left: index(|r| (r.min.x, r.min.y)),
            right: index(|r| (r.max.x, r.min.y)),
            lower: index(|r| (r.min.y, r.min.x)),
            upper: index(|r| (r.max.y, r.min.x)),
            tiles: tiles.into_iter().map(Some).collect(),
            limit,
        }
    }

    /// The tiles sorted by lower-left corner, y first.
    pub(super) fn into_sorted(self) -> Vec<Rect> {
        let mut tiles: Vec<Rect> = self.tiles.into_iter().flatten().collect();
        tiles.sort_unstable_by_key(|r| (r.min.y, r.min.x));
        tiles
    }

    /// How many slivers there are, and how many of them have a long side wholly on the outline.
    pub(super) fn slivers(&self) -> (usize, usize) {
        let slivers = self.tiles.iter().flatten().filter(|&&r| self.is_sliver(r));
        let external = slivers
            .clone()
            .filter(|&&r| self.is_external(r, |_, _| false));
        (slivers.clone().count(), external.count())
    }

    /// Cuts groups anew while that removes slivers, makes external ones internal, or makes the smallest tile larger.
    ///
    /// Every step betters (slivers, external slivers, short sides in rising order) of the whole, so it ends.
    /// With `spend`, a step may add one tile if that removes a sliver.
    pub(super) fn improve(&mut self, spend: bool) {
        let sides = |tiles: &Self| -> BTreeSet<(i64, usize)> {
            let all = tiles.tiles.iter().zip(0..);
            all.filter_map(|(r, i)| Some((short_side((*r)?), i)))
                .collect()
        };
        let mut by_side = sides(self);
        let mut work: BTreeSet<(i64, usize)> = by_side.range(..(self.limit, 0)).copied().collect();
        while let Some((_, i)) = work.pop_first() {
            if let Some(recut) = self.recut_around(i, spend) {
                recut.forget(&mut by_side);
                recut.forget(&mut work);
                // Slivers next to the change have new groups to try.
                for id in recut.new {
                    for next in self.group_neighbours(&[id]).into_iter().chain([id]) {
                        if let Some(r) = self.tiles[next] {
                            let key = (short_side(r), next);
                            by_side.insert(key);
                            if key.0 < self.limit {
                                work.insert(key);
                            }
                        }
                    }
                }
            }
        }
        while let Some(&(_, i)) = by_side.first() {
            let Some(recut) = self.recut_around(i, false) else {
                break;
            };
            recut.forget(&mut by_side);
            by_side.extend(
                recut
                    .new
                    .iter()
                    .filter_map(|&i| Some((short_side(self.tiles[i]?), i))),
            );
        }
    }

    /// Cuts the best group around tile `i` anew if that is better.
    fn recut_around(&mut self, i: usize, spend: bool) -> Option<Recut> {
        let mut size = vec![vec![i]];
        let mut tried = 0;
        for _ in 1..=GROUP {
            let mut best: Option<(Score, Vec<usize>, Vec<Rect>)> = None;
            for ids in &size {
                let Some((gain, pieces)) = self.recut(ids, spend) else {
                    continue;
                };
                if best.as_ref().is_none_or(|b| gain < b.0) {
                    best = Some((gain, ids.clone(), pieces));
                }
            }
            if let Some((_, ids, pieces)) = best {
                return Some(self.replace(&ids, pieces));
            }
            tried += size.len();
            let room = GROUPS_TRIED.saturating_sub(tried);
            let larger: BTreeSet<Vec<usize>> = size
                .iter()
                .flat_map(|ids| {
                    self.group_neighbours(ids).into_iter().map(|n| {
                        let mut ids = ids.clone();
                        ids.push(n);
                        ids.sort_unstable();
                        ids
                    })
                })
                .take(room)
                .collect();
            size = larger.into_iter().collect();
        }
        None
    }

    /// The best other way to cut a group, as change of its score, if it is better.
    fn recut(&self, ids: &[usize], spend: bool) -> Option<(Score, Vec<Rect>)> {
        let rects: Vec<Rect> = ids.iter().filter_map(|&i| self.tiles[i]).collect();
        let group = Group::new(&rects)?;
        let rate = |r: Rect| {
            let external =
                self.is_sliver(r) && self.is_external(r, |from, to| group.holds(from, to));
            Score::of(self.is_sliver(r), external, short_side(r))
        };
        let now = rects.iter().map(|&r| rate(r)).reduce(Score::and)?;
        let mut found = group.best(rects.len(), now, &rate);
        if found.is_none() && spend && now.slivers > 0 {
            let fewer = Score {
                slivers: now.slivers - 1,
                external: i32::MAX,
                smallest: Reverse(0),
            };
            found = group.best(rects.len() + 1, fewer, &rate);
        }
        let (score, pieces) = found?;
        let gain = Score {
            slivers: score.slivers - now.slivers,
            external: score.external - now.external,
            smallest: score.smallest,
        };
        Some((gain, pieces))
    }

    fn replace(&mut self, ids: &[usize], pieces: Vec<Rect>) -> Recut {
        let mut gone = Vec::new();
        for &i in ids {
            if let Some(r) = self.tiles[i].take() {
                self.left.remove(&(r.min.x, r.min.y));
                self.right.remove(&(r.max.x, r.min.y));
                self.lower.remove(&(r.min.y, r.min.x));
                self.upper.remove(&(r.max.y, r.min.x));
                gone.push((i, r));
            }
        }
        let mut new = Vec::new();
        for (n, r) in pieces.into_iter().enumerate() {
            let i = ids.get(n).copied().unwrap_or(self.tiles.len());
            if i == self.tiles.len() {
                self.tiles.push(None);
            }
            self.tiles[i] = Some(r);
            self.left.insert((r.min.x, r.min.y), i);
            self.right.insert((r.max.x, r.min.y), i);
            self.lower.insert((r.min.y, r.min.x), i);
            self.upper.insert((r.max.y, r.min.x), i);
            new.push(i);
        }
        Recut { gone, new }
    }

    /// Tiles that share part of a side with the group and are not in it.
    fn group_neighbours(&self, ids: &[usize]) -> BTreeSet<usize> {
        let mut found = BTreeSet::new();
        for r in ids.iter().filter_map(|&i| self.tiles[i]) {
            found.extend(
                self.right_of(r)
                    .chain(self.left_of(r))
                    .chain(self.above(r))
                    .chain(self.below(r)),
            );
        }
        for i in ids {
            found.remove(i);
        }
        found
    }

    fn is_sliver(&self, r: Rect) -> bool {
        short_side(r) < self.limit
    }

    /// Whether a long side lies wholly on the outline. `held(from, to)` says whether anything of a group that is being
    /// cut anew lies in the thin rectangle just beyond a side.
    fn is_external(&self, r: Rect, held: impl Fn(Point, Point) -> bool) -> bool {
        let (w, h) = (r.width(), r.height());
        let corner = |dx, dy| Point::new(r.min.x + dx, r.min.y + dy);
        let upright = h >= w
            && ((self.right_of(r).next().is_none() && !held(corner(w, 0), corner(w + 1, h)))
                || (self.left_of(r).next().is_none() && !held(corner(-1, 0), corner(0, h))));
        let flat = w >= h
            && ((self.above(r).next().is_none() && !held(corner(0, h), corner(w, h + 1)))
                || (self.below(r).next().is_none() && !held(corner(0, -1), corner(w, 0))));
        upright || flat
    }

    fn right_of(&self, r: Rect) -> impl Iterator<Item = usize> + '_ {
        self.along(&self.left, r.max.x, r.min.y, r.max.y, |t| t.max.y)
    }

    fn left_of(&self, r: Rect) -> impl Iterator<Item = usize> + '_ {
        self.along(&self.right, r.min.x, r.min.y, r.max.y, |t| t.max.y)
    }

    fn above(&self, r: Rect) -> impl Iterator<Item = usize> + '_ {
        self.along(&self.lower, r.max.y, r.min.x, r.max.x, |t| t.max.x)
    }

    fn below(&self, r: Rect) -> impl Iterator<Item = usize> + '_ {
        self.along(&self.upper, r.min.y, r.min.x, r.max.x, |t| t.max.x)
    }

    /// Tiles with a side at `at` that shares more than a point with `from..to`.
    fn along<'a>(
        &'a self,
        sides: &'a BTreeMap<(i64, i64), usize>,
        at: i64,
        from: i64,
        to: i64,
        end: fn(&Rect) -> i64,
    ) -> impl Iterator<Item = usize> + 'a {
        sides
            .range((at, i64::MIN)..(at, to))
            .rev()
            .map(|(_, &i)| i)
            .take_while(move |&i| self.tiles[i].is_some_and(|r| end(&r) > from))
    }
}

pub(super) fn short_side(r: Rect) -> i64 {
    r.width().min(r.height())
}
