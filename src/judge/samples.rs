//! The outline sampled by length: at each place the way to the contour.

use crate::target::{EdgeSd, Printed, Target};
use crate::units::Nm;

use super::{CHANGES, Settings};

/// One place of the drawn outline.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EdgeSample {
    /// Where, nm.
    pub place: [f64; 2],
    /// Unit vector along which the contour was looked for: the outward normal, or down the dose where that way is shorter.
    pub outward: [f64; 2],
    /// Length of outline that it stands for, pm.
    pub length_pm: u64,
    /// Within 2 σ of a drawn corner.
    pub corner: bool,
    /// Distance to the contour, + is outward; `None` where there is none within 4 σ.
    pub error: Option<Nm>,
    /// The same for the contour at each of [`CHANGES`], along the same way from the contour as written; all `None` without that.
    pub through_dose: [Option<Nm>; CHANGES.len()],
    /// Movement of the contour for 1 % of dose; `None` where there is no contour or no slope.
    pub margin: Option<Nm>,
    /// Scatter of the contour under the writer errors of the settings.
    pub sd: Option<EdgeSd>,
}

/// Samples along all edges in order: the middles of equal pieces of each edge, at most σ/4 long.
///
/// The way is the outward normal. Beside a corner, or on a jog shorter than the blur, the normal runs along the rounded
/// contour and meets it far off, where the dose falls another way and the contour is near. So in a corner zone, and where
/// the normal finds the contour out of tolerance, the way down the dose is tried too and the shorter one counts.
///
/// Margin (per 1 % of dose) = `0.01·½·(1 + η)/(D·|∇F|)` at the contour, F the forward dose at dose 1, D the dose and η the ratio of the
/// background.
pub fn edge_samples<'a>(
    target: &'a Target,
    print: &'a impl Printed,
    settings: &'a Settings,
) -> impl Iterator<Item = EdgeSample> + 'a {
    let sigma = settings.blur.sigma().0;
    let range = (4.0 * sigma).max(2.0 * target.corner_tolerance());
    let flattened = settings.background.flattening();
    target
        .edges()
        .iter()
        .filter(|e| e.length() > 0.0)
        .flat_map(move |edge| {
            let (length, normal) = (edge.length(), edge.outward());
            let pieces = (length / (0.25 * sigma)).ceil().max(1.0);
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "an edge is at most 4.5e12 nm long"
            )]
            let (count, length_pm) = (
                pieces as u64,
                (length / pieces * 1e3).round().max(1.0) as u64,
            );
            (0..count).map(move |k| {
                #[allow(clippy::cast_precision_loss, reason = "far below 2^53")]
                let place = edge.at((k as f64 + 0.5) / pieces);
                let corner = target.in_corner_zone(place);
                let (outward, error) = way(place, normal, corner, target.tolerance(), range, print);
                let on_contour =
                    error.map(|e| [place[0] + e * outward[0], place[1] + e * outward[1]]);
                let slope = on_contour
                    .map(|p| print.gradient(p))
                    .map(|g| g[0].hypot(g[1]));
                EdgeSample {
                    place,
                    outward,
                    length_pm,
                    corner,
                    error: error.map(Nm),
                    through_dose: settings.levels().map(|level| {
                        let (p, e) = on_contour.zip(error)?;
                        Some(Nm(e + print.crossing_at(p, outward, range, level)?))
                    }),
                    margin: slope
                        .filter(|s| *s > 0.0)
                        .map(|s| Nm(0.005 * flattened / s)),
                    sd: on_contour
                        .zip(settings.errors)
                        .and_then(|(p, errors)| print.edge_sd(p, &errors)),
                }
            })
        })
}

/// The way to the contour and its length.
fn way(
    place: [f64; 2],
    normal: [f64; 2],
    corner: bool,
    tolerance: f64,
    range: f64,
    print: &impl Printed,
) -> ([f64; 2], Option<f64>) {
    let straight = print.crossing(place, normal, range);
    if straight.map_or(!corner, |e| e.abs() <= tolerance) {
        return (normal, straight);
    }
    let g = print.gradient(place);
    let slope = g[0].hypot(g[1]);
    let down = [-g[0] / slope, -g[1] / slope];
    // Into the figure, or nowhere if the dose is flat: no way out of it.
    let along = down[0] * normal[0] + down[1] * normal[1];
    if along.is_nan() || along <= 0.0 {
        return (normal, straight);
    }
    match print.crossing(place, down, range) {
        Some(e) if straight.is_none_or(|s| e.abs() < s.abs()) => (down, Some(e)),
        _ => (normal, straight),
    }
}
