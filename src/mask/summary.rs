//! Counts and shares of a mask, for looking at it.

use super::Mask;

/// What a mask consists of; counts are over all places unless said otherwise.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Summary {
    /// Distinct figures.
    pub distinct: usize,
    /// Figures.
    pub placed: u128,
    /// Vertices of all rings.
    pub vertices: u128,
    /// Holes.
    pub holes: u128,
    /// Most vertices of one figure.
    pub most_vertices: usize,
    /// Share of figures with an edge that is not axis-parallel; `None` for an empty mask.
    pub curved_share: Option<f64>,
    /// Share of outline length that belongs to such figures; `None` for an empty mask.
    pub curved_outline_share: Option<f64>,
    /// Length of all outlines, nm.
    pub outline_nm: f64,
    /// Area, nm².
    pub area_nm2: f64,
}

impl Mask {
    /// Counts and shares; cost in distinct figures, not places.
    #[must_use]
    pub fn summary(&self) -> Summary {
        let mut summary = Summary {
            distinct: self.figures.len(),
            ..Summary::default()
        };
        let (mut curved, mut curved_nm) = (0_u128, 0.0);
        for distinct in &self.figures {
            let (figure, count) = (&distinct.figure, distinct.place_count());
            let times = real(count);
            summary.placed = summary.placed.saturating_add(count);
            summary.vertices = summary
                .vertices
                .saturating_add(count.saturating_mul(figure.vertices() as u128));
            summary.holes = summary
                .holes
                .saturating_add(count.saturating_mul(figure.holes().len() as u128));
            summary.most_vertices = summary.most_vertices.max(figure.vertices());
            summary.outline_nm += figure.outline_nm() * times;
            summary.area_nm2 += figure.area_nm2() * times;
            if !figure.is_rectilinear() {
                curved = curved.saturating_add(count);
                curved_nm += figure.outline_nm() * times;
            }
        }
        if summary.placed > 0 {
            summary.curved_share = Some(real(curved) / real(summary.placed));
            summary.curved_outline_share = Some(curved_nm / summary.outline_nm);
        }
        summary
    }
}

/// A count as a float.
pub(super) fn real(count: u128) -> f64 {
    #[allow(
        clippy::cast_precision_loss,
        reason = "a count beyond 2^53 is good to 16 digits"
    )]
    let real = count as f64;
    real
}
