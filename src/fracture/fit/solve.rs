//! Moves the sides of a few shots at once until all inequalities hold.
//!
//! Damped least squares on the inequalities that do not hold (Levenberg 1944, Marquardt 1963). Because a step
//! violates inequalities that held before, each step is found by a few rounds on the linearised problem with the set of
//! violated inequalities brought up to date in every round, before the dose is computed anew. Lengths are in σ here.

use std::ops::Range;

use pulp::Arch;

use crate::fracture::DoseLevels;

use super::algebra::{Assemble, Cholesky, Entry};
use super::kernel::{AddDose, LANES, Missed, Slopes};
use super::model::{Block, Flash, Model};

/// What shots must keep besides the print rule.
#[derive(Clone, Copy, Debug)]
pub(in crate::fracture) struct Rules {
    /// Of a shot that may not be a sliver, nm.
    pub(in crate::fracture) least_side: f64,
    /// Of one that may, nm.
    pub(in crate::fracture) slim_side: f64,
    /// nm.
    pub(in crate::fracture) greatest_side: f64,
    /// No two shots may overlap.
    pub(in crate::fracture) disjoint: bool,
    /// Dose to spare at every sample: covers rounding to the address grid and what lies between samples.
    pub(in crate::fracture) guard: f32,
    /// Doses that a shot may have.
    pub(in crate::fracture) levels: DoseLevels,
}

impl Rules {
    /// The least side that holds for a shot, nm.
    pub(super) fn least(&self, flash: &Flash) -> f64 {
        if flash.slim {
            self.slim_side
        } else {
            self.least_side
        }
    }
}

/// How a fit ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fracture) struct Outcome {
    /// All inequalities hold.
    pub(in crate::fracture) solved: bool,
    /// Sum of squares of what is missed.
    pub(in crate::fracture) cost: f64,
    /// The same before, by the shots that were removed.
    pub(in crate::fracture) before: f64,
}

/// A shot in σ about the origin of the fit.
#[derive(Clone, Copy)]
struct Local {
    side: [f64; 4],
    least: f64,
    dose: f32,
}

/// Working memory and settings of the fit of one figure.
pub(in crate::fracture) struct Solver {
    pub(in crate::fracture) rules: Rules,
    sigma: f64,
    arch: Arch,
    origin: [f64; 2],
    ids: Vec<u32>,
    boxes: Vec<[f64; 4]>,
    blocks: Vec<Block>,
    x: Vec<f32>,
    y: Vec<f32>,
    sign: Vec<f32>,
    base: Vec<f32>,
    value: Vec<f32>,
    local: Vec<Local>,
    trial: Vec<Local>,
    fixed: Vec<[f64; 4]>,
    links: Vec<Link>,
    rows: Rows,
    normal: Vec<f64>,
    gradient: Vec<f64>,
    step: Vec<f64>,
    /// Inequalities that a step is found for, and those of the round before.
    active: Vec<u32>,
    last: Vec<u32>,
}

/// Linearised inequalities `r0 + a·Δ ≤ 0`; each row touches the four sides of the shots in reach.
#[derive(Default)]
struct Rows {
    x: Vec<f32>,
    y: Vec<f32>,
    factor: Vec<f32>,
    /// For every shot of the window its left, low, right and high side, a value for each row.
    slopes: Vec<f32>,
    r0: Vec<f64>,
    /// How many rows come from samples before each sample.
    before: Vec<usize>,
    starts: Vec<usize>,
    entries: Vec<Entry>,
}

/// `v[plus] − v[minus] ≤ limit`; a side that is not moved is in the limit.
#[derive(Clone, Copy)]
struct Link {
    plus: Option<usize>,
    minus: Option<usize>,
    limit: f64,
}

/// Samples further than this from every moved shot are left out, σ: a shot gives less than 4e-6 there.
const TOUCH: f64 = 4.5;

/// One sample in this many gives an estimate. Odd, since those inside and outside the outline take turns.
const THINNED: usize = 3;

/// Where places are that only fill up a list, σ: beyond the reach of any shot.
const NOWHERE: f32 = 1e4;

