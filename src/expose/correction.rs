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

/// The fixed point of `D/2 + Σ η·B(D) = (1 + Ση)/2` in every cell, B being (coverage × D) spread.
///
/// Starts from the closed form with the spread coverage. Each round divides: `D ← (1 + Ση)/(1 + 2·Σ η·B/D)`, which is
/// exact where coverage is uniform and shrinks any error by `2ηU/(1 + 2ηU)` or better, where the plain iteration
/// diverges for 2ηU over 1. Ends at a residual of 1e-9 (well below any dose step) or after 200 rounds.
/// Beyond the frame stands its coverage at the uniform dose.
///
/// # Errors
/// A ratio outside 0 to 3 or a radius that is none.
pub fn correct(coverage: &Density, terms: &[Backscatter]) -> Result<Correction, CorrectionError> {
    terms.iter().try_for_each(check)?;
    let total = 1.0 + terms.iter().map(|t| t.ratio).sum::<f64>();
    let scattered = |dose: &Density| {
        let written = coverage.zip(dose, |c, d| c * d);
        let zero = coverage.map(|_| 0.0);
        terms.iter().fold(zero, |sum, t| {
            sum.zip(&written.spread(t.radius), |s, b| s + t.ratio * b)
        })
    };
    let level = |dose: &Density, back: &Density| dose.zip(back, |d, b| (d + 2.0 * b) / total);
    let plain = coverage.map(|_| 1.0);
    let back = scattered(&plain);
    let uncorrected = level(&plain, &back);
    let mut dose = back.map(|b| total / (1.0 + 2.0 * b));
    let mut rounds = 0;
    loop {
        let back = scattered(&dose);
        let edge_level = level(&dose, &back);
        let residual = edge_level
            .cells()
            .iter()
            .map(|l| (l - 1.0).abs())
            .fold(0.0, f64::max);
        if residual <= 1e-9 || rounds == 200 {
            return Ok(Correction {
                dose,
                edge_level,
                uncorrected,
                residual,
                rounds,
            });
        }
        dose = dose.zip(&back, |d, b| total / (1.0 + 2.0 * b / d));
        rounds += 1;
    }
}

fn check(term: &Backscatter) -> Result<(), CorrectionError> {
    let Backscatter { ratio, radius } = *term;
    if (0.0..=3.0).contains(&ratio) && radius.0 > 0.0 && radius.0.is_finite() {
        Ok(())
    } else {
        Err(CorrectionError::Term { ratio, radius })
    }
}
