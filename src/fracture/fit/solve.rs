//! Moves the sides of a few shots at once until all inequalities hold.
//!
//! Damped least squares on the inequalities that do not hold (Levenberg 1944, Marquardt 1963). Because a step
//! violates inequalities that held before, each step is found by a few rounds on the linearised problem with the set of
//! violated inequalities brought up to date in every round, before the dose is computed anew. Lengths are in σ here.

use pulp::Arch;

use crate::fracture::overlap::DoseLevels;

use super::kernel::{AddDose, Slopes};
use super::model::{Band, Flash, Model};

/// What shots must keep besides the print rule.
#[derive(Clone, Copy, Debug)]
pub(in crate::fracture) struct Rules {
    /// nm.
    pub(in crate::fracture) least_side: f64,
    /// nm.
    pub(in crate::fracture) greatest_side: f64,
    /// No two shots may overlap.
    pub(in crate::fracture) disjoint: bool,
    /// Dose to spare at every sample: covers rounding to the address grid and what lies between samples.
    pub(in crate::fracture) guard: f32,
    /// Doses that a shot may have.
    pub(in crate::fracture) levels: DoseLevels,
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
    bands: Vec<Band>,
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
    /// Doses computed so far, for measuring.
    pub(in crate::fracture) evaluations: u64,
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
    starts: Vec<usize>,
    entries: Vec<(u32, [f64; 4])>,
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

/// Extra guard that a fit aims at, so that it ends inside the region where the guard holds and not on its border.
const AIM: f32 = 0.003;

/// Rows with more dose than this to spare cannot be violated by one step.
const NEAR: f32 = 0.12;

/// Dose per σ that an overlap or an unfit side counts as: that of a wide edge.
const LINK_WEIGHT: f64 = 0.4;

/// A link missed by less than this (σ) holds; rounding to the address grid removes it.
const LINK_SLACK: f64 = 0.002;

/// A fit is given up when three steps leave more of the cost than this.
const STALL: f64 = 0.5;

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
            bands: Vec::new(),
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
            evaluations: 0,
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
        self.begin(model, removed, window);
        let standing = self.standing(model);
        self.link();
        let mut cost = self.evaluate(false);
        let mut damping = 0.3 * LINK_WEIGHT * LINK_WEIGHT;
        let mut before = [f64::INFINITY; 3];
        for _ in 0..most {
            if self.holds() || cost > STALL * before[0] {
                break;
            }
            before = [before[1], before[2], cost];
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
                                dose: f.dose,
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
        self.begin(model, removed, window);
        self.link();
        self.evaluate(false)
    }

