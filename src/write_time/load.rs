//! A pattern over the stripes of every pass: what each gets.

use crate::geom::{Copies, Rect};
use crate::profile::{Key, Kind, Profile};
use crate::units::{Area, Dose, Nm};

use super::WriteTimeError;
use super::flash::{Cuts, FlashLimits, Flashing, count};
use super::grid::{Grid, Pieces};
use super::pattern::{Clip, Counts, Field, Pattern, Placed, check_frame, spacing};

/// Most shots and flashes: beyond any mask, and exact in `u128` when multiplied by heights.
const MOST_SHOTS: u128 = 1_000_000_000_000_000_000_000_000;

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
            Pattern::Sample { clips, field } => Self::of_sample(profile, &limits, clips, field),
            Pattern::Summed { figures, frame } => Self::of_sums(profile, figures, frame),
        }
    }

    /// Whether a change of the number changes the load, and not only the time it takes.
    pub(super) fn depends_on(profile: &Profile, key: Key) -> bool {
        let limited = [Key::GreatestFlash, Key::GreatestBeam, Key::ShortestFlash]
            .into_iter()
            .any(|limit| profile.value(limit).is_some());
        match key {
            Key::Passes | Key::PassShift | Key::Stripe | Key::Subfield | Key::BorderReach => true,
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

    /// Over all passes: what a flash takes on average, as counts of one pass.
    pub(super) fn mean_flash(&self) -> Option<Counts> {
        let passes: u32 = self.passes.iter().map(|pass| pass.times).sum();
        let flashes = self.flashes();
        if flashes == 0 {
            return None;
        }
        let mean = |part: fn(&StripeLoad) -> f64| {
            let of = |pass: &PassLoad| {
                f64::from(pass.times) * pass.stripes.iter().map(part).sum::<f64>()
            };
            self.passes.iter().map(of).sum::<f64>() / flashes as f64
        };
        Some(Counts {
            shots: flashes / u128::from(passes.max(1)),
            mean_dose: Dose(mean(|stripe| stripe.dose)),
            mean_jump: Nm(mean(|stripe| stripe.jump.0)),
            mean_side: Nm(mean(|stripe| stripe.side.0)),
        })
    }

    pub(super) fn checked(self) -> Result<Self, WriteTimeError> {
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
        clips: &[Clip<'_>],
        field: Field,
    ) -> Result<Self, WriteTimeError> {
        let shares = clips.iter().map(|clip| clip.coverage);
        let wrong = shares
            .clone()
            .find(|share| !(*share > 0.0 && *share <= 1.0));
        // Shares that are meant to fill the field may miss it by their rounding.
        let all = Some(shares.sum()).filter(|sum: &f64| *sum > 1.0 + 1e-9);
        if let Some(found) = wrong.or(all) {
            return Err(WriteTimeError::Coverage { found });
        }
        let frame = field.frame()?;
        let area = |r: Rect| Nm::from_pm(r.width()).by(Nm::from_pm(r.height()));
        let grid = Grid::of_passes(profile, frame)
            .first()
            .map(|(_, grid)| *grid);
        let mut whole = Whole::default();
        for clip in clips {
            check_frame(clip.frame)?;
            let copies = clip.coverage * (area(frame) / area(clip.frame));
            let spacing = spacing(clip.placed, clip.frame);
            for placed in clip.placed {
                placed.check()?;
                let n = placed.repetition.count() as f64 * copies;
                for (rect, flashing) in placed.flashings(limits, spacing) {
                    let cells = grid.map_or(Pieces::UNCUT, |grid| grid.expected_cells(rect));
                    let (shots, pieces) = (count(n.round()), count((n * cells.all).round()));
                    whole.add(profile.passes(), shots, pieces, &flashing);
                    let slivers = count((n * cells.slivers * f64::from(profile.passes())).round());
                    whole.cuts.border_slivers = whole.cuts.border_slivers.saturating_add(slivers);
                }
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
                let copies = Copies::new(placed.repetition);
                for (rect, flashing) in placed.flashings(limits, spacing) {
                    let pieces = grid.spread(rect, &copies, |stripe, pieces| {
                        if let Some(stripe) = stripes.get_mut(stripe) {
                            stripe.add(pieces, &flashing);
                        }
                    });
                    load.cuts
                        .add(times, placed.repetition.count(), pieces.all, &flashing);
                    let slivers = pieces.slivers.saturating_mul(u128::from(times));
                    load.cuts.border_slivers = load.cuts.border_slivers.saturating_add(slivers);
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

pub(super) fn empty_stripes(grid: &Grid) -> Vec<StripeLoad> {
    (0..grid.stripes)
        .map(|index| StripeLoad {
            area: grid.area_of(index),
            ..StripeLoad::default()
        })
        .collect()
}
