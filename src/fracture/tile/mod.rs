//! Tile fracture: rectangles that do not overlap.
//!
//! [`partition()`] cuts a rectilinear figure exactly; [`staircase()`] makes a curved one rectilinear by geometry alone; `curved` fits
//! slabs to what prints. [`Tile`] and [`Staircase`] are the fracturers.

mod assemble;
mod curved;
mod cuts;
mod group;
mod intervals;
mod matching;
mod outline;
mod partition;
mod pixels;
mod slivers;
mod snap;
mod staircase;
mod sweep;

pub use cuts::cut_to_greatest_side;
pub use partition::{Partition, PartitionError, Prefer, partition};
pub use pixels::is_pixel_curve;
pub use slivers::GROUP;
pub use snap::{Snapped, snap};
pub use staircase::{StaircaseError, StaircaseFracture, fracture_staircase, staircase};

use super::fit::{Budget, Doses, Setting};
use super::{Effort, Fracture, FractureError, Fracturer, Job, oriented, refitted};
use crate::geom::Rect;
use crate::shot::{AddressUnit, Shot, ShotList};
use crate::units::{Dose, Nm};

/// The tile fracture: an exact partition for rectilinear figures, fitted slabs for curved ones.
#[derive(Clone, Copy, Debug, Default)]
pub struct Tile {
    /// How hard to search.
    pub effort: Effort,
    /// Cut every rectilinear figure exactly, even one that is a curve in pixels.
    pub exact: bool,
    /// What an exact partition may pay to be rid of slivers.
    pub prefer: Prefer,
}

impl Fracturer for Tile {
    fn name(&self) -> &'static str {
        "tile"
    }

    fn fracture(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        oriented(job, |job| self.either(job))
    }

    fn refit(&self, job: &Job<'_>, found: &Fracture) -> Option<Fracture> {
        let moved = refitted(job, &found.shots, |job, shots| {
            Setting::of_shots(job, Doses::default(), shots).refit(shots, true, Budget::TILES)
        })?;
        Some(Fracture {
            lower_bound: found.lower_bound,
            notes: found.notes.clone(),
            ..moved
        })
    }
}

impl Tile {
    fn either(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        let rectilinear = job.figure.is_rectilinear();
        let pixels = rectilinear && is_pixel_curve(job.figure, job.blur.sigma());
        if rectilinear && (self.exact || !pixels) {
            return self.cut(job);
        }
        let mut fracture = curved::fracture(job, self.effort);
        if pixels {
            fracture
                .notes
                .push("rectilinear, but a curve in pixels: fractured as a curve".to_owned());
        }
        Ok(fracture)
    }

    /// The exact partition of a rectilinear figure, cut to the greatest side.
    fn cut(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        let snapped = snap(job.figure, job.limits.address);
        let mut notes = Vec::new();
        if !snapped.same_topology {
            notes.push(
                "a part narrower than an address unit is lost on the address grid".to_owned(),
            );
        }
        let (mut shots, mut price) = (Vec::new(), 0);
        for piece in &snapped.figures {
            let partition = partition(piece, job.limits.sliver, self.prefer)?;
            price += partition.price();
            shots.extend(
                cut_to_greatest_side(&partition.tiles, &job.limits)
                    .iter()
                    .map(|r| flash(r, job.limits.address)),
            );
        }
        if price > 0 {
            notes.push(format!(
                "{price} shots more than the least, to be rid of slivers"
            ));
        }
        let least = shots.len() - price;
        let shots = ShotList::new(job.limits.address, shots);
        let mut fracture = Setting::of_shots(job, Doses::default(), &shots).judged(shots);
        fracture.lower_bound = Some(least);
        fracture.notes = notes;
        Ok(fracture)
    }
}

/// The plain staircase: geometry alone, no simulation; what a fracture without a model would write.
#[derive(Clone, Copy, Debug)]
pub struct Staircase {
    /// How far the staircase may stray from the outline.
    pub within: Nm,
}

impl Fracturer for Staircase {
    fn name(&self) -> &'static str {
        "staircase"
    }

    fn fracture(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        oriented(job, |job| self.walk(job))
    }
}

impl Staircase {
    fn walk(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        let plain = fracture_staircase(job.figure, self.within, &job.limits)?;
        let setting = Setting::of_shots(job, Doses::default(), &plain.shots);
        let mut fracture = setting.judged(plain.shots);
        if plain.under_least_side > 0 {
            fracture.notes.push(format!(
                "{} shots under the least side",
                plain.under_least_side
            ));
        }
        if !plain.same_topology {
            fracture.notes.push(
                "a part narrower than an address unit is lost on the address grid".to_owned(),
            );
        }
        Ok(fracture)
    }
}

/// A rectangle on the address grid as a shot of dose 1.
fn flash(r: &Rect, address: AddressUnit) -> Shot {
    let unit = address.pm();
    Shot {
        x0: r.min.x / unit,
        y0: r.min.y / unit,
        x1: r.max.x / unit,
        y1: r.max.y / unit,
        dose: Dose(1.0),
    }
}
