//! The tree of cells: names resolved to indices, circles refused, contents counted without unfolding.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::{Cell, CellId, Layer, Layout, LayoutError, Placement, Shapes};

/// Longest accepted chain of placements; real layouts stay under 40.
pub(super) const MAX_DEPTH: usize = 128;

/// What a layout holds once all placements and repetitions are counted.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Summary {
    /// Polygons by layer, as seen from all top cells together.
    pub layers: BTreeMap<Layer, u128>,
    /// Cells that no other cell places, in file order.
    pub top_cells: Vec<CellId>,
    /// Cells defined.
    pub cells: usize,
    /// Placements of cells, as seen from all top cells together.
    pub placements: u128,
    /// Whether a count went beyond `u128` and stands at its greatest value.
    pub saturated: bool,
}

impl Layout {
    /// Polygons by layer with all placements and repetitions counted (saturating; see [`Layout::summary`]).
    #[must_use]
    pub fn layers(&self) -> BTreeMap<Layer, u128> {
        self.summary().layers
    }

    /// Counts everything bottom-up: time and memory go with what is in the file, not with how often it repeats.
    #[must_use]
    pub fn summary(&self) -> Summary {
        let mut sum = Summary {
            top_cells: self.top_cells(),
            cells: self.cells.len(),
            ..Summary::default()
        };
        let mut inside: Vec<(BTreeMap<Layer, u128>, u128)> =
            vec![Default::default(); self.cells.len()];
        for i in order(&self.cells).bottom_up {
            let (mut layers, mut placements) = (BTreeMap::new(), 0);
            for shape in self.cells[i].shapes.iter() {
                let count = layers.entry(shape.layer).or_default();
                add_product(count, 1, shape.repetition.count(), &mut sum.saturated);
            }
            for placement in &self.cells[i].placements {
                let times = placement.repetition.count();
                let (child, within) = &inside[placement.cell.0];
                for (&layer, &count) in child {
                    let here = layers.entry(layer).or_default();
                    add_product(here, count, times, &mut sum.saturated);
                }
                add_product(&mut placements, *within, times, &mut sum.saturated);
                add_product(&mut placements, 1, times, &mut sum.saturated);
            }
            inside[i] = (layers, placements);
        }
        for top in sum.top_cells.clone() {
            let (layers, placements) = &inside[top.0];
            for (&layer, &count) in layers {
                let here = sum.layers.entry(layer).or_default();
                add_product(here, count, 1, &mut sum.saturated);
            }
            add_product(&mut sum.placements, *placements, 1, &mut sum.saturated);
        }
        sum
    }

    /// Cells that no other cell places, in file order.
    #[must_use]
    pub fn top_cells(&self) -> Vec<CellId> {
        let mut placed = vec![false; self.cells.len()];
        for placement in self.cells.iter().flat_map(|c| &c.placements) {
            placed[placement.cell.0] = true;
        }
        (0..placed.len())
            .filter(|&i| !placed[i])
            .map(CellId)
            .collect()
    }

    /// All cells, each after the cells it places.
    #[must_use]
    pub fn bottom_up(&self) -> Vec<CellId> {
        order(&self.cells)
            .bottom_up
            .into_iter()
            .map(CellId)
            .collect()
    }
}

/// `total += a·b`, standing still at the greatest value.
fn add_product(total: &mut u128, a: u128, b: u128, saturated: &mut bool) {
    let sum = a.checked_mul(b).and_then(|p| p.checked_add(*total));
    *saturated |= sum.is_none();
    *total = sum.unwrap_or(u128::MAX);
}

/// A cell whose placements still point into a table of names.
#[derive(Debug, Default)]
pub(super) struct RawCell {
    pub(super) name: Vec<u8>,
    pub(super) shapes: Shapes,
    /// `cell` indexes the table of names given to [`link`].
    pub(super) placements: Vec<Placement>,
}

/// Gives each different key a small number.
#[derive(Debug)]
pub(super) struct Interner<K> {
    numbers: HashMap<K, usize>,
    keys: Vec<K>,
}

impl<K> Default for Interner<K> {
    fn default() -> Self {
        Self {
            numbers: HashMap::new(),
            keys: Vec::new(),
        }
    }
}

impl<K: Clone + Eq + std::hash::Hash> Interner<K> {
    pub(super) fn number<Q>(&mut self, key: &Q) -> usize
    where
        K: std::borrow::Borrow<Q>,
        Q: ToOwned<Owned = K> + Eq + std::hash::Hash + ?Sized,
    {
        if let Some(&n) = self.numbers.get(key) {
            return n;
        }
        let n = self.keys.len();
        self.keys.push(key.to_owned());
        self.numbers.insert(key.to_owned(), n);
        n
    }

    pub(super) fn into_keys(self) -> Vec<K> {
        self.keys
    }
}

