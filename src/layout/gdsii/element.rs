//! GDSII elements: everything between an element's first record and its ENDEL.

use super::super::error::{Fault, OPEN, Parsed, Remarks};
use super::super::hierarchy::Interner;
use super::super::path::{self, End};
use super::super::{CellId, Layer, Placement, Shapes};
use super::record::{Record, Records, tag};
use crate::geom::{Point, Repetition};

/// Columns and rows that arrays with a pitch off the grid may take in one stretch of file: they have to be listed one by one.
const MAX_OFF_GRID: u64 = 1 << 22;

/// What an element reader collects besides shapes and placements.
#[derive(Debug, Default)]
pub(super) struct Context {
    pub(super) remarks: Remarks,
    pub(super) names: Interner<Vec<u8>>,
    off_grid: u64,
}

/// Where elements go.
#[derive(Debug, Default)]
pub(super) struct Contents {
    pub(super) shapes: Shapes,
    pub(super) placements: Vec<Placement>,
}

/// The records an element may hold, as found.
#[derive(Default)]
struct Fields<'a> {
    layer: Option<u16>,
    datatype: Option<u16>,
    points: Vec<Point>,
    name: Option<&'a [u8]>,
    colrow: Option<[u16; 2]>,
    mirror: bool,
    absolute: bool,
    magnification: Option<f64>,
    angle: Option<f64>,
    path_type: u16,
    width: i32,
    start: i32,
    end: i32,
}

impl<'a> Fields<'a> {
    #[inline]
    fn read(records: &mut Records<'a>) -> Parsed<Self> {
        let mut f = Self::default();
        loop {
            let record = records.expect("ENDEL")?;
            match record.tag {
                tag::XY => record.xy(&mut f.points)?,
                tag::LAYER => f.layer = Some(record.u16()?),
                tag::DATATYPE | tag::BOXTYPE | tag::TEXTTYPE | tag::NODETYPE => {
                    f.datatype = Some(record.u16()?);
                }
                tag::ENDEL => return Ok(f),
                tag::SNAME => f.name = Some(record.name()?),
                tag::COLROW => f.colrow = Some(record.u16_pair()?),
                tag::STRANS => {
                    let flags = record.u16()?;
                    f.mirror = flags & 0x8000 != 0;
                    f.absolute = flags & 0x0006 != 0;
                }
                tag::MAG => f.magnification = Some(positive(&record)?),
                tag::ANGLE => f.angle = Some(record.real()?),
                tag::PATHTYPE => f.path_type = record.u16()?,
                tag::WIDTH => f.width = record.i32()?,
                tag::BGNEXTN => f.start = record.i32()?,
                tag::ENDEXTN => f.end = record.i32()?,
                tag::ELFLAGS
                | tag::PLEX
                | tag::PRESENTATION
                | tag::STRING
                | tag::PROPATTR
                | tag::PROPVALUE => {}
                _ => return Err(record.unexpected("a record of an element, or ENDEL")),
            }
        }
    }

    fn layer(&self, first: &Record<'_>, datatype: &str) -> Parsed<Layer> {
        let missing = |what: &str| {
            Fault::new(
                first.place(),
                format!("an element without {what}"),
                format!("one {what} record"),
            )
        };
        Ok(Layer {
            layer: self.layer.ok_or_else(|| missing("LAYER"))?.into(),
            datatype: self.datatype.ok_or_else(|| missing(datatype))?.into(),
        })
    }
}

/// The element that starts with `first`.
#[inline]
pub(super) fn read<'a>(
    first: &Record<'a>,
    records: &mut Records<'a>,
    context: &mut Context,
    contents: &mut Contents,
) -> Parsed<()> {
    match first.tag {
        tag::BOUNDARY | tag::BOX => {
            let fields = Fields::read(records)?;
            let kind = if first.tag == tag::BOX {
                "BOXTYPE"
            } else {
                "DATATYPE"
            };
            let layer = fields.layer(first, kind)?;
            boundary(layer, &fields.points, context, &mut contents.shapes);
            Ok(())
        }
        tag::PATH => {
            let fields = Fields::read(records)?;
            let layer = fields.layer(first, "DATATYPE")?;
            path(first, layer, &fields, context, &mut contents.shapes)
        }
        tag::SREF | tag::AREF => {
            let placed = placement(first, &Fields::read(records)?, context)?;
            contents.placements.push(placed);
            Ok(())
        }
        tag::TEXT | tag::NODE => {
            Fields::read(records)?;
            context.remarks.add(if first.tag == tag::TEXT {
                "text skipped"
            } else {
                "node skipped"
            });
            Ok(())
        }
        _ => Err(first.unexpected("BOUNDARY, PATH, SREF, AREF, TEXT, NODE, BOX or ENDSTR")),
    }
}

