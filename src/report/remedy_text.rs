//! The choice by slot, remedies and what must change, in sentences.

use crate::number::{brief, significant};
use crate::quote::result::{Change, Flag, MustChange, Quote, Trial};

/// At which slot another fracture would be ordered.
pub(super) fn choice(quote: &Quote) -> String {
    let flip = |flip: &crate::quote::result::Flip| {
        format!(
            "from a slot of {} h on {}, below it {}",
            significant(flip.slot_h),
            flip.from.name(),
            flip.below.name()
        )
    };
    if quote.flips.is_empty() {
        return "The choice is the same for every slot.".to_owned();
    }
    let flips: Vec<String> = quote.flips.iter().map(flip).collect();
    format!("The choice depends on the slot: {}.", flips.join("; "))
}

/// The sentence, and a line for each of the first changes.
pub(super) fn must_change(change: &MustChange, most: usize) -> Vec<(String, &'static str)> {
    let mut lines = vec![(format!("What must change: {}", change.sentence), "")];
    for (number, change) in (1..).zip(&change.changes).take(most) {
        lines.push((format!("{number:>3}  {}", one(change)), "     "));
    }
    if change.changes.len() > most && most > 0 {
        lines.push((
            format!("     and {} more", change.changes.len() - most),
            "     ",
        ));
    }
    lines
}

fn one(change: &Change) -> String {
    let clip = if change.clip > 1 {
        format!("clip {}, ", change.clip)
    } else {
        String::new()
    };
    format!("{clip}figure {}: {}", change.figure, trial(&change.trial))
}

/// `tolerance 3 nm saves 12.1 s, edge error 2.7 nm (95 %), 3.0 nm (worst)`.
pub(super) fn trial(trial: &Trial) -> String {
    let error = |e: Option<f64>| e.map_or_else(|| "–".to_owned(), |e| format!("{e:.2}"));
    let words = if trial.saved_s < 0.0 {
        "costs"
    } else {
        "saves"
    };
    let prints = if trial.prints_within_tolerance {
        ", prints within tolerance"
    } else if trial.acceptable {
        ""
    } else {
        ", no remedy: it strays too far or loses a part"
    };
    format!(
        "{} {words} {} s, edge error {} nm (95 %), {} nm (worst){prints}",
        trial.remedy.words(),
        brief(trial.saved_s.abs()),
        error(trial.edge_error_nm.p95),
        error(trial.edge_error_nm.worst)
    )
}

/// What was tried on a flagged figure that is of use: saves time, or prints where the figure does not.
pub(super) fn of_flag(quote: &Quote, flag: &Flag) -> Option<String> {
    let of_figure = quote
        .remedies
        .iter()
        .find(|r| (r.clip, r.figure) == (flag.clip, flag.figure))?;
    let useful =
        |trial: &&Trial| trial.acceptable && (trial.saved_s > 0.0 || trial.prints_within_tolerance);
    let mut useful: Vec<&Trial> = of_figure.trials.iter().filter(useful).collect();
    useful.sort_by(|a, b| b.saved_s.total_cmp(&a.saved_s));
    if useful.is_empty() {
        return Some(format!(
            "tried: none of {} remedies helps",
            of_figure.trials.len()
        ));
    }
    let words: Vec<String> = useful.into_iter().take(3).map(trial).collect();
    Some(format!("tried: {}", words.join("; ")))
}