/// Resolves names and checks the hierarchy: `names[placement.cell]` is the name of the cell placed.
pub(super) fn link(
    raw: Vec<RawCell>,
    names: &[Vec<u8>],
    file: &str,
) -> Result<Vec<Cell>, LayoutError> {
    let mut index = HashMap::with_capacity(raw.len());
    for (i, cell) in raw.iter().enumerate() {
        if index.insert(cell.name.clone(), i).is_some() {
            return Err(LayoutError::DuplicateCell {
                file: file.to_owned(),
                name: text(&cell.name),
            });
        }
    }
    let found: Vec<Option<usize>> = names.iter().map(|n| index.get(n).copied()).collect();
    let mut missing = BTreeSet::new();
    let cells: Vec<Cell> = raw
        .into_iter()
        .map(|cell| Cell {
            name: text(&cell.name),
            shapes: cell.shapes,
            placements: cell
                .placements
                .into_iter()
                .filter_map(|mut placement| {
                    let target = found[placement.cell.0];
                    if target.is_none() {
                        missing.insert(text(&names[placement.cell.0]));
                    }
                    placement.cell = CellId(target?);
                    Some(placement)
                })
                .collect(),
        })
        .collect();
    if !missing.is_empty() {
        return Err(LayoutError::MissingCells {
            file: file.to_owned(),
            names: missing.into_iter().collect(),
        });
    }
    let order = order(&cells);
    if !order.circle.is_empty() {
        return Err(LayoutError::RecursiveCells {
            file: file.to_owned(),
            names: order
                .circle
                .iter()
                .map(|&i| cells[i].name.clone())
                .collect(),
        });
    }
    if order.depth > MAX_DEPTH {
        return Err(LayoutError::TooDeep {
            file: file.to_owned(),
            depth: order.depth,
            limit: MAX_DEPTH,
        });
    }
    Ok(cells)
}

/// A name as text: UTF-8, or Latin-1 where it is not, so that different names stay different.
pub(super) fn text(name: &[u8]) -> String {
    std::str::from_utf8(name).map_or_else(
        |_| name.iter().map(|&b| char::from(b)).collect(),
        str::to_owned,
    )
}

struct Order {
    /// Each cell after the cells it places.
    bottom_up: Vec<usize>,
    /// Longest chain of placements.
    depth: usize,
    /// The first circle met; empty if there is none.
    circle: Vec<usize>,
}

/// Depth-first, with its own stack: hostile nesting must not exhaust the thread's.
fn order(cells: &[Cell]) -> Order {
    #[derive(Clone, Copy, PartialEq)]
    enum State {
        New,
        Open,
        Done,
    }
    let mut state = vec![State::New; cells.len()];
    let mut depth = vec![0; cells.len()];
    let mut result = Order {
        bottom_up: Vec::with_capacity(cells.len()),
        depth: 0,
        circle: Vec::new(),
    };
    for root in 0..cells.len() {
        if state[root] != State::New {
            continue;
        }
        state[root] = State::Open;
        let mut stack = vec![(root, 0)];
        while let Some((cell, next)) = stack.last_mut() {
            let Some(placement) = cells[*cell].placements.get(*next) else {
                let cell = *cell;
                stack.pop();
                state[cell] = State::Done;
                result.bottom_up.push(cell);
                result.depth = result.depth.max(depth[cell]);
                if let Some(&(parent, _)) = stack.last() {
                    depth[parent] = depth[parent].max(depth[cell] + 1);
                }
                continue;
            };
            *next += 1;
            let (parent, child) = (*cell, placement.cell.0);
            match state[child] {
                State::New => {
                    state[child] = State::Open;
                    stack.push((child, 0));
                }
                State::Done => depth[parent] = depth[parent].max(depth[child] + 1),
                State::Open if result.circle.is_empty() => {
                    let start = stack.iter().position(|&(c, _)| c == child).unwrap_or(0);
                    result.circle = stack[start..].iter().map(|&(c, _)| c).collect();
                }
                State::Open => {}
            }
        }
    }
    result
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Point, Repetition};
    use crate::layout::Shape;
    use crate::units::Nm;

    fn square() -> Shape {
        Shape {
            layer: Layer {
                layer: 1,
                datatype: 0,
            },
            points: vec![Point::new(0, 0), Point::new(1, 0), Point::new(1, 1)],
            repetition: Repetition::Once,
        }
    }

    fn place(cell: usize, count: u64) -> Placement {
        Placement {
            cell: CellId(cell),
            origin: Point::default(),
            mirror: false,
            angle_deg: 0.0,
            magnification: 1.0,
            repetition: Repetition::Lattice {
                columns: count,
                rows: count,
                a: Point::new(10, 0),
                b: Point::new(0, 10),
            },
        }
    }

    fn chain(links: usize, count: u64) -> Layout {
        let cells = (0..=links)
            .map(|i| Cell {
                name: format!("c{i}"),
                shapes: (i == 0).then(square).into_iter().collect(),
                placements: if i == 0 {
                    vec![]
                } else {
                    vec![place(i - 1, count)]
                },
            })
            .collect();
        Layout {
            unit: Nm(1.0),
            cells,
            open_outlines: 0,
            notes: vec![],
        }
    }

    #[test]
    fn nested_arrays_of_a_quintillion_places_are_counted() {
        let sum = chain(3, 1000).summary();
        assert_eq!(
            sum.layers.values().copied().collect::<Vec<_>>(),
            [10_u128.pow(18)]
        );
        assert_eq!(
            sum.placements,
            10_u128.pow(6) + 10_u128.pow(12) + 10_u128.pow(18)
        );
        assert_eq!(sum.top_cells, [CellId(3)]);
        assert!(!sum.saturated);
    }

    #[test]
    fn counts_beyond_u128_stand_still_and_say_so() {
        let sum = chain(4, u64::from(u32::MAX)).summary();
        assert!(sum.saturated);
        assert_eq!(sum.layers.values().max(), Some(&u128::MAX));
    }

    #[test]
    fn children_come_before_parents() {
        let mut layout = chain(5, 2);
        layout.cells.reverse();
        for cell in &mut layout.cells {
            for p in &mut cell.placements {
                p.cell.0 = 5 - p.cell.0;
            }
        }
        let order = layout.bottom_up();
        assert_eq!(order.len(), 6);
        let rank = |c: CellId| order.iter().position(|&o| o == c);
        for (i, cell) in layout.cells.iter().enumerate() {
            for p in &cell.placements {
                assert!(rank(p.cell) < rank(CellId(i)));
            }
        }
    }
}
