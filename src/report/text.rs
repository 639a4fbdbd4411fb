//! A quote as text for a terminal: the tables, verdict, reason, flags, caution.

use std::fmt::Write as _;

use super::table::grouped;
use super::{fidelity, remedy_text, sample_text, table};
use crate::number::{self, brief, length_unit, significant, trimmed};
use crate::quote::result::{
    Count, Flag, FractureSummary, Method, Quote, RasterLine, Sensitivity, Source,
};

/// Lines are at most so long, whatever the width of the terminal.
const WIDEST: usize = 120;

/// How much of a quote to write and how wide.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TextOptions {
    /// Characters to a line; more than 120 are not used.
    pub width: usize,
    /// Flagged figures listed before the rest is only counted; with 0 all are counted, none listed.
    pub flags: usize,
}

impl Default for TextOptions {
    fn default() -> Self {
        Self {
            width: WIDEST,
            flags: 10,
        }
    }
}

/// The whole quote as text, ending in a newline.
#[must_use]
pub fn text(quote: &Quote, options: TextOptions) -> String {
    let width = options.width.min(WIDEST);
    let mut out = Text {
        width,
        text: String::new(),
    };
    heading(quote, &mut out);
    out.blank();
    out.text.push_str(&table::comparison(quote, width));
    let fidelity = fidelity::table(quote);
    if !fidelity.is_empty() {
        out.blank();
        out.text.push_str(&fidelity);
    }
    out.blank();
    out.line(
        "staircase: the plain geometric one, as a flow without simulation writes it; the baseline",
    );
    if let Some(raster) = &quote.raster {
        out.line(&beside(raster, quote.recommended));
    }
    out.line(&prints(quote));
    if let Some(intervals) = intervals(quote) {
        out.line(&intervals);
    }
    for line in written(quote) {
        out.line(&line);
    }
    if let Some(first) = moves(&quote.sensitivity) {
        out.line(&first);
    }
    out.blank();
    if let Some(sample) = &quote.sample {
        out.paragraph(&sample_text::paragraph(sample), "");
    }
    out.paragraph(&quote.verdict.sentence, "");
    let order = quote.recommended.map_or("none", Method::name);
    out.paragraph(&format!("Recommended: {order}. {}", quote.reason), "");
    out.paragraph(&remedy_text::choice(quote), "");
    if let Some(change) = &quote.must_change {
        for (line, indent) in remedy_text::must_change(change, options.flags) {
            out.paragraph(&line, indent);
        }
    }
    if let Some(why) = &quote.must_change_unknown {
        out.paragraph(&format!("What must change: {why}"), "");
    }
    flags(quote, options.flags, &mut out);
    out.blank();
    for note in &quote.notes {
        out.line(&format!("note: {note}"));
    }
    out.paragraph(&quote.caution, "");
    out.text
}

fn heading(quote: &Quote, out: &mut Text) {
    for (number, s) in (1..).zip(&quote.sources) {
        let extent = s.extent_nm.map_or_else(
            || "empty".to_owned(),
            |[w, h]| {
                let (unit, name) = length_unit(w.max(h));
                format!("{} × {} {name}", trimmed(w / unit), trimmed(h / unit))
            },
        );
        let (clip, share) = if quote.sources.len() > 1 {
            let percent = 100.0 * s.coverage.unwrap_or(0.0);
            (
                format!("clip {number}: "),
                format!(", fills {} % of the field", brief(percent)),
            )
        } else {
            (String::new(), String::new())
        };
        out.paragraph(
            &format!(
                "{clip}{}, layer {}{}: {extent}, {} distinct figures at {} places{share}",
                s.name,
                s.layers.join(" + "),
                transfer(s),
                grouped(s.figures_distinct.into()),
                grouped(s.figures_placed)
            ),
            "",
        );
    }
    out.paragraph(
        &format!(
            "profile {}, sigma {} nm, tolerance {} nm",
            quote.profile.name, quote.sigma_nm, quote.tolerance_nm
        ),
        "",
    );
    let correction = quote.dose_correction;
    let doses = fidelity::doses(quote);
    if !doses.is_empty() {
        out.line("Against backscatter every place gets its own dose:");
        doses.iter().for_each(|line| out.line(&format!("  {line}")));
    } else if correction.backscatter_ratio > 0.0 {
        out.paragraph(
            &format!(
                "Every dose times {} against backscatter ({} at a mean coverage of {}): one value for the whole mask.",
                significant(correction.dose),
                significant(correction.backscatter_ratio),
                significant(correction.density)
            ),
            "",
        );
    }
    out.paragraph(
        &quote.scaled_to_field.map_or_else(
            || "Counts and hours are for the clip alone, not for a field.".to_owned(),
            |f| {
                let (copies, own) = if quote.sources.len() > 1 {
                    ("copies of the clips", "those of the clips, each once")
                } else {
                    ("copies of the clip", "those of one clip")
                };
                format!(
                    "Hours are for a field of {} mm × {} mm, of which {copies} fill {} %; shots and slivers are {own}. On the field: {}.",
                    f.width_mm,
                    f.height_mm,
                    significant(100.0 * f.coverage),
                    field_shots(quote)
                )
            },
        ),
        "",
    );
}

