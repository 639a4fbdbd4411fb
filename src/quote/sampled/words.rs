//! What is said of a sample.

use crate::quote::result::{self, Method, SampleUsed};
use crate::quote::sample;

impl From<sample::Stopped> for result::Stopped {
    fn from(stopped: sample::Stopped) -> Self {
        use sample::Stopped;
        match stopped {
            Stopped::All => Self::AllDrawn,
            Stopped::Narrow => Self::NarrowEnough,
            Stopped::Most => Self::AsManyAsAsked,
            Stopped::Time => Self::TimeOut,
        }
    }
}

/// What a sample leaves open.
pub(in crate::quote) fn note(sample: &SampleUsed, fractures: &result::Fractures) -> Option<String> {
    if sample.figures_drawn == sample.figures_distinct {
        return None;
    }
    let none_fails = |method| {
        fractures
            .get(method)
            .is_some_and(|f| f.figures_out_of_tolerance == Some(0))
    };
    // Of n drawn none fails: with 95 % confidence fewer than 3/n of all do (Hanley and Lippman-Hand, JAMA 249 (1983) 1743).
    let most = 3.0 / sample.figures_drawn as f64;
    let fails = if none_fails(Method::Tile) || none_fails(Method::Overlap) {
        format!(
            "; where none of them is out of tolerance, up to {} % of all may be",
            crate::number::brief(100.0 * most)
        )
    } else {
        String::new()
    };
    Some(format!(
        "worst values, flags and shot lists are those of the figures drawn, judged beside their neighbours as drawn in the layout{fails}"
    ))
}

/// Says of a verdict that cannot be given that a larger sample may give it.
pub(in crate::quote) fn say(verdict: &mut result::Verdict, sample: &SampleUsed) {
    if verdict.fits == result::Fits::CannotSay && verdict.slot_h.is_some() {
        verdict.sentence += &format!(
            " It rests on {} of {} figures: a larger sample narrows it as far as it comes from drawing.",
            sample.figures_drawn, sample.figures_distinct
        );
    }
}