/// Extra guard that a fit aims at, so that it ends inside the region where the guard holds and not on its border.
const AIM: f32 = 0.003;

/// Rows with more dose than this to spare cannot be violated by one step.
const NEAR: f32 = 0.12;

/// Dose per σ that an overlap or an unfit side counts as: that of a wide edge.
const LINK_WEIGHT: f64 = 0.4;

/// A link missed by less than this (σ) holds; rounding to the address grid removes it.
const LINK_SLACK: f64 = 0.002;

/// A fit is given up when two steps leave more of the cost than this. Measured on the three sets at normal effort, tile and overlap
/// shots and work: 0.5 of three steps 607, 481, 1; 0.7 611, 472, 1; 0.6 608, 472, 0.8; 0.5 616, 477, 0.7.
const STALL: f64 = 0.6;

/// Furthest a side moves in one step, σ.
const LONGEST_STEP: f64 = 0.8;

/// A side that moves changes the dose by less than this at a sample: left out of its row.
const LEAST_SLOPE: f32 = 3e-5;

impl Solver {
    pub(in crate::fracture) fn new(sigma: f64, rules: Rules) -> Self {
        Self {
            rules,
            sigma,
            arch: Arch::new(),
            origin: [0.0; 2],
            ids: Vec::new(),
            boxes: Vec::new(),
            blocks: Vec::new(),
            x: Vec::new(),
            y: Vec::new(),
            sign: Vec::new(),
            base: Vec::new(),
            value: Vec::new(),
            local: Vec::new(),
            trial: Vec::new(),
            fixed: Vec::new(),
            links: Vec::new(),
            rows: Rows::default(),
            normal: Vec::new(),
            gradient: Vec::new(),
            step: Vec::new(),
            active: Vec::new(),
            last: Vec::new(),
        }
    }

    /// Moves `window` until all inequalities within its reach hold, as replacement of the model's shots `removed`.
    ///
    /// Gives up after `most` steps, or when the cost no longer falls fast enough. The model is not changed:
    /// [`Solver::commit`] does that.
    pub(in crate::fracture) fn solve(
        &mut self,
        model: &Model,
        removed: &[usize],
        window: &mut [Flash],
        most: usize,
    ) -> Outcome {
        self.begin(model, removed, window, 1);
        let standing = self.standing(model);
        self.link();
        let mut cost = self.evaluate(false);
        let mut damping = 0.3 * LINK_WEIGHT * LINK_WEIGHT;
        let mut before = [f64::INFINITY; 2];
        for _ in 0..most {
            if self.holds() || cost > STALL * before[0] {
                break;
            }
            before = [before[1], cost];
            self.linearise();
            let mut improved = false;
            for _ in 0..4 {
                self.find_step(damping);
                self.trial.clear();
                self.trial
                    .extend(
                        self.local
                            .iter()
                            .zip(self.step.chunks_exact(4))
                            .map(|(f, s)| Local {
                                side: std::array::from_fn(|i| f.side[i] + s[i]),
                                ..*f
                            }),
                    );
                let upright = self
                    .trial
                    .iter()
                    .all(|f| f.side[0] < f.side[2] && f.side[1] < f.side[3]);
                let next = if upright {
                    self.evaluate(true)
                } else {
                    f64::INFINITY
                };
                if next < cost {
                    std::mem::swap(&mut self.local, &mut self.trial);
                    cost = next;
                    damping *= 0.3;
                    improved = true;
                    break;
                }
                damping *= 5.0;
            }
            if !improved {
                self.evaluate(false);
                break;
            }
            self.link();
        }
        for (flash, local) in window.iter_mut().zip(&self.local) {
            flash.side = std::array::from_fn(|i| local.side[i] * self.sigma + self.origin[i % 2]);
        }
        Outcome {
            solved: self.holds(),
            cost,
            before: standing,
        }
    }

    /// Cost of `window` in place of `removed`, without moving anything.
    pub(super) fn score(&mut self, model: &Model, removed: &[usize], window: &[Flash]) -> f64 {
        self.begin(model, removed, window, 1);
        self.link();
        self.evaluate(false)
    }

