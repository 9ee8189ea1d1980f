//! The check before a flight drawn: speed along the rail with its limit, and the vehicle's side view over a ruler.

use super::canvas::{Anchor, Canvas, Look, Stroke, TEXT, TITLE, WIDTH, palette, shortened, ticks};
use super::units::{Units, fixed};
use crate::preflight::Preflight;
use crate::preflight::pressure_centre::outline;
use crate::preflight::vehicle::Vehicle;
use crate::problem::Problem;

pub const SVG_FILE: &str = "preflight.svg";
pub const PNG_FILE: &str = "preflight.png";

const LEFT: i32 = 130;
const RIGHT: i32 = WIDTH - 40;
const TOP: i32 = 164;
const BOTTOM: i32 = 440;
/// Axis of the side view, and the ruler below it.
const AXIS: i32 = 600;
const RULER: i32 = 692;
const INK: Look = Look { size: TEXT, bold: false, colour: palette::INK };
const SMALL: Look = Look { size: 24.0, bold: false, colour: palette::INK };
/// Half the height that the side view may take, pixels.
const HALF: f64 = 62.0;

/// Draws the check as SVG, 1200 by 800.
///
/// # Errors
/// What the drawing refuses.
pub fn preflight_svg(v: &Vehicle, p: &Preflight, units: Units) -> Result<String, Problem> {
    let mut svg = String::new();
    let canvas = Canvas::new(&mut svg)?;
    let bold = Look { bold: true, ..INK };
    let verdict = match (p.verdict.as_str(), p.qualifications.is_empty()) {
        ("go", true) => "go by its limits",
        ("go", false) => "go, qualified",
        _ => "no-go",
    };
    canvas.text(&shortened(&p.vehicle, 26), (LEFT, 42), Anchor::Left, Look { size: TITLE, ..bold })?;
    canvas.text(verdict, (RIGHT, 42), Anchor::Right, Look { size: TITLE, ..bold })?;
    let caution = "on paper, by these limits only; local law and the range's safety code rule";
    canvas.text(caution, (LEFT, 136), Anchor::Left, Look { size: 22.0, ..SMALL })?;
    speed(&canvas, p, units)?;
    side_view(&canvas, v, p)?;
    canvas.finish()?;
    Ok(svg)
}

fn speed(canvas: &Canvas<'_>, p: &Preflight, units: Units) -> Result<(), Problem> {
    let bold = Look { bold: true, ..INK };
    let (symbol, size) = if units == Units::Us { ("ft/s", 0.3048) } else { ("m/s", 1.0) };
    let limit = p.checks.iter().find(|c| c.id == "rail_exit_speed").map_or(0.0, |c| c.limit);
    let length = p.rail.effective_length.value.max(1e-9);
    let other = p.assumed.as_ref().or(p.mean_of_group.as_ref());
    let fastest = p
        .speed_along_rail
        .iter()
        .chain(other.iter().flat_map(|a| &a.speed_along_rail))
        .map(|x| x[1])
        .fold(limit, f64::max)
        .max(1e-9)
        * 1.12;
    let x = |m: f64| LEFT + (m / length).clamp(0.0, 1.0).mul_add(f64::from(RIGHT - LEFT), 0.0).round() as i32;
    let y = |v: f64| BOTTOM - ((v / fastest).clamp(0.0, 1.0) * f64::from(BOTTOM - TOP)).round() as i32;
    let (values, places) = ticks(0.0, fastest / size, 5.0);
    for value in values {
        canvas.line(vec![(LEFT, y(value * size)), (RIGHT, y(value * size))], 2, palette::GRID)?;
        canvas.text(&fixed(value, places), (LEFT - 14, y(value * size)), Anchor::Right, INK)?;
    }
    let (values, places) = ticks(0.0, length, 7.0);
    for value in values {
        canvas.line(vec![(x(value), BOTTOM), (x(value), BOTTOM + 10)], 3, palette::INK)?;
        canvas.text(&fixed(value, places), (x(value), BOTTOM + 30), Anchor::Centre, SMALL)?;
    }
    canvas.text_upwards(&format!("speed, {symbol}"), (26, (TOP + BOTTOM) / 2), bold)?;
    canvas.text("travel along the rail, m", ((LEFT + RIGHT) / 2, BOTTOM + 62), Anchor::Centre, bold)?;
    canvas.line(vec![(LEFT, TOP), (LEFT, BOTTOM), (RIGHT, BOTTOM)], 3, palette::INK)?;
    canvas.stroked(&[(LEFT, y(limit)), (RIGHT, y(limit))], 4, palette::BRICK, Stroke::Dashed)?;
    if let Some(a) = other {
        let points: Vec<(i32, i32)> = a.speed_along_rail.iter().map(|q| (x(q[0]), y(q[1]))).collect();
        canvas.stroked(&points, 4, palette::MOSS, Stroke::DashDot)?;
    }
    canvas.line(p.speed_along_rail.iter().map(|q| (x(q[0]), y(q[1]))).collect(), 6, palette::STRONG)?;
    canvas.line(vec![(LEFT, 100), (LEFT + 56, 100)], 6, palette::STRONG)?;
    let measured = if p.mean_of_group.is_some() { "lower 95/95 thrust" } else { "thrust checked with" };
    canvas.text(measured, (LEFT + 70, 100), Anchor::Left, INK)?;
    canvas.stroked(&[(LEFT + 400, 100), (LEFT + 456, 100)], 4, palette::BRICK, Stroke::Dashed)?;
    canvas.text("limit at exit", (LEFT + 470, 100), Anchor::Left, INK)?;
    if p.assumed.is_some() || p.mean_of_group.is_some() {
        canvas.stroked(&[(LEFT + 710, 100), (LEFT + 790, 100)], 4, palette::MOSS, Stroke::DashDot)?;
        let name = if p.assumed.is_some() { "assumed thrust" } else { "mean thrust" };
        canvas.text(name, (LEFT + 804, 100), Anchor::Left, INK)?;
    }
    Ok(())
}

