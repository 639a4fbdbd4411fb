//! Arguments that several commands share: which part of which layout, the limits of a writer, numbers of a profile.

use std::path::{Path, PathBuf};

use clap::{Arg, ArgMatches, Args, Command, FromArgMatches};
use serde::{Deserialize, Serialize};

use crate::blur::Blur;
use crate::fracture::DoseLevels;
use crate::layout::{self, Layout};
use crate::mask::{Expose, Mask, MaskOptions};
use crate::profile::{Key, Profile, ProfileErrors};
use crate::quote::{Chosen, QuoteError, Setup};
use crate::shot::{AddressUnit, ShotLimits};
use crate::units::{Dose, Nm};

use super::CliError;
use super::values::{
    ExposeArg, Finite, LayerName, Levels, PeakDose, PlaceNm, Positive, RectNm, Share, not_negative,
    positive, stray,
};

/// Which part of which layout: flags of every command that reads one, and the keys of a `[[clip]]` in a job file.
#[derive(Args, Clone, Debug, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct LayoutArgs {
    /// Layout to read: GDSII (also gzip-compressed), OASIS, or WKT (polygons in nm); told by its content.
    pub(super) layout: PathBuf,
    /// What reports call it, in job files; its path unless given.
    #[arg(skip)]
    pub(super) name: Option<String>,
    /// The share of the field that copies of it fill, in job files.
    #[arg(skip)]
    pub(super) coverage: Option<Share>,
    /// CRC-32 of its bytes, in job files; refused if it is another.
    #[arg(skip)]
    pub(super) crc32: Option<u32>,
    /// Layer to take, as layer/datatype; repeat to unite several. Default: the only layer there is.
    #[arg(long, value_name = "L/D")]
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) layer: Vec<LayerName>,
    /// Mask length per layout length: 4 for wafer-scale data of a 4:1 mask. Default: 1.
    #[arg(long, value_name = "K", allow_negative_numbers = true)]
    pub(super) scale: Option<Positive>,
    /// Layer to subtract, as layer/datatype; repeat for several.
    #[arg(long, value_name = "L/D", help_heading = TRANSFER)]
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) minus: Vec<LayerName>,
    /// Mirror about the y axis (x becomes -x), as a mask seen from its other side.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true", help_heading = TRANSFER)]
    pub(super) mirror: Option<bool>,
    /// Then move by this, nm at mask scale. Default: 0,0.
    #[arg(long, value_name = "X,Y", allow_hyphen_values = true, help_heading = TRANSFER)]
    pub(super) shift_nm: Option<PlaceNm>,
    /// Move every drawn edge outward from what is exposed, nm; inward if negative. Default: 0.
    #[arg(long, value_name = "NM", allow_negative_numbers = true, help_heading = TRANSFER)]
    pub(super) bias_nm: Option<Finite>,
    /// What is exposed. Default: figures.
    #[arg(long, value_enum, help_heading = TRANSFER)]
    pub(super) expose: Option<ExposeArg>,
    /// Frame whose background is exposed, two corners in nm at mask scale.
    #[arg(long, value_name = "X0,Y0,X1,Y1", allow_hyphen_values = true, help_heading = TRANSFER)]
    pub(super) frame: Option<RectNm>,
    /// Take only what lies in this window, cut at its border; two corners in nm at mask scale.
    #[arg(long, value_name = "X0,Y0,X1,Y1", allow_hyphen_values = true, help_heading = TRANSFER)]
    pub(super) window: Option<RectNm>,
    /// Refuse a polygon that needs repair instead of repairing it.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true", help_heading = TRANSFER)]
    pub(super) strict: Option<bool>,
}

const TRANSFER: &str = "How the layout goes onto the mask, in this order";

impl LayoutArgs {
    /// What is taken; reach and address unit are left to who knows the blur and the writer.
    pub(super) fn options(&self) -> Result<MaskOptions, CliError> {
        let frame = self.frame.and_then(RectNm::rect);
        let expose = match (self.expose.unwrap_or_default(), frame) {
            (ExposeArg::Figures, None) => Expose::Figures,
            (ExposeArg::Background, Some(frame)) => Expose::Background { frame },
            (ExposeArg::Background, None) => {
                return Err(CliError::Arguments(
                    "--expose background needs a --frame, expected two corners in nm".to_owned(),
                ));
            }
            (ExposeArg::Figures, Some(_)) => {
                return Err(CliError::Arguments(
                    "--frame is for --expose background".to_owned(),
                ));
            }
        };
        let layers = |names: &[LayerName]| names.iter().map(|name| name.0).collect();
        Ok(MaskOptions {
            layers: layers(&self.layer),
            minus: layers(&self.minus),
            scale: self.scale(),
            mirror: self.mirror.unwrap_or(false),
            shift: self.shift_nm.map(PlaceNm::point).unwrap_or_default(),
            bias: Nm(self.bias_nm.map_or(0.0, |Finite(nm)| nm)),
            expose,
            window: self.window.and_then(RectNm::rect),
            strict: self.strict.unwrap_or(false),
            ..MaskOptions::new(Nm(0.0), AddressUnit::FINEST)
        })
    }

