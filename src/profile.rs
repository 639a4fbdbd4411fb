//! Writer and process numbers, from TOML, checked once.
//!
//! A profile has a table `[writer]` (what the machine can do) and a table `[process]` (what resist and blank
//! do). [`Key`] lists every number with its unit in its name. A number may state how uncertain it is:
//! `settle_ns = { value = 60, plus_minus = 5 }`. The built-in profiles are illustrative: no machine's data.

mod error;
mod key;
mod read;

use std::collections::BTreeMap;
use std::f64::consts::SQRT_2;

use serde::ser::SerializeStruct;
use serde::{Serialize, Serializer};

pub use error::{ProfileError, ProfileErrors};
pub use key::{Key, KeyInfo, Need, Section};

use crate::shot::{AddressUnit, ShotLimits};
use crate::target::ShotErrors;
use crate::units::{Amperes, BaseDose, CurrentDensity, Nm, Seconds};

/// How a writer makes its shots.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Kind {
    /// One variable-shaped beam flashes rectangles.
    Shaped,
    /// Many beams scan the whole field on a raster, whatever the pattern.
    Raster,
}

impl Kind {
    /// As written in files.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Shaped => "shaped",
            Self::Raster => "raster",
        }
    }
}

/// A number, perhaps with its uncertainty.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Number {
    /// The value.
    pub value: f64,
    /// Half the width of its interval; 0 when exact or not stated.
    pub plus_minus: f64,
}

impl From<f64> for Number {
    fn from(value: f64) -> Self {
        Self {
            value,
            plus_minus: 0.0,
        }
    }
}

impl Serialize for Number {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        if self.plus_minus == 0.0 {
            return serializer.serialize_f64(self.value);
        }
        let mut number = serializer.serialize_struct("Number", 2)?;
        number.serialize_field("value", &self.value)?;
        number.serialize_field("plus_minus", &self.plus_minus)?;
        number.end()
    }
}

/// One Gaussian term of the long range: `η` over the forward beam's energy, 1/e radius `β`.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Backscatter {
    /// Energy over that of the forward beam.
    pub eta: Number,
    /// 1/e radius, nm.
    pub beta_nm: Number,
}

impl Backscatter {
    /// The 1/e radius.
    #[must_use]
    pub fn beta(&self) -> Nm {
        Nm(self.beta_nm.value)
    }
}

/// Fogging: electrons that come back from the column, spread over millimetres.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fogging {
    /// Energy over that of the forward beam.
    pub eta: f64,
    /// 1/e radius.
    pub radius: Nm,
}

/// A checked set of writer and process numbers.
#[derive(Clone, Debug, PartialEq)]
pub struct Profile {
    name: String,
    about: String,
    kind: Kind,
    numbers: BTreeMap<Key, Number>,
    backscatter: Vec<Backscatter>,
}

const BUILTINS: &[(&str, &str)] = &[
    ("shaped-70", include_str!("profile/shaped-70.toml")),
    ("shaped-200", include_str!("profile/shaped-200.toml")),
    ("shaped-400", include_str!("profile/shaped-400.toml")),
    ("shaped-800", include_str!("profile/shaped-800.toml")),
    ("shaped-1200", include_str!("profile/shaped-1200.toml")),
    ("raster", include_str!("profile/raster.toml")),
];

/// 1/e radius over standard deviation of a Gaussian: `exp(−r²/α²) = exp(−r²/2σ²)` at `α = √2 σ`.
const ALPHA_PER_SIGMA: f64 = SQRT_2;

