//! The picture of the whole mask: every figure at its places, shaded by what it costs, flagged ones numbered.
//!
//! Bounded for any mask: a repetition of many places is drawn as one box, a figure smaller than a few
//! pixels as a dot, once per pixel. The picture says how often it did so.

use std::collections::BTreeSet;
use std::path::Path;

use plotters::coord::Shift;
use plotters::coord::types::RangedCoordf64;
use plotters::prelude::*;

pub use super::plot::PlotError;
use super::plot::{self, FONT, palette};
use super::table::grouped;
use crate::geom::{Figure, Point, Rect, Repetition, Ring, Transform};
use crate::number::{brief, length};
use crate::quote::result::Count;

/// Size of the picture, pixels.
pub const SIZE: (u32, u32) = (1280, 1100);
/// A repetition of more places than this is drawn as one box.
pub const MOST_PLACES: u128 = 100_000;
/// Of the flags, this many get their number.
pub const MOST_NUMBERS: usize = 99;

const TITLE_PX: u32 = 44;
const LEGEND_PX: u32 = 190;
const NOTE_PX: u32 = 62;
/// Figures of less than this many pixels in both directions are dots.
const DOT_PX: f64 = 3.0;
/// Text in the legend, pixels.
const TEXT: u32 = 16;
/// Fill where a figure has no value.
const NO_VALUE: RGBColor = RGBColor(190, 190, 190);

/// A distinct figure with its places and what it is shaded by.
#[derive(Clone, Debug)]
pub struct OverviewFigure<'a> {
    /// In its own frame.
    pub figure: &'a Figure,
    /// Own frame to mask, each perhaps repeated.
    pub places: Vec<(Transform, &'a Repetition)>,
    /// What the shade shows, say shots per figure; 0 or more. `None` if not known.
    pub value: Option<f64>,
}

/// A flagged place.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Mark {
    /// Its number in the list of flags.
    pub number: usize,
    /// Where, mask coordinates.
    pub place: Point,
}

/// All that the picture of a mask shows.
#[derive(Clone, Debug)]
pub struct Overview<'a> {
    /// One line above the picture.
    pub title: &'a str,
    /// What the shade means, with its unit: "shots per figure".
    pub value_label: &'a str,
    /// Every distinct figure.
    pub figures: &'a [OverviewFigure<'a>],
    /// Flagged places.
    pub marks: &'a [Mark],
    /// Around all figures at all places, pm.
    pub extent: Rect,
}

type Plan<'a> = DrawingArea<BitMapBackend<'a>, Cartesian2d<RangedCoordf64, RangedCoordf64>>;
type Area<'a> = DrawingArea<BitMapBackend<'a>, Shift>;

