//! How sure the hours are, what moves them most, and when two writers tie.

use serde::{Serialize, Serializer};

use crate::profile::{Key, Profile};
use crate::units::Hours;

use super::load::Load;
use super::pattern::{Counts, Field, Pattern};
use super::{WriteTime, WriteTimeError};

/// Hours with their bounds.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Interval {
    /// Lower end.
    pub low_h: Hours,
    /// As the profile's values have it.
    pub total_h: Hours,
    /// Upper end.
    pub high_h: Hours,
}

/// How one number moves the total when it alone changes by ±10 % (a count by ±1).
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Sensitivity {
    /// The number.
    #[serde(serialize_with = "name")]
    pub key: Key,
    /// As the profile has it.
    pub value: f64,
    /// Total with the number at its lower value.
    pub at_lower_h: Hours,
    /// Total with the number at its upper value.
    pub at_upper_h: Hours,
}

/// Relative: waiting makes up for flashing where the stage bounds, and their sum moves by its rounding.
const ROUNDING: f64 = 1e-12;

fn name<S: Serializer>(key: &Key, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.collect_str(key)
}

impl Sensitivity {
    /// Distance between the two totals, or of either from a total that both are on one side of.
    fn reach(&self, total: Hours) -> f64 {
        let (lower, upper) = (self.at_lower_h.0, self.at_upper_h.0);
        lower.max(upper).max(total.0) - lower.min(upper).min(total.0)
    }
}

/// Totals under one profile with single numbers changed; shots are distributed anew only where that matters.
struct OneAtATime<'a> {
    profile: &'a Profile,
    pattern: &'a Pattern<'a>,
    load: Load,
    total: Hours,
}

impl<'a> OneAtATime<'a> {
    fn new(profile: &'a Profile, pattern: &'a Pattern<'a>) -> Result<Self, WriteTimeError> {
        let load = Load::new(profile, pattern)?;
        let total = WriteTime::of_load(profile, &load).total_h;
        Ok(Self {
            profile,
            pattern,
            load,
            total,
        })
    }

    fn at(&self, key: Key, value: f64) -> Result<Hours, WriteTimeError> {
        let profile = self.profile.with(key, value);
        let time = if Load::depends_on(self.profile, key) {
            WriteTime::new(&profile, self.pattern)?
        } else {
            WriteTime::of_load(&profile, &self.load)
        };
        Ok(time.total_h)
    }
}

/// The interval that follows from the ± values of the profile.
///
/// Each number is moved to either end alone; the changes are taken as independent and add as the root of the sum
/// of their squares, upward and downward apart. Without any ± the interval is a point.
///
/// # Errors
/// As [`WriteTime::new`].
pub fn interval(profile: &Profile, pattern: &Pattern<'_>) -> Result<Interval, WriteTimeError> {
    let study = OneAtATime::new(profile, pattern)?;
    let (mut down, mut up) = (0.0_f64, 0.0_f64);
    for (key, number) in profile.numbers().filter(|(_, n)| n.plus_minus > 0.0) {
        let ends = [
            study.at(key, number.value - number.plus_minus)? - study.total,
            study.at(key, number.value + number.plus_minus)? - study.total,
        ];
        let greatest = ends.iter().fold(0.0_f64, |most, change| most.max(change.0));
        let least = ends.iter().fold(0.0_f64, |most, change| most.min(change.0));
        up = up.hypot(greatest);
        down = down.hypot(least);
    }
    Ok(Interval {
        low_h: study.total - Hours(down),
        total_h: study.total,
        high_h: study.total + Hours(up),
    })
}

/// Every number that moves the total when changed alone by ±10 % (a count by ±1), the one that moves it most first.
///
/// # Errors
/// As [`WriteTime::new`].
pub fn sensitivity(
    profile: &Profile,
    pattern: &Pattern<'_>,
) -> Result<Vec<Sensitivity>, WriteTimeError> {
    let study = OneAtATime::new(profile, pattern)?;
    let mut found = Vec::new();
    for (key, number) in profile.numbers() {
        let step = if key.is_count() {
            1.0
        } else {
            0.1 * number.value
        };
        let moved = Sensitivity {
            key,
            value: number.value,
            at_lower_h: study.at(key, number.value - step)?,
            at_upper_h: study.at(key, number.value + step)?,
        };
        if moved.reach(study.total) > ROUNDING * study.total.0 {
            found.push(moved);
        }
    }
    found.sort_by(|a, b| b.reach(study.total).total_cmp(&a.reach(study.total)));
    Ok(found)
}

/// The least number of shots for which the writer takes as long as `hours`: beyond it, one that takes `hours`
/// whatever the pattern is the faster. `None` where it takes longer without any shot, or never gets there.
///
/// `shots` gives mean dose, jump and side; its number is not used.
///
/// # Errors
/// As [`WriteTime::new`].
pub fn tie(
    profile: &Profile,
    shots: Counts,
    field: Field,
    hours: Hours,
) -> Result<Option<u128>, WriteTimeError> {
    let reaches = |number: u128| -> Result<bool, WriteTimeError> {
        let pattern = Pattern::Counts {
            counts: Counts {
                shots: number,
                ..shots
            },
            field: Some(field),
        };
        Ok(WriteTime::new(profile, &pattern)?.total_h >= hours)
    };
    // 10^18 shots take years on any writer.
    let (mut below, mut reached) = (0, 1_000_000_000_000_000_000);
    if reaches(below)? || !reaches(reached)? {
        return Ok(None);
    }
    while reached - below > 1 {
        let middle = below + (reached - below) / 2;
        if reaches(middle)? {
            reached = middle;
        } else {
            below = middle;
        }
    }
    Ok(Some(reached))
}
