//! The cells of a layout at mask scale: chosen layers only, whole picometres, every polygon made sound.
//!
//! **Rounding.** A coordinate is multiplied by the picometres of one database unit (a product within 1e-9 of a whole
//! number counts as whole, so every usual grid is exact) and rounded to the nearest picometre, halves up: points in
//! their own cell, origins and displacements in their parent. Placements turned by multiples of 90° at
//! magnification 1 are exact. Any other angle or magnification makes its own copy of the cell, whose points are
//! turned and magnified in `f64` (angles and magnifications of nested placements joined first) and rounded once.
//!
//! **Repair.** A polygon covers what its outline winds round at least once, either way (the non-zero rule); so crossings are
//! filled, spikes and keyhole bridges vanish, repeated points do not matter, and a polygon without area is dropped.

use std::collections::{BTreeMap, HashMap};
use std::sync::Arc;

use rayon::prelude::*;

use crate::geom::{self, Figure, Orientation, Point, Rect, Repetition, Ring, Transform};
use crate::layout::{Cell, CellId, Layer, Layout, Placement, Shape};
use crate::units::PM_PER_NM;

use super::repeat::{RANGE, add_spans, lattice, span};
use super::{LayerCounts, MAX_PARTS, MaskError, MaskOptions};

/// What stands in a cell.
#[derive(Clone, Debug)]
pub(super) enum Content {
    Figure(Arc<Figure>),
    /// Index into [`Cells::cells`].
    Cell(usize),
}

/// One part of a cell, at its place and at all sums of one displacement of each repetition (innermost first).
#[derive(Clone, Debug)]
pub(super) struct Item {
    pub(super) content: Content,
    /// Bounds of the part at its own place.
    pub(super) bounds: Rect,
    /// Own frame → cell.
    pub(super) transform: Transform,
    pub(super) repetitions: Vec<Repetition>,
}

impl Item {
    /// Bounds over all repetitions; checked to lie within range when the cell was made.
    pub(super) fn extent(&self) -> Rect {
        self.checked_extent().unwrap_or(self.bounds)
    }

    fn checked_extent(&self) -> Option<Rect> {
        self.repetitions
            .iter()
            .try_fold(self.bounds, |sum, r| add_spans(sum, span(r)?))
    }

    pub(super) fn moved(&self, t: Transform) -> Self {
        Self {
            content: self.content.clone(),
            bounds: t.apply_rect(self.bounds),
            transform: self.transform.then(t),
            repetitions: self.repetitions.iter().map(|r| r.turned(t)).collect(),
        }
    }
}

/// A cell with at least one item.
#[derive(Clone, Debug)]
pub(super) struct PmCell {
    pub(super) name: String,
    pub(super) items: Vec<Item>,
    pub(super) bounds: Rect,
}

/// All cells of the chosen layers, and what was repaired on the way.
pub(super) struct Cells {
    pub(super) cells: Vec<PmCell>,
    /// The cells no other cell places, as items of the mask.
    pub(super) tops: Vec<Item>,
    pub(super) notes: Vec<String>,
}

/// Polygons of each layer, repetitions counted, cells once each.
pub(super) fn layer_counts(layout: &Layout) -> LayerCounts {
    let mut counts: BTreeMap<Layer, u128> = BTreeMap::new();
    for shape in layout.cells.iter().flat_map(|c| &c.shapes) {
        let count = counts.entry(shape.layer).or_default();
        *count = count.saturating_add(shape.repetition.count());
    }
    LayerCounts(counts.into_iter().collect())
}

fn chosen_layers(layout: &Layout, named: &[Layer]) -> Result<Vec<Layer>, MaskError> {
    let present = layer_counts(layout);
    if named.is_empty() {
        return match present.0[..] {
            [(only, _)] => Ok(vec![only]),
            _ => Err(MaskError::LayerNotChosen { present }),
        };
    }
    match named
        .iter()
        .find(|l| !present.0.iter().any(|(p, _)| p == *l))
    {
        Some(&layer) => Err(MaskError::LayerAbsent { layer, present }),
        None => Ok(named.to_vec()),
    }
}

/// A linear map that is not one of the eight orientations: turn by less than 90°, magnify. `NONE` is exact.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Residue {
    angle_deg: f64,
    magnification: f64,
}

impl Residue {
    const NONE: Self = Self {
        angle_deg: 0.0,
        magnification: 1.0,
    };

    fn key(self) -> (u64, u64) {
        (self.angle_deg.to_bits(), self.magnification.to_bits())
    }

