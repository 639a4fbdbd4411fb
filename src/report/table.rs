//! A quote as text for a terminal: a table with one line per fracture, verdict, reason, flags, caution.

use std::fmt::Write as _;

use comfy_table::{CellAlignment, ContentArrangement, Table};

use super::fidelity;
use crate::quote::result::{Count, Flag, FractureSummary, Method, Quote, Source};

/// Shown where nothing was measured.
const UNMEASURED: &str = "–";
/// Below this width, or where the wide table would not fit, measures run down and fractures across.
const NARROW: usize = 100;
const WIDEST: usize = 120;
/// Space between digits of a group: thin, so that it reads as one number and never breaks.
const GROUP: char = '\u{202f}';

/// How much of a quote to write and how wide.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TextOptions {
    /// Characters to a line; more than 120 are not used.
    pub width: usize,
    /// Flagged figures listed before the rest is only counted.
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
    out.text.push_str(&comparison(quote, width));
    let fidelity = fidelity::table(quote);
    if !fidelity.is_empty() {
        out.blank();
        out.text.push_str(&fidelity);
    }
    out.blank();
    out.line(
        "staircase: the plain geometric one, as a flow without simulation writes it; the baseline",
    );
    out.line(&prints(quote));
    if let Some(intervals) = intervals(quote) {
        out.line(&intervals);
    }
    out.blank();
    out.paragraph(&quote.verdict.sentence, "");
    let order = quote.recommended.map_or("none", Method::name);
    out.paragraph(&format!("Recommended: {order}. {}", quote.reason), "");
    flags(&quote.flags, options.flags, &mut out);
    out.blank();
    for note in &quote.notes {
        out.line(&format!("note: {note}"));
    }
    out.paragraph(&quote.caution, "");
    out.text
}

