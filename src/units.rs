//! Quantities with their units, and the only conversion factors of the crate.
//!
//! A bare `f64` does not cross a module boundary where one of these fits. `Debug` and `Display` print the unit.

use std::fmt;
use std::ops::{Add, AddAssign, Div, Mul, Neg, Sub};

use serde::{Deserialize, Serialize};

/// Picometres in a nanometre: [`crate::geom`] counts in whole picometres.
pub const PM_PER_NM: i64 = 1000;

/// Nanometres in a micrometre.
pub const NM_PER_UM: f64 = 1e3;

/// Nanometres in a millimetre.
pub const NM_PER_MM: f64 = 1e6;

/// Square nanometres in a square centimetre (1 cm = 10⁷ nm).
pub const NM2_PER_CM2: f64 = 1e14;

/// Electrons per nm² for a dose of 1 µC/cm²: `1e-6 C / 1.602176634e-19 C / 1e14 nm²` (elementary charge exact in the SI).
pub const ELECTRONS_PER_NM2_PER_UC_CM2: f64 = 1e-6 / 1.602_176_634e-19 / NM2_PER_CM2;

/// Full width at half maximum of a Gaussian over its standard deviation, `2·√(2 ln 2)`.
pub const FWHM_PER_SIGMA: f64 = 2.354_820_045_030_949;

macro_rules! quantity {
    ($(#[$doc:meta])* $name:ident, $unit:literal) => {
        $(#[$doc])*
        #[derive(Clone, Copy, Default, PartialEq, PartialOrd, Serialize, Deserialize)]
        #[serde(transparent)]
        pub struct $name(pub f64);

        impl fmt::Debug for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                write!(f, concat!("{} ", $unit), self.0)
            }
        }

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                fmt::Display::fmt(&self.0, f)?;
                f.write_str(concat!(" ", $unit))
            }
        }

        impl Add for $name {
            type Output = Self;
            fn add(self, other: Self) -> Self { Self(self.0 + other.0) }
        }

        impl AddAssign for $name {
            fn add_assign(&mut self, other: Self) { self.0 += other.0; }
        }

        impl Sub for $name {
            type Output = Self;
            fn sub(self, other: Self) -> Self { Self(self.0 - other.0) }
        }

        impl Neg for $name {
            type Output = Self;
            fn neg(self) -> Self { Self(-self.0) }
        }

        impl Mul<f64> for $name {
            type Output = Self;
            fn mul(self, factor: f64) -> Self { Self(self.0 * factor) }
        }

        impl Div<f64> for $name {
            type Output = Self;
            fn div(self, divisor: f64) -> Self { Self(self.0 / divisor) }
        }

        impl Div for $name {
            type Output = f64;
            fn div(self, other: Self) -> f64 { self.0 / other.0 }
        }
    };
}

quantity!(
    /// A length at mask scale, nanometres.
    Nm, "nm"
);
quantity!(
    /// A time, seconds.
    Seconds, "s"
);
quantity!(
    /// A dose as a multiple of dose-to-size, the dose at which a wide edge prints where drawn.
    Dose, "× dose-to-size"
);
quantity!(
    /// The charge per area that dose 1 stands for, µC/cm².
    BaseDose, "µC/cm²"
);
quantity!(
    /// Beam current density, A/cm².
    CurrentDensity, "A/cm²"
);

quantity!(
    /// A time, hours.
    Hours, "h"
);
quantity!(
    /// A beam current, A.
    Amperes, "A"
);
quantity!(
    /// An area at mask scale, cm².
    Area, "cm²"
);

impl Nm {
    /// From micrometres.
    #[must_use]
    pub fn from_um(um: f64) -> Self {
        Self(um * NM_PER_UM)
    }

    /// From millimetres.
    #[must_use]
    pub fn from_mm(mm: f64) -> Self {
        Self(mm * NM_PER_MM)
    }

    /// As micrometres.
    #[must_use]
    pub fn um(self) -> f64 {
        self.0 / NM_PER_UM
    }

    /// Area of a rectangle of these two sides.
    #[must_use]
    pub fn by(self, other: Self) -> Area {
        Area(self.0 * other.0 / NM2_PER_CM2)
    }

    /// The nearest whole number of picometres; `None` when not finite or beyond ±2⁵² pm (4.5 km).
    #[must_use]
    pub fn to_pm(self) -> Option<i64> {
        let pm = (self.0 * 1e3).round();
        #[allow(
            clippy::cast_possible_truncation,
            reason = "checked to lie within ±2^52"
        )]
        (pm.abs() <= 4_503_599_627_370_496.0).then_some(pm as i64)
    }

    /// A whole number of picometres as nanometres.
    #[must_use]
    pub fn from_pm(pm: i64) -> Self {
        #[allow(clippy::cast_precision_loss, reason = "coordinates stay below 2^53 pm")]
        Self(pm as f64 * 1e-3)
    }
}

impl Seconds {
    /// Hours, 3600 s each.
    #[must_use]
    pub fn hours(self) -> f64 {
        self.0 / 3600.0
    }

    /// From minutes.
    #[must_use]
    pub fn from_minutes(minutes: f64) -> Self {
        Self(minutes * 60.0)
    }

    /// From microseconds.
    #[must_use]
    pub fn from_us(us: f64) -> Self {
        Self(us * 1e-6)
    }

    /// From nanoseconds.
    #[must_use]
    pub fn from_ns(ns: f64) -> Self {
        Self(ns * 1e-9)
    }

    /// From hours.
    #[must_use]
    pub fn from_hours(hours: f64) -> Self {
        Self(hours * 3600.0)
    }
}

impl From<Seconds> for Hours {
    fn from(time: Seconds) -> Self {
        Self(time.hours())
    }
}

impl CurrentDensity {
    /// The dose that this density gives in a time: `A/cm² · µs = µC/cm²`.
    #[must_use]
    pub fn dose_in(self, time: Seconds) -> BaseDose {
        BaseDose(self.0 * time.0 * 1e6)
    }

    /// The largest area that a beam of `current` fills at this density.
    #[must_use]
    pub fn area_of(self, current: Amperes) -> Area {
        Area(current.0 / self.0)
    }
}

impl BaseDose {
    /// Time to deposit this dose over an area with a beam of the given current: `t = D·A/I`.
    #[must_use]
    pub fn exposure_time(self, area: Area, current: Amperes) -> Seconds {
        Seconds(self.0 * 1e-6 * area.0 / current.0)
    }

    /// Time to deposit this dose at a current density: `µC/cm² ÷ A/cm² = µs`.
    #[must_use]
    pub fn flash_time(self, density: CurrentDensity) -> Seconds {
        Seconds(self.0 / density.0 * 1e-6)
    }

    /// Electrons per nm² of mask.
    #[must_use]
    pub fn electrons_per_nm2(self) -> f64 {
        self.0 * ELECTRONS_PER_NM2_PER_UC_CM2
    }
}
