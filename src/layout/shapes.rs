//! The polygons of a cell in little memory: points end to end, 8 bytes each, and 12 bytes for each polygon.
//!
//! A layout of a hundred megabytes has a million polygons. One allocation for each, and sixteen bytes for each point, would cost more time in
//! the memory manager than in the reader.

use std::fmt;
use std::ops::Range;

use super::Layer;
use crate::geom::{Point, Repetition};

/// Points in a block before the next is begun: blocks stay where they are, so nothing is copied when a cell grows.
const BLOCK_POINTS: usize = 1 << 17;

/// One polygon, perhaps repeated; database units.
#[derive(Clone, Debug, PartialEq)]
pub struct Shape {
    /// On which layer.
    pub layer: Layer,
    /// At least three points, the first not repeated at the end; either sense, keyholes and self-touching allowed.
    pub points: Vec<Point>,
    /// Where else.
    pub repetition: Repetition,
}

/// The same, seen where it is stored.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShapeRef<'a> {
    /// On which layer.
    pub layer: Layer,
    /// At least three points, the first not repeated at the end; either sense, keyholes and self-touching allowed.
    pub points: Points<'a>,
    /// Where else.
    pub repetition: &'a Repetition,
}

impl ShapeRef<'_> {
    /// A copy on its own.
    #[must_use]
    pub fn to_shape(&self) -> Shape {
        Shape {
            layer: self.layer,
            points: self.points.iter().collect(),
            repetition: self.repetition.clone(),
        }
    }
}

/// The points of a stored polygon.
#[derive(Clone, Copy)]
pub struct Points<'a>(Slice<'a>);

#[derive(Clone, Copy)]
enum Slice<'a> {
    Narrow(&'a [[i32; 2]]),
    Wide(&'a [Point]),
}

impl<'a> Points<'a> {
    /// How many.
    #[must_use]
    pub fn len(&self) -> usize {
        match self.0 {
            Slice::Narrow(points) => points.len(),
            Slice::Wide(points) => points.len(),
        }
    }

    /// Never: a stored polygon has at least three.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// In order.
    pub fn iter(&self) -> impl ExactSizeIterator<Item = Point> + use<'a> {
        let points = *self;
        (0..self.len()).map(move |i| match points.0 {
            Slice::Narrow(points) => widened(points[i]),
            Slice::Wide(points) => points[i],
        })
    }
}

impl PartialEq for Points<'_> {
    fn eq(&self, other: &Self) -> bool {
        self.iter().eq(other.iter())
    }
}

impl fmt::Debug for Points<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_list().entries(self.iter()).finish()
    }
}

fn widened([x, y]: [i32; 2]) -> Point {
    Point::new(x.into(), y.into())
}

/// Of a point that is known to fit.
#[allow(
    clippy::cast_possible_truncation,
    reason = "the caller has looked at the greatest"
)]
fn narrowed(p: Point) -> [i32; 2] {
    [p.x as i32, p.y as i32]
}

/// Polygons in the order of the file.
#[derive(Clone, Default)]
pub struct Shapes {
    blocks: Vec<Block>,
}

/// Some consecutive polygons.
#[derive(Clone, Default)]
struct Block {
    points: Store,
    shapes: Vec<Stored>,
    /// Layers as they change from polygon to polygon.
    layers: Vec<Layer>,
    /// Other than [`Repetition::Once`].
    repetitions: Vec<Repetition>,
}

/// 32 bits a coordinate while that is enough.
#[derive(Clone)]
enum Store {
    Narrow(Vec<[i32; 2]>),
    Wide(Vec<Point>),
}

impl Default for Store {
    fn default() -> Self {
        Self::Narrow(Vec::new())
    }
}

#[derive(Clone, Copy)]
struct Stored {
    /// Where its points end in the block's.
    end: u32,
    /// Index in the block's layers.
    layer: u32,
    /// Index in the block's repetitions plus one; 0 for once.
    repetition: u32,
}

impl Store {
    fn len(&self) -> usize {
        match self {
            Self::Narrow(points) => points.len(),
            Self::Wide(points) => points.len(),
        }
    }

    fn get(&self, range: Range<usize>) -> Points<'_> {
        Points(match self {
            Self::Narrow(points) => Slice::Narrow(&points[range]),
            Self::Wide(points) => Slice::Wide(&points[range]),
        })
    }
}

impl Block {
    fn has_room(&self, wide: bool, points: usize) -> bool {
        let fits = self.points.len() == 0 || self.points.len() + points <= BLOCK_POINTS;
        fits && wide == matches!(self.points, Store::Wide(_))
    }

    /// Takes the points at the end of the store as a polygon.
    #[inline]
    fn close(&mut self, layer: Layer, repetition: Repetition) {
        if self.layers.last() != Some(&layer) {
            self.layers.push(layer);
        }
        let repetition = match repetition {
            Repetition::Once => 0,
            other => {
                if self.repetitions.last() != Some(&other) {
                    self.repetitions.push(other);
                }
                index(self.repetitions.len())
            }
        };
        self.shapes.push(Stored {
            end: index(self.points.len()),
            layer: index(self.layers.len() - 1),
            repetition,
        });
    }

    fn iter(&self) -> impl Iterator<Item = ShapeRef<'_>> {
        let mut start = 0;
        self.shapes.iter().map(move |stored| {
            let end = stored.end as usize;
            let points = self.points.get(start..end);
            start = end;
            ShapeRef {
                layer: self.layers[stored.layer as usize],
                points,
                repetition: match stored.repetition {
                    0 => &Repetition::Once,
                    i => &self.repetitions[i as usize - 1],
                },
            }
        })
    }

    fn shrink(&mut self) {
        match &mut self.points {
            Store::Narrow(points) => points.shrink_to_fit(),
            Store::Wide(points) => points.shrink_to_fit(),
        }
        self.shapes.shrink_to_fit();
    }
}

