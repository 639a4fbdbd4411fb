//! Totals of all figures from those drawn, and how sure they are.
//!
//! Regression estimator in strata, of which the ratio estimator is the case of one term (Cochran, *Sampling Techniques*, 3rd ed. (1977),
//! chapters 6 and 7; in the form of Särndal, Swensson and Wretman, *Model Assisted Survey Sampling* (1992), section 6.4): figures get one weight each that
//! brings the known terms of all figures out exactly, so costs come out right as far as they are linear in these. Variance from the residuals with these weights
//! (6.6.4 there), each as it would be without its figure (the jackknife's, which matters for few figures), and the finite-population correction; degrees of freedom
//! by Satterthwaite (Cochran 5.16).

use super::strata::{Strata, TERMS};
use super::student::reach;

/// A total with its interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Total {
    /// Best guess.
    pub value: f64,
    /// Half the width of its 95 % interval; 0 if exact.
    pub half_width: f64,
}

impl Total {
    /// Half width as a share of the value; 0 if exact.
    #[must_use]
    pub fn relative(&self) -> f64 {
        if self.half_width == 0.0 {
            0.0
        } else {
            self.half_width / self.value.abs()
        }
    }

    /// Whether the interval covers a number.
    #[must_use]
    pub fn covers(&self, exact: f64) -> bool {
        (exact - self.value).abs() <= self.half_width
    }
}

/// Weights of the figures drawn, from which any total follows.
#[derive(Clone, Debug)]
pub struct Weights<'a> {
    strata: &'a Strata,
    /// Figures drawn from each stratum.
    taken: Vec<usize>,
    /// Figure and weight, stratum by stratum.
    weights: Vec<(usize, f64)>,
    /// Cholesky factor of the weighted products of the terms.
    factor: [[f64; TERMS]; TERMS],
}

impl<'a> Weights<'a> {
    /// Of the first figures of each stratum, `taken` of them.
    #[must_use]
    pub fn new(strata: &'a Strata, taken: &[usize]) -> Self {
        let mut products = [[0.0; TERMS]; TERMS];
        let mut missing = [0.0; TERMS];
        let mut plain: Vec<(usize, f64)> = Vec::new();
        for (members, &n) in strata.members.iter().zip(taken) {
            let share = members.len() as f64 / n as f64;
            for (i, &figure) in members.iter().enumerate() {
                let x = &strata.terms[figure];
                for (missing, x) in missing.iter_mut().zip(x) {
                    *missing += x;
                }
                if i >= n {
                    continue;
                }
                plain.push((figure, share));
                let by = share / strata.variance[figure];
                for a in 0..TERMS {
                    missing[a] -= share * x[a];
                    for b in 0..TERMS {
                        products[a][b] += by * x[a] * x[b];
                    }
                }
            }
        }
        let factor = cholesky(products);
        let tilt = solve(&factor, missing);
        let tilted = |(figure, share): (usize, f64)| {
            let tilt = dot(&tilt, &strata.terms[figure]) / strata.variance[figure];
            (figure, share * (1.0 + tilt))
        };
        Self {
            strata,
            taken: taken.to_vec(),
            weights: plain.into_iter().map(tilted).collect(),
            factor,
        }
    }

    /// Every figure drawn and how many it stands for, itself included.
    #[must_use]
    pub fn of_figures(&self) -> &[(usize, f64)] {
        &self.weights
    }

    /// Whether every figure was drawn.
    #[must_use]
    pub fn all(&self) -> bool {
        self.weights.len() == self.strata.len()
    }

    /// The total of a cost over all figures, known for those drawn.
    #[must_use]
    pub fn total(&self, cost: &dyn Fn(usize) -> f64) -> Total {
        let value: f64 = self
            .weights
            .iter()
            .map(|&(figure, weight)| weight * cost(figure))
            .sum();
        if self.all() {
            return Total {
                value,
                half_width: 0.0,
            };
        }
        let fit = self.fit(cost);
        let residual = |&(figure, weight): &(usize, f64), share: f64| {
            let terms = &self.strata.terms[figure];
            // A figure pulls the fit towards itself: without it, its residual would be greater by this.
            let pull = share / self.strata.variance[figure] * leverage(&self.factor, terms);
            weight / share * (cost(figure) - dot(&fit, terms)) / (1.0 - pull.min(0.9))
        };
        let (mut variance, mut by_freedom, mut lonely) = (0.0, 0.0, 0.0);
        let mut from = 0;
        // Σ residual² and Σ size² of all, for strata of which one figure was drawn or none.
        let (mut squares, mut sizes) = (0.0, 0.0);
        for (members, &n) in self.strata.members.iter().zip(&self.taken) {
            let drawn = &self.weights[from..from + n];
            from += n;
            let (all, n) = (members.len() as f64, n as f64);
            let share = all / n;
            let mean = drawn.iter().map(|d| residual(d, share)).sum::<f64>() / n;
            let square: f64 = drawn
                .iter()
                .map(|d| (residual(d, share) - mean).powi(2))
                .sum();
            squares += square;
            sizes += drawn
                .iter()
                .map(|(figure, _)| self.strata.size[*figure].powi(2))
                .sum::<f64>();
            if drawn.len() == members.len() {
                continue;
            }
            if drawn.len() < 2 {
                let size: f64 = members
                    .iter()
                    .map(|&figure| self.strata.size[figure].powi(2))
                    .sum();
                lonely += size * (share.min(all) - 1.0).max(1.0);
                continue;
            }
            let part = all * all * (1.0 - n / all) / n * square / (n - 1.0);
            variance += part;
            by_freedom += part * part / (n - 1.0);
        }
        if sizes > 0.0 {
            variance += lonely * squares / sizes;
        }
        let drawn = self.weights.len() as f64;
        let freedom = if by_freedom > 0.0 {
            variance * variance / by_freedom
        } else {
            drawn
        };
        Total {
            value,
            half_width: reach(freedom) * variance.sqrt(),
        }
    }

