//! What a figure asks of a dose: which places must print, which must not, and where the outline is.
//!
//! The rule: a place inside the figure and further than the tolerance from its outline must be at or above the
//! threshold, a place outside and further than it below. Within 2 σ of a drawn corner the tolerance is
//! `tolerance + 0.771 σ`, because no shot list prints a blurred right angle sharp.

mod peak;

pub use peak::peaks;

use crate::blur::{Blur, CORNER_PULL_BACK, THRESHOLD};
use crate::geom::{Figure, spans};
use crate::units::{BaseDose, Nm};

/// What the rule asks of a place.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Need {
    /// At or above the threshold.
    Print,
    /// Below the threshold.
    Clear,
    /// Within tolerance of the outline: either.
    Free,
}

/// A straight piece of an outline, nm; the figure lies to its left.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Edge {
    /// Start.
    pub a: [f64; 2],
    /// End.
    pub b: [f64; 2],
}

impl Edge {
    /// Its length, nm.
    #[must_use]
    pub fn length(&self) -> f64 {
        (self.b[0] - self.a[0]).hypot(self.b[1] - self.a[1])
    }

    /// Unit normal pointing out of the figure; zero for an edge of no length.
    #[must_use]
    pub fn outward(&self) -> [f64; 2] {
        let l = self.length();
        if l == 0.0 {
            [0.0, 0.0]
        } else {
            [(self.b[1] - self.a[1]) / l, (self.a[0] - self.b[0]) / l]
        }
    }

    /// The place at a share of its length.
    #[must_use]
    pub fn at(&self, share: f64) -> [f64; 2] {
        [
            self.a[0] + share * (self.b[0] - self.a[0]),
            self.a[1] + share * (self.b[1] - self.a[1]),
        ]
    }

    /// Where a ray meets the edge, and how squarely: the cosine between the ray and the outward normal.
    fn crossed(&self, p: [f64; 2], direction: [f64; 2]) -> Option<(f64, f64)> {
        let n = self.outward();
        let facing = n[0] * direction[0] + n[1] * direction[1];
        if facing == 0.0 {
            return None;
        }
        let t = (n[0] * (self.a[0] - p[0]) + n[1] * (self.a[1] - p[1])) / facing;
        let q = [
            p[0] + t * direction[0] - self.a[0],
            p[1] + t * direction[1] - self.a[1],
        ];
        let along = q[1] * n[0] - q[0] * n[1];
        (-1e-9..=self.length() + 1e-9)
            .contains(&along)
            .then_some((t, facing))
    }

    /// Square of the distance of a place, nm².
    pub(crate) fn distance_squared(&self, p: [f64; 2]) -> f64 {
        let (dx, dy) = (self.b[0] - self.a[0], self.b[1] - self.a[1]);
        let (px, py) = (p[0] - self.a[0], p[1] - self.a[1]);
        let l2 = dx * dx + dy * dy;
        let t = if l2 == 0.0 {
            0.0
        } else {
            ((px * dx + py * dy) / l2).clamp(0.0, 1.0)
        };
        let (ex, ey) = (px - t * dx, py - t * dy);
        ex * ex + ey * ey
    }
}

/// A dose over the plane, in multiples of dose-to-size (context included).
pub trait DoseField {
    /// Dose at a place, nm.
    fn dose(&self, p: [f64; 2]) -> f64;

    /// Doses along a row: places `(x0 + i·step, y)`; `out` says how many.
    fn row(&self, y: f64, x0: f64, step: f64, out: &mut [f64]) {
        let mut x = x0;
        for value in out {
            *value = self.dose([x, y]);
            x += step;
        }
    }

    /// Doses at places that follow one another closely; `out` is as long as `places`.
    fn doses(&self, places: &[[f64; 2]], out: &mut [f64]) {
        for (value, &p) in out.iter_mut().zip(places) {
            *value = self.dose(p);
        }
    }
}

/// Part of the plane in which a dose is held to the rule; lengths in nm.
pub trait Zone {
    /// Whether the part may have places in common with a box.
    fn touches(&self, side: [f64; 4]) -> bool;

    /// The least height, `y` or above, at which the part may have a place; asked with `y` rising.
    fn resumes(&self, y: f64) -> f64 {
        y
    }

