//! Shot lists as CSV: `figure,place,x_nm,y_nm,w_nm,h_nm,dose`.
//!
//! Lower-left corner and size at mask scale, flat mask coordinates. Lengths are decimals exact to the picometre.

use std::io::{self, BufRead, Write};

use crate::geom::{Point, Rect, Repetition, Transform};
use crate::shot::{AddressUnit, Shot, ShotList};
use crate::units::{Dose, Nm, PM_PER_NM};

/// The columns that are written, in order.
pub const COLUMNS: [&str; 7] = ["figure", "place", "x_nm", "y_nm", "w_nm", "h_nm", "dose"];

/// What one line stands for.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Rows {
    /// A shot at each of its places.
    #[default]
    Placed,
    /// A shot of a distinct figure, in the first place of the figure.
    Distinct,
}

/// Writes shot lists, figure after figure, to a stream.
#[derive(Debug)]
pub struct ShotWriter<W: Write> {
    out: W,
    rows: Rows,
    lines: u64,
    line: Vec<u8>,
}

impl<W: Write> ShotWriter<W> {
    /// Writes the header. Writes are small: hand in a buffered stream.
    ///
    /// # Errors
    /// When the output cannot be written.
    pub fn new(mut out: W, rows: Rows) -> io::Result<Self> {
        writeln!(out, "{}", COLUMNS.join(","))?;
        Ok(Self {
            out,
            rows,
            lines: 0,
            line: Vec::with_capacity(128),
        })
    }

    /// Writes the shots (in the figure's own frame) of figure number `figure` at its places, numbered from 0.
    ///
    /// # Errors
    /// When the output cannot be written.
    pub fn figure<'a>(
        &mut self,
        figure: u64,
        shots: &ShotList,
        places: impl IntoIterator<Item = (Transform, &'a Repetition)>,
    ) -> io::Result<()> {
        // A figure may stand at millions of places: only numbers that differ are put into digits for each.
        let doses: Vec<String> = shots.rects().map(|(_, dose)| dose.0.to_string()).collect();
        let mut place = 0_u64;
        for (transform, repetition) in places {
            let corners_and_ends: Vec<(Point, Vec<u8>)> = shots
                .rects()
                .zip(&doses)
                .map(|((rect, _), dose)| {
                    let rect = transform.apply_rect(rect);
                    (rect.min, size_and_dose(rect, dose))
                })
                .collect();
            for by in repetition.displacements() {
                let mut start = Vec::new();
                push_digits(&mut start, figure, 1);
                start.push(b',');
                push_digits(&mut start, place, 1);
                start.push(b',');
                for (corner, end) in &corners_and_ends {
                    self.line(&start, *corner + by, end)?;
                }
                if self.rows == Rows::Distinct {
                    return Ok(());
                }
                place += 1;
            }
        }
        Ok(())
    }

    /// Lines written so far, the header not counted.
    #[must_use]
    pub fn lines(&self) -> u64 {
        self.lines
    }

    /// Flushes and gives the stream back.
    ///
    /// # Errors
    /// When the output cannot be written.
    pub fn finish(mut self) -> io::Result<W> {
        self.out.flush()?;
        Ok(self.out)
    }

    fn line(&mut self, start: &[u8], corner: Point, end: &[u8]) -> io::Result<()> {
        let line = &mut self.line;
        line.clear();
        line.extend_from_slice(start);
        push_nm(line, corner.x);
        line.push(b',');
        push_nm(line, corner.y);
        line.extend_from_slice(end);
        self.lines += 1;
        self.out.write_all(line)
    }
}

/// What ends a line: `,w,h,dose`.
fn size_and_dose(rect: Rect, dose: &str) -> Vec<u8> {
    let mut end = Vec::new();
    for pm in [rect.width(), rect.height()] {
        end.push(b',');
        push_nm(&mut end, pm);
    }
    end.push(b',');
    end.extend_from_slice(dose.as_bytes());
    end.push(b'\n');
    end
}

/// Picometres as nanometres, without trailing zeros: `-0.25`, `12`.
fn push_nm(line: &mut Vec<u8>, pm: i64) {
    if pm < 0 {
        line.push(b'-');
    }
    let (whole, mut rest) = (
        pm.unsigned_abs() / PM_PER_NM.unsigned_abs(),
        pm.unsigned_abs() % PM_PER_NM.unsigned_abs(),
    );
    push_digits(line, whole, 1);
    if rest > 0 {
        let mut digits = 3;
        while rest.is_multiple_of(10) {
            rest /= 10;
            digits -= 1;
        }
        line.push(b'.');
        push_digits(line, rest, digits);
    }
}

