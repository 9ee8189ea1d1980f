//! The picture of a calibration: what each point is off the fit, against force.

use super::canvas::{Anchor, Canvas, HEIGHT, Look, TEXT, TITLE, WIDTH, palette, shortened, ticks};
use super::units::{Units, fixed};
use crate::problem::Problem;

pub const SVG_FILE: &str = "residuals.svg";
pub const PNG_FILE: &str = "residuals.png";

/// Whether the load was rising or falling when a point was taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Direction {
    Up,
    Down,
}

/// A calibration point: force on the cell, and what the fit is off there, both N (measured less fitted).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ResidualPoint {
    pub force_n: f64,
    pub residual_n: f64,
    pub direction: Direction,
}

const TOP: i32 = 150;
const BOTTOM: i32 = HEIGHT - 108;
const LEFT: i32 = 170;
const RIGHT: i32 = WIDTH - 176;
const INK: Look = Look { size: TEXT, bold: false, colour: palette::INK };

/// Draws residuals as SVG, 1200 by 800: newtons (or pounds) at the left, percent of `full_scale_n` at the right.
///
/// # Errors
/// No points, numbers that are not finite, a full scale that is not positive.
pub fn residual_svg(title: &str, points: &[ResidualPoint], full_scale_n: f64, units: Units) -> Result<String, Problem> {
    let finite = points.iter().all(|point| point.force_n.is_finite() && point.residual_n.is_finite());
    if points.is_empty() || !finite || full_scale_n.is_nan() || full_scale_n <= 0.0 {
        return Err(Problem::new("there are no residuals to draw").expected("points and a positive full scale"));
    }
    let force = units.force();
    let low_n = points.iter().map(|point| point.force_n).fold(0.0, f64::min);
    let high_n = points.iter().map(|point| point.force_n).fold(low_n, f64::max).max(low_n + 1e-9 * full_scale_n);
    let room_n = 0.04 * (high_n - low_n);
    let x = |force_n: f64| {
        let part = (force_n - low_n + room_n) / (high_n - low_n + 2.0 * room_n);
        LEFT + (part * f64::from(RIGHT - LEFT)).round() as i32
    };
    // Zero in the middle, so that up and down look alike; a perfect fit still gets a scale.
    let largest_n = points.iter().map(|point| point.residual_n.abs()).fold(1e-6 * full_scale_n, f64::max) * 1.2;
    let y =
        |residual_n: f64| (TOP + BOTTOM) / 2 - (residual_n / largest_n * f64::from(BOTTOM - TOP) / 2.0).round() as i32;

    let mut svg = String::new();
    let canvas = Canvas::new(&mut svg)?;
    canvas.text(&shortened(title, 40), (LEFT, 42), Anchor::Left, Look { size: TITLE, bold: true, ..INK })?;
    marker(&canvas, (LEFT + 14, 104), Direction::Up)?;
    canvas.text("load rising", (LEFT + 42, 104), Anchor::Left, INK)?;
    marker(&canvas, (LEFT + 354, 104), Direction::Down)?;
    canvas.text("load falling", (LEFT + 382, 104), Anchor::Left, INK)?;

    let (values, places) = ticks(-largest_n / force.size_si, largest_n / force.size_si, 6.0);
    for value in values {
        let y = y(value * force.size_si);
        canvas.line(vec![(LEFT, y), (RIGHT, y)], 2, palette::GRID)?;
        canvas.text(&tick(value, places), (LEFT - 14, y), Anchor::Right, INK)?;
    }
    let largest_percent = 100.0 * largest_n / full_scale_n;
    let (values, places) = ticks(-largest_percent, largest_percent, 6.0);
    for value in values {
        let y = y(value / 100.0 * full_scale_n);
        canvas.line(vec![(RIGHT, y), (RIGHT + 10, y)], 3, palette::INK)?;
        canvas.text(&tick(value, places), (RIGHT + 16, y), Anchor::Left, INK)?;
    }
    let (values, places) = ticks(low_n / force.size_si, high_n / force.size_si, 7.0);
    for value in values {
        let x = x(value * force.size_si);
        canvas.line(vec![(x, BOTTOM), (x, BOTTOM + 10)], 3, palette::INK)?;
        canvas.text(&tick(value, places), (x, BOTTOM + 32), Anchor::Centre, INK)?;
    }
    let bold = Look { bold: true, ..INK };
    let middle = (TOP + BOTTOM) / 2;
    canvas.text(&format!("force, {}", force.symbol), ((LEFT + RIGHT) / 2, HEIGHT - 30), Anchor::Centre, bold)?;
    canvas.text_upwards(&format!("off the fit, {}", force.symbol), (28, middle), bold)?;
    canvas.text_upwards("off the fit, % of full scale", (WIDTH - 26, middle), bold)?;
    canvas.line(vec![(LEFT, TOP), (LEFT, BOTTOM), (RIGHT, BOTTOM), (RIGHT, TOP)], 3, palette::INK)?;
    canvas.line(vec![(LEFT, y(0.0)), (RIGHT, y(0.0))], 4, palette::INK)?;
    for point in points {
        // A little aside, so that rising and falling points at one force do not cover each other.
        let aside = if point.direction == Direction::Up { -8 } else { 8 };
        marker(&canvas, (x(point.force_n) + aside, y(point.residual_n)), point.direction)?;
    }
    canvas.finish()?;
    Ok(svg)
}