impl Profile {
    /// Names of the built-in profiles, oldest generation first.
    pub fn builtins() -> impl Iterator<Item = &'static str> {
        BUILTINS.iter().map(|(name, _)| *name)
    }

    /// The text of a built-in profile: a file to start one's own from.
    ///
    /// # Errors
    /// When there is none of this name.
    pub fn builtin_text(name: &str) -> Result<&'static str, ProfileError> {
        BUILTINS
            .iter()
            .find(|(n, _)| *n == name)
            .map(|(_, text)| *text)
            .ok_or_else(|| ProfileError::NoBuiltin {
                found: name.to_owned(),
            })
    }

    /// A built-in profile.
    ///
    /// # Errors
    /// When there is none of this name.
    pub fn builtin(name: &str) -> Result<Self, ProfileErrors> {
        let text = Self::builtin_text(name).map_err(|e| ProfileErrors(vec![e]))?;
        Self::parse(text, name)
    }

    /// From TOML text; `source` names it in errors.
    ///
    /// # Errors
    /// Every unknown key, wrong type or unit, value that is not finite or out of bounds, missing key and
    /// contradiction, each by name with its line.
    pub fn parse(text: &str, source: &str) -> Result<Self, ProfileErrors> {
        read::profile(text, source)
    }

    /// From a table of another TOML text; `source` names the text in errors.
    ///
    /// # Errors
    /// As [`Profile::parse`], with lines of the whole text; also when there is no such table.
    pub fn parse_within(
        text: &str,
        source: &str,
        table: &'static str,
    ) -> Result<Self, ProfileErrors> {
        read::profile_within(text, source, table)
    }

    /// The numbers in a table of another TOML text as they stand, each with its place; none where there is no such table.
    ///
    /// # Errors
    /// Values that are no numbers. Keys and bounds are looked at by [`Profile::set_from`].
    pub fn numbers_within(
        text: &str,
        source: &str,
        table: &str,
    ) -> Result<Vec<(String, Number, String)>, ProfileErrors> {
        read::numbers_within(text, source, table)
    }

    /// From numbers alone, by the keys of the files; what is not given takes its default.
    ///
    /// # Errors
    /// As [`Profile::parse`], the place being `name`.
    pub fn from_numbers<'a>(
        name: &str,
        kind: Kind,
        numbers: impl IntoIterator<Item = (&'a str, f64)>,
    ) -> Result<Self, ProfileErrors> {
        let mut profile = Self {
            name: name.to_owned(),
            about: String::new(),
            kind,
            numbers: BTreeMap::new(),
            backscatter: Vec::new(),
        };
        let mut errors: Vec<_> = numbers
            .into_iter()
            .filter_map(|(key, value)| profile.insert(key, value.into(), name).err())
            .collect();
        if errors.is_empty() {
            errors.extend(
                profile
                    .faults(&|_| name.to_owned())
                    .into_iter()
                    .map(|(_, e)| e),
            );
        }
        if errors.is_empty() {
            Ok(profile)
        } else {
            Err(ProfileErrors(errors))
        }
    }

    /// Overrides one number by its key (`alpha_nm` too); its ± is dropped. On error the profile is as before.
    ///
    /// # Errors
    /// An unknown key, one of another kind of writer, a value out of bounds, or one that contradicts another.
    /// Where several overrides belong together (a new range of sides), see [`Profile::set_all`].
    pub fn set(&mut self, key: &str, value: f64) -> Result<(), ProfileErrors> {
        self.set_all([(key, value)])
    }

    /// Overrides several numbers at once and checks the whole.
    ///
    /// # Errors
    /// As [`Profile::set`].
    pub fn set_all<'a>(
        &mut self,
        numbers: impl IntoIterator<Item = (&'a str, f64)>,
    ) -> Result<(), ProfileErrors> {
        let place = format!("profile {}", self.name);
        let numbers = numbers
            .into_iter()
            .map(|(key, value)| (key, value.into(), place.clone()));
        self.set_from(numbers, &place)
    }

    /// Overrides numbers, each with the place that its faults name; `at` names the place of faults of the whole.
    ///
    /// # Errors
    /// As [`Profile::set`].
    pub fn set_from<'a>(
        &mut self,
        numbers: impl IntoIterator<Item = (&'a str, Number, String)>,
        at: &str,
    ) -> Result<(), ProfileErrors> {
        let mut changed = self.clone();
        let mut errors: Vec<_> = numbers
            .into_iter()
            .filter_map(|(key, number, place)| changed.insert(key, number, &place).err())
            .collect();
        if errors.is_empty() {
            let faults = changed.faults(&|_| at.to_owned());
            errors.extend(faults.into_iter().map(|(_, fault)| fault));
        }
        if !errors.is_empty() {
            return Err(ProfileErrors(errors));
        }
        *self = changed;
        Ok(())
    }

    /// Its name.
    #[must_use]
    pub fn name(&self) -> &str {
        &self.name
    }

    /// What it stands for, in words.
    #[must_use]
    pub fn about(&self) -> &str {
        &self.about
    }

    /// Kind of writer.
    #[must_use]
    pub fn kind(&self) -> Kind {
        self.kind
    }

    /// A number as stated, else its default, else `None`; also `None` where another kind of writer is meant.
    #[must_use]
    pub fn number(&self, key: Key) -> Option<Number> {
        let default = match key.info().need {
            Need::Default(value) if key.info().section.serves(self.kind) => Some(value.into()),
            _ => None,
        };
        self.numbers.get(&key).copied().or(default)
    }

    /// The value of [`Profile::number`].
    #[must_use]
    pub fn value(&self, key: Key) -> Option<f64> {
        self.number(key).map(|n| n.value)
    }

    /// Numbers stated or defaulted, in the order of the files.
    pub fn numbers(&self) -> impl Iterator<Item = (Key, Number)> + '_ {
        Key::ALL
            .iter()
            .filter_map(|&key| Some((key, self.number(key)?)))
    }

    /// The same profile with one value changed, kept within the bounds of its key: for one-at-a-time studies.
    #[must_use]
    pub fn with(&self, key: Key, value: f64) -> Self {
        let KeyInfo {
            least, greatest, ..
        } = key.info();
        self.with_number(key, value.clamp(least, greatest).into())
    }

    /// The same profile with one number of another, ± included.
    #[must_use]
    pub(crate) fn with_number(&self, key: Key, number: Number) -> Self {
        let mut changed = self.clone();
        changed.numbers.insert(key, number);
        changed
    }

    /// Passes that share the dose.
    #[must_use]
    pub fn passes(&self) -> u32 {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a whole number from 1 to 64"
        )]
        let passes = self.plain(Key::Passes) as u32;
        passes
    }

    /// Charge per area at dose 1.
    #[must_use]
    pub fn base_dose(&self) -> BaseDose {
        BaseDose(self.plain(Key::BaseDose))
    }

    /// Beam current density; `None` for a raster writer.
    #[must_use]
    pub fn current_density(&self) -> Option<CurrentDensity> {
        self.value(Key::Current).map(CurrentDensity)
    }

    /// Current of all beams together; `None` for a shaped-beam writer.
    #[must_use]
    pub fn beam_current(&self) -> Option<Amperes> {
        self.value(Key::Beam).map(|na| Amperes(na * 1e-9))
    }

    /// Standard deviation of the short-range blur, where stated.
    #[must_use]
    pub fn sigma(&self) -> Option<Nm> {
        self.value(Key::Sigma).map(Nm)
    }

    /// Long-range terms; empty where none is stated.
    #[must_use]
    pub fn backscatter(&self) -> &[Backscatter] {
        &self.backscatter
    }

    /// Fogging, where stated.
    #[must_use]
    pub fn fogging(&self) -> Option<Fogging> {
        Some(Fogging {
            eta: self.value(Key::FoggingEta)?,
            radius: Nm::from_mm(self.value(Key::FoggingRadius)?),
        })
    }

    /// Random errors of shots and the electrons that come with the base dose; `None` unless an error is stated.
    #[must_use]
    pub fn shot_errors(&self) -> Option<ShotErrors> {
        let (edge, dose) = (self.value(Key::EdgeSd), self.value(Key::DoseSd));
        edge.or(dose)?;
        Some(ShotErrors {
            edge: Nm(edge.unwrap_or(0.0)),
            dose: dose.unwrap_or(0.0) / 100.0,
            base_dose: Some(self.base_dose()),
        })
    }

    /// What the writer can flash; `None` for a raster writer.
    #[must_use]
    pub fn shot_limits(&self) -> Option<ShotLimits> {
        Some(ShotLimits {
            address: AddressUnit::new(Nm(self.value(Key::Address)?)).ok()?,
            least_side: Nm(self.value(Key::LeastSide)?),
            greatest_side: Nm(self.value(Key::GreatestSide)?),
            sliver: Nm(self.value(Key::Sliver)?),
        })
    }

    /// Loading, soaking, aligning and unloading together.
    #[must_use]
    pub fn handling(&self) -> Seconds {
        [Key::Load, Key::Soak, Key::Align, Key::Unload]
            .into_iter()
            .fold(Seconds(0.0), |sum, key| {
                sum + Seconds::from_minutes(self.plain(key))
            })
    }

    /// A number that every checked profile has, or that defaults to 0.
    pub(crate) fn plain(&self, key: Key) -> f64 {
        self.value(key).unwrap_or(0.0)
    }

    /// Checks one number by its own key and takes it over.
    fn insert(&mut self, name: &str, number: Number, place: &str) -> Result<(), ProfileError> {
        let (key, scale) = if name == ALPHA {
            (Key::Sigma, ALPHA_PER_SIGMA)
        } else {
            let key = Key::named(name).ok_or_else(|| self.unknown(name, place))?;
            (key, 1.0)
        };
        let info = key.info();
        if !info.section.serves(self.kind) {
            return Err(ProfileError::UnknownKey {
                place: place.to_owned(),
                key: name.to_owned(),
                expected: format!("a key of a {} writer", self.kind.name()),
            });
        }
        let (value, plus_minus) = (number.value / scale, number.plus_minus / scale);
        // A comparison that `nan` fails.
        let holds = value - plus_minus >= info.least
            && value + plus_minus <= info.greatest
            && plus_minus >= 0.0
            && !(key.is_count() && (value.fract() != 0.0 || plus_minus != 0.0));
        if !holds {
            let found = if number.plus_minus == 0.0 {
                number.value.to_string()
            } else {
                format!("{} ± {}", number.value, number.plus_minus)
            };
            return Err(ProfileError::Value {
                place: place.to_owned(),
                key: name.to_owned(),
                found,
                expected: if name == ALPHA {
                    format!("{} for σ = α/√2", key.expected())
                } else {
                    key.expected()
                },
            });
        }
        self.numbers.insert(key, Number { value, plus_minus });
        Ok(())
    }

    fn unknown(&self, name: &str, place: &str) -> ProfileError {
        let expected = match Key::with_the_stem_of(name) {
            Some(key) if key.info().section.serves(self.kind) => format!("`{key}`"),
            _ => {
                let names: Vec<_> = Key::ALL
                    .iter()
                    .filter(|k| k.info().section.serves(self.kind))
                    .map(ToString::to_string)
                    .collect();
                format!("one of {}", names.join(", "))
            }
        };
        ProfileError::UnknownKey {
            place: place.to_owned(),
            key: name.to_owned(),
            expected,
        }
    }

    /// What is missing, and values that cannot hold together, each with the key at fault.
    fn faults(&self, place: &dyn Fn(Key) -> String) -> Vec<(Key, ProfileError)> {
        let mut faults = Vec::new();
        for &key in Key::ALL {
            let info = key.info();
            if info.need == Need::Required
                && info.section.serves(self.kind)
                && !self.numbers.contains_key(&key)
            {
                let missing = ProfileError::Missing {
                    place: place(key),
                    key: info.name,
                    section: info.section.header(),
                    expected: key.expected(),
                };
                faults.push((key, missing));
            }
        }
        if let Some(address) = self.value(Key::Address)
            && AddressUnit::new(Nm(address)).is_err()
        {
            let uneven = ProfileError::Value {
                place: place(Key::Address),
                key: Key::Address.to_string(),
                found: address.to_string(),
                expected: "a whole number of picometres, in nm".to_owned(),
            };
            faults.push((Key::Address, uneven));
        }
        let mut contradiction = |key: Key, other: String| {
            let fault = ProfileError::Contradiction {
                place: place(key),
                key: key.info().name,
                found: self.plain(key).to_string(),
                other,
            };
            faults.push((key, fault));
        };
        for (small, large) in [
            (Key::LeastSide, Key::GreatestSide),
            (Key::Subfield, Key::Stripe),
        ] {
            if let (Some(least), Some(greatest)) = (self.value(small), self.value(large))
                && least > greatest
            {
                contradiction(small, format!("`{large}` {greatest}"));
            }
        }
        for (here, there) in [
            (Key::FoggingEta, Key::FoggingRadius),
            (Key::FoggingRadius, Key::FoggingEta),
        ] {
            if self.value(here).is_some() && self.value(there).is_none() {
                contradiction(here, format!("the absence of `{there}`"));
            }
        }
        faults
    }
}

