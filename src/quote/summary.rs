//! From scores of figures to the numbers of the whole mask.

use crate::judge::{self, Background, Fidelity};
use crate::mask::DistinctFigure;
use crate::shot::ShotList;
use crate::units::Nm;
use crate::write_time::Field;

use super::Clip;
use super::exposure::Exposed;
use super::made::{Made, MadeMask, Unmade};
use super::result::{Count, DoseMap, EdgeError, FractureSummary, Margin};

/// The figures of one mask in one fracture.
#[derive(Clone, Copy, Debug)]
pub struct Part<'a> {
    /// In their order.
    pub figures: &'a [DistinctFigure],
    /// Their shots and scores.
    pub made: &'a [Result<Made, Unmade>],
    /// Their doses.
    pub exposed: &'a Exposed<'a>,
    /// How often the mask counts in the scores against other parts.
    pub weight: u64,
}

/// The clips of one fracture; where there are several each counts in the scores as often as it stands in the field.
pub(super) fn parts<'a>(
    clips: &[Clip<'a>],
    made: &[&'a MadeMask],
    exposed: &'a [Exposed<'a>],
    field: Option<Field>,
) -> Vec<Part<'a>> {
    let all = clips.iter().zip(made).zip(exposed);
    all.map(|((clip, &made), exposed)| Part {
        figures: &clip.mask.figures,
        made,
        exposed,
        weight: if clips.len() > 1 {
            clip.copies(field)
        } else {
            1
        },
    })
    .collect()
}

/// Adds up the figures of one mask, each at all its places. Hours are left to be filled in.
#[must_use]
pub fn of_mask(
    figures: &[DistinctFigure],
    made: &[Result<Made, Unmade>],
    exposed: &Exposed<'_>,
    background: Background,
    sliver: Nm,
) -> FractureSummary {
    let part = Part {
        figures,
        made,
        exposed,
        weight: 1,
    };
    of_parts(&[part], background, sliver)
}

/// Adds up several masks: shots once for each, scores by their weights. They were judged over `background`; margins are those of the
/// dose of each place.
#[must_use]
pub fn of_parts(parts: &[Part<'_>], background: Background, sliver: Nm) -> FractureSummary {
    let mut fidelity = Fidelity::default();
    let (mut shots, mut distinct, mut slivers, mut failing) = (0_u128, 0_u64, 0_u128, 0_u64);
    let mut smallest: Option<Nm> = None;
    let mut peak = 0.0_f64;
    let all = parts.iter().flat_map(|part| {
        let figures = part.figures.iter().zip(part.made).enumerate();
        figures.map(move |(number, (figure, made))| (part, number, figure, made))
    });
    for (part, number, figure, made) in all {
        let places = figure.place_count();
        let Ok(made) = made else {
            failing += 1;
            continue;
        };
        let list = &made.fracture.shots;
        let score = (&made.fidelity, background, part.weight);
        part.exposed.merge(number, score, &mut fidelity);
        shots = shots.saturating_add(places.saturating_mul(list.len() as u128));
        slivers = slivers.saturating_add(places.saturating_mul(list.slivers(sliver) as u128));
        distinct += list.len() as u64;
        failing += u64::from(!made.fidelity.prints_within_tolerance());
        peak = peak.max(made.peak.0);
        smallest = least(smallest, list.smallest_side());
    }
    FractureSummary {
        shots: Count(shots),
        shots_distinct: distinct,
        smallest_side_nm: smallest.map(|side| side.0),
        slivers: Count(slivers),
        prints_within_tolerance: Some(failing == 0),
        figures_out_of_tolerance: Some(failing),
        peak_dose: (shots > 0).then_some(peak),
        dose_map: DoseMap::all(parts.iter().filter_map(|part| part.exposed.map.as_ref())),
        ..of_fidelity(&fidelity.summary())
    }
}

/// The scores alone; counts of shots are left at 0 to be filled in.
#[must_use]
pub fn of_fidelity(scores: &judge::Summary) -> FractureSummary {
    FractureSummary {
        shots: Count(0),
        shots_distinct: 0,
        smallest_side_nm: None,
        slivers: Count(0),
        edge_error_nm: edge_error(scores),
        out_of_tolerance_share: scores.out_of_tolerance_share,
        prints_within_tolerance: Some(scores.prints_within_tolerance),
        figures_out_of_tolerance: None,
        margin_nm_per_pct: Margin {
            median: scores.margin_nm_per_pct.median,
            worst: scores.margin_nm_per_pct.worst,
        },
        edge_sd_nm: scores.edge_sd_nm.p95,
        peak_dose: None,
        scores: Some(*scores),
        dose_map: None,
        hours: None,
    }
}

/// Away from drawn corners.
#[must_use]
pub fn edge_error(scores: &judge::Summary) -> EdgeError {
    EdgeError {
        mean: scores.edge_error_nm.mean,
        p95: scores.edge_error_nm.p95,
        worst: scores.edge_error_nm.worst,
    }
}

fn least(a: Option<Nm>, b: Option<Nm>) -> Option<Nm> {
    match (a, b) {
        (Some(a), Some(b)) => Some(if b < a { b } else { a }),
        (one, None) | (None, one) => one,
    }
}

/// How many shots have a side that the writer cannot flash.
#[must_use]
pub fn beyond_limits(shots: &ShotList, least: Nm, greatest: Nm) -> usize {
    let address = shots.address();
    let beyond = |short: i64, long: i64| {
        address.coordinate(short).0 < least.0 - 1e-9
            || address.coordinate(long).0 > greatest.0 + 1e-9
    };
    let all = shots.shots().iter();
    all.filter(|s| beyond(s.short_side(), s.long_side()))
        .count()
}
