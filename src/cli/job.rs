//! What a quote is asked for: flags, a job file, or a job file with flags over it, checked into a plan before any work.
//!
//! One struct holds both: every long flag, with `_` for `-`, is a key of the file; flags that say how a layout is taken are keys
//! of a `[[clip]]`, those that override a number of the profile are keys of `[numbers]`. The resolved job has every value spelled
//! out, the profiles included, so that it asks for the same bytes whatever becomes of defaults and profiles.

use std::fs::File;
use std::io::Read;
use std::path::{Component, Path, PathBuf};

use clap::Args;
use serde::de::{self, Deserializer, IgnoredAny, MapAccess, Visitor};
use serde::{Deserialize, Serialize, Serializer};

use crate::layout::Layout;
use crate::mask::MaskOptions;
use crate::profile::{Number, Profile};
use crate::quote::result::{SampleUsed, Stopped};
use crate::quote::sweep::Axis;
use crate::quote::{Chosen, Terms};
use crate::units::{Dose, Hours, Nm};
use crate::write_time::Field;

use super::CliError;
use super::args::{LayoutArgs, Overrides, open_profile};
use super::axis::AxisArg;
use super::output::file_error;
use super::sampling::{Percent, SamplePlan};
use super::values::{EffortArg, FieldMm, Levels, PeakDose, Positive, Share, Stray};

/// What is asked, as flags and as the keys of a job file.
#[derive(Args, Clone, Debug, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct JobArgs {
    /// Hours the writer is booked for.
    #[arg(long, value_name = "H", allow_negative_numbers = true)]
    slot_h: Option<Positive>,
    /// How far the printed contour may stray from the drawn outline, nm. Default: 2.
    #[arg(long, value_name = "NM", allow_negative_numbers = true)]
    pub(super) tolerance_nm: Option<Stray>,
    /// How far the plain staircase may stray from the outline, nm. Default: the tolerance.
    #[arg(long, value_name = "NM", allow_negative_numbers = true)]
    within_nm: Option<Stray>,
    /// How hard to search for fewer shots. Default: normal.
    #[arg(long, value_enum)]
    effort: Option<EffortArg>,
    /// Field that the layout is a clip of, width x height in mm. Default: the layout alone.
    #[arg(long, value_name = "WxH")]
    field_mm: Option<FieldMm>,
    /// No place may get more dose than this multiple of dose-to-size, 1 or more, from the shots of the overlap fracture: costs shots.
    /// Default: no limit.
    #[arg(long, value_name = "D", allow_negative_numbers = true)]
    peak_dose: Option<PeakDose>,
    /// Doses that a shot of the overlap fracture may have, multiples of dose-to-size, as 0.8,1,1.2. Default: 1.
    #[arg(long, value_name = "D,D,...", allow_hyphen_values = true)]
    dose_levels: Option<Levels>,
    /// Fracture only a sample of the figures, drawn at random until shots and beam time are known within this, as 2% (95 % interval).
    #[arg(long, value_name = "P%")]
    within: Option<Percent>,
    /// Fracture a sample of this many distinct figures (30 at least), or fewer if --within is reached.
    #[arg(long, value_name = "N")]
    sample: Option<usize>,
    /// Stop drawing after so many minutes. The result then depends on the clock; it says how to repeat it without.
    #[arg(long, value_name = "MIN", allow_negative_numbers = true)]
    time_limit_min: Option<Positive>,
    /// Another seed, another sample. Default: 1.
    #[arg(long, value_name = "S")]
    seed: Option<u64>,
    /// Flagged figures listed and drawn before the rest is only counted. Default: 10.
    #[arg(long, value_name = "N")]
    flags: Option<usize>,
    /// Directory for the files of the result; made if it is not there. Default: no files.
    #[arg(long, value_name = "DIR")]
    #[serde(skip_serializing)]
    pub(super) out: Option<PathBuf>,
    /// Print JSON.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    #[serde(skip_serializing)]
    pub(super) json: Option<bool>,
    /// Threads, in job files; the flag is one of all commands.
    #[arg(skip)]
    #[serde(skip_serializing)]
    threads: Option<u16>,
    /// Numbers that a sweep changes, in job files; the flag is one of `sweep`.
    #[arg(skip)]
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    over: Vec<AxisArg>,
    #[arg(skip)]
    #[serde(default)]
    clip: Vec<LayoutArgs>,
    /// Read by the profile's own reader, which knows the lines.
    #[arg(skip)]
    #[serde(skip_serializing)]
    numbers: Option<IgnoredAny>,
    /// Writer and process numbers: a built-in name (see `shotwright profile`) or a TOML file. Default: shaped-400.
    #[arg(long, value_name = "NAME|FILE")]
    profile: Option<ProfileChoice>,
    /// Raster multi-beam writer to compare with: a built-in name, a TOML file, or none. Default: raster.
    #[arg(long, value_name = "NAME|FILE|none")]
    raster: Option<ProfileChoice>,
}