    /// The placement's linear map followed by this one, as what remains in the child and the orientation after it.
    fn after(self, placement: &Placement) -> (Self, Orientation) {
        let turn = snapped(placement.angle_deg + self.angle_deg).rem_euclid(360.0);
        let quarters = (turn / 90.0).floor();
        let rest = turn - 90.0 * quarters;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "0 to 4"
        )]
        let mut quarters = quarters as u8;
        // R(90q + r)·M = R(90q)·M·R(−r), and R(−r) = R(−90)·R(90 − r) brings the rest back into [0°, 90°).
        let angle_deg = match (placement.mirror, rest > 0.0) {
            (true, true) => {
                quarters += 1;
                90.0 - rest
            }
            _ => rest,
        };
        // M maps y → −y, which is x → −x and a half turn.
        let orientation = Orientation::new(
            placement.mirror,
            quarters + if placement.mirror { 2 } else { 0 },
        );
        let magnification = self.magnification * placement.magnification;
        (
            Self {
                angle_deg,
                magnification: snapped(magnification),
            },
            orientation,
        )
    }
}

/// Numbers within 1e-9 (relative) of a whole number count as whole: formats store them as rounded reals.
fn snapped(x: f64) -> f64 {
    let whole = x.round();
    if (x - whole).abs() <= 1e-9 * whole.abs().max(1.0) && whole != 0.0 {
        whole
    } else {
        x
    }
}

/// Database units → picometres within one copy of a cell.
#[derive(Clone, Copy)]
struct Scaling {
    /// Rows of the 2×2 matrix.
    cos: f64,
    sin: f64,
    /// Whole factor, when there is no turn.
    exact: Option<i64>,
}

impl Scaling {
    fn new(pm_per_unit: f64, residue: Residue) -> Self {
        let factor = snapped(pm_per_unit * residue.magnification);
        let (sin, cos) = residue.angle_deg.to_radians().sin_cos();
        #[allow(clippy::cast_possible_truncation, reason = "a whole number below 2^52")]
        let exact = (residue.angle_deg == 0.0 && factor.fract() == 0.0 && factor.abs() < 4.5e15)
            .then_some(factor as i64);
        Self {
            cos: factor * cos,
            sin: factor * sin,
            exact,
        }
    }

    /// The unrounded image.
    #[allow(
        clippy::cast_precision_loss,
        reason = "only used where the result is rounded anyway"
    )]
    fn real(self, p: Point) -> [f64; 2] {
        let (x, y) = (p.x as f64, p.y as f64);
        [self.cos * x - self.sin * y, self.sin * x + self.cos * y]
    }

    /// The rounded image; `None` beyond the range.
    fn point(self, p: Point) -> Option<Point> {
        let within = |v: i64| (v.abs() <= RANGE).then_some(v);
        if let Some(factor) = self.exact {
            return Some(Point::new(
                within(p.x.checked_mul(factor)?)?,
                within(p.y.checked_mul(factor)?)?,
            ));
        }
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a float to integer cast saturates"
        )]
        let [x, y] = self.real(p).map(|v| (v + 0.5).floor() as i64);
        Some(Point::new(within(x)?, within(y)?))
    }

    /// A repetition in picometres. A lattice whose last element would be off by half a picometre is written out.
    fn repetition(self, r: &Repetition) -> Result<Repetition, ScaleError> {
        match r {
            Repetition::Once => Ok(Repetition::Once),
            Repetition::List(list) => {
                let mut list: Vec<Point> = list
                    .iter()
                    .map(|&p| self.point(p))
                    .collect::<Option<_>>()
                    .ok_or(ScaleError::Range)?;
                list.sort_by_key(|p| (p.y, p.x));
                list.dedup();
                Ok(if list == [Point::default()] {
                    Repetition::Once
                } else {
                    Repetition::List(list)
                })
            }
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                let columns = if *a == Point::default() { 1 } else { *columns };
                let rows = if *b == Point::default() { 1 } else { *rows };
                let steps = (self.point(*a), self.point(*b));
                let (Some(pa), Some(pb)) = steps else {
                    return Err(ScaleError::Range);
                };
                let drift = |p: Point, step: Point, n: u64| {
                    let [x, y] = self.real(p);
                    #[allow(clippy::cast_precision_loss, reason = "compared with a half")]
                    let (dx, dy, n) = (
                        x - step.x as f64,
                        y - step.y as f64,
                        n.saturating_sub(1) as f64,
                    );
                    dx.abs().max(dy.abs()) * n
                };
                if self.exact.is_some() || drift(*a, pa, columns) + drift(*b, pb, rows) < 0.5 {
                    return Ok(lattice(columns, rows, pa, pb));
                }
                let written_out = Repetition::Lattice {
                    columns,
                    rows,
                    a: *a,
                    b: *b,
                };
                if written_out.count() > MAX_PARTS {
                    return Err(ScaleError::TooMany(written_out.count()));
                }
                span(&written_out).ok_or(ScaleError::Range)?;
                self.repetition(&Repetition::List(written_out.displacements().collect()))
            }
            Repetition::Nested(parts) => {
                let parts = parts
                    .iter()
                    .map(|p| self.repetition(p))
                    .collect::<Result<_, _>>()?;
                Ok(Repetition::nested(parts))
            }
        }
    }
}

