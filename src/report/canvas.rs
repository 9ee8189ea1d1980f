//! Drawing by plotters: one size, one palette, own axes; and PNG made from the same SVG.
//!
//! The pictures are meant for a phone in the sun: at 390 pixels of width 1200 shrink to a third, so text is at least 26
//! pixels high and lines are thick; each line has its own stroke, so that colour is not needed to tell them apart.

use crate::problem::Problem;
use plotters::backend::SVGBackend;
use plotters::coord::Shift;
use plotters::drawing::{DrawingArea, IntoDrawingArea};
use plotters::element::{Circle, PathElement, Polygon, Rectangle, Text};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{Color, FontStyle, FontTransform, IntoFont, RGBColor, ShapeStyle, TextStyle, register_font};
use resvg::{tiny_skia, usvg};
use std::sync::{Arc, OnceLock};

pub(crate) const WIDTH: i32 = 1200;
pub(crate) const HEIGHT: i32 = 800;
/// Height of ordinary text, and of titles, in pixels.
pub(crate) const TEXT: f64 = 29.0;
pub(crate) const TITLE: f64 = 42.0;

/// Own palette: dark ink on warm paper, a strong blue-black curve, sand for the window, brick and moss beside.
pub(crate) mod palette {
    use plotters::style::RGBColor;
    pub(crate) const PAPER: RGBColor = RGBColor(253, 252, 247);
    pub(crate) const INK: RGBColor = RGBColor(22, 26, 33);
    pub(crate) const GRID: RGBColor = RGBColor(214, 211, 200);
    pub(crate) const FAINT: RGBColor = RGBColor(150, 160, 172);
    pub(crate) const STRONG: RGBColor = RGBColor(14, 50, 104);
    pub(crate) const SAND: RGBColor = RGBColor(246, 231, 188);
    pub(crate) const BRICK: RGBColor = RGBColor(163, 45, 22);
    pub(crate) const MOSS: RGBColor = RGBColor(20, 108, 74);
}

/// plotters writes a font size divided by this into the SVG; multiplied with it here, sizes are true pixels.
const PLOTTERS_FONT_SCALE: f64 = 1.24;
const FONT: &str = "sans-serif";

type Area<'a> = DrawingArea<SVGBackend<'a>, Shift>;

/// Where text hangs on its point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Anchor {
    Left,
    Centre,
    Right,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Stroke {
    Dashed,
    /// Long and short in turn.
    DashDot,
}

/// A picture in the making; coordinates are pixels from the upper left.
pub(crate) struct Canvas<'a> {
    area: Area<'a>,
}

fn failed(error: impl std::fmt::Display) -> Problem {
    Problem::new(format!("the picture could not be drawn: {error}"))
}

impl<'a> Canvas<'a> {
    pub(crate) fn new(svg: &'a mut String) -> Result<Self, Problem> {
        static REGISTERED: OnceLock<bool> = OnceLock::new();
        let registered = REGISTERED.get_or_init(|| {
            register_font(FONT, FontStyle::Normal, dejavu::sans::regular()).is_ok()
                && register_font(FONT, FontStyle::Bold, dejavu::sans::bold()).is_ok()
        });
        if !registered {
            return Err(failed("the built-in font cannot be read"));
        }
        let area = SVGBackend::with_string(svg, (WIDTH as u32, HEIGHT as u32)).into_drawing_area();
        area.fill(&palette::PAPER).map_err(failed)?;
        Ok(Canvas { area })
    }

    pub(crate) fn finish(self) -> Result<(), Problem> {
        self.area.present().map_err(failed)
    }