    /// Stretches of the horizontal at `y` that belong to the part, sorted and disjoint; asked with `y` rising. The outline crosses the
    /// horizontal at `crossings` (sorted; inside is between each first and second).
    fn spans(&mut self, y: f64, crossings: &[f64], out: &mut Vec<[f64; 2]>);
}

/// The whole plane.
#[derive(Clone, Copy, Debug)]
pub struct Everywhere;

impl Zone for Everywhere {
    fn touches(&self, _: [f64; 4]) -> bool {
        true
    }

    fn spans(&mut self, _: f64, _: &[f64], out: &mut Vec<[f64; 2]>) {
        out.clear();
        out.push([f64::NEG_INFINITY, f64::INFINITY]);
    }
}

/// A dose that can be judged: it knows its own contour. The judge sees nothing else of the shots.
pub trait Printed: DoseField {
    /// Gradient of the dose at a place, per nm.
    fn gradient(&self, p: [f64; 2]) -> [f64; 2];

    /// Signed distance (nm) from `p` along the unit vector `outward` to the contour, at most `range` away.
    ///
    /// From a place that prints it looks outward, from one that does not inward, for the first change: so the
    /// contour found has the print behind it. `None` where there is none in range (never 0).
    fn crossing(&self, p: [f64; 2], outward: [f64; 2], range: f64) -> Option<f64> {
        self.crossing_at(p, outward, range, THRESHOLD)
    }

    /// As [`Printed::crossing`], for the line where the dose is `level`.
    fn crossing_at(&self, p: [f64; 2], outward: [f64; 2], range: f64, level: f64) -> Option<f64>;

    /// Least x, least y, greatest x, greatest y (nm) of all that is flashed; `None` where nothing is.
    fn extent(&self) -> Option<[f64; 4]>;

    /// How far the contour at `p` scatters under random errors; `None` where the dose does not know its shots or has no slope.
    fn edge_sd(&self, _p: [f64; 2], _errors: &ShotErrors) -> Option<EdgeSd> {
        None
    }
}

/// Random errors of the writer, each independent from shot to shot and from edge to edge; one standard deviation.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct ShotErrors {
    /// Of the position of one shot edge.
    pub edge: Nm,
    /// Of the dose of one shot, as a share of it.
    pub dose: f64,
    /// Charge per area at dose 1, for the shot noise; `None` leaves it out.
    pub base_dose: Option<BaseDose>,
}

/// Standard deviation of the contour along its normal, by cause.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EdgeSd {
    /// From shot edges.
    pub edge: Nm,
    /// From shot doses.
    pub dose: Nm,
    /// From the number of electrons.
    pub noise: Nm,
}

impl EdgeSd {
    /// All causes together (they are independent).
    #[must_use]
    pub fn total(&self) -> Nm {
        Nm(self.edge.0.hypot(self.dose.0).hypot(self.noise.0))
    }
}

/// Into the figure and out of it, along an outward normal.
const BOTH: [f64; 2] = [-1.0, 1.0];

/// A place where a dose breaks the rule.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Violation {
    /// Where, nm.
    pub place: [f64; 2],
    /// What the rule asks there: never [`Need::Free`].
    pub need: Need,
    /// The dose found.
    pub dose: f64,
}

/// A figure's outline with its tolerance, indexed for questions about single places.
#[derive(Clone, Debug)]
pub struct Target {
    sigma: f64,
    tolerance: f64,
    edges: Vec<Edge>,
    corners: Vec<[f64; 2]>,
    bounds: [f64; 4],
    cells: Cells,
}

/// Edges by square cell, for nearest-edge and inside questions.
#[derive(Clone, Debug)]
struct Cells {
    size: f64,
    columns: usize,
    rows: usize,
    origin: [f64; 2],
    starts: Vec<u32>,
    edges: Vec<u32>,
    /// Edges that span each row of cells, for the crossing count.
    row_starts: Vec<u32>,
    row_edges: Vec<u32>,
}