    /// About what [`Solver::score`] gives, from one sample in [`THINNED`].
    pub(super) fn estimate(&mut self, model: &Model, removed: &[usize], window: &[Flash]) -> f64 {
        self.begin(model, removed, window, THINNED);
        self.link();
        #[allow(clippy::cast_precision_loss, reason = "a small number")]
        let share = THINNED as f64;
        self.evaluate(false) * share
    }

    /// Makes `window` replace `removed` in the model, after [`Solver::solve`] on the same; gives the slots now used.
    pub(in crate::fracture) fn commit(
        &mut self,
        model: &mut Model,
        removed: &[usize],
        window: &[Flash],
    ) -> Vec<usize> {
        self.evaluate(false);
        self.hand_over(model);
        for &slot in removed {
            model.place(slot, None);
        }
        let fresh = model.slots()..;
        let slots: Vec<usize> = removed
            .iter()
            .copied()
            .chain(fresh)
            .take(window.len())
            .collect();
        for (&slot, &flash) in slots.iter().zip(window) {
            model.place(slot, Some(flash));
        }
        slots
    }

    /// Puts a shot in a slot of the model, or takes it out.
    pub(super) fn set(&mut self, model: &mut Model, slot: usize, flash: Option<Flash>) {
        self.score(model, &[slot], flash.as_slice());
        self.hand_over(model);
        model.place(slot, flash);
    }

    /// Gives the model the doses last computed.
    fn hand_over(&self, model: &mut Model) {
        for (&id, &value) in self.ids.iter().zip(&self.value) {
            model.doses_mut()[id as usize] = value;
        }
    }