/// A layout or a job file, and all that can be said of it.
#[derive(Args, Debug)]
pub(super) struct RequestArgs {
    /// As the layout's own flags; the layout may be a job file (.toml) instead.
    #[command(flatten)]
    layout: LayoutArgs,
    #[command(flatten)]
    job: JobArgs,
    /// Share of the field that is filled with copies of the clip, over 0, up to 1.
    #[arg(long, value_name = "C", allow_negative_numbers = true)]
    coverage: Option<Share>,
    #[command(flatten)]
    numbers: Overrides,
}

/// A profile by name, or written out in the job file.
#[derive(Clone, Debug)]
enum ProfileChoice {
    Named(String),
    /// A table of the file that is not read yet.
    Table,
    Read(Box<Profile>),
}

impl From<String> for ProfileChoice {
    fn from(name: String) -> Self {
        Self::Named(name)
    }
}

impl<'de> Deserialize<'de> for ProfileChoice {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Form;
        impl<'de> Visitor<'de> for Form {
            type Value = ProfileChoice;
            fn expecting(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
                f.write_str("the name of a profile, a file, or a table that holds one")
            }
            fn visit_str<E: de::Error>(self, name: &str) -> Result<ProfileChoice, E> {
                Ok(ProfileChoice::Named(name.to_owned()))
            }
            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<ProfileChoice, A::Error> {
                while map.next_entry::<IgnoredAny, IgnoredAny>()?.is_some() {}
                Ok(ProfileChoice::Table)
            }
        }
        deserializer.deserialize_any(Form)
    }
}

impl Serialize for ProfileChoice {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match self {
            Self::Named(name) => serializer.serialize_str(name),
            Self::Table => serializer.serialize_none(),
            Self::Read(profile) => profile.serialize(serializer),
        }
    }
}

/// What is asked, checked.
pub(super) struct Plan {
    /// With every value spelled out.
    job: JobArgs,
    pub(super) clips: Vec<PlannedClip>,
    pub(super) profile: Profile,
    raster: Option<Profile>,
    pub(super) flags: usize,
    pub(super) out: Option<PathBuf>,
    pub(super) json: bool,
    pub(super) threads: Option<u16>,
}

/// A layout to be read.
pub(super) struct PlannedClip {
    args: LayoutArgs,
    pub(super) options: MaskOptions,
    /// What reports call it.
    pub(super) name: String,
    pub(super) coverage: Option<f64>,
}

impl RequestArgs {
    /// Reads the job file if there is one, puts the flags over it, and checks the whole.
    pub(super) fn plan(&self) -> Result<Plan, CliError> {
        let path = &self.layout.layout;
        let file = if path.extension().is_some_and(|e| e == "toml") {
            Some(JobFile::read(path)?)
        } else {
            None
        };
        let (file, numbers) = file.map_or_else(Default::default, |f| (Some(f.job), f.numbers));
        let flags = LayoutArgs {
            coverage: self.coverage,
            ..self.layout.clone()
        };
        let clips = match &file {
            Some(job) => job.clip.iter().map(|clip| flags.over(clip)).collect(),
            None => vec![flags],
        };
        let job = self.job.over(file.unwrap_or_default());
        Plan::new(job, clips, &numbers, &self.numbers)
    }
}

/// A job file as read.
struct JobFile {
    job: JobArgs,
    /// In place of the profile's own, each with its place.
    numbers: Vec<(String, Number, String)>,
}

