//! Which parts of a cell stand alone, and which must be looked at together.
//!
//! Two parts *interact* when their bounds, over all repetitions, come within reach of each other. A part that
//! interacts with nothing, itself included, is kept as it is with its repetitions: a placed cell is then resolved
//! once for all its places. Parts that interact are loosened step by step, and looked at again:
//!
//! 1. a repetition that interacts with other parts is cut, so that only the elements near them become parts of their own;
//! 2. a repeated cell whose copies interact with each other is split into the groups of its parts that hang together,
//!    each repeated alike; if it is one such group, the repetition is written out;
//! 3. a cell placed once is opened: its parts join those of its parent.
//!
//! What remains are clusters of figures, each without repetition inside. Suspecting an interaction that is none costs time and never
//! changes a figure; overlooking one would, so every test here errs on the side of suspicion.

use std::collections::HashMap;
use std::sync::Arc;

use crate::geom::{Figure, Point, Rect, Repetition, Transform};

use super::cells::{Content, Item, PmCell, Role};
use super::cut::{all_of, cut, element, last, shifted, too_many};
use super::index::{BoxIndex, clusters};
use super::repeat::{IndexRange, add_spans, indices_in, interacts_with_itself, span, window};
use super::{MAX_PARTS, MaskError};

/// Figures to be merged together, with the repetitions of the whole cluster (innermost first).
pub(super) struct Cluster {
    pub(super) figures: Vec<(Role, Arc<Figure>)>,
    pub(super) repetitions: Vec<Repetition>,
}

/// A cell that stands alone within another.
pub(super) struct Child {
    pub(super) cell: usize,
    pub(super) transform: Transform,
    pub(super) repetitions: Vec<Repetition>,
}

/// A cell taken apart.
#[derive(Default)]
pub(super) struct Resolved {
    pub(super) clusters: Vec<Cluster>,
    pub(super) children: Vec<Child>,
}

pub(super) struct Resolver {
    /// Those of the layout, then those made here of parts that share a repetition.
    pub(super) cells: Vec<PmCell>,
    pub(super) reach: i64,
}

impl Resolver {
    /// Takes the parts of one cell apart.
    pub(super) fn resolve(&mut self, name: &str, items: Vec<Item>) -> Result<Resolved, MaskError> {
        let mut resolved = Resolved::default();
        let mut open = vec![self.bundled(name, items)];
        while let Some(items) = open.pop() {
            for group in self.groups(items) {
                let alone = group.len() == 1 && self.self_interaction(&group[0]).is_none();
                let flat = |item: &Item| {
                    matches!(item.content, Content::Figure(..)) && item.repetitions.is_empty()
                };
                if alone || group.iter().all(flat) {
                    resolved.take(group);
                } else {
                    let loosened = self.loosened(name, group)?;
                    if loosened.len() as u128 > MAX_PARTS {
                        return Err(too_many(name, loosened.len() as u128));
                    }
                    open.push(self.bundled(name, loosened));
                }
            }
        }
        resolved.gather_children();
        Ok(resolved)
    }

    /// Items in connected groups of those that interact.
    fn groups(&self, items: Vec<Item>) -> Vec<Vec<Item>> {
        // Two boxes grown by half the reach each touch when they are within reach.
        let grown: Vec<Rect> = items
            .iter()
            .map(|i| i.extent().grown((self.reach + 1) / 2))
            .collect();
        let groups = clusters(&grown, |i, j| self.interact(&items[i], &items[j]));
        let mut items: Vec<Option<Item>> = items.into_iter().map(Some).collect();
        groups
            .into_iter()
            .map(|g| g.into_iter().filter_map(|i| items[i].take()).collect())
            .collect()
    }

    /// Whether two items, whose extents come within reach, interact.
    fn interact(&self, x: &Item, y: &Item) -> bool {
        if x.repetitions.is_empty() && y.repetitions.is_empty() {
            let figures = matches!(
                (&x.content, &y.content),
                (Content::Figure(..), Content::Figure(..))
            );
            return figures || !(self.apart(x, y) || self.apart(y, x));
        }
        // An element of each must come near the extent of the other; this is also what makes a cut take something off.
        if self.apart(x, y)
            || self.apart(y, x)
            || !self.hits(x, y.extent())
            || !self.hits(y, x.extent())
        {
            return false;
        }
        let in_step = x.repetitions == y.repetitions || same_steps(x, y);
        !in_step || self.interact_in_step(x, y)
    }

