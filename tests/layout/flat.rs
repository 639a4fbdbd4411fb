//! A layout unfolded, polygon by polygon in floating point: an independent witness of what placements and repetitions mean.

use std::collections::BTreeMap;

use shotwright::layout::{CellId, Layout};

/// Polygons, summed area and bounding box of one layer, database units.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Measure {
    pub(crate) polygons: u64,
    pub(crate) area: f64,
    /// Least x, least y, greatest x, greatest y.
    pub(crate) bounds: [f64; 4],
}

type Complex = [f64; 2];

/// `z → turn·z` (`turn·conj z` if mirrored) `+ shift`.
#[derive(Clone, Copy)]
struct Map {
    turn: Complex,
    mirror: bool,
    shift: Complex,
}

impl Map {
    fn turned(&self, z: Complex) -> Complex {
        let y = if self.mirror { -z[1] } else { z[1] };
        [
            self.turn[0] * z[0] - self.turn[1] * y,
            self.turn[1] * z[0] + self.turn[0] * y,
        ]
    }

    fn apply(&self, z: Complex) -> Complex {
        let t = self.turned(z);
        [t[0] + self.shift[0], t[1] + self.shift[1]]
    }
}

/// Everything that the top cells hold, by layer as `L/D`.
pub(crate) fn measure(layout: &Layout) -> BTreeMap<String, Measure> {
    let mut layers = BTreeMap::new();
    let identity = Map {
        turn: [1.0, 0.0],
        mirror: false,
        shift: [0.0, 0.0],
    };
    for top in layout.top_cells() {
        unfold(layout, top, identity, &mut layers);
    }
    layers
}

fn unfold(layout: &Layout, cell: CellId, map: Map, layers: &mut BTreeMap<String, Measure>) {
    let cell = &layout.cells[cell.0];
    for shape in cell.shapes.iter() {
        let key = format!("{}/{}", shape.layer.layer, shape.layer.datatype);
        let measure = layers.entry(key).or_insert(Measure {
            polygons: 0,
            area: 0.0,
            bounds: [f64::MAX, f64::MAX, f64::MIN, f64::MIN],
        });
        for d in shape.repetition.displacements() {
            let ring: Vec<Complex> = shape
                .points
                .iter()
                .map(|p| map.apply([(p.x + d.x) as f64, (p.y + d.y) as f64]))
                .collect();
            measure.polygons += 1;
            measure.area += area(&ring).abs();
            for [x, y] in ring {
                let b = &mut measure.bounds;
                *b = [b[0].min(x), b[1].min(y), b[2].max(x), b[3].max(y)];
            }
        }
    }
    for placement in &cell.placements {
        let (sin, cos) = placement.angle_deg.to_radians().sin_cos();
        let own = [placement.magnification * cos, placement.magnification * sin];
        for d in placement.repetition.displacements() {
            let origin = [
                (placement.origin.x + d.x) as f64,
                (placement.origin.y + d.y) as f64,
            ];
            let inner = Map {
                turn: map.turned(own),
                mirror: map.mirror != placement.mirror,
                shift: map.apply(origin),
            };
            unfold(layout, placement.cell, inner, layers);
        }
    }
}

fn area(ring: &[Complex]) -> f64 {
    let next = ring.iter().cycle().skip(1);
    ring.iter()
        .zip(next)
        .map(|(a, b)| (a[0] * b[1] - b[0] * a[1]) / 2.0)
        .sum()
}