impl Overview<'_> {
    /// Writes the picture as PNG.
    ///
    /// # Errors
    /// When the file cannot be written.
    pub fn png(&self, path: &Path) -> Result<(), PlotError> {
        plot::png(path, SIZE, |area| self.draw(area))
    }

    fn draw(&self, area: &Area<'_>) -> Result<(), PlotError> {
        let (title, rest) = area.split_vertically(TITLE_PX);
        let (upper, note) = rest.split_vertically(SIZE.1 - TITLE_PX - NOTE_PX);
        let (plan, legend) = upper.split_horizontally(SIZE.0 - LEGEND_PX);
        title.draw(&Text::new(self.title.to_owned(), (16, 14), (FONT, 20)))?;

        let plan = plan.margin(4, 4, 16, 16);
        let (w, h) = plan.dim_in_pixel();
        let bounds = nm_box(self.extent);
        let longest = (bounds[2] - bounds[0]).max(bounds[3] - bounds[1]).max(1.0);
        let [x, y] = plot::equal_aspect(bounds, 0.02 * longest, (w, h));
        let per_pixel = (x.end - x.start) / f64::from(w);
        let plan = plan.apply_coord_spec(Cartesian2d::<RangedCoordf64, RangedCoordf64>::new(
            x.clone(),
            y.clone(),
            {
                let (px, py) = plan.get_pixel_range();
                (px, py.end..py.start)
            },
        ));
        let shade = Shade::of(self.figures.iter().filter_map(|f| f.value));
        let mut canvas = Canvas {
            area: &plan,
            origin: [x.start, y.start],
            per_pixel,
            dots: BTreeSet::new(),
            dotted: 0,
            boxed: 0,
        };
        for figure in self.figures {
            let color = figure.value.map_or(NO_VALUE, |v| shade.color(v));
            canvas.figure(figure, color)?;
        }
        let (dotted, boxed) = (canvas.dotted, canvas.boxed);
        let (frame_x, frame_y) = (x.clone(), y.clone());
        plan.draw(&Rectangle::new(
            [(frame_x.start, frame_y.start), (frame_x.end, frame_y.end)],
            plot::line(palette::GREY, 1),
        ))?;
        self.marks(&plan)?;
        self.legend(&legend, &shade)?;
        self.note(&note, per_pixel, dotted, boxed)
    }

    fn marks(&self, plan: &Plan<'_>) -> Result<(), PlotError> {
        for (i, mark) in self.marks.iter().enumerate() {
            let [x, y] = mark.place.to_nm();
            plan.draw(&Circle::new((x, y), 11, plot::line(WHITE, 5)))?;
            plan.draw(&Circle::new((x, y), 11, plot::line(palette::VERMILLION, 3)))?;
            if i < MOST_NUMBERS {
                let text = mark.number.to_string();
                let (w, h) = plan.estimate_text_size(&text, &TextStyle::from((FONT, 17)))?;
                let at = EmptyElement::at((x, y));
                let (w, h) = (i32::try_from(w).unwrap_or(0), i32::try_from(h).unwrap_or(0));
                let plate = Rectangle::new([(11, -13 - h), (17 + w, -9)], WHITE.filled());
                let digits = Text::new(text, (14, -11 - h), (FONT, 17));
                plan.draw(&(at + plate + digits))?;
            }
        }
        Ok(())
    }

    fn legend(&self, area: &Area<'_>, shade: &Shade) -> Result<(), PlotError> {
        plot::label(area, self.value_label, (4, 12), TEXT)?;
        let mut y = 34;
        if shade.range.is_some() {
            const STEPS: i32 = 160;
            for i in 0..STEPS {
                let share = 1.0 - f64::from(i) / f64::from(STEPS - 1);
                let corners = [(4, y + 2 * i), (30, y + 2 * i + 2)];
                area.draw(&Rectangle::new(corners, shade.at(share).filled()))?;
            }
            let bottom = y + 2 * STEPS;
            area.draw(&Rectangle::new(
                [(4, y), (30, bottom)],
                plot::line(palette::GREY, 1),
            ))?;
            for value in shade.ticks() {
                #[allow(clippy::cast_possible_truncation, reason = "at most the bar's pixels")]
                let at = bottom - (shade.share(value) * f64::from(2 * STEPS)).round() as i32;
                area.draw(&PathElement::new(
                    [(30, at), (35, at)],
                    plot::line(palette::INK, 1),
                ))?;
                plot::label(area, &brief(value), (40, at), TEXT)?;
            }
            y = bottom + 28;
        }
        if self.figures.iter().any(|f| f.value.is_none()) {
            area.draw(&Rectangle::new([(4, y), (30, y + 16)], NO_VALUE.filled()))?;
            plot::label(area, "not known", (40, y + 8), TEXT)?;
            y += 30;
        }
        if !self.marks.is_empty() {
            area.draw(&Circle::new(
                (17, y + 9),
                10,
                plot::line(palette::VERMILLION, 3),
            ))?;
            plot::label(area, "flagged, with its", (40, y), TEXT)?;
            plot::label(area, "number in the list", (40, y + 19), TEXT)?;
        }
        Ok(())
    }

    fn note(
        &self,
        area: &Area<'_>,
        per_pixel: f64,
        dotted: u128,
        boxed: u128,
    ) -> Result<(), PlotError> {
        let bar = plot::round_below(260.0 * per_pixel);
        #[allow(clippy::cast_possible_truncation, reason = "at most 260 pixels")]
        let pixels = (bar / per_pixel).round() as i32;
        let bar_corners = [(16, 10), (16 + pixels, 16)];
        area.draw(&Rectangle::new(bar_corners, palette::INK.filled()))?;
        plot::label(area, &length(bar), (24 + pixels, 13), TEXT)?;
        let mut notes = Vec::new();
        if dotted > 0 {
            notes.push(format!(
                "{} places too small to show are dots",
                grouped(Count(dotted))
            ));
        }
        if boxed > 0 {
            notes.push(format!(
                "{} places in repetitions of over {} are drawn as boxes",
                grouped(Count(boxed)),
                grouped(Count(MOST_PLACES))
            ));
        }
        if self.marks.len() > MOST_NUMBERS {
            notes.push(format!("only the first {MOST_NUMBERS} flags are numbered"));
        }
        area.draw(&Text::new(notes.join("; "), (16, 32), (FONT, 15)))?;
        Ok(())
    }
}

