//! How true each fracture prints beyond its edge error: a second table of a quote, and what was done against backscatter.

use comfy_table::Table;

use crate::quote::result::{CHANGES, DoseMap, Quote, Scores};

use super::table::{finished, significant, trimmed};

/// One measure: up to three header lines, its value.
struct Measure {
    header: &'static str,
    value: fn(&Scores) -> Option<String>,
}

const UNMEASURED: &str = "–";

const MEASURES: [Measure; 11] = [
    Measure {
        header: "corner\n95 %\nnm",
        value: |s| two(s.corner_error_nm.p95),
    },
    Measure {
        header: "zones\nworst\nnm",
        value: |s| two(s.corner_error_nm.worst),
    },
    Measure {
        header: "edge error\nat -10 %\nnm",
        value: |s| through(s, -0.10),
    },
    Measure {
        header: "95 % when\nat -5 %\nnm",
        value: |s| through(s, -0.05),
    },
    Measure {
        header: "dose is\nat +5 %\nnm",
        value: |s| through(s, 0.05),
    },
    Measure {
        header: "\nat +10 %\nnm",
        value: |s| through(s, 0.10),
    },
    Measure {
        header: "margin\nworst 5 %\nnm/%",
        value: |s| two(s.margin_nm_per_pct.p95),
    },
    Measure {
        header: "budget\nmedian\nnm, 1 sd",
        value: |s| two(s.edge_sd_nm.median),
    },
    Measure {
        header: "\nworst 5 %\nnm, 1 sd",
        value: |s| two(s.edge_sd_nm.p95),
    },
    Measure {
        header: "narrowest\ndrawn, printed\nnm",
        value: |s| {
            let narrowest = s.narrowest?;
            let printed = narrowest
                .printed_nm
                .map_or_else(|| UNMEASURED.to_owned(), trimmed);
            Some(format!("{} {printed}", trimmed(narrowest.drawn_nm)))
        },
    },
    Measure {
        header: "area\nprinted\n%",
        value: |s| {
            two(Some(100.0 * s.printed_area_nm2 / s.drawn_area_nm2).filter(|p| p.is_finite()))
        },
    },
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
            "doses times {:.3} to {:.3} by place, {:.3} on average; edge levels {:.3} to {:.3} of the threshold before, within {:.1e} of it after; mesh {} µm{coarse}, coverage {} beyond the layout",
            map.least_dose,
            map.greatest_dose,
            map.mean_dose,
            low,
            high,
            map.level_error,
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
