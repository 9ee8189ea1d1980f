//! The comparison drawn: a panel a group with its curves and the band for the next motor, figures as dots below.

use super::canvas::{Anchor, Canvas, Look, Stroke, TEXT, TITLE, WIDTH, palette, shortened, ticks};
use super::units::{Units, fixed};
use crate::compare::curves::{Band, Trace};
use crate::compare::{Comparison, Group};
use crate::problem::Problem;

pub const SVG_FILE: &str = "comparison.svg";
pub const PNG_FILE: &str = "comparison.png";

/// Panels drawn at most; further groups are in the files.
const MOST_PANELS: usize = 6;
const LEFT: i32 = 130;
const RIGHT: i32 = WIDTH - 30;
const TOP: i32 = 150;
/// Lower edge of the panels, and of the dots.
const PANELS_END: i32 = 460;
const DOTS_TOP: i32 = 606;
const DOTS_END: i32 = 752;
const INK: Look = Look { size: TEXT, bold: false, colour: palette::INK };
const SMALL: Look = Look { size: 24.0, bold: false, colour: palette::INK };

/// Share of the highest mean by which the groups' means may differ and still be drawn on one scale.
const FAR_APART: f64 = 0.2;
/// Figures drawn as dots.
const DOTS: [(&str, &str); 3] =
    [("total_impulse", "total impulse"), ("average_thrust", "average thrust"), ("burn_time", "burn time")];

/// Draws the comparison as SVG, 1200 by 800. `traces`: the curves of each group, in the groups' order.
///
/// # Errors
/// No groups.
pub fn comparison_svg(c: &Comparison, traces: &[Vec<(String, Trace)>], units: Units) -> Result<String, Problem> {
    if c.groups.is_empty() {
        return Err(Problem::new("there is nothing to draw").expected("at least one group"));
    }
    let mut svg = String::new();
    let canvas = Canvas::new(&mut svg)?;
    let bold = Look { bold: true, ..INK };
    canvas.text(&format!("by {}", shortened(&c.by, 30)), (LEFT, 42), Anchor::Left, Look { size: TITLE, ..bold })?;
    legend(&canvas)?;
    if c.groups.iter().any(|g| !g.set_aside.is_empty()) {
        canvas.stroked(&[(LEFT + 440, 42), (LEFT + 490, 42)], 3, palette::BRICK, Stroke::Dashed)?;
        canvas.text("set aside, not averaged", (LEFT + 502, 42), Anchor::Left, INK)?;
    }
    let shown: Vec<&Group> = c.groups.iter().take(MOST_PANELS).collect();
    if c.groups.len() > MOST_PANELS {
        let text = format!("{} more in comparison.csv", c.groups.len() - MOST_PANELS);
        canvas.text(&text, (RIGHT, 42), Anchor::Right, INK)?;
    }
    let force = units.force();
    let (mut last_s, mut top_n) = (0.0_f64, 0.0_f64);
    for (group, traces) in shown.iter().zip(traces) {
        let ends = group.thrust_band.iter().flat_map(|b| b.time_s.last().copied());
        last_s = ends.chain(traces.iter().flat_map(|t| t.1.time_s.last().copied())).fold(last_s, f64::max);
        let tops = traces.iter().flat_map(|t| t.1.thrust_n.iter().copied());
        top_n = tops.fold(top_n, f64::max);
    }
    // The band of few firings is far wider than any motor; what of it leaves the panel is cut off.
    let top_n = 1.35 * top_n.max(1e-9);
    let last_s = last_s.max(1e-9);
    let width = (RIGHT - LEFT) / shown.len() as i32;
    let (values, places) = ticks(0.0, top_n / force.size_si, 4.0);
    for value in values {
        let y = height(value * force.size_si, top_n);
        canvas.line(vec![(LEFT, y), (RIGHT, y)], 2, palette::GRID)?;
        canvas.text(&fixed(value, places), (LEFT - 12, y), Anchor::Right, SMALL)?;
    }
    canvas.text_upwards(&format!("thrust, {}", force.symbol), (26, (TOP + PANELS_END) / 2), bold)?;
    for (k, group) in shown.iter().enumerate() {
        let from = LEFT + k as i32 * width;
        let to = from + width - 16;
        let x = |t: f64| from + (t / last_s * f64::from(to - from)).round() as i32;
        if let Some(band) = &group.thrust_band {
            draw_band(&canvas, band, &x, top_n)?;
        }
        for (id, trace) in traces.get(k).into_iter().flatten() {
            let points: Vec<(i32, i32)> =
                trace.time_s.iter().zip(&trace.thrust_n).map(|(t, f)| (x(*t), height(*f, top_n))).collect();
            if group.set_aside.iter().any(|s| s.id == *id) {
                canvas.stroked(&points, 3, palette::BRICK, Stroke::Dashed)?;
            } else {
                canvas.line(points, 2, palette::FAINT)?;
            }
        }
        if let Some(band) = &group.thrust_band {
            let mean = band.time_s.iter().zip(&band.mean_n).map(|(t, f)| (x(*t), height(*f, top_n))).collect();
            canvas.line(mean, 5, palette::STRONG)?;
        }
        canvas.line(vec![(from, TOP), (from, PANELS_END), (to, PANELS_END)], 3, palette::INK)?;
        let longest = (width / 22).max(4) as usize;
        let title = format!("{} (n {})", shortened(&group.pour, longest.saturating_sub(6).max(3)), group.n);
        canvas.text(&title, (from + 4, TOP - 18), Anchor::Left, Look { size: 26.0, ..bold })?;
        let (values, places) = ticks(0.0, last_s, f64::from(width) / 150.0);
        for value in values.into_iter().filter(|v| *v >= 0.0) {
            canvas.line(vec![(x(value), PANELS_END), (x(value), PANELS_END + 8)], 3, palette::INK)?;
            canvas.text(&fixed(value, places), (x(value), PANELS_END + 26), Anchor::Centre, SMALL)?;
        }
    }
    canvas.text("time from start of burn, s", ((LEFT + RIGHT) / 2, PANELS_END + 58), Anchor::Centre, bold)?;
    dots(&canvas, &shown, units)?;
    canvas.finish()?;
    Ok(svg)
}