impl JobFile {
    fn read(path: &Path) -> Result<Self, CliError> {
        let text = std::fs::read_to_string(path).map_err(|cause| file_error(path, cause))?;
        let source = path.display().to_string();
        let mut job: JobArgs = toml::from_str(&text).map_err(|error| {
            let at = error.span().map_or(0, |span| span.start);
            let line = 1 + text[..at.min(text.len())].matches('\n').count();
            CliError::Job {
                place: format!("{source}:{line}"),
                message: error.message().to_owned(),
            }
        })?;
        if job.clip.is_empty() {
            return Err(CliError::Job {
                place: source,
                message: "no [[clip]], expected one for each layout, with its `layout`".to_owned(),
            });
        }
        let numbers = match job.numbers {
            Some(_) => Profile::numbers_within(&text, &source, "numbers")?,
            None => Vec::new(),
        };
        // Files are named as seen from the job file.
        let here = path.parent().unwrap_or(Path::new(""));
        for clip in &mut job.clip {
            let given = clip.layout.display().to_string();
            clip.name.get_or_insert(given);
            clip.layout = here.join(&clip.layout);
        }
        job.out = job.out.map(|out| here.join(out));
        for (choice, table) in [(&mut job.profile, "profile"), (&mut job.raster, "raster")] {
            match choice {
                Some(ProfileChoice::Table) => {
                    let profile = Profile::parse_within(&text, &source, table)?;
                    *choice = Some(ProfileChoice::Read(Box::new(profile)));
                }
                Some(ProfileChoice::Named(name))
                    if name != NONE && !Profile::builtins().any(|builtin| builtin == name) =>
                {
                    *name = here.join(&*name).display().to_string();
                }
                _ => {}
            }
        }
        Ok(Self { job, numbers })
    }
}

/// Asks for no raster line.
const NONE: &str = "none";

impl JobArgs {
    /// What this says, and where it says nothing what a file says.
    fn over(&self, file: Self) -> Self {
        let own = self.clone();
        Self {
            slot_h: own.slot_h.or(file.slot_h),
            tolerance_nm: own.tolerance_nm.or(file.tolerance_nm),
            within_nm: own.within_nm.or(file.within_nm),
            effort: own.effort.or(file.effort),
            field_mm: own.field_mm.or(file.field_mm),
            peak_dose: own.peak_dose.or(file.peak_dose),
            dose_levels: own.dose_levels.or(file.dose_levels),
            within: own.within.or(file.within),
            sample: own.sample.or(file.sample),
            time_limit_min: own.time_limit_min.or(file.time_limit_min),
            seed: own.seed.or(file.seed),
            flags: own.flags.or(file.flags),
            out: own.out.or(file.out),
            json: own.json.or(file.json),
            threads: file.threads,
            over: file.over,
            clip: Vec::new(),
            numbers: None,
            profile: own.profile.or(file.profile),
            raster: own.raster.or(file.raster),
        }
    }
}

impl ProfileChoice {
    fn open(self) -> Result<Option<Profile>, CliError> {
        Ok(match self {
            Self::Named(name) if name == NONE => None,
            Self::Named(name) => Some(open_profile(&name)?),
            Self::Table => None,
            Self::Read(profile) => Some(*profile),
        })
    }
}

impl Plan {
    fn new(
        mut job: JobArgs,
        clips: Vec<LayoutArgs>,
        numbers: &[(String, Number, String)],
        flags: &Overrides,
    ) -> Result<Self, CliError> {
        let named = |name: &str| ProfileChoice::Named(name.to_owned());
        let profile = job.profile.take().unwrap_or_else(|| named("shaped-400"));
        let mut profile = profile.open()?.ok_or_else(|| {
            CliError::Arguments(format!("--profile is {NONE}, expected a profile"))
        })?;
        let of_file = numbers
            .iter()
            .map(|(key, number, place)| (key.as_str(), *number, place.clone()));
        let line = || "command line".to_owned();
        let of_flags = flags.0.iter().map(|&(key, x)| (key, x.into(), line()));
        let at = format!("profile {}", profile.name());
        profile.set_from(of_file.chain(of_flags), &at)?;
        let raster = job.raster.take().unwrap_or_else(|| named("raster"));
        let raster = raster.open()?;
        let tolerance = *job.tolerance_nm.get_or_insert(Stray(2.0));
        job.within_nm.get_or_insert(tolerance);
        job.effort.get_or_insert_default();
        if job.within.is_some() || job.sample.is_some() || job.time_limit_min.is_some() {
            job.seed.get_or_insert(1);
        }
        let flags = *job.flags.get_or_insert(10);
        job.profile = Some(ProfileChoice::Read(Box::new(profile.clone())));
        job.raster = Some(match &raster {
            Some(raster) => ProfileChoice::Read(Box::new(raster.clone())),
            None => named(NONE),
        });
        let shares = clips.iter().filter(|clip| clip.coverage.is_some()).count();
        let whole = clips.len() == 1 && shares == 0 && job.field_mm.is_none();
        if !(whole || shares == clips.len() && job.field_mm.is_some()) {
            return Err(CliError::Arguments(format!(
                "{} layouts, {shares} of them with a coverage, {}; expected one layout alone, or a field (--field-mm) and \
                 the share of it that each fills (--coverage, or `coverage` of each [[clip]])",
                clips.len(),
                if job.field_mm.is_some() {
                    "a field"
                } else {
                    "no field"
                },
            )));
        }
        let clips = clips
            .into_iter()
            .map(|args| {
                Ok(PlannedClip {
                    options: args.options()?,
                    name: args.file(),
                    coverage: args.coverage.map(|Share(share)| share),
                    args,
                })
            })
            .collect::<Result<_, CliError>>()?;
        Ok(Self {
            clips,
            profile,
            raster,
            flags,
            out: job.out.take(),
            json: job.json.take().unwrap_or(false),
            threads: job.threads.take(),
            job,
        })
    }

