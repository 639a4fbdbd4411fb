//! Counts beyond 64 bits.

use std::fmt;

use serde::de::{self, Deserializer, Visitor};
use serde::{Deserialize, Serialize, Serializer};

/// A count that may exceed 64 bits: in JSON a number if it fits 64 bits, else a string of digits.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Count(pub u128);

impl fmt::Display for Count {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl Count {
    /// The nearest to a sum of weighted counts; 0 under 0, the greatest if beyond.
    #[must_use]
    pub fn rounded(sum: f64) -> Self {
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a float to integer cast saturates"
        )]
        let count = sum.round() as u128;
        Self(count)
    }
}

impl From<u64> for Count {
    fn from(n: u64) -> Self {
        Self(n.into())
    }
}

impl Serialize for Count {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match u64::try_from(self.0) {
            Ok(n) => serializer.serialize_u64(n),
            Err(_) => serializer.collect_str(self),
        }
    }
}

impl<'de> Deserialize<'de> for Count {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Digits;
        impl Visitor<'_> for Digits {
            type Value = Count;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a count, as a whole number or a string of digits")
            }
            fn visit_u64<E: de::Error>(self, n: u64) -> Result<Count, E> {
                Ok(n.into())
            }
            fn visit_str<E: de::Error>(self, s: &str) -> Result<Count, E> {
                s.parse()
                    .map(Count)
                    .map_err(|_| E::invalid_value(de::Unexpected::Str(s), &self))
            }
        }
        deserializer.deserialize_any(Digits)
    }
}
