//! `figures.csv`: one line per distinct figure.

use std::io::{Read, Write};
use std::str::FromStr;

use crate::quote::result::{
    ByMethod, Count, FigureFracture, FigureResult, FigureShare, FlagKind, Method, ShotShare,
};

/// Columns before those of the fractures.
const FIGURE: [&str; 9] = [
    "clip",
    "figure",
    "x_nm",
    "y_nm",
    "fingerprint",
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
        figure.clip.to_string(),
        figure.figure.to_string(),
        figure.place_nm[0].to_string(),
        figure.place_nm[1].to_string(),
        figure.fingerprint.clone(),
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

/// Why a `figures.csv` cannot be read.
#[derive(Debug, thiserror::Error)]
pub enum FiguresCsvError {
    /// Not CSV, or not to be read.
    #[error(transparent)]
    Csv(#[from] csv::Error),
    /// A column that is needed is not there.
    #[error("no column `{column}`, expected the figures.csv of a quote")]
    Column {
        /// Which.
        column: String,
    },
    /// A cell that does not hold what its column does.
    #[error("line {line}, column `{column}`: found `{found}`, expected a number")]
    Cell {
        /// Counted from 1, the header included.
        line: u64,
        /// Which.
        column: String,
        /// As it stands.
        found: String,
    },
}

/// Reads what a comparison needs of the figures.
///
/// # Errors
/// When a column is missing or a cell holds no number.
pub fn read(input: impl Read) -> Result<Vec<FigureShare>, FiguresCsvError> {
    let mut input = csv::Reader::from_reader(input);
    let header = input.headers()?.clone();
    let column = |name: &str| {
        let at = header.iter().position(|column| column == name);
        at.ok_or_else(|| FiguresCsvError::Column {
            column: name.to_owned(),
        })
    };
    let own = ["clip", "figure", "x_nm", "y_nm", "places"];
    let own = own.map(|name| column(name).map(|at| (at, name)));
    let [clip, figure, x, y, places] = own;
    let (clip, figure, x, y, places) = (clip?, figure?, x?, y?, places?);
    let fingerprint = column("fingerprint")?;
    let mut shares = Vec::new();
    for method in Method::ALL {
        let [shots, seconds] = ["shots", "seconds"].map(|c| format!("{}_{c}", method.name()));
        shares.push((
            method,
            (column(&shots)?, shots),
            (column(&seconds)?, seconds),
        ));
    }
    let mut figures = Vec::new();
    for record in input.records() {
        let record = record?;
        let line = record.position().map_or(0, csv::Position::line);
        let cell = Cell {
            record: &record,
            line,
        };
        let mut fractures = ByMethod::default();
        for (method, shots, seconds) in &shares {
            let shots = cell.number::<u64>(shots.0, &shots.1)?;
            *fractures.slot(*method) = match shots {
                Some(shots) => Some(ShotShare {
                    shots,
                    seconds: cell.number(seconds.0, &seconds.1)?,
                }),
                None => None,
            };
        }
        figures.push(FigureShare {
            clip: cell.needed(clip)?,
            figure: cell.needed(figure)?,
            place_nm: [cell.needed(x)?, cell.needed(y)?],
            fingerprint: record.get(fingerprint).unwrap_or_default().to_owned(),
            places: Count(cell.needed(places)?),
            fractures,
        });
    }
    Ok(figures)
}

struct Cell<'r> {
    record: &'r csv::StringRecord,
    line: u64,
}

impl Cell<'_> {
    /// `None` for an empty cell.
    fn number<T: FromStr>(&self, at: usize, column: &str) -> Result<Option<T>, FiguresCsvError> {
        let found = self.record.get(at).unwrap_or_default();
        if found.is_empty() {
            return Ok(None);
        }
        let wrong = |_| FiguresCsvError::Cell {
            line: self.line,
            column: column.to_owned(),
            found: found.to_owned(),
        };
        found.parse().map(Some).map_err(wrong)
    }

    fn needed<T: FromStr>(&self, (at, column): (usize, &str)) -> Result<T, FiguresCsvError> {
        let empty = || FiguresCsvError::Cell {
            line: self.line,
            column: column.to_owned(),
            found: String::new(),
        };
        self.number(at, column)?.ok_or_else(empty)
    }
}
