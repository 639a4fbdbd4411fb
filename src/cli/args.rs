//! Arguments that several commands share, and the parsers of their values.

use std::path::{Path, PathBuf};

use clap::{Arg, ArgMatches, Args, Command, FromArgMatches, ValueEnum};

use crate::fracture::Effort;
use crate::fracture::overlap::DoseLevels;
use crate::geom::{Point, Rect};
use crate::layout::{self, Layer, Layout};
use crate::mask::{Expose, Mask, MaskOptions};
use crate::profile::{Key, Profile, ProfileErrors};
use crate::quote::{Chosen, QuoteError, Setup};
use crate::shot::{AddressUnit, ShotLimits};
use crate::units::{Dose, Nm};
use crate::write_time::Field;

use super::CliError;

/// Which part of which layout.
#[derive(Debug, Args)]
pub(super) struct LayoutArgs {
    /// Layout to read: GDSII (also gzip-compressed), OASIS, or WKT (polygons in nm); told by its content.
    pub(super) layout: PathBuf,
    /// Layer to take, as layer/datatype; repeat to unite several. Default: the only layer there is.
    #[arg(long = "layer", value_name = "L/D", value_parser = layer)]
    pub(super) layers: Vec<Layer>,
    /// Mask length per layout length: 4 for wafer-scale data of a 4:1 mask.
    #[arg(long, value_name = "K", default_value_t = 1.0, value_parser = positive, allow_negative_numbers = true)]
    pub(super) scale: f64,
    /// Layer to subtract, as layer/datatype; repeat for several.
    #[arg(long, value_name = "L/D", value_parser = layer, help_heading = TRANSFER)]
    minus: Vec<Layer>,
    /// Mirror about the y axis (x becomes -x), as a mask seen from its other side.
    #[arg(long, help_heading = TRANSFER)]
    mirror: bool,
    /// Then move by this, nm at mask scale.
    #[arg(long, value_name = "X,Y", value_parser = place, allow_hyphen_values = true, help_heading = TRANSFER)]
    shift_nm: Option<Point>,
    /// Move every drawn edge outward from what is exposed, nm; inward if negative.
    #[arg(long, value_name = "NM", default_value_t = 0.0, value_parser = number, allow_negative_numbers = true, help_heading = TRANSFER)]
    bias_nm: f64,
    /// What is exposed.
    #[arg(long, value_enum, default_value_t, help_heading = TRANSFER)]
    expose: ExposeArg,
    /// Frame whose background is exposed, two corners in nm at mask scale.
    #[arg(long, value_name = "X0,Y0,X1,Y1", value_parser = rectangle, allow_hyphen_values = true, required_if_eq("expose", "background"), help_heading = TRANSFER)]
    frame: Option<Rect>,
    /// Take only what lies in this window, cut at its border; two corners in nm at mask scale.
    #[arg(long, value_name = "X0,Y0,X1,Y1", value_parser = rectangle, allow_hyphen_values = true, help_heading = TRANSFER)]
    window: Option<Rect>,
    /// Refuse a polygon that needs repair instead of repairing it.
    #[arg(long, help_heading = TRANSFER)]
    strict: bool,
}

const TRANSFER: &str = "How the layout goes onto the mask, in this order";

/// What is exposed.
#[derive(Clone, Copy, Debug, Default, ValueEnum)]
enum ExposeArg {
    /// What is drawn.
    #[default]
    Figures,
    /// What is not drawn of the --frame.
    Background,
}

impl LayoutArgs {
    /// What is taken; reach and address unit are left to who knows the blur and the writer.
    pub(super) fn options(&self) -> Result<MaskOptions, CliError> {
        let expose = match (self.expose, self.frame) {
            (ExposeArg::Figures, None) => Expose::Figures,
            (ExposeArg::Background, Some(frame)) => Expose::Background { frame },
            (ExposeArg::Background, None) | (ExposeArg::Figures, Some(_)) => {
                return Err(CliError::Arguments(
                    "--frame is for --expose background".to_owned(),
                ));
            }
        };
        Ok(MaskOptions {
            layers: self.layers.clone(),
            minus: self.minus.clone(),
            scale: self.scale,
            mirror: self.mirror,
            shift: self.shift_nm.unwrap_or_default(),
            bias: Nm(self.bias_nm),
            expose,
            window: self.window,
            strict: self.strict,
            ..MaskOptions::new(Nm(0.0), AddressUnit::FINEST)
        })
    }

