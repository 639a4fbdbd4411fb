//! The cells of a layout at mask scale: chosen layers only, whole picometres, every polygon made sound.
//!
//! `scaling` states how numbers are rounded, `repair` how outlines are made sound.

use std::collections::{BTreeMap, HashMap};
use std::sync::Arc;

use rayon::prelude::*;

use crate::geom::{Figure, Orientation, Point, Rect, Repetition, Transform};
use crate::layout::{Cell, CellId, Layer, Layout, Placement, ShapeRef};
use crate::units::PM_PER_NM;

use super::repair::{Repairs, sound};
use super::repeat::{RANGE, add_spans, span};
use super::scaling::{Residue, ScaleError, Scaling};
use super::{Defect, Expose, LayerCounts, MAX_PARTS, MaskError, MaskOptions};

/// What a figure does to the mask.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Role {
    Drawn,
    Subtracted,
    /// The border of an exposed background.
    Frame,
}

/// What stands in a cell.
#[derive(Clone, Debug)]
pub(super) enum Content {
    Figure(Role, Arc<Figure>),
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

    /// Mirrored and shifted as asked; `None` out of range.
    fn onto_mask(&self, options: &MaskOptions) -> Option<Self> {
        let t = Transform {
            orientation: Orientation::new(options.mirror, 0),
            shift: options.shift,
        };
        let far = |v: i64| v.unsigned_abs() > RANGE.unsigned_abs();
        if far(t.shift.x) || far(t.shift.y) {
            return None;
        }
        Some(self.moved(t)).filter(|item| item.checked_extent().is_some())
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

/// The name of the cell an item places; empty for a figure.
pub(super) fn name_of(cells: &[PmCell], item: &Item) -> String {
    match item.content {
        Content::Cell(cell) => cells[cell].name.clone(),
        Content::Figure(..) => String::new(),
    }
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
    for shape in layout.cells.iter().flat_map(|c| c.shapes.iter()) {
        let count = counts.entry(shape.layer).or_default();
        *count = count.saturating_add(shape.repetition.count());
    }
    LayerCounts(counts.into_iter().collect())
}

/// The layers taken and subtracted, with what their polygons do.
fn chosen_layers(layout: &Layout, options: &MaskOptions) -> Result<Vec<(Layer, Role)>, MaskError> {
    let present = layer_counts(layout);
    let mut taken = options.layers.clone();
    if taken.is_empty() {
        let mut rest = present.0.iter().map(|&(layer, _)| layer);
        let mut rest = rest.by_ref().filter(|layer| !options.minus.contains(layer));
        match (rest.next(), rest.next()) {
            (Some(only), None) => taken.push(only),
            _ => return Err(MaskError::LayerNotChosen { present }),
        }
    }
    if let Some(&layer) = taken.iter().find(|layer| options.minus.contains(layer)) {
        return Err(MaskError::LayerTwice { layer });
    }
    let absent = |layer: &&Layer| !present.0.iter().any(|(p, _)| p == *layer);
    if let Some(&layer) = taken.iter().chain(&options.minus).find(absent) {
        return Err(MaskError::LayerAbsent { layer, present });
    }
    let drawn = taken.into_iter().map(|layer| (layer, Role::Drawn));
    let subtracted = options.minus.iter().map(|&layer| (layer, Role::Subtracted));
    Ok(drawn.chain(subtracted).collect())
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
        layers: chosen_layers(layout, options)?,
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
            let item = Item {
                content: Content::Cell(cell),
                bounds: converter.cells[cell].bounds,
                transform: Transform::IDENTITY,
                repetitions: Vec::new(),
            };
            let name = || layout.cells[id].name.clone();
            tops.push(
                item.onto_mask(options)
                    .ok_or_else(|| ScaleError::Range.at(&name(), "the shift".to_owned()))?,
            );
        }
    }
    let top_count = tops.len();
    if options.strict && layout.open_outlines > 0 {
        return Err(MaskError::OpenOutlines {
            count: layout.open_outlines,
        });
    }
    if let Some((id, polygon, defect)) = converter.repairs.first.filter(|_| options.strict) {
        let cell = layout.cells[id].name.clone();
        return Err(MaskError::Unsound {
            cell,
            polygon,
            defect,
        });
    }
    if let Expose::Background { frame } = options.expose {
        tops.push(Item {
            content: Content::Figure(Role::Frame, Arc::new(Figure::from_rect(frame))),
            bounds: frame,
            transform: Transform::IDENTITY,
            repetitions: Vec::new(),
        });
    }
    let mut notes = layout.notes.clone();
    notes.extend(converter.repairs.notes());
    if top_count > 1 {
        notes.push(format!(
            "{top_count} top cells: all taken, each at its own origin"
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
    layers: Vec<(Layer, Role)>,
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
        let chosen: Vec<(usize, ShapeRef<'_>, Role)> = cell
            .shapes
            .iter()
            .enumerate()
            .filter_map(|(i, shape)| Some((i, shape, self.role(shape.layer)?)))
            .collect();
        let polygons: Vec<(usize, Vec<Item>, Vec<Defect>)> = chosen
            .par_iter()
            .map(|&(i, shape, role)| {
                let (items, defects) = self.polygon(cell, i, shape, role, scaling)?;
                Ok((i, items, defects))
            })
            .collect::<Result<_, _>>()?;
        let mut items = Vec::new();
        for (i, figures, defects) in polygons {
            items.extend(figures);
            if !self.repaired[id] {
                self.repairs.add(id, i, &defects);
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

    fn role(&self, layer: Layer) -> Option<Role> {
        let chosen = self.layers.iter().find(|(chosen, _)| *chosen == layer)?;
        Some(chosen.1)
    }

    fn polygon(
        &self,
        cell: &Cell,
        index: usize,
        shape: ShapeRef<'_>,
        role: Role,
        scaling: Scaling,
    ) -> Result<(Vec<Item>, Vec<Defect>), MaskError> {
        let what = || format!("polygon {index}");
        let points = shape.points.iter().map(|p| scaling.point(p));
        let points = points
            .collect::<Option<_>>()
            .ok_or_else(|| ScaleError::Range.at(&cell.name, what()))?;
        let (figures, mut defects) = sound(points);
        if !scaling.keeps(shape.points.iter()) {
            defects.push(Defect::OffGrid);
        }
        let repetition = scaling
            .repetition(shape.repetition)
            .map_err(|e| e.at(&cell.name, what()))?;
        let items = figures.into_iter().map(|figure| {
            let bounds = figure.bounds();
            Item {
                content: Content::Figure(role, Arc::new(figure)),
                bounds,
                transform: Transform::IDENTITY,
                repetitions: stack(repetition.clone()),
            }
        });
        let items: Vec<Item> = items.collect();
        match items.iter().all(|item| item.checked_extent().is_some()) {
            true => Ok((items, defects)),
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
