//! The picture of one figure: what was drawn, what is flashed, what prints, and the edge error along the outline.

use std::path::Path;

use plotters::coord::Shift;
use plotters::prelude::*;

pub use super::plot::PlotError;
use super::plot::{self, Dash, FONT, MARGIN_RIGHT, palette};
use crate::geom::{Figure, Ring};
use crate::number::trimmed;
use crate::shot::ShotList;
use crate::target::Target;

/// Size of the picture, pixels.
pub const SIZE: (u32, u32) = (1280, 1180);
/// Fill of the drawn figure where no shot lies on it, as red, green, blue.
pub const TARGET_FILL: [u8; 3] = [225, 225, 225];
/// Shots beyond this many are left out of the picture, which says so.
pub const MOST_SHOTS: usize = 20_000;

const TITLE_PX: u32 = 44;
const CURVE_PX: u32 = 290;
const LEGEND_PX: u32 = 300;
/// The turned axis title is cut off without it.
const MARGIN_LEFT: u32 = 14;
const Y_LABELS_PX: u32 = 70;
const X_LABELS_PX: u32 = 46;
const TEXT: (&str, u32) = (FONT, 16);

/// Sky blue, see-through so that overlaps are darker.
const SHOT_FILL: RGBAColor = RGBAColor(86, 180, 233, 0.3);
/// Sky blue.
const BAND: RGBAColor = RGBAColor(86, 180, 233, 0.3);
/// Orange.
const ZONE: RGBAColor = RGBAColor(230, 159, 0, 0.3);

/// Contours take these in turn: the level as written first, then more and less dose.
const CONTOURS: [(RGBColor, Dash); 3] = [
    (palette::VERMILLION, None),
    (palette::BLUE, Some((9, 5))),
    (palette::GREEN, Some((3, 4))),
];

/// Level lines of a dose under one label.
#[derive(Clone, Copy, Debug)]
pub struct Contour<'a> {
    /// Shown in the legend.
    pub label: &'a str,
    /// Polylines, nm, in the frame of the figure; a closed one repeats its first point.
    pub lines: &'a [Vec<[f64; 2]>],
}

/// All that the picture of a figure shows. Every place is in the frame of the figure.
#[derive(Clone, Copy, Debug)]
pub struct FigurePicture<'a> {
    /// One line above the picture.
    pub title: &'a str,
    /// What was drawn.
    pub figure: &'a Figure,
    /// The same figure with its tolerance and corner zones.
    pub target: &'a Target,
    /// Figures near by, shown as outlines; within 5 σ of the figure.
    pub context: &'a [Figure],
    /// What is flashed.
    pub shots: &'a ShotList,
    /// What prints; first the dose as written, then more and less of it.
    pub contours: &'a [Contour<'a>],
    /// Edge error (nm) by arc length (nm) along the rings, one after another; `None` is a gap.
    pub edge_error: &'a [(f64, Option<f64>)],
}

