//! What the long range does to how sure the hours are: a ± on backscatter or fogging makes every dose, and so every flash, uncertain.
//!
//! A change of the dose correction by a factor lengthens flashes as the same factor on the base dose would, so the writer model
//! is asked with that. The factor is that of `D = (1 + η)/(1 + 2ηU)`, with η the sum of all terms and U the density at which this gives
//! the mean of the doses by place: bare mask around a layout counts as it does there.

use crate::expose::uniform_correction;
use crate::profile::{Key, Number, Profile};
use crate::write_time::WriteTime;

use super::QuoteError;
use super::hours::{Correction, Written};
use super::result::{DoseMap, Hours, Sensitivity};

/// Every ratio of energies that comes back from far, with the name it has in files.
fn ratios(profile: &Profile) -> Vec<(String, Number)> {
    let terms = profile.backscatter().iter().enumerate();
    let terms = terms.map(|(i, term)| (format!("backscatter[{i}].eta"), term.eta));
    let fogging = profile
        .number(Key::FoggingEta)
        .filter(|_| profile.fogging().is_some());
    let fogging = fogging.map(|eta| (Key::FoggingEta.to_string(), eta));
    terms.chain(fogging).collect()
}

/// The correction of an even coverage that has the mean dose of this map.
pub(super) fn of_map(
    correction: Correction,
    map: Option<DoseMap>,
) -> Result<Correction, QuoteError> {
    let eta = correction.ratio;
    let Some(map) = map.filter(|map| eta > 0.0 && map.mean_dose > 0.0) else {
        return Ok(correction);
    };
    let density = (((1.0 + eta) / map.mean_dose - 1.0) / (2.0 * eta)).clamp(0.0, 1.0);
    Ok(Correction {
        dose: uniform_correction(eta, density)?,
        ratio: eta,
        density,
    })
}

/// Total hours if the ratios together were `more` greater.
fn total_h(
    written: &Written<'_>,
    profile: &Profile,
    correction: Correction,
    more: f64,
) -> Result<f64, QuoteError> {
    let dose = uniform_correction(correction.ratio + more, correction.density)?;
    let base = profile.base_dose().0 * (dose.0 / correction.dose.0);
    let changed = profile.with(Key::BaseDose, base);
    let time = written.pattern(|pattern| WriteTime::new(&changed, pattern))?;
    Ok(time.total_h.0)
}

/// Hours whose interval holds the ± of the long range too: independent of the others, so the squares add.
///
/// # Errors
/// As [`WriteTime::new`].
pub(super) fn widened(
    hours: Hours,
    written: &Written<'_>,
    profile: &Profile,
    correction: Correction,
) -> Result<Hours, QuoteError> {
    let (mut down, mut up) = (hours.total_h - hours.low_h, hours.high_h - hours.total_h);
    for (_, eta) in ratios(profile) {
        if eta.plus_minus > 0.0 {
            let mut change = |more: f64| -> Result<(), QuoteError> {
                let change = total_h(written, profile, correction, more)? - hours.total_h;
                if change > 0.0 {
                    up = up.hypot(change);
                } else {
                    down = down.hypot(change);
                }
                Ok(())
            };
            change(-eta.plus_minus)?;
            change(eta.plus_minus)?;
        }
    }
    Ok(Hours {
        low_h: hours.total_h - down,
        high_h: hours.total_h + up,
        ..hours
    })
}

/// What moves the total when it alone changes by ±10 %, most first: numbers of the writer model and of the long range.
///
/// # Errors
/// As [`WriteTime::new`].
pub(super) fn sensitivity(
    written: &Written<'_>,
    profile: &Profile,
    correction: Correction,
) -> Result<Vec<Sensitivity>, QuoteError> {
    let mut found = written.sensitivity(profile)?;
    let total = total_h(written, profile, correction, 0.0)?;
    for (key, eta) in ratios(profile) {
        let at = |share: f64| total_h(written, profile, correction, share * eta.value);
        found.push(Sensitivity {
            key,
            value: eta.value,
            at_lower_h: at(-0.1)?,
            at_upper_h: at(0.1)?,
        });
    }
    // Below this a difference is rounding.
    let least = 1e-12 * total;
    let reach = |s: &Sensitivity| {
        let (lower, upper) = (s.at_lower_h, s.at_upper_h);
        lower.max(upper).max(total) - lower.min(upper).min(total)
    };
    found.retain(|s| reach(s) > least);
    found.sort_by(|a, b| reach(b).total_cmp(&reach(a)));
    Ok(found)
}
