//! Layouts of a quote, each with what is taken of it, its mask and the share of the field it stands for.

use crate::blur::REACH;
use crate::geom::Rect;
use crate::layout::{Layer, Layout};
use crate::mask::{self, Expose, Mask, MaskError, MaskOptions};
use crate::units::Nm;
use crate::write_time::Field;

use super::Setup;
use super::result::{self, Source};

/// Which part of which layout.
#[derive(Clone, Copy, Debug)]
pub struct Chosen<'a> {
    /// File name as given.
    pub name: &'a str,
    /// What it holds.
    pub layout: &'a Layout,
    /// What of it is taken, and how it goes onto the mask; reach and address unit are those of the setup instead.
    pub options: &'a MaskOptions,
}

impl Chosen<'_> {
    /// The mask, with contexts as far as the blur reaches.
    ///
    /// # Errors
    /// As [`mask::build`].
    pub fn mask(&self, setup: &Setup) -> Result<Mask, MaskError> {
        let mask = mask::build(
            self.layout,
            &MaskOptions {
                reach: setup.blur.sigma() * REACH,
                address: setup.limits.address,
                ..self.options.clone()
            },
        )?;
        mask.check_size()?;
        Ok(mask)
    }

    pub(super) fn source(&self, mask: &Mask, coverage: Option<f64>) -> Source {
        let name = |layer: &Layer| format!("{}/{}", layer.layer, layer.datatype);
        let options = self.options;
        let layers = if options.layers.is_empty() {
            let present = mask::layer_counts(self.layout).0;
            let present = present.iter().map(|(layer, _)| layer);
            let taken = present.filter(|layer| !options.minus.contains(layer));
            taken.map(name).collect()
        } else {
            options.layers.iter().map(name).collect()
        };
        let corners = |rect: Rect| {
            let ([x0, y0], [x1, y1]) = (rect.min.to_nm(), rect.max.to_nm());
            [x0, y0, x1, y1]
        };
        Source {
            name: self.name.to_owned(),
            layers,
            minus: options.minus.iter().map(name).collect(),
            scale: options.scale,
            mirror: options.mirror,
            shift_nm: options.shift.to_nm(),
            bias_nm: options.bias.0,
            background_of_nm: match options.expose {
                Expose::Figures => None,
                Expose::Background { frame } => Some(corners(frame)),
            },
            window_nm: options.window.map(corners),
            extent_nm: mask
                .extent
                .map(|extent| [extent.width(), extent.height()].map(|side| Nm::from_pm(side).0)),
            coverage,
            figures_distinct: mask.figures.len() as u64,
            figures_placed: result::Count(mask.place_count()),
        }
    }
}

/// A layout of a quote with its mask.
#[derive(Clone, Copy, Debug)]
pub struct Clip<'a> {
    /// What was taken of which layout.
    pub chosen: Chosen<'a>,
    /// Its mask.
    pub mask: &'a Mask,
    /// The share of the field that copies of it fill, over 0, up to 1; `None` if it stands for itself.
    pub coverage: Option<f64>,
}

impl Clip<'_> {
    /// How many copies of it a field holds, fractions too; 1 without a field.
    pub(super) fn copies_exactly(&self, field: Option<Field>) -> f64 {
        let own = self.mask.extent.map_or(0.0, Rect::area_nm2);
        let (Some(field), Some(coverage)) = (field, self.coverage) else {
            return 1.0;
        };
        coverage * (field.width.0 * field.height.0) / own.max(1.0)
    }

    /// How many copies of it a field holds, at least one.
    pub(super) fn copies(&self, field: Option<Field>) -> u64 {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates"
        )]
        let copies = self.copies_exactly(field).round() as u64;
        copies.max(1)
    }
}