    /// Gathers the samples within reach of `removed` and `window`, with the dose of all other shots there.
    ///
    /// Only every `stride`-th of the samples.
    fn begin(&mut self, model: &Model, removed: &[usize], window: &[Flash], stride: usize) {
        let reach = TOUCH * self.sigma;
        let gone: Vec<Flash> = removed.iter().filter_map(|&s| model.get(s)).collect();
        let all = || gone.iter().chain(window);
        for list in [&mut self.x, &mut self.y, &mut self.sign, &mut self.base] {
            list.clear();
        }
        self.ids.clear();
        self.local.clear();
        self.fixed.clear();
        let Some(hull) = all().copied().reduce(|a, b| a.hull(&b)) else {
            return;
        };
        self.origin = [hull.side[0], hull.side[1]];
        self.boxes.clear();
        self.boxes.extend(all().map(|f| f.grown(reach).side));
        model.samples_near(&self.boxes, &mut self.ids, &mut self.blocks);
        if stride > 1 {
            let kept = self.ids.len().div_ceil(stride);
            for at in 0..kept {
                self.ids[at] = self.ids[at * stride];
            }
            self.ids.truncate(kept);
        }
        for block in &mut self.blocks {
            block.end = block.end.div_ceil(stride);
            block.side = std::array::from_fn(|i| (block.side[i] - self.origin[i % 2]) / self.sigma);
        }
        let (samples, doses) = (model.samples(), model.doses());
        let inverse = 1.0 / self.sigma;
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a place in σ about a near origin needs no more than single precision"
        )]
        {
            let near = || self.ids.iter().map(|&id| &samples[id as usize]);
            let [x, y] = self.origin;
            self.x
                .extend(near().map(|s| ((s.place[0] - x) * inverse) as f32));
            self.y
                .extend(near().map(|s| ((s.place[1] - y) * inverse) as f32));
            self.sign.extend(near().map(|s| s.sign));
            self.base
                .extend(self.ids.iter().map(|&id| doses[id as usize]));
        }
        // Places that nothing touches and that hold whatever is asked.
        let padded = self.ids.len().next_multiple_of(LANES);
        self.x.resize(padded, NOWHERE);
        self.y.resize(padded, NOWHERE);
        self.sign.resize(padded, 1.0);
        self.base.resize(padded, 1e3);
        for flash in &gone {
            let mut local = self.localise(flash);
            local.dose = -local.dose;
            add(
                self.arch,
                &self.blocks,
                &self.x,
                &self.y,
                &local,
                &mut self.base,
            );
        }
        for flash in window {
            let local = self.localise(flash);
            self.local.push(local);
        }
        if self.rules.disjoint {
            let around = hull.grown(self.sigma);
            let near = model
                .near(around.side)
                .into_iter()
                .filter(|s| !removed.contains(s))
                .filter_map(|s| model.get(s));
            let fixed: Vec<[f64; 4]> = near.map(|f| self.localise(&f).side).collect();
            self.fixed.extend(fixed);
        }
    }

    fn localise(&self, flash: &Flash) -> Local {
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a dose needs no more than single precision here"
        )]
        Local {
            side: std::array::from_fn(|i| (flash.side[i] - self.origin[i % 2]) / self.sigma),
            least: self.rules.least(flash) / self.sigma,
            dose: flash.dose as f32,
        }
    }

    /// Cost of the doses that the model has now at the samples gathered, sides left out.
    fn standing(&self, model: &Model) -> f64 {
        let aim = self.rules.guard + AIM;
        let missed = |(&id, &sign): (&u32, &f32)| {
            f64::from((aim - sign * (model.doses()[id as usize] - 0.5)).max(0.0)).powi(2)
        };
        self.ids.iter().zip(&self.sign).map(missed).sum()
    }

    /// Dose of the window (or of the trial step) on top of the base, and the cost of what is missed.
    fn evaluate(&mut self, trial: bool) -> f64 {
        let window = if trial { &self.trial } else { &self.local };
        self.value.clear();
        self.value.extend_from_slice(&self.base);
        for flash in window {
            add(
                self.arch,
                &self.blocks,
                &self.x,
                &self.y,
                flash,
                &mut self.value,
            );
        }
        let missed = self.arch.dispatch(Missed {
            value: &self.value,
            sign: &self.sign,
            aim: self.rules.guard + AIM,
        });
        missed
            + self
                .links
                .iter()
                .map(|l| (l.excess(window) * LINK_WEIGHT).max(0.0).powi(2))
                .sum::<f64>()
    }

    /// Whether everything holds with the guard, at the values last computed.
    fn holds(&self) -> bool {
        let prints = self
            .value
            .iter()
            .zip(&self.sign)
            .all(|(&v, &s)| s * (v - 0.5) >= self.rules.guard);
        prints
            && self
                .links
                .iter()
                .all(|l| l.excess(&self.local) <= LINK_SLACK)
    }

    /// Inequalities on sides: least, greatest, and for tiles no overlap among the window or with what stays.
    fn link(&mut self) {
        self.links.clear();
        let greatest = self.rules.greatest_side / self.sigma;
        for (k, f) in self.local.iter().enumerate() {
            for axis in 0..2 {
                let (low, high) = (4 * k + axis, 4 * k + axis + 2);
                self.links.push(Link {
                    plus: Some(low),
                    minus: Some(high),
                    limit: -f.least,
                });
                if f.side[axis + 2] - f.side[axis] > greatest - 1.0 {
                    self.links.push(Link {
                        plus: Some(high),
                        minus: Some(low),
                        limit: greatest,
                    });
                }
            }
        }
        if !self.rules.disjoint {
            return;
        }
        for (k, f) in self.local.iter().enumerate() {
            for (j, g) in self.local.iter().enumerate().skip(k + 1) {
                if let Some((f_low, axis)) = separated(&f.side, &g.side) {
                    let (low, high) = if f_low { (k, j) } else { (j, k) };
                    self.links.push(Link {
                        plus: Some(4 * low + axis + 2),
                        minus: Some(4 * high + axis),
                        limit: 0.0,
                    });
                }
            }
            for g in &self.fixed {
                if let Some((f_low, axis)) = separated(&f.side, g) {
                    self.links.push(if f_low {
                        Link {
                            plus: Some(4 * k + axis + 2),
                            minus: None,
                            limit: g[axis],
                        }
                    } else {
                        Link {
                            plus: None,
                            minus: Some(4 * k + axis),
                            limit: -g[axis + 2],
                        }
                    });
                }
            }
        }
    }

    /// Linearises the print rule about the window, at the samples that one step could bring to break it.
    fn linearise(&mut self) {
        let rows = &mut self.rows;
        rows.x.clear();
        rows.y.clear();
        rows.factor.clear();
        rows.r0.clear();
        rows.before.clear();
        let aim = self.rules.guard + AIM;
        for (i, &value) in self.value.iter().enumerate() {
            rows.before.push(rows.r0.len());
            let r0 = aim - self.sign[i] * (value - 0.5);
            if r0 > -NEAR {
                rows.x.push(self.x[i]);
                rows.y.push(self.y[i]);
                rows.factor.push(-self.sign[i]);
                rows.r0.push(f64::from(r0));
            }
        }
        let count = rows.r0.len();
        rows.before.push(count);
        let n = count.next_multiple_of(LANES);
        for list in [&mut rows.x, &mut rows.y, &mut rows.factor] {
            list.resize(n, 0.0);
        }
        rows.slopes.clear();
        rows.slopes.resize(4 * n * self.local.len(), 0.0);
        for (flash, out) in self
            .local
            .iter()
            .zip(rows.slopes.chunks_exact_mut(4 * n.max(1)))
        {
            let (first, second) = out.split_at_mut(2 * n);
            let (left, low) = first.split_at_mut(n);
            let (right, high) = second.split_at_mut(n);
            reached(&self.blocks, flash, |places| {
                let from = rows.before[places.start] / LANES * LANES;
                let to = rows.before[places.end].next_multiple_of(LANES);
                self.arch.dispatch(Slopes {
                    x: &rows.x[from..to],
                    y: &rows.y[from..to],
                    factor: &rows.factor[from..to],
                    side: single(flash.side),
                    dose: flash.dose,
                    out: [
                        &mut left[from..to],
                        &mut low[from..to],
                        &mut right[from..to],
                        &mut high[from..to],
                    ],
                });
            });
        }
        rows.starts.clear();
        rows.entries.clear();
        for i in 0..count {
            rows.starts.push(rows.entries.len());
            for k in 0..self.local.len() {
                let a: [f32; 4] = std::array::from_fn(|side| rows.slopes[(4 * k + side) * n + i]);
                if a.iter().any(|s| s.abs() > LEAST_SLOPE) {
                    rows.entries.push((narrow(4 * k), a.map(f64::from)));
                }
            }
        }
        rows.starts.push(rows.entries.len());
    }

    /// The inequalities that are violated, before the step or after it: rows, then links.
    fn activate(&mut self, stepped: bool) {
        self.active.clear();
        for (row, &r0) in self.rows.r0.iter().enumerate() {
            let mut r = r0;
            if stepped {
                let entries = &self.rows.entries[self.rows.starts[row]..self.rows.starts[row + 1]];
                for (k, a) in entries {
                    let s = &self.step[*k as usize..*k as usize + 4];
                    r += a[0] * s[0] + a[1] * s[1] + a[2] * s[2] + a[3] * s[3];
                }
            }
            if r > 0.0 {
                self.active.push(narrow(row));
            }
        }
        for (at, l) in self.links.iter().enumerate() {
            let moved = |i: Option<usize>| i.map_or(0.0, |i| self.step[i]);
            let excess = l.excess(&self.local)
                + if stepped {
                    moved(l.plus) - moved(l.minus)
                } else {
                    0.0
                };
            if excess > 0.0 {
                self.active.push(narrow(self.rows.r0.len() + at));
            }
        }
    }

    /// The step that least-squares solves the linearised inequalities under damping.
    fn find_step(&mut self, damping: f64) {
        let n = 4 * self.local.len();
        self.step.clear();
        self.step.resize(n, 0.0);
        self.last.clear();
        for round in 0..3 {
            self.activate(round > 0);
            // The same inequalities violated: the same step.
            if round > 0 && self.active == self.last {
                break;
            }
            std::mem::swap(&mut self.active, &mut self.last);
            self.normal.clear();
            self.normal.resize(n * n, 0.0);
            self.gradient.clear();
            self.gradient.resize(n, 0.0);
            for i in 0..n {
                self.normal[i * n + i] = damping;
            }
            self.arch.dispatch(Assemble {
                active: &self.last,
                r0: &self.rows.r0,
                starts: &self.rows.starts,
                entries: &self.rows.entries,
                normal: &mut self.normal,
                gradient: &mut self.gradient,
            });
            for &active in &self.last {
                let Some(l) = (active as usize)
                    .checked_sub(self.rows.r0.len())
                    .map(|at| &self.links[at])
                else {
                    continue;
                };
                let r0 = l.excess(&self.local) * LINK_WEIGHT;
                let ends = [(l.plus, LINK_WEIGHT), (l.minus, -LINK_WEIGHT)];
                for (i, a) in ends {
                    let Some(i) = i else { continue };
                    self.gradient[i] += a * r0;
                    for (j, b) in ends {
                        if let Some(j) = j.filter(|&j| j >= i) {
                            self.normal[i * n + j] += a * b;
                        }
                    }
                }
            }
            self.step.clear();
            self.step.extend(self.gradient.iter().map(|g| -g));
            self.arch.dispatch(Cholesky {
                a: &mut self.normal,
                b: &mut self.step,
            });
        }
        for s in &mut self.step {
            *s = s.clamp(-LONGEST_STEP, LONGEST_STEP);
        }
    }
}

