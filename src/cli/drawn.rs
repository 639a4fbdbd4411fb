//! Shots and printed contours as a layout, for anybody's viewer.
//!
//! Each distinct figure is a cell of its own, placed wherever the figure stands; shots of one size and dose are one rectangle repeated.

use std::collections::BTreeMap;
use std::path::Path;

use rayon::prelude::*;

use crate::blur::Blur;
use crate::expose::{level_at, level_lines, polish};
use crate::fracture::Fracture;
use crate::geom::{Orientation, Point, Rect, Repetition, Transform};
use crate::layout::{Cell, CellId, Format, Layer, Layout, Placement, Shape};
use crate::mask::{DistinctFigure, Mask, Place, Standings};
use crate::quote::made::{self, Made, Scene, Unmade};
use crate::shot::ShotList;
use crate::units::{Dose, Nm, PM_PER_NM};

/// Layer of the shots; their datatype is the dose in thousandths.
const SHOTS: u32 = 1;

/// Layer of the contours: datatype 0 around what prints, 1 around its holes.
const CONTOURS: u32 = 2;

/// Most lattice places that the contour of one figure may be looked for at.
const MAX_LATTICE: f64 = 2e8;

/// Greatest unit, pm: contours are rounded to it.
const GREATEST_UNIT: i64 = PM_PER_NM / 10;

/// The format that a file's ending asks for; `None` for a table.
pub(super) fn format(path: &Path) -> Option<Format> {
    let ending = path.extension()?.to_str()?.to_ascii_lowercase();
    match ending.as_str() {
        "oas" | "oasis" => Some(Format::Oasis),
        "gds" | "gdsii" => Some(Format::Gdsii),
        _ => None,
    }
}

/// What is drawn.
pub(super) struct Drawn<'a> {
    pub(super) mask: &'a Mask,
    pub(super) made: &'a [Result<Made, Unmade>],
    pub(super) blur: Blur,
    /// Contours, too.
    pub(super) contours: bool,
    /// Each distinct figure once, at its first place.
    pub(super) distinct: bool,
}

