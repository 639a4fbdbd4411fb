//! Whether the slot suffices, which fracture to order and why.

use crate::number::brief as number;
use crate::units;

use super::result::{Fits, Flip, FractureSummary, Fractures, Hours, Method, Verdict};

/// Beam times nearer than this share of each other do not decide between two fractures.
const TIE: f64 = 0.01;

/// Where neither prints everywhere, failing on more figures decides only beyond this share of all: those few go back anyway.
const FEW: f64 = 0.05;

/// What to order.
pub(super) struct Choice {
    pub(super) verdict: Verdict,
    pub(super) recommended: Option<Method>,
    pub(super) reason: String,
}

/// Weighs tile against overlap: one that prints everywhere comes before one that does not, then one that fits the slot, then
/// one that fails on clearly fewer figures, then the one of less flashing and settling (the rest is the same for both), then,
/// where these tie, the one of the lesser edge error.
pub(super) fn choose(fractures: &Fractures, figures: usize, slot: Option<units::Hours>) -> Choice {
    let offers: Vec<Offer<'_>> = [Method::Tile, Method::Overlap]
        .into_iter()
        .filter_map(|method| Offer::new(method, fractures.get(method)?, slot))
        .collect();
    let best = match &offers[..] {
        [tile, overlap] if overlap.beats(tile, FEW * figures as f64) => Some(overlap),
        [first, ..] => Some(first),
        [] => None,
    };
    let Some(best) = best else {
        return Choice {
            verdict: Verdict {
                fits: Fits::CannotSay,
                slot_h: slot.map(|slot| slot.0),
                sentence: "Nothing was fractured, so there are no hours.".to_owned(),
            },
            recommended: None,
            reason: "There is no shot to order.".to_owned(),
        };
    };
    let other = offers.iter().find(|offer| offer.method != best.method);
    Choice {
        verdict: verdict(best, other, slot),
        recommended: Some(best.method),
        reason: reason(best, other),
    }
}

/// The slots at which another fracture becomes the one to order, upward.
///
/// What fits changes at the ends of the two intervals and nowhere else, so the choice is looked at there and below them all.
pub(super) fn flips(fractures: &Fractures, figures: usize) -> Vec<Flip> {
    let hours = [Method::Tile, Method::Overlap].into_iter();
    let hours = hours.filter_map(|method| fractures.get(method)?.hours);
    let mut ends: Vec<f64> = hours
        .flat_map(|hours| [hours.low_h, hours.high_h])
        .collect();
    ends.sort_by(f64::total_cmp);
    ends.dedup();
    let choice = |slot_h: f64| choose(fractures, figures, Some(units::Hours(slot_h))).recommended;
    let Some(mut before) = choice(0.0) else {
        return Vec::new();
    };
    let mut flips = Vec::new();
    for slot_h in ends {
        if let Some(from) = choice(slot_h).filter(|from| *from != before) {
            flips.push(Flip {
                slot_h,
                below: before,
                from,
            });
            before = from;
        }
    }
    flips
}

/// One fracture that could be ordered.
struct Offer<'a> {
    method: Method,
    summary: &'a FractureSummary,
    hours: Hours,
    fits: Fits,
}

impl<'a> Offer<'a> {
    fn new(
        method: Method,
        summary: &'a FractureSummary,
        slot: Option<units::Hours>,
    ) -> Option<Self> {
        let hours = summary.hours.filter(|_| summary.shots.0 > 0)?;
        Some(Self {
            method,
            summary,
            hours,
            fits: fits(hours, slot),
        })
    }

    /// `few`: so many more failing figures do not matter.
    fn beats(&self, other: &Self, few: f64) -> bool {
        let rank = |offer: &Self| {
            let fits = match offer.fits {
                Fits::Yes => 0,
                Fits::CannotSay => 1,
                Fits::No => 2,
            };
            (!offer.prints(), fits)
        };
        let order = rank(self).cmp(&rank(other));
        if order.is_ne() {
            return order.is_lt();
        }
        let more = self.failing() as f64 - other.failing() as f64;
        if more.abs() > few {
            return more < 0.0;
        }
        let (own, others) = (self.beam_h(), other.beam_h());
        if (own - others).abs() > TIE * others {
            return own < others;
        }
        let error = |offer: &Self| offer.summary.edge_error_nm.p95.unwrap_or(f64::INFINITY);
        error(self) < error(other)
    }

