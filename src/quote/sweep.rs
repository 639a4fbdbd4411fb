//! Quotes of one mask under changed numbers, with the fractures of those that a number does not touch.

use crate::mask::Mask;
use crate::profile::{Key, Profile, ProfileErrors};
use crate::units::Nm;

use super::result::{CAUTION, Sweep, SweepPoint};
use super::{Chosen, Clip, Kept, QuoteError, Setup, Terms, quote_again};

/// A number that a sweep changes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Parameter {
    /// The tolerance; the plain staircase follows it if it does so in the terms.
    Tolerance,
    /// A number of the profile.
    Number(Key),
}

impl Parameter {
    /// The one of this name.
    #[must_use]
    pub fn named(name: &str) -> Option<Self> {
        match name {
            TOLERANCE => Some(Self::Tolerance),
            _ => Key::named(name).map(Self::Number),
        }
    }

    /// As written in files.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Tolerance => TOLERANCE,
            Self::Number(key) => key.info().name,
        }
    }
}

const TOLERANCE: &str = "tolerance_nm";

/// A number with the values that it takes.
#[derive(Clone, Debug, PartialEq)]
pub struct Axis {
    /// Which.
    pub parameter: Parameter,
    /// Its values, in the order they are tried.
    pub values: Vec<f64>,
}

/// Terms of one point.
#[derive(Clone, Debug)]
pub struct Point {
    values: Vec<f64>,
    profile: Profile,
    tolerance: Nm,
}

/// All combinations of the values, the last parameter changing fastest, each checked.
///
/// # Errors
/// When a value is out of the bounds of its number or contradicts another.
pub fn points(terms: &Terms<'_>, axes: &[Axis]) -> Result<Vec<Point>, ProfileErrors> {
    let mut all = vec![Vec::new()];
    for axis in axes {
        let with = |values: Vec<f64>| {
            axis.values.iter().map(move |value| {
                let mut more = values.clone();
                more.push(*value);
                more
            })
        };
        all = all.into_iter().flat_map(with).collect();
    }
    let point = |values: Vec<f64>| {
        let mut profile = terms.profile.clone();
        let mut tolerance = terms.tolerance;
        let mut numbers = Vec::new();
        for (axis, &value) in axes.iter().zip(&values) {
            match axis.parameter {
                Parameter::Tolerance => tolerance = Nm(value),
                Parameter::Number(key) => numbers.push((key.info().name, value)),
            }
        }
        profile.set_all(numbers)?;
        Ok(Point {
            values,
            profile,
            tolerance,
        })
    };
    all.into_iter().map(point).collect()
}

/// Quotes every point; `tick` is called twice for each figure, method and point.
///
/// # Errors
/// As [`super::quote`], for the first point that cannot be quoted.
pub fn sweep(
    chosen: &[(Chosen<'_>, Option<f64>)],
    terms: &Terms<'_>,
    axes: &[Axis],
    points: &[Point],
    tick: &(dyn Fn() + Sync),
) -> Result<Sweep, QuoteError> {
    let mut kept = Kept::default();
    let mut masks: Vec<(Setup, Vec<Mask>)> = Vec::new();
    let mut swept = Vec::with_capacity(points.len());
    for point in points {
        let follows = terms.within == terms.tolerance;
        let terms = Terms {
            profile: &point.profile,
            tolerance: point.tolerance,
            within: if follows {
                point.tolerance
            } else {
                terms.within
            },
            ..*terms
        };
        let setup = terms.setup()?;
        // A mask depends on the address grid and, through the contexts, on the blur.
        let same = |other: &Setup| {
            other.blur == setup.blur && other.limits.address == setup.limits.address
        };
        let at = match masks.iter().position(|(other, _)| same(other)) {
            Some(at) => at,
            None => {
                let made = chosen
                    .iter()
                    .map(|(chosen, _)| chosen.mask(&setup))
                    .collect::<Result<Vec<_>, _>>()?;
                masks.push((setup, made));
                masks.len() - 1
            }
        };
        let clips: Vec<Clip<'_>> = chosen
            .iter()
            .zip(&masks[at].1)
            .map(|(&(chosen, coverage), mask)| Clip {
                chosen,
                mask,
                coverage,
            })
            .collect();
        let numbers: Vec<usize> = (0..clips.len())
            .map(|clip| at * clips.len() + clip)
            .collect();
        let quote = quote_again(&clips, &numbers, &terms, &mut kept, tick)?.quote;
        swept.push(SweepPoint {
            values: point.values.clone(),
            fractures: quote.fractures,
            recommended: quote.recommended,
            fits: quote.verdict.fits,
        });
    }
    Ok(Sweep {
        sources: chosen
            .iter()
            .map(|(chosen, _)| chosen.name.to_owned())
            .collect(),
        profile: terms.profile.name().to_owned(),
        parameters: axes
            .iter()
            .map(|axis| axis.parameter.name().to_owned())
            .collect(),
        slot_h: terms.slot.map(|slot| slot.0),
        points: swept,
        fractured: kept.fractured(),
        reused: kept.reused(),
        caution: CAUTION.to_owned(),
    })
}
