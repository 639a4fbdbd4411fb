//! Every number a profile may hold: its key, unit, bounds and meaning. The one table that files, flags and help share.

use std::fmt;

use super::Kind;

/// Whether a number must be stated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Need {
    /// Refused without it.
    Required,
    /// This unless stated.
    Default(f64),
    /// Its effect is left out unless stated.
    Optional,
}

/// The TOML table a number stands in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Section {
    /// `[writer]`, for these kinds of writer.
    Writer(&'static [Kind]),
    /// `[process]`.
    Process,
}

impl Section {
    /// Its name in the file.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Writer(_) => "writer",
            Self::Process => "process",
        }
    }

    /// The name as it heads the table.
    #[must_use]
    pub const fn header(self) -> &'static str {
        match self {
            Self::Writer(_) => "[writer]",
            Self::Process => "[process]",
        }
    }

    /// Whether a writer of this kind has the number.
    #[must_use]
    pub fn serves(self, kind: Kind) -> bool {
        match self {
            Self::Writer(kinds) => kinds.contains(&kind),
            Self::Process => true,
        }
    }
}

const SHAPED: Section = Section::Writer(&[Kind::Shaped]);
const RASTER: Section = Section::Writer(&[Kind::Raster]);
const WRITER: Section = Section::Writer(&[Kind::Shaped, Kind::Raster]);
const PROCESS: Section = Section::Process;

/// What is known of a [`Key`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct KeyInfo {
    /// As written in files; flags put dashes for its underscores.
    pub name: &'static str,
    /// Where it stands.
    pub section: Section,
    /// Unit for display; empty for a pure number.
    pub unit: &'static str,
    /// Least value accepted.
    pub least: f64,
    /// Greatest value accepted.
    pub greatest: f64,
    /// Whether it must be stated.
    pub need: Need,
    /// One line for help.
    pub meaning: &'static str,
}

