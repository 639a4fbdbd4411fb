//! What all pictures share: the font, the palette, the error, small drawing aids.

use std::path::Path;
use std::sync::LazyLock;

use plotters::coord::Shift;
use plotters::drawing::DrawingAreaErrorKind;
use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{FontStyle, RGBColor, register_font};

/// Why a picture was not made.
#[derive(Debug, thiserror::Error)]
pub enum PlotError {
    /// The font that is built in cannot be used.
    #[error("cannot load the built-in font")]
    Font,
    /// Drawing or writing the file failed.
    #[error("cannot draw: {0}")]
    Draw(String),
}

impl<E: std::error::Error + Send + Sync> From<DrawingAreaErrorKind<E>> for PlotError {
    fn from(error: DrawingAreaErrorKind<E>) -> Self {
        Self::Draw(error.to_string())
    }
}

/// Colours that the colour-blind can tell apart: Okabe and Ito, "Color Universal Design" (2008).
pub(super) mod palette {
    use plotters::style::RGBColor;

    pub(crate) const GREEN: RGBColor = RGBColor(0, 158, 115);
    pub(crate) const BLUE: RGBColor = RGBColor(0, 114, 178);
    pub(crate) const VERMILLION: RGBColor = RGBColor(213, 94, 0);
    pub(crate) const INK: RGBColor = RGBColor(0, 0, 0);
    pub(crate) const GREY: RGBColor = RGBColor(110, 110, 110);
}

pub(super) const FONT: &str = "sans-serif";
/// The right-most tick label needs this much room (pixels).
pub(super) const MARGIN_RIGHT: u32 = 28;

/// Draws on a white PNG of `size` pixels.
pub(super) fn png(
    path: &Path,
    size: (u32, u32),
    draw: impl FnOnce(&DrawingArea<BitMapBackend<'_>, Shift>) -> Result<(), PlotError>,
) -> Result<(), PlotError> {
    font()?;
    let area = BitMapBackend::new(path, size).into_drawing_area();
    area.fill(&WHITE)?;
    draw(&area)?;
    Ok(area.present()?)
}

/// Draws on a white SVG of `size` pixels.
pub(super) fn svg(
    path: &Path,
    size: (u32, u32),
    draw: impl FnOnce(&DrawingArea<SVGBackend<'_>, Shift>) -> Result<(), PlotError>,
) -> Result<(), PlotError> {
    font()?;
    let area = SVGBackend::new(path, size).into_drawing_area();
    area.fill(&WHITE)?;
    draw(&area)?;
    Ok(area.present()?)
}

/// Both backends measure text with it, so it is needed for SVG too. No system font is read: same bytes everywhere.
fn font() -> Result<(), PlotError> {
    static REGISTERED: LazyLock<bool> =
        LazyLock::new(|| register_font(FONT, FontStyle::Normal, dejavu::sans::regular()).is_ok());
    if *REGISTERED {
        Ok(())
    } else {
        Err(PlotError::Font)
    }
}

pub(super) fn line(color: RGBColor, width: u32) -> ShapeStyle {
    color.stroke_width(width)
}

/// Text of `size` pixels that begins at `x`, its middle at the height `y`. Returns where it ends (pixels).
pub(super) fn label<DB: DrawingBackend>(
    area: &DrawingArea<DB, Shift>,
    text: &str,
    (x, y): (i32, i32),
    size: u32,
) -> Result<i32, PlotError>
where
    DB::ErrorType: 'static,
{
    let style = TextStyle::from((FONT, size)).pos(Pos::new(HPos::Left, VPos::Center));
    let (width, _) = area.estimate_text_size(text, &style)?;
    // The library takes the box of a text for its letters, which hang in the upper part of it: an eighth too high.
    let down = i32::try_from(size / 8).unwrap_or(0);
    area.draw(&Text::new(text.to_owned(), (x, y + down), style))?;
    Ok(x + i32::try_from(width).unwrap_or(0))
}

/// Dash and gap in pixels; `None` is a solid line.
pub(super) type Dash = Option<(i32, i32)>;

/// A polyline, dashed or not.
pub(super) fn polyline<DB: DrawingBackend, CT: CoordTranslate>(
    area: &DrawingArea<DB, CT>,
    points: &[CT::From],
    dash: Dash,
    style: ShapeStyle,
) -> Result<(), PlotError>
where
    CT::From: Clone + 'static,
    DB::ErrorType: 'static,
{
    match dash {
        None => area.draw(&PathElement::new(points.to_vec(), style))?,
        Some((on, off)) => {
            for dash in DashedLineSeries::new(points.to_vec(), on, off, style) {
                area.draw(&dash)?;
            }
        }
    }
    Ok(())
}

/// A window (x and y range) around a box, grown so that one nm is equally many pixels in both directions.
pub(super) fn equal_aspect(
    bounds: [f64; 4],
    padding: f64,
    pixels: (u32, u32),
) -> [std::ops::Range<f64>; 2] {
    let [x0, y0, x1, y1] = bounds;
    let (w, h) = (f64::from(pixels.0.max(1)), f64::from(pixels.1.max(1)));
    let per_pixel = ((x1 - x0 + 2.0 * padding) / w)
        .max((y1 - y0 + 2.0 * padding) / h)
        .max(f64::MIN_POSITIVE);
    let around = |a: f64, b: f64, n: f64| {
        let (mid, half) = (0.5 * (a + b), 0.5 * n * per_pixel);
        mid - half..mid + half
    };
    [around(x0, x1, w), around(y0, y1, h)]
}

/// The greatest of 1, 2, 5 × 10ⁿ that is at most `x`.
pub(super) fn round_below(x: f64) -> f64 {
    let decade = 10_f64.powf(x.log10().floor());
    [5.0, 2.0]
        .into_iter()
        .find(|m| m * decade <= x)
        .unwrap_or(1.0)
        * decade
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_nm_is_as_many_pixels_across_as_up() {
        let [x, y] = equal_aspect([0.0, 0.0, 100.0, 10.0], 5.0, (400, 200));
        assert!(
            (x.start + 5.0).abs() < 1e-9 && (x.end - 105.0).abs() < 1e-9,
            "{x:?}"
        );
        assert!(((x.end - x.start) / 400.0 - (y.end - y.start) / 200.0).abs() < 1e-12);
        assert!((0.5 * (y.start + y.end) - 5.0).abs() < 1e-12);
    }

    #[test]
    fn scale_bars_are_round() {
        for (x, want) in [
            (1.0, 1.0),
            (4.9, 2.0),
            (5.0, 5.0),
            (999.0, 500.0),
            (0.03, 0.02),
        ] {
            assert!((round_below(x) / want - 1.0).abs() < 1e-12, "{x}");
        }
    }
}
