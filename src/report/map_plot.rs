//! The picture of a dose correction: coverage and dose over the mask, and what edges see along a line across it.

use std::path::Path;

use plotters::coord::Shift;
use plotters::prelude::*;

pub use super::plot::PlotError;
use super::plot::{self, Dash, FONT, MARGIN_RIGHT, palette};
use crate::number::trimmed;

/// Size of the picture, pixels.
pub const SIZE: (u32, u32) = (1280, 1000);

const TITLE_PX: u32 = 40;
const CURVE_PX: u32 = 420;
const CURVE_LEFT_PX: i32 = 72;
const LEGEND_PX: u32 = 34;
const BAR_PX: u32 = 92;
const LABELS_PX: u32 = 52;
/// Patches of a map in one direction at most; a patch shows the mean of its cells.
const MOST_PATCHES: usize = 240;
const TEXT: (&str, u32) = (FONT, 15);

/// Values in square cells, row by row from below.
#[derive(Clone, Copy, Debug)]
pub struct MapValues<'a> {
    /// What they are.
    pub label: &'a str,
    /// Columns and rows.
    pub size: [usize; 2],
    /// The values.
    pub cells: &'a [f64],
}

/// A quantity along the line.
#[derive(Clone, Copy, Debug)]
pub struct Curve<'a> {
    /// What it is.
    pub label: &'a str,
    /// Place (µm) and value.
    pub points: &'a [(f64, f64)],
}

/// All that the picture shows.
#[derive(Clone, Copy, Debug)]
pub struct CorrectionPicture<'a> {
    /// One line above.
    pub title: &'a str,
    /// Lower-left corner, µm.
    pub origin_um: [f64; 2],
    /// Side of a cell, µm.
    pub mesh_um: f64,
    /// Left and right.
    pub maps: [MapValues<'a>; 2],
    /// What the curves run along, a line in x.
    pub along: &'a str,
    /// Drawn dashed, solid, dotted in turn.
    pub curves: &'a [Curve<'a>],
}

const STYLES: [(RGBColor, Dash); 3] = [
    (palette::VERMILLION, Some((9, 5))),
    (palette::INK, None),
    (palette::BLUE, Some((2, 4))),
];

type Area<'a> = DrawingArea<BitMapBackend<'a>, Shift>;

