//! The short-range Gaussian blur in closed form.
//!
//! One shot `[x0,x1]×[y0,y1]` of dose d gives `d·[Φ((x−x0)/σ) − Φ((x−x1)/σ)]·[Φ((y−y0)/σ) − Φ((y−y1)/σ)]`: exact,
//! since a Gaussian separates. Φ is the normal distribution function, φ its density.

use std::f64::consts::{FRAC_1_SQRT_2, PI};
use std::sync::LazyLock;

use crate::units::Nm;

/// Pull-back of a blurred right angle along its diagonal, in σ.
///
/// On the diagonal the dose is `Φ(a)²` with `a = t/√2` at the distance `t`, so `t = √2·Φ⁻¹(1/√2)`.
pub const CORNER_PULL_BACK: f64 = 0.770_679;

/// The narrowest line that prints, in σ: `2·Φ(w/2σ) − 1 = ½`.
pub const NARROWEST_LINE: f64 = 1.348_980;

/// The narrowest square that prints, in σ: `(2·Φ(w/2σ) − 1)² = ½`.
pub const NARROWEST_SQUARE: f64 = 2.103_590;

/// The level of the contour.
pub const THRESHOLD: f64 = 0.5;

/// The level of the forward dose at which the contour runs when all doses change by a share (+0.05 for +5 %).
///
/// With backscatter η·B under it a place prints where `(1 + change)·(D·F + η·B) = (1 + η)/2`; after correction `η·B = (1 + η − D)/2`,
/// so `F = ½ − ½·(1 + η)/D·change/(1 + change)`. `flattening` is `(1 + η)/D`, which is `1 + 2ηU` where the density U is uniform, and 1
/// without backscatter: then the level is `½/(1 + change)`.
#[must_use]
pub fn level_at(change: f64, flattening: f64) -> f64 {
    THRESHOLD * (1.0 - flattening * change / (1.0 + change))
}

/// Beyond this many σ a shot's edge has no influence: `Φ(−5) = 2.9e-7`.
pub const REACH: f64 = 5.0;

/// A σ that is not finite or not within 0.1 nm to 1 µm.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error("sigma is {found}, expected a number from 0.1 nm to 1000 nm")]
pub struct BlurError {
    /// What was asked for.
    pub found: Nm,
}

/// The short-range Gaussian, by its standard deviation.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Blur {
    sigma_nm: f64,
}

impl Blur {
    /// From σ (not the 1/e radius α = √2 σ, not the full width at half maximum 2.3548 σ).
    ///
    /// # Errors
    /// When σ is not from 0.1 nm to 1000 nm.
    pub fn new(sigma: Nm) -> Result<Self, BlurError> {
        if (0.1..=1000.0).contains(&sigma.0) {
            Ok(Self { sigma_nm: sigma.0 })
        } else {
            Err(BlurError { found: sigma })
        }
    }

    /// σ.
    #[must_use]
    pub fn sigma(self) -> Nm {
        Nm(self.sigma_nm)
    }

    /// Share of a flash over `[from, to]` (nm) that arrives at `at` (nm), in one direction.
    #[must_use]
    pub fn share(self, at: f64, from: f64, to: f64) -> f64 {
        cdf((at - from) / self.sigma_nm) - cdf((at - to) / self.sigma_nm)
    }

    /// Derivative of [`Blur::share`] by `at`, per nm.
    #[must_use]
    pub fn share_slope(self, at: f64, from: f64, to: f64) -> f64 {
        (density((at - from) / self.sigma_nm) - density((at - to) / self.sigma_nm)) / self.sigma_nm
    }
}

/// Φ(x), the normal distribution function; absolute error below 4e-16 (`libm::erfc`).
#[must_use]
pub fn cdf(x: f64) -> f64 {
    0.5 * libm::erfc(-x * FRAC_1_SQRT_2)
}

/// φ(x), the normal density.
#[must_use]
pub fn density(x: f64) -> f64 {
    (-0.5 * x * x).exp() / (2.0 * PI).sqrt()
}

const STEPS_PER_UNIT: f64 = 64.0;
const TABLE_REACH: f64 = 6.0;
const TABLE_LEN: usize = 769;