    fn style(size: f64, bold: bool, colour: RGBColor, transform: FontTransform) -> TextStyle<'static> {
        let style = if bold { FontStyle::Bold } else { FontStyle::Normal };
        (FONT, size * PLOTTERS_FONT_SCALE).into_font().style(style).transform(transform).color(&colour)
    }

    /// Width of text in pixels.
    pub(crate) fn text_width(&self, text: &str, size: f64, bold: bool) -> i32 {
        let style = Self::style(size, bold, palette::INK, FontTransform::None);
        self.area.estimate_text_size(text, &style).map_or(0, |(width, _)| width as i32)
    }

    /// Text with its middle height at `y`.
    pub(crate) fn text(&self, text: &str, at: (i32, i32), anchor: Anchor, look: Look) -> Result<(), Problem> {
        self.turned(text, at, anchor, look, FontTransform::None)
    }

    /// Text running upwards, centred on its point.
    pub(crate) fn text_upwards(&self, text: &str, at: (i32, i32), look: Look) -> Result<(), Problem> {
        self.turned(text, at, Anchor::Centre, look, FontTransform::Rotate270)
    }

    fn turned(
        &self,
        text: &str,
        at: (i32, i32),
        anchor: Anchor,
        look: Look,
        turn: FontTransform,
    ) -> Result<(), Problem> {
        let horizontal = match anchor {
            Anchor::Left => HPos::Left,
            Anchor::Centre => HPos::Center,
            Anchor::Right => HPos::Right,
        };
        // plotters lifts text that hangs on its bottom by half an ex, about 0.26 of the size; the base line belongs
        // below the middle by half the height of a capital, 0.36 of the size in this font.
        let drop = (0.62 * look.size).round() as i32;
        let at = if matches!(turn, FontTransform::None) { (at.0, at.1 + drop) } else { (at.0 + drop, at.1) };
        let style = Self::style(look.size, look.bold, look.colour, turn).pos(Pos::new(horizontal, VPos::Bottom));
        self.area.draw(&Text::new(plain(text), at, style)).map_err(failed)
    }

    pub(crate) fn rectangle(&self, corners: [(i32, i32); 2], colour: RGBColor) -> Result<(), Problem> {
        self.area.draw(&Rectangle::new(corners, colour.filled())).map_err(failed)
    }

    pub(crate) fn line(&self, points: Vec<(i32, i32)>, width: u32, colour: RGBColor) -> Result<(), Problem> {
        self.area.draw(&PathElement::new(points, ShapeStyle::from(&colour).stroke_width(width))).map_err(failed)
    }

    pub(crate) fn stroked(
        &self,
        points: &[(i32, i32)],
        width: u32,
        colour: RGBColor,
        stroke: Stroke,
    ) -> Result<(), Problem> {
        let lengths: &[f64] = match stroke {
            Stroke::Dashed => &[18.0, 12.0],
            Stroke::DashDot => &[34.0, 12.0, 10.0, 12.0],
        };
        for dash in dashes(points, lengths) {
            self.line(dash, width, colour)?;
        }
        Ok(())
    }

    /// A disc with a rim of paper, to stand out on lines.
    pub(crate) fn disc(&self, at: (i32, i32), radius: i32, colour: RGBColor) -> Result<(), Problem> {
        self.area.draw(&Circle::new(at, radius + 4, palette::PAPER.filled())).map_err(failed)?;
        self.area.draw(&Circle::new(at, radius, colour.filled())).map_err(failed)
    }

    pub(crate) fn polygon(&self, points: Vec<(i32, i32)>, colour: RGBColor) -> Result<(), Problem> {
        self.area.draw(&Polygon::new(points, colour.filled())).map_err(failed)
    }
}

/// How text looks.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Look {
    pub(crate) size: f64,
    pub(crate) bold: bool,
    pub(crate) colour: RGBColor,
}

/// Text of a user without the control characters that XML does not allow.
pub(crate) fn plain(text: &str) -> String {
    text.chars().map(|c| if c.is_control() || matches!(c, '\u{fffe}' | '\u{ffff}') { '\u{fffd}' } else { c }).collect()
}

/// Text cut to so many characters, with an ellipsis.
pub(crate) fn shortened(text: &str, longest: usize) -> String {
    if text.chars().count() <= longest {
        return text.to_owned();
    }
    text.chars().take(longest.saturating_sub(1)).chain(['…']).collect()
}

/// Cuts a line into dashes of the given lengths, ink and gap in turn.
fn dashes(points: &[(i32, i32)], lengths: &[f64]) -> Vec<Vec<(i32, i32)>> {
    let mut found = Vec::new();
    let (mut part, mut left) = (0, lengths[0]);
    let mut dash: Vec<(i32, i32)> = points.first().copied().into_iter().collect();
    let round = |(x, y): (f64, f64)| (x.round() as i32, y.round() as i32);
    for ends in points.windows(2) {
        let (from, to) = ((f64::from(ends[0].0), f64::from(ends[0].1)), (f64::from(ends[1].0), f64::from(ends[1].1)));
        let length = (to.0 - from.0).hypot(to.1 - from.1);
        let mut gone = 0.0;
        while length - gone > left {
            gone += left;
            let at = round((from.0 + (to.0 - from.0) * gone / length, from.1 + (to.1 - from.1) * gone / length));
            if part % 2 == 0 {
                dash.push(at);
                found.push(std::mem::take(&mut dash));
            } else {
                dash = vec![at];
            }
            part = (part + 1) % lengths.len();
            left = lengths[part];
        }
        left -= length - gone;
        if part % 2 == 0 {
            dash.push(ends[1]);
        }
    }
    if dash.len() > 1 {
        found.push(dash);
    }
    found
}

