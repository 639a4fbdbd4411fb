//! What is to be written → what each stripe gets.

use serde::Serialize;

use crate::geom::{Point, Rect, Repetition, Transform};
use crate::profile::{Key, Kind, Profile};
use crate::shot::ShotList;
use crate::units::{Amperes, Area, Dose, Nm, PM_PER_NM, Seconds};

use super::WriteTimeError;
use super::grid::{Grid, runs};

/// Shots that stand in one orientation at one place or many.
#[derive(Clone, Copy, Debug)]
pub struct Placed<'a> {
    /// In their own frame.
    pub shots: &'a ShotList,
    /// Own frame to mask.
    pub transform: Transform,
    /// Displacements in mask axes, pm.
    pub repetition: &'a Repetition,
    /// Multiplies the dose of every shot (long-range correction at these places).
    pub dose: Dose,
}

/// Shots of which only the number is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Counts {
    /// Shots of one pass, as flashed: none is cut further.
    pub shots: u128,
    /// Their mean dose.
    pub mean_dose: Dose,
    /// Mean jump of the deflection from shot to shot.
    pub mean_jump: Nm,
    /// Mean greater side.
    pub mean_side: Nm,
}

impl Counts {
    /// So many shots at dose 1; jumps and sides unknown, so they cost nothing.
    #[must_use]
    pub fn of(shots: u128) -> Self {
        Self {
            shots,
            mean_dose: Dose(1.0),
            mean_jump: Nm(0.0),
            mean_side: Nm(0.0),
        }
    }
}

/// The part of the plate that the stage travels over; stripes run along its width.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Field {
    /// Along the stripes.
    pub width: Nm,
    /// Across them.
    pub height: Nm,
}

impl Field {
    fn frame(self) -> Result<Rect, WriteTimeError> {
        let side = |length: Nm| {
            length
                .to_pm()
                .filter(|pm| (1..=FARTHEST).contains(pm))
                .ok_or(WriteTimeError::Side { found: length })
        };
        Ok(Rect {
            min: Point::new(0, 0),
            max: Point::new(side(self.width)?, side(self.height)?),
        })
    }
}

/// Flashes beyond one per shot and pass, and flashes that cannot be made; over all passes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Cuts {
    /// More because a stripe or sub-field border cuts a shot.
    pub border: u128,
    /// More because a shot is too large for the beam current.
    pub beam: u128,
    /// More because a shot needs a greater dose than one flash may give.
    pub repeated: u128,
    /// Flashes shorter than the writer's shortest: not writable in so many passes at this current.
    pub too_short: u128,
}

impl Cuts {
    fn add(&mut self, passes: u32, shots: u128, pieces: u128, flashing: &Flashing) {
        let (parts, flashes) = flashing.of(pieces);
        let add = |sum: &mut u128, more: u128| {
            *sum = sum.saturating_add(more.saturating_mul(u128::from(passes)));
        };
        add(&mut self.border, pieces - shots);
        add(&mut self.beam, parts - pieces);
        add(&mut self.repeated, flashes - parts);
        if flashing.too_short {
            add(&mut self.too_short, flashes);
        }
    }
}

/// What is to be written.
#[derive(Clone, Copy, Debug)]
pub enum Pattern<'a> {
    /// So many shots, evenly over the field; without a field there is neither stage nor turn.
    Counts {
        /// The shots.
        counts: Counts,
        /// Where.
        field: Option<Field>,
    },
    /// Every shot where it stands.
    Placed {
        /// The shots.
        placed: &'a [Placed<'a>],
        /// What the stripes cover. Shots that overhang it are written in the nearest stripe.
        frame: Rect,
    },
    /// A clip that stands for a field: copies of it fill the share `coverage` of the field evenly, the rest is
    /// empty. Cuts are counted as expected for a clip at a random place.
    Sample {
        /// The shots of the clip.
        placed: &'a [Placed<'a>],
        /// The clip.
        clip: Rect,
        /// The field.
        field: Field,
        /// Share of the field that looks like the clip; over 0, up to 1.
        coverage: f64,
    },
}