impl Drawn<'_> {
    /// The layout, and how many shots it holds at all places.
    pub(super) fn layout(&self) -> (Layout, u128) {
        let unit = self.unit();
        let contours = self.contours();
        let mut cells = vec![Cell {
            name: "SHOTS".to_owned(),
            ..Cell::default()
        }];
        let mut count = 0_u128;
        for (i, distinct) in self.mask.figures.iter().enumerate() {
            let Ok(made) = &self.made[i] else { continue };
            let shots = &made.fracture.shots;
            let mut shapes = shot_shapes(shots, unit);
            shapes.extend(contours[i].iter().filter_map(|line| contour(line, unit)));
            let figure = CellId(cells.len());
            cells.push(Cell {
                name: format!("FIGURE-{i}"),
                shapes: shapes.into(),
                placements: Vec::new(),
            });
            let first = Place {
                transform: made::first_place(distinct),
                repetition: Repetition::Once,
            };
            let places = if self.distinct {
                std::slice::from_ref(&first)
            } else {
                &distinct.places
            };
            for place in places {
                place_figure(&mut cells, figure, place, unit);
                let times = place.repetition.count();
                count = count.saturating_add(times.saturating_mul(shots.len() as u128));
            }
        }
        let layout = Layout {
            unit: Nm::from_pm(unit),
            cells,
            open_outlines: 0,
            notes: Vec::new(),
        };
        (layout, count)
    }

    /// The longest length that everything is a multiple of, so that nothing is rounded but contours.
    fn unit(&self) -> i64 {
        let mut unit = GREATEST_UNIT;
        let mut also = |p: Point| unit = gcd(p.x.abs(), gcd(p.y.abs(), unit));
        for (distinct, made) in self.mask.figures.iter().zip(self.made) {
            let Ok(made) = made else { continue };
            for (rect, _) in made.fracture.shots.rects() {
                also(rect.min);
                also(rect.max);
            }
            for place in &distinct.places {
                also(place.transform.shift);
                steps(&place.repetition, &mut also);
            }
        }
        unit
    }

    fn contours(&self) -> Vec<Vec<Vec<[f64; 2]>>> {
        if !self.contours {
            return vec![Vec::new(); self.made.len()];
        }
        let standings = Standings::new(self.mask);
        let fractures: Vec<Result<Fracture, Unmade>> = self
            .made
            .iter()
            .map(|made| {
                made.as_ref()
                    .map(|m| m.fracture.clone())
                    .map_err(Clone::clone)
            })
            .collect();
        let lines = |i: usize| {
            let scene = Scene::of(self.mask, &standings, &fractures, i, self.blur);
            self.contour_lines(&self.mask.figures[i], &fractures[i], &scene)
        };
        (0..self.made.len()).into_par_iter().map(lines).collect()
    }

    /// Closed lines around the figure's own shots; none for a figure that is too large for the lattice.
    fn contour_lines(
        &self,
        distinct: &DistinctFigure,
        fracture: &Result<Fracture, Unmade>,
        scene: &Scene,
    ) -> Vec<Vec<[f64; 2]>> {
        let Ok(fracture) = fracture else {
            return Vec::new();
        };
        let own = fracture.shots.rects().map(|(rect, _)| rect);
        let around = own.fold(distinct.figure.bounds(), Rect::hull);
        let sigma = self.blur.sigma().0;
        let ([x0, y0], [x1, y1]) = (around.min.to_nm(), around.max.to_nm());
        let reach = 3.0 * sigma;
        let window = [x0 - reach, y0 - reach, x1 + reach, y1 + reach];
        let step = 0.25 * sigma;
        let lattice = (window[2] - window[0]) / step * ((window[3] - window[1]) / step);
        if lattice > MAX_LATTICE {
            return Vec::new();
        }
        let level = level_at(0.0);
        let mut lines = level_lines(&scene.dose, window, step, level);
        polish(&scene.dose, &mut lines, level, sigma);
        let within = |p: &[f64; 2]| (x0..=x1).contains(&p[0]) && (y0..=y1).contains(&p[1]);
        let lines = lines.into_iter().filter(|line| line.closed);
        // A neighbour has a contour of its own.
        let lines = lines.filter(|line| line.points.iter().any(within));
        lines.map(|line| line.points).collect()
    }
}

/// Left out because their contour would take too long to find.
pub(super) fn too_large(mask: &Mask, blur: Blur) -> usize {
    let lattice = |figure: &DistinctFigure| {
        let bounds = figure.figure.bounds();
        let side = |pm: i64| Nm::from_pm(pm).0 / (0.25 * blur.sigma().0) + 24.0;
        side(bounds.width()) * side(bounds.height())
    };
    let all = mask.figures.iter();
    all.filter(|figure| lattice(figure) > MAX_LATTICE).count()
}

/// Shots of one size and dose together, in the order of the first of each.
fn shot_shapes(shots: &ShotList, unit: i64) -> Vec<Shape> {
    let mut groups: BTreeMap<(u32, Point), Vec<Point>> = BTreeMap::new();
    for (rect, dose) in shots.rects() {
        let size = Point::new(rect.width() / unit, rect.height() / unit);
        let corner = Point::new(rect.min.x / unit, rect.min.y / unit);
        groups
            .entry((thousandths(dose), size))
            .or_default()
            .push(corner);
    }
    let shape = |((datatype, size), corners): ((u32, Point), Vec<Point>)| {
        let low = corners[0];
        let points = [(0, 0), (size.x, 0), (size.x, size.y), (0, size.y)];
        Shape {
            layer: Layer {
                layer: SHOTS,
                datatype,
            },
            points: points.map(|(x, y)| low + Point::new(x, y)).to_vec(),
            repetition: match corners.len() {
                1 => Repetition::Once,
                _ => Repetition::List(corners.iter().map(|&c| c - low).collect()),
            },
        }
    };
    groups.into_iter().map(shape).collect()
}