impl Target {
    /// A figure (its coordinates in nm from its own frame) with the tolerance on its outline.
    #[must_use]
    pub fn new(figure: &Figure, blur: Blur, tolerance: Nm) -> Self {
        let mut edges = Vec::with_capacity(figure.vertices());
        let mut corners = Vec::new();
        let sigma = blur.sigma().0;
        for ring in figure.rings() {
            let start = edges.len();
            edges.extend(ring.edges().map(|(a, b)| Edge {
                a: a.to_nm(),
                b: b.to_nm(),
            }));
            corners.extend(corners_of(&edges[start..], sigma));
        }
        corners.sort_by(|a, b| a[0].total_cmp(&b[0]).then(a[1].total_cmp(&b[1])));
        let b = figure.bounds();
        let (min, max) = (b.min.to_nm(), b.max.to_nm());
        let bounds = [min[0], min[1], max[0], max[1]];
        let cells = Cells::new(&edges, bounds, tolerance.0.max(sigma));
        Self {
            sigma,
            tolerance: tolerance.0,
            edges,
            corners,
            bounds,
            cells,
        }
    }

    /// All edges, ring after ring.
    #[must_use]
    pub fn edges(&self) -> &[Edge] {
        &self.edges
    }

    /// Drawn corners, from left to right: a turn of 45° or more between two edges each at least 2 σ long.
    #[must_use]
    pub fn corners(&self) -> &[[f64; 2]] {
        &self.corners
    }

    /// Least x, least y, greatest x, greatest y; nm.
    #[must_use]
    pub fn bounds(&self) -> [f64; 4] {
        self.bounds
    }

    /// The tolerance away from corners, nm.
    #[must_use]
    pub fn tolerance(&self) -> f64 {
        self.tolerance
    }

    /// The tolerance in a corner zone, nm.
    #[must_use]
    pub fn corner_tolerance(&self) -> f64 {
        self.tolerance + CORNER_PULL_BACK * self.sigma
    }

    /// Radius of a corner zone, 2 σ, nm.
    #[must_use]
    pub fn corner_reach(&self) -> f64 {
        2.0 * self.sigma
    }

    /// Whether a place lies within 2 σ of a drawn corner.
    #[must_use]
    pub fn in_corner_zone(&self, p: [f64; 2]) -> bool {
        self.corner_within(p, self.corner_reach())
    }

    fn corner_within(&self, p: [f64; 2], reach: f64) -> bool {
        let from = self.corners.partition_point(|c| c[0] < p[0] - reach);
        let near = self.corners[from..]
            .iter()
            .take_while(|c| c[0] <= p[0] + reach);
        near.into_iter()
            .any(|c| (c[0] - p[0]).powi(2) + (c[1] - p[1]).powi(2) <= reach * reach)
    }

    /// Whether a place lies in the figure (even–odd over all rings; on the outline: either).
    #[must_use]
    pub fn inside(&self, p: [f64; 2]) -> bool {
        if !(self.bounds[0]..=self.bounds[2]).contains(&p[0])
            || !(self.bounds[1]..=self.bounds[3]).contains(&p[1])
        {
            return false;
        }
        let mut inside = false;
        for &e in self.cells.row(p[1]) {
            let Edge { a, b } = self.edges[e as usize];
            if (a[1] > p[1]) != (b[1] > p[1])
                && p[0] < a[0] + (p[1] - a[1]) / (b[1] - a[1]) * (b[0] - a[0])
            {
                inside = !inside;
            }
        }
        inside
    }

    /// Places where the outline crosses the horizontal at `y`, sorted; inside is between each first and second.
    pub fn crossings(&self, y: f64, out: &mut Vec<f64>) {
        out.clear();
        if !(self.bounds[1]..=self.bounds[3]).contains(&y) {
            return;
        }
        for &e in self.cells.row(y) {
            let Edge { a, b } = self.edges[e as usize];
            if (a[1] > y) != (b[1] > y) {
                out.push(a[0] + (y - a[1]) / (b[1] - a[1]) * (b[0] - a[0]));
            }
        }
        out.sort_by(f64::total_cmp);
    }

    /// Stretches of the horizontal at `y` that hold every place of it in the figure or within `reach` (nm) of its outline, sorted and
    /// disjoint; they hold few others. The outline crosses the horizontal at `crossings`.
    pub fn spans_near(&self, y: f64, reach: f64, crossings: &[f64], out: &mut Vec<[f64; 2]>) {
        let (low, high) = (y - reach, y + reach);
        let mut all: Vec<[f64; 2]> = crossings.chunks_exact(2).map(|c| [c[0], c[1]]).collect();
        for &e in self.cells.rows_between(low, high) {
            let edge = self.edges[e as usize];
            let (below, above) = (edge.a[1].min(edge.b[1]), edge.a[1].max(edge.b[1]));
            if above < low || below > high {
                continue;
            }
            // The part of the edge that is near enough in y.
            let dy = edge.b[1] - edge.a[1];
            let x = |y: f64| edge.at(((y - edge.a[1]) / dy).clamp(0.0, 1.0))[0];
            let ends = if dy == 0.0 {
                [edge.a[0], edge.b[0]]
            } else {
                [x(low), x(high)]
            };
            all.push([ends[0].min(ends[1]) - reach, ends[0].max(ends[1]) + reach]);
        }
        spans::union(all, out);
    }

