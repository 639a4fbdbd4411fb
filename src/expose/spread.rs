//! A map convolved with a symmetric kernel along rows, then along columns.
//!
//! Short kernels are summed directly; long ones go through a Fourier transform (`rustfft`, scalar, so the same bits on every
//! machine), two lines at a time as real and imaginary part. The value around the map is taken off first and put back after, so
//! zeros pad it. Lines are handed to threads whole: the result does not depend on their number.

use rayon::prelude::*;
use rustfft::num_complex::Complex;
use rustfft::{Fft, FftPlanner};
use std::sync::Arc;

use crate::blur;

use super::density::Density;

/// Kernels that reach over so many cells or fewer are summed directly: about where both ways take equally long.
const DIRECT: usize = 48;

/// Weights of the cells at distance 0, 1, 2 … of a Gaussian of `sigma` cells: its integral over each, up to 6 σ.
pub(super) fn gaussian(sigma: f64) -> Vec<f64> {
    let reach = super::dose::count(6.0 * sigma) + 1;
    #[allow(clippy::cast_precision_loss, reason = "a kernel is short")]
    let weight =
        |k: usize| blur::cdf((k as f64 + 0.5) / sigma) - blur::cdf((k as f64 - 0.5) / sigma);
    (0..=reach).map(weight).collect()
}

/// Convolved with a symmetric kernel (weights at distance 0, 1, 2 … cells, 1 in all), rows then columns.
pub(super) fn separably(map: &Density, kernel: &[f64]) -> Density {
    let mut cells: Vec<f64> = map.cells.iter().map(|c| c - map.around).collect();
    lines(&mut cells, map.columns, kernel);
    let mut turned = transposed(&cells, map.columns, map.rows);
    lines(&mut turned, map.rows, kernel);
    cells = transposed(&turned, map.rows, map.columns);
    cells.par_iter_mut().for_each(|c| *c += map.around);
    Density {
        cells,
        ..map.bare()
    }
}

/// Each line of `length` cells convolved, with zeros beyond its ends.
fn lines(cells: &mut [f64], length: usize, kernel: &[f64]) {
    // What lies further than a line is long touches nothing.
    let kernel = &kernel[..kernel.len().min(length)];
    if kernel.len() <= DIRECT {
        cells
            .par_chunks_mut(length)
            .for_each_init(Vec::new, |copy, line| {
                copy.clear();
                copy.extend_from_slice(line);
                directly(copy, kernel, line);
            });
        return;
    }
    let transform = Transform::new(length, kernel);
    cells
        .par_chunks_mut(2 * length)
        .for_each_init(Vec::new, |buffer, pair| {
            transform.apply(pair, length, buffer)
        });
}

fn directly(line: &[f64], kernel: &[f64], out: &mut [f64]) {
    let n = line.len();
    for (value, at) in out.iter_mut().zip(line) {
        *value = kernel[0] * at;
    }
    for (k, weight) in kernel.iter().enumerate().skip(1) {
        for (value, right) in out[..n - k].iter_mut().zip(&line[k..]) {
            *value += weight * right;
        }
        for (value, left) in out[k..].iter_mut().zip(&line[..n - k]) {
            *value += weight * left;
        }
    }
}

/// A convolution by transform: there, times the kernel's own transform, and back.
struct Transform {
    forward: Arc<dyn Fft<f64>>,
    inverse: Arc<dyn Fft<f64>>,
    /// Real, as the kernel is symmetric; divided by the length, which the transforms leave in.
    factor: Vec<f64>,
}