    pub(super) fn terms(&self) -> Terms<'_> {
        let job = &self.job;
        let tolerance = job.tolerance_nm.map_or(2.0, |Stray(nm)| nm);
        Terms {
            profile: &self.profile,
            tolerance: Nm(tolerance),
            within: Nm(job.within_nm.map_or(tolerance, |Stray(nm)| nm)),
            effort: job.effort.unwrap_or_default().into(),
            field: self.field(),
            slot: job.slot_h.map(|Positive(h)| Hours(h)),
            peak_dose: job.peak_dose.map(|PeakDose(dose)| Dose(dose)),
            dose_levels: job
                .dose_levels
                .map(|Levels(levels)| levels)
                .unwrap_or_default(),
            raster: self.raster.as_ref(),
        }
    }

    /// The numbers that a sweep changes: the flags, or where there are none what the file says.
    pub(super) fn sweep_over(&mut self, flags: &[AxisArg]) -> Result<Vec<Axis>, CliError> {
        if !flags.is_empty() {
            self.job.over = flags.to_vec();
        }
        if self.job.over.is_empty() {
            return Err(CliError::Arguments(
                "no --over, expected a number and its values, as --over tolerance_nm=1.5,2,3, or `over` in the job file"
                    .to_owned(),
            ));
        }
        Ok(self
            .job
            .over
            .iter()
            .map(|AxisArg(axis)| axis.clone())
            .collect())
    }

    /// Refuses a job that is a sweep.
    pub(super) fn no_sweep(&self) -> Result<(), CliError> {
        if self.job.over.is_empty() {
            return Ok(());
        }
        Err(CliError::Arguments(
            "the job file says `over`, which is for sweep: a quote has one value for every number"
                .to_owned(),
        ))
    }

    /// The sample asked for; `None` to fracture every figure.
    pub(super) fn sampling(&self) -> Option<SamplePlan> {
        let job = &self.job;
        let asked = job.within.is_some() || job.sample.is_some() || job.time_limit_min.is_some();
        asked.then(|| SamplePlan {
            within: job.within,
            most: job.sample,
            seed: job.seed.unwrap_or(1),
            minutes: job.time_limit_min.map(|Positive(minutes)| minutes),
        })
    }

    fn field(&self) -> Option<Field> {
        self.job.field_mm.map(FieldMm::field)
    }

    /// The job with every value spelled out, layouts named as seen from `directory` and sealed by their CRC-32.
    pub(super) fn resolved(
        &self,
        directory: &Path,
        sample: Option<&SampleUsed>,
    ) -> Result<String, CliError> {
        let clip = |clip: &PlannedClip| {
            Ok(LayoutArgs {
                layout: seen_from(directory, &clip.args.layout),
                name: Some(clip.name.clone()),
                crc32: Some(crc32(&clip.args.layout)?),
                ..clip.args.clone()
            })
        };
        // What a clock ended is repeated by its number of figures.
        let timed = sample.filter(|sample| sample.stopped == Stopped::TimeOut);
        let drawn = timed.and_then(|sample| usize::try_from(sample.figures_drawn).ok());
        let job = JobArgs {
            sample: drawn.or(self.job.sample),
            time_limit_min: self.job.time_limit_min.filter(|_| drawn.is_none()),
            clip: self
                .clips
                .iter()
                .map(clip)
                .collect::<Result<_, CliError>>()?,
            ..self.job.clone()
        };
        let text = toml::to_string(&job).map_err(|cause| CliError::Job {
            place: "the resolved job".to_owned(),
            message: cause.to_string(),
        })?;
        let command = if self.job.over.is_empty() {
            "quote"
        } else {
            "sweep"
        };
        Ok(format!(
            "# A {command} with every value spelled out: `shotwright {command} job.toml --out DIR` gives the same bytes again.\n{text}"
        ))
    }
}