    /// Flashing and settling.
    fn beam_h(&self) -> f64 {
        self.hours.flash_h + self.hours.settle_h
    }

    fn prints(&self) -> bool {
        self.summary.prints_within_tolerance == Some(true)
    }

    fn failing(&self) -> u64 {
        self.summary.figures_out_of_tolerance.unwrap_or(0)
    }
}

fn fits(hours: Hours, slot: Option<units::Hours>) -> Fits {
    slot.map_or(Fits::CannotSay, |slot| hours.fits(slot.0))
}

fn verdict(best: &Offer<'_>, other: Option<&Offer<'_>>, slot: Option<units::Hours>) -> Verdict {
    let hours = |offer: &Offer<'_>| {
        format!(
            "{} ({} h)",
            offer.method.name(),
            number(offer.hours.total_h)
        )
    };
    let sentence = match (slot, best.fits) {
        (None, _) => format!("No slot was given; {} takes the time shown.", hours(best)),
        (Some(slot), Fits::Yes) => {
            let against = match other {
                Some(other) if other.fits == Fits::Yes => format!(", and as {}", hours(other)),
                Some(other) => format!(", not surely as {}", hours(other)),
                None => String::new(),
            };
            format!(
                "Fits the slot of {} h as {}{against}.",
                number(slot.0),
                hours(best)
            )
        }
        (Some(slot), Fits::No) => format!(
            "Does not fit the slot of {} h: {} is {} h over it.",
            number(slot.0),
            hours(best),
            number(best.hours.total_h - slot.0)
        ),
        (Some(slot), Fits::CannotSay) => format!(
            "Cannot say: the slot of {} h lies within the interval of {}, {} to {} h.",
            number(slot.0),
            hours(best),
            number(best.hours.low_h),
            number(best.hours.high_h)
        ),
    };
    Verdict {
        fits: best.fits,
        slot_h: slot.map(|slot| slot.0),
        sentence,
    }
}

fn reason(best: &Offer<'_>, other: Option<&Offer<'_>>) -> String {
    let name = |offer: &Offer<'_>| offer.method.name();
    let Some(other) = other else {
        return format!("No other fracture than {} was made.", name(best));
    };
    let pair = |value: fn(&Offer<'_>) -> Option<f64>| {
        let of = |offer| value(offer).map_or_else(|| "–".to_owned(), number);
        (of(best), of(other))
    };
    let shots = pair(|o| Some(o.summary.shots.0 as f64));
    let error = pair(|o| o.summary.edge_error_nm.p95);
    let margin = pair(|o| o.summary.margin_nm_per_pct.median);
    let budget = match (best.summary.edge_sd_nm, other.summary.edge_sd_nm) {
        (Some(a), Some(b)) => format!(
            ", error budget (1 sd, not exceeded on 95 % of the outline) {} against {} nm",
            number(a),
            number(b)
        ),
        _ => String::new(),
    };
    let lead = match (best.prints(), other.prints()) {
        (true, false) => format!(
            "It prints every figure within tolerance where {} fails on {} of the distinct figures",
            name(other),
            other.failing()
        ),
        (false, false) => format!(
            "Neither prints every figure within tolerance ({} and {} distinct figures fail, see the flags)",
            best.failing(),
            other.failing()
        ),
        _ if best.fits == Fits::Yes && other.fits != Fits::Yes => {
            "It is the only one that surely fits the slot".to_owned()
        }
        _ => "Both print within tolerance".to_owned(),
    };
    format!(
        "{lead}: {} of flashing and settling against {} for {}, {} against {} shots, edge error (95 %) {} against {} nm, margin (median) {} against {} nm/%{budget}.",
        time(best.beam_h()),
        time(other.beam_h()),
        name(other),
        shots.0,
        shots.1,
        error.0,
        error.1,
        margin.0,
        margin.1
    )
}

