//! Values of flags and of keys in job files: checked by one rule, whichever way they come.

use std::fmt;
use std::str::FromStr;

use clap::ValueEnum;
use serde::{Deserialize, Serialize};

use crate::fracture::DoseLevels;
use crate::fracture::Effort;
use crate::geom::{Point, Rect};
use crate::layout::Layer;
use crate::units::{Dose, Nm};
use crate::write_time::Field;

/// Numbers with bounds: from text as flags are, from a number as keys of a file are.
macro_rules! numbers {
    ($($(#[$doc:meta])* $name:ident, $holds:expr, $expected:literal;)*) => {$(
        $(#[$doc])*
        #[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
        #[serde(try_from = "f64", into = "f64")]
        pub(super) struct $name(pub(super) f64);

        impl TryFrom<f64> for $name {
            type Error = String;

            fn try_from(x: f64) -> Result<Self, String> {
                let holds: fn(f64) -> bool = $holds;
                if x.is_finite() && holds(x) {
                    Ok(Self(x))
                } else {
                    Err(format!("found {x}, expected {}", $expected))
                }
            }
        }

        impl From<$name> for f64 {
            fn from(x: $name) -> f64 {
                x.0
            }
        }

        impl FromStr for $name {
            type Err = String;

            fn from_str(text: &str) -> Result<Self, String> {
                let number = text.parse::<f64>().ok().and_then(|x| Self::try_from(x).ok());
                number.ok_or_else(|| format!("expected {}", $expected))
            }
        }
    )*};
}

numbers! {
    /// Any.
    Finite, |_| true, "a finite number";
    /// Over 0.
    Positive, |x| x > 0.0, "a finite number over 0";
    /// 0 or more.
    NotNegative, |x| x >= 0.0, "a finite number of 0 or more";
    /// A greatest dose: a wide shot alone gives 1.
    PeakDose, |x| x >= 1.0, "a finite number of 1 or more";
    /// A length by which contours may stray, nm: beyond a thousand it says nothing of a blur.
    Stray, |x| x > 0.0 && x <= 1000.0, "a number over 0, up to 1000";
    /// A share.
    Share, |x| x > 0.0 && x <= 1.0, "a number over 0, up to 1";
}

/// Doses that a shot may have: `0.8,1,1.2` as a flag, `[0.8, 1, 1.2]` in a file.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "Vec<f64>", into = "Vec<f64>")]
pub(super) struct Levels(pub(super) DoseLevels);

impl TryFrom<Vec<f64>> for Levels {
    type Error = String;

    fn try_from(levels: Vec<f64>) -> Result<Self, String> {
        let doses: Vec<Dose> = levels.into_iter().map(Dose).collect();
        let levels = DoseLevels::new(&doses);
        levels.map(Self).map_err(|error| error.to_string())
    }
}

impl From<Levels> for Vec<f64> {
    fn from(Levels(levels): Levels) -> Vec<f64> {
        levels.iter().collect()
    }
}

impl FromStr for Levels {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let levels = text.split(',').map(|level| level.trim().parse());
        let levels = levels.collect::<Result<Vec<f64>, _>>();
        Self::try_from(levels.map_err(|_| "expected doses as 0.8,1,1.2".to_owned())?)
    }
}

/// Several lengths: `100,-50` as a flag, `[100, -50]` in a file.
macro_rules! lengths {
    ($($(#[$doc:meta])* $name:ident, $n:literal, $separators:expr, $holds:expr, $flag:literal, $key:literal;)*) => {$(
        $(#[$doc])*
        #[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
        #[serde(try_from = "Vec<f64>", into = "Vec<f64>")]
        pub(super) struct $name([f64; $n]);

        impl TryFrom<Vec<f64>> for $name {
            type Error = String;

            fn try_from(lengths: Vec<f64>) -> Result<Self, String> {
                let holds: fn(&[f64; $n]) -> bool = $holds;
                <[f64; $n]>::try_from(lengths.clone())
                    .ok()
                    .filter(|all| all.iter().all(|x| x.is_finite()) && holds(all))
                    .map(Self)
                    .ok_or_else(|| format!("found {lengths:?}, expected {}", $key))
            }
        }

        impl From<$name> for Vec<f64> {
            fn from(lengths: $name) -> Vec<f64> {
                lengths.0.to_vec()
            }
        }

        impl FromStr for $name {
            type Err = String;

            fn from_str(text: &str) -> Result<Self, String> {
                let parts = text.split($separators).map(|part| part.trim().parse());
                let lengths = parts.collect::<Result<Vec<f64>, _>>().ok();
                lengths
                    .and_then(|lengths| Self::try_from(lengths).ok())
                    .ok_or_else(|| format!("expected {}", $flag))
            }
        }
    )*};
}

lengths! {
    /// A place, nm.
    PlaceNm, 2, ',', |all| pm(all).is_some(), "two lengths in nm, as 100,-50", "two lengths in nm, as [100, -50]";
    /// Two corners of a rectangle, nm.
    RectNm, 4, ',', |all| rect(all).is_some(),
        "two corners of a rectangle in nm, as 0,0,1000,500", "two corners of a rectangle in nm, as [0, 0, 1000, 500]";
    /// Width and height, mm.
    FieldMm, 2, ['x', '×'], |all| all.iter().all(|side| *side > 0.0),
        "two lengths over 0 in mm, as 104x132", "two lengths over 0 in mm, as [104, 132]";
}

fn pm<const N: usize>(nm: &[f64; N]) -> Option<[i64; N]> {
    let all: Option<Vec<i64>> = nm.iter().map(|&x| Nm(x).to_pm()).collect();
    all?.try_into().ok()
}

fn rect(corners: &[f64; 4]) -> Option<Rect> {
    pm(corners)
        .map(|[x0, y0, x1, y1]| Rect::new(Point::new(x0, y0), Point::new(x1, y1)))
        .filter(|rect| rect.width() > 0 && rect.height() > 0)
}

impl PlaceNm {
    pub(super) fn point(self) -> Point {
        pm(&self.0).map_or(Point::default(), |[x, y]| Point::new(x, y))
    }
}

impl RectNm {
    pub(super) fn rect(self) -> Option<Rect> {
        rect(&self.0)
    }
}

impl FieldMm {
    pub(super) fn field(self) -> Field {
        let [width, height] = self.0.map(Nm::from_mm);
        Field { width, height }
    }
}

/// A layer: `1/0`, or `1` for datatype 0.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "String", into = "String")]
pub(super) struct LayerName(pub(super) Layer);

impl FromStr for LayerName {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let (layer, datatype) = text.split_once('/').unwrap_or((text, "0"));
        let number = |text: &str| {
            text.parse()
                .map_err(|_| "expected layer/datatype, two whole numbers as 1/0".to_owned())
        };
        Ok(Self(Layer {
            layer: number(layer)?,
            datatype: number(datatype)?,
        }))
    }
}

impl TryFrom<String> for LayerName {
    type Error = String;

    fn try_from(text: String) -> Result<Self, String> {
        text.parse()
            .map_err(|expected| format!("found \"{text}\", {expected}"))
    }
}

impl From<LayerName> for String {
    fn from(name: LayerName) -> String {
        name.to_string()
    }
}

impl fmt::Display for LayerName {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}/{}", self.0.layer, self.0.datatype)
    }
}

