//! The cost of many figures from the fracture of some: how often the interval covers the exact answer, and how soon it is narrow.

mod coverage;
#[path = "../fracture/kinds.rs"]
mod kinds;
#[path = "../common/meander.rs"]
mod meander;
mod population;
#[path = "../common/random.rs"]
mod random;
mod real;
#[path = "../common/regions.rs"]
mod regions;