enum ScaleError {
    Range,
    TooMany(u128),
}

impl ScaleError {
    fn at(self, cell: &str, what: String) -> MaskError {
        let cell = cell.to_owned();
        match self {
            Self::Range => MaskError::OutOfRange { cell, what },
            Self::TooMany(found) => MaskError::TooMany {
                cell,
                found,
                limit: MAX_PARTS,
            },
        }
    }
}

/// Repairs counted over the polygons as they stand in the file.
#[derive(Default)]
struct Repairs {
    crossing: usize,
    empty: usize,
    repeated_points: usize,
}

impl Repairs {
    fn add(mut self, other: Self) -> Self {
        self.crossing += other.crossing;
        self.empty += other.empty;
        self.repeated_points += other.repeated_points;
        self
    }

    fn notes(&self) -> Vec<String> {
        let sentence = |n: usize, rule: &str| {
            let polygons = if n == 1 { "polygon" } else { "polygons" };
            (n > 0).then(|| format!("{n} {polygons} {rule}"))
        };
        [
            sentence(
                self.crossing,
                "with a self-crossing outline: all it winds round was filled",
            ),
            sentence(self.empty, "without area: dropped"),
            sentence(self.repeated_points, "with repeated points: each kept once"),
        ]
        .into_iter()
        .flatten()
        .collect()
    }
}

/// The figures one polygon covers (one, unless it crosses itself).
fn sound(points: &[Point], scaling: Scaling) -> Option<(Vec<Figure>, Repairs)> {
    let mut points: Vec<Point> = points
        .iter()
        .map(|&p| scaling.point(p))
        .collect::<Option<_>>()?;
    let before = points.len();
    points.dedup();
    let mut repairs = Repairs {
        repeated_points: usize::from(points.len() < before),
        ..Repairs::default()
    };
    let Some(ring) = Ring::new(points) else {
        return Some((
            Vec::new(),
            Repairs {
                empty: 1,
                ..repairs
            },
        ));
    };
    if is_rectangle(ring.points()) {
        return Some((vec![Figure::from_rect(ring.bounds())], repairs));
    }
    let figures = geom::merge([&ring]);
    let covered: i128 = figures.iter().map(Figure::area_two).sum();
    if figures.is_empty() {
        repairs.empty = 1;
    } else if covered != ring.area_two().abs() {
        // An outline that winds once round all it encloses has exactly the covered area; bridges cancel.
        repairs.crossing = 1;
    }
    Some((figures, repairs))
}

fn is_rectangle(points: &[Point]) -> bool {
    match *points {
        [a, b, c, d] => {
            let horizontal_first = a.y == b.y && b.x == c.x && c.y == d.y && d.x == a.x;
            let vertical_first = a.x == b.x && b.y == c.y && c.x == d.x && d.y == a.y;
            (horizontal_first || vertical_first) && a.x != c.x && a.y != c.y
        }
        _ => false,
    }
}