impl Pattern<'_> {
    /// What the stage travels over.
    fn frame(&self) -> Result<Rect, WriteTimeError> {
        match *self {
            Self::Counts { field: None, .. } => Err(WriteTimeError::NoField),
            Self::Counts {
                field: Some(field), ..
            }
            | Self::Sample { field, .. } => field.frame(),
            Self::Placed { frame, .. } => {
                check_frame(frame)?;
                Ok(frame)
            }
        }
    }
}

/// What one stripe gets in one pass. Sums over its flashes.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct StripeLoad {
    pub(super) flashes: u128,
    /// Σ dose over cut shots; repeated flashes share it.
    pub(super) dose: f64,
    pub(super) jump: Nm,
    pub(super) side: Nm,
    pub(super) subfields: u128,
    pub(super) area: Area,
}

/// The stripes of passes that write alike.
#[derive(Clone, Debug)]
pub(super) struct PassLoad {
    pub(super) times: u32,
    /// Upward.
    pub(super) stripes: Vec<StripeLoad>,
}

/// All that time follows from, once a profile's rates are known.
#[derive(Clone, Debug)]
pub(super) struct Load {
    pub(super) passes: Vec<PassLoad>,
    /// Stage travel per stripe; `None` without a field.
    pub(super) length: Option<Nm>,
    pub(super) shots: u128,
    /// Over all passes.
    pub(super) cuts: Cuts,
}

/// Largest coordinate and side: 1 m in picometres. Keeps the arithmetic of cells within `i64`.
const FARTHEST: i64 = 1_000_000_000 * PM_PER_NM;

/// Most copies along one side of a lattice, and most shots at all: beyond any mask, and exact in `u128`.
const MOST_COPIES: u64 = 1 << 40;
const MOST_SHOTS: u128 = 1_000_000_000_000_000_000_000_000;

/// How one shot is flashed, wherever it stands.
#[derive(Clone, Copy, Debug)]
struct Flashing {
    dose: f64,
    jump: Nm,
    side: Nm,
    /// Parts it is cut into so that the beam current suffices.
    parts: u128,
    /// Flashes of each part.
    repeats: u128,
    too_short: bool,
}

/// Bounds on a single flash.
struct FlashLimits {
    per_pass: f64,
    greatest: Option<f64>,
    largest: Option<Area>,
    shortest: Option<Dose>,
}

impl FlashLimits {
    fn new(profile: &Profile) -> Self {
        let base = profile.base_dose();
        let per_pass = base.0 / f64::from(profile.passes());
        let density = profile.current_density();
        Self {
            per_pass,
            greatest: profile.value(Key::GreatestFlash),
            largest: profile
                .value(Key::GreatestBeam)
                .zip(density)
                .map(|(na, density)| density.area_of(Amperes(na * 1e-9))),
            shortest: profile
                .value(Key::ShortestFlash)
                .zip(density)
                .map(|(ns, density)| Dose(density.dose_in(Seconds::from_ns(ns)).0 / per_pass)),
        }
    }

    fn flashing(&self, dose: f64, area: Area, jump: Nm, side: Nm) -> Flashing {
        // A quotient that rounding puts a hair over a whole number must not cost one more flash.
        let at_least = |quotient: f64| count((quotient - 1e-9).ceil()).max(1);
        let parts = self.largest.map_or(1, |largest| at_least(area / largest));
        let repeats = self
            .greatest
            .map_or(1, |greatest| at_least(dose * self.per_pass / greatest));
        Flashing {
            dose,
            jump,
            side,
            parts,
            repeats,
            too_short: self
                .shortest
                .is_some_and(|shortest| dose / repeats as f64 <= shortest.0 - 1e-12),
        }
    }
}

impl Flashing {
    /// Parts and flashes of so many cut shots. Saturates: [`Load`] refuses such numbers at the end.
    fn of(&self, pieces: u128) -> (u128, u128) {
        let parts = pieces.saturating_mul(self.parts);
        (parts, parts.saturating_mul(self.repeats))
    }
}

impl StripeLoad {
    /// Adds so many cut shots, each flashed in this way.
    fn add(&mut self, pieces: u128, flashing: &Flashing) {
        let (parts, flashes) = flashing.of(pieces);
        self.flashes = self.flashes.saturating_add(flashes);
        self.dose += parts as f64 * flashing.dose;
        self.jump += flashing.jump * flashes as f64;
        self.side += flashing.side * flashes as f64;
    }