/// At least `digits` digits, zeros in front. `to_string` would allocate for every number of a file of many GB.
fn push_digits(line: &mut Vec<u8>, mut n: u64, digits: usize) {
    let mut reversed = [b'0'; 20];
    let mut used = 0;
    while n > 0 {
        reversed[used] += u8::try_from(n % 10).unwrap_or(0);
        n /= 10;
        used += 1;
    }
    line.extend(reversed[..used.max(digits)].iter().rev());
}

/// A shot list read from CSV.
#[derive(Clone, Debug, PartialEq)]
pub struct ReadShots {
    /// The shots, flat mask coordinates.
    pub shots: ShotList,
    /// What was assumed or left aside, as sentences.
    pub notes: Vec<String>,
}

/// Why a CSV is not a shot list. Lines count from 1, the header included.
#[derive(Debug, thiserror::Error)]
pub enum ShotsCsvError {
    /// The input cannot be read.
    #[error("cannot read shots: {0}")]
    Read(#[from] io::Error),
    /// A column that must be there is not.
    #[error("line 1: found columns `{found}`, expected a column `{missing}` among them")]
    NoColumn {
        /// The header.
        found: String,
        /// The column missed.
        missing: &'static str,
    },
    /// Two columns have one name.
    #[error("line 1: found column `{column}` twice, expected it once")]
    Twice {
        /// The column.
        column: &'static str,
    },
    /// A line has more or fewer cells than the header.
    #[error("line {line}: found {found} cells, expected {expected} as in line 1")]
    Cells {
        /// Where.
        line: u64,
        /// Cells there.
        found: usize,
        /// Cells of the header.
        expected: usize,
    },
    /// A cell is not what its column needs.
    #[error("line {line}, column {column}: found `{found}`, expected {expected}")]
    Cell {
        /// Where.
        line: u64,
        /// In which column.
        column: &'static str,
        /// The cell.
        found: String,
        /// What it should be.
        expected: &'static str,
    },
}

const POSITION: &str = "a finite number of nanometres within ±4.5 km";
const SIDE: &str = "a side of 0.001 nm or more, in nanometres";
const DOSE: &str = "a dose above 0, as a multiple of dose-to-size";

/// Reads shots from CSV with a header: `x_nm`, `y_nm`, `w_nm`, `h_nm` in any order, `dose` if there is one.
///
/// `figure` and `place` are not needed, since coordinates are flat; any other column is left aside with a note.
/// Blank lines are skipped; a cell may be quoted, but holds no comma.
/// The list is on the grid `address` if all sides are, else on one of 1 pm, the finest there is.
///
/// # Errors
/// At the first cell that is not a number in range, with line, column, what was found and what was expected.
pub fn read(mut input: impl BufRead, address: AddressUnit) -> Result<ReadShots, ShotsCsvError> {
    let mut text = Vec::new();
    input.read_until(b'\n', &mut text)?;
    let header = String::from_utf8_lossy(&text);
    let header: Vec<&str> = cells(header.trim_start_matches('\u{feff}')).collect();
    let mut notes = Vec::new();
    let columns = Columns::find(&header, &mut notes)?;

    let mut rects = Vec::new();
    let mut rounded = 0_u64;
    for line in 2.. {
        text.clear();
        if input.read_until(b'\n', &mut text)? == 0 {
            break;
        }
        let text = String::from_utf8_lossy(&text);
        if text.trim().is_empty() {
            continue;
        }
        let (rect, dose, exact) = columns.shot(&text, line)?;
        rounded += u64::from(!exact);
        rects.push((rect, dose));
    }
    if rounded > 0 {
        notes.push(format!(
            "shots with a side off the 0.001 nm grid, rounded to it: {rounded}"
        ));
    }
    Ok(ReadShots {
        shots: on_grid(&rects, address),
        notes,
    })
}

/// The cells of a line, without spaces and quotes around them.
fn cells(line: &str) -> impl Iterator<Item = &str> {
    line.split(',').map(|cell| {
        let cell = cell.trim();
        cell.strip_prefix('"')
            .and_then(|c| c.strip_suffix('"'))
            .unwrap_or(cell)
    })
}

fn on_grid(rects: &[(Rect, Dose)], address: AddressUnit) -> ShotList {
    let on = |p: Point, pm: i64| p.x % pm == 0 && p.y % pm == 0;
    let pm = address.pm();
    let (address, pm) = if rects.iter().all(|(r, _)| on(r.min, pm) && on(r.max, pm)) {
        (address, pm)
    } else {
        (AddressUnit::FINEST, AddressUnit::FINEST.pm())
    };
    let shots = rects.iter().map(|(r, dose)| Shot {
        x0: r.min.x / pm,
        y0: r.min.y / pm,
        x1: r.max.x / pm,
        y1: r.max.y / pm,
        dose: *dose,
    });
    ShotList::new(address, shots.collect())
}

/// Where the known columns are.
struct Columns {
    /// Of all cells of a line, which known column each is, if any.
    known: Vec<Option<Column>>,
}

/// Index into [`READ`].
type Column = usize;

/// A column that is read, and what its cells must be.
struct Wanted {
    name: &'static str,
    expected: &'static str,
    good: fn(f64) -> bool,
}

const READ: [Wanted; 5] = [
    Wanted {
        name: "x_nm",
        expected: POSITION,
        good: |x| Nm(x).to_pm().is_some(),
    },
    Wanted {
        name: "y_nm",
        expected: POSITION,
        good: |y| Nm(y).to_pm().is_some(),
    },
    Wanted {
        name: "w_nm",
        expected: SIDE,
        good: |w| Nm(w).to_pm().is_some_and(|pm| pm > 0),
    },
    Wanted {
        name: "h_nm",
        expected: SIDE,
        good: |h| Nm(h).to_pm().is_some_and(|pm| pm > 0),
    },
    Wanted {
        name: "dose",
        expected: DOSE,
        good: |d| d > 0.0 && d.is_finite(),
    },
];
const SIDES: usize = 4;

impl Columns {
    fn find(header: &[&str], notes: &mut Vec<String>) -> Result<Self, ShotsCsvError> {
        let count = |column: &str| header.iter().filter(|h| **h == column).count();
        if let Some(column) = COLUMNS.into_iter().find(|c| count(c) > 1) {
            return Err(ShotsCsvError::Twice { column });
        }
        if let Some(missing) = READ[..SIDES].iter().find(|w| count(w.name) == 0) {
            return Err(ShotsCsvError::NoColumn {
                found: header.join(","),
                missing: missing.name,
            });
        }
        for name in header.iter().filter(|h| !COLUMNS.contains(h)) {
            notes.push(format!("column `{name}` is not used"));
        }
        if count("dose") == 0 {
            notes.push("no column `dose`: every shot has dose 1".to_owned());
        }
        let known = header
            .iter()
            .map(|h| READ.iter().position(|w| w.name == *h))
            .collect();
        Ok(Self { known })
    }