impl Link {
    /// By how many σ it is missed; negative when it holds.
    fn excess(&self, window: &[Local]) -> f64 {
        let at = |i: Option<usize>| i.map_or(0.0, |i| window[i / 4].side[i % 4]);
        at(self.plus) - at(self.minus) - self.limit
    }
}

/// Adds the dose of a shot at the places that it reaches.
fn add(arch: Arch, blocks: &[Block], x: &[f32], y: &[f32], flash: &Local, out: &mut [f32]) {
    reached(blocks, flash, |range| {
        arch.dispatch(AddDose {
            x: &x[range.clone()],
            y: &y[range.clone()],
            side: single(flash.side),
            dose: flash.dose,
            out: &mut out[range],
        });
    });
}

/// Ranges of places that cover all that a shot reaches, in multiples of [`LANES`], each place once.
fn reached(blocks: &[Block], flash: &Local, mut each: impl FnMut(Range<usize>)) {
    let [x0, y0, x1, y1] = flash.side;
    let (mut open, mut start) = (0..0, 0);
    for block in blocks {
        let [a0, b0, a1, b1] = block.side;
        let touched = a0 <= x1 + TOUCH && x0 - TOUCH <= a1 && b0 <= y1 + TOUCH && y0 - TOUCH <= b1;
        if touched {
            let from = start / LANES * LANES;
            if from > open.end {
                if !open.is_empty() {
                    each(open);
                }
                open = from..from;
            }
            open.end = block.end.next_multiple_of(LANES);
        }
        start = block.end;
    }
    if !open.is_empty() {
        each(open);
    }
}

/// Along which axis two near tiles are kept apart, and whether the first is the lower one there; `None` when 1 σ apart.
fn separated(f: &[f64; 4], g: &[f64; 4]) -> Option<(bool, usize)> {
    let gap = |axis: usize| (f[axis] - g[axis + 2]).max(g[axis] - f[axis + 2]);
    let axis = usize::from(gap(1) > gap(0));
    (gap(axis) < 1.0).then(|| (f[axis] + f[axis + 2] <= g[axis] + g[axis + 2], axis))
}

fn narrow(i: usize) -> u32 {
    u32::try_from(i).unwrap_or(u32::MAX)
}

#[allow(
    clippy::cast_possible_truncation,
    reason = "a place in σ about a near origin needs no more than single precision"
)]
fn single(side: [f64; 4]) -> [f32; 4] {
    side.map(|s| s as f32)
}
