//! Figures in strata, each stratum in the order in which its figures are drawn.
//!
//! Three classes (rectilinear; curved, the gentle and the winding half) are cut into up to [`SIZES`] parts of equal expected cost, so that the few
//! that cost most are drawn most densely, down to all of them. Cochran, *Sampling Techniques*, 3rd ed. (1977), chapter 5A: with costs spread
//! this wide, strata of equal total are near the best.

use super::features::Features;

/// What a cost is taken to be linear in, each times the figure's places.
pub(super) const TERMS: usize = 5;

/// Parts of a class at most.
const SIZES: usize = 6;

/// Figures of a class for each of its parts at least.
const LEAST: usize = 40;

/// All figures, ready to be drawn from.
#[derive(Clone, Debug)]
pub struct Strata {
    /// What each figure's cost is taken to be linear in.
    pub(super) terms: Vec<[f64; TERMS]>,
    /// Variance that its cost is taken to have about that, but for a factor.
    pub(super) variance: Vec<f64>,
    /// What it is expected to cost, in no unit: more or less right is enough.
    pub(super) size: Vec<f64>,
    /// Numbers of figures by stratum, in the order of drawing. None is empty.
    pub(super) members: Vec<Vec<usize>>,
}

/// Lengths that set what a figure costs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scale {
    /// σ of the blur, nm.
    pub sigma_nm: f64,
    /// Greatest side of a shot, nm.
    pub greatest_side_nm: f64,
}

impl Strata {
    /// Of figures with their features and their random numbers, each figure's own and the same in every drawing (permanent random
    /// numbers: Ohlsson, in *Business Survey Methods*, Wiley 1995): a figure that is drawn for one layout is likely drawn for its next revision.
    #[must_use]
    pub fn new(figures: &[(Features, u64)], scale: Scale) -> Self {
        let terms: Vec<_> = figures.iter().map(|(f, _)| terms(f, scale)).collect();
        let expected: Vec<f64> = terms.iter().map(expected).collect();
        let size: Vec<f64> = expected
            .iter()
            .zip(figures)
            .map(|(cost, (f, _))| cost * f.places)
            .collect();
        let variance = expected
            .iter()
            .zip(figures)
            .map(|(cost, (f, _))| cost * f.places * f.places)
            .collect();
        let members = classes(figures, &size)
            .into_iter()
            .flat_map(|class| parts(class, &size, figures))
            .collect();
        Self {
            terms: terms
                .iter()
                .zip(figures)
                .map(|(x, (f, _))| x.map(|x| x * f.places))
                .collect(),
            variance,
            size,
            members,
        }
    }

    /// How many figures there are.
    #[must_use]
    pub fn len(&self) -> usize {
        self.size.len()
    }

    /// Whether there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.size.is_empty()
    }

    /// Figures of each stratum.
    #[must_use]
    pub fn sizes(&self) -> Vec<usize> {
        self.members.iter().map(Vec::len).collect()
    }
}

/// Of one place.
fn terms(f: &Features, scale: Scale) -> [f64; TERMS] {
    [
        1.0,
        f.rise_nm / scale.sigma_nm,
        f.turning,
        f.outline_nm / scale.greatest_side_nm,
        f.area_nm2 / (scale.greatest_side_nm * scale.greatest_side_nm),
    ]
}

/// Shots of one place, roughly.
fn expected([one, rise, turning, outline, area]: &[f64; TERMS]) -> f64 {
    PRIOR[0] * one + PRIOR[1] * rise + PRIOR[2] * turning + PRIOR[3] * outline + PRIOR[4] * area
}

/// Weights of the terms in what a figure is expected to cost. They only steer the drawing: the estimate fits its own.
const PRIOR: [f64; TERMS] = [0.5, 0.25, 0.25, 0.5, 1.0];

/// Rectilinear figures; of the others those that turn little for their length, and those that turn much.
fn classes(figures: &[(Features, u64)], size: &[f64]) -> Vec<Vec<usize>> {
    let (rectilinear, mut curved): (Vec<usize>, Vec<usize>) =
        (0..figures.len()).partition(|&i| figures[i].0.rectilinear);
    let bend = |i: &usize| figures[*i].0.turning / figures[*i].0.outline_nm;
    sort(&mut curved, bend, figures);
    let cut = cuts(&curved, size, 2)[0];
    let winding = curved.split_off(cut);
    let mut classes = vec![rectilinear, curved, winding];
    classes.retain(|class| !class.is_empty());
    classes
}

/// A class cut by size.
fn parts(mut class: Vec<usize>, size: &[f64], figures: &[(Features, u64)]) -> Vec<Vec<usize>> {
    let number = (class.len() / LEAST).clamp(1, SIZES);
    sort(&mut class, |i| size[*i], figures);
    let mut parts = Vec::new();
    for cut in cuts(&class, size, number).into_iter().rev() {
        parts.push(class.split_off(cut));
    }
    parts.push(class);
    parts.retain(|part| !part.is_empty());
    for part in &mut parts {
        part.sort_unstable_by_key(|&i| (figures[i].1, i));
    }
    parts
}

fn sort(figures: &mut [usize], by: impl Fn(&usize) -> f64, all: &[(Features, u64)]) {
    figures.sort_unstable_by(|a, b| {
        by(a)
            .total_cmp(&by(b))
            .then_with(|| (all[*a].1, a).cmp(&(all[*b].1, b)))
    });
}

/// Where to cut a sorted class into so many parts of equal size; upward, one cut fewer than parts.
fn cuts(class: &[usize], size: &[f64], parts: usize) -> Vec<usize> {
    let total: f64 = class.iter().map(|&i| size[i]).sum();
    let mut cuts = Vec::new();
    let (mut passed, mut at) = (0.0, 0);
    for part in 1..parts {
        let upto = total * part as f64 / parts as f64;
        while at < class.len() && passed + 0.5 * size[class[at]] < upto {
            passed += size[class[at]];
            at += 1;
        }
        cuts.push(at);
    }
    cuts
}