    /// Its name for messages.
    pub(super) fn file(&self) -> String {
        self.layout.display().to_string()
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
pub(super) struct LimitArgs {
    /// Least side of a shot, nm.
    #[arg(long, value_name = "NM", default_value_t = 10.0, value_parser = positive, allow_negative_numbers = true)]
    pub(super) min_side_nm: f64,
    /// Greatest side of a shot, nm.
    #[arg(long, value_name = "NM", default_value_t = 1000.0, value_parser = positive, allow_negative_numbers = true)]
    pub(super) max_side_nm: f64,
    /// A shot whose short side is under this is counted as a sliver, nm.
    #[arg(long, value_name = "NM", default_value_t = 20.0, value_parser = not_negative, allow_negative_numbers = true)]
    pub(super) sliver_nm: f64,
    /// Address unit: all shot sides lie on multiples of it, nm.
    #[arg(long, value_name = "NM", default_value_t = 0.1, value_parser = positive, allow_negative_numbers = true)]
    pub(super) address_nm: f64,
}

impl LimitArgs {
    pub(super) fn limits(&self) -> Result<ShotLimits, CliError> {
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
    #[arg(long, value_name = "D", value_parser = peak, allow_negative_numbers = true)]
    pub(super) peak_dose: Option<f64>,
    /// Doses that a shot of the overlap fracture may have, multiples of dose-to-size, as 0.8,1,1.2. Default: 1.
    #[arg(long, value_name = "D,D,...", value_parser = levels, allow_hyphen_values = true)]
    dose_levels: Option<DoseLevels>,
}

impl DoseArgs {
    /// The limit, if there is one.
    pub(super) fn peak(&self) -> Option<Dose> {
        self.peak_dose.map(Dose)
    }

    /// The levels.
    pub(super) fn levels(&self) -> DoseLevels {
        self.dose_levels.unwrap_or_default()
    }

    /// The option that was given, if one was.
    pub(super) fn given(&self) -> Option<&'static str> {
        let peak = self.peak_dose.map(|_| "--peak-dose");
        peak.or(self.dose_levels.map(|_| "--dose-levels"))
    }
}

/// How hard to search.
#[derive(Clone, Copy, Debug, Default, ValueEnum)]
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

/// Numbers of a profile given on the command line, by their keys in files.
#[derive(Clone, Debug)]
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
        number(text)
            .ok()
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

fn number(text: &str) -> Result<f64, String> {
    text.parse::<f64>()
        .ok()
        .filter(|x| x.is_finite())
        .ok_or_else(|| "expected a finite number".to_owned())
}

/// A finite number over 0.
pub(super) fn positive(text: &str) -> Result<f64, String> {
    number(text)
        .ok()
        .filter(|x| *x > 0.0)
        .ok_or_else(|| "expected a finite number over 0".to_owned())
}

/// A length by which contours may stray, nm: beyond a thousand it says nothing of a blur.
pub(super) fn stray(text: &str) -> Result<f64, String> {
    number(text)
        .ok()
        .filter(|x| *x > 0.0 && *x <= 1000.0)
        .ok_or_else(|| "expected a number over 0, up to 1000".to_owned())
}

/// A greatest dose: a wide shot alone gives 1.
fn peak(text: &str) -> Result<f64, String> {
    number(text)
        .ok()
        .filter(|x| *x >= 1.0)
        .ok_or_else(|| "expected a finite number of 1 or more".to_owned())
}

/// `0.8,1,1.2`.
fn levels(text: &str) -> Result<DoseLevels, String> {
    let level = |text: &str| number(text.trim()).map(Dose);
    let levels = text.split(',').map(level).collect::<Result<Vec<_>, _>>();
    let levels = levels.map_err(|_| "expected doses as 0.8,1,1.2".to_owned())?;
    DoseLevels::new(&levels).map_err(|error| error.to_string())
}

/// A finite number of 0 or more.
pub(super) fn not_negative(text: &str) -> Result<f64, String> {
    number(text)
        .ok()
        .filter(|x| *x >= 0.0)
        .ok_or_else(|| "expected a finite number of 0 or more".to_owned())
}

/// A share over 0, up to 1.
pub(super) fn share(text: &str) -> Result<f64, String> {
    number(text)
        .ok()
        .filter(|x| *x > 0.0 && *x <= 1.0)
        .ok_or_else(|| "expected a number over 0, up to 1".to_owned())
}

/// `104x132` in millimetres.
pub(super) fn field_mm(text: &str) -> Result<Field, String> {
    let sides = text.split_once(['x', '×']);
    let sides = sides.and_then(|(w, h)| Some((positive(w).ok()?, positive(h).ok()?)));
    let (width, height) = sides.ok_or("expected two lengths over 0 in mm, as 104x132")?;
    Ok(Field {
        width: Nm::from_mm(width),
        height: Nm::from_mm(height),
    })
}

/// `N` lengths in nm, separated by commas, as picometres.
fn lengths<const N: usize>(text: &str) -> Option<[i64; N]> {
    let pm = |text: &str| Nm(number(text.trim()).ok()?).to_pm();
    let all = text.split(',').map(pm).collect::<Option<Vec<_>>>()?;
    all.try_into().ok()
}

/// `100,-50` in nm.
fn place(text: &str) -> Result<Point, String> {
    let [x, y] = lengths(text).ok_or("expected two lengths in nm, as 100,-50")?;
    Ok(Point::new(x, y))
}

/// `0,0,1000,500` in nm.
fn rectangle(text: &str) -> Result<Rect, String> {
    lengths(text)
        .map(|[x0, y0, x1, y1]| Rect::new(Point::new(x0, y0), Point::new(x1, y1)))
        .filter(|rect| rect.width() > 0 && rect.height() > 0)
        .ok_or_else(|| "expected two corners of a rectangle in nm, as 0,0,1000,500".to_owned())
}

/// `1/0`, or `1` for datatype 0.
fn layer(text: &str) -> Result<Layer, String> {
    let (layer, datatype) = text.split_once('/').unwrap_or((text, "0"));
    let number = |text: &str| {
        text.parse()
            .map_err(|_| "expected layer/datatype, two whole numbers as 1/0".to_owned())
    };
    Ok(Layer {
        layer: number(layer)?,
        datatype: number(datatype)?,
    })
}

/// A count, also written as 3e11.
pub(super) fn count(text: &str) -> Result<u128, String> {
    let expected = || "expected a whole number of 0 or more, up to 1e24".to_owned();
    if let Ok(count) = text.parse() {
        return Ok(count);
    }
    let value = number(text).map_err(|_| expected())?;
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