/// How hard to search.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub(super) enum EffortArg {
    /// One start, few trials.
    Quick,
    /// What a quote needs.
    #[default]
    Normal,
    /// All starts: several times the work for a shot less now and then.
    Thorough,
}

impl From<EffortArg> for Effort {
    fn from(effort: EffortArg) -> Self {
        match effort {
            EffortArg::Quick => Self::Quick,
            EffortArg::Normal => Self::Normal,
            EffortArg::Thorough => Self::Thorough,
        }
    }
}

/// What is exposed.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub(super) enum ExposeArg {
    /// What is drawn.
    #[default]
    Figures,
    /// What is not drawn of the --frame.
    Background,
}

/// A finite number over 0.
pub(super) fn positive(text: &str) -> Result<f64, String> {
    text.parse().map(|Positive(x)| x)
}

/// A finite number of 0 or more.
pub(super) fn not_negative(text: &str) -> Result<f64, String> {
    text.parse().map(|NotNegative(x)| x)
}

/// A length by which contours may stray, nm.
pub(super) fn stray(text: &str) -> Result<f64, String> {
    text.parse().map(|Stray(x)| x)
}

/// A count, also written as 3e11.
pub(super) fn count(text: &str) -> Result<u128, String> {
    let expected = || "expected a whole number of 0 or more, up to 1e24".to_owned();
    if let Ok(count) = text.parse() {
        return Ok(count);
    }
    let Finite(value) = text.parse().map_err(|_| expected())?;
    if !(0.0..=1e24).contains(&value) || value.fract() != 0.0 {
        return Err(expected());
    }
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "whole and within range"
    )]
    let count = value as u128;
    Ok(count)
}