    /// The share of `flashes` in a whole that is evenly spread.
    fn share(&self, flashes: u128) -> Self {
        let share = if self.flashes == 0 {
            0.0
        } else {
            flashes as f64 / self.flashes as f64
        };
        Self {
            flashes,
            dose: self.dose * share,
            jump: self.jump * share,
            side: self.side * share,
            ..Self::default()
        }
    }
}

impl Load {
    pub(super) fn new(profile: &Profile, pattern: &Pattern<'_>) -> Result<Self, WriteTimeError> {
        if profile.kind() == Kind::Raster {
            return Whole::default().spread(profile, Some(pattern.frame()?));
        }
        let limits = FlashLimits::new(profile);
        match *pattern {
            Pattern::Counts { counts, field } => Self::of_counts(profile, &limits, counts, field),
            Pattern::Placed { placed, frame } => Self::of_placed(profile, &limits, placed, frame),
            Pattern::Sample {
                placed,
                clip,
                field,
                coverage,
            } => Self::of_sample(profile, &limits, placed, clip, field, coverage),
        }
    }

    /// Whether a change of the number changes the load, and not only the time it takes.
    pub(super) fn depends_on(profile: &Profile, key: Key) -> bool {
        let limited = [Key::GreatestFlash, Key::GreatestBeam, Key::ShortestFlash]
            .into_iter()
            .any(|limit| profile.value(limit).is_some());
        match key {
            Key::Passes | Key::PassShift | Key::Stripe | Key::Subfield => true,
            Key::GreatestFlash | Key::GreatestBeam | Key::ShortestFlash => true,
            Key::Current | Key::BaseDose => limited,
            _ => false,
        }
    }

    /// Flashes over all passes.
    pub(super) fn flashes(&self) -> u128 {
        let stripes = |pass: &PassLoad| {
            let flashes = pass.stripes.iter().map(|s| s.flashes);
            flashes.fold(0, u128::saturating_add)
        };
        self.passes
            .iter()
            .map(|pass| stripes(pass).saturating_mul(pass.times.into()))
            .fold(0, u128::saturating_add)
    }

    fn checked(self) -> Result<Self, WriteTimeError> {
        let found = self.flashes().max(self.shots);
        if found > MOST_SHOTS {
            return Err(WriteTimeError::TooMany { found });
        }
        Ok(self)
    }

    fn of_counts(
        profile: &Profile,
        limits: &FlashLimits,
        counts: Counts,
        field: Option<Field>,
    ) -> Result<Self, WriteTimeError> {
        let mean = counts.mean_dose;
        if !(mean.0.is_finite() && mean.0 > 0.0) {
            return Err(WriteTimeError::Dose { found: mean });
        }
        for length in [counts.mean_jump, counts.mean_side] {
            if !(length.0.is_finite() && length.0 >= 0.0) {
                return Err(WriteTimeError::Side { found: length });
            }
        }
        let flashing = limits.flashing(mean.0, Area(0.0), counts.mean_jump, counts.mean_side);
        let mut whole = Whole::default();
        whole.add(profile.passes(), counts.shots, counts.shots, &flashing);
        whole.spread(profile, field.map(Field::frame).transpose()?)
    }