    /// Whether some part of the outline is within `limit` (nm) of the place.
    #[must_use]
    pub fn outline_within(&self, p: [f64; 2], limit: f64) -> bool {
        let limit2 = limit * limit;
        self.cells
            .near(p, limit)
            .any(|e| self.edges[e as usize].distance_squared(p) <= limit2)
    }

    /// How far it is (nm) from a place in the figure along the unit vector `direction` to the first outline that faces it (within 60°).
    ///
    /// `None` if there is none within `limit`, or the first one met is grazed.
    #[must_use]
    pub fn way_out(&self, p: [f64; 2], direction: [f64; 2], limit: f64) -> Option<f64> {
        let step = self.cells.size;
        let mut from = 0.0;
        while from <= limit {
            // Cells around one step of the way hold every edge that it crosses.
            let to = from + step;
            let middle = [
                p[0] + (from + 0.5 * step) * direction[0],
                p[1] + (from + 0.5 * step) * direction[1],
            ];
            let met = self
                .cells
                .near(middle, 0.5 * step)
                .filter_map(|e| self.edges[e as usize].crossed(p, direction))
                .filter(|(t, _)| *t > 1e-6 && *t <= to)
                .min_by(|a, b| a.0.total_cmp(&b.0));
            if let Some((t, facing)) = met {
                return (t <= limit && facing > 0.5).then_some(t);
            }
            from = to;
        }
        None
    }

    /// Distance to the outline, nm, if it is at most `limit`.
    #[must_use]
    pub fn distance(&self, p: [f64; 2], limit: f64) -> Option<f64> {
        let least = self
            .cells
            .near(p, limit)
            .map(|e| self.edges[e as usize].distance_squared(p))
            .fold(f64::INFINITY, f64::min);
        (least <= limit * limit).then(|| least.sqrt())
    }

    /// The tolerance that holds at a place, nm.
    #[must_use]
    pub fn tolerance_at(&self, p: [f64; 2]) -> f64 {
        if self.in_corner_zone(p) {
            self.corner_tolerance()
        } else {
            self.tolerance
        }
    }

    /// What the rule asks of a place.
    #[must_use]
    pub fn need(&self, p: [f64; 2]) -> Need {
        if self.outline_within(p, self.tolerance_at(p)) {
            Need::Free
        } else if self.inside(p) {
            Need::Print
        } else {
            Need::Clear
        }
    }

    /// Places just beyond the tolerance on both sides of the outline, where the rule bites first.
    ///
    /// At most `step` nm apart along every edge and around every vertex; each is given with its need (never
    /// [`Need::Free`]). `beyond` (nm, small) pushes them that much further out than the tolerance; `creases` adds, at every
    /// vertex, the point where the lines beside its two edges meet.
    pub fn rim(&self, step: f64, beyond: f64, creases: bool, each: impl FnMut([f64; 2], Need)) {
        self.rim_in(&Everywhere, step, beyond, creases, each);
    }