impl CorrectionPicture<'_> {
    /// Writes the picture as PNG.
    ///
    /// # Errors
    /// When the file cannot be written.
    pub fn png(&self, path: &Path) -> Result<(), PlotError> {
        plot::png(path, SIZE, |area| self.draw(area))
    }

    fn draw(&self, area: &Area<'_>) -> Result<(), PlotError> {
        let (title, rest) = area.split_vertically(TITLE_PX);
        title.draw(&Text::new(self.title.to_owned(), (16, 12), (FONT, 19)))?;
        let (maps, lower) = rest.split_vertically(SIZE.1 - TITLE_PX - CURVE_PX);
        let (left, right) = maps.split_horizontally(SIZE.0 / 2);
        self.map(&left, &self.maps[0])?;
        self.map(&right, &self.maps[1])?;
        let (legend, curve) = lower.split_vertically(LEGEND_PX);
        self.legend(&legend)?;
        self.curve(&curve)
    }

    /// Unit of places and its length in µm: mm where one of a map's sides is 10 mm or more.
    fn unit(&self) -> (&'static str, f64) {
        let sides = self.maps.iter().flat_map(|map| map.size);
        let longest = sides.max().unwrap_or(0) as f64 * self.mesh_um;
        if longest < 1e4 {
            ("µm", 1.0)
        } else {
            ("mm", 1e3)
        }
    }

    /// Above the curves, where none can run through it.
    fn legend(&self, area: &Area<'_>) -> Result<(), PlotError> {
        let mut x = CURVE_LEFT_PX + 14;
        for (curve, &(color, dash)) in self.curves.iter().zip(STYLES.iter().cycle()) {
            plot::polyline(area, &[(x, 18), (x + 36, 18)], dash, plot::line(color, 2))?;
            x = 36 + plot::label(area, curve.label, (x + 46, 18), TEXT.1)?;
        }
        Ok(())
    }

    fn map(&self, area: &Area<'_>, map: &MapValues<'_>) -> Result<(), PlotError> {
        let (w, h) = area.dim_in_pixel();
        let (plan, bar) = area.split_horizontally(w - BAR_PX);
        let (unit, um) = self.unit();
        let [columns, rows] = map.size;
        let [x0, y0] = self.origin_um;
        let length = |n: usize| n as f64 * self.mesh_um;
        let bounds = [x0, y0, x0 + length(columns), y0 + length(rows)];
        let inner = (w - BAR_PX - LABELS_PX - 20, h - LABELS_PX - 34);
        let [x, y] = plot::equal_aspect(bounds, 0.0, inner);
        let mut chart = ChartBuilder::on(&plan)
            .caption(map.label, (FONT, 17))
            .margin_left(8)
            .margin_right(12)
            .x_label_area_size(LABELS_PX - 10)
            .y_label_area_size(LABELS_PX)
            .build_cartesian_2d(x, y)?;
        chart
            .configure_mesh()
            .disable_mesh()
            .x_desc(format!("x, {unit}"))
            .y_desc(format!("y, {unit}"))
            .x_labels(6)
            .y_labels(6)
            .x_label_formatter(&|v| trimmed(*v / um))
            .y_label_formatter(&|v| trimmed(*v / um))
            .label_style(TEXT)
            .draw()?;
        let shades = Shades::of(map.cells);
        let step = columns.max(rows).div_ceil(MOST_PATCHES);
        for j in (0..rows).step_by(step) {
            for i in (0..columns).step_by(step) {
                let (right, top) = ((i + step).min(columns), (j + step).min(rows));
                let cells = (j..top).flat_map(|r| &map.cells[r * columns + i..r * columns + right]);
                let mean = cells.sum::<f64>() / ((right - i) * (top - j)) as f64;
                let corners = [
                    (x0 + length(i), y0 + length(j)),
                    (x0 + length(right), y0 + length(top)),
                ];
                let patch = Rectangle::new(corners, shades.color(mean).filled());
                chart.plotting_area().draw(&patch)?;
            }
        }
        shades.bar(&bar)
    }

    fn curve(&self, area: &Area<'_>) -> Result<(), PlotError> {
        let (unit, um) = self.unit();
        let all = || self.curves.iter().flat_map(|c| c.points);
        let (from, to) = all().fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), (x, _)| {
            (a.min(*x), b.max(*x))
        });
        let (low, high) = all().fold((1.0_f64, 1.0_f64), |(a, b), (_, v)| (a.min(*v), b.max(*v)));
        let pad = (0.08 * (high - low)).max(0.01);
        let mut chart = ChartBuilder::on(area)
            .margin_top(8)
            .margin_left(14)
            .margin_right(MARGIN_RIGHT)
            .margin_bottom(6)
            .x_label_area_size(LABELS_PX - 6)
            .y_label_area_size(CURVE_LEFT_PX)
            .build_cartesian_2d(from..to, low - pad..high + pad)?;
        chart
            .configure_mesh()
            .light_line_style(TRANSPARENT)
            .bold_line_style(plot::line(RGBColor(225, 225, 225), 1))
            .x_desc(format!("{}: x, {unit}", self.along))
            .y_desc("relative to the threshold; dose")
            .x_labels(12)
            .y_labels(8)
            .x_label_formatter(&|v| trimmed(*v / um))
            .y_label_formatter(&|v| format!("{v:.2}"))
            .label_style(TEXT)
            .draw()?;
        for (curve, &(color, dash)) in self.curves.iter().zip(STYLES.iter().cycle()) {
            plot::polyline(
                chart.plotting_area(),
                curve.points,
                dash,
                plot::line(color, 2),
            )?;
        }
        Ok(())
    }
}

/// Values as colours that get darker in grey too, from light (least) to dark (greatest): viridis, reversed.
struct Shades {
    least: f64,
    span: f64,
}

impl Shades {
    fn of(cells: &[f64]) -> Self {
        let (least, greatest) = cells
            .iter()
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), v| {
                (a.min(*v), b.max(*v))
            });
        Self {
            least,
            span: (greatest - least).max(1e-12),
        }
    }

    fn color(&self, value: f64) -> RGBColor {
        ViridisRGB.get_color(1.0 - ((value - self.least) / self.span).clamp(0.0, 1.0))
    }

    fn bar(&self, area: &Area<'_>) -> Result<(), PlotError> {
        let (_, h) = area.dim_in_pixel();
        let (top, bottom) = (40, i32::try_from(h).unwrap_or(i32::MAX) - 60);
        let height = f64::from(bottom - top);
        for y in top..bottom {
            let share = f64::from(bottom - 1 - y) / height;
            let line = [(4, y), (24, y + 1)];
            let color = self.color(self.least + share * self.span);
            area.draw(&Rectangle::new(line, color.filled()))?;
        }
        for k in 0..=4 {
            let share = f64::from(k) / 4.0;
            #[allow(clippy::cast_possible_truncation, reason = "pixels of the picture")]
            let y = bottom - (share * height) as i32;
            let text = format!("{:.3}", self.least + share * self.span);
            plot::label(area, &text, (30, y), TEXT.1)?;
        }
        Ok(())
    }
}
