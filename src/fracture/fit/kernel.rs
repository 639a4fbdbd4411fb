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

/// Beyond this distance from an edge (σ/√2) Φ is 0 or 1 to single precision; farther ones are taken for this, so that no product
/// overflows.
const FAR: f32 = 8.0;

/// Places worked on at once. Lists of places are padded to a multiple of it.
pub(super) const LANES: usize = 16;

/// One value for each of a few places.
type Lanes = [f32; LANES];

/// `1 + a1·z + … + a6·z⁶` at a distance from an edge, σ.
#[inline(always)]
fn base(u: f32) -> f32 {
    let z = (u.abs() * std::f32::consts::FRAC_1_SQRT_2).min(FAR);
    1.0 + z * (A[0] + z * (A[1] + z * (A[2] + z * (A[3] + z * (A[4] + z * A[5])))))
}

/// The inverses of four numbers of at least 1 by a single division, which is what costs here.
///
/// A step of Newton's iteration takes the rounding of the products out again: the sixteenth power would show it.
#[inline(always)]
fn inverses(t: [f32; 4]) -> [f32; 4] {
    let (low, high) = (t[0] * t[1], t[2] * t[3]);
    let all = 1.0 / (low * high);
    let (rest, other) = (all * high, all * low);
    let about = [rest * t[1], rest * t[0], other * t[3], other * t[2]];
    std::array::from_fn(|i| about[i] + about[i] * (1.0 - t[i] * about[i]))
}

/// Φ from the inverse of [`base`]; within 1e-6 in single precision.
#[inline(always)]
fn cdf(u: f32, inverse: f32) -> f32 {
    let p2 = inverse * inverse;
    let p4 = p2 * p2;
    let p8 = p4 * p4;
    let tail = 0.5 * (p8 * p8);
    if u < 0.0 { tail } else { 1.0 - tail }
}

/// Φ and its derivative, from the same formula.
#[inline(always)]
fn both(u: f32, inverse: f32) -> (f32, f32) {
    let z = (u.abs() * std::f32::consts::FRAC_1_SQRT_2).min(FAR);
    let slope = A[0]
        + z * (2.0 * A[1]
            + z * (3.0 * A[2] + z * (4.0 * A[3] + z * (5.0 * A[4] + z * 6.0 * A[5]))));
    let p2 = inverse * inverse;
    let p4 = p2 * p2;
    let p8 = p4 * p4;
    let tail = 0.5 * (p8 * p8);
    let density = 16.0 * std::f32::consts::FRAC_1_SQRT_2 * tail * slope * inverse;
    (if u < 0.0 { tail } else { 1.0 - tail }, density)
}

/// Distances of a place from the four sides, and the inverse of [`base`] at each.
#[inline(always)]
fn distances(x: f32, y: f32, side: [f32; 4]) -> ([f32; 4], [f32; 4]) {
    let u = [x - side[0], y - side[1], x - side[2], y - side[3]];
    (u, inverses(u.map(base)))
}

/// Adds `dose` times the shot `[x0, y0, x1, y1]` at every place; all lists are a multiple of [`LANES`] long.
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
        let places = self.x.as_chunks().0.iter().zip(self.y.as_chunks().0);
        for (out, (x, y)) in self.out.as_chunks_mut().0.iter_mut().zip(places) {
            let (x, y, out): (&Lanes, &Lanes, &mut Lanes) = (x, y, out);
            for i in 0..LANES {
                let (u, q) = distances(x[i], y[i], self.side);
                let gx = cdf(u[0], q[0]) - cdf(u[2], q[2]);
                let gy = cdf(u[1], q[1]) - cdf(u[3], q[3]);
                out[i] += self.dose * gx * gy;
            }
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
        let [left, low, right, high] = self.out.map(|out| out.as_chunks_mut::<LANES>().0);
        let (x, y) = (self.x.as_chunks::<LANES>().0, self.y.as_chunks().0);
        let factor = self.factor.as_chunks::<LANES>().0;
        for (at, (x, (y, factor))) in x.iter().zip(y.iter().zip(factor)).enumerate() {
            let (left, low) = (&mut left[at], &mut low[at]);
            let (right, high) = (&mut right[at], &mut high[at]);
            let y: &Lanes = y;
            for i in 0..LANES {
                let (u, q) = distances(x[i], y[i], self.side);
                let (a0, p0) = both(u[0], q[0]);
                let (b0, q0) = both(u[1], q[1]);
                let (a1, p1) = both(u[2], q[2]);
                let (b1, q1) = both(u[3], q[3]);
                let scale = self.dose * factor[i];
                let (gx, gy) = ((a0 - a1) * scale, (b0 - b1) * scale);
                left[i] = -p0 * gy;
                low[i] = -q0 * gx;
                right[i] = p1 * gy;
                high[i] = q1 * gx;
            }
        }
    }
}

/// Sum of the squares of what each place lacks of `aim` beyond the threshold, on the side that its sign asks for.
pub(super) struct Missed<'a> {
    pub(super) value: &'a [f32],
    pub(super) sign: &'a [f32],
    pub(super) aim: f32,
}

impl WithSimd for Missed<'_> {
    type Output = f64;

    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) -> f64 {
        let mut sums: Lanes = [0.0; LANES];
        for (value, sign) in self.value.as_chunks().0.iter().zip(self.sign.as_chunks().0) {
            let (value, sign): (&Lanes, &Lanes) = (value, sign);
            for i in 0..LANES {
                let r = (self.aim - sign[i] * (value[i] - 0.5)).max(0.0);
                sums[i] += r * r;
            }
        }
        sums.iter().map(|&s| f64::from(s)).sum()
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
            let [inverse, ..] = inverses([base(u), base(-u), base(u + 7.0), base(u - 7.0)]);
            let (value, slope) = both(u, inverse);
            assert_eq!(value.to_bits(), cdf(u, inverse).to_bits());
            worst = worst.max((f64::from(value) - blur::cdf(f64::from(u))).abs());
            worst_slope = worst_slope.max((f64::from(slope) - blur::density(f64::from(u))).abs());
        }
        assert!(worst < 1e-6, "Φ off by {worst:e}");
        assert!(worst_slope < 2e-5, "φ off by {worst_slope:e}");
    }
}
