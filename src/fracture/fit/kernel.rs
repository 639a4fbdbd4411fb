//! The dose of one shot at many places at once.
//!
//! Lengths are in σ and single precision: plain loops that the compiler turns into vector code, with the widest
//! instructions of the machine chosen at run time. Every element is computed by the same operations in the same order whatever the
//! width, so results do not depend on the machine.

use pulp::{Simd, WithSimd};

/// Coefficients of Abramowitz & Stegun 7.1.28: `erf z = 1 − (1 + a1·z + … + a6·z⁶)⁻¹⁶`, error at most 3e-7.
const A: [f32; 6] = [
    0.070_523_08,
    0.042_282_01,
    0.009_270_527,
    0.000_152_014_3,
    0.000_276_567_2,
    0.000_043_063_8,
];

/// Φ by [`A`]; within 1e-6 in single precision.
#[inline(always)]
fn cdf(u: f32) -> f32 {
    let z = u.abs() * std::f32::consts::FRAC_1_SQRT_2;
    let t = 1.0 + z * (A[0] + z * (A[1] + z * (A[2] + z * (A[3] + z * (A[4] + z * A[5])))));
    let t2 = t * t;
    let t4 = t2 * t2;
    let t8 = t4 * t4;
    let tail = 0.5 / (t8 * t8);
    if u < 0.0 { tail } else { 1.0 - tail }
}

/// Φ and its derivative, from the same formula.
#[inline(always)]
fn both(u: f32) -> (f32, f32) {
    let z = u.abs() * std::f32::consts::FRAC_1_SQRT_2;
    let t = 1.0 + z * (A[0] + z * (A[1] + z * (A[2] + z * (A[3] + z * (A[4] + z * A[5])))));
    let slope = A[0]
        + z * (2.0 * A[1]
            + z * (3.0 * A[2] + z * (4.0 * A[3] + z * (5.0 * A[4] + z * 6.0 * A[5]))));
    let t2 = t * t;
    let t4 = t2 * t2;
    let t8 = t4 * t4;
    let tail = 0.5 / (t8 * t8);
    let density = 16.0 * std::f32::consts::FRAC_1_SQRT_2 * tail * slope / t;
    (if u < 0.0 { tail } else { 1.0 - tail }, density)
}

/// Adds `dose` times the shot `[x0, y0, x1, y1]` at every place.
pub(super) struct AddDose<'a> {
    pub(super) x: &'a [f32],
    pub(super) y: &'a [f32],
    pub(super) side: [f32; 4],
    pub(super) dose: f32,
    pub(super) out: &'a mut [f32],
}

impl WithSimd for AddDose<'_> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        let Self {
            x,
            y,
            side,
            dose,
            out,
        } = self;
        let n = out.len();
        let (x, y) = (&x[..n], &y[..n]);
        for i in 0..n {
            let gx = cdf(x[i] - side[0]) - cdf(x[i] - side[2]);
            let gy = cdf(y[i] - side[1]) - cdf(y[i] - side[3]);
            out[i] += dose * gx * gy;
        }
    }
}

/// Derivatives of the dose by the four sides (per σ) at every place, times `factor[i]`; one array for each side.
pub(super) struct Slopes<'a> {
    pub(super) x: &'a [f32],
    pub(super) y: &'a [f32],
    pub(super) factor: &'a [f32],
    pub(super) side: [f32; 4],
    pub(super) dose: f32,
    pub(super) out: [&'a mut [f32]; 4],
}

impl WithSimd for Slopes<'_> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        let Self {
            x,
            y,
            factor,
            side,
            dose,
            out: [left, low, right, high],
        } = self;
        let n = left.len();
        let (x, y, factor) = (&x[..n], &y[..n], &factor[..n]);
        let (low, right, high) = (&mut low[..n], &mut right[..n], &mut high[..n]);
        for i in 0..n {
            let (a0, p0) = both(x[i] - side[0]);
            let (a1, p1) = both(x[i] - side[2]);
            let (b0, q0) = both(y[i] - side[1]);
            let (b1, q1) = both(y[i] - side[3]);
            let scale = dose * factor[i];
            let (gx, gy) = ((a0 - a1) * scale, (b0 - b1) * scale);
            left[i] = -p0 * gy;
            low[i] = -q0 * gx;
            right[i] = p1 * gy;
            high[i] = q1 * gx;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::blur;

    #[test]
    fn single_precision_is_within_its_stated_bound() {
        let (mut worst, mut worst_slope) = (0.0_f64, 0.0_f64);
        for i in -8000..=8000_i16 {
            let u = f32::from(i) * 1e-3;
            let (value, slope) = both(u);
            assert_eq!(value.to_bits(), cdf(u).to_bits());
            worst = worst.max((f64::from(value) - blur::cdf(f64::from(u))).abs());
            worst_slope = worst_slope.max((f64::from(slope) - blur::density(f64::from(u))).abs());
        }
        assert!(worst < 1e-6, "Φ off by {worst:e}");
        assert!(worst_slope < 2e-5, "φ off by {worst_slope:e}");
    }
}
