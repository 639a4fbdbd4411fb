//! What a sample says, in sentences.

use crate::quote::result::{Count, Estimate, SampleUsed, Stopped};

use crate::number::{grouped, significant};

/// One paragraph: how many figures were drawn and why no more, and what follows with which interval.
pub(super) fn paragraph(sample: &SampleUsed) -> String {
    let count = |n: u64| grouped(Count::from(n).0);
    let (drawn, all) = (count(sample.figures_drawn), count(sample.figures_distinct));
    let why = match sample.stopped {
        Stopped::AllDrawn => {
            return format!(
                "Sample: all {all} distinct figures were drawn, so the result is exact."
            );
        }
        Stopped::NarrowEnough => format!(
            "the intervals are within {} %",
            significant(100.0 * sample.within.unwrap_or_default())
        ),
        Stopped::AsManyAsAsked => "as many as asked".to_owned(),
        Stopped::TimeOut => "time was out, so their number depends on the clock".to_owned(),
    };
    let totals: Vec<String> = sample
        .shots
        .iter()
        .zip(sample.beam_h.iter())
        .filter_map(|((method, shots), (_, beam))| {
            Some(format!(
                "{} {} shots, {} h of flashing and settling",
                method.name(),
                plus_minus(shots?),
                plus_minus(beam?)
            ))
        })
        .collect();
    format!(
        "Sample: {drawn} of {all} distinct figures were fractured (seed {}; {why}) and stand for all; with 95 % intervals: {}. The same again: --sample {} --seed {}.",
        sample.seed,
        totals.join("; "),
        sample.figures_drawn,
        sample.seed
    )
}

/// `1.23e9 ± 1.4 %`.
fn plus_minus(estimate: &Estimate) -> String {
    let half = 50.0 * (estimate.high - estimate.low) / estimate.value.abs().max(f64::MIN_POSITIVE);
    let value = if estimate.value >= 1e6 {
        format!("{:.3e}", estimate.value)
    } else {
        significant(estimate.value)
    };
    format!("{value} ± {} %", significant(half))
}