/// Φ and φ from a table of cubics: Φ within 2e-10, φ within 2e-7 (its own derivative, so that the two belong together).
///
/// Hermite cubics on steps of 1/64: the error of Φ is at most `h⁴/384·max|φ'''|` = 2e-10. Beyond ±6 it is 0 or 1 (error 1e-9).
#[derive(Clone, Copy, Debug)]
pub struct PhiTable {
    cubics: &'static [[f64; 4]],
}

impl PhiTable {
    /// The table, built at first use.
    #[must_use]
    pub fn get() -> Self {
        static CUBICS: LazyLock<Vec<[f64; 4]>> = LazyLock::new(|| {
            let h = 1.0 / STEPS_PER_UNIT;
            (0..TABLE_LEN)
                .map(|i| {
                    #[allow(clippy::cast_precision_loss, reason = "i < 769")]
                    let x = i as f64 * h - TABLE_REACH;
                    let (p0, p1, m0, m1) = (cdf(x), cdf(x + h), density(x) * h, density(x + h) * h);
                    [
                        p0,
                        m0,
                        3.0 * (p1 - p0) - 2.0 * m0 - m1,
                        2.0 * (p0 - p1) + m0 + m1,
                    ]
                })
                .collect()
        });
        Self { cubics: &CUBICS }
    }

    /// Φ(x) and φ(x).
    #[inline]
    #[must_use]
    pub fn both(self, x: f64) -> (f64, f64) {
        let at = (x + TABLE_REACH) * STEPS_PER_UNIT;
        if at <= 0.0 {
            return (0.0, 0.0);
        }
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "positive; a large value saturates"
        )]
        let i = at as usize;
        let Some(c) = self.cubics.get(i) else {
            return (1.0, 0.0);
        };
        #[allow(clippy::cast_precision_loss, reason = "i < 769")]
        let t = at - i as f64;
        let value = c[0] + t * (c[1] + t * (c[2] + t * c[3]));
        let slope = (c[1] + t * (2.0 * c[2] + t * 3.0 * c[3])) * STEPS_PER_UNIT;
        (value, slope)
    }

    /// Φ(x).
    #[inline]
    #[must_use]
    pub fn cdf(self, x: f64) -> f64 {
        let at = (x + TABLE_REACH) * STEPS_PER_UNIT;
        if at <= 0.0 {
            return 0.0;
        }
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "positive; a large value saturates"
        )]
        let i = at as usize;
        let Some(c) = self.cubics.get(i) else {
            return 1.0;
        };
        #[allow(clippy::cast_precision_loss, reason = "i < 769")]
        let t = at - i as f64;
        c[0] + t * (c[1] + t * (c[2] + t * c[3]))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// erf from Abramowitz & Stegun, table 7.1: Φ(√2·x) = (1 + erf x)/2.
    #[test]
    fn cdf_matches_the_published_error_function() {
        for (x, erf) in [
            (0.5, 0.520_499_877_8),
            (1.0, 0.842_700_792_9),
            (2.0, 0.995_322_265_0),
        ] {
            let found = 2.0 * cdf(x * std::f64::consts::SQRT_2) - 1.0;
            assert!(
                (found - erf).abs() < 1e-10,
                "erf({x}) = {found}, published {erf}"
            );
        }
    }

    #[test]
    fn table_is_within_its_stated_bound() {
        let table = PhiTable::get();
        let (mut worst, mut worst_slope) = (0.0_f64, 0.0_f64);
        for i in -70_000..=70_000 {
            let x = f64::from(i) * 1e-4 + 0.3e-4;
            let (value, slope) = table.both(x);
            worst = worst.max((value - cdf(x)).abs());
            worst_slope = worst_slope.max((slope - density(x)).abs());
            assert_eq!(value.to_bits(), table.cdf(x).to_bits());
        }
        assert!(
            worst < 1.2e-9 && worst_slope < 2e-7,
            "Φ off by {worst:e}, φ by {worst_slope:e}"
        );
    }

    /// The three constants satisfy their defining equations.
    #[test]
    fn constants_solve_their_equations() {
        assert!((cdf(CORNER_PULL_BACK * FRAC_1_SQRT_2).powi(2) - 0.5).abs() < 1e-6);
        assert!((2.0 * cdf(NARROWEST_LINE / 2.0) - 1.5).abs() < 1e-6);
        assert!(((2.0 * cdf(NARROWEST_SQUARE / 2.0) - 1.0).powi(2) - 0.5).abs() < 1e-6);
    }
}