/// Shots of each fracture on the whole field.
fn field_shots(quote: &Quote) -> String {
    let of = |(method, summary): (Method, Option<&FractureSummary>)| {
        let shots = summary?.hours?.shots_written;
        #[allow(clippy::cast_precision_loss, reason = "four digits are shown")]
        let shots = shots.0 as f64;
        Some(format!("{} {shots:.3e} shots", method.name()))
    };
    quote
        .fractures
        .iter()
        .filter_map(of)
        .collect::<Vec<_>>()
        .join(", ")
}

/// How the layers went onto the mask; only the scale is said if it is as drawn.
fn transfer(s: &Source) -> String {
    let corners = |[x0, y0, x1, y1]: [f64; 4]| format!("({x0}, {y0}) to ({x1}, {y1}) nm");
    let [x, y] = s.shift_nm;
    let minus: String = s.minus.iter().map(|layer| format!(" - {layer}")).collect();
    let parts = [
        Some(format!("{minus}, scale {}", s.scale)),
        s.mirror.then(|| "mirrored".to_owned()),
        ([x, y] != [0.0; 2]).then(|| format!("shift ({x}, {y}) nm")),
        (s.bias_nm != 0.0).then(|| format!("bias {} nm", s.bias_nm)),
        s.background_of_nm
            .map(|frame| format!("background of {}", corners(frame))),
        s.window_nm
            .map(|window| format!("window {}", corners(window))),
    ];
    parts.into_iter().flatten().collect::<Vec<_>>().join(", ")
}

fn prints(quote: &Quote) -> String {
    let mut words = Vec::new();
    for (method, fracture) in quote.fractures.iter() {
        let said = match fracture.map(|f| (f.prints_within_tolerance, f.figures_out_of_tolerance)) {
            None => "not made".to_owned(),
            Some((None, _)) => "not checked".to_owned(),
            Some((Some(true), _)) => "yes".to_owned(),
            Some((Some(false), None)) => "no".to_owned(),
            Some((Some(false), Some(n))) => {
                format!("no ({} of the distinct figures)", grouped(n.into()))
            }
        };
        words.push(format!("{} {said}", method.name()));
    }
    format!("prints within tolerance: {}", words.join(", "))
}

/// The raster writer in words, and where it ties.
fn beside(raster: &RasterLine, recommended: Option<Method>) -> String {
    let mut words = format!(
        "raster: a multi-beam writer (profile {}) at the same base dose, whatever the pattern",
        raster.profile
    );
    let order = recommended.map_or("none", Method::name);
    match (raster.tie_flashes, raster.flashes) {
        (Some(tie), Some(own)) => {
            #[allow(clippy::cast_precision_loss, reason = "three digits are shown")]
            let [tie, own] = [tie, own].map(|n| n.0 as f64);
            let _ = write!(
                words,
                "; it ties with {order} at {} flashes a pass, here {}",
                large(tie),
                large(own)
            );
        }
        (None, Some(_)) => {
            let _ = write!(words, "; it takes no longer whatever the number of shots");
        }
        _ => {}
    }
    words
}

/// A count that may be astronomical, to three digits.
fn large(count: f64) -> String {
    if count >= 1e6 {
        format!("{count:.2e}")
    } else {
        significant(count)
    }
}

/// How the recommended fracture is written: stripes by what bounds them, flashes beyond one a shot, flashes that cannot be made.
fn written(quote: &Quote) -> Vec<String> {
    let Some(method) = quote.recommended else {
        return Vec::new();
    };
    let hours = quote.fractures.get(method).and_then(|f| f.hours);
    let Some(hours) = hours.filter(|hours| hours.stripes > 0) else {
        return Vec::new();
    };
    let large = |count: Count| {
        #[allow(clippy::cast_precision_loss, reason = "three digits are shown")]
        let count = count.0 as f64;
        large(count)
    };
    let mut words = format!(
        "{}: {} stripes over all passes, of which the stage bounds {} and the beam the others; {} flashes",
        method.name(),
        grouped(hours.stripes.into()),
        grouped(hours.stage_bound_stripes.into()),
        large(hours.flashes)
    );
    let more = hours.more_flashes;
    let causes = [
        (more.border, "where a border cuts a shot"),
        (more.beam_current, "where the beam current does not reach"),
        (more.dose, "where one flash may not give the dose"),
    ];
    let causes: Vec<String> = causes
        .into_iter()
        .filter(|(count, _)| count.0 > 0)
        .map(|(count, why)| format!("{} {why}", large(count)))
        .collect();
    if !causes.is_empty() {
        let _ = write!(
            words,
            ", of which beyond one a shot and pass: {}",
            causes.join(", ")
        );
    }
    let short = (hours.too_short.0 > 0).then(|| {
        format!(
            "{}: {} flashes are shorter than the shortest that the writer makes (shortest_flash_ns): fewer passes or less current",
            method.name(),
            large(hours.too_short)
        )
    });
    std::iter::once(words).chain(short).collect()
}