    /// As [`Target::rim`], of the edges whose rim may reach into a zone.
    fn rim_in(
        &self,
        part: &impl Zone,
        step: f64,
        beyond: f64,
        creases: bool,
        mut each: impl FnMut([f64; 2], Need),
    ) {
        // The crease of a quarter turn is 1.42 tolerances away.
        let away = 1.5 * (self.corner_tolerance() + beyond);
        let mut offer = |q: [f64; 2], n: [f64; 2], tolerance: f64, sides: &[f64]| {
            for side in sides {
                let reach = side * (tolerance + beyond);
                let p = [q[0] + reach * n[0], q[1] + reach * n[1]];
                // A hair under the tolerance, or rounding would free the very places meant here.
                if !self.outline_within(p, self.tolerance_at(p) + beyond - 1e-7 * (1.0 + tolerance))
                {
                    // Nothing crosses the way from the outline to a place whose nearest outline that is.
                    each(
                        p,
                        if *side < 0.0 {
                            Need::Print
                        } else {
                            Need::Clear
                        },
                    );
                }
            }
        };
        let zone = 2.0 * self.sigma + self.corner_tolerance();
        let mut previous: Option<(Edge, usize)> = None;
        let mut ring_start = 0;
        for (i, edge) in self.edges.iter().enumerate() {
            if previous.is_none() {
                ring_start = i;
            }
            let ends_ring = i + 1 == self.edges.len() || self.edges[i + 1].a != edge.b;
            previous = (!ends_ring).then_some((*edge, i));
            let (a, b) = (edge.a, edge.b);
            if !part.touches([
                a[0].min(b[0]) - away,
                a[1].min(b[1]) - away,
                a[0].max(b[0]) + away,
                a[1].max(b[1]) + away,
            ]) {
                continue;
            }
            let normal = edge.outward();
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "an edge is at most 4.5e12 nm long"
            )]
            let pieces = ((edge.length() / step).ceil() as usize).max(1);
            for k in 0..=pieces {
                #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
                let q = edge.at(k as f64 / pieces as f64);
                offer(q, normal, self.tolerance, &BOTH);
                if self.corner_within(q, zone) {
                    offer(q, normal, self.corner_tolerance(), &BOTH);
                }
            }
            let next = if ends_ring {
                self.edges[ring_start]
            } else {
                self.edges[i + 1]
            };
            self.fan(edge, &next, step, creases, &mut offer);
        }
    }

    /// Places about a vertex: normals between those of its two edges, so that the arc on the wide side is covered, and
    /// the point where the lines beside its edges meet on the narrow side.
    fn fan(
        &self,
        edge: &Edge,
        next: &Edge,
        step: f64,
        creases: bool,
        offer: &mut impl FnMut([f64; 2], [f64; 2], f64, &[f64]),
    ) {
        let (m, n) = (edge.outward(), next.outward());
        let turn = (m[0] * n[1] - m[1] * n[0]).atan2(m[0] * n[0] + m[1] * n[1]);
        let toward = |angle: f64| {
            let (s, c) = angle.sin_cos();
            [m[0] * c - m[1] * s, m[0] * s + m[1] * c]
        };
        for tolerance in [self.tolerance, self.corner_tolerance()] {
            if tolerance > self.tolerance && !self.in_corner_zone(edge.b) {
                continue;
            }
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "at most π·tolerance/step"
            )]
            let pieces = ((turn.abs() * tolerance / step).ceil() as usize).max(1);
            for k in 1..pieces {
                #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
                offer(
                    edge.b,
                    toward(turn * k as f64 / pieces as f64),
                    tolerance,
                    &BOTH,
                );
            }
            let half = 0.5 * turn;
            // Up to a quarter turn; the corner of a sharper one is a corner zone or too sharp to print.
            if creases && half.cos() > 0.7 {
                offer(
                    edge.b,
                    toward(half),
                    tolerance / half.cos(),
                    &[-turn.signum()],
                );
            }
        }
    }

    /// Every place found where a dose breaks the rule by more than it may: along the rim at `rim_step` nm and on a lattice of
    /// `lattice_step` nm over the bounds grown by `margin` nm. A dose is asked to keep `spare` off the threshold.
    #[must_use]
    pub fn violations(
        &self,
        dose: &impl DoseField,
        rim_step: f64,
        lattice_step: f64,
        margin: f64,
        spare: f64,
    ) -> Vec<Violation> {
        let mesh = Mesh {
            rim_step,
            lattice_step,
            margin,
        };
        self.violations_in(&mut Everywhere, dose, mesh, spare)
    }

    /// As [`Target::violations`], in a part of the plane only. Places along the rim may lie somewhat outside of it.
    #[must_use]
    pub fn violations_in(
        &self,
        part: &mut impl Zone,
        dose: &impl DoseField,
        mesh: Mesh,
        spare: f64,
    ) -> Vec<Violation> {
        let mut found = Vec::new();
        let breaks = |print: bool, dose: f64| {
            if print {
                dose < THRESHOLD + spare
            } else {
                dose >= THRESHOLD - spare
            }
        };
        let (mut places, mut needs) = (Vec::with_capacity(BATCH), Vec::with_capacity(BATCH));
        let mut values = vec![0.0; BATCH];
        let mut look = |places: &mut Vec<[f64; 2]>, needs: &mut Vec<Need>| {
            dose.doses(places, &mut values[..places.len()]);
            for ((&place, &need), &dose) in places.iter().zip(needs.iter()).zip(&values) {
                if breaks(need == Need::Print, dose) {
                    found.push(Violation { place, need, dose });
                }
            }
            places.clear();
            needs.clear();
        };
        self.rim_in(part, mesh.rim_step, 0.0, true, |place, need| {
            places.push(place);
            needs.push(need);
            if places.len() == BATCH {
                look(&mut places, &mut needs);
            }
        });
        look(&mut places, &mut needs);
        let (step, margin) = (mesh.lattice_step, mesh.margin);
        let [x0, y0, x1, y1] = self.bounds;
        let (x0, y0) = (x0 - margin, y0 - margin);
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "positive; bounds are at most 4.5e12 nm"
        )]
        let count = |length: f64| (length.max(0.0) / step) as usize;
        let (columns, rows) = (count(x1 + margin - x0) + 1, count(y1 + margin - y0) + 1);
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        let at = |low: f64, i: usize| low + i as f64 * step;
        let (mut crossings, mut spans) = (Vec::new(), Vec::new());
        let mut next = 0;
        while next < rows {
            let j = next.max(count(part.resumes(at(y0, next)) - y0));
            next = j + 1;
            if j >= rows {
                break;
            }
            let y = at(y0, j);
            self.crossings(y, &mut crossings);
            part.spans(y, &crossings, &mut spans);
            let mut passed = 0;
            for &[from, to] in &spans {
                let first = count(from - x0 + step * (1.0 - 1e-9)).min(columns);
                let end = if to < x0 {
                    0
                } else {
                    (count(to - x0) + 1).min(columns)
                };
                if first >= end {
                    continue;
                }
                if values.len() < end - first {
                    values.resize(end - first, 0.0);
                }
                let values = &mut values[..end - first];
                dose.row(y, at(x0, first), step, values);
                for (i, &value) in (first..end).zip(values.iter()) {
                    let x = at(x0, i);
                    while passed < crossings.len() && crossings[passed] <= x {
                        passed += 1;
                    }
                    let inside = passed % 2 == 1;
                    if breaks(inside, value)
                        && !self.outline_within([x, y], self.tolerance_at([x, y]))
                    {
                        found.push(Violation {
                            place: [x, y],
                            need: if inside { Need::Print } else { Need::Clear },
                            dose: value,
                        });
                    }
                }
            }
        }
        found
    }
}