    /// Mask length per layout length.
    pub(super) fn scale(&self) -> f64 {
        self.scale.map_or(1.0, |Positive(scale)| scale)
    }

    /// What this says, and where it says nothing what a file says; the layout is that of the file.
    pub(super) fn over(&self, file: &Self) -> Self {
        let list = |own: &Vec<LayerName>, other: &Vec<LayerName>| {
            if own.is_empty() { other } else { own }.clone()
        };
        Self {
            layout: file.layout.clone(),
            name: file.name.clone(),
            coverage: self.coverage.or(file.coverage),
            crc32: file.crc32,
            layer: list(&self.layer, &file.layer),
            scale: self.scale.or(file.scale),
            minus: list(&self.minus, &file.minus),
            mirror: self.mirror.or(file.mirror),
            shift_nm: self.shift_nm.or(file.shift_nm),
            bias_nm: self.bias_nm.or(file.bias_nm),
            expose: self.expose.or(file.expose),
            frame: self.frame.or(file.frame),
            window: self.window.or(file.window),
            strict: self.strict.or(file.strict),
        }
    }

    /// Its name for messages.
    pub(super) fn file(&self) -> String {
        let path = || self.layout.display().to_string();
        self.name.clone().unwrap_or_else(path)
    }

    /// Reads it and tells what was repaired.
    pub(super) fn open(&self) -> Result<Layout, CliError> {
        let layout = layout::open(&self.layout)?;
        for note in &layout.notes {
            eprintln!("note: {}: {note}", self.file());
        }
        Ok(layout)
    }
}

/// A layout under a blur and the limits of a writer: what `fracture` and `judge` need.
#[derive(Debug, Args)]
pub(super) struct SetupArgs {
    #[command(flatten)]
    pub(super) layout: LayoutArgs,
    /// Standard deviation of the blur, nm.
    #[arg(long, value_name = "NM", value_parser = positive, allow_negative_numbers = true)]
    sigma_nm: f64,
    /// How far the printed contour may stray from the drawn outline, nm.
    #[arg(long, value_name = "NM", default_value_t = 2.0, value_parser = stray, allow_negative_numbers = true)]
    pub(super) tolerance_nm: f64,
    #[command(flatten)]
    limits: LimitArgs,
}

/// What [`SetupArgs`] ask, checked before the layout is read.
pub(super) struct SetupPlan {
    pub(super) setup: Setup,
    options: MaskOptions,
    /// The layout's name for messages.
    pub(super) name: String,
}

impl SetupArgs {
    pub(super) fn plan(&self) -> Result<SetupPlan, CliError> {
        Ok(SetupPlan {
            setup: Setup {
                blur: Blur::new(Nm(self.sigma_nm))
                    .map_err(|error| CliError::Arguments(format!("--sigma-nm: {error}")))?,
                tolerance: Nm(self.tolerance_nm),
                limits: self.limits.limits()?,
            },
            options: self.layout.options()?,
            name: self.layout.file(),
        })
    }

    /// Reads the layout and makes the mask, which holds a figure.
    pub(super) fn mask(&self, plan: &SetupPlan) -> Result<Mask, CliError> {
        let layout = self.layout.open()?;
        let chosen = Chosen {
            name: &plan.name,
            layout: &layout,
            options: &plan.options,
        };
        mask(&chosen, &plan.setup)
    }
}

/// The mask of what was chosen, which holds a figure.
pub(super) fn mask(chosen: &Chosen<'_>, setup: &Setup) -> Result<Mask, CliError> {
    let mask = chosen
        .mask(setup)
        .map_err(|cause| CliError::mask(chosen.name, cause))?;
    if mask.figures.is_empty() {
        return Err(CliError::Quote {
            file: chosen.name.to_owned(),
            cause: QuoteError::NoFigure,
        });
    }
    Ok(mask)
}

/// What a writer can flash, without a profile.
#[derive(Debug, Args)]
struct LimitArgs {
    /// Least side of a shot, nm.
    #[arg(long, value_name = "NM", default_value_t = 10.0, value_parser = positive, allow_negative_numbers = true)]
    min_side_nm: f64,
    /// Greatest side of a shot, nm.
    #[arg(long, value_name = "NM", default_value_t = 1000.0, value_parser = positive, allow_negative_numbers = true)]
    max_side_nm: f64,
    /// A shot whose short side is under this is counted as a sliver, nm.
    #[arg(long, value_name = "NM", default_value_t = 20.0, value_parser = not_negative, allow_negative_numbers = true)]
    sliver_nm: f64,
    /// Address unit: all shot sides lie on multiples of it, nm.
    #[arg(long, value_name = "NM", default_value_t = 0.1, value_parser = positive, allow_negative_numbers = true)]
    address_nm: f64,
}