impl PlannedClip {
    /// Of what was read from it, the part that is wanted.
    pub(super) fn chosen<'a>(&'a self, layout: &'a Layout) -> Chosen<'a> {
        Chosen {
            name: &self.name,
            layout,
            options: &self.options,
        }
    }

    /// Reads it, if its bytes are those that were sealed.
    pub(super) fn open(&self) -> Result<Layout, CliError> {
        if let Some(sealed) = self.args.crc32 {
            let found = crc32(&self.args.layout)?;
            if found != sealed {
                return Err(CliError::Job {
                    place: self.args.layout.display().to_string(),
                    message: format!(
                        "CRC-32 is {found}, expected {sealed}: the layout is not the one of the job"
                    ),
                });
            }
        }
        self.args.open()
    }
}

fn crc32(path: &Path) -> Result<u32, CliError> {
    let failed = |cause| file_error(path, cause);
    let mut file = File::open(path).map_err(failed)?;
    let mut crc = flate2::Crc::new();
    let mut buffer = vec![0; 1 << 16];
    loop {
        let read = file.read(&mut buffer).map_err(failed)?;
        if read == 0 {
            return Ok(crc.sum());
        }
        crc.update(&buffer[..read]);
    }
}

/// A path as seen from a directory: upward as far as they share a way, else in full.
fn seen_from(directory: &Path, path: &Path) -> PathBuf {
    let full = |path: &Path| std::fs::canonicalize(path).ok();
    let (Some(from), Some(to)) = (full(directory), full(path)) else {
        return path.to_owned();
    };
    let both = || from.components().zip(to.components());
    let shared = both().take_while(|(a, b)| a == b).count();
    let named = both()
        .take(shared)
        .any(|(a, _)| matches!(a, Component::Normal(_)));
    if !named {
        return to;
    }
    let up = from.components().skip(shared).map(|_| Component::ParentDir);
    up.chain(to.components().skip(shared)).collect()
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeSet;

    use clap::CommandFactory as _;

    use super::*;

    /// What no key says, with the reason.
    const NO_KEY: [(&str, &str); 2] = [
        ("help", "asks for no result"),
        ("version", "asks for no result"),
    ];

    /// Every flag of `quote` and `sweep`, those of all commands among them, is a key of the file, of a clip or of the numbers; nothing can
    /// be said in one way only.
    #[test]
    fn all_that_a_flag_can_say_the_file_can_say() {
        let keys = |text: &str| -> BTreeSet<String> {
            let error = toml::from_str::<JobArgs>(text).unwrap_err();
            let message = error.message().to_owned();
            let expected = message.split_once("expected one of ").unwrap().1.to_owned();
            let names = expected.split(", ").map(|name| name.trim_matches('`'));
            names.map(str::to_owned).collect()
        };
        let root = keys("nothing = 1");
        let clip = keys("[[clip]]\nlayout = \"a\"\nnothing = 1");
        let mut program = crate::cli::Cli::command();
        program.build();
        for command in ["quote", "sweep"] {
            let command = program.find_subcommand(command).unwrap();
            let mut seen = 0;
            for flag in command.get_arguments() {
                let id = flag.get_id().as_str();
                if NO_KEY.iter().any(|(name, _)| *name == id) {
                    continue;
                }
                // A key is the long flag itself, not what the code calls it.
                let key = flag.get_long().unwrap_or(id).replace('-', "_");
                let number = crate::profile::Key::named(&key).is_some();
                let known = root.contains(&key) || clip.contains(&key) || number;
                assert!(known, "{}: --{key}", command.get_name());
                seen += 1;
            }
            assert!(seen > 40, "{seen}");
        }
    }

    #[test]
    fn a_path_is_seen_from_beside_it() {
        let root = tempfile::tempdir().unwrap();
        for directory in ["a/out", "b"] {
            std::fs::create_dir_all(root.path().join(directory)).unwrap();
        }
        let layout = root.path().join("b/clip.oas");
        std::fs::write(&layout, "123456789").unwrap();
        let seen = seen_from(&root.path().join("a/out"), &layout);
        assert_eq!(seen, Path::new("../../b/clip.oas"));
        assert_eq!(
            seen_from(&root.path().join("b"), &layout),
            Path::new("clip.oas")
        );
        // The check value of CRC-32/ISO-HDLC, the CRC of gzip (RFC 1952).
        assert_eq!(crc32(&layout).unwrap(), 0xCBF4_3926);
    }
}
