//! Shots that do not overlap.

mod curved;

use super::fit::Setting;
use super::{Effort, Fracture, Fracturer, Job, Miss};
use crate::shot::ShotList;

/// The tile fracture: an exact partition for rectilinear figures, fitted slabs for curved ones.
#[derive(Clone, Copy, Debug, Default)]
pub struct Tile {
    /// How hard to search.
    pub effort: Effort,
}

impl Fracturer for Tile {
    fn name(&self) -> &'static str {
        "tile"
    }

    fn fracture(&self, job: &Job<'_>) -> Fracture {
        let setting = Setting::new(job);
        match curved::fracture(&setting, self.effort) {
            Some(fit) => {
                let misses = fit.violations.iter().map(|v| Miss::of(v, &setting.target, job.blur)).collect();
                Fracture { shots: fit.shots, misses, lower_bound: None, notes: Vec::new() }
            }
            None => Fracture { shots: ShotList::new(job.limits.address, Vec::new()), misses: Vec::new(), lower_bound: None, notes: Vec::new() },
        }
    }
}
