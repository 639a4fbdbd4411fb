//! What changed between two quotes, and which figures caused it.

use std::collections::BTreeMap;

use crate::number::brief;

use super::result::{
    CAUTION, Changed, Comparison, Count, FigureChange, FigureShare, Fits, Method, Quote, Source,
    TimeChange,
};

/// A quote with its figures, where they are known.
#[derive(Clone, Copy, Debug)]
pub struct Side<'a> {
    /// The quote.
    pub quote: &'a Quote,
    /// Every distinct figure.
    pub figures: Option<&'a [FigureShare]>,
}

/// Compares two quotes, each by the fracture that it recommends.
///
/// Figures are the same if their outlines are, wherever they stand.
#[must_use]
pub fn compare(before: Side<'_>, after: Side<'_>) -> Comparison {
    let quotes = [before.quote, after.quote];
    let recommended = quotes.map(|quote| quote.recommended);
    let hours = quotes.map(|quote| quote.fractures.get(quote.recommended?)?.hours);
    let mut comparison = Comparison {
        changed: terms(before.quote, after.quote),
        recommended,
        hours,
        time: None,
        figures: Vec::new(),
        same: 0,
        caution: CAUTION.to_owned(),
    };
    let (Some(a), Some(b)) = (before.figures, after.figures) else {
        return comparison;
    };
    let [Some(method_a), Some(method_b)] = recommended else {
        return comparison;
    };
    let (a, b) = (by_outline(a, method_a), by_outline(b, method_b));
    let outlines: std::collections::BTreeSet<&str> =
        a.keys().chain(b.keys()).map(String::as_str).collect();
    let mut time = TimeChange {
        figures_s: 0.0,
        writer_s: 0.0,
    };
    for outline in outlines {
        let none = Cost::default();
        let was = a.get(outline).unwrap_or(&none);
        let is = b.get(outline).unwrap_or(&none);
        let change = is.seconds - was.seconds;
        // What the shots of after would have taken at the time per shot of before.
        let writer = match (was.per_shot(), is.per_shot()) {
            (Some(before), Some(after)) => (after - before) * is.shots as f64,
            _ => 0.0,
        };
        time.writer_s += writer;
        time.figures_s += change - writer;
        if was.places == is.places && was.shots == is.shots {
            comparison.same += 1;
            continue;
        }
        let shown = if is.places > 0 { is } else { was };
        comparison.figures.push(FigureChange {
            fingerprint: outline.to_owned(),
            clip: shown.clip,
            figure: shown.figure,
            place_nm: shown.place_nm,
            places: [Count(was.places), Count(is.places)],
            shots: [Count(was.shots), Count(is.shots)],
            seconds: [was.seconds, is.seconds],
        });
    }
    let size = |change: &FigureChange| (change.seconds[1] - change.seconds[0]).abs();
    comparison.figures.sort_by(|a, b| {
        size(b)
            .total_cmp(&size(a))
            .then(a.fingerprint.cmp(&b.fingerprint))
    });
    comparison.time = Some(time);
    comparison
}

/// What all figures of one outline cost.
#[derive(Default)]
struct Cost {
    clip: u64,
    figure: u64,
    place_nm: [f64; 2],
    places: u128,
    shots: u128,
    seconds: f64,
}

impl Cost {
    fn per_shot(&self) -> Option<f64> {
        (self.shots > 0).then(|| self.seconds / self.shots as f64)
    }
}

fn by_outline(figures: &[FigureShare], method: Method) -> BTreeMap<String, Cost> {
    let mut costs: BTreeMap<String, Cost> = BTreeMap::new();
    for figure in figures {
        let cost = costs
            .entry(figure.fingerprint.clone())
            .or_insert_with(|| Cost {
                clip: figure.clip,
                figure: figure.figure,
                place_nm: figure.place_nm,
                ..Cost::default()
            });
        let places = figure.places.0;
        cost.places = cost.places.saturating_add(places);
        if let Some(share) = figure.fractures.get(method) {
            let shots = places.saturating_mul(share.shots.into());
            cost.shots = cost.shots.saturating_add(shots);
            cost.seconds += share.seconds.unwrap_or(0.0);
        }
    }
    costs
}

/// All terms of a quote as name and value.
fn terms(before: &Quote, after: &Quote) -> Vec<Changed> {
    let named = [before, after].map(|quote| {
        let mut terms: Vec<(String, String)> = Vec::new();
        let mut say = |what: &str, value: String| terms.push((what.to_owned(), value));
        for (number, source) in (1..).zip(&quote.sources) {
            let clip = if quote.sources.len() > 1 {
                format!("clip {number}, ")
            } else {
                String::new()
            };
            for (what, value) in of_source(source) {
                say(&format!("{clip}{what}"), value);
            }
        }
        let field = quote.scaled_to_field;
        say(
            "field, mm",
            field.map_or_else(String::new, |f| format!("{} × {}", f.width_mm, f.height_mm)),
        );
        say("tolerance_nm", quote.tolerance_nm.to_string());
        say("profile", quote.profile.name.clone());
        for (key, value) in &quote.profile.numbers {
            say(key, value.to_string());
        }
        say("dose correction", brief(quote.dose_correction.dose));
        say(
            "slot, h",
            quote
                .verdict
                .slot_h
                .map_or_else(String::new, |h| h.to_string()),
        );
        let fits = match quote.verdict.fits {
            Fits::Yes => "yes",
            Fits::No => "no",
            Fits::CannotSay => "cannot say",
        };
        say("fits", fits.to_owned());
        say("flags", quote.flags.len().to_string());
        terms
    });
    let [before, after] = named;
    let value = |terms: &[(String, String)], what: &str| {
        let found = terms.iter().find(|(name, _)| name == what);
        found.map_or_else(String::new, |(_, value)| value.clone())
    };
    let mut names: Vec<&String> = before.iter().map(|(name, _)| name).collect();
    for (name, _) in &after {
        if !names.contains(&name) {
            names.push(name);
        }
    }
    names
        .into_iter()
        .map(|what| Changed {
            what: what.clone(),
            before: value(&before, what),
            after: value(&after, what),
        })
        .filter(|change| change.before != change.after)
        .collect()
}

fn of_source(s: &Source) -> Vec<(&'static str, String)> {
    let corners = |rect: Option<[f64; 4]>| rect.map_or_else(String::new, |r| format!("{r:?}"));
    let share = s
        .coverage
        .map_or_else(String::new, |share| share.to_string());
    vec![
        ("layout", s.name.clone()),
        ("layers", s.layers.join(" + ")),
        ("layers subtracted", s.minus.join(" + ")),
        ("scale", s.scale.to_string()),
        ("mirrored", s.mirror.to_string()),
        ("shift_nm", format!("{:?}", s.shift_nm)),
        ("bias_nm", s.bias_nm.to_string()),
        ("background of", corners(s.background_of_nm)),
        ("window", corners(s.window_nm)),
        ("coverage", share),
        ("distinct figures", s.figures_distinct.to_string()),
        ("placed figures", s.figures_placed.to_string()),
    ]
}
