//! Fitting shots to a figure: the common engine of the two fracturers.
//!
//! All that is asked of the shots is a set of inequalities: the dose at sample places (at or above the threshold, or
//! below it, or under an allowed peak), least and greatest sides, and for tiles that no two overlap. [`solve`] moves the sides of a few shots at
//! once until all inequalities hold (damped least squares on those that do not, with the closed-form derivatives);
//! [`reduce`] drops and merges shots as long as [`solve`] can mend what that breaks; [`snap`] brings the sides to the address grid
//! and checks the whole neighbourhood; [`core`](mod@core) fills what lies deep inside a wide figure once for all. Everything is local: a shot touches only samples within 4.5 σ of it.

mod algebra;
mod core;
mod field;
mod kernel;
mod model;
mod reduce;
mod relax;
mod samples;
mod search;
mod snap;
mod solve;
mod start;

pub(super) use model::Flash;
pub(super) use reduce::Budget;
pub(super) use search::{Doses, Fit, Setting, best_of};
pub(super) use start::{Slabs, cover};
