//! WKT text: POLYGON and MULTIPOLYGON, nanometres, usually one a line.
//!
//! A reader of its own, because the general-purpose parser at hand says what is wrong but not in which line and column. Coordinates are rounded to
//! a thousandth of a nanometre. Holes are keyholed: each hangs on the outer ring by an edge drawn both ways.

use super::error::{Fault, OPEN, Parsed, Place, Remarks};
use super::{Cell, Layer, Layout, LayoutError, MAX_COORDINATE, Shapes};
use crate::geom::{Point, Repetition};
use crate::units::Nm;

/// A thousandth of a nanometre.
const UNIT: Nm = Nm(1e-3);

/// WKT has no layers.
const LAYER: Layer = Layer {
    layer: 0,
    datatype: 0,
};

/// Whether the text may be WKT: its first word is a geometry's name.
pub(super) fn is_wkt(head: &[u8]) -> bool {
    let text = head.trim_ascii_start();
    let text = text.strip_prefix(b"\xEF\xBB\xBF").unwrap_or(text);
    ["POLYGON", "MULTIPOLYGON"].iter().any(|word| {
        text.get(..word.len())
            .is_some_and(|t| t.eq_ignore_ascii_case(word.as_bytes()))
    })
}

/// Reads a whole text as one cell.
pub(super) fn read(bytes: &[u8], file: &str) -> Result<Layout, LayoutError> {
    let fault = |fault: Box<Fault>| fault.in_file(file);
    let text = std::str::from_utf8(bytes).map_err(|e| {
        let good = &bytes[..e.valid_up_to()];
        let place = place(&String::from_utf8_lossy(good), good.len());
        fault(Fault::new(place, "bytes that are not UTF-8", "text"))
    })?;
    let text = text.strip_prefix('\u{FEFF}').unwrap_or(text);
    let mut parser = Parser {
        text,
        at: 0,
        shapes: Shapes::default(),
        remarks: Remarks::default(),
    };
    while parser.peek().is_some() {
        parser.geometry().map_err(fault)?;
    }
    Ok(Layout {
        unit: UNIT,
        cells: vec![Cell {
            name: "wkt".to_owned(),
            shapes: parser.shapes,
            placements: Vec::new(),
        }],
        open_outlines: parser.remarks.open_outlines(),
        notes: parser.remarks.sentences(),
    })
}

struct Parser<'a> {
    text: &'a str,
    at: usize,
    shapes: Shapes,
    remarks: Remarks,
}

impl<'a> Parser<'a> {
    fn geometry(&mut self) -> Parsed<()> {
        let from = self.at_next();
        let word = self.word();
        let multi = word.eq_ignore_ascii_case("MULTIPOLYGON");
        if !multi && !word.eq_ignore_ascii_case("POLYGON") {
            return Err(self.fault(from, "POLYGON or MULTIPOLYGON"));
        }
        if matches!(self.peek(), Some('A'..='Z' | 'a'..='z')) {
            let from = self.at_next();
            if self.word().eq_ignore_ascii_case("EMPTY") {
                return Ok(());
            }
            return Err(self.fault(from, "`(` or EMPTY"));
        }
        if multi {
            self.list(Self::polygon)
        } else {
            self.polygon()
        }
    }

    fn polygon(&mut self) -> Parsed<()> {
        let mut rings: Vec<Vec<Point>> = Vec::new();
        self.list(|p| {
            rings.push(p.ring()?);
            Ok(())
        })?;
        let mut rings = rings.into_iter();
        if let Some(outer) = rings.next() {
            let ring = keyholed(outer, rings);
            self.shapes
                .add(LAYER, &ring, Point::default(), Repetition::Once);
        }
        Ok(())
    }

    fn ring(&mut self) -> Parsed<Vec<Point>> {
        let from = self.at_next();
        let mut ring = Vec::new();
        self.list(|p| {
            ring.push(Point::new(p.number()?, p.number()?));
            Ok(())
        })?;
        if ring.len() > 1 && ring.first() != ring.last() {
            self.remarks.add(OPEN);
        }
        while ring.len() > 1 && ring.first() == ring.last() {
            ring.pop();
        }
        if ring.len() < 3 {
            let found = format!("a ring of {} different points", ring.len());
            let place = place(self.text, from);
            return Err(Fault::new(place, found, "at least three"));
        }
        Ok(ring)
    }

