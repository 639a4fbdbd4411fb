//! Shots with sides anywhere, the samples they are held to, and the dose at these; all indexed by place.

use crate::blur::PhiTable;
use crate::geom::Rect;
use crate::units::Dose;

use super::samples::Sample;

/// A shot before it is brought to the address grid: sides in nm as `[x0, y0, x1, y1]`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fracture) struct Flash {
    pub(in crate::fracture) side: [f64; 4],
    pub(in crate::fracture) dose: f64,
    /// Whether it may be a sliver.
    pub(in crate::fracture) slim: bool,
}

impl Flash {
    /// Dose 1 on the rectangle.
    pub(in crate::fracture) fn new(side: [f64; 4]) -> Self {
        Self {
            side,
            dose: 1.0,
            slim: false,
        }
    }

    /// The same rectangle at another dose.
    pub(super) fn with(&self, dose: f64) -> Self {
        Self { dose, ..*self }
    }

    /// Mirrored about the diagonal `x = y`.
    pub(super) fn flipped(&self) -> Self {
        let [x0, y0, x1, y1] = self.side;
        Self {
            side: [y0, x0, y1, x1],
            ..*self
        }
    }

    pub(super) fn length(&self, axis: usize) -> f64 {
        self.side[axis + 2] - self.side[axis]
    }

    /// Whether both sides are from `least` to `greatest` nm, give or take `slack`.
    pub(super) fn fits(&self, least: f64, greatest: f64, slack: f64) -> bool {
        let sides = [self.length(0), self.length(1)];
        sides
            .iter()
            .all(|s| (least - slack..=greatest + slack).contains(s))
    }

    /// How far apart two are along one axis; negative when they overlap there.
    pub(super) fn gap_along(&self, other: &Self, axis: usize) -> f64 {
        (self.side[axis] - other.side[axis + 2]).max(other.side[axis] - self.side[axis + 2])
    }

    /// How far apart two are along the axis on which they are furthest apart; negative when they overlap.
    pub(super) fn gap(&self, other: &Self) -> f64 {
        self.gap_along(other, 0).max(self.gap_along(other, 1))
    }

    /// The least rectangle around both.
    pub(super) fn hull(&self, other: &Self) -> Self {
        let (a, b) = (self.side, other.side);
        Self {
            side: [
                a[0].min(b[0]),
                a[1].min(b[1]),
                a[2].max(b[2]),
                a[3].max(b[3]),
            ],
            dose: self.dose,
            slim: false,
        }
    }

    /// In equal parts with no side over `greatest`.
    pub(super) fn parts(&self, greatest: f64) -> Vec<Self> {
        let cuts = |axis: usize| {
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "clamped to be positive and small"
            )]
            let n = (self.length(axis) / greatest).ceil().clamp(1.0, 1e6) as u32;
            let at =
                move |i: u32| self.side[axis] + self.length(axis) * f64::from(i) / f64::from(n);
            (0..n).map(move |i| (at(i), at(i + 1)))
        };
        cuts(1)
            .flat_map(|(y0, y1)| {
                cuts(0).map(move |(x0, x1)| Self {
                    side: [x0, y0, x1, y1],
                    ..*self
                })
            })
            .collect()
    }

    /// Moved outward by `d` nm on all sides.
    pub(super) fn grown(&self, d: f64) -> Self {
        let s = self.side;
        Self {
            side: [s[0] - d, s[1] - d, s[2] + d, s[3] + d],
            ..*self
        }
    }

    /// Dose at a place, nm.
    #[inline]
    pub(super) fn dose_at(&self, phi: PhiTable, inverse_sigma: f64, p: [f64; 2]) -> f64 {
        let share = |axis: usize| {
            phi.cdf((p[axis] - self.side[axis]) * inverse_sigma)
                - phi.cdf((p[axis] - self.side[axis + 2]) * inverse_sigma)
        };
        let gx = share(0);
        if gx == 0.0 {
            0.0
        } else {
            self.dose * gx * share(1)
        }
    }
}

