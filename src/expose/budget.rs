//! How far the contour scatters when shots err: first order, in closed form.

use crate::blur::{self, Blur};
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
/// The square of a Gaussian is one of σ/√2 with the weight `1/(4πσ²)`, so the noise needs no quadrature. `None` without a slope.
pub(super) fn edge_sd(exposure: &Exposure, p: [f64; 2], errors: &ShotErrors) -> Option<EdgeSd> {
    let (blur, sigma) = (exposure.blur(), exposure.blur().sigma().0);
    let narrow = Blur::new(Nm(sigma * std::f64::consts::FRAC_1_SQRT_2)).ok();
    let (mut by_edge, mut by_dose, mut by_noise) = (0.0, 0.0, 0.0);
    for f in exposure.reaching(p) {
        let (sx, sy) = (
            blur.share(p[0], f.x[0], f.x[1]),
            blur.share(p[1], f.y[0], f.y[1]),
        );
        let ends = |at: f64, span: [f64; 2]| -> f64 {
            span.iter()
                .map(|side| (blur::density((at - side) / sigma) / sigma).powi(2))
                .sum()
        };
        by_edge += f.dose.powi(2) * (ends(p[0], f.x) * sy * sy + ends(p[1], f.y) * sx * sx);
        by_dose += (f.dose * sx * sy).powi(2);
        if let Some(b) = narrow {
            by_noise += f.dose * b.share(p[0], f.x[0], f.x[1]) * b.share(p[1], f.y[0], f.y[1]);
        }
    }
    let (_, [gx, gy]) = exposure.dose_and_gradient(p);
    let slope = gx.hypot(gy);
    let noise = errors.base_dose.map_or(0.0, |q| {
        by_noise / (4.0 * std::f64::consts::PI * sigma * sigma * q.electrons_per_nm2())
    });
    (slope > 0.0).then(|| EdgeSd {
        edge: Nm(errors.edge.0 * by_edge.sqrt() / slope),
        dose: Nm(errors.dose * by_dose.sqrt() / slope),
        noise: Nm(noise.sqrt() / slope),
    })
}
