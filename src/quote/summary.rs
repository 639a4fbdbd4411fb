//! From scores of figures to the numbers of the whole mask.

use crate::fracture::FractureError;
use crate::judge::{self, Background, Fidelity};
use crate::mask::DistinctFigure;
use crate::shot::ShotList;
use crate::units::Nm;

use super::exposure::Exposed;
use super::made::Made;
use super::result::{Count, EdgeError, FractureSummary, Margin};

/// Adds up the figures of one fracture, each at all its places. Hours are left to be filled in.
#[must_use]
pub fn of_mask(
    figures: &[DistinctFigure],
    made: &[Result<Made, FractureError>],
    exposed: &Exposed<'_>,
    background: Background,
    sliver: Nm,
) -> FractureSummary {
    let mut fidelity = Fidelity::default();
    let (mut shots, mut distinct, mut slivers, mut failing) = (0_u128, 0_u64, 0_u128, 0_u64);
    let mut smallest: Option<Nm> = None;
    let mut peak = 0.0_f64;
    for (i, (figure, made)) in figures.iter().zip(made).enumerate() {
        let places = figure.place_count();
        let Ok(made) = made else {
            failing += 1;
            continue;
        };
        let list = &made.fracture.shots;
        exposed.merge(i, &made.fidelity, background, &mut fidelity);
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
        dose_map: exposed.map,
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