impl From<(Rect, Dose)> for Flash {
    fn from((rect, dose): (Rect, Dose)) -> Self {
        let ([x0, y0], [x1, y1]) = (rect.min.to_nm(), rect.max.to_nm());
        Self::new([x0, y0, x1, y1]).with(dose.0)
    }
}

/// A cell with its box, and where its samples end in a list of samples sorted by row and column of cells.
#[derive(Clone, Copy, Debug)]
pub(super) struct Block {
    pub(super) side: [f64; 4],
    pub(super) end: usize,
}

/// Buckets over the plane: which items touch which square cell.
#[derive(Clone, Debug)]
pub(super) struct Bins {
    origin: [f64; 2],
    size: f64,
    columns: usize,
    rows: usize,
    cells: Vec<Vec<u32>>,
}

impl Bins {
    pub(super) fn new(bounds: [f64; 4], size: f64) -> Self {
        let (w, h) = (bounds[2] - bounds[0], bounds[3] - bounds[1]);
        let size = size.max((w * h / 4e6).sqrt()).max(w.max(h) / 4e6);
        let (columns, rows) = (cell_index(w / size) + 1, cell_index(h / size) + 1);
        Self {
            origin: [bounds[0], bounds[1]],
            size,
            columns,
            rows,
            cells: vec![Vec::new(); columns * rows],
        }
    }

    fn span(&self, low: f64, high: f64, axis: usize) -> (usize, usize) {
        let last = if axis == 0 { self.columns } else { self.rows } - 1;
        let at = |v: f64| cell_index((v - self.origin[axis]) / self.size).min(last);
        (at(low), at(high))
    }

    /// The box that the cells fill.
    fn bounds(&self) -> [f64; 4] {
        #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
        let size = |cells: usize| cells as f64 * self.size;
        let [x, y] = self.origin;
        [x, y, x + size(self.columns), y + size(self.rows)]
    }

    /// Boxes numbered from 0, each entered in all cells that it touches.
    pub(super) fn of(bounds: [f64; 4], size: f64, boxes: &[[f64; 4]]) -> Self {
        let mut bins = Self::new(bounds, size);
        for (id, &side) in (0_u32..).zip(boxes) {
            for cell in bins.touched(side) {
                bins.cells[cell].push(id);
            }
        }
        bins
    }

    /// Items of the cell that a place lies in, each once.
    pub(super) fn at(&self, p: [f64; 2]) -> impl Iterator<Item = u32> + '_ {
        self.items([p[0], p[1], p[0], p[1]])
    }

    /// Enters an item at a place.
    pub(super) fn insert(&mut self, id: u32, p: [f64; 2]) {
        for cell in self.touched([p[0], p[1], p[0], p[1]]) {
            self.cells[cell].push(id);
        }
    }

    /// Items in the cells that a box touches.
    pub(super) fn items(&self, side: [f64; 4]) -> impl Iterator<Item = u32> + '_ {
        self.touched(side)
            .flat_map(|cell| self.cells[cell].iter().copied())
    }

    /// The box of a cell. Items beyond the border are kept in the border cells: these have no end there.
    fn side_of(&self, cell: [usize; 2]) -> [f64; 4] {
        let border = |axis: usize, i: usize| {
            #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
            let at = i as f64;
            if i == 0 {
                f64::NEG_INFINITY
            } else if i == [self.columns, self.rows][axis] {
                f64::INFINITY
            } else {
                self.origin[axis] + at * self.size
            }
        };
        let [i, j] = cell;
        [
            border(0, i),
            border(1, j),
            border(0, i + 1),
            border(1, j + 1),
        ]
    }

    /// Indices of the cells that a box touches.
    fn touched(&self, side: [f64; 4]) -> impl Iterator<Item = usize> + use<> {
        let (i0, i1) = self.span(side[0], side[2], 0);
        let (j0, j1) = self.span(side[1], side[3], 1);
        let columns = self.columns;
        (j0..=j1).flat_map(move |j| (i0..=i1).map(move |i| j * columns + i))
    }
}