    fn of_sample(
        profile: &Profile,
        limits: &FlashLimits,
        placed: &[Placed<'_>],
        clip: Rect,
        field: Field,
        coverage: f64,
    ) -> Result<Self, WriteTimeError> {
        check_frame(clip)?;
        if !(coverage > 0.0 && coverage <= 1.0) {
            return Err(WriteTimeError::Coverage { found: coverage });
        }
        let frame = field.frame()?;
        let area = |r: Rect| Nm::from_pm(r.width()).by(Nm::from_pm(r.height()));
        let copies = coverage * (area(frame) / area(clip));
        let grid = Grid::of_passes(profile, frame)
            .first()
            .map(|(_, grid)| *grid);
        let spacing = spacing(placed, clip);
        let mut whole = Whole::default();
        for placed in placed {
            placed.check()?;
            let n = placed.repetition.count() as f64 * copies;
            for (rect, flashing) in placed.flashings(limits, spacing) {
                let cells = grid.map_or(1.0, |grid| grid.expected_cells(rect));
                let (shots, pieces) = (count(n.round()), count((n * cells).round()));
                whole.add(profile.passes(), shots, pieces, &flashing);
            }
        }
        whole.spread(profile, Some(frame))
    }

    fn of_placed(
        profile: &Profile,
        limits: &FlashLimits,
        placed: &[Placed<'_>],
        frame: Rect,
    ) -> Result<Self, WriteTimeError> {
        check_frame(frame)?;
        let spacing = spacing(placed, frame);
        let mut load = Self {
            passes: Vec::new(),
            length: Some(Nm::from_pm(frame.width())),
            shots: 0,
            cuts: Cuts::default(),
        };
        for placed in placed {
            placed.check()?;
            let shots = placed
                .repetition
                .count()
                .saturating_mul(placed.shots.len() as u128);
            load.shots = load.shots.saturating_add(shots);
        }
        for (times, grid) in Grid::of_passes(profile, frame) {
            let mut stripes = empty_stripes(&grid);
            for placed in placed {
                for (rect, flashing) in placed.flashings(limits, spacing) {
                    let pieces = spread(&grid, rect, placed.repetition, &flashing, &mut stripes);
                    load.cuts
                        .add(times, placed.repetition.count(), pieces, &flashing);
                }
            }
            for (stripe, index) in stripes.iter_mut().zip(0..) {
                stripe.subfields = grid.subfields_of(index).min(stripe.flashes);
            }
            load.passes.push(PassLoad { times, stripes });
        }
        load.checked()
    }
}

impl Placed<'_> {
    /// Its shots as rectangles in mask axes, each with the way it is flashed. `spacing` is the jump to the first.
    ///
    /// Two plates deflect at once, so a jump is as long as the greater of its two parts.
    fn flashings<'s>(
        &'s self,
        limits: &'s FlashLimits,
        spacing: Nm,
    ) -> impl Iterator<Item = (Rect, Flashing)> + 's {
        let mut before: Option<Rect> = None;
        self.shots.rects().map(move |(rect, dose)| {
            let rect = self.transform.apply_rect(rect);
            let jump = before.map_or(spacing, |b| {
                // Sums of opposite sides are twice the centres.
                let along = |r: Rect| (r.min.x + r.max.x, r.min.y + r.max.y);
                let (from, to) = (along(b), along(rect));
                Nm::from_pm((to.0 - from.0).abs().max((to.1 - from.1).abs())) / 2.0
            });
            before = Some(rect);
            let (w, h) = (Nm::from_pm(rect.width()), Nm::from_pm(rect.height()));
            let side = if w > h { w } else { h };
            (
                rect,
                limits.flashing(dose.0 * self.dose.0, w.by(h), jump, side),
            )
        })
    }

    /// Refuses what is too far out for exact arithmetic, and doses that are none.
    fn check(&self) -> Result<(), WriteTimeError> {
        let within = |p: Point| {
            [p.x, p.y]
                .iter()
                .all(|c| (-FARTHEST..=FARTHEST).contains(c))
        };
        let far = |found| Err(WriteTimeError::TooFar { found });
        let corner = match *self.repetition {
            Repetition::Once => Point::default(),
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
                ..
            } => {
                if columns.max(rows) > MOST_COPIES {
                    let found = self.repetition.count();
                    return Err(WriteTimeError::TooMany { found });
                }
                let span = |a: i64, b: i64| {
                    let reach =
                        |step: i64, n: u64| i128::from(step) * i128::from(n.saturating_sub(1));
                    i64::try_from(reach(a, columns).abs() + reach(b, rows).abs())
                        .unwrap_or(i64::MAX)
                };
                Point::new(span(a.x, b.x), span(a.y, b.y))
            }
            Repetition::List(ref list) => match list.iter().find(|&&p| !within(p)) {
                Some(&p) => return far(p),
                None => Point::default(),
            },
        };
        if !within(corner) {
            return far(corner);
        }
        if !within(self.transform.shift) {
            return far(self.transform.shift);
        }
        for (rect, dose) in self.shots.rects() {
            for p in [rect.min, rect.max] {
                if !within(p) {
                    return far(p);
                }
            }
            let dose = dose * self.dose.0;
            if !(dose.0.is_finite() && dose.0 > 0.0) {
                return Err(WriteTimeError::Dose { found: dose });
            }
        }
        Ok(())
    }
}

