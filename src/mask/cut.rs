//! Repetitions cut where something comes near, so that the elements there stand alone and the rest stays counted.

use crate::geom::{Point, Rect, Repetition, Transform};

use super::cells::Item;
use super::index::BoxIndex;
use super::repeat::{IndexRange, add_spans, indices_in, span, window};
use super::{MAX_PARTS, MaskError};

pub(super) fn last(n: u64) -> i64 {
    i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX)
}

pub(super) fn all_of(columns: u64, rows: u64) -> IndexRange {
    IndexRange {
        columns: (0, last(columns)),
        rows: (0, last(rows)),
    }
}

/// The outermost repetition of an item, and the bounds of what it repeats.
pub(super) fn element(item: &Item) -> Option<(&Repetition, Rect)> {
    let (outermost, inner) = item.repetitions.split_last()?;
    let element = inner
        .iter()
        .try_fold(item.bounds, |sum, r| add_spans(sum, span(r)?));
    Some((outermost, element.unwrap_or(item.bounds)))
}

pub(super) fn shifted(item: &Item, by: Point, repetitions: Vec<Repetition>) -> Item {
    let transform = Transform {
        shift: item.transform.shift + by,
        ..item.transform
    };
    Item {
        content: item.content.clone(),
        bounds: item.bounds.translated(by),
        transform,
        repetitions,
    }
}

/// Cuts the outermost repetition so that elements within reach of `near` stand alone.
pub(super) fn cut(
    name: &str,
    item: &Item,
    near: &[Rect],
    reach: i64,
    parts: &mut Vec<Item>,
) -> Result<(), MaskError> {
    let Some((outermost, element)) = element(item) else {
        return Ok(());
    };
    let inner = &item.repetitions[..item.repetitions.len() - 1];
    let with = |outer: Repetition| {
        let mut repetitions = inner.to_vec();
        repetitions.extend((outer != Repetition::Once).then_some(outer));
        repetitions
    };
    let &Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    } = outermost
    else {
        let list: Vec<Point> = outermost.displacements().collect();
        let places: Vec<Rect> = list.iter().map(|&d| Rect { min: d, max: d }).collect();
        let index = BoxIndex::new(&places);
        let mut hit = vec![false; list.len()];
        for &other in near {
            index.touching(window(element, other, reach), |i| hit[i] = true);
        }
        let mut rest = Vec::new();
        for (&d, hit) in list.iter().zip(hit) {
            if hit {
                parts.push(shifted(item, d, inner.to_vec()));
            } else {
                rest.push(d);
            }
        }
        if !rest.is_empty() {
            parts.push(Item {
                repetitions: with(Repetition::List(rest)),
                ..item.clone()
            });
        }
        return Ok(());
    };
    let displacement = |i: i64, j: i64| Point::new(i * a.x + j * b.x, i * a.y + j * b.y);
    let size = |(first, last): (i64, i64)| u64::try_from(last - first + 1).unwrap_or(0);
    let mut blocks = vec![all_of(columns, rows)];
    for &other in near {
        let near = window(element, other, reach);
        let mut kept = Vec::new();
        for block in blocks {
            let Some(hit) = indices_in(block, a, b, near) else {
                kept.push(block);
                continue;
            };
            let total =
                u128::from(size(hit.columns)) * u128::from(size(hit.rows)) + parts.len() as u128;
            if total > MAX_PARTS {
                return Err(too_many(name, total));
            }
            for j in hit.rows.0..=hit.rows.1 {
                parts.extend(
                    (hit.columns.0..=hit.columns.1)
                        .map(|i| shifted(item, displacement(i, j), inner.to_vec())),
                );
            }
            let ((c0, c1), (r0, r1)) = (block.columns, block.rows);
            let ((h0, h1), (v0, v1)) = (hit.columns, hit.rows);
            let around = [
                ((c0, c1), (r0, v0 - 1)),
                ((c0, h0 - 1), (v0, v1)),
                ((h1 + 1, c1), (v0, v1)),
                ((c0, c1), (v1 + 1, r1)),
            ];
            kept.extend(
                around
                    .into_iter()
                    .filter(|(c, r)| c.0 <= c.1 && r.0 <= r.1)
                    .map(|(columns, rows)| IndexRange { columns, rows }),
            );
        }
        blocks = kept;
    }
    for block in blocks {
        let outer = Repetition::lattice(size(block.columns), size(block.rows), a, b);
        parts.push(shifted(
            item,
            displacement(block.columns.0, block.rows.0),
            with(outer),
        ));
    }
    Ok(())
}

pub(super) fn too_many(name: &str, found: u128) -> MaskError {
    MaskError::TooMany {
        cell: name.to_owned(),
        found,
        limit: MAX_PARTS,
    }
}