/// Brings the chosen layers of a layout to mask scale.
pub(super) fn convert(layout: &Layout, options: &MaskOptions) -> Result<Cells, MaskError> {
    if !(options.scale.is_finite() && options.scale > 0.0) {
        return Err(MaskError::Scale {
            found: options.scale,
        });
    }
    if !(layout.unit.0.is_finite() && layout.unit.0 > 0.0) {
        return Err(MaskError::Unit { found: layout.unit });
    }
    #[allow(clippy::cast_precision_loss, reason = "1000")]
    let pm_per_unit = layout.unit.0 * PM_PER_NM as f64 * options.scale;
    let mut converter = Converter {
        layout,
        layers: chosen_layers(layout, &options.layers)?,
        pm_per_unit,
        done: HashMap::new(),
        cells: Vec::new(),
        parts: 0,
        repairs: Repairs::default(),
        repaired: vec![false; layout.cells.len()],
    };
    let is_top = top_cells(layout)?;
    let mut tops = Vec::new();
    for id in (0..layout.cells.len()).filter(|&id| is_top[id]) {
        if let Some(cell) = converter.convert(id)? {
            tops.push(Item {
                content: Content::Cell(cell),
                bounds: converter.cells[cell].bounds,
                transform: Transform::IDENTITY,
                repetitions: Vec::new(),
            });
        }
    }
    let mut notes = layout.notes.clone();
    notes.extend(converter.repairs.notes());
    if tops.len() > 1 {
        notes.push(format!(
            "{} top cells: all taken, each at its own origin",
            tops.len()
        ));
    }
    Ok(Cells {
        cells: converter.cells,
        tops,
        notes,
    })
}

/// Which cells no other places; checks that all placements lead somewhere and none in a circle.
fn top_cells(layout: &Layout) -> Result<Vec<bool>, MaskError> {
    let mut parents = vec![0_usize; layout.cells.len()];
    for cell in &layout.cells {
        for (i, placement) in cell.placements.iter().enumerate() {
            let Some(count) = parents.get_mut(placement.cell.0) else {
                return Err(MaskError::MissingCell {
                    cell: cell.name.clone(),
                    placement: i,
                    found: placement.cell.0,
                    cells: layout.cells.len(),
                });
            };
            *count += 1;
        }
    }
    let is_top: Vec<bool> = parents.iter().map(|&n| n == 0).collect();
    // Cells are taken away once all their parents are; what stays hangs on a cycle.
    let mut free: Vec<usize> = (0..parents.len()).filter(|&id| is_top[id]).collect();
    let mut taken = free.len();
    while let Some(id) = free.pop() {
        for placement in &layout.cells[id].placements {
            let count = &mut parents[placement.cell.0];
            *count -= 1;
            if *count == 0 {
                taken += 1;
                free.push(placement.cell.0);
            }
        }
    }
    if taken < parents.len()
        && let Some(id) = parents.iter().position(|&n| n > 0)
    {
        return Err(MaskError::Cycle {
            cell: layout.cells[id].name.clone(),
        });
    }
    Ok(is_top)
}

/// A copy of a cell: which, and under what residue.
type CopyKey = (usize, (u64, u64));

struct Converter<'a> {
    layout: &'a Layout,
    layers: Vec<Layer>,
    pm_per_unit: f64,
    /// Finished copies; `None` where nothing of the chosen layers is inside.
    done: HashMap<CopyKey, Option<usize>>,
    cells: Vec<PmCell>,
    repairs: Repairs,
    /// Items of all copies.
    parts: u128,
    /// Whether a cell's repairs are counted already: copies do not count again.
    repaired: Vec<bool>,
}

fn check(cell: &Cell, index: usize, placement: &Placement) -> Result<(), MaskError> {
    let (magnification, angle_deg) = (placement.magnification, placement.angle_deg);
    if magnification.is_finite() && magnification > 0.0 && angle_deg.is_finite() {
        return Ok(());
    }
    Err(MaskError::Placement {
        cell: cell.name.clone(),
        placement: index,
        magnification,
        angle_deg,
    })
}