fn tick(value: f64, places: i32) -> String {
    fixed(value, places).replace('-', "−")
}

/// A triangle standing on its base for a rising load, on its tip for a falling one.
fn marker(canvas: &Canvas, (x, y): (i32, i32), direction: Direction) -> Result<(), Problem> {
    let triangle = |half: i32| {
        let tip = if direction == Direction::Up { -half } else { half };
        vec![(x, y + tip), (x - half, y - tip), (x + half, y - tip)]
    };
    let colour = if direction == Direction::Up { palette::STRONG } else { palette::BRICK };
    canvas.polygon(triangle(18), palette::PAPER)?;
    canvas.polygon(triangle(13), colour)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn points() -> Vec<ResidualPoint> {
        [(0.0, 0.1, -0.05), (49.0, -0.3, 0.2), (98.0, -0.1, 0.55), (147.0, 0.2, 0.6), (196.0, 0.1, 0.1)]
            .into_iter()
            .flat_map(|(force_n, up, down)| {
                [
                    ResidualPoint { force_n, residual_n: up, direction: Direction::Up },
                    ResidualPoint { force_n, residual_n: down, direction: Direction::Down },
                ]
            })
            .collect()
    }

    #[test]
    fn residuals_are_drawn_with_both_scales_and_a_shape_a_direction() {
        let svg = residual_svg("2 kN S-beam <x>", &points(), 2000.0, Units::Si).unwrap();
        if let Ok(folder) = std::env::var("BURNTALLY_TEST_PICTURES") {
            let bytes = super::super::plot::png(&svg).unwrap();
            std::fs::write(std::path::Path::new(&folder).join("residuals.png"), bytes).unwrap();
        }
        for text in ["force, N", "off the fit, N", "% of full scale", "load rising", "&lt;x&gt;"] {
            assert!(svg.contains(text), "{text}");
        }
        // Two triangles (rim and fill) for each of the ten points and of the two samples above the frame.
        assert_eq!(svg.matches("<polygon").count(), 24);
    }

    #[test]
    fn a_perfect_fit_and_a_single_point_have_a_picture_and_nothing_has_none() {
        let one = [ResidualPoint { force_n: 0.0, residual_n: 0.0, direction: Direction::Up }];
        assert!(residual_svg("one", &one, 100.0, Units::Us).is_ok());
        assert!(residual_svg("none", &[], 100.0, Units::Si).is_err());
        assert!(residual_svg("no scale", &one, f64::NAN, Units::Si).is_err());
    }
}
