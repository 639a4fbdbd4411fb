//! Hours against worked values, and against counting copy by copy.
//!
//! Values named "CHECKS 5" were derived from the definitions with scipy 1.17 unless another source is named.

mod copies;
mod placed;
mod uncertain;
mod worked;

use shotwright::geom::{Point, Rect, Repetition, Transform};
use shotwright::profile::{Kind, Profile};
use shotwright::shot::{AddressUnit, Shot, ShotList};
use shotwright::units::{Dose, Hours, Nm};
use shotwright::write_time::{Counts, Field, Pattern, Placed, WriteTime};

pub(crate) fn shaped(numbers: &[(&str, f64)]) -> Profile {
    Profile::from_numbers("test", Kind::Shaped, numbers.iter().copied()).unwrap()
}

pub(crate) fn raster(numbers: &[(&str, f64)]) -> Profile {
    Profile::from_numbers("test", Kind::Raster, numbers.iter().copied()).unwrap()
}

pub(crate) fn shots(number: u128) -> Pattern<'static> {
    Pattern::Counts {
        counts: Counts::of(number),
        field: None,
    }
}

/// CHECKS 6: scanner field 26×33 mm at 4:1.
pub(crate) const FIELD: Field = Field {
    width: Nm(132e6),
    height: Nm(104e6),
};

pub(crate) const CURRENT: (&str, f64) = ("current_a_cm2", 400.0);
pub(crate) const DOSE: (&str, f64) = ("base_dose_uc_cm2", 25.0);

/// Equal to the four digits that CHECKS gives.
pub(crate) fn same(found: f64, digits: f64) {
    assert!(
        (found - digits).abs() <= 5e-4 * digits,
        "{found}, expected {digits}"
    );
}

/// Equal to three decimals, as CHECKS prints hours.
pub(crate) fn same_hours(found: Hours, hours: f64) {
    assert!(
        (found.0 - hours).abs() <= 5.1e-4,
        "{found}, expected {hours} h"
    );
}

pub(crate) const PM: i64 = 1000; // pm in a nm

pub(crate) fn address() -> AddressUnit {
    AddressUnit::new(Nm(1.0)).unwrap()
}

/// A list of (x0, y0, x1, y1) in nm at dose 1.
pub(crate) fn list(rects: &[(i64, i64, i64, i64)]) -> ShotList {
    let shots = rects.iter().map(|&(x0, y0, x1, y1)| Shot {
        x0,
        y0,
        x1,
        y1,
        dose: Dose(1.0),
    });
    ShotList::new(address(), shots.collect())
}

pub(crate) fn placed<'a>(shots: &'a ShotList, repetition: &'a Repetition) -> Placed<'a> {
    Placed {
        shots,
        transform: Transform::IDENTITY,
        repetition,
        dose: Dose(1.0),
    }
}

pub(crate) fn frame_nm(x: i64, y: i64) -> Rect {
    Rect {
        min: Point::new(0, 0),
        max: Point::from_nm(x, y),
    }
}

/// Rectangles flashed once where they are, in a frame of 20 µm.
pub(crate) fn time_of(profile: &Profile, rects: &[(i64, i64, i64, i64)]) -> WriteTime {
    let shots = list(rects);
    let pattern = Pattern::Placed {
        placed: &[placed(&shots, &Repetition::Once)],
        frame: frame_nm(20_000, 20_000),
    };
    WriteTime::new(profile, &pattern).unwrap()
}
