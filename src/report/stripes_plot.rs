//! The picture of the hours by stripe: for each fracture, what each stripe takes over all passes, stacked by cause.

use std::collections::BTreeMap;
use std::path::Path;

use plotters::coord::Shift;
use plotters::prelude::*;

pub use super::plot::PlotError;
use super::plot::{self, FONT, MARGIN_RIGHT, palette};
use crate::number::{grouped, trimmed};
use crate::quote::result::{ByMethod, Method, StripeRow};

/// Size of the picture, pixels.
pub const SIZE: (u32, u32) = (1280, 980);

const TITLE_PX: u32 = 44;
const LEGEND_PX: u32 = 40;
const TEXT: (&str, u32) = (FONT, 16);

/// Causes from the lowest part of a bar upward.
const CAUSES: [(&str, RGBColor); 4] = [
    ("flash", palette::BLUE),
    ("settle", RGBColor(86, 180, 233)),
    ("sub-field moves", palette::GREEN),
    ("waiting for the stage", RGBColor(230, 159, 0)),
];

/// All that the picture shows.
#[derive(Clone, Copy, Debug)]
pub struct StripesPicture<'a> {
    /// One line above the picture.
    pub title: &'a str,
    /// As in `stripes.csv`.
    pub stripes: &'a ByMethod<Vec<StripeRow>>,
}

/// Stripes `from..to` that take alike: seconds by cause, over all passes.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Run {
    from: u64,
    to: u64,
    seconds: [f64; 4],
}

impl StripesPicture<'_> {
    /// Writes the picture as PNG.
    ///
    /// # Errors
    /// When the file cannot be written.
    pub fn png(&self, path: &Path) -> Result<(), PlotError> {
        plot::png(path, SIZE, |area| self.draw(area))
    }

    fn draw<DB: DrawingBackend>(&self, area: &DrawingArea<DB, Shift>) -> Result<(), PlotError>
    where
        DB::ErrorType: 'static,
    {
        let (title, rest) = area.split_vertically(TITLE_PX);
        title.draw(&Text::new(self.title.to_owned(), (16, 14), (FONT, 20)))?;
        let (legend, panels) = rest.split_vertically(LEGEND_PX);
        let mut x = 90;
        for (cause, color) in CAUSES {
            legend.draw(&Rectangle::new([(x, 8), (x + 26, 24)], color.filled()))?;
            x = 32 + plot::label(&legend, cause, (x + 34, 16), TEXT.1)?;
        }
        let all: Vec<(Method, Vec<Run>)> = [Method::Tile, Method::Overlap]
            .into_iter()
            .filter_map(|method| Some((method, runs(self.stripes.get(method)?))))
            .filter(|(_, runs)| !runs.is_empty())
            .collect();
        // One scale for both, so that they can be compared.
        let sum = |run: &Run| run.seconds.iter().sum::<f64>();
        let highest = all.iter().flat_map(|(_, runs)| runs.iter().map(sum));
        let highest = highest.fold(0.0, f64::max).max(1e-9);
        let panels = panels.split_evenly((all.len().max(1), 1));
        for ((method, runs), panel) in all.iter().zip(&panels) {
            let last = runs.last().map_or(1, |run| run.to);
            #[allow(clippy::cast_precision_loss, reason = "stripes of a plate")]
            let mut chart = ChartBuilder::on(panel)
                .margin_top(6)
                .margin_left(14)
                .margin_right(MARGIN_RIGHT)
                .x_label_area_size(46)
                .y_label_area_size(76)
                .build_cartesian_2d(0.0..last as f64, 0.0..1.08 * highest)?;
            chart
                .configure_mesh()
                .disable_mesh()
                .x_desc(format!("stripe, of {}", grouped(last.into())))
                .y_desc(format!("{}: s over all passes", method.name()))
                .x_labels(if last < 12 {
                    usize::try_from(last).unwrap_or(12) + 1
                } else {
                    10
                })
                .x_label_formatter(&|x| {
                    if x.fract() == 0.0 {
                        trimmed(*x)
                    } else {
                        String::new()
                    }
                })
                .y_label_formatter(&|y| crate::number::brief(*y))
                .label_style(TEXT)
                .draw()?;
            let plan = chart.plotting_area();
            for run in runs {
                let mut low = 0.0;
                #[allow(clippy::cast_precision_loss, reason = "stripes of a plate")]
                let (from, to) = (run.from as f64, run.to as f64);
                for (seconds, (_, color)) in run.seconds.iter().zip(CAUSES) {
                    if *seconds > 0.0 {
                        let corners = [(from, low), (to, low + seconds)];
                        plan.draw(&Rectangle::new(corners, color.filled()))?;
                    }
                    low += seconds;
                }
            }
        }
        Ok(())
    }
}

/// Sums over passes; their grids may be shifted, and each counts its stripes from 0.
fn runs(rows: &[StripeRow]) -> Vec<Run> {
    let of = |row: &StripeRow| {
        [row.flash_s, row.settle_s, row.subfield_s, row.stage_s].map(|s| s * f64::from(row.passes))
    };
    // Where rows begin and end, what is added to the sum.
    let mut borders: BTreeMap<u64, Vec<(f64, usize)>> = BTreeMap::new();
    for (index, row) in rows.iter().enumerate() {
        borders.entry(row.stripe).or_default().push((1.0, index));
        borders
            .entry(row.stripe + row.count)
            .or_default()
            .push((-1.0, index));
    }
    let mut open: Vec<usize> = Vec::new();
    let mut runs: Vec<Run> = Vec::new();
    let mut from = 0;
    for (at, changes) in borders {
        if !open.is_empty() && at > from {
            let mut seconds = [0.0; 4];
            for &index in &open {
                for (sum, more) in seconds.iter_mut().zip(of(&rows[index])) {
                    *sum += more;
                }
            }
            runs.push(Run {
                from,
                to: at,
                seconds,
            });
        }
        for (sign, index) in changes {
            if sign > 0.0 {
                open.push(index);
            } else {
                open.retain(|other| *other != index);
            }
        }
        from = at;
    }
    runs
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quote::result::Count;

    #[test]
    fn passes_on_shifted_grids_add_up_stripe_by_stripe() {
        let row = |passes, stripe, count, flash_s| StripeRow {
            passes,
            stripe,
            count,
            flashes: Count(1),
            flash_s,
            settle_s: 0.5,
            subfield_s: 0.0,
            stage_s: 0.0,
        };
        // Two passes of two stripes, then one of three: by hand 2 × 1 + 3, 2 × 4 + 3, 3.
        let rows = [row(2, 0, 1, 1.0), row(2, 1, 1, 4.0), row(1, 0, 3, 3.0)];
        let found: Vec<_> = runs(&rows)
            .iter()
            .map(|run| (run.from, run.to, run.seconds[0], run.seconds[1]))
            .collect();
        let expected = [(0, 1, 5.0, 1.5), (1, 2, 11.0, 1.5), (2, 3, 3.0, 0.5)];
        assert_eq!(found, expected);
    }
}