/// A time in the unit that suits it.
fn time(hours: f64) -> String {
    let seconds = hours * 3600.0;
    match seconds {
        360.0.. => format!("{} h", number(hours)),
        1.0.. => format!("{} s", number(seconds)),
        _ => format!("{} ms", number(seconds * 1e3)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quote::result::{Count, EdgeError, Margin};

    fn summary(total_h: f64, prints: bool, p95: f64) -> FractureSummary {
        FractureSummary {
            shots: Count(100),
            shots_distinct: 100,
            smallest_side_nm: Some(10.0),
            slivers: Count(0),
            edge_error_nm: EdgeError {
                p95: Some(p95),
                ..EdgeError::default()
            },
            out_of_tolerance_share: Some(0.0),
            prints_within_tolerance: Some(prints),
            figures_out_of_tolerance: Some(u64::from(!prints)),
            margin_nm_per_pct: Margin::default(),
            edge_sd_nm: None,
            peak_dose: None,
            scores: None,
            dose_map: None,
            hours: Some(Hours {
                total_h,
                flash_h: total_h,
                low_h: 0.9 * total_h,
                high_h: 1.1 * total_h,
                ..Hours::default()
            }),
        }
    }

    #[test]
    fn a_fracture_that_prints_beats_a_faster_one_that_does_not_and_hours_decide_else() {
        for (tile, overlap, expected) in [
            (
                summary(2.0, true, 1.0),
                summary(1.0, true, 1.0),
                Method::Overlap,
            ),
            (
                summary(2.0, true, 1.0),
                summary(1.0, false, 1.0),
                Method::Tile,
            ),
            (
                summary(1.0, true, 1.5),
                summary(1.005, true, 1.0),
                Method::Overlap,
            ),
            (
                summary(1.0, true, 1.0),
                summary(1.0, true, 1.0),
                Method::Tile,
            ),
        ] {
            let fractures = Fractures {
                staircase: None,
                tile: Some(tile),
                overlap: Some(overlap),
            };
            assert_eq!(choose(&fractures, 10, None).recommended, Some(expected));
        }
    }

    #[test]
    fn it_fits_only_with_the_upper_end_of_the_interval() {
        let fractures = Fractures {
            tile: Some(summary(10.0, true, 1.0)),
            ..Fractures::default()
        };
        for (slot, expected) in [
            (11.0, Fits::Yes),
            (10.5, Fits::CannotSay),
            (9.5, Fits::CannotSay),
            (8.9, Fits::No),
        ] {
            let choice = choose(&fractures, 10, Some(units::Hours(slot)));
            assert_eq!(choice.verdict.fits, expected, "{}", choice.verdict.sentence);
        }
        assert_eq!(choose(&fractures, 10, None).verdict.fits, Fits::CannotSay);
    }

    #[test]
    fn the_choice_flips_at_the_slot_from_which_the_better_print_fits_too() {
        // Neither prints everywhere; overlap is faster and fails on more than the few that do not matter.
        let with = |total_h: f64, failing: u64| FractureSummary {
            figures_out_of_tolerance: Some(failing),
            ..summary(total_h, false, 1.0)
        };
        let fractures = Fractures {
            tile: Some(with(20.0, 2)),
            overlap: Some(with(10.0, 30)),
            ..Fractures::default()
        };
        let ordered = |slot: f64| choose(&fractures, 100, Some(units::Hours(slot))).recommended;
        // Ends by hand: overlap 9 and 11 h, tile 18 and 22 h. Where both are over or both within, the fewer failures decide.
        let flips = flips(&fractures, 100);
        let found: Vec<_> = flips
            .iter()
            .map(|flip| (flip.slot_h, flip.below, flip.from))
            .collect();
        assert_eq!(
            found,
            [
                (9.0, Method::Tile, Method::Overlap),
                (22.0, Method::Overlap, Method::Tile)
            ]
        );
        for flip in flips {
            assert_eq!(ordered(flip.slot_h), Some(flip.from));
            assert_eq!(ordered(flip.slot_h - 1e-9), Some(flip.below));
        }
        let alike = Fractures {
            tile: Some(summary(20.0, true, 1.0)),
            overlap: Some(summary(10.0, true, 1.0)),
            ..Fractures::default()
        };
        assert_eq!(super::flips(&alike, 100), []);
    }
}
