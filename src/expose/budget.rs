//! How far the contour scatters when shots err: first order, in closed form.

use crate::blur::PhiTable;
use crate::target::{EdgeSd, ShotErrors};
use crate::units::{BaseDose, Nm};

use super::dose::Exposure;

/// Standard deviation of a wide edge from the number of electrons alone: `1/(2·√n)` nm with n electrons/nm².
///
/// A place at the edge sums electrons weighted by the blur g: variance `½·∫g²/n = 1/(8π·n·σ²)`; divided by the squared slope
/// `1/(2π·σ²)` the blur drops out. Each electron spreads over the whole blur.
#[must_use]
pub fn shot_noise(base_dose: BaseDose) -> Nm {
    Nm(0.5 / base_dose.electrons_per_nm2().sqrt())
}

/// `sd² = Σ_shots [s_e²·Σ_4 edges (∂F/∂edge)² + s_d²·F_shot²] / |∇F|²`, and the shot noise `Σ_shots ∫_shot g²·d/n / |∇F|²`.
///
/// The square of a Gaussian is one of σ/√2 with the weight `1/(4πσ²)`, so the noise needs no quadrature. From the table
/// of Φ: within 1e-6 of itself. `None` without a slope.
pub(super) fn edge_sd(exposure: &Exposure, p: [f64; 2], errors: &ShotErrors) -> Option<EdgeSd> {
    let (table, sigma) = (PhiTable::get(), exposure.blur().sigma().0);
    let (inverse, narrow) = (1.0 / sigma, std::f64::consts::SQRT_2 / sigma);
    let (mut by_edge, mut by_dose, mut by_noise) = (0.0, 0.0, 0.0);
    let (mut gx, mut gy) = (0.0, 0.0);
    for f in exposure.reaching(p) {
        let sides = |at: f64, span: [f64; 2]| span.map(|side| table.both((at - side) * inverse));
        let ([(a, da), (b, db)], [(c, dc), (d, dd)]) = (sides(p[0], f.x), sides(p[1], f.y));
        let (sx, sy) = (a - b, c - d);
        gx += f.dose * (da - db) * sy;
        gy += f.dose * sx * (dc - dd);
        by_edge += f.dose.powi(2) * ((da * da + db * db) * sy * sy + (dc * dc + dd * dd) * sx * sx);
        by_dose += (f.dose * sx * sy).powi(2);
        let share = |at: f64, span: [f64; 2]| {
            table.cdf((at - span[0]) * narrow) - table.cdf((at - span[1]) * narrow)
        };
        by_noise += f.dose * share(p[0], f.x) * share(p[1], f.y);
    }
    // Densities are per σ so far.
    let slope = gx.hypot(gy) * inverse;
    let noise = errors.base_dose.map_or(0.0, |q| {
        by_noise / (4.0 * std::f64::consts::PI * sigma * sigma * q.electrons_per_nm2())
    });
    (slope > 0.0).then(|| EdgeSd {
        edge: Nm(errors.edge.0 * by_edge.sqrt() * inverse / slope),
        dose: Nm(errors.dose * by_dose.sqrt() / slope),
        noise: Nm(noise.sqrt() / slope),
    })
}