/// Round numbers from `low` to `high`, about `wanted` of them, with the decimal places they need.
pub(crate) fn ticks(low: f64, high: f64, wanted: f64) -> (Vec<f64>, i32) {
    let span = high - low;
    if !(span > 0.0 && span.is_finite()) {
        return (Vec::new(), 0);
    }
    let rough = span / wanted;
    let power = rough.log10().floor() as i32;
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|mantissa| mantissa * 10_f64.powi(power))
        .min_by(|a, b| (a / rough).ln().abs().total_cmp(&(b / rough).ln().abs()))
        .unwrap_or(rough);
    let first = (low / step - 1e-9).ceil() as i64;
    let last = (high / step + 1e-9).floor() as i64;
    let places = -(step * (1.0 + 1e-9)).log10().floor() as i32;
    ((first..=last).map(|i| i as f64 * step).collect(), places.max(0))
}

/// The picture as PNG, by the same SVG and the built-in font.
///
/// # Errors
/// SVG that cannot be read, which would be a fault of the drawing.
pub(crate) fn png(svg: &str) -> Result<Vec<u8>, Problem> {
    static FONTS: OnceLock<Arc<usvg::fontdb::Database>> = OnceLock::new();
    let fonts = FONTS.get_or_init(|| {
        let mut fonts = usvg::fontdb::Database::new();
        fonts.load_font_data(dejavu::sans::regular().to_vec());
        fonts.load_font_data(dejavu::sans::bold().to_vec());
        fonts.set_sans_serif_family("DejaVu Sans");
        Arc::new(fonts)
    });
    let options = usvg::Options { fontdb: Arc::clone(fonts), ..usvg::Options::default() };
    let tree = usvg::Tree::from_str(svg, &options).map_err(failed)?;
    let mut pixels = tiny_skia::Pixmap::new(WIDTH as u32, HEIGHT as u32).ok_or_else(|| failed("no memory"))?;
    resvg::render(&tree, tiny_skia::Transform::identity(), &mut pixels.as_mut());
    // The paper covers everything, so that nothing is transparent and three bytes a pixel are enough.
    let mut rgb = Vec::with_capacity(pixels.data().len() / 4 * 3);
    for pixel in pixels.data().chunks_exact(4) {
        rgb.extend_from_slice(&pixel[..3]);
    }
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, WIDTH as u32, HEIGHT as u32);
    encoder.set_color(png::ColorType::Rgb);
    encoder.set_depth(png::BitDepth::Eight);
    encoder.set_compression(png::Compression::Fast);
    let mut writer = encoder.write_header().map_err(failed)?;
    writer.write_image_data(&rgb).map_err(failed)?;
    writer.finish().map_err(failed)?;
    Ok(bytes)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        assert_eq!(ticks(0.0, 3.3, 6.0), (vec![0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0], 1));
        assert_eq!(ticks(-30.0, 370.0, 6.0), (vec![0.0, 50.0, 100.0, 150.0, 200.0, 250.0, 300.0, 350.0], 0));
        assert_eq!(ticks(0.0, 0.011, 5.0).1, 3);
        assert!(ticks(1.0, 1.0, 5.0).0.is_empty());
        assert!(ticks(0.0, f64::NAN, 5.0).0.is_empty());
    }

    #[test]
    fn dashes_cover_the_line_in_turn() {
        let cut = dashes(&[(0, 0), (100, 0)], &[18.0, 12.0]);
        assert_eq!(
            cut,
            [vec![(0, 0), (18, 0)], vec![(30, 0), (48, 0)], vec![(60, 0), (78, 0)], vec![(90, 0), (100, 0)]]
        );
    }

    #[test]
    fn text_without_what_xml_forbids() {
        assert_eq!(plain("a\u{0}b\u{1b}[31m\n"), "a\u{fffd}b\u{fffd}[31m\u{fffd}");
        assert_eq!(shortened("abcdef", 4), "abc…");
    }
}