/// Draws figures in a bounded number of strokes.
struct Canvas<'c, 'a> {
    area: &'c Plan<'a>,
    origin: [f64; 2],
    per_pixel: f64,
    /// Pixels that have a dot already.
    dots: BTreeSet<(i64, i64)>,
    dotted: u128,
    boxed: u128,
}

impl Canvas<'_, '_> {
    fn figure(&mut self, figure: &OverviewFigure<'_>, color: RGBColor) -> Result<(), PlotError> {
        for &(transform, repetition) in &figure.places {
            let own = figure.figure.bounds();
            let bounds = transform.apply_rect(own);
            if repetition.count() > MOST_PLACES {
                self.boxed += repetition.count();
                let hull = nm_box(hull(bounds, repetition));
                self.rectangle(hull, color.mix(0.5).filled())?;
                self.rectangle(hull, plot::line(color, 1))?;
                continue;
            }
            let small = self.is_small(bounds);
            let turned = (!small).then(|| figure.figure.transformed(transform));
            for by in repetition.displacements() {
                match &turned {
                    Some(turned) => {
                        let ring = |r: &Ring| -> Vec<(f64, f64)> {
                            let to_nm = |p: &Point| (*p + by).to_nm();
                            r.points().iter().map(to_nm).map(|[x, y]| (x, y)).collect()
                        };
                        self.area.draw(&Polygon::new(ring(turned.outer()), color))?;
                        for hole in turned.holes() {
                            self.area.draw(&Polygon::new(ring(hole), WHITE))?;
                        }
                    }
                    None => self.dot(nm_box(bounds.translated(by)), color)?,
                }
            }
        }
        Ok(())
    }

    fn is_small(&self, bounds: Rect) -> bool {
        let limit = DOT_PX * self.per_pixel;
        let [x0, y0, x1, y1] = nm_box(bounds);
        x1 - x0 < limit && y1 - y0 < limit
    }

    /// A small figure: its box, at least a pixel, unless that pixel has one.
    fn dot(&mut self, [x0, y0, x1, y1]: [f64; 4], color: RGBColor) -> Result<(), PlotError> {
        self.dotted += 1;
        #[allow(
            clippy::cast_possible_truncation,
            reason = "pixels of the picture; a float to integer cast saturates"
        )]
        let pixel = (
            ((x0 - self.origin[0]) / self.per_pixel).floor() as i64,
            ((y0 - self.origin[1]) / self.per_pixel).floor() as i64,
        );
        if !self.dots.insert(pixel) {
            return Ok(());
        }
        let least = self.per_pixel;
        self.rectangle(
            [x0, y0, x1.max(x0 + least), y1.max(y0 + least)],
            color.filled(),
        )
    }

    fn rectangle(&self, [x0, y0, x1, y1]: [f64; 4], style: ShapeStyle) -> Result<(), PlotError> {
        Ok(self
            .area
            .draw(&Rectangle::new([(x0, y0), (x1, y1)], style))?)
    }
}