/// The other way to state σ.
const ALPHA: &str = "alpha_nm";

impl Serialize for Profile {
    /// In the form of the files: `toml::to_string` of a profile parses to an equal one.
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        #[derive(Serialize)]
        struct Writer<'a> {
            kind: Kind,
            #[serde(flatten)]
            numbers: BTreeMap<&'static str, &'a Number>,
        }
        #[derive(Serialize)]
        struct Process<'a> {
            #[serde(flatten)]
            numbers: BTreeMap<&'static str, &'a Number>,
            #[serde(skip_serializing_if = "<[_]>::is_empty")]
            backscatter: &'a [Backscatter],
        }
        let numbers_of = |section: &str| {
            self.numbers
                .iter()
                .filter(|(key, _)| key.info().section.name() == section)
                .map(|(key, number)| (key.info().name, number))
                .collect()
        };
        let mut profile = serializer.serialize_struct("Profile", 4)?;
        profile.serialize_field("name", &self.name)?;
        profile.serialize_field("about", &self.about)?;
        profile.serialize_field(
            "writer",
            &Writer {
                kind: self.kind,
                numbers: numbers_of("writer"),
            },
        )?;
        profile.serialize_field(
            "process",
            &Process {
                numbers: numbers_of("process"),
                backscatter: &self.backscatter,
            },
        )?;
        profile.end()
    }
}