fn boundary(layer: Layer, mut points: &[Point], context: &mut Context, shapes: &mut Shapes) {
    // Continued in further XY records, the outline closes at the end of the last.
    let all = points.len();
    while let [first, open @ .., last] = points
        && first == last
    {
        points = &points[..=open.len()];
    }
    if points.len() < 3 {
        context
            .remarks
            .add("outline of fewer than three points skipped");
        return;
    }
    if points.len() == all {
        context.remarks.add(OPEN);
    }
    shapes.add(layer, points, Point::default(), Repetition::Once);
}

fn path(
    first: &Record<'_>,
    layer: Layer,
    fields: &Fields<'_>,
    context: &mut Context,
    shapes: &mut Shapes,
) -> Parsed<()> {
    if fields.points.is_empty() {
        return Err(Fault::new(
            first.place(),
            "a PATH without XY",
            "at least one point",
        ));
    }
    if fields.width < 0 {
        context
            .remarks
            .add("path of absolute width (not to be magnified): magnified all the same");
    }
    let half_width = f64::from(fields.width).abs() / 2.0;
    let (start, end) = match fields.path_type {
        0 => (End::Square(0.0), End::Square(0.0)),
        1 => (End::Round, End::Round),
        2 => (End::Square(half_width), End::Square(half_width)),
        4 => (
            End::Square(fields.start.into()),
            End::Square(fields.end.into()),
        ),
        other => {
            let found = format!("PATHTYPE {other}");
            return Err(Fault::new(first.place(), found, "0, 1, 2 or 4"));
        }
    };
    let Some(points) = path::widen(&fields.points, half_width, start, end) else {
        context.remarks.add("path that covers nothing skipped");
        return Ok(());
    };
    shapes.add(layer, &points, Point::default(), Repetition::Once);
    Ok(())
}

fn placement(first: &Record<'_>, fields: &Fields<'_>, context: &mut Context) -> Parsed<Placement> {
    let name = fields.name.ok_or_else(|| {
        Fault::new(
            first.place(),
            "a placement without SNAME",
            "the name of a cell",
        )
    })?;
    let wanted = if first.tag == tag::AREF { 3 } else { 1 };
    if fields.points.len() != wanted {
        let found = format!("a placement with {} points", fields.points.len());
        return Err(Fault::new(first.place(), found, format!("{wanted}")));
    }
    let angle_deg = fields.angle.unwrap_or(0.0);
    let origin = fields.points[0];
    let repetition = if first.tag == tag::AREF {
        let [columns, rows] = fields.colrow.unwrap_or_default().map(u64::from);
        if columns == 0 || rows == 0 {
            let found = format!("an AREF of {columns} columns and {rows} rows");
            return Err(Fault::new(first.place(), found, "at least one of each"));
        }
        let along = fields.points[1] - origin;
        let up = fields.points[2] - origin;
        array(columns, rows, along, up, context).ok_or_else(|| {
            let found =
                format!("one more array of {columns} × {rows} places at a pitch off the grid");
            Fault::new(
                first.place(),
                found,
                format!("at most {MAX_OFF_GRID} columns and rows of such in 2 MiB"),
            )
        })?
    } else {
        Repetition::Once
    };
    if fields.absolute {
        context
            .remarks
            .add("placement with absolute magnification or angle: taken as relative");
    }
    Ok(Placement {
        cell: CellId(context.names.number(name)),
        origin,
        mirror: fields.mirror,
        angle_deg,
        magnification: fields.magnification.unwrap_or(1.0),
        repetition,
    })
}

/// An array from its total spans. A turned array seldom has a pitch of whole units: its columns and its rows are then listed, each rounded on
/// its own, so that a place is the sum of two roundings whatever its neighbours.
fn array(
    columns: u64,
    rows: u64,
    along: Point,
    up: Point,
    context: &mut Context,
) -> Option<Repetition> {
    let (n, m) = (i64::try_from(columns).ok()?, i64::try_from(rows).ok()?);
    let whole = [along.x % n, along.y % n, up.x % m, up.y % m] == [0; 4];
    if whole {
        return Some(Repetition::Lattice {
            columns,
            rows,
            a: Point::new(along.x / n, along.y / n),
            b: Point::new(up.x / m, up.y / m),
        });
    }
    context.off_grid += columns + rows;
    if context.off_grid > MAX_OFF_GRID {
        return None;
    }
    let part = |span: i64, i: i64, of: i64| (2 * span * i + of).div_euclid(2 * of);
    let list = |span: Point, count: i64| match count {
        1 => Repetition::Once,
        _ => Repetition::List(
            (0..count)
                .map(|i| Point::new(part(span.x, i, count), part(span.y, i, count)))
                .collect(),
        ),
    };
    Some(Repetition::nested(vec![list(along, n), list(up, m)]))
}

fn positive(record: &Record<'_>) -> Parsed<f64> {
    let value = record.real()?;
    if value > 0.0 {
        Ok(value)
    } else {
        Err(Fault::new(
            record.place(),
            format!("a magnification of {value}"),
            "a positive number",
        ))
    }
}