fn height(thrust_n: f64, top_n: f64) -> i32 {
    let part = (thrust_n / top_n).clamp(0.0, 1.0);
    PANELS_END - (part * f64::from(PANELS_END - TOP)).round() as i32
}

fn draw_band(canvas: &Canvas<'_>, band: &Band, x: &dyn Fn(f64) -> i32, top_n: f64) -> Result<(), Problem> {
    if band.lower_n.is_empty() {
        return Ok(());
    }
    let edge = |values: &[f64]| -> Vec<(i32, i32)> {
        band.time_s.iter().zip(values).map(|(t, f)| (x(*t), height(*f, top_n))).collect()
    };
    let mut outline = edge(&band.upper_n);
    outline.extend(edge(&band.lower_n).into_iter().rev());
    canvas.polygon(outline, palette::SAND)
}

fn legend(canvas: &Canvas<'_>) -> Result<(), Problem> {
    canvas.line(vec![(LEFT, 94), (LEFT + 50, 94)], 5, palette::STRONG)?;
    canvas.text("mean", (LEFT + 62, 94), Anchor::Left, INK)?;
    canvas.line(vec![(LEFT + 190, 94), (LEFT + 240, 94)], 2, palette::FAINT)?;
    canvas.text("one firing", (LEFT + 252, 94), Anchor::Left, INK)?;
    canvas.rectangle([(LEFT + 440, 80), (LEFT + 490, 108)], palette::SAND)?;
    canvas.text("95 % of motors to come, 95 % sure", (LEFT + 502, 94), Anchor::Left, INK)
}

