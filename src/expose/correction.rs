//! The dose that keeps every wide edge where it was drawn, whatever is written around it.
//!
//! Two-Gaussian spread of T. H. P. Chang, J. Vac. Sci. Technol. 12 (1975) 1271: level = `D·F + Σ η·B` with F the forward part at
//! dose 1 and B the dose-weighted coverage spread by each long-range Gaussian; the threshold is `(1 + Ση)/2`.

use crate::units::{Dose, Nm};

use super::density::Density;

/// One long-range term.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Backscatter {
    /// Energy that it brings per unit of the forward part.
    pub ratio: f64,
    /// Its 1/e radius β (not its standard deviation β/√2).
    pub radius: Nm,
}

/// What stands in the way of a correction.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum CorrectionError {
    /// A ratio or radius out of range.
    #[error(
        "backscatter ratio {ratio} with radius {radius}, expected a ratio from 0 to 3 and a radius over 0 nm"
    )]
    Term {
        /// The ratio.
        ratio: f64,
        /// The radius.
        radius: Nm,
    },
    /// A density outside what coverage can be.
    #[error("density {found}, expected 0 to 1")]
    Density {
        /// What was given.
        found: f64,
    },
    /// The surroundings alone give more than an edge may get.
    #[error(
        "the dose at an empty place would have to be {found}, expected over 0: the backscatter ratios are too great for this coverage"
    )]
    Negative {
        /// The least dose.
        found: f64,
    },
}

/// Doses on the mesh of the coverage, and how well they do.
#[derive(Clone, Debug)]
pub struct Correction {
    /// Dose of a shot by place, a multiple of dose-to-size.
    pub dose: Density,
    /// What wide edges see after correction, relative to the threshold: 1 is perfect.
    pub edge_level: Density,
    /// What they would see at dose 1 everywhere.
    pub uncorrected: Density,
    /// Greatest distance of `edge_level` from 1.
    pub residual: f64,
    /// Rounds taken.
    pub rounds: u32,
}

impl Correction {
    /// Least and greatest level that edges would see at dose 1, in cells where something is written.
    #[must_use]
    pub fn uncorrected_where_written(&self, coverage: &Density) -> [f64; 2] {
        let levels = self.uncorrected.cells().iter().zip(coverage.cells());
        levels
            .filter(|(_, cover)| **cover > 0.0)
            .fold([f64::INFINITY, f64::NEG_INFINITY], |[low, high], (l, _)| {
                [low.min(*l), high.max(*l)]
            })
    }
}

/// The dose where coverage is uniform over the reach of the long range: `(1 + η)/(1 + 2·η·density)`, 1 at density ½.
///
/// # Errors
/// A ratio outside 0 to 3, a density outside 0 to 1.
pub fn uniform_correction(ratio: f64, density: f64) -> Result<Dose, CorrectionError> {
    check(&Backscatter {
        ratio,
        radius: Nm(1.0),
    })?;
    if !(0.0..=1.0).contains(&density) {
        return Err(CorrectionError::Density { found: density });
    }
    Ok(Dose((1.0 + ratio) / (1.0 + 2.0 * ratio * density)))
}

/// `Σ η·B` in every cell of what is written: coverage × dose, spread by each term.
#[must_use]
pub fn backscattered(written: &Density, terms: &[Backscatter]) -> Density {
    let mut spread = terms.iter().map(|t| (t.ratio, written.spread(t.radius)));
    let Some((ratio, first)) = spread.next() else {
        return written.map(|_| 0.0);
    };
    spread.fold(first.map(|b| ratio * b), |sum, (ratio, next)| {
        sum.zip(&next, |s, b| s + ratio * b)
    })
}

/// Residual at which the iteration ends: far below any dose step.
const CLOSE: f64 = 1e-9;

/// Rounds after which it ends in any case; twenty are usual.
const MOST_ROUNDS: u32 = 200;

