//! The picture of a sweep: hours against edge error, the slot as a line.

use std::path::Path;

use plotters::coord::Shift;
use plotters::prelude::*;

pub use super::plot::PlotError;
use super::plot::{self, Dash, FONT, MARGIN_RIGHT, palette};
use crate::number::given;
use crate::quote::result::{Method, Sweep};

/// Size of the picture, pixels.
pub const SIZE: (u32, u32) = (1280, 900);

const TITLE_PX: u32 = 44;
const LEGEND_PX: u32 = 40;
const TEXT: (&str, u32) = (FONT, 16);

/// Line and dot of each fracture.
const fn style(method: Method) -> (RGBColor, Dash) {
    match method {
        Method::Staircase => (palette::GREY, Some((4, 4))),
        Method::Tile => (palette::BLUE, None),
        Method::Overlap => (palette::VERMILLION, None),
    }
}

/// Points of one fracture where only the first parameter changes: edge error (nm), hours, label.
struct Line {
    method: Method,
    points: Vec<(f64, f64, String)>,
    /// The other parameters.
    others: String,
}

/// Writes the picture as PNG.
///
/// # Errors
/// When the file cannot be written.
pub fn png(sweep: &Sweep, title: &str, path: &Path) -> Result<(), PlotError> {
    plot::png(path, SIZE, |area| draw(sweep, title, area))
}

fn draw<DB: DrawingBackend>(
    sweep: &Sweep,
    title: &str,
    area: &DrawingArea<DB, Shift>,
) -> Result<(), PlotError>
where
    DB::ErrorType: 'static,
{
    let (head, rest) = area.split_vertically(TITLE_PX);
    head.draw(&Text::new(title.to_owned(), (16, 14), (FONT, 20)))?;
    let (legend, plan) = rest.split_vertically(LEGEND_PX);
    let lines = lines(sweep);
    let mut x = 90;
    for method in Method::ALL {
        if lines.iter().all(|line| line.method != method) {
            continue;
        }
        let (color, dash) = style(method);
        plot::polyline(
            &legend,
            &[(x, 16), (x + 36, 16)],
            dash,
            plot::line(color, 2),
        )?;
        legend.draw(&Circle::new((x + 18, 16), 4, color.filled()))?;
        x = 32 + plot::label(&legend, method.name(), (x + 44, 16), TEXT.1)?;
    }
    let dash = Some((10, 6));
    if sweep.slot_h.is_some() {
        plot::polyline(
            &legend,
            &[(x, 16), (x + 36, 16)],
            dash,
            plot::line(palette::INK, 2),
        )?;
        x = 32 + plot::label(&legend, "slot", (x + 44, 16), TEXT.1)?;
    }
    let labels = format!("numbers: {}", sweep.parameters.join(", "));
    plot::label(&legend, &labels, (x, 16), TEXT.1)?;

    let all = || lines.iter().flat_map(|line| &line.points);
    let errors = around(all().map(|p| p.0));
    let hours = around(all().map(|p| p.1).chain(sweep.slot_h));
    let (left, right) = (errors.start, errors.end);
    let mut chart = ChartBuilder::on(&plan)
        .margin_top(8)
        .margin_left(14)
        .margin_right(MARGIN_RIGHT)
        .margin_bottom(8)
        .x_label_area_size(46)
        .y_label_area_size(76)
        .build_cartesian_2d(errors, hours)?;
    chart
        .configure_mesh()
        .light_line_style(WHITE)
        .bold_line_style(RGBColor(225, 225, 225))
        .x_desc("edge error, 95 % of the outline, nm")
        .y_desc("hours")
        .x_labels(10)
        .y_labels(9)
        .x_label_formatter(&|x| given(*x))
        .y_label_formatter(&|y| given(*y))
        .label_style(TEXT)
        .draw()?;
    let plan = chart.plotting_area();
    if let Some(slot) = sweep.slot_h {
        let ends = [(left, slot), (right, slot)];
        plot::polyline(plan, &ends, dash, plot::line(palette::INK, 2))?;
    }
    for line in &lines {
        let (color, dash) = style(line.method);
        let places: Vec<(f64, f64)> = line.points.iter().map(|p| (p.0, p.1)).collect();
        plot::polyline(plan, &places, dash, plot::line(color, 2))?;
        for (index, (error, hours, label)) in line.points.iter().enumerate() {
            plan.draw(&Circle::new((*error, *hours), 4, color.filled()))?;
            let label = if index == 0 && !line.others.is_empty() {
                format!("{label}; {}", line.others)
            } else {
                label.clone()
            };
            let at = EmptyElement::at((*error, *hours));
            // Tile and overlap are often close: one is labelled above its points, the other below.
            let down = if line.method == Method::Overlap {
                6
            } else {
                -20
            };
            plan.draw(&(at + Text::new(label, (8, down), (FONT, 14))))?;
        }
    }
    Ok(())
}

/// A range around values with room at both ends.
fn around(values: impl Iterator<Item = f64>) -> std::ops::Range<f64> {
    let (least, greatest) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), v| {
        (a.min(v), b.max(v))
    });
    if least > greatest {
        return 0.0..1.0;
    }
    let room = (0.08 * (greatest - least))
        .max(0.02 * greatest.abs())
        .max(1e-9);
    (least - room).max(0.0)..greatest + room
}

/// The first parameter changes slowest: points with the same others are a line.
fn lines(sweep: &Sweep) -> Vec<Line> {
    let mut lines: Vec<(Vec<f64>, Line)> = Vec::new();
    for point in &sweep.points {
        let (first, others) = match point.values.split_first() {
            Some((first, others)) => (given(*first), others.to_vec()),
            None => (String::new(), Vec::new()),
        };
        for (method, fracture) in point.fractures.iter() {
            let place = fracture.and_then(|f| Some((f.edge_error_nm.p95?, f.hours?.total_h)));
            let Some((error, hours)) = place else {
                continue;
            };
            let named: Vec<String> = others.iter().map(|x| given(*x)).collect();
            let at = lines
                .iter()
                .position(|(known, line)| *known == others && line.method == method);
            let at = at.unwrap_or_else(|| {
                let line = Line {
                    method,
                    points: Vec::new(),
                    others: named.join(", "),
                };
                lines.push((others.clone(), line));
                lines.len() - 1
            });
            lines[at].1.points.push((error, hours, first.clone()));
        }
    }
    lines.into_iter().map(|(_, line)| line).collect()
}
