//! Terms of a quote for tests and benches that look at something else.

use shotwright::fracture::{DoseLevels, Effort};
use shotwright::profile::Profile;
use shotwright::quote::Terms;
use shotwright::units::Nm;

/// A quick quote at a tolerance of 2 nm: no field, no slot, any peak dose, dose 1 for every shot.
pub(crate) fn terms(profile: &Profile) -> Terms<'_> {
    Terms {
        profile,
        tolerance: Nm(2.0),
        within: Nm(2.0),
        effort: Effort::Quick,
        field: None,
        slot: None,
        peak_dose: None,
        raster: None,
        dose_levels: DoseLevels::ONE,
    }
}
