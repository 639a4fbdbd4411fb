//! A shot list judged by a second witness: the dose of a blurred raster beside the closed form.

use rayon::prelude::*;

use crate::blur::REACH;
use crate::expose::{Exposure, Raster, RasterError};
use crate::geom::Transform;
use crate::judge::{self, Fidelity, Settings, Summary};
use crate::mask::{Mask, Standings};
use crate::shot::ShotList;
use crate::target::{DoseField, Target};
use crate::units::Nm;

use super::shots::{ShotIndex, context};

/// What the raster says, and how far it is from the closed form.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Witnessed {
    /// The scores by the raster.
    pub scores: Summary,
    /// Greatest difference of the two doses at places on the outline and σ to both sides of it.
    pub dose_difference: f64,
    /// The greatest share of what the raster may be off that the difference takes: at most 1 where the two agree.
    pub of_bound: f64,
    /// What the raster may be off for each unit of dose that is piled up.
    pub bound: f64,
    /// Greatest difference of the two edge errors.
    pub edge_difference: Nm,
    /// Places compared.
    pub places: u64,
}

/// One figure.
struct One {
    fidelity: Fidelity,
    dose: f64,
    share: f64,
    edge: f64,
    places: u64,
}

/// Judges every figure at every place on rasters of pixels of side `pixel` nm, and compares them with the closed form.
///
/// # Errors
/// Pixels over half of σ, or a figure too large for such pixels.
pub fn witness(
    mask: &Mask,
    shots: &ShotList,
    settings: &Settings,
    pixel: Nm,
    tick: &(dyn Fn() + Sync),
) -> Result<Witnessed, RasterError> {
    let standings = Standings::new(mask);
    let reach = (settings.blur.sigma() * REACH).to_pm().unwrap_or_default();
    let index = ShotIndex::new(shots);
    let placed = mask
        .extent
        .map_or_else(Vec::new, |extent| standings.touching(extent));
    let one = |&(figure, transform): &(usize, Transform)| {
        let own = mask.figures[figure].figure.transformed(transform);
        let window = own.bounds().grown(reach);
        let context = context(mask, &standings, (figure, transform), settings);
        let exact = Exposure::new(settings.blur, index.touching(window));
        let raster = Raster::new(settings.blur, pixel, index.touching(window))?;
        let target = Target::new(&own, settings.blur, settings.tolerance);
        let mut found = One {
            fidelity: judge::judge(&own, &context, &raster, settings),
            dose: 0.0,
            share: 0.0,
            edge: 0.0,
            places: 0,
        };
        let both = judge::edge_samples(&target, &exact, settings)
            .zip(judge::edge_samples(&target, &raster, settings));
        let bound = raster.bound();
        for (a, b) in both {
            if let (Some(x), Some(y)) = (a.error, b.error) {
                // Each witness may take the other of two ways to the contour where they are as long.
                if a.outward == b.outward {
                    found.edge = found.edge.max((x - y).0.abs());
                }
            }
            for side in [-1.0, 0.0, 1.0] {
                let by = side * settings.blur.sigma().0;
                let p = [0, 1].map(|axis| a.place[axis] + by * a.outward[axis]);
                let off = (exact.dose_exact(p) - raster.dose(p)).abs();
                found.dose = found.dose.max(off);
                found.share = found.share.max(off / bound);
                found.places += 1;
            }
        }
        tick();
        Ok(found)
    };
    let all: Vec<One> = placed
        .par_iter()
        .map(one)
        .collect::<Result<_, RasterError>>()?;
    let mut fidelity = Fidelity::default();
    for one in &all {
        fidelity.merge(&one.fidelity, 1);
    }
    let greatest = |of: fn(&One) -> f64| all.iter().map(of).fold(0.0, f64::max);
    Ok(Witnessed {
        scores: fidelity.summary(),
        dose_difference: greatest(|one| one.dose),
        of_bound: greatest(|one| one.share),
        bound: Raster::bound_for_each_dose(settings.blur, pixel),
        edge_difference: Nm(greatest(|one| one.edge)),
        places: all.iter().map(|one| one.places).sum(),
    })
}