/// Around a box at all places of a repetition.
fn hull(bounds: Rect, repetition: &Repetition) -> Rect {
    let span = repetition.span();
    Rect {
        min: bounds.min + span.min,
        max: bounds.max + span.max,
    }
}

fn nm_box(r: Rect) -> [f64; 4] {
    let ([x0, y0], [x1, y1]) = (r.min.to_nm(), r.max.to_nm());
    [x0, y0, x1, y1]
}

/// Values to colours, more is darker; by the logarithm where values span more than a factor 30.
struct Shade {
    range: Option<(f64, f64)>,
    logarithmic: bool,
    /// All values are counts, so that the scale shows none between them.
    whole: bool,
}

impl Shade {
    fn of(values: impl Iterator<Item = f64>) -> Self {
        let values: Vec<f64> = values.filter(|v| v.is_finite()).collect();
        let whole = values.iter().all(|v| v.fract() == 0.0);
        let range = values
            .into_iter()
            .fold(None, |range: Option<(f64, f64)>, v| {
                Some(range.map_or((v, v), |(a, b)| (a.min(v), b.max(v))))
            });
        let logarithmic = range.is_some_and(|(a, b)| a > 0.0 && b / a > 30.0);
        Self {
            range,
            logarithmic,
            whole,
        }
    }

    /// Values to be written beside the scale, upward; each stands where its share is.
    fn ticks(&self) -> Vec<f64> {
        let of = |k: u32| {
            let value = self.value(f64::from(k) / 4.0);
            if self.whole { value.round() } else { value }
        };
        let mut ticks: Vec<f64> = (0..5).map(of).collect();
        ticks.dedup();
        ticks
    }

    /// Where a value stands on the scale, 0 to 1.
    fn share(&self, value: f64) -> f64 {
        let (a, b) = self.range.unwrap_or_default();
        if a >= b {
            0.0
        } else if self.logarithmic {
            (value / a).ln() / (b / a).ln()
        } else {
            (value - a) / (b - a)
        }
    }

    fn color(&self, value: f64) -> RGBColor {
        match self.range {
            Some(_) => self.at(self.share(value)),
            None => NO_VALUE,
        }
    }

    /// Dark for 1, through the published colour map that stays ordered in grey print and for the colour-blind.
    fn at(&self, share: f64) -> RGBColor {
        // The light fifth of the map is too faint on white.
        let share = share.clamp(0.0, 1.0);
        ViridisRGB::get_color(0.8 * (1.0 - share))
    }

    fn value(&self, share: f64) -> f64 {
        let (a, b) = self.range.unwrap_or_default();
        if self.logarithmic {
            a * (b / a).powf(share)
        } else {
            a + share * (b - a)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_scale_of_counts_has_whole_ticks() {
        for (values, expected) in [
            (vec![1.0, 4.0], vec![1.0, 2.0, 3.0, 4.0]),
            (vec![3.0, 3.0], vec![3.0]),
            (vec![0.5, 2.5], vec![0.5, 1.0, 1.5, 2.0, 2.5]),
            (vec![1.0, 81.0], vec![1.0, 3.0, 9.0, 27.0, 81.0]),
        ] {
            assert_eq!(Shade::of(values.into_iter()).ticks(), expected);
        }
    }

    #[test]
    fn a_shade_is_the_value_again() {
        for (values, logarithmic) in [
            ([2.0, 20.0], false),
            ([1.0, 1000.0], true),
            ([0.0, 1000.0], false),
        ] {
            let shade = Shade::of(values.into_iter());
            assert_eq!(shade.logarithmic, logarithmic);
            for share in [0.0, 0.3, 1.0] {
                assert_eq!(shade.color(shade.value(share)), shade.at(share));
            }
            assert_ne!(shade.color(values[0]), shade.color(values[1]));
        }
    }
}
