//! The dose of a model at any place, and the part of the plane in which it is worth looking at.

use pulp::Arch;

use crate::blur::{PhiTable, REACH};
use crate::geom::spans;
use crate::target::{DoseField, Zone};

use super::core::Core;
use super::kernel::{AddDose, LANES};
use super::model::{Bins, Flash, Model};
use super::samples::Around;

/// The dose of the model's shots with the context, anywhere.
pub(super) struct Field<'a> {
    model: &'a Model,
    context: &'a Around,
    phi: PhiTable,
    arch: Arch,
}

/// Places of a row taken together: few enough that single precision does about one origin.
const RUN: usize = 128;

impl<'a> Field<'a> {
    pub(super) fn new(model: &'a Model, context: &'a Around) -> Self {
        Self {
            model,
            context,
            phi: PhiTable::get(),
            arch: Arch::new(),
        }
    }

    /// Adds the dose of all shots at at most [`RUN`] places near one another.
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a place in σ about a near origin needs no more than single precision"
    )]
    fn add(&self, place: impl Fn(usize) -> [f64; 2], out: &mut [f64]) {
        let (sigma, count) = (self.model.sigma, out.len());
        let mut hull = Flash::new([
            f64::INFINITY,
            f64::INFINITY,
            f64::NEG_INFINITY,
            f64::NEG_INFINITY,
        ]);
        for i in 0..count {
            let [x, y] = place(i);
            hull = hull.hull(&Flash::new([x, y, x, y]));
        }
        let [x0, y0, ..] = hull.side;
        let origin = [x0, y0, x0, y0];
        let local = |v: f64, axis: usize| ((v - origin[axis]) / sigma) as f32;
        let (mut x, mut y, mut dose) = ([0.0_f32; RUN], [0.0_f32; RUN], [0.0_f32; RUN]);
        for i in 0..count {
            let p = place(i);
            (x[i], y[i]) = (local(p[0], 0), local(p[1], 1));
        }
        let padded = count.next_multiple_of(LANES);
        let reached = hull.grown(REACH * sigma);
        for slot in self.model.near(reached.side) {
            let Some(f) = self.model.get(slot).filter(|f| f.gap(&reached) < 0.0) else {
                continue;
            };
            self.arch.dispatch(AddDose {
                x: &x[..padded],
                y: &y[..padded],
                side: std::array::from_fn(|i| local(f.side[i], i)),
                dose: f.dose as f32,
                out: &mut dose[..padded],
            });
        }
        for (i, value) in out.iter_mut().enumerate() {
            *value = self.context.dose(place(i)) + f64::from(dose[i]);
        }
    }
}

impl DoseField for Field<'_> {
    fn dose(&self, p: [f64; 2]) -> f64 {
        let sigma = self.model.sigma;
        let here = Flash::new([p[0], p[1], p[0], p[1]]).grown(REACH * sigma);
        let near = self.model.near(here.side).into_iter();
        let shots: f64 = near
            .filter_map(|s| self.model.get(s))
            .map(|f| f.dose_at(self.phi, 1.0 / sigma, p))
            .sum();
        self.context.dose(p) + shots
    }

    fn row(&self, y: f64, x0: f64, step: f64, out: &mut [f64]) {
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        let x = |i: usize| x0 + i as f64 * step;
        for (run, out) in out.chunks_mut(RUN).enumerate() {
            self.add(|i| [x(run * RUN + i), y], out);
        }
    }

    fn doses(&self, places: &[[f64; 2]], out: &mut [f64]) {
        for (places, out) in places.chunks(RUN).zip(out.chunks_mut(RUN)) {
            self.add(|i| places[i], out);
        }
    }
}

/// Boxes of a plane.
pub(super) struct Boxes<'a> {
    /// By their lower side.
    sides: Vec<[f64; 4]>,
    /// How many the sweep has taken up, and which of those it has not left.
    taken: usize,
    open: Vec<[f64; 4]>,
    /// Which boxes are where; `None` where the whole figure belongs to the part too.
    bins: Option<Bins>,
    /// Places deep in it are left out.
    core: Option<&'a Core>,
}

impl<'a> Boxes<'a> {
    /// The boxes alone.
    pub(super) fn only(sides: Vec<[f64; 4]>, sigma: f64) -> Self {
        let mut boxes = Self::sorted(sides);
        let hull = boxes.sides.iter().map(|&s| Flash::new(s));
        let hull = hull
            .reduce(|a, b| a.hull(&b))
            .unwrap_or(Flash::new([0.0; 4]));
        boxes.bins = Some(Bins::of(hull.side, 8.0 * sigma, &boxes.sides));
        boxes
    }

    /// The boxes and the figure itself.
    pub(super) fn and_figure(sides: Vec<[f64; 4]>) -> Self {
        Self::sorted(sides)
    }

    fn sorted(mut sides: Vec<[f64; 4]>) -> Self {
        sides.sort_by(|a, b| a[1].total_cmp(&b[1]));
        Self {
            sides,
            taken: 0,
            open: Vec::new(),
            bins: None,
            core: None,
        }
    }

    /// Without what prints for sure deep in a core.
    pub(super) fn but(self, core: Option<&'a Core>) -> Self {
        Self { core, ..self }
    }

    /// Whether a place lies in one of the boxes.
    pub(super) fn holds(&self, p: [f64; 2]) -> bool {
        self.touches([p[0], p[1], p[0], p[1]])
    }
}

impl Zone for Boxes<'_> {
    fn touches(&self, side: [f64; 4]) -> bool {
        let asked = Flash::new(side);
        self.bins.as_ref().is_none_or(|bins| {
            bins.items(side)
                .any(|id| Flash::new(self.sides[id as usize]).gap(&asked) <= 0.0)
        })
    }

    fn resumes(&self, y: f64) -> f64 {
        if self.bins.is_none() || self.open.iter().any(|s| s[3] >= y) {
            return y;
        }
        let next = self.sides.get(self.taken);
        next.map_or(f64::INFINITY, |s| s[1].max(y))
    }

    fn spans(&mut self, y: f64, crossings: &[f64], out: &mut Vec<[f64; 2]>) {
        while let Some(&next) = self.sides.get(self.taken).filter(|s| s[1] <= y) {
            self.open.push(next);
            self.taken += 1;
        }
        self.open.retain(|s| s[3] >= y);
        let figure = crossings.chunks_exact(2).map(|c| [c[0], c[1]]);
        let mut all: Vec<[f64; 2]> = self.open.iter().map(|s| [s[0], s[2]]).collect();
        if self.bins.is_none() {
            all.extend(figure);
        }
        spans::union(all, out);
        if let Some(core) = self.core {
            let (mut sure, mut rest) = (Vec::new(), Vec::new());
            core.sure_spans(y, &mut sure);
            spans::without(out, &sure, &mut rest);
            *out = rest;
        }
    }
}