impl FigurePicture<'_> {
    /// Writes the picture as PNG.
    ///
    /// # Errors
    /// When the file cannot be written.
    pub fn png(&self, path: &Path) -> Result<(), PlotError> {
        plot::png(path, SIZE, |area| self.draw(area))
    }

    /// Writes the picture as SVG.
    ///
    /// # Errors
    /// When the file cannot be written.
    pub fn svg(&self, path: &Path) -> Result<(), PlotError> {
        plot::svg(path, SIZE, |area| self.draw(area))
    }

    fn draw<DB: DrawingBackend>(&self, area: &DrawingArea<DB, Shift>) -> Result<(), PlotError>
    where
        DB::ErrorType: 'static,
    {
        let (title, rest) = area.split_vertically(TITLE_PX);
        let (upper, lower) = rest.split_vertically(SIZE.1 - TITLE_PX - CURVE_PX);
        let (plan, legend) = upper.split_horizontally(SIZE.0 - LEGEND_PX);
        title.draw(&Text::new(self.title.to_owned(), (16, 14), (FONT, 20)))?;
        self.plan(&plan)?;
        self.legend(&legend)?;
        self.curve(&lower)
    }

    fn plan<DB: DrawingBackend>(&self, area: &DrawingArea<DB, Shift>) -> Result<(), PlotError>
    where
        DB::ErrorType: 'static,
    {
        let (w, h) = area.dim_in_pixel();
        let inner = (
            w - MARGIN_LEFT - Y_LABELS_PX - MARGIN_RIGHT,
            h - X_LABELS_PX - 8,
        );
        let [x, y] = plot::equal_aspect(self.bounds(), self.around(), inner);
        let mut chart = ChartBuilder::on(area)
            .margin_top(8)
            .margin_left(MARGIN_LEFT)
            .margin_right(MARGIN_RIGHT)
            .x_label_area_size(X_LABELS_PX)
            .y_label_area_size(Y_LABELS_PX)
            .build_cartesian_2d(x, y)?;
        chart
            .configure_mesh()
            .disable_mesh()
            .x_desc("x in the figure's own frame, nm")
            .y_desc("y in the figure's own frame, nm")
            .x_labels(8)
            .y_labels(8)
            .x_label_formatter(&tick)
            .y_label_formatter(&tick)
            .label_style(TEXT)
            .draw()?;
        let area = chart.plotting_area();
        let [r, g, b] = TARGET_FILL;
        area.draw(&Polygon::new(
            points(self.figure.outer()),
            RGBColor(r, g, b),
        ))?;
        for hole in self.figure.holes() {
            area.draw(&Polygon::new(points(hole), WHITE))?;
        }
        for (rect, _) in self.shots.rects().take(MOST_SHOTS) {
            let ([x0, y0], [x1, y1]) = (rect.min.to_nm(), rect.max.to_nm());
            let corners = [(x0, y0), (x1, y1)];
            area.draw(&Rectangle::new(corners, SHOT_FILL.filled()))?;
            area.draw(&Rectangle::new(corners, plot::line(palette::BLUE, 1)))?;
        }
        for figure in self.context {
            for ring in figure.rings() {
                plot::polyline(
                    area,
                    &closed(ring),
                    Some((6, 4)),
                    plot::line(palette::GREY, 1),
                )?;
            }
        }
        for ring in self.figure.rings() {
            plot::polyline(area, &closed(ring), None, plot::line(palette::INK, 2))?;
        }
        for (contour, &(color, dash)) in self.contours.iter().zip(CONTOURS.iter().cycle()) {
            for points in contour.lines {
                let points: Vec<(f64, f64)> = points.iter().map(|p| (p[0], p[1])).collect();
                plot::polyline(area, &points, dash, plot::line(color, 2))?;
            }
        }
        if let Some((place, _)) = self.worst() {
            area.draw(&Circle::new(
                (place[0], place[1]),
                11,
                plot::line(palette::INK, 2),
            ))?;
        }
        Ok(())
    }

    /// Shown around the figure, nm: 5 σ, as far as its context goes.
    fn around(&self) -> f64 {
        2.5 * self.target.corner_reach()
    }

    /// Around the figure and its shots, nm.
    fn bounds(&self) -> [f64; 4] {
        let around = self
            .shots
            .rects()
            .fold(self.figure.bounds(), |all, (r, _)| all.hull(r));
        let ([x0, y0], [x1, y1]) = (around.min.to_nm(), around.max.to_nm());
        [x0, y0, x1, y1]
    }

    fn legend<DB: DrawingBackend>(&self, area: &DrawingArea<DB, Shift>) -> Result<(), PlotError>
    where
        DB::ErrorType: 'static,
    {
        let mut row = Row { area, y: 20 };
        let [r, g, b] = TARGET_FILL;
        row.swatch(
            "drawn figure",
            RGBColor(r, g, b).to_rgba(),
            Some(palette::INK),
        )?;
        let shots = if self.shots.len() > MOST_SHOTS {
            format!("{MOST_SHOTS} of {} shots", self.shots.len())
        } else {
            format!("{} shots, overlaps darker", self.shots.len())
        };
        row.swatch(&shots, SHOT_FILL, Some(palette::BLUE))?;
        if !self.context.is_empty() {
            row.stroke("other figures", Some((6, 4)), plot::line(palette::GREY, 1))?;
        }
        for (contour, &(color, dash)) in self.contours.iter().zip(CONTOURS.iter().cycle()) {
            row.stroke(contour.label, dash, plot::line(color, 2))?;
        }
        if let Some((_, error)) = self.worst() {
            let center = (23, row.y);
            area.draw(&Circle::new(center, 9, plot::line(palette::INK, 2)))?;
            row.text(&format!("greatest edge error: {error:+.2} nm"))?;
        }
        row.y = i32::try_from(area.dim_in_pixel().1).unwrap_or(0) - 140;
        let style = plot::line(palette::INK, 2);
        row.stroke("edge error (+ prints too large)", None, style)?;
        if self.edge_error.iter().any(|(_, error)| error.is_none()) {
            row.text("gap: not measured")?;
        }
        row.swatch("within tolerance", BAND, None)?;
        if !self.target.corners().is_empty() {
            row.swatch("corner zone, its tolerance", ZONE, None)?;
        }
        if !self.figure.holes().is_empty() {
            let style = plot::line(palette::GREY, 1);
            row.stroke("border between rings", Some((2, 3)), style)?;
        }
        Ok(())
    }

    fn curve<DB: DrawingBackend>(&self, area: &DrawingArea<DB, Shift>) -> Result<(), PlotError>
    where
        DB::ErrorType: 'static,
    {
        let (near, corner) = (self.target.tolerance(), self.target.corner_tolerance());
        let greatest = self.worst().map_or(0.0, |(_, e)| e.abs());
        let limit = (1.15 * greatest).clamp(1.3 * corner, 4.0 * corner);
        let length = self.figure.outline_nm().max(f64::MIN_POSITIVE);
        let mut chart = ChartBuilder::on(area)
            .margin_top(10)
            .margin_left(MARGIN_LEFT)
            .margin_right(MARGIN_RIGHT)
            .margin_bottom(8)
            .x_label_area_size(X_LABELS_PX)
            .y_label_area_size(Y_LABELS_PX)
            .build_cartesian_2d(0.0..length, -limit..limit)?;
        let cut = if greatest > limit { ", cut off" } else { "" };
        chart
            .configure_mesh()
            .disable_mesh()
            .x_desc("along the outline, nm")
            .y_desc(format!("edge error, nm{cut}"))
            .x_labels(12)
            .y_labels(7)
            .x_label_formatter(&tick)
            .y_label_formatter(&tick)
            .label_style(TEXT)
            .draw()?;
        let area = chart.plotting_area();
        area.draw(&Rectangle::new(
            [(0.0, -near), (length, near)],
            BAND.filled(),
        ))?;
        for (from, to) in self.corner_stretches() {
            area.draw(&Rectangle::new(
                [(from, -corner), (to, corner)],
                ZONE.filled(),
            ))?;
        }
        let mut border = 0.0;
        for ring in self.figure.rings() {
            if border > 0.0 {
                let ends = [(border, -limit), (border, limit)];
                plot::polyline(area, &ends, Some((2, 3)), plot::line(palette::GREY, 1))?;
            }
            border += ring.length_nm();
        }
        area.draw(&PathElement::new(
            [(0.0, 0.0), (length, 0.0)],
            plot::line(palette::GREY, 1),
        ))?;
        for measured in self.edge_error.split(|(_, error)| error.is_none()) {
            let points: Vec<(f64, f64)> = measured
                .iter()
                .filter_map(|&(arc, error)| Some((arc, error?.clamp(-limit, limit))))
                .collect();
            plot::polyline(area, &points, None, plot::line(palette::INK, 2))?;
        }
        Ok(())
    }

    /// Where the edge error is greatest by magnitude, and what it is.
    fn worst(&self) -> Option<([f64; 2], f64)> {
        let (arc, error) = self
            .edge_error
            .iter()
            .filter_map(|&(arc, error)| Some((arc, error?)))
            .max_by(|a, b| a.1.abs().total_cmp(&b.1.abs()))?;
        let mut left = arc;
        for edge in self.target.edges() {
            let length = edge.length();
            if left <= length && length > 0.0 {
                return Some((edge.at(left / length), error));
            }
            left -= length;
        }
        self.target.edges().last().map(|e| (e.b, error))
    }

    /// Stretches of arc length (nm) in corner zones: where each edge lies within the circle around a corner.
    fn corner_stretches(&self) -> Vec<(f64, f64)> {
        let reach = self.target.corner_reach();
        let mut corners = self.target.corners().to_vec();
        corners.sort_by(|a, b| a[0].total_cmp(&b[0]));
        let mut stretches: Vec<(f64, f64)> = Vec::new();
        let mut arc = 0.0;
        for edge in self.target.edges() {
            let length = edge.length();
            let (left, right) = (edge.a[0].min(edge.b[0]), edge.a[0].max(edge.b[0]));
            let first = corners.partition_point(|c| c[0] < left - reach);
            let near = corners[first..]
                .iter()
                .take_while(|c| c[0] <= right + reach);
            let mut here: Vec<(f64, f64)> = near
                .filter_map(|c| within(edge.a, edge.outward(), *c, reach, length))
                .map(|(from, to)| (arc + from, arc + to))
                .collect();
            here.sort_by(|a, b| a.0.total_cmp(&b.0));
            for (from, to) in here {
                match stretches.last_mut() {
                    Some(last) if from <= last.1 + 1e-6 => last.1 = last.1.max(to),
                    _ => stretches.push((from, to)),
                }
            }
            arc += length;
        }
        stretches
    }
}

