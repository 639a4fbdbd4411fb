//! Both fracturers on figures of many kinds, judged by a witness that shares no code with them.

#[path = "../common/annulus.rs"]
mod annulus;
mod bars;
mod beside;
mod doses;
mod hopeless;
mod kinds;
mod laws;
#[path = "../common/meander.rs"]
mod meander;
mod print;
#[path = "../common/random.rs"]
mod random;
mod rectilinear;
mod seeds;
#[path = "../common/sets.rs"]
mod sets;
mod wide;

use shotwright::fracture::overlap::Overlap;
use shotwright::fracture::tile::{Prefer, Tile};
use shotwright::fracture::{Effort, Fracture, Fracturer, Job};
use shotwright::shot::Shot;

const TILE: Tile = Tile {
    effort: Effort::Normal,
    exact: false,
    prefer: Prefer::FewTiles,
};

const OVERLAP: Overlap = Overlap::with(Effort::Normal);

const BOTH: [&dyn Fracturer; 2] = [&TILE, &OVERLAP];

fn disjoint(a: &Shot, b: &Shot) -> bool {
    a.x1 <= b.x0 || b.x1 <= a.x0 || a.y1 <= b.y0 || b.y1 <= a.y0
}

/// The fracture of a job with all that is wrong with it: places said to miss, places that the witness finds missing, shots
/// off the limits or the grid, tiles that overlap.
fn examine(fracturer: &dyn Fracturer, job: &Job<'_>) -> (Fracture, Vec<String>) {
    let fracture = match fracturer.fracture(job) {
        Ok(fracture) => fracture,
        Err(error) => panic!("{}: {error}", fracturer.name()),
    };
    let mut faults = Vec::new();
    if let Some(miss) = fracture.misses.first() {
        faults.push(format!("{} misses, first {miss:?}", fracture.misses.len()));
    }
    let (sigma, tolerance) = (job.blur.sigma().0, job.tolerance.0);
    let figures: Vec<_> = std::iter::once(job.figure).chain(job.context).collect();
    if job.context.is_empty() {
        let wrong = print::wrong_pixels(&figures, &[&fracture.shots], sigma, tolerance);
        if let Some(first) = wrong.first() {
            faults.push(format!("{} wrong pixels, first {first:?}", wrong.len()));
        }
    }
    if fracture.shots.address() != job.limits.address {
        faults.push("off the address grid".to_owned());
    }
    let unit = job.limits.address.nm();
    let shots = fracture.shots.shots();
    for (i, shot) in shots.iter().enumerate() {
        #[allow(clippy::cast_precision_loss, reason = "sides of test shots")]
        let (short, long) = (shot.short_side() as f64, shot.long_side() as f64);
        if short * unit.0 < job.limits.least_side.0 - 1e-9
            || long * unit.0 > job.limits.greatest_side.0 + 1e-9
        {
            faults.push(format!("{shot:?} is off the limits"));
        }
        if let Some(other) = shots[..i].iter().find(|s| !disjoint(s, shot))
            && fracturer.name() == "tile"
        {
            faults.push(format!("{shot:?} overlaps {other:?}"));
        }
    }
    (fracture, faults)
}

/// Collects what is wrong over many figures, so that a failure names all of them.
#[derive(Default)]
struct Faults(Vec<String>);

impl Faults {
    /// The number of shots of a figure, its faults noted under its name.
    fn count(&mut self, name: &str, fracturer: &dyn Fracturer, job: &Job<'_>) -> usize {
        let (fracture, faults) = examine(fracturer, job);
        let title = |f| format!("{name}, {}: {f}", fracturer.name());
        self.0.extend(faults.into_iter().map(title));
        fracture.shots.len()
    }

    fn assert_none(self) {
        assert!(self.0.is_empty(), "{:#?}", self.0);
    }
}
