//! The width of a figure where it is narrowest, drawn and printed.

use serde::{Deserialize, Serialize};

use crate::blur::{Blur, THRESHOLD};
use crate::target::{Printed, Target};

/// Places as narrow as the narrowest that are measured; of more, so many evenly along the outline.
const MOST_MEASURED: usize = 16;

/// Widths nearer than this (nm) are one: a picometre of the grid, and a slanted edge's rounding.
const SAME: f64 = 0.002;

/// Width across a figure where it is least, from one edge to the edge that faces it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Narrowest {
    /// As drawn.
    pub drawn_nm: f64,
    /// As printed, along the same line; `None` where its middle does not print or no contour is in range.
    pub printed_nm: Option<f64>,
    /// The middle, in the frame of the figure; `None` of many figures together.
    pub place_nm: Option<[f64; 2]>,
}

impl Narrowest {
    /// Printed less drawn.
    #[must_use]
    pub fn error_nm(&self) -> Option<f64> {
        self.printed_nm.map(|printed| printed - self.drawn_nm)
    }

    /// The one further from its drawn width; nothing printed is furthest. Of equals the narrower.
    #[must_use]
    pub fn worse(self, other: Self) -> Self {
        let off = |n: &Self| n.error_nm().map_or(f64::INFINITY, f64::abs);
        let order = off(&self)
            .total_cmp(&off(&other))
            .then(other.drawn_nm.total_cmp(&self.drawn_nm));
        if order.is_lt() { other } else { self }
    }

    pub(super) fn anywhere(self) -> Self {
        Self {
            place_nm: None,
            ..self
        }
    }
}

/// A line across the figure.
struct Chord {
    from: [f64; 2],
    inward: [f64; 2],
    width: f64,
}

/// Looks inward from the outline every σ/2 at most, across to the edge that faces it, both ends away from drawn corners (from everywhere
/// where all is near a corner).
///
/// Where several places are equally narrow the one that prints worst counts. `None` where no edge faces another.
pub(super) fn find(target: &Target, print: &impl Printed, blur: Blur) -> Option<Narrowest> {
    let mut chords = narrowest(target, blur, false);
    if chords.is_empty() {
        chords = narrowest(target, blur, true);
    }
    let (n, most) = (chords.len(), chords.len().min(MOST_MEASURED));
    let measured = (0..most).map(|k| &chords[(2 * k + 1) * n / (2 * most)]);
    measured
        .map(|chord| printed(chord, print, blur))
        .reduce(Narrowest::worse)
}

/// All chords as short as the shortest, in the order of the outline.
fn narrowest(target: &Target, blur: Blur, everywhere: bool) -> Vec<Chord> {
    let [x0, y0, x1, y1] = target.bounds();
    let mut least = (x1 - x0).hypot(y1 - y0);
    let mut chords: Vec<Chord> = Vec::new();
    for edge in target.edges().iter().filter(|e| e.length() > 0.0) {
        let normal = edge.outward();
        let inward = [-normal[0], -normal[1]];
        let pieces = (edge.length() / (0.5 * blur.sigma().0)).ceil().max(1.0);
        let mut k = 0.5;
        while k < pieces {
            let from = edge.at(k / pieces);
            k += 1.0;
            if !everywhere && target.in_corner_zone(from) {
                continue;
            }
            if let Some(width) = target.way_out(from, inward, least + SAME) {
                let to = [0, 1].map(|axis| from[axis] + width * inward[axis]);
                if !everywhere && target.in_corner_zone(to) {
                    continue;
                }
                least = least.min(width);
                chords.push(Chord {
                    from,
                    inward,
                    width,
                });
            }
        }
    }
    chords.retain(|chord| chord.width <= least + SAME);
    chords
}

fn printed(chord: &Chord, print: &impl Printed, blur: Blur) -> Narrowest {
    let Chord {
        from,
        inward,
        width,
    } = *chord;
    let middle = [0, 1].map(|axis| from[axis] + 0.5 * width * inward[axis]);
    let range = 0.5 * width + 4.0 * blur.sigma().0;
    let half = |way: [f64; 2]| print.crossing(middle, way, range);
    let prints = print.dose(middle) >= THRESHOLD;
    Narrowest {
        drawn_nm: width,
        printed_nm: prints
            .then(|| Some(half(inward)? + half([-inward[0], -inward[1]])?))
            .flatten(),
        place_nm: Some(middle),
    }
}