/// A block holds either a few points or one polygon, which files keep far under 2³² points.
fn index(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

impl Shapes {
    /// How many, repetitions not counted.
    #[must_use]
    pub fn len(&self) -> usize {
        self.blocks.iter().map(|block| block.shapes.len()).sum()
    }

    /// Whether there is none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// In the order of the file.
    pub fn iter(&self) -> impl Iterator<Item = ShapeRef<'_>> {
        self.blocks.iter().flat_map(Block::iter)
    }

    /// Copies, each on its own.
    #[must_use]
    pub fn to_vec(&self) -> Vec<Shape> {
        self.iter().map(|shape| shape.to_shape()).collect()
    }

    /// One more.
    pub fn push(&mut self, shape: Shape) {
        self.add(
            shape.layer,
            &shape.points,
            Point::default(),
            shape.repetition,
        );
    }

    /// One more, its points moved by `shift`.
    pub(super) fn add(
        &mut self,
        layer: Layer,
        points: &[Point],
        shift: Point,
        repetition: Repetition,
    ) {
        // The bits that any coordinate has besides its sign.
        let bits = points.iter().fold(0, |bits, &p| {
            let p = p + shift;
            bits | (p.x ^ p.x >> 63) | (p.y ^ p.y >> 63)
        });
        let block = self.block(bits > i64::from(i32::MAX), points.len());
        match &mut block.points {
            Store::Narrow(store) => store.extend(points.iter().map(|&p| narrowed(p + shift))),
            Store::Wide(store) => store.extend(points.iter().map(|&p| p + shift)),
        }
        block.close(layer, repetition);
    }

    /// One more of 32-bit points.
    #[inline]
    pub(super) fn add_narrow(
        &mut self,
        layer: Layer,
        points: impl ExactSizeIterator<Item = [i32; 2]>,
    ) {
        let block = self.block(false, points.len());
        if let Store::Narrow(store) = &mut block.points {
            store.extend(points);
        }
        block.close(layer, Repetition::Once);
    }

    /// All of another behind these.
    pub(super) fn append(&mut self, mut other: Self) {
        self.blocks.append(&mut other.blocks);
    }

    /// Gives back what the last block took for more.
    pub(super) fn shrink(&mut self) {
        if let Some(last) = self.blocks.last_mut() {
            last.shrink();
        }
    }

    /// The block that takes the next polygon.
    #[inline]
    fn block(&mut self, wide: bool, points: usize) -> &mut Block {
        let has_room = self
            .blocks
            .last()
            .is_some_and(|last| last.has_room(wide, points));
        if !has_room {
            self.begin(wide);
        }
        let last = self.blocks.len() - 1;
        &mut self.blocks[last]
    }

    #[cold]
    fn begin(&mut self, wide: bool) {
        self.shrink();
        let mut block = Block::default();
        if wide {
            block.points = Store::Wide(Vec::new());
        }
        self.blocks.push(block);
    }
}

impl FromIterator<Shape> for Shapes {
    fn from_iter<I: IntoIterator<Item = Shape>>(shapes: I) -> Self {
        let mut all = Self::default();
        for shape in shapes {
            all.push(shape);
        }
        all.shrink();
        all
    }
}

impl From<Vec<Shape>> for Shapes {
    fn from(shapes: Vec<Shape>) -> Self {
        shapes.into_iter().collect()
    }
}

impl PartialEq for Shapes {
    fn eq(&self, other: &Self) -> bool {
        self.iter().eq(other.iter())
    }
}

impl fmt::Debug for Shapes {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_list().entries(self.iter()).finish()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shape(layer: u32, side: i64, repetition: Repetition) -> Shape {
        let points = [(0, 0), (side, 0), (side, side)];
        Shape {
            layer: Layer { layer, datatype: 0 },
            points: points.map(|(x, y)| Point::new(x, y)).to_vec(),
            repetition,
        }
    }

    #[test]
    fn what_goes_in_comes_out_in_order() {
        let twice = Repetition::List(vec![Point::default(), Point::new(5, 5)]);
        let wide = i64::from(i32::MAX) + 1;
        let all: Vec<Shape> = (0..200_000)
            .map(|i| match i % 5 {
                // Blocks end at a polygon that needs 64 bits and at the next that does not.
                0 if i % 10_000 == 0 => shape(1, wide + i, Repetition::Once),
                1 => shape(1, i, twice.clone()),
                2 => shape(2, -i, Repetition::Once),
                _ => shape(1, i, Repetition::Once),
            })
            .collect();
        let stored = Shapes::from(all.clone());
        assert_eq!(stored.len(), all.len());
        assert_eq!(stored.to_vec(), all);
    }

    #[test]
    fn a_polygon_larger_than_a_block_stays_whole() {
        let points: Vec<Point> = (0..BLOCK_POINTS as i64 + 5)
            .map(|i| Point::new(i, i * i % 7))
            .collect();
        let large = Shape {
            points,
            ..shape(1, 1, Repetition::Once)
        };
        let all = vec![
            shape(1, 4, Repetition::Once),
            large,
            shape(1, 4, Repetition::Once),
        ];
        assert_eq!(Shapes::from(all.clone()).to_vec(), all);
    }

    #[test]
    fn the_greatest_32_bit_coordinates_are_kept() {
        for side in [i32::MAX.into(), i32::MIN.into(), i64::from(i32::MAX) + 1] {
            let all = vec![shape(1, side, Repetition::Once)];
            assert_eq!(Shapes::from(all.clone()).to_vec(), all);
        }
    }
}