/// A pattern known only as a whole.
#[derive(Default)]
struct Whole {
    shots: u128,
    load: StripeLoad,
    cuts: Cuts,
}

impl Whole {
    fn add(&mut self, passes: u32, shots: u128, pieces: u128, flashing: &Flashing) {
        self.shots = self.shots.saturating_add(shots);
        self.load.add(pieces, flashing);
        self.cuts.add(passes, shots, pieces, flashing);
    }

    /// Every stripe gets its share by area; without a frame all is one stripe.
    fn spread(self, profile: &Profile, frame: Option<Rect>) -> Result<Load, WriteTimeError> {
        if self.load.flashes > MOST_SHOTS {
            let found = self.load.flashes;
            return Err(WriteTimeError::TooMany { found });
        }
        let passes = match frame {
            None => vec![PassLoad {
                times: profile.passes(),
                stripes: vec![self.load],
            }],
            Some(frame) => Grid::of_passes(profile, frame)
                .into_iter()
                .map(|(times, grid)| PassLoad {
                    times,
                    stripes: self.stripes(&grid, frame.height()),
                })
                .collect(),
        };
        Load {
            passes,
            length: frame.map(|frame| Nm::from_pm(frame.width())),
            shots: self.shots,
            cuts: self.cuts,
        }
        .checked()
    }

    fn stripes(&self, grid: &Grid, height: i64) -> Vec<StripeLoad> {
        let (mut below, mut given) = (0, 0);
        (0..grid.stripes)
            .map(|index| {
                below += grid.height_of(index);
                let upto = self.load.flashes * u128::from(below.unsigned_abs())
                    / u128::from(height.unsigned_abs());
                let load = self.load.share(upto - given);
                given = upto;
                StripeLoad {
                    subfields: grid.subfields_of(index).min(load.flashes),
                    area: grid.area_of(index),
                    ..load
                }
            })
            .collect()
    }
}

fn empty_stripes(grid: &Grid) -> Vec<StripeLoad> {
    (0..grid.stripes)
        .map(|index| StripeLoad {
            area: grid.area_of(index),
            ..StripeLoad::default()
        })
        .collect()
}

/// Gives every copy of a shot to the stripes it lies in, cut at sub-field borders; returns the number of pieces.
fn spread(
    grid: &Grid,
    rect: Rect,
    repetition: &Repetition,
    flashing: &Flashing,
    stripes: &mut [StripeLoad],
) -> u128 {
    let mut pieces = 0;
    // Rows of an upright lattice start at the same x, so their cuts are counted once.
    let mut counted = None;
    for run in runs(repetition) {
        let columns = match counted {
            Some((x, columns)) if x == run.start.x => columns,
            _ => grid.columns(rect, run),
        };
        counted = Some((run.start.x, columns));
        for (stripe, rows) in grid.rows(rect.translated(run.start)) {
            if let Some(stripe) = usize::try_from(stripe)
                .ok()
                .and_then(|i| stripes.get_mut(i))
            {
                stripe.add(rows * columns, flashing);
                pieces += rows * columns;
            }
        }
    }
    pieces
}

/// Mean distance of figures if they stood evenly: what the deflection jumps from one to the next.
fn spacing(placed: &[Placed<'_>], frame: Rect) -> Nm {
    let figures: u128 = placed.iter().map(|p| p.repetition.count()).sum();
    let area = Nm::from_pm(frame.width()).0 * Nm::from_pm(frame.height()).0;
    Nm((area / (figures.max(1) as f64)).sqrt())
}

fn check_frame(frame: Rect) -> Result<(), WriteTimeError> {
    for side in [frame.width(), frame.height()] {
        if !(1..=FARTHEST).contains(&side) {
            return Err(WriteTimeError::Side {
                found: Nm::from_pm(side),
            });
        }
    }
    for corner in [frame.min, frame.max] {
        if corner.x.abs().max(corner.y.abs()) > FARTHEST {
            return Err(WriteTimeError::TooFar { found: corner });
        }
    }
    Ok(())
}

/// A count from a whole non-negative float.
fn count(n: f64) -> u128 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float to integer cast saturates, and counts are not negative"
    )]
    let count = n as u128;
    count
}