/// The fixed point of `D/2 + Σ η·B(D) = (1 + Ση)/2` in every cell, B being (coverage × D) spread.
///
/// The equation is linear. With `E = √c·D` (c the coverage) its matrix `½ + Σ η·√c·G·√c` is symmetric and positive, so conjugate
/// gradients (Hestenes and Stiefel, J. Res. Nat. Bur. Stand. 49 (1952) 409) find it in about half the rounds of dividing
/// `D ← (1 + Ση)/(1 + 2·Σ η·B/D)`, and for any coverage, where `D ← (1 + Ση) − 2·Σ η·B` diverges for 2ηU over 1. Starts from the
/// closed form with the spread coverage; empty cells follow from the others. Ends at a residual of 1e-9 or after 200 rounds.
/// Beyond the frame stands its coverage at the uniform dose.
///
/// # Errors
/// A ratio outside 0 to 3, a radius that is none, or ratios for which there is no positive dose.
pub fn correct(coverage: &Density, terms: &[Backscatter]) -> Result<Correction, CorrectionError> {
    terms.iter().try_for_each(check)?;
    let total = 1.0 + terms.iter().map(|t| t.ratio).sum::<f64>();
    let scattered = |written: &Density| backscattered(written, terms);
    let level = |dose: &Density, back: &Density| dose.zip(back, |d, b| (d + 2.0 * b) / total);
    let back = scattered(coverage);
    let uncorrected = back.map(|b| (1.0 + 2.0 * b) / total);
    let root = coverage.map(f64::sqrt);
    let uniform = total / (1.0 + 2.0 * (total - 1.0) * coverage.around());
    // What comes from beyond the frame, then the matrix for what stands within.
    let outside = scattered(&coverage.within(|_| 0.0, coverage.around() * uniform));
    let apply = |e: &Density| {
        let back = scattered(&root.zip(e, |r, e| r * e).within(|v| v, 0.0));
        e.zip(&root.zip(&back, |r, b| r * b), |e, b| 0.5 * e + b)
    };
    let mut e = root.zip(&back, |r, b| r * total / (1.0 + 2.0 * b));
    let right = root.zip(&outside, |r, o| r * (0.5 * total - o));
    let mut rest = right.zip(&apply(&e), |r, a| r - a);
    let mut way = rest.clone();
    let mut square = rest.dot(&rest);
    let mut rounds = 0;
    while rounds < MOST_ROUNDS && rest.range().iter().any(|r| r.abs() > 0.25 * CLOSE * total) {
        let image = apply(&way);
        let step = square / way.dot(&image);
        e = e.zip(&way, |e, w| e + step * w);
        rest = rest.zip(&image, |r, i| r - step * i);
        let next = rest.dot(&rest);
        way = rest.zip(&way, |r, w| r + next / square * w);
        square = next;
        rounds += 1;
    }
    let written = root.zip(&e, |r, e| r * e);
    let back = scattered(&written.within(|v| v, coverage.around() * uniform));
    let dose = back.within(|b| total - 2.0 * b, uniform);
    let [least, _] = dose.range();
    if least.is_nan() || least <= 0.0 {
        return Err(CorrectionError::Negative { found: least });
    }
    let edge_level = level(&dose, &scattered(&coverage.zip(&dose, |c, d| c * d)));
    let residual = edge_level
        .range()
        .iter()
        .map(|l| (l - 1.0).abs())
        .fold(0.0, f64::max);
    Ok(Correction {
        dose,
        edge_level,
        uncorrected,
        residual,
        rounds,
    })
}

fn check(term: &Backscatter) -> Result<(), CorrectionError> {
    let Backscatter { ratio, radius } = *term;
    if (0.0..=3.0).contains(&ratio) && radius.0 > 0.0 && radius.0.is_finite() {
        Ok(())
    } else {
        Err(CorrectionError::Term { ratio, radius })
    }
}
