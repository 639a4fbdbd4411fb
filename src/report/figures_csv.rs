//! `figures.csv`: one line per distinct figure.

use std::io::Write;

use crate::quote::result::{FigureFracture, FigureResult, FlagKind, Method};

/// Columns before those of the fractures.
const FIGURE: [&str; 7] = [
    "figure",
    "x_nm",
    "y_nm",
    "places",
    "outline_nm",
    "vertices",
    "shape",
];

/// Columns of each fracture, led by its name: `tile_shots`.
const FRACTURE: [&str; 15] = [
    "shots",
    "edge_error_mean_nm",
    "edge_error_p95_nm",
    "edge_error_worst_nm",
    "prints_within_tolerance",
    "corner_error_worst_nm",
    "margin_median_nm_per_pct",
    "margin_worst_nm_per_pct",
    "edge_sd_median_nm",
    "edge_sd_worst_nm",
    "narrowest_drawn_nm",
    "narrowest_printed_nm",
    "printed_area_nm2",
    "mean_dose",
    "seconds",
];

/// Writes the figures in the order given, after one header line. What was not measured is an empty cell.
///
/// # Errors
/// When the output cannot be written.
pub fn write<'a>(
    out: impl Write,
    figures: impl IntoIterator<Item = &'a FigureResult>,
) -> Result<(), csv::Error> {
    let mut out = csv::Writer::from_writer(out);
    let mut header: Vec<String> = FIGURE.map(str::to_owned).to_vec();
    for method in Method::ALL {
        header.extend(FRACTURE.map(|column| format!("{}_{column}", method.name())));
    }
    header.push("flags".to_owned());
    out.write_record(&header)?;
    for figure in figures {
        out.write_record(row(figure))?;
    }
    out.flush()?;
    Ok(())
}

fn row(figure: &FigureResult) -> Vec<String> {
    let shape = if figure.rectilinear {
        "rectilinear"
    } else {
        "curved"
    };
    let mut row = vec![
        figure.figure.to_string(),
        figure.place_nm[0].to_string(),
        figure.place_nm[1].to_string(),
        figure.places.to_string(),
        figure.outline_nm.to_string(),
        figure.vertices.to_string(),
        shape.to_owned(),
    ];
    for (_, fracture) in figure.fractures.iter() {
        row.extend(fracture.map_or_else(Default::default, cells));
    }
    let flags: Vec<&str> = figure.flags.iter().map(|f: &FlagKind| f.name()).collect();
    row.push(flags.join(" "));
    row
}

fn cells(f: &FigureFracture) -> [String; FRACTURE.len()] {
    let number = |x: Option<f64>| x.map(|x| x.to_string()).unwrap_or_default();
    [
        f.shots.to_string(),
        number(f.edge_error_nm.mean),
        number(f.edge_error_nm.p95),
        number(f.edge_error_nm.worst),
        f.prints_within_tolerance
            .map(|yes| yes.to_string())
            .unwrap_or_default(),
        number(f.scores.and_then(|s| s.corner_error_nm.worst)),
        number(f.scores.and_then(|s| s.margin_nm_per_pct.median)),
        number(f.scores.and_then(|s| s.margin_nm_per_pct.worst)),
        number(f.scores.and_then(|s| s.edge_sd_nm.median)),
        number(f.scores.and_then(|s| s.edge_sd_nm.worst)),
        number(f.scores.and_then(|s| s.narrowest).map(|n| n.drawn_nm)),
        number(f.scores.and_then(|s| s.narrowest?.printed_nm)),
        number(f.scores.map(|s| s.printed_area_nm2)),
        number(f.mean_dose),
        number(f.seconds),
    ]
}
