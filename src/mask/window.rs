//! Only what lies in a window: what keeps clear of its border stays counted, what crosses the border is taken one by one.

use crate::geom::{Point, Rect, Repetition};

use super::cells::{Content, Item, PmCell};
use super::cut::{cut, element, shifted, too_many};
use super::{MAX_PARTS, MaskError};

/// Stands for the cell in errors.
const NAME: &str = "the window";

/// The items that lie in the window or cross its border.
///
/// Whatever is nearer to the border than `margin` comes as single figures, whole; the rest lies inside with its repetitions.
pub(super) fn inside(
    cells: &[PmCell],
    items: Vec<Item>,
    window: Rect,
    margin: i64,
) -> Result<Vec<Item>, MaskError> {
    let (outer, inner) = (window.grown(margin), window.grown(-margin));
    let holds = |rect: Rect| inner.contains(rect.min) && inner.contains(rect.max);
    let mut open = items;
    let mut kept = Vec::new();
    while let Some(item) = open.pop() {
        let extent = item.extent();
        if !extent.touches(outer) {
            continue;
        }
        if holds(extent) {
            kept.push(item);
        } else if !item.repetitions.is_empty() {
            let mut parts = Vec::new();
            cut(NAME, &item, &border(outer, inner), 0, &mut parts)?;
            for part in parts {
                let rest = part.repetitions.len() == item.repetitions.len();
                let extent = part.extent();
                if rest && extent.touches(outer) && !holds(extent) {
                    written_out(&part, outer, holds, &mut open)?;
                } else {
                    open.push(part);
                }
            }
        } else if let Content::Cell(cell) = item.content {
            open.extend(
                cells[cell]
                    .items
                    .iter()
                    .map(|part| part.moved(item.transform)),
            );
        } else {
            kept.push(item);
        }
        let found = (open.len() + kept.len()) as u128;
        if found > MAX_PARTS {
            return Err(too_many(NAME, found));
        }
    }
    Ok(kept)
}

/// The border of the window as bars, between what surely lies outside and what surely lies inside.
fn border(outer: Rect, inner: Rect) -> Vec<Rect> {
    if inner.width() <= 0 || inner.height() <= 0 {
        return vec![outer];
    }
    let corner = |x: i64, y: i64| Point::new(x, y);
    vec![
        Rect::new(outer.min, corner(inner.min.x, outer.max.y)),
        Rect::new(corner(inner.max.x, outer.min.y), outer.max),
        Rect::new(outer.min, corner(outer.max.x, inner.min.y)),
        Rect::new(corner(outer.min.x, inner.max.y), outer.max),
    ]
}

/// Looks at every element of the outermost repetition: those inside become a list, those at the border parts of their own.
fn written_out(
    item: &Item,
    outer: Rect,
    holds: impl Fn(Rect) -> bool,
    parts: &mut Vec<Item>,
) -> Result<(), MaskError> {
    let Some((outermost, element)) = element(item) else {
        return Ok(());
    };
    if outermost.count() > MAX_PARTS {
        return Err(too_many(NAME, outermost.count()));
    }
    let within = &item.repetitions[..item.repetitions.len() - 1];
    let mut list = Vec::new();
    for d in outermost.displacements() {
        let bounds = element.translated(d);
        if holds(bounds) {
            list.push(d);
        } else if bounds.touches(outer) {
            parts.push(shifted(item, d, within.to_vec()));
        }
    }
    if !list.is_empty() {
        let mut repetitions = within.to_vec();
        repetitions.push(Repetition::List(list));
        parts.push(Item {
            repetitions,
            ..item.clone()
        });
    }
    Ok(())
}