/// How densely a dose is looked at, nm.
#[derive(Clone, Copy, Debug)]
pub struct Mesh {
    /// Along the rim.
    pub rim_step: f64,
    /// Of the lattice in and about the figure.
    pub lattice_step: f64,
    /// How far beyond the bounds the lattice goes.
    pub margin: f64,
}

/// Places along the rim whose dose is asked for at once.
const BATCH: usize = 64;

fn corners_of(ring: &[Edge], sigma: f64) -> impl Iterator<Item = [f64; 2]> + '_ {
    let n = ring.len();
    (0..n).filter_map(move |i| {
        let (e, f) = (&ring[i], &ring[(i + 1) % n]);
        let (m, k) = (e.outward(), f.outward());
        let turn = (m[0] * k[1] - m[1] * k[0])
            .atan2(m[0] * k[0] + m[1] * k[1])
            .abs();
        let least = 2.0 * sigma;
        (turn >= std::f64::consts::FRAC_PI_4 - 1e-9 && e.length() >= least && f.length() >= least)
            .then_some(e.b)
    })
}

impl Cells {
    fn new(edges: &[Edge], bounds: [f64; 4], least: f64) -> Self {
        let (w, h) = (bounds[2] - bounds[0], bounds[3] - bounds[1]);
        // About one cell per edge along the outline, never more cells than 16 per edge in all.
        #[allow(clippy::cast_precision_loss, reason = "edge counts are far below 2^53")]
        let size = least
            .max((w * h / (16.0 * edges.len().max(1) as f64)).sqrt())
            .max(w.max(h) / 4e6);
        let columns = index(w / size) + 1;
        let rows = index(h / size) + 1;
        let mut cells = Self {
            size,
            columns,
            rows,
            origin: [bounds[0], bounds[1]],
            starts: Vec::new(),
            edges: Vec::new(),
            row_starts: Vec::new(),
            row_edges: Vec::new(),
        };
        let mut by_cell: Vec<(u32, u32)> = Vec::with_capacity(2 * edges.len());
        let mut by_row: Vec<(u32, u32)> = Vec::with_capacity(2 * edges.len());
        for (e, edge) in (0_u32..).zip(edges) {
            let [i0, j0] = cells.cell([edge.a[0].min(edge.b[0]), edge.a[1].min(edge.b[1])]);
            let [i1, j1] = cells.cell([edge.a[0].max(edge.b[0]), edge.a[1].max(edge.b[1])]);
            for j in j0..=j1 {
                by_row.push((narrow(j), e));
                // The part of the edge within this row of cells, so that a long slanted edge enters few cells.
                let (i0, i1) = cells.columns_of(edge, j, i0, i1);
                by_cell.extend((i0..=i1).map(|i| (narrow(j * columns + i), e)));
            }
        }
        (cells.starts, cells.edges) = bucket(by_cell, columns * rows);
        (cells.row_starts, cells.row_edges) = bucket(by_row, rows);
        cells
    }