    /// The cost of a figure as the fit to those drawn has it.
    pub fn fitted(&self, cost: &dyn Fn(usize) -> f64) -> impl Fn(usize) -> f64 + use<'_, 'a> {
        let fit = self.fit(cost);
        move |figure| dot(&fit, &self.strata.terms[figure])
    }

    /// Coefficients of the terms.
    fn fit(&self, cost: &dyn Fn(usize) -> f64) -> [f64; TERMS] {
        let mut right = [0.0; TERMS];
        let mut from = 0;
        for (members, &n) in self.strata.members.iter().zip(&self.taken) {
            let share = members.len() as f64 / n as f64;
            for &(figure, _) in &self.weights[from..from + n] {
                let by = share * cost(figure) / self.strata.variance[figure];
                for (right, x) in right.iter_mut().zip(&self.strata.terms[figure]) {
                    *right += by * x;
                }
            }
            from += n;
        }
        solve(&self.factor, right)
    }

    /// By stratum, how far the residuals of one figure scatter: what the next figures drawn there would make surer. Strata of few
    /// figures lean on the scatter of all.
    pub(super) fn scatter(&self, cost: &dyn Fn(usize) -> f64) -> Vec<f64> {
        let fit = self.fit(cost);
        let residual = |figure: usize| cost(figure) - dot(&fit, &self.strata.terms[figure]);
        let size = |figure: usize| self.strata.size[figure].powi(2);
        let square = |f: &dyn Fn(usize) -> f64| self.weights.iter().map(|d| f(d.0)).sum::<f64>();
        let ratio = square(&|i| residual(i).powi(2)) / square(&size);
        let mut from = 0;
        let mut scatter = Vec::new();
        for (members, &n) in self.strata.members.iter().zip(&self.taken) {
            let drawn = &self.weights[from..from + n];
            from += n;
            let found: f64 = drawn.iter().map(|d| residual(d.0).powi(2)).sum();
            let expected =
                ratio * members.iter().map(|&i| size(i)).sum::<f64>() / members.len() as f64;
            scatter.push(((found + LEAN * expected) / (n as f64 + LEAN)).sqrt());
        }
        scatter
    }
}

/// Figures that the scatter of all counts for in each stratum. With few, strata that happen to look even get no more figures and the interval comes out too
/// narrow: over 2000 masks drawn to ±1 % it covered 93.0 % with 4, 93.5 % with 16, 94.4 % with 64, for a twentieth more figures.
const LEAN: f64 = 64.0;

fn dot(a: &[f64; TERMS], b: &[f64; TERMS]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// `L` with `L·Lᵀ = m`; a term that follows from those before it gets a row of zeros and no say.
fn cholesky(m: [[f64; TERMS]; TERMS]) -> [[f64; TERMS]; TERMS] {
    let mut l = [[0.0; TERMS]; TERMS];
    for i in 0..TERMS {
        for j in 0..=i {
            let rest = m[i][j] - (0..j).map(|k| l[i][k] * l[j][k]).sum::<f64>();
            if i == j {
                l[i][i] = if rest > 1e-9 * m[i][i] {
                    rest.sqrt()
                } else {
                    0.0
                };
            } else if l[j][j] > 0.0 {
                l[i][j] = rest / l[j][j];
            }
        }
        if l[i][i] == 0.0 {
            l[i] = [0.0; TERMS];
        }
    }
    l
}

/// `xᵀ·(L·Lᵀ)⁻¹·x`, without the terms that have no say.
fn leverage(l: &[[f64; TERMS]; TERMS], x: &[f64; TERMS]) -> f64 {
    let mut y = *x;
    for i in 0..TERMS {
        y[i] -= (0..i).map(|k| l[i][k] * y[k]).sum::<f64>();
        y[i] = if l[i][i] > 0.0 { y[i] / l[i][i] } else { 0.0 };
    }
    dot(&y, &y)
}

/// The `x` of `L·Lᵀ·x = right`; 0 for terms without a say.
fn solve(l: &[[f64; TERMS]; TERMS], right: [f64; TERMS]) -> [f64; TERMS] {
    let mut x = right;
    for i in 0..TERMS {
        x[i] -= (0..i).map(|k| l[i][k] * x[k]).sum::<f64>();
        x[i] = if l[i][i] > 0.0 { x[i] / l[i][i] } else { 0.0 };
    }
    for i in (0..TERMS).rev() {
        x[i] -= (i + 1..TERMS).map(|k| l[k][i] * x[k]).sum::<f64>();
        x[i] = if l[i][i] > 0.0 { x[i] / l[i][i] } else { 0.0 };
    }
    x
}