    /// The same for items repeated with the same steps: only the differences of their displacements count.
    fn interact_in_step(&self, x: &Item, y: &Item) -> bool {
        match (&x.repetitions[..], &y.repetitions[..]) {
            (
                [
                    Repetition::Lattice {
                        columns,
                        rows,
                        a,
                        b,
                    },
                ],
                [
                    Repetition::Lattice {
                        columns: y_columns,
                        rows: y_rows,
                        ..
                    },
                ],
            ) => {
                let differences = IndexRange {
                    columns: (-last(*y_columns), last(*columns)),
                    rows: (-last(*y_rows), last(*rows)),
                };
                indices_in(differences, *a, *b, window(x.bounds, y.bounds, self.reach)).is_some()
            }
            _ => {
                let both = Item {
                    bounds: x.bounds.hull(y.bounds),
                    ..x.clone()
                };
                self.self_interaction(&both).is_some()
                    || x.bounds.grown(self.reach).touches(y.bounds)
            }
        }
    }

    /// Whether `x` is a single figure that surely keeps clear of all of `y`, as a frame does of what it surrounds.
    fn apart(&self, x: &Item, y: &Item) -> bool {
        /// Outlines longer than this are not worth the walk.
        const MOST_VERTICES: usize = 4096;
        let Content::Figure(_, figure) = &x.content else {
            return false;
        };
        if !x.repetitions.is_empty() || figure.vertices() > MOST_VERTICES {
            return false;
        }
        let extent = y.extent();
        let near = extent.grown(self.reach);
        let mut inside = false;
        for (p, q) in figure.rings().flat_map(|r| r.edges()) {
            let (p, q) = (x.transform.apply(p), x.transform.apply(q));
            if Rect::new(p, q).touches(near) {
                return false;
            }
            // No edge is near, so all of the extent lies on one side of each: one corner tells.
            if (p.y > extent.min.y) != (q.y > extent.min.y) {
                let (dx, dy) = (i128::from(q.x - p.x), i128::from(q.y - p.y));
                let to_right =
                    i128::from(extent.min.y - p.y) * dx - i128::from(extent.min.x - p.x) * dy;
                inside ^= (to_right > 0) == (dy > 0);
            }
        }
        !inside
    }

    /// Whether an element of the outermost repetition of `item` comes within reach of `other`.
    fn hits(&self, item: &Item, other: Rect) -> bool {
        let Some((outermost, element)) = element(item) else {
            return true;
        };
        let near = window(element, other, self.reach);
        match outermost {
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            } => indices_in(all_of(*columns, *rows), *a, *b, near).is_some(),
            other => other.displacements().any(|d| near.contains(d)),
        }
    }

    /// The innermost repetition whose elements interact with each other.
    fn self_interaction(&self, item: &Item) -> Option<usize> {
        let mut element = item.bounds;
        for (level, repetition) in item.repetitions.iter().enumerate() {
            if interacts_with_itself(element, repetition, self.reach) {
                return Some(level);
            }
            element = span(repetition).and_then(|s| add_spans(element, s))?;
        }
        None
    }

    /// One step of loosening for every item of an interacting group.
    fn loosened(&mut self, name: &str, group: Vec<Item>) -> Result<Vec<Item>, MaskError> {
        let extents: Vec<Rect> = group.iter().map(Item::extent).collect();
        let index = BoxIndex::new(&extents);
        let mut parts = Vec::new();
        for (i, item) in group.into_iter().enumerate() {
            if let Some(level) = self.self_interaction(&item) {
                self.loosen_repetition(name, item, level, &mut parts)?;
            } else if !item.repetitions.is_empty() {
                let mut near = Vec::new();
                index.touching(extents[i].grown(self.reach), |j| {
                    if j != i {
                        near.push(extents[j]);
                    }
                });
                near.sort_unstable();
                cut(name, &item, &near, self.reach, &mut parts)?;
            } else if let Content::Cell(cell) = item.content {
                parts.extend(
                    self.cells[cell]
                        .items
                        .iter()
                        .map(|part| part.moved(item.transform)),
                );
            } else {
                parts.push(item);
            }
            if parts.len() as u128 > MAX_PARTS {
                return Err(too_many(name, parts.len() as u128));
            }
        }
        Ok(parts)
    }

    /// Splits a repeated cell into repeated groups, or writes one repetition out.
    fn loosen_repetition(
        &mut self,
        name: &str,
        item: Item,
        level: usize,
        parts: &mut Vec<Item>,
    ) -> Result<(), MaskError> {
        if let Content::Cell(cell) = item.content {
            let inner = self.cells[cell].items.clone();
            let inner = self.bundled(name, inner);
            let groups = self.groups(inner);
            if groups.len() > 1 {
                for group in groups {
                    let mut part = self.one_item(name, group).moved(item.transform);
                    part.repetitions.extend(item.repetitions.iter().cloned());
                    parts.push(part);
                }
                return Ok(());
            }
        }
        let mut rest = item.repetitions.clone();
        let written_out = rest.remove(level);
        let total = written_out.count().saturating_add(parts.len() as u128);
        if total > MAX_PARTS {
            return Err(too_many(name, total));
        }
        parts.extend(
            written_out
                .displacements()
                .map(|d| shifted(&item, d, rest.clone())),
        );
        Ok(())
    }

    /// Gathers parts that share a repetition and hang together into one cell repeated so: a cross drawn as two
    /// repeated bars is one repeated cross.
    fn bundled(&mut self, name: &str, items: Vec<Item>) -> Vec<Item> {
        let mut slots: HashMap<Vec<Repetition>, usize> = HashMap::new();
        let mut sharing: Vec<Vec<Item>> = Vec::new();
        let mut bundled = Vec::new();
        for item in items {
            if item.repetitions.is_empty() {
                bundled.push(item);
                continue;
            }
            let slot = *slots
                .entry(item.repetitions.clone())
                .or_insert(sharing.len());
            if slot == sharing.len() {
                sharing.push(Vec::new());
            }
            sharing[slot].push(item);
        }
        for mut group in sharing {
            if group.len() == 1 {
                bundled.append(&mut group);
                continue;
            }
            let repetitions = group[0].repetitions.clone();
            let once = group
                .into_iter()
                .map(|item| Item {
                    repetitions: Vec::new(),
                    ..item
                })
                .collect();
            for part in self.groups(once) {
                let mut part = self.one_item(name, part);
                part.repetitions.clone_from(&repetitions);
                bundled.push(part);
            }
        }
        bundled
    }

    /// A group as one item: itself if it is single, else a new cell placed at the origin.
    fn one_item(&mut self, name: &str, mut group: Vec<Item>) -> Item {
        if group.len() == 1 {
            return group.remove(0);
        }
        let bounds = group
            .iter()
            .skip(1)
            .fold(group[0].extent(), |hull, item| hull.hull(item.extent()));
        self.cells.push(PmCell {
            name: name.to_owned(),
            items: group,
            bounds,
        });
        Item {
            content: Content::Cell(self.cells.len() - 1),
            bounds,
            transform: Transform::IDENTITY,
            repetitions: Vec::new(),
        }
    }
}