fn cell_index(x: f64) -> usize {
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

/// Shots in numbered slots, and the dose they and the context give at every sample.
#[derive(Clone, Debug)]
pub(in crate::fracture) struct Model {
    slots: Vec<Option<Flash>>,
    /// The shots in the first so many slots stay as they are.
    fixed: usize,
    by_place: Bins,
    samples: Vec<Sample>,
    samples_by_place: Bins,
    dose: Vec<f32>,
    pub(super) sigma: f64,
}

impl Model {
    /// No shot yet: the context's dose at the samples of a figure with these bounds.
    pub(in crate::fracture) fn new(bounds: [f64; 4], sigma: f64, samples: Vec<Sample>) -> Self {
        let margin = 3.0 * sigma;
        let around = [
            bounds[0] - margin,
            bounds[1] - margin,
            bounds[2] + margin,
            bounds[3] + margin,
        ];
        let mut model = Self {
            slots: Vec::new(),
            fixed: 0,
            by_place: Bins::new(around, 8.0 * sigma),
            samples: Vec::new(),
            samples_by_place: Bins::new(around, 2.0 * sigma),
            dose: Vec::new(),
            sigma,
        };
        // Those of one cell next to each other, so that gathering them reads memory in order.
        let mut samples = samples;
        samples.sort_by_key(|s| {
            let [x, y] = s.place;
            model.samples_by_place.touched([x, y, x, y]).next()
        });
        for sample in samples {
            model.add_sample(sample);
        }
        model
    }

    /// Holds the shots to one more place.
    pub(in crate::fracture) fn add_sample(&mut self, sample: Sample) {
        let [x, y] = sample.place;
        let id = narrow(self.samples.len());
        self.samples_by_place.insert(id, [x, y]);
        let reach = 5.0 * self.sigma;
        let phi = PhiTable::get();
        let shots: f64 = self
            .near([x - reach, y - reach, x + reach, y + reach])
            .into_iter()
            .filter_map(|slot| self.slots[slot])
            .map(|f| f.dose_at(phi, 1.0 / self.sigma, sample.place))
            .sum();
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a dose needs no more than single precision here"
        )]
        self.dose.push(sample.context + shots as f32);
        self.samples.push(sample);
    }

    /// The box that all samples lie in.
    pub(super) fn bounds(&self) -> [f64; 4] {
        self.by_place.bounds()
    }

    /// All samples.
    pub(super) fn samples(&self) -> &[Sample] {
        &self.samples
    }

    /// The dose at every sample.
    pub(super) fn doses(&self) -> &[f32] {
        &self.dose
    }

    pub(super) fn doses_mut(&mut self) -> &mut [f32] {
        &mut self.dose
    }

    /// Samples in cells that any of the boxes touches, cell by cell along the rows; `blocks` says which cells have any.
    pub(super) fn samples_near(
        &self,
        boxes: &[[f64; 4]],
        out: &mut Vec<u32>,
        blocks: &mut Vec<Block>,
    ) {
        out.clear();
        blocks.clear();
        let bins = &self.samples_by_place;
        let spans: Vec<[(usize, usize); 2]> = boxes
            .iter()
            .map(|s| [bins.span(s[0], s[2], 0), bins.span(s[1], s[3], 1)])
            .collect();
        let first = spans.iter().map(|s| s[1].0).min().unwrap_or(1);
        let last = spans.iter().map(|s| s[1].1).max().unwrap_or(0);
        let mut columns: Vec<(usize, usize)> = Vec::with_capacity(boxes.len());
        for j in first..=last {
            columns.clear();
            columns.extend(
                spans
                    .iter()
                    .filter(|s| s[1].0 <= j && j <= s[1].1)
                    .map(|s| s[0]),
            );
            columns.sort_unstable();
            let mut next = 0;
            for &(from, to) in &columns {
                for i in from.max(next)..=to {
                    let cell = &bins.cells[j * bins.columns + i];
                    if !cell.is_empty() {
                        out.extend_from_slice(cell);
                        blocks.push(Block {
                            side: bins.side_of([i, j]),
                            end: out.len(),
                        });
                    }
                }
                next = next.max(to + 1);
            }
        }
    }

    /// How many samples that must not print lie in a box.
    pub(super) fn clear_samples_in(&self, side: [f64; 4]) -> usize {
        if side[0] >= side[2] || side[1] >= side[3] {
            return 0;
        }
        let inside = |s: &Sample| {
            (0..2).all(|axis| side[axis] <= s.place[axis] && s.place[axis] <= side[axis + 2])
        };
        self.samples_by_place
            .touched(side)
            .flat_map(|cell| &self.samples_by_place.cells[cell])
            .filter(|&&id| {
                let sample = &self.samples[id as usize];
                sample.sign < 0.0 && !sample.cap && inside(sample)
            })
            .count()
    }

    /// The shots, in slot order.
    pub(in crate::fracture) fn flashes(&self) -> impl Iterator<Item = (usize, Flash)> + '_ {
        self.slots
            .iter()
            .enumerate()
            .filter_map(|(i, f)| f.map(|f| (i, f)))
    }

    /// The shots that may be moved, in slot order.
    pub(super) fn movable(&self) -> impl Iterator<Item = (usize, Flash)> + '_ {
        self.flashes().skip_while(|(slot, _)| *slot < self.fixed)
    }

    /// Whether a slot's shot may be moved.
    pub(super) fn is_movable(&self, slot: usize) -> bool {
        slot >= self.fixed
    }

    /// Leaves the shots that there are now as they are.
    pub(super) fn fix(&mut self) {
        self.fixed = self.slots.len();
    }

    /// What every slot holds.
    pub(super) fn all(&self) -> &[Option<Flash>] {
        &self.slots
    }

    /// Slots ever used.
    pub(super) fn slots(&self) -> usize {
        self.slots.len()
    }

    pub(super) fn get(&self, slot: usize) -> Option<Flash> {
        self.slots.get(slot).copied().flatten()
    }

    /// Slots of shots in cells that the box touches, ascending.
    pub(super) fn near(&self, side: [f64; 4]) -> Vec<usize> {
        let mut slots: Vec<usize> = self
            .by_place
            .touched(side)
            .flat_map(|c| &self.by_place.cells[c])
            .map(|&s| s as usize)
            .collect();
        slots.sort_unstable();
        slots.dedup();
        slots
    }

    /// Other shots that a shot overlaps by more than `by` nm both ways.
    pub(super) fn overlapped(
        &self,
        slot: usize,
        flash: &Flash,
        by: f64,
    ) -> impl Iterator<Item = Flash> + '_ {
        let flash = *flash;
        let others = self
            .near(flash.side)
            .into_iter()
            .filter(move |&s| s != slot)
            .filter_map(|s| self.get(s));
        others.filter(move |g| g.gap(&flash) < -by)
    }

    /// Puts a shot in a slot, or takes it out, without touching the doses at the samples.
    pub(super) fn place(&mut self, slot: usize, flash: Option<Flash>) {
        if slot >= self.slots.len() {
            self.slots.resize(slot + 1, None);
        }
        let id = narrow(slot);
        if let Some(old) = self.slots[slot] {
            for cell in self.by_place.touched(old.side) {
                self.by_place.cells[cell].retain(|&s| s != id);
            }
        }
        if let Some(new) = flash {
            for cell in self.by_place.touched(new.side) {
                self.by_place.cells[cell].push(id);
            }
        }
        self.slots[slot] = flash;
    }
}
