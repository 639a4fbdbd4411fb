//! Student's t: how many standard errors an interval reaches.

use statrs::distribution::{ContinuousCDF, StudentsT};

/// Share of intervals that are to cover the exact answer.
pub const CONFIDENCE: f64 = 0.95;

/// Standard errors either side of an estimate that a 95 % interval reaches, for so many degrees of freedom (1 or more).
pub(super) fn reach(freedom: f64) -> f64 {
    // Beyond a million it is the normal distribution to 6 digits.
    let freedom = freedom.clamp(1.0, 1e6);
    StudentsT::new(0.0, 1.0, freedom)
        .map_or(f64::INFINITY, |t| t.inverse_cdf(0.5 + 0.5 * CONFIDENCE))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Two-sided 95 % points as scipy 1.17 gives them: `scipy.stats.t.ppf(0.975, n)`.
    #[test]
    fn the_points_of_the_table() {
        for (freedom, expected) in [
            (1.0, 12.706_204_736),
            (2.0, 4.302_652_73),
            (4.5, 2.658_912_347),
            (10.0, 2.228_138_852),
            (30.0, 2.042_272_456),
            (120.0, 1.979_930_405),
            (1e9, 1.959_963_985),
        ] {
            let found = reach(freedom);
            assert!(
                (found - expected).abs() < 2e-4 * expected,
                "{freedom}: {found}"
            );
        }
    }
}