    fn columns_of(&self, edge: &Edge, j: usize, i0: usize, i1: usize) -> (usize, usize) {
        let dy = edge.b[1] - edge.a[1];
        if dy.abs() < self.size || i1 - i0 < 2 {
            return (i0, i1);
        }
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        let low = self.origin[1] + j as f64 * self.size;
        let x = |y: f64| edge.at(((y - edge.a[1]) / dy).clamp(0.0, 1.0))[0];
        let (u, v) = (x(low - 1e-6), x(low + self.size + 1e-6));
        (
            self.cell([u.min(v) - 1e-6, low])[0],
            self.cell([u.max(v) + 1e-6, low])[0],
        )
    }

    fn cell(&self, p: [f64; 2]) -> [usize; 2] {
        let i = index((p[0] - self.origin[0]) / self.size).min(self.columns - 1);
        let j = index((p[1] - self.origin[1]) / self.size).min(self.rows - 1);
        [i, j]
    }

    fn row(&self, y: f64) -> &[u32] {
        self.rows_between(y, y)
    }

    /// Edges in the rows of cells that a band touches; an edge may come more than once.
    fn rows_between(&self, low: f64, high: f64) -> &[u32] {
        let [_, from] = self.cell([self.origin[0], low]);
        let [_, to] = self.cell([self.origin[0], high]);
        &self.row_edges[self.row_starts[from] as usize..self.row_starts[to + 1] as usize]
    }

    /// Edges in the cells that a disc touches; an edge may come more than once.
    fn near(&self, p: [f64; 2], reach: f64) -> impl Iterator<Item = u32> + '_ {
        let [i0, j0] = self.cell([p[0] - reach, p[1] - reach]);
        let [i1, j1] = self.cell([p[0] + reach, p[1] + reach]);
        (j0..=j1).flat_map(move |j| {
            let (from, to) = (j * self.columns + i0, j * self.columns + i1 + 1);
            self.edges[self.starts[from] as usize..self.starts[to] as usize]
                .iter()
                .copied()
        })
    }
}

/// Sorts pairs (bucket, item) into one array with the start of each bucket.
fn bucket(mut pairs: Vec<(u32, u32)>, buckets: usize) -> (Vec<u32>, Vec<u32>) {
    pairs.sort_unstable();
    let mut starts = vec![0; buckets + 1];
    for &(b, _) in &pairs {
        starts[b as usize + 1] += 1;
    }
    for b in 0..buckets {
        starts[b + 1] += starts[b];
    }
    (starts, pairs.into_iter().map(|(_, e)| e).collect())
}

fn index(x: f64) -> usize {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "clamped to 0..2^31 just before"
    )]
    let i = x.clamp(0.0, 2_147_483_647.0) as usize;
    i
}