impl Transform {
    fn new(length: usize, kernel: &[f64]) -> Self {
        let padded = smooth(length + kernel.len());
        let mut planner = FftPlanner::new();
        let (forward, inverse) = (
            planner.plan_fft_forward(padded),
            planner.plan_fft_inverse(padded),
        );
        let mut wrapped = vec![Complex::new(0.0, 0.0); padded];
        for (k, weight) in kernel.iter().enumerate() {
            wrapped[k].re = *weight;
            wrapped[(padded - k) % padded].re = *weight;
        }
        forward.process(&mut wrapped);
        #[allow(
            clippy::cast_precision_loss,
            reason = "a length of memory is below 2^53"
        )]
        let scale = 1.0 / padded as f64;
        Self {
            forward,
            inverse,
            factor: wrapped.iter().map(|c| c.re * scale).collect(),
        }
    }

    /// One or two lines in place.
    fn apply(&self, lines: &mut [f64], length: usize, buffer: &mut Vec<Complex<f64>>) {
        let (first, second) = lines.split_at_mut(length);
        buffer.clear();
        buffer.resize(self.factor.len(), Complex::new(0.0, 0.0));
        for (to, from) in buffer.iter_mut().zip(&*first) {
            to.re = *from;
        }
        for (to, from) in buffer.iter_mut().zip(&*second) {
            to.im = *from;
        }
        self.forward.process(buffer);
        for (value, factor) in buffer.iter_mut().zip(&self.factor) {
            *value *= factor;
        }
        self.inverse.process(buffer);
        for (to, from) in first.iter_mut().zip(&*buffer) {
            *to = from.re;
        }
        for (to, from) in second.iter_mut().zip(&*buffer) {
            *to = from.im;
        }
    }
}

/// The least product of 2, 3 and 5 that is at least `n`: lengths that transform fast.
fn smooth(n: usize) -> usize {
    let is_smooth = |mut m: usize| {
        for p in [2, 3, 5] {
            while m.is_multiple_of(p) {
                m /= p;
            }
        }
        m == 1
    };
    (n.max(1)..).find(|m| is_smooth(*m)).unwrap_or(n)
}

/// Rows become columns.
fn transposed(cells: &[f64], columns: usize, rows: usize) -> Vec<f64> {
    let mut out = vec![0.0; cells.len()];
    out.par_chunks_mut(rows).enumerate().for_each(|(i, line)| {
        for (value, from) in line.iter_mut().zip(cells.iter().skip(i).step_by(columns)) {
            *value = *from;
        }
    });
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Both ways against the plain double sum.
    #[test]
    fn sums_and_transforms_agree() {
        #[allow(clippy::cast_precision_loss, reason = "small")]
        let line: Vec<f64> = (0..301)
            .map(|k| ((k * k * 37) % 101) as f64 / 101.0)
            .collect();
        for sigma in [0.3, 2.0, 9.5, 31.0, 400.0] {
            let kernel = gaussian(sigma);
            let expected: Vec<f64> = (0..line.len())
                .map(|i| {
                    let weight = |j: usize| kernel.get(i.abs_diff(j)).unwrap_or(&0.0);
                    (0..line.len()).map(|j| weight(j) * line[j]).sum()
                })
                .collect();
            let mut direct = vec![0.0; line.len()];
            directly(&line, &kernel[..kernel.len().min(line.len())], &mut direct);
            // Two different lines at once: neither must leak into the other.
            let mut pair = line.clone();
            pair.extend(line.iter().rev());
            let short = &kernel[..kernel.len().min(line.len())];
            Transform::new(line.len(), short).apply(&mut pair, line.len(), &mut Vec::new());
            for (k, expected) in expected.iter().enumerate() {
                assert!(
                    (direct[k] - expected).abs() < 1e-13,
                    "sigma {sigma}, cell {k}"
                );
                assert!(
                    (pair[k] - expected).abs() < 1e-13,
                    "sigma {sigma}, cell {k}"
                );
                let mirrored = pair[2 * line.len() - 1 - k];
                assert!(
                    (mirrored - expected).abs() < 1e-13,
                    "sigma {sigma}, cell {k}"
                );
            }
        }
    }

    #[test]
    fn lengths_are_products_of_2_3_and_5() {
        assert_eq!([1, 7, 121, 1025].map(smooth), [1, 8, 125, 1080]);
    }
}