impl LimitArgs {
    fn limits(&self) -> Result<ShotLimits, CliError> {
        if self.min_side_nm > self.max_side_nm {
            return Err(CliError::Arguments(format!(
                "--min-side-nm is {}, expected at most the {} of --max-side-nm",
                self.min_side_nm, self.max_side_nm
            )));
        }
        Ok(ShotLimits {
            address: AddressUnit::new(Nm(self.address_nm))?,
            least_side: Nm(self.min_side_nm),
            greatest_side: Nm(self.max_side_nm),
            sliver: Nm(self.sliver_nm),
        })
    }
}

/// What the doses of the overlap fracture may be.
#[derive(Debug, Args)]
pub(super) struct DoseArgs {
    /// No place may get more dose than this multiple of dose-to-size, 1 or more, from the shots of the overlap fracture: costs shots.
    /// Default: no limit.
    #[arg(long, value_name = "D", allow_negative_numbers = true)]
    peak_dose: Option<PeakDose>,
    /// Doses that a shot of the overlap fracture may have, multiples of dose-to-size, as 0.8,1,1.2. Default: 1.
    #[arg(long, value_name = "D,D,...", allow_hyphen_values = true)]
    dose_levels: Option<Levels>,
}

impl DoseArgs {
    /// The limit, if there is one.
    pub(super) fn peak(&self) -> Option<Dose> {
        self.peak_dose.map(|PeakDose(dose)| Dose(dose))
    }

    /// The levels.
    pub(super) fn levels(&self) -> DoseLevels {
        self.dose_levels
            .map(|Levels(levels)| levels)
            .unwrap_or_default()
    }

    /// The option that was given, if one was.
    pub(super) fn given(&self) -> Option<&'static str> {
        let peak = self.peak_dose.map(|_| "--peak-dose");
        peak.or(self.dose_levels.map(|_| "--dose-levels"))
    }
}

/// Numbers of a profile given on the command line, by their keys in files.
#[derive(Clone, Debug, Default)]
pub(super) struct Overrides(pub(super) Vec<(&'static str, f64)>);

impl Overrides {
    /// The profile of a name or file with the overrides in.
    pub(super) fn profile(&self, name: &str) -> Result<Profile, CliError> {
        let mut profile = open_profile(name)?;
        profile.set_all(self.0.iter().copied())?;
        Ok(profile)
    }

    /// Whether a number was given.
    pub(super) fn has(&self, key: Key) -> bool {
        self.0.iter().any(|(name, _)| *name == key.info().name)
    }
}

/// A built-in profile by its name, else a file.
pub(super) fn open_profile(name: &str) -> Result<Profile, CliError> {
    let builtin = Profile::builtins().any(|builtin| builtin == name);
    if builtin || !Path::new(name).exists() {
        return Ok(Profile::builtin(name)?);
    }
    let text = std::fs::read_to_string(name).map_err(|cause| CliError::File {
        file: name.to_owned(),
        cause,
    })?;
    Profile::parse(&text, name).map_err(|errors: ProfileErrors| errors.into())
}

impl FromArgMatches for Overrides {
    fn from_arg_matches(matches: &ArgMatches) -> Result<Self, clap::Error> {
        let given = Key::ALL.iter().filter_map(|key| {
            let name = key.info().name;
            Some((name, *matches.get_one::<f64>(name)?))
        });
        Ok(Self(given.collect()))
    }

    fn update_from_arg_matches(&mut self, matches: &ArgMatches) -> Result<(), clap::Error> {
        *self = Self::from_arg_matches(matches)?;
        Ok(())
    }
}

impl Args for Overrides {
    fn augment_args(command: Command) -> Command {
        Key::ALL
            .iter()
            .fold(command, |command, &key| command.arg(argument(key)))
    }

    fn augment_args_for_update(command: Command) -> Command {
        Self::augment_args(command)
    }
}

/// `settle_ns` as `--settle-ns <NS>`.
fn argument(key: Key) -> Arg {
    let info = key.info();
    let value = if info.unit.is_empty() { "N" } else { info.unit };
    let parse = move |text: &str| {
        let within = |x: &f64| (info.least..=info.greatest).contains(x);
        let whole = |x: &f64| !key.is_count() || x.fract() == 0.0;
        text.parse()
            .ok()
            .map(|Finite(x)| x)
            .filter(within)
            .filter(whole)
            .ok_or_else(|| format!("expected {}", key.expected()))
    };
    let arg = Arg::new(info.name)
        .long(info.name.replace('_', "-"))
        .value_name(value)
        .help(info.meaning)
        .help_heading("Numbers of the profile, each in place of the profile's own")
        .hide_short_help(true)
        .allow_negative_numbers(true)
        .value_parser(parse);
    match key {
        Key::LeastSide => arg.visible_alias("min-side-nm"),
        Key::GreatestSide => arg.visible_alias("max-side-nm"),
        _ => arg,
    }
}