/// What moves the total most.
fn moves(sensitivity: &[Sensitivity]) -> Option<String> {
    let one = |s: &Sensitivity| {
        format!(
            "{} (now {}): {} to {} h",
            s.key,
            number::given(s.value),
            significant(s.at_lower_h),
            significant(s.at_upper_h)
        )
    };
    let (first, rest) = sensitivity.split_first()?;
    let rest: Vec<String> = rest.iter().take(2).map(one).collect();
    let then = if rest.is_empty() {
        String::new()
    } else {
        format!("; then {}", rest.join(", "))
    };
    Some(format!(
        "moves the total most, from 10 % less to 10 % more (a count by 1): {}{then}",
        one(first)
    ))
}

/// The intervals of the hours; `None` if all are exact.
fn intervals(quote: &Quote) -> Option<String> {
    let words: Vec<String> = quote
        .fractures
        .iter()
        .filter_map(|(method, f)| Some((method, f?.hours?)))
        .filter(|(_, h)| h.low_h < h.high_h)
        .map(|(method, h)| {
            let (low, high) = (significant(h.low_h), significant(h.high_h));
            format!("{} {low} to {high} h", method.name())
        })
        .collect();
    (!words.is_empty()).then(|| format!("interval of the total: {}", words.join(", ")))
}

fn flags(quote: &Quote, most: usize, out: &mut Text) {
    let flags = &quote.flags;
    let clip = |flag: &Flag| match quote.sources.len() {
        0 | 1 => String::new(),
        _ => format!("clip {}, ", flag.clip),
    };
    out.blank();
    if flags.is_empty() {
        out.line("No figure is flagged.");
        return;
    }
    let count = grouped(Count::from(flags.len() as u64));
    out.line(&format!("Flagged: {count}"));
    for (i, flag) in flags.iter().take(most).enumerate() {
        let mut words = format!(
            "{:>3}  {}figure {} at ({}, {}) nm: {}",
            i + 1,
            clip(flag),
            flag.figure,
            trimmed(flag.place_nm[0]),
            trimmed(flag.place_nm[1]),
            flag.kind.name().replace('_', " ")
        );
        if let Some(found) = found(flag) {
            let _ = write!(words, ", {found}");
        }
        if !flag.remedy.is_empty() {
            let _ = write!(words, "; {}", flag.remedy);
        }
        if let Some(tried) = remedy_text::of_flag(quote, flag) {
            let _ = write!(words, "; {tried}");
        }
        if let Some(picture) = &flag.picture {
            let _ = write!(words, " [{picture}]");
        }
        out.paragraph(&words, "     ");
    }
    if most > 0 && flags.len() > most {
        let rest = grouped(Count::from((flags.len() - most) as u64));
        out.line(&format!("     and {rest} more"));
    }
}

/// The number of a flag with its unit.
pub(super) fn found(flag: &Flag) -> Option<String> {
    let number = flag.number?;
    // A dose that misses one half by little must not read as one half.
    let number = if flag.unit.starts_with("dose") {
        format!("{number:.4}")
    } else {
        significant(number)
    };
    Some(format!("{number} {}", flag.unit))
}

struct Text {
    width: usize,
    text: String,
}

impl Text {
    fn line(&mut self, line: &str) {
        self.paragraph(line, "     ");
    }

    fn blank(&mut self) {
        self.text.push('\n');
    }

    /// Words filled into lines; all but the first begin with `indent`. Spaces that lead the text are kept.
    fn paragraph(&mut self, words: &str, indent: &str) {
        let lead = words.len() - words.trim_start().len();
        let mut line = words[..lead].to_owned();
        let mut fresh = true;
        for word in words[lead..].split(' ') {
            if !fresh && line.chars().count() + 1 + word.chars().count() > self.width {
                self.text.push_str(line.trim_end());
                self.text.push('\n');
                line = indent.to_owned();
                fresh = true;
            }
            if !fresh {
                line.push(' ');
            }
            line.push_str(word);
            fresh = false;
        }
        if !line.trim().is_empty() {
            self.text.push_str(line.trim_end());
            self.text.push('\n');
        }
    }
}