fn narrow(i: usize) -> u32 {
    u32::try_from(i).unwrap_or(u32::MAX)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Point, Rect, Ring};

    fn target(points: &[(i64, i64)], sigma: f64, tolerance: f64) -> Target {
        let ring = Ring::new(points.iter().map(|&(x, y)| Point::from_nm(x, y)).collect()).unwrap();
        Target::new(
            &Figure::new(ring, Vec::new()),
            Blur::new(Nm(sigma)).unwrap(),
            Nm(tolerance),
        )
    }

    #[test]
    fn a_square_asks_what_the_rule_says() {
        let t = target(&[(0, 0), (100, 0), (100, 100), (0, 100)], 10.0, 2.0);
        assert_eq!(t.corners().len(), 4);
        assert_eq!(t.need([50.0, 3.0]), Need::Print);
        assert_eq!(t.need([50.0, 1.0]), Need::Free);
        assert_eq!(t.need([50.0, -1.0]), Need::Free);
        assert_eq!(t.need([50.0, -2.5]), Need::Clear);
        // 8 nm in on the diagonal is within 2 + 7.71 nm of the outline and within 20 nm of the corner.
        assert_eq!(t.need([8.0, 8.0]), Need::Free);
        assert_eq!(t.need([-8.0, -8.0 + 30.0]), Need::Clear);
    }

    #[test]
    fn rim_places_lie_at_the_tolerance_and_are_never_free() {
        let t = target(
            &[(0, 0), (100, 0), (140, 60), (100, 100), (30, 110)],
            10.0,
            2.0,
        );
        let mut seen = 0;
        t.rim(2.0, 0.0, true, |p, need| {
            seen += 1;
            assert_ne!(need, Need::Free);
            let brute = t
                .edges()
                .iter()
                .map(|e| e.distance_squared(p))
                .fold(f64::INFINITY, f64::min)
                .sqrt();
            assert!(brute >= t.tolerance_at(p) - 2e-6, "{p:?} at {brute}");
            assert_eq!(need == Need::Print, t.inside(p));
        });
        assert!(seen > 200);
    }

    #[test]
    fn nearest_edge_agrees_with_brute_force_on_a_long_slanted_figure() {
        let t = target(&[(0, 0), (3000, 900), (3000, 960), (0, 60)], 5.0, 2.0);
        let mut found = 0;
        for k in 0..4000 {
            let p = [
                f64::from(k % 61) * 50.0 - 20.0,
                f64::from(k / 61) * 15.0 - 10.0,
            ];
            let brute = t
                .edges()
                .iter()
                .map(|e| e.distance_squared(p))
                .fold(f64::INFINITY, f64::min)
                .sqrt();
            let d = t.distance(p, 40.0);
            assert_eq!(d.is_some(), brute <= 40.0, "{p:?}: {d:?} against {brute}");
            if let Some(d) = d {
                found += 1;
                assert!((d - brute).abs() < 1e-9);
            }
        }
        assert!(found > 100);
    }

    #[test]
    fn stretches_near_a_slanted_figure_hold_all_that_is_near_and_little_else() {
        let t = target(&[(0, 0), (3000, 900), (3000, 960), (0, 60)], 5.0, 2.0);
        let (mut crossings, mut near) = (Vec::new(), Vec::new());
        let (mut wanted, mut given) = (0, 0);
        for row in -10..102 {
            let y = 10.0 * f64::from(row) + 0.5;
            t.crossings(y, &mut crossings);
            t.spans_near(y, 30.0, &crossings, &mut near);
            assert!(near.windows(2).all(|s| s[0][1] < s[1][0]));
            for column in -20..320 {
                let x = 10.0 * f64::from(column) + 0.5;
                let held = near.iter().any(|s| s[0] <= x && x <= s[1]);
                let asked = t.inside([x, y]) || t.outline_within([x, y], 30.0);
                assert!(held || !asked, "({x}, {y}) is left out");
                wanted += u32::from(asked);
                given += u32::from(held);
            }
        }
        assert!(
            wanted > 2000 && given < 3 * wanted,
            "{given} given for {wanted}"
        );
    }

    #[test]
    fn rings_with_holes_are_even_odd() {
        let square = |a: i64, b: i64| {
            Figure::from_rect(Rect::new(Point::from_nm(a, a), Point::from_nm(b, b)))
        };
        let ring = Figure::new(
            square(0, 200).outer().clone(),
            vec![square(60, 140).outer().clone()],
        );
        let t = Target::new(&ring, Blur::new(Nm(10.0)).unwrap(), Nm(2.0));
        assert!(t.inside([30.0, 100.0]) && !t.inside([100.0, 100.0]));
        assert_eq!(t.corners().len(), 8);
        let mut crossings = Vec::new();
        t.crossings(100.0, &mut crossings);
        assert_eq!(crossings, [0.0, 60.0, 140.0, 200.0]);
    }
}
