//! The cost of many figures from the fracture of some: how often the interval covers the exact answer, and how soon it is narrow.

mod coverage;
#[path = "../common/flat.rs"]
mod flat;
#[path = "../fracture/kinds.rs"]
mod kinds;
#[path = "../common/meander.rs"]
mod meander;
mod population;
mod real;
#[path = "../common/regions.rs"]
mod regions;
#[path = "../common/terms.rs"]
mod terms;

/// The generator that `regions` brings along, where `kinds` looks for it.
mod random {
    pub(crate) use crate::regions::Random;
}