/// From where to where an edge (its start, its outward normal, its length) lies within `reach` of a place.
fn within(
    a: [f64; 2],
    normal: [f64; 2],
    place: [f64; 2],
    reach: f64,
    length: f64,
) -> Option<(f64, f64)> {
    let d = [place[0] - a[0], place[1] - a[1]];
    let across = d[0] * normal[0] + d[1] * normal[1];
    let along = -d[0] * normal[1] + d[1] * normal[0];
    let half = (reach * reach - across * across).max(0.0).sqrt();
    let (from, to) = ((along - half).max(0.0), (along + half).min(length));
    (from < to).then_some((from, to))
}

/// At most a thousandth, without trailing zeros.
fn tick(nm: &f64) -> String {
    trimmed(*nm)
}

fn points(ring: &Ring) -> Vec<(f64, f64)> {
    ring.points()
        .iter()
        .map(|p| p.to_nm())
        .map(|[x, y]| (x, y))
        .collect()
}

fn closed(ring: &Ring) -> Vec<(f64, f64)> {
    let mut points = points(ring);
    points.extend(points.first().copied());
    points
}

/// The next line of a legend.
struct Row<'a, DB: DrawingBackend> {
    area: &'a DrawingArea<DB, Shift>,
    y: i32,
}

impl<DB: DrawingBackend> Row<'_, DB>
where
    DB::ErrorType: 'static,
{
    fn swatch(
        &mut self,
        label: &str,
        fill: RGBAColor,
        outline: Option<RGBColor>,
    ) -> Result<(), PlotError> {
        let corners = [(8, self.y - 8), (38, self.y + 8)];
        self.area.draw(&Rectangle::new(corners, fill.filled()))?;
        if let Some(outline) = outline {
            self.area
                .draw(&Rectangle::new(corners, plot::line(outline, 1)))?;
        }
        self.text(label)
    }

    fn stroke(&mut self, label: &str, dash: Dash, style: ShapeStyle) -> Result<(), PlotError> {
        plot::polyline(self.area, &[(8, self.y), (38, self.y)], dash, style)?;
        self.text(label)
    }

    fn text(&mut self, label: &str) -> Result<(), PlotError> {
        plot::label(self.area, label, (48, self.y), TEXT.1)?;
        self.y += 27;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::blur::Blur;
    use crate::geom::{Point, Rect};
    use crate::shot::AddressUnit;
    use crate::units::Nm;

    /// Runs `check` on the picture of a bar of 200 nm × 100 nm at σ = 5 nm: outline 600 nm, zones of 10 nm about each corner.
    fn with_bar(edge_error: &[(f64, Option<f64>)], check: impl FnOnce(&FigurePicture<'_>)) {
        let figure = Figure::from_rect(Rect::new(Point::default(), Point::from_nm(200, 100)));
        let blur = Blur::new(Nm(5.0)).unwrap_or_else(|e| panic!("{e}"));
        check(&FigurePicture {
            title: "",
            figure: &figure,
            target: &Target::new(&figure, blur, Nm(1.0)),
            context: &[],
            shots: &ShotList::new(AddressUnit::FINEST, Vec::new()),
            contours: &[],
            edge_error,
        });
    }

    #[test]
    fn corner_zones_reach_2_sigma_along_both_edges() {
        with_bar(&[], |picture| {
            let found = picture.corner_stretches();
            let by_hand = [
                (0.0, 10.0),
                (190.0, 210.0),
                (290.0, 310.0),
                (490.0, 510.0),
                (590.0, 600.0),
            ];
            assert_eq!(found.len(), by_hand.len(), "{found:?}");
            for (f, h) in found.iter().zip(by_hand) {
                assert!(
                    (f.0 - h.0).abs() < 1e-9 && (f.1 - h.1).abs() < 1e-9,
                    "{found:?}"
                );
            }
        });
    }

    #[test]
    fn the_greatest_error_is_found_by_magnitude_and_shown_where_it_is() {
        let error = [
            (0.0, Some(1.0)),
            (100.0, None),
            (250.0, Some(-3.0)),
            (400.0, Some(2.0)),
        ];
        with_bar(&error, |picture| {
            assert_eq!(picture.worst(), Some(([200.0, 50.0], -3.0)));
        });
        with_bar(&[(100.0, None)], |picture| {
            assert_eq!(picture.worst(), None)
        });
    }
}
