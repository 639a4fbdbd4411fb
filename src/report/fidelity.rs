//! How true each fracture prints beyond its edge error: a second table of a quote, and what was done against backscatter.

use comfy_table::Table;

use crate::number::{UNMEASURED, significant, trimmed};
use crate::quote::result::{CHANGES, DoseMap, Quote, Scores};

use super::table::finished;

/// One measure: up to three header lines, its value.
struct Measure {
    header: &'static str,
    value: fn(&Scores) -> Option<String>,
}

const fn measure(header: &'static str, value: fn(&Scores) -> Option<String>) -> Measure {
    Measure { header, value }
}

const MEASURES: [Measure; 11] = [
    measure("corner\n95 %\nnm", |s| two(s.corner_error_nm.p95)),
    measure("zones\nworst\nnm", |s| two(s.corner_error_nm.worst)),
    measure("edge error\nat -10 %\nnm", |s| through(s, -0.10)),
    measure("95 % when\nat -5 %\nnm", |s| through(s, -0.05)),
    measure("dose is\nat +5 %\nnm", |s| through(s, 0.05)),
    measure("\nat +10 %\nnm", |s| through(s, 0.10)),
    measure("margin\nworst 5 %\nnm/%", |s| two(s.margin_nm_per_pct.p95)),
    measure("budget\nmedian\nnm, 1 sd", |s| two(s.edge_sd_nm.median)),
    measure("\nworst 5 %\nnm, 1 sd", |s| two(s.edge_sd_nm.p95)),
    measure("narrowest\ndrawn, printed\nnm", |s| {
        let narrowest = s.narrowest?;
        let printed = two(narrowest.printed_nm).unwrap_or_else(|| UNMEASURED.to_owned());
        Some(format!("{:.2} {printed}", narrowest.drawn_nm))
    }),
    measure("area\nprinted\n%", |s| {
        two(Some(100.0 * s.printed_area_nm2 / s.drawn_area_nm2).filter(|p| p.is_finite()))
    }),
];

/// Columns that begin a group.
const GROUPS: [usize; 5] = [3, 7, 8, 10, 11];

/// The table; empty where no fracture was scored.
pub(super) fn table(quote: &Quote) -> String {
    let mut table = Table::new();
    table.set_header(std::iter::once("\nfracture\n").chain(MEASURES.iter().map(|m| m.header)));
    let mut rows = 0;
    for (method, fracture) in quote.fractures.iter() {
        let Some(scores) = fracture.and_then(|f| f.scores) else {
            continue;
        };
        let cell = |m: &Measure| (m.value)(&scores).unwrap_or_else(|| UNMEASURED.to_owned());
        table.add_row(std::iter::once(method.name().to_owned()).chain(MEASURES.iter().map(cell)));
        rows += 1;
    }
    if rows == 0 {
        return String::new();
    }
    finished(table, &GROUPS)
}

/// A line for each fracture whose doses were corrected by place.
pub(super) fn doses(quote: &Quote) -> Vec<String> {
    let of = |map: &DoseMap| {
        let [low, high] = map.uncorrected_level;
        let coarse = if map.mesh_nm > 1.001 * map.wanted_mesh_nm {
            format!(
                " (coarser than the {} µm of a quarter of the least radius, for the size of the mask)",
                trimmed(1e-3 * map.wanted_mesh_nm)
            )
        } else {
            String::new()
        };
        format!(
            "doses times {:.3} to {:.3} by place, {:.3} on average; edge levels {:.3} to {:.3} of the threshold before, within {} of it after; mesh {} µm{coarse}, coverage {} beyond the layout",
            map.least_dose,
            map.greatest_dose,
            map.mean_dose,
            low,
            high,
            significant(map.level_error),
            trimmed(1e-3 * map.mesh_nm),
            significant(map.surroundings),
        )
    };
    let all = quote.fractures.iter();
    all.filter_map(|(method, f)| Some(format!("{}: {}", method.name(), of(&f?.dose_map?))))
        .collect()
}

fn two(x: Option<f64>) -> Option<String> {
    x.map(|x| format!("{x:.2}"))
}

fn through(scores: &Scores, change: f64) -> Option<String> {
    let at = CHANGES.iter().position(|c| (c - change).abs() < 1e-9)?;
    two(scores.through_dose.get(at)?.edge_error_nm.p95)
}