    /// The shot of a line, and whether its sides lay on the picometre grid.
    fn shot(&self, text: &str, line: u64) -> Result<(Rect, Dose, bool), ShotsCsvError> {
        let found = cells(text).count();
        if found != self.known.len() {
            return Err(ShotsCsvError::Cells {
                line,
                found,
                expected: self.known.len(),
            });
        }
        let mut values = [0.0, 0.0, 0.0, 0.0, 1.0];
        for (cell, known) in cells(text).zip(&self.known) {
            let Some(at) = *known else { continue };
            let wanted = &READ[at];
            values[at] = cell
                .parse()
                .ok()
                .filter(|&x| (wanted.good)(x))
                .ok_or_else(|| ShotsCsvError::Cell {
                    line,
                    column: wanted.name,
                    found: cell.to_owned(),
                    expected: wanted.expected,
                })?;
        }
        let [x, y, w, h] = std::array::from_fn(|i| Nm(values[i]).to_pm().unwrap_or(0));
        let min = Point::new(x, y);
        let rect = Rect {
            min,
            max: min + Point::new(w, h),
        };
        let exact =
            |(pm, nm): (i64, &f64)| (Nm::from_pm(pm).0 - nm).abs() <= 1e-9 + 1e-15 * nm.abs();
        let exact = [x, y, w, h].into_iter().zip(&values).all(exact);
        Ok((rect, Dose(values[SIDES]), exact))
    }
}