    /// Makes `window` replace `removed` in the model, after [`Solver::solve`] on the same; gives the slots now used.
    pub(in crate::fracture) fn commit(
        &mut self,
        model: &mut Model,
        removed: &[usize],
        window: &[Flash],
    ) -> Vec<usize> {
        self.evaluate(false);
        for (&id, &value) in self.ids.iter().zip(&self.value) {
            model.doses_mut()[id as usize] = value;
        }
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

    /// Gathers the samples within reach of `removed` and `window`, with the dose of all other shots there.
    fn begin(&mut self, model: &Model, removed: &[usize], window: &[Flash]) {
        let reach = TOUCH * self.sigma;
        let gone: Vec<Flash> = removed.iter().filter_map(|&s| model.get(s)).collect();
        let all = || gone.iter().chain(window);
        let Some(hull) = all().copied().reduce(|a, b| a.hull(&b)) else {
            self.ids.clear();
            return;
        };
        self.origin = [hull.side[0], hull.side[1]];
        self.boxes.clear();
        self.boxes.extend(all().map(|f| f.grown(reach).side));
        model.samples_near(&self.boxes, &mut self.ids, &mut self.bands);
        for band in &mut self.bands {
            band.low = (band.low - self.origin[1]) / self.sigma;
            band.high = (band.high - self.origin[1]) / self.sigma;
        }
        let (samples, doses) = (model.samples(), model.doses());
        let inverse = 1.0 / self.sigma;
        for list in [&mut self.x, &mut self.y, &mut self.sign, &mut self.base] {
            list.clear();
        }
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a place in σ about a near origin needs no more than single precision"
        )]
        for &id in &self.ids {
            let sample = &samples[id as usize];
            self.x
                .push(((sample.place[0] - self.origin[0]) * inverse) as f32);
            self.y
                .push(((sample.place[1] - self.origin[1]) * inverse) as f32);
            self.sign.push(sample.sign);
            self.base.push(doses[id as usize]);
        }
        for flash in &gone {
            let local = self.localise(flash);
            let range = within(&self.bands, &local);
            self.arch.dispatch(AddDose {
                x: &self.x[range.clone()],
                y: &self.y[range.clone()],
                side: single(local.side),
                dose: -local.dose,
                out: &mut self.base[range],
            });
        }
        self.local.clear();
        for flash in window {
            let local = self.localise(flash);
            self.local.push(local);
        }
        self.fixed.clear();
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
        self.evaluations += 1;
        let window = if trial { &self.trial } else { &self.local };
        self.value.clear();
        self.value.extend_from_slice(&self.base);
        for flash in window {
            let range = within(&self.bands, flash);
            self.arch.dispatch(AddDose {
                x: &self.x[range.clone()],
                y: &self.y[range.clone()],
                side: single(flash.side),
                dose: flash.dose,
                out: &mut self.value[range],
            });
        }
        let aim = self.rules.guard + AIM;
        let mut cost = 0.0;
        for (&value, &sign) in self.value.iter().zip(&self.sign) {
            let r = f64::from((aim - sign * (value - 0.5)).max(0.0));
            cost += r * r;
        }
        cost + self
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
        let (least, greatest) = (
            self.rules.least_side / self.sigma,
            self.rules.greatest_side / self.sigma,
        );
        for (k, f) in self.local.iter().enumerate() {
            for axis in 0..2 {
                let (low, high) = (4 * k + axis, 4 * k + axis + 2);
                self.links.push(Link {
                    plus: Some(low),
                    minus: Some(high),
                    limit: -least,
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
        let aim = self.rules.guard + AIM;
        for (i, &value) in self.value.iter().enumerate() {
            let r0 = aim - self.sign[i] * (value - 0.5);
            if r0 > -NEAR {
                rows.x.push(self.x[i]);
                rows.y.push(self.y[i]);
                rows.factor.push(-self.sign[i]);
                rows.r0.push(f64::from(r0));
            }
        }
        let n = rows.r0.len();
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
            self.arch.dispatch(Slopes {
                x: &rows.x,
                y: &rows.y,
                factor: &rows.factor,
                side: single(flash.side),
                dose: flash.dose,
                out: [left, low, right, high],
            });
        }
        rows.starts.clear();
        rows.entries.clear();
        for i in 0..n {
            rows.starts.push(rows.entries.len());
            for k in 0..self.local.len() {
                let a: [f32; 4] = std::array::from_fn(|side| rows.slopes[(4 * k + side) * n + i]);
                if a.iter().any(|s| s.abs() > LEAST_SLOPE) {
                    rows.entries
                        .push((u32::try_from(4 * k).unwrap_or(u32::MAX), a.map(f64::from)));
                }
            }
        }
        rows.starts.push(rows.entries.len());
    }

    /// The step that least-squares solves the linearised inequalities under damping.
    fn find_step(&mut self, damping: f64) {
        let n = 4 * self.local.len();
        self.step.clear();
        self.step.resize(n, 0.0);
        for round in 0..3 {
            self.normal.clear();
            self.normal.resize(n * n, 0.0);
            self.gradient.clear();
            self.gradient.resize(n, 0.0);
            for i in 0..n {
                self.normal[i * n + i] = damping;
            }
            for (row, &r0) in self.rows.r0.iter().enumerate() {
                let entries = &self.rows.entries[self.rows.starts[row]..self.rows.starts[row + 1]];
                let mut r = r0;
                if round > 0 {
                    for (k, a) in entries {
                        let s = &self.step[*k as usize..*k as usize + 4];
                        r += a[0] * s[0] + a[1] * s[1] + a[2] * s[2] + a[3] * s[3];
                    }
                }
                if r <= 0.0 {
                    continue;
                }
                for (at, (k, a)) in entries.iter().enumerate() {
                    let k = *k as usize;
                    for (i, slope) in a.iter().enumerate() {
                        self.gradient[k + i] += slope * r0;
                        let line = &mut self.normal[(k + i) * n..(k + i + 1) * n];
                        for (j, b) in &entries[..=at] {
                            let cells = &mut line[*j as usize..*j as usize + 4];
                            for (cell, b) in cells.iter_mut().zip(b) {
                                *cell += slope * b;
                            }
                        }
                    }
                }
            }
            for l in &self.links {
                let at = |i: Option<usize>| i.map_or(0.0, |i| self.step[i]);
                let r0 = l.excess(&self.local) * LINK_WEIGHT;
                if r0 + LINK_WEIGHT * (at(l.plus) - at(l.minus)) <= 0.0 {
                    continue;
                }
                let ends = [(l.plus, LINK_WEIGHT), (l.minus, -LINK_WEIGHT)];
                for (i, a) in ends {
                    let Some(i) = i else { continue };
                    self.gradient[i] += a * r0;
                    for (j, b) in ends {
                        if let Some(j) = j.filter(|&j| j <= i) {
                            self.normal[i * n + j] += a * b;
                        }
                    }
                }
            }
            self.step.clear();
            self.step.extend(self.gradient.iter().map(|g| -g));
            cholesky_solve(&mut self.normal, &mut self.step);
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

/// The samples in rows that a shot reaches.
fn within(bands: &[Band], flash: &Local) -> std::ops::Range<usize> {
    let (low, high) = (flash.side[1] - TOUCH, flash.side[3] + TOUCH);
    let from = bands
        .iter()
        .take_while(|b| b.high < low)
        .last()
        .map_or(0, |b| b.end);
    let to = bands
        .iter()
        .take_while(|b| b.low <= high)
        .last()
        .map_or(0, |b| b.end);
    from..to.max(from)
}

/// Along which axis two near tiles are kept apart, and whether the first is the lower one there; `None` when 1 σ apart.
fn separated(f: &[f64; 4], g: &[f64; 4]) -> Option<(bool, usize)> {
    let gap = |axis: usize| (f[axis] - g[axis + 2]).max(g[axis] - f[axis + 2]);
    let axis = usize::from(gap(1) > gap(0));
    (gap(axis) < 1.0).then(|| (f[axis] + f[axis + 2] <= g[axis] + g[axis + 2], axis))
}

#[allow(
    clippy::cast_possible_truncation,
    reason = "a place in σ about a near origin needs no more than single precision"
)]
fn single(side: [f64; 4]) -> [f32; 4] {
    side.map(|s| s as f32)
}

/// Solves `A·x = b` for a symmetric positive definite `A` given by its lower triangle, row by row; `b` becomes `x`.
fn cholesky_solve(a: &mut [f64], b: &mut [f64]) {
    let n = b.len();
    for i in 0..n {
        let (done, rest) = a.split_at_mut(i * n);
        let row = &mut rest[..n];
        for j in 0..i {
            let other = &done[j * n..j * n + n];
            let dot: f64 = row[..j].iter().zip(&other[..j]).map(|(p, q)| p * q).sum();
            row[j] = (row[j] - dot) / other[j];
        }
        let square: f64 = row[..i].iter().map(|p| p * p).sum();
        row[i] = (row[i] - square).max(1e-30).sqrt();
        let dot: f64 = row[..i].iter().zip(&b[..i]).map(|(p, q)| p * q).sum();
        b[i] = (b[i] - dot) / row[i];
    }
    for i in (0..n).rev() {
        b[i] /= a[i * n + i];
        let x = b[i];
        for j in 0..i {
            b[j] -= a[i * n + j] * x;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cholesky_solves_a_small_system() {
        // [[4,2],[2,3]]·[1,2] = [8,8], by hand.
        let (mut a, mut b) = ([4.0, 0.0, 2.0, 3.0], [8.0, 8.0]);
        cholesky_solve(&mut a, &mut b);
        assert!((b[0] - 1.0).abs() < 1e-12 && (b[1] - 2.0).abs() < 1e-12);
    }
}
