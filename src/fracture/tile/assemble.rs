//! Sweep that reads rectangles off walls and cuts which together bound nothing but rectangles.

use std::collections::BTreeMap;

use crate::geom::{Point, Rect};

use super::outline::Wall;
use super::sweep::order;

/// The rectangles between the walls.
///
/// A line sweeps upward. At each height the horizontal walls, joined to runs, close the tiles below them and open those
/// above; the upright walls on the line bound tiles sideways. `O(n log n)`.
pub(super) fn rectangles(vertical: Vec<Wall>, mut horizontal: Vec<Wall>) -> Vec<Rect> {
    let upright = joined(vertical);
    let starts = order(upright.len(), |i| upright[i].lo);
    let stops = order(upright.len(), |i| upright[i].hi);
    let (mut starts, mut stops) = (starts.into_iter().peekable(), stops.into_iter().peekable());
    horizontal.sort_unstable_by_key(|w| (w.at, w.lo));

    let mut tiles = Vec::new();
    // Upright walls on the line by place, with the height at which the tile to their right began.
    let mut line: BTreeMap<i64, i64> = BTreeMap::new();
    let mut places = Vec::new();
    for level in horizontal.chunk_by(|a, b| a.at == b.at) {
        let y = level[0].at;
        for run in level.chunk_by(|a, b| a.hi == b.lo) {
            let (from, to) = (run[0].lo, run[run.len() - 1].hi);
            places.clear();
            places.extend(line.range(from..=to).map(|(&x, &start)| (x, start)));
            for ((x, start), next) in places.iter().zip(places.iter().skip(1).map(|p| p.0)) {
                if wall_at(run, *x).inside_below {
                    tiles.push(Rect {
                        min: Point::new(*x, *start),
                        max: Point::new(next, y),
                    });
                }
            }
        }
        while let Some(i) = stops.next_if(|&i| upright[i].hi <= y) {
            line.remove(&upright[i].at);
        }
        while let Some(i) = starts.next_if(|&i| upright[i].lo <= y) {
            line.insert(upright[i].at, y);
        }
        for run in level.chunk_by(|a, b| a.hi == b.lo) {
            let (from, to) = (run[0].lo, run[run.len() - 1].hi);
            for (_, start) in line.range_mut(from..to) {
                *start = y;
            }
        }
    }
    tiles
}

/// Upright walls that touch end to end made one, so that no two share a place on the line.
fn joined(mut walls: Vec<Wall>) -> Vec<Wall> {
    walls.sort_unstable_by_key(|w| (w.at, w.lo));
    walls.dedup_by(|next, wall| {
        let joins = wall.at == next.at && wall.hi == next.lo;
        if joins {
            wall.hi = next.hi;
        }
        joins
    });
    walls
}

/// The wall of a run that covers the places just right of `x`.
fn wall_at(run: &[Wall], x: i64) -> &Wall {
    &run[run.partition_point(|w| w.hi <= x).min(run.len() - 1)]
}