/// A dose as a datatype: 1000 is dose 1.
fn thousandths(dose: Dose) -> u32 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "held within 16 bits"
    )]
    let datatype = (dose.0 * 1000.0).round().clamp(0.0, 65_535.0) as u32;
    datatype
}

/// Counter-clockwise around what prints, as level lines run; clockwise around a hole.
fn contour(line: &[[f64; 2]], unit: i64) -> Option<Shape> {
    #[allow(clippy::cast_precision_loss, reason = "a small number")]
    let units = |nm: f64| (nm * PM_PER_NM as f64 / unit as f64).round();
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a float to integer cast saturates"
    )]
    let place = |&[x, y]: &[f64; 2]| Point::new(units(x) as i64, units(y) as i64);
    let mut points: Vec<Point> = line.iter().map(place).collect();
    points.dedup();
    while points.len() > 1 && points.first() == points.last() {
        points.pop();
    }
    let next = points.iter().cycle().skip(1);
    let cross = |(p, q): (&Point, &Point)| {
        i128::from(p.x) * i128::from(q.y) - i128::from(q.x) * i128::from(p.y)
    };
    let area: i128 = points.iter().zip(next).map(cross).sum();
    (points.len() >= 3).then_some(Shape {
        layer: Layer {
            layer: CONTOURS,
            datatype: u32::from(area < 0),
        },
        points,
        repetition: Repetition::Once,
    })
}

/// Places a figure's cell in the first cell; arrays of arrays by cells in between.
fn place_figure(cells: &mut Vec<Cell>, figure: CellId, place: &Place, unit: i64) {
    let mut placed = placement(figure, place.transform, unit);
    let parts = match &place.repetition {
        Repetition::Nested(parts) => &parts[..],
        other => std::slice::from_ref(other),
    };
    for (depth, part) in parts.iter().enumerate() {
        if depth > 0 {
            let name = format!("PLACES-{}", cells.len());
            let inner = CellId(cells.len());
            cells.push(Cell {
                name,
                placements: vec![placed],
                ..Cell::default()
            });
            placed = placement(inner, Transform::IDENTITY, unit);
        }
        placed.repetition = in_units(part, unit);
    }
    cells[0].placements.push(placed);
}

/// `x → −x` then turns is `y → −y` then half a turn more.
fn placement(cell: CellId, transform: Transform, unit: i64) -> Placement {
    let orientation = transform.orientation;
    let mirror = orientation.mirrors();
    let quarters = (0_u8..4).find(|&q| Orientation::new(mirror, q) == orientation);
    let quarters = quarters.unwrap_or(0) + if mirror { 2 } else { 0 };
    Placement {
        cell,
        origin: Point::new(transform.shift.x / unit, transform.shift.y / unit),
        mirror,
        angle_deg: f64::from(quarters % 4) * 90.0,
        magnification: 1.0,
        repetition: Repetition::Once,
    }
}

fn in_units(repetition: &Repetition, unit: i64) -> Repetition {
    let divided = |p: &Point| Point::new(p.x / unit, p.y / unit);
    match repetition {
        Repetition::Once => Repetition::Once,
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => Repetition::Lattice {
            columns: *columns,
            rows: *rows,
            a: divided(a),
            b: divided(b),
        },
        Repetition::List(list) => Repetition::List(list.iter().map(divided).collect()),
        Repetition::Nested(parts) => {
            Repetition::Nested(parts.iter().map(|part| in_units(part, unit)).collect())
        }
    }
}

/// All steps and displacements of a repetition.
fn steps(repetition: &Repetition, each: &mut impl FnMut(Point)) {
    match repetition {
        Repetition::Once => {}
        Repetition::Lattice { a, b, .. } => {
            each(*a);
            each(*b);
        }
        Repetition::List(list) => list.iter().copied().for_each(each),
        Repetition::Nested(parts) => parts.iter().for_each(|part| steps(part, each)),
    }
}

fn gcd(a: i64, b: i64) -> i64 {
    if b == 0 { a } else { gcd(b, a % b) }
}