    /// `( item, item … )`, at least one.
    fn list(&mut self, mut item: impl FnMut(&mut Self) -> Parsed<()>) -> Parsed<()> {
        self.symbol('(')?;
        loop {
            item(self)?;
            if self.peek() == Some(',') {
                self.symbol(',')?;
            } else {
                return self.symbol(')');
            }
        }
    }

    fn number(&mut self) -> Parsed<i64> {
        let from = self.at_next();
        let rest = &self.text[from..];
        let length = rest
            .find(|c: char| c.is_whitespace() || matches!(c, ',' | '(' | ')'))
            .unwrap_or(rest.len());
        self.at = from + length;
        let units = rest[..length]
            .parse()
            .ok()
            .and_then(|nm: f64| Nm(nm).to_pm())
            .filter(|pm| pm.abs() <= MAX_COORDINATE);
        units.ok_or_else(|| self.fault(from, "a number of nanometres within ±4.5e12"))
    }

    fn symbol(&mut self, symbol: char) -> Parsed<()> {
        if self.peek() != Some(symbol) {
            return Err(self.fault(self.at_next(), &format!("`{symbol}`")));
        }
        self.at = self.at_next() + symbol.len_utf8();
        Ok(())
    }

    fn word(&mut self) -> &'a str {
        let from = self.at_next();
        let rest = &self.text[from..];
        let length = rest
            .find(|c: char| !c.is_ascii_alphabetic())
            .unwrap_or(rest.len());
        self.at = from + length;
        &rest[..length]
    }

    /// Where the next thing that is not white space starts.
    fn at_next(&self) -> usize {
        self.text.len() - self.text[self.at..].trim_start().len()
    }

    fn peek(&self) -> Option<char> {
        self.text[self.at_next()..].chars().next()
    }

    #[cold]
    fn fault(&self, at: usize, expected: &str) -> Box<Fault> {
        const SHOWN: usize = 24;
        let rest = &self.text[at..];
        if rest.is_empty() {
            return Fault::ends(place(self.text, at), expected);
        }
        let length = rest
            .char_indices()
            .skip(1)
            .find(|(_, c)| c.is_whitespace() || matches!(c, ',' | '(' | ')'))
            .map_or(rest.len(), |(i, _)| i);
        let shown: String = rest[..length].chars().take(SHOWN).collect();
        Fault::new(
            place(self.text, at),
            format!("`{}`", shown.escape_debug()),
            expected,
        )
    }
}

fn place(text: &str, at: usize) -> Place {
    let before = &text[..at];
    let line = before.matches('\n').count() + 1;
    let start = before.rfind('\n').map_or(0, |i| i + 1);
    Place::Text {
        line,
        column: before[start..].chars().count() + 1,
    }
}

/// One ring for all: the outer counter-clockwise, the holes clockwise, each entered from the nearest point of the outer ring and left the same way.
fn keyholed(mut outer: Vec<Point>, holes: impl Iterator<Item = Vec<Point>>) -> Vec<Point> {
    let holes: Vec<Vec<Point>> = holes.collect();
    if holes.is_empty() {
        return outer;
    }
    if area_two(&outer) < 0 {
        outer.reverse();
    }
    let mut bridges: Vec<(usize, Vec<Point>)> = holes
        .into_iter()
        .map(|mut hole| {
            if area_two(&hole) > 0 {
                hole.reverse();
            }
            let distance = |p: Point| {
                let (dx, dy) = (i128::from(p.x - hole[0].x), i128::from(p.y - hole[0].y));
                dx * dx + dy * dy
            };
            let nearest = (0..outer.len()).min_by_key(|&i| distance(outer[i]));
            (nearest.unwrap_or(0), hole)
        })
        .collect();
    bridges.sort_by_key(|&(at, _)| at);
    let mut bridges = bridges.into_iter().peekable();
    let mut ring = Vec::with_capacity(outer.len() * 2);
    for (i, p) in outer.into_iter().enumerate() {
        ring.push(p);
        while let Some((_, hole)) = bridges.next_if(|&(at, _)| at == i) {
            ring.extend(&hole);
            ring.push(hole[0]);
            ring.push(p);
        }
    }
    ring
}

fn area_two(ring: &[Point]) -> i128 {
    let next = ring.iter().cycle().skip(1);
    ring.iter()
        .zip(next)
        .map(|(a, b)| i128::from(a.x) * i128::from(b.y) - i128::from(b.x) * i128::from(a.y))
        .sum()
}