/// A plain outline to scale, guides as boxes, and a ruler with labelled ticks below.
fn side_view(canvas: &Canvas<'_>, v: &Vehicle, p: &Preflight) -> Result<(), Problem> {
    let s = &p.stability;
    let cgs = [s.cg_loaded_m, s.cg_at_exit_m, s.cg_burnout_m];
    let stations = cgs.iter().copied().chain([s.cp_m]).chain(s.cp_side_area_m);
    let length = v.length_m.map_or_else(|| 1.1 * stations.fold(0.0, f64::max), |l| l.value).max(1e-9);
    let scale = f64::from(RIGHT - LEFT) / length;
    let x = |m: f64| LEFT + (m * scale).round() as i32;
    let widest = v.shape.iter().flat_map(|s| &s.fins).map(|f| 0.5 * f.body_diameter_m + f.exposed_semispan_m);
    let widest = widest.fold(0.5 * v.diameter_m.value, f64::max);
    // To one scale both ways, unless fins would not find room.
    let across = scale.min(HALF / widest);
    let h = |r: f64| (r * across).round() as i32;
    let half: Vec<[f64; 2]> = match (&v.shape, &v.length_m) {
        (Some(shape), Some(length)) => outline(shape, length.value),
        _ => vec![[0.0, 0.5 * v.diameter_m.value], [length, 0.5 * v.diameter_m.value]],
    };
    let mut edge: Vec<(i32, i32)> = half.iter().map(|q| (x(q[0]), AXIS - h(q[1]))).collect();
    edge.extend(half.iter().rev().map(|q| (x(q[0]), AXIS + h(q[1]))));
    edge.extend(edge.first().copied());
    for fin in v.shape.iter().flat_map(|s| &s.fins) {
        for side in [-1, 1] {
            let (root, tip) = (h(0.5 * fin.body_diameter_m), h(0.5 * fin.body_diameter_m + fin.exposed_semispan_m));
            let lead = fin.station_m + fin.sweep_distance_m;
            canvas.line(
                vec![
                    (x(fin.station_m), AXIS + side * root),
                    (x(lead), AXIS + side * tip),
                    (x(lead + fin.tip_chord_m), AXIS + side * tip),
                    (x(fin.station_m + fin.root_chord_m), AXIS + side * root),
                ],
                3,
                palette::INK,
            )?;
        }
    }
    canvas.line(edge, 3, palette::INK)?;
    // Guides: the aft one drawn at the aft end, the forward one their spacing ahead; where they are bolted is not told.
    let radius = h(0.5 * v.diameter_m.value);
    for at in [length - 0.02 * length, length - 0.02 * length - v.rail.guide_spacing_m.value] {
        canvas.rectangle([(x(at) - 7, AXIS + radius), (x(at) + 7, AXIS + radius + 12)], palette::INK)?;
    }
    canvas.line(vec![(LEFT, RULER), (RIGHT, RULER)], 3, palette::INK)?;
    let (values, places) = ticks(0.0, length, 8.0);
    for value in values {
        canvas.line(vec![(x(value), RULER), (x(value), RULER + 8)], 3, palette::INK)?;
        canvas.text(&fixed(value, places), (x(value), RULER + 26), Anchor::Centre, SMALL)?;
    }
    canvas.text("m from nose tip", (LEFT - 20, RULER + 60), Anchor::Left, SMALL)?;
    let (low, high) = (cgs.iter().copied().fold(f64::INFINITY, f64::min), cgs.iter().copied().fold(0.0, f64::max));
    canvas.rectangle([(x(low) - 2, RULER - 12), (x(high) + 2, RULER - 2)], palette::STRONG)?;
    let middle = (x(low) + x(high)) / 2;
    // Ticks end on the ruler, so that they strike no number through.
    canvas.line(vec![(x(s.cp_m), RULER - 34), (x(s.cp_m), RULER)], 6, palette::BRICK)?;
    canvas.text(
        "guides: spacing to scale, place not given",
        (LEFT, AXIS + 62),
        Anchor::Left,
        Look { size: 21.0, ..SMALL },
    )?;
    // Names on two lines, so that they never meet.
    let named = |text: &str, at: i32, y: i32| -> Result<(), Problem> {
        let half = canvas.text_width(text, INK.size, false) / 2 + 6;
        canvas.text(text, (at.min(RIGHT - half).max(LEFT + half), y), Anchor::Centre, INK)
    };
    named(&format!("centre of gravity {} to {} m (bar)", fixed(low, 3), fixed(high, 3)), middle, RULER + 60)?;
    let mut pressure = format!("centre of pressure {} m", fixed(s.cp_m, 3));
    if let Some(side) = s.cp_side_area_m {
        canvas.stroked(&[(x(side), RULER - 40), (x(side), RULER)], 4, palette::BRICK, Stroke::Dashed)?;
        pressure.push_str(&format!(", by side area {} m (dashed)", fixed(side, 3)));
    }
    named(&pressure, x(s.cp_m), RULER + 92)
}
