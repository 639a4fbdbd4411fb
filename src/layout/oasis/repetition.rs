//! Repetitions and point lists (SEMI P39-0304E2, sections 7.6 and 7.7).

use super::super::MAX_OUTLINE;
use super::super::error::Parsed;
use super::budget::Budget;
use super::cursor::Cursor;
use crate::geom::{Point, Repetition};

/// One of the twelve repetition types; type 0 repeats `last`.
pub(super) fn repetition(
    cur: &mut Cursor<'_>,
    last: &mut Option<Repetition>,
    budget: &Budget,
) -> Parsed<Repetition> {
    let from = cur.at();
    let kind = cur.unsigned()?;
    let read = match kind {
        0 => {
            let Some(last) = last else {
                return Err(cur.fault(from, "repetition type 0", "a repetition before it"));
            };
            if let Repetition::List(list) = last {
                budget.copy(list.len(), cur)?;
            }
            return Ok(last.clone());
        }
        1 => {
            let (columns, rows) = (cur.dimension()?, cur.dimension()?);
            let (x, y) = (cur.extent()?, cur.extent()?);
            lattice(columns, rows, Point::new(x, 0), Point::new(0, y), cur)?
        }
        2 => {
            let columns = cur.dimension()?;
            let x = cur.extent()?;
            lattice(columns, 1, Point::new(x, 0), Point::default(), cur)?
        }
        3 => {
            let rows = cur.dimension()?;
            let y = cur.extent()?;
            lattice(1, rows, Point::default(), Point::new(0, y), cur)?
        }
        4 | 5 => list(cur, kind == 5, |cur| Ok(Point::new(cur.extent()?, 0)))?,
        6 | 7 => list(cur, kind == 7, |cur| Ok(Point::new(0, cur.extent()?)))?,
        8 => {
            let (columns, rows) = (cur.dimension()?, cur.dimension()?);
            let (a, b) = (cur.delta()?, cur.delta()?);
            lattice(columns, rows, a, b, cur)?
        }
        9 => {
            let columns = cur.dimension()?;
            let a = cur.delta()?;
            lattice(columns, 1, a, Point::default(), cur)?
        }
        10 | 11 => list(cur, kind == 11, Cursor::delta)?,
        _ => return Err(cur.fault(from, format!("repetition type {kind}"), "0 to 11")),
    };
    *last = Some(read.clone());
    Ok(read)
}

impl Cursor<'_> {
    /// A count of places, stored less two.
    fn dimension(&mut self) -> Parsed<u64> {
        let from = self.at();
        let value = self.unsigned()?;
        value
            .checked_add(2)
            .ok_or_else(|| self.fault(from, value.to_string(), "at most 2^64 − 3"))
    }
}

fn lattice(columns: u64, rows: u64, a: Point, b: Point, cur: &Cursor<'_>) -> Parsed<Repetition> {
    // The far corner must stay within range, or nobody could list the places.
    let last = |count: u64| i64::try_from(count - 1).unwrap_or(i64::MAX);
    let (i, j) = (last(columns), last(rows));
    let far = |step: Point, n: i64| -> Parsed<Point> {
        Ok(Point::new(cur.product(step.x, n)?, cur.product(step.y, n)?))
    };
    cur.sum(far(a, i)?, far(b, j)?)?;
    Ok(Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    })
}

/// Steps from place to place, `on_grid` in multiples of a grid that stands before them.
fn list<'a>(
    cur: &mut Cursor<'a>,
    on_grid: bool,
    step: impl Fn(&mut Cursor<'a>) -> Parsed<Point>,
) -> Parsed<Repetition> {
    let steps = cur.count(1)?;
    let grid = if on_grid { cur.extent()? } else { 1 };
    let mut places = Vec::with_capacity(steps + 1);
    let mut place = Point::default();
    places.push(place);
    for _ in 0..steps {
        let d = step(cur)?;
        let d = Point::new(cur.product(d.x, grid)?, cur.product(d.y, grid)?);
        place = cur.sum(place, d)?;
        places.push(place);
    }
    Ok(Repetition::List(places))
}

/// One of the six point-list types, as places relative to the first point, which is (0, 0) and included.
///
/// An outline of types 0 and 1 gets the last point that these leave out.
pub(super) fn points(cur: &mut Cursor<'_>, outline: bool, places: &mut Vec<Point>) -> Parsed<()> {
    let from = cur.at();
    let kind = cur.unsigned()?;
    let n = cur.count(0)?;
    if n > MAX_OUTLINE {
        let found = format!("an outline of {n} points");
        return Err(cur.fault(from, found, format!("at most {MAX_OUTLINE}")));
    }
    places.clear();
    places.reserve(n + 2);
    let mut place = Point::default();
    places.push(place);
    match kind {
        0 | 1 => {
            let mut horizontal = kind == 0;
            for _ in 0..n {
                let d = cur.signed()?;
                let d = if horizontal {
                    Point::new(d, 0)
                } else {
                    Point::new(0, d)
                };
                place = cur.sum(place, d)?;
                places.push(place);
                horizontal = !horizontal;
            }
            if outline {
                if n % 2 != 0 || n == 0 {
                    let found = format!("an outline of {n} alternating steps");
                    return Err(cur.fault(from, found, "an even number, at least 2"));
                }
                places.push(if horizontal {
                    Point::new(0, place.y)
                } else {
                    Point::new(place.x, 0)
                });
            }
        }
        2 => steps(cur, n, place, places, Cursor::delta2)?,
        3 => steps(cur, n, place, places, Cursor::delta3)?,
        4 => steps(cur, n, place, places, Cursor::delta)?,
        5 => {
            let mut step = Point::default();
            for _ in 0..n {
                let change = cur.delta()?;
                step = cur.sum(step, change)?;
                place = cur.sum(place, step)?;
                places.push(place);
            }
        }
        _ => return Err(cur.fault(from, format!("point-list type {kind}"), "0 to 5")),
    }
    Ok(())
}

#[inline]
fn steps<'a>(
    cur: &mut Cursor<'a>,
    n: usize,
    mut place: Point,
    places: &mut Vec<Point>,
    step: impl Fn(&mut Cursor<'a>) -> Parsed<Point>,
) -> Parsed<()> {
    for _ in 0..n {
        let d = step(cur)?;
        place = cur.sum(place, d)?;
        places.push(place);
    }
    Ok(())
}