macro_rules! keys {
    ($($key:ident = $name:literal, $section:ident, $unit:literal, $least:literal ..= $greatest:literal, $need:expr, $meaning:literal;)*) => {
        /// A number of a profile.
        #[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
        pub enum Key { $(#[doc = $meaning] $key),* }

        impl Key {
            /// All, in the order of the files.
            pub const ALL: &'static [Self] = &[$(Self::$key),*];

            /// Its row of the table.
            #[must_use]
            pub const fn info(self) -> KeyInfo {
                match self {
                    $(Self::$key => KeyInfo {
                        name: $name, section: $section, unit: $unit, least: $least, greatest: $greatest,
                        need: $need, meaning: $meaning,
                    }),*
                }
            }
        }
    };
}

use Need::{Default, Optional, Required};

keys! {
    Passes = "passes", WRITER, "", 1.0..=64.0, Default(1.0), "complete writings of the mask that share its dose";
    PassShift = "pass_shift", WRITER, "stripe", 0.0..=1.0, Default(0.0), "shift of the stripe grid from pass to pass, as a part of a stripe";
    Current = "current_a_cm2", SHAPED, "A/cm²", 1e-3..=1e5, Required, "beam current density";
    Settle = "settle_ns", SHAPED, "ns", 0.0..=1e9, Default(0.0), "settling time before each flash";
    SettlePerJump = "settle_ns_per_um_jump", SHAPED, "ns/µm", 0.0..=1e6, Default(0.0), "further settling time per length of the jump from the flash before";
    SettlePerSide = "settle_ns_per_um_side", SHAPED, "ns/µm", 0.0..=1e6, Default(0.0), "further settling time per length of the shot's greater side";
    Subfield = "subfield_um", SHAPED, "µm", 1.0..=1e5, Optional, "side of a sub-field, what the fast deflector reaches";
    SubfieldTime = "subfield_us", SHAPED, "µs", 0.0..=1e9, Default(0.0), "time to move on to the next sub-field";
    ShortestFlash = "shortest_flash_ns", SHAPED, "ns", 0.0..=1e9, Optional, "flashes shorter than this are reported as not writable";
    GreatestFlash = "greatest_flash_uc_cm2", SHAPED, "µC/cm²", 1e-3..=1e6, Optional, "greatest dose of one flash; a shot that needs more is flashed repeatedly";
    GreatestBeam = "greatest_beam_na", SHAPED, "nA", 1e-3..=1e9, Optional, "greatest beam current; a shot too large for it is cut";
    Address = "address_nm", SHAPED, "nm", 1e-3..=100.0, Default(1.0), "address unit: every shot side lies on a multiple of it";
    LeastSide = "least_side_nm", SHAPED, "nm", 1e-3..=1e5, Default(10.0), "least side of a shot";
    GreatestSide = "greatest_side_nm", SHAPED, "nm", 1.0..=1e6, Default(1000.0), "greatest side of a shot";
    Sliver = "sliver_nm", SHAPED, "nm", 0.0..=1e5, Default(20.0), "a shot whose short side is under this is a sliver";
    EdgeSd = "shot_edge_sd_nm", SHAPED, "nm", 0.0..=1e3, Optional, "standard deviation of the place of a shot's edge, for the error budget";
    DoseSd = "shot_dose_sd_pct", SHAPED, "%", 0.0..=100.0, Optional, "standard deviation of the dose of a shot, for the error budget";
    Beam = "beam_na", RASTER, "nA", 1e-3..=1e9, Required, "current of all beams together";
    Stripe = "stripe_um", WRITER, "µm", 1.0..=1e5, Optional, "width of a stripe; the whole field is one stripe unless stated";
    Stage = "stage_mm_s", WRITER, "mm/s", 1e-3..=1e5, Optional, "greatest stage speed; no bound unless stated";
    Turn = "turn_s", WRITER, "s", 0.0..=3600.0, Default(0.0), "time to turn the stage from stripe to stripe";
    CalibrationEvery = "calibration_every_min", WRITER, "min", 0.01..=1e6, Optional, "writing time between calibrations; none unless stated";
    Calibration = "calibration_s", WRITER, "s", 0.0..=1e6, Default(0.0), "duration of one calibration";
    Load = "load_min", WRITER, "min", 0.0..=1e5, Default(0.0), "time to load the plate";
    Soak = "soak_min", WRITER, "min", 0.0..=1e5, Default(0.0), "time for the plate to reach the stage's temperature";
    Align = "align_min", WRITER, "min", 0.0..=1e5, Default(0.0), "time to align the plate";
    Unload = "unload_min", WRITER, "min", 0.0..=1e5, Default(0.0), "time to unload the plate";
    Sigma = "sigma_nm", PROCESS, "nm", 0.01..=1e5, Optional, "standard deviation of the short-range blur";
    BaseDose = "base_dose_uc_cm2", PROCESS, "µC/cm²", 1e-3..=1e6, Required, "charge per area at dose 1";
    FoggingEta = "fogging_eta", PROCESS, "", 0.0..=10.0, Optional, "fogging: its energy over that of the forward beam";
    FoggingRadius = "fogging_radius_mm", PROCESS, "mm", 1e-3..=1e3, Optional, "fogging: its 1/e radius";
}

impl Key {
    /// The key of this name.
    #[must_use]
    pub fn named(name: &str) -> Option<Self> {
        Self::ALL.iter().copied().find(|k| k.info().name == name)
    }

    /// The key that states the same quantity in another unit: equal up to the unit endings.
    #[must_use]
    pub(super) fn with_the_stem_of(name: &str) -> Option<Self> {
        let stem = |name: &str| -> String {
            name.split('_')
                .take_while(|part| !UNIT_WORDS.contains(part))
                .collect::<Vec<_>>()
                .join("_")
        };
        let sought = stem(name);
        Self::ALL
            .iter()
            .copied()
            .find(|k| stem(k.info().name) == sought)
    }

    /// Counts take whole numbers only.
    #[must_use]
    pub fn is_count(self) -> bool {
        self == Self::Passes
    }

    /// What [`Key`] accepts, in words.
    #[must_use]
    pub fn expected(self) -> String {
        let KeyInfo {
            least,
            greatest,
            unit,
            ..
        } = self.info();
        let number = if self.is_count() {
            "a whole number"
        } else {
            "a number"
        };
        let unit = if unit.is_empty() {
            String::new()
        } else {
            format!(" {unit}")
        };
        format!("{number} from {least} to {greatest}{unit}")
    }
}

/// Words that end a key and name a unit.
const UNIT_WORDS: &[&str] = &[
    "pm", "nm", "um", "mm", "cm", "m", "ps", "ns", "us", "ms", "s", "min", "h", "a", "ma", "ua",
    "na", "uc", "mc", "per",
];

impl fmt::Display for Key {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.info().name)
    }
}