impl Resolved {
    fn take(&mut self, mut group: Vec<Item>) {
        let repetitions = match &mut group[..] {
            [single] => std::mem::take(&mut single.repetitions),
            _ => Vec::new(),
        };
        if let [
            Item {
                content: Content::Cell(cell),
                transform,
                ..
            },
        ] = group[..]
        {
            self.children.push(Child {
                cell,
                transform,
                repetitions,
            });
            return;
        }
        let figures = group.into_iter().filter_map(|item| match item.content {
            Content::Figure(role, figure) if item.transform == Transform::IDENTITY => {
                Some((role, figure))
            }
            Content::Figure(role, figure) => Some((
                role,
                Arc::new(figure.transformed(item.transform).normalized()),
            )),
            Content::Cell(_) => None,
        });
        self.clusters.push(Cluster {
            figures: figures.collect(),
            repetitions,
        });
    }

    /// Placements of one cell in one orientation that stand once each become one list.
    fn gather_children(&mut self) {
        let once = |c: &Child| c.repetitions.is_empty();
        self.children.sort_by_key(|c| {
            (
                c.cell,
                c.transform.orientation,
                !once(c),
                c.transform.shift.y,
                c.transform.shift.x,
            )
        });
        let mut gathered: Vec<Child> = Vec::new();
        let mut rest = std::mem::take(&mut self.children).into_iter().peekable();
        while let Some(mut first) = rest.next() {
            let mut list = vec![Point::default()];
            while let Some(next) = rest.next_if(|next| {
                once(&first)
                    && once(next)
                    && (first.cell, first.transform.orientation)
                        == (next.cell, next.transform.orientation)
            }) {
                list.push(next.transform.shift - first.transform.shift);
            }
            if list.len() > 1 {
                first.repetitions = vec![Repetition::List(list)];
            }
            gathered.push(first);
        }
        self.children = gathered;
    }
}

fn same_steps(x: &Item, y: &Item) -> bool {
    match (&x.repetitions[..], &y.repetitions[..]) {
        ([Repetition::Lattice { a, b, .. }], [Repetition::Lattice { a: ya, b: yb, .. }]) => {
            (a, b) == (ya, yb)
        }
        _ => false,
    }
}