fn heading(quote: &Quote, out: &mut Text) {
    let s = &quote.source;
    let extent = s.extent_nm.map_or_else(
        || "empty".to_owned(),
        |[w, h]| {
            let (unit, name) = unit(w.max(h));
            format!("{} × {} {name}", trimmed(w / unit), trimmed(h / unit))
        },
    );
    out.paragraph(
        &format!(
            "{}, layer {}{}: {extent}, {} distinct figures at {} places",
            s.name,
            s.layers.join(" + "),
            transfer(s),
            grouped(s.figures_distinct.into()),
            grouped(s.figures_placed)
        ),
        "",
    );
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
                format!(
                    "Hours are for a field of {} mm × {} mm, of which copies of the clip fill {} %; shots and slivers are those of one clip. On the field: {}.",
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

/// One measure of a fracture: up to three header lines (wide table), a label (narrow table), its value.
struct Measure {
    header: &'static str,
    label: &'static str,
    value: fn(&FractureSummary) -> Option<String>,
}

const MEASURES: [Measure; 15] = [
    Measure {
        header: "\nshots\n",
        label: "shots",
        value: |f| Some(grouped(f.shots)),
    },
    Measure {
        header: "smallest\nside\nnm",
        label: "smallest side, nm",
        value: |f| f.smallest_side_nm.map(trimmed),
    },
    Measure {
        header: "\nslivers\n",
        label: "slivers",
        value: |f| Some(grouped(f.slivers)),
    },
    Measure {
        header: "edge\nmean\nnm",
        label: "edge error, mean, nm",
        value: |f| f.edge_error_nm.mean.map(|e| format!("{e:+.2}")),
    },
    Measure {
        header: "error\n95 %\nnm",
        label: "edge error, 95 %, nm",
        value: |f| f.edge_error_nm.p95.map(|e| format!("{e:.2}")),
    },
    Measure {
        header: "\nworst\nnm",
        label: "edge error, worst, nm",
        value: |f| f.edge_error_nm.worst.map(|e| format!("{e:.2}")),
    },
    Measure {
        header: "out of\ntol.\n%",
        label: "outline out of tolerance, %",
        value: |f| {
            f.out_of_tolerance_share
                .map(|s| format!("{:.2}", 100.0 * s))
        },
    },
    Measure {
        header: "margin\nmedian\nnm/%",
        label: "margin, median, nm/%",
        value: |f| f.margin_nm_per_pct.median.map(|m| format!("{m:.2}")),
    },
    Measure {
        header: "\nworst\nnm/%",
        label: "margin, worst, nm/%",
        value: |f| f.margin_nm_per_pct.worst.map(|m| format!("{m:.2}")),
    },
    Measure {
        header: "time\nflash\nh",
        label: "time, flash, h",
        value: |f| f.hours.map(|h| significant(h.flash_h)),
    },
    Measure {
        header: "\nsettle\nh",
        label: "time, settle, h",
        value: |f| f.hours.map(|h| significant(h.settle_h)),
    },
    Measure {
        header: "sub-\nfield\nh",
        label: "time, sub-field moves, h",
        value: |f| f.hours.map(|h| significant(h.subfield_h)),
    },
    Measure {
        header: "\nstage\nh",
        label: "time, stage, h",
        value: |f| f.hours.map(|h| significant(h.stage_h)),
    },
    Measure {
        header: "over-\nhead\nh",
        label: "time, overhead, h",
        value: |f| f.hours.map(|h| significant(h.overhead_h)),
    },
    Measure {
        header: "\ntotal\nh",
        label: "time, total, h",
        value: |f| f.hours.map(|h| significant(h.total_h)),
    },
];

/// Columns of the wide table that begin a group: edge error, margin, time.
const GROUPS: [usize; 3] = [4, 8, 10];

impl Measure {
    fn of(&self, fracture: Option<&FractureSummary>) -> String {
        fracture
            .and_then(self.value)
            .unwrap_or_else(|| UNMEASURED.to_owned())
    }
}

fn comparison(quote: &Quote, width: usize) -> String {
    if width >= NARROW {
        let wide = finished(wide(quote), &GROUPS);
        if wide.lines().all(|l| l.chars().count() <= width) {
            return wide;
        }
    }
    finished(narrow(quote), &[1, 2, 3])
}

fn wide(quote: &Quote) -> Table {
    let mut table = Table::new();
    table.set_header(std::iter::once("\nfracture\n").chain(MEASURES.iter().map(|m| m.header)));
    for (method, fracture) in quote.fractures.iter() {
        table.add_row(
            std::iter::once(method.name().to_owned())
                .chain(MEASURES.iter().map(|m| m.of(fracture))),
        );
    }
    table
}

fn narrow(quote: &Quote) -> Table {
    let mut table = Table::new();
    table.set_header(std::iter::once("").chain(Method::ALL.iter().map(|m| m.name())));
    for measure in &MEASURES {
        table.add_row(
            std::iter::once(measure.label.to_owned())
                .chain(quote.fractures.iter().map(|(_, f)| measure.of(f))),
        );
    }
    table
}

/// One line under the header, numbers to the right, a wider gap before the columns `gaps`, no space at the line ends.
pub(super) fn finished(mut table: Table, gaps: &[usize]) -> String {
    table
        .load_style(comfy_table::presets::NOTHING)
        .set_content_arrangement(ContentArrangement::Disabled);
    for (i, column) in table.column_iter_mut().enumerate() {
        let gap = if gaps.contains(&i) { 2 } else { 1 };
        column.set_padding((if i > 0 { gap } else { 0 }, 0));
        if i > 0 {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let text = table.trim_fmt();
    let lines: Vec<&str> = text.lines().collect();
    let rule = lines.iter().map(|l| l.chars().count()).max().unwrap_or(0);
    let head = table.header().map_or(0, |h| {
        h.cell_iter()
            .map(|c| c.content().split('\n').count())
            .max()
            .unwrap_or(0)
    });
    let mut out = String::new();
    for (i, line) in lines.iter().enumerate() {
        if i == head {
            out.push_str(&"─".repeat(rule));
            out.push('\n');
        }
        out.push_str(line.trim_end());
        out.push('\n');
    }
    out
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

fn flags(flags: &[Flag], most: usize, out: &mut Text) {
    out.blank();
    if flags.is_empty() {
        out.line("No figure is flagged.");
        return;
    }
    let count = grouped(Count::from(flags.len() as u64));
    out.line(&format!("Flagged: {count}"));
    for (i, flag) in flags.iter().take(most).enumerate() {
        let mut words = format!(
            "{:>3}  figure {} at ({}, {}) nm: {}",
            i + 1,
            flag.figure,
            trimmed(flag.place_nm[0]),
            trimmed(flag.place_nm[1]),
            flag.kind.name().replace('_', " ")
        );
        if let Some(number) = flag.number {
            // A dose that misses one half by little must not read as one half.
            let number = if flag.unit.starts_with("dose") {
                format!("{number:.4}")
            } else {
                significant(number)
            };
            let _ = write!(words, ", {number} {}", flag.unit);
        }
        if !flag.remedy.is_empty() {
            let _ = write!(words, "; {}", flag.remedy);
        }
        if let Some(picture) = &flag.picture {
            let _ = write!(words, " [{picture}]");
        }
        out.paragraph(&words, "     ");
    }
    if flags.len() > most {
        let rest = grouped(Count::from((flags.len() - most) as u64));
        out.line(&format!("     and {rest} more"));
    }
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

/// Digits in groups of three: `1 412`.
#[must_use]
pub fn grouped(count: Count) -> String {
    let digits = count.to_string();
    let mut out = String::with_capacity(digits.len() * 2);
    for (i, digit) in digits.chars().enumerate() {
        if i > 0 && (digits.len() - i).is_multiple_of(3) {
            out.push(GROUP);
        }
        out.push(digit);
    }
    out
}

/// Three significant digits, more only for whole numbers: `0.0412`, `3.08`, `41.5`, `412`, `1 412`; tiny as `4.1e-6`.
#[must_use]
pub fn significant(x: f64) -> String {
    let size = x.abs();
    if !x.is_finite() {
        UNMEASURED.to_owned()
    } else if size == 0.0 {
        "0".to_owned()
    } else if size < 0.000_995 {
        format!("{x:.1e}")
    } else if size >= 999.5 {
        let whole = format!("{:.0}", size);
        let text = whole.parse().map_or(whole, |n| grouped(Count(n)));
        if x < 0.0 { format!("-{text}") } else { text }
    } else {
        let decimals = [
            (99.95, 0),
            (9.995, 1),
            (0.9995, 2),
            (0.09995, 3),
            (0.009_995, 4),
        ]
        .iter()
        .find(|(from, _)| size >= *from)
        .map_or(5, |(_, d)| *d);
        format!("{x:.decimals$}")
    }
}

/// A coordinate or side to the picometre, without trailing zeros.
pub(super) fn trimmed(x: f64) -> String {
    let text = format!("{x:.3}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// A length in the unit that suits it.
pub(super) fn length(nm: f64) -> String {
    let (unit, name) = unit(nm);
    format!("{} {name}", trimmed(nm / unit))
}

/// The unit (nm, and its name) that suits a length.
fn unit(nm: f64) -> (f64, &'static str) {
    match nm {
        1e6.. => (1e6, "mm"),
        1e3.. => (1e3, "µm"),
        _ => (1.0, "nm"),
    }
}