/// A strip a figure, groups side by side: each firing a dot, the mean a bar with its 95 % interval.
fn dots(canvas: &Canvas<'_>, groups: &[&Group], units: Units) -> Result<(), Problem> {
    let present: Vec<(&str, &str)> =
        DOTS.into_iter().filter(|(key, _)| groups.iter().any(|g| g.quantities.contains_key(*key))).collect();
    if present.is_empty() {
        return Ok(());
    }
    canvas.text(
        "dots: firings, in % off the group's mean where groups lie far apart; bars: 95 % interval of the mean",
        (LEFT - 80, DOTS_TOP - 54),
        Anchor::Left,
        Look { size: 22.0, ..SMALL },
    )?;
    let width = (RIGHT - LEFT + 100) / present.len() as i32;
    for (k, (key, name)) in present.iter().enumerate() {
        let from = LEFT - 100 + k as i32 * width;
        let plot_from = from + 100;
        let to = from + width - 24;
        let spreads: Vec<_> = groups.iter().map(|g| g.quantities.get(*key)).collect();
        let Some(unit) = spreads.iter().flatten().next().map(|s| units.of(&s.unit, s.mean)) else { continue };
        let means = || spreads.iter().flatten().map(|s| s.mean);
        let (least, most) = (means().fold(f64::INFINITY, f64::min), means().fold(f64::NEG_INFINITY, f64::max));
        // Where the groups lie far apart nothing would be seen of their spread: each is then drawn about its own mean.
        let own = most - least > FAR_APART * most.abs();
        let place = |v: f64, mean: f64| if own { 100.0 * (v / mean - 1.0) } else { v / unit.size_si };
        let values: Vec<f64> =
            spreads.iter().flatten().flat_map(|s| s.values.values().map(|v| place(*v, s.mean))).collect();
        let low = values.iter().copied().fold(f64::INFINITY, f64::min);
        let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let room = (0.25 * (high - low)).max(0.01 * high.abs()).max(1e-12);
        let (low, high) = (low - room, high + room);
        let y = |v: f64| {
            DOTS_END - (((v - low) / (high - low)).clamp(0.0, 1.0) * f64::from(DOTS_END - DOTS_TOP)).round() as i32
        };
        let title = if own {
            format!("{name}, %")
        } else if unit.symbol.is_empty() {
            (*name).to_string()
        } else {
            format!("{name}, {}", unit.symbol)
        };
        canvas.text(&title, (from + 20, DOTS_TOP - 24), Anchor::Left, Look { bold: true, ..SMALL })?;
        let (marks, places) = ticks(low, high, 3.0);
        for mark in marks {
            canvas.line(vec![(plot_from, y(mark)), (to, y(mark))], 2, palette::GRID)?;
            canvas.text(&fixed(mark, places), (plot_from - 8, y(mark)), Anchor::Right, SMALL)?;
        }
        let step = (to - plot_from) / groups.len() as i32;
        for (g, (group, spread)) in groups.iter().zip(&spreads).enumerate() {
            let middle = plot_from + g as i32 * step + step / 2;
            canvas.text(
                &shortened(&group.pour, (step / 14).max(2) as usize),
                (middle, DOTS_END + 22),
                Anchor::Centre,
                SMALL,
            )?;
            let Some(s) = spread else { continue };
            if let Some([a, b]) = s.mean_interval_95 {
                let (ya, yb) = (y(place(a, s.mean)), y(place(b, s.mean)));
                canvas.line(vec![(middle, ya), (middle, yb)], 4, palette::STRONG)?;
            }
            let mean = y(place(s.mean, s.mean));
            canvas.line(vec![(middle - 16, mean), (middle + 16, mean)], 5, palette::STRONG)?;
            for (id, value) in &s.values {
                let at = (middle + 12, y(place(*value, s.mean)));
                canvas.disc(at, 6, palette::MOSS)?;
                // An odd one is ringed as well as named in the summary.
                if s.outliers.contains(id) {
                    canvas.line(square(at, 14), 3, palette::BRICK)?;
                }
            }
        }
    }
    Ok(())
}

fn square((x, y): (i32, i32), half: i32) -> Vec<(i32, i32)> {
    vec![(x - half, y - half), (x + half, y - half), (x + half, y + half), (x - half, y + half), (x - half, y - half)]
}
