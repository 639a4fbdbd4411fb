//! What can be wrong with a profile.

use super::Profile;

/// What is wrong with a profile; `place` is `file:line`, or what the caller named.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum ProfileError {
    /// Not TOML at all.
    #[error("{place}: {message}")]
    Syntax {
        /// Where.
        place: String,
        /// What the TOML reader says.
        message: String,
    },
    /// A key nobody reads.
    #[error("{place}: unknown key `{key}`, expected {expected}")]
    UnknownKey {
        /// Where.
        place: String,
        /// The key.
        key: String,
        /// The keys there are, or the one that states this quantity.
        expected: String,
    },
    /// A value of the wrong type, not finite, or out of bounds.
    #[error("{place}: `{key}` is {found}, expected {expected}")]
    Value {
        /// Where.
        place: String,
        /// The key.
        key: String,
        /// As found.
        found: String,
        /// What it accepts.
        expected: String,
    },
    /// A key that must be stated is not.
    #[error("{place}: `{key}` is missing from {section}, expected {expected}")]
    Missing {
        /// Where.
        place: String,
        /// The key.
        key: &'static str,
        /// Its table, as `[writer]`.
        section: &'static str,
        /// What it accepts.
        expected: String,
    },
    /// Values that cannot hold together.
    #[error("{place}: `{key}` is {found}, which contradicts {other}")]
    Contradiction {
        /// Where.
        place: String,
        /// The key.
        key: &'static str,
        /// As found.
        found: String,
        /// The other value, in words.
        other: String,
    },
    /// No built-in profile of this name.
    #[error("no built-in profile `{found}`, expected one of {}", Profile::builtins().collect::<Vec<_>>().join(", "))]
    NoBuiltin {
        /// The name asked for.
        found: String,
    },
}

/// All that is wrong with a profile, in the order of the file; one line each.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[error("{}", .0.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n"))]
pub struct ProfileErrors(pub Vec<ProfileError>);
