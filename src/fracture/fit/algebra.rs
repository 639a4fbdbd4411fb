//! The normal equations of a step: assembled from the violated inequalities, and solved.

use pulp::{Simd, WithSimd};

/// Slopes of an inequality by the four sides of one shot, whose first side is the unknown of this number.
pub(super) type Entry = (u32, [f64; 4]);

/// Adds the violated rows to the normal equations: the upper triangle of `AᵀA` by rows, and `Aᵀr`.
pub(super) struct Assemble<'a> {
    /// Numbers of the rows violated, ascending; what is beyond the rows is left to others.
    pub(super) active: &'a [u32],
    pub(super) r0: &'a [f64],
    /// Where the entries of each row start.
    pub(super) starts: &'a [usize],
    pub(super) entries: &'a [Entry],
    pub(super) normal: &'a mut [f64],
    pub(super) gradient: &'a mut [f64],
}

impl WithSimd for Assemble<'_> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        let n = self.gradient.len();
        for &active in self.active {
            let row = active as usize;
            let Some(&r0) = self.r0.get(row) else { break };
            let entries = &self.entries[self.starts[row]..self.starts[row + 1]];
            for (at, (k, a)) in entries.iter().enumerate() {
                let k = *k as usize;
                for (i, slope) in a.iter().enumerate() {
                    self.gradient[k + i] += slope * r0;
                    let line = &mut self.normal[(k + i) * n..(k + i + 1) * n];
                    for (j, b) in &entries[at..] {
                        let cells = &mut line[*j as usize..*j as usize + 4];
                        for (cell, b) in cells.iter_mut().zip(b) {
                            *cell += slope * b;
                        }
                    }
                }
            }
        }
    }
}

/// Solves `A·x = b` for a symmetric positive definite `A` given by its upper triangle, row by row; `b` becomes `x`.
///
/// Row after row is taken out of all that follow, so that nothing waits for a sum.
pub(super) struct Cholesky<'a> {
    pub(super) a: &'a mut [f64],
    pub(super) b: &'a mut [f64],
}

impl WithSimd for Cholesky<'_> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, _: S) {
        let Self { a, b } = self;
        let n = b.len();
        for k in 0..n {
            let (done, rest) = a.split_at_mut((k + 1) * n);
            let pivot = &mut done[k * n..];
            let inverse = 1.0 / pivot[k].max(1e-30).sqrt();
            for cell in &mut pivot[k..] {
                *cell *= inverse;
            }
            b[k] *= inverse;
            let out = b[k];
            for (i, line) in (k + 1..n).zip(rest.chunks_exact_mut(n)) {
                let factor = pivot[i];
                // Shots far from one another share no inequality.
                if factor == 0.0 {
                    continue;
                }
                b[i] -= factor * out;
                for (cell, p) in line[i..].iter_mut().zip(&pivot[i..]) {
                    *cell -= factor * p;
                }
            }
        }
        for i in (0..n).rev() {
            let line = &a[i * n..(i + 1) * n];
            let known: f64 = line[i + 1..]
                .iter()
                .zip(&b[i + 1..])
                .map(|(p, x)| p * x)
                .sum();
            b[i] = (b[i] - known) / line[i];
        }
    }
}

#[cfg(test)]
mod tests {
    use pulp::Arch;

    use super::*;

    #[test]
    fn cholesky_solves_a_small_system() {
        // [[4,2],[2,3]]·[1,2] = [8,8], by hand.
        let (mut a, mut b) = ([4.0, 2.0, 0.0, 3.0], [8.0, 8.0]);
        Arch::new().dispatch(Cholesky {
            a: &mut a,
            b: &mut b,
        });
        assert!((b[0] - 1.0).abs() < 1e-12 && (b[1] - 2.0).abs() < 1e-12);
    }
}
