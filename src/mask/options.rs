//! What to take from a layout, and how it goes onto the mask.

use crate::geom::{Point, Rect};
use crate::layout::Layer;
use crate::shot::AddressUnit;
use crate::units::Nm;

use super::MaskError;

/// What to take from a layout, and how it goes onto the mask.
///
/// In this order: layers united, others subtracted, scaled, mirrored, shifted, biased, figures or background exposed, cut to the window.
/// Frame and window are places on the mask, after scale, mirror and shift.
///
/// Repeated cells stay counted through all of it, but for two things: of what crosses the border of the window the elements there are taken
/// one by one, and an exposed background is one figure with everything in the frame, so all of that is.
#[derive(Clone, Debug)]
pub struct MaskOptions {
    /// Layers united; empty means the only one there is.
    pub layers: Vec<Layer>,
    /// Layers subtracted from those.
    pub minus: Vec<Layer>,
    /// Mask length per layout length (4 for wafer-scale data at 4:1).
    pub scale: f64,
    /// Mirrored about the y axis (`x → −x`), as a mask seen from its other side.
    pub mirror: bool,
    /// Moved by this, pm at mask scale.
    pub shift: Point,
    /// Every drawn edge moves outward from what is exposed by this (inward if negative).
    ///
    /// Corners are mitred, so rectilinear figures stay rectilinear; one sharper than 60° is cut off within twice the bias.
    pub bias: Nm,
    /// What is exposed.
    pub expose: Expose,
    /// Only what lies here, cut at the border; `None` for all.
    pub window: Option<Rect>,
    /// Refuses a polygon that needs repair instead of repairing it.
    pub strict: bool,
    /// Other figures nearer than this are context (5 σ).
    pub reach: Nm,
    /// Distinct figures are kept apart by their position within the address grid.
    pub address: AddressUnit,
}

/// What is exposed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Expose {
    /// What is drawn.
    Figures,
    /// Of the frame, what is not drawn.
    Background {
        /// The border of what is exposed, on the mask.
        frame: Rect,
    },
}

impl MaskOptions {
    /// The only layer as it is drawn, repaired where necessary, 1:1.
    #[must_use]
    pub fn new(reach: Nm, address: AddressUnit) -> Self {
        Self {
            layers: Vec::new(),
            minus: Vec::new(),
            scale: 1.0,
            mirror: false,
            shift: Point::default(),
            bias: Nm(0.0),
            expose: Expose::Figures,
            window: None,
            strict: false,
            reach,
            address,
        }
    }

    /// The reach, pm.
    pub(super) fn reach_pm(&self) -> Result<i64, MaskError> {
        let pm = self.reach.to_pm().filter(|pm| (0..=MOST_PM).contains(pm));
        pm.ok_or(MaskError::Reach { found: self.reach })
    }

    /// How far drawn edges move outward, pm.
    pub(super) fn growth_pm(&self) -> Result<i64, MaskError> {
        let pm = self.bias.to_pm().filter(|pm| pm.abs() <= MOST_PM);
        let pm = pm.ok_or(MaskError::Bias { found: self.bias })?;
        Ok(match self.expose {
            Expose::Figures => pm,
            Expose::Background { .. } => -pm,
        })
    }

    pub(super) fn check_rectangles(&self) -> Result<(), MaskError> {
        let frame = match self.expose {
            Expose::Figures => None,
            Expose::Background { frame } => Some(frame),
        };
        let empty = |r: &Rect| r.width() <= 0 || r.height() <= 0;
        for (what, rect) in [("frame", frame), ("window", self.window)] {
            if let Some(found) = rect.filter(empty) {
                return Err(MaskError::EmptyRectangle { what, found });
            }
        }
        Ok(())
    }
}

/// Greatest reach and bias, pm.
const MOST_PM: i64 = 1_000_000_000;