impl Converter<'_> {
    /// Converts a cell and all below it, children first, without recursion: nesting may be deep.
    fn convert(&mut self, top: usize) -> Result<Option<usize>, MaskError> {
        let mut stack = vec![(top, Residue::NONE, false)];
        while let Some((id, residue, children_done)) = stack.pop() {
            let key = (id, residue.key());
            if self.done.contains_key(&key) {
                continue;
            }
            let cell = &self.layout.cells[id];
            if children_done {
                let converted = self.cell(id, residue)?;
                self.done.insert(key, converted);
                continue;
            }
            stack.push((id, residue, true));
            for (i, placement) in cell.placements.iter().enumerate() {
                check(cell, i, placement)?;
                let (child, _) = residue.after(placement);
                if !self.done.contains_key(&(placement.cell.0, child.key())) {
                    stack.push((placement.cell.0, child, false));
                }
            }
            // Ever new angles or magnifications down a deep hierarchy could make endless copies.
            if stack.len() as u128 > MAX_PARTS || self.parts > MAX_PARTS {
                let found = self.parts.max(stack.len() as u128);
                return Err(MaskError::TooMany {
                    cell: cell.name.clone(),
                    found,
                    limit: MAX_PARTS,
                });
            }
        }
        Ok(self
            .done
            .get(&(top, Residue::NONE.key()))
            .copied()
            .flatten())
    }

    fn cell(&mut self, id: usize, residue: Residue) -> Result<Option<usize>, MaskError> {
        let cell = &self.layout.cells[id];
        let scaling = Scaling::new(self.pm_per_unit, residue);
        let chosen: Vec<(usize, &Shape)> = cell
            .shapes
            .iter()
            .enumerate()
            .filter(|(_, s)| self.layers.contains(&s.layer))
            .collect();
        let polygons: Vec<(Vec<Item>, Repairs)> = chosen
            .par_iter()
            .map(|&(i, shape)| self.polygon(cell, i, shape, scaling))
            .collect::<Result<_, _>>()?;
        let mut items = Vec::new();
        for (figures, repairs) in polygons {
            items.extend(figures);
            if !self.repaired[id] {
                self.repairs = std::mem::take(&mut self.repairs).add(repairs);
            }
        }
        self.repaired[id] = true;
        for (i, placement) in cell.placements.iter().enumerate() {
            items.extend(self.placement(cell, i, placement, scaling, residue)?);
        }
        // One order for one content, so that a permuted file resolves in the same steps.
        items.sort_by(|a, b| {
            (a.bounds, a.transform, &a.repetitions).cmp(&(b.bounds, b.transform, &b.repetitions))
        });
        let Some(bounds) = items.iter().map(Item::extent).reduce(Rect::hull) else {
            return Ok(None);
        };
        self.parts += items.len() as u128;
        self.cells.push(PmCell {
            name: cell.name.clone(),
            items,
            bounds,
        });
        Ok(Some(self.cells.len() - 1))
    }

    fn polygon(
        &self,
        cell: &Cell,
        index: usize,
        shape: &Shape,
        scaling: Scaling,
    ) -> Result<(Vec<Item>, Repairs), MaskError> {
        let what = || format!("polygon {index}");
        let (figures, repairs) = sound(&shape.points, scaling)
            .ok_or_else(|| ScaleError::Range.at(&cell.name, what()))?;
        let repetition = scaling
            .repetition(&shape.repetition)
            .map_err(|e| e.at(&cell.name, what()))?;
        let items = figures.into_iter().map(|figure| {
            let bounds = figure.bounds();
            Item {
                content: Content::Figure(Arc::new(figure)),
                bounds,
                transform: Transform::IDENTITY,
                repetitions: stack(repetition.clone()),
            }
        });
        let items: Vec<Item> = items.collect();
        match items.iter().all(|item| item.checked_extent().is_some()) {
            true => Ok((items, repairs)),
            false => Err(ScaleError::Range.at(&cell.name, what())),
        }
    }

    fn placement(
        &self,
        cell: &Cell,
        index: usize,
        placement: &Placement,
        scaling: Scaling,
        residue: Residue,
    ) -> Result<Option<Item>, MaskError> {
        let CellId(child_id) = placement.cell;
        let (child_residue, orientation) = residue.after(placement);
        let Some(child) = self
            .done
            .get(&(child_id, child_residue.key()))
            .copied()
            .flatten()
        else {
            return Ok(None);
        };
        let what = || {
            format!(
                "placement {index} of `{}`",
                self.layout.cells[child_id].name
            )
        };
        let shift = scaling
            .point(placement.origin)
            .ok_or_else(|| ScaleError::Range.at(&cell.name, what()))?;
        let repetition = scaling
            .repetition(&placement.repetition)
            .map_err(|e| e.at(&cell.name, what()))?;
        let turned = Transform {
            orientation,
            shift: Point::default(),
        }
        .apply_rect(self.cells[child].bounds);
        let item = add_spans(
            turned,
            Rect {
                min: shift,
                max: shift,
            },
        )
        .map(|bounds| Item {
            content: Content::Cell(child),
            bounds,
            transform: Transform { orientation, shift },
            repetitions: stack(repetition),
        });
        item.filter(|item| item.checked_extent().is_some())
            .map(Some)
            .ok_or_else(|| ScaleError::Range.at(&cell.name, what()))
    }
}

/// A repetition as a stack: innermost first, nothing for once.
pub(super) fn stack(repetition: Repetition) -> Vec<Repetition> {
    match repetition {
        Repetition::Once => Vec::new(),
        Repetition::Nested(parts) => parts.into_iter().flat_map(stack).collect(),
        other => vec![other],
    }
}
