//! The picture of a firing: raw samples faint, conditioned thrust strong, the burn shaded, zero, 5 % line and peak.

use super::canvas::{Anchor, Canvas, HEIGHT, Look, Stroke, TEXT, TITLE, WIDTH, palette, shortened, ticks};
use super::units::{Units, fixed, words};
use crate::firing::{Curves, Firing};
use crate::problem::Problem;

pub const SVG_FILE: &str = "thrust.svg";
pub const PNG_FILE: &str = "thrust.png";

const TOP: i32 = 176;
const BOTTOM: i32 = HEIGHT - 108;
const LEFT: i32 = 136;
/// Right edge of the frame without a second axis, and with one.
const RIGHT: i32 = WIDTH - 36;
const RIGHT_WITH_AXIS: i32 = WIDTH - 128;
/// Room before first and after last thrust, as a share of the time between them.
const ROOM_ASIDE: f64 = 0.06;
/// Room above the peak for its label, as a share of the peak.
const ROOM_ABOVE: f64 = 0.2;
/// Raw samples are shown up to this many times the peak above, and this share of it below zero; ringing beyond is cut.
const RAW_ABOVE: f64 = 1.5;
const RAW_BELOW: f64 = 0.25;
/// Where the highest pressure stands, as a share of the height above zero: below the peak of the thrust, so that the two
/// lines are apart.
const PRESSURE_HEIGHT: f64 = 0.62;

const INK: Look = Look { size: TEXT, bold: false, colour: palette::INK };
const HEADING: Look = Look { size: TITLE, bold: true, colour: palette::INK };

/// What a picture shows, in pixels per unit.
struct Frame {
    right: i32,
    /// Log time of first thrust, s.
    zero_s: f64,
    from_s: f64,
    to_s: f64,
    low_n: f64,
    high_n: f64,
}

impl Frame {
    fn x(&self, log_time_s: f64) -> i32 {
        let part = ((log_time_s - self.from_s) / (self.to_s - self.from_s)).clamp(0.0, 1.0);
        LEFT + (part * f64::from(self.right - LEFT)).round() as i32
    }

    fn y(&self, force_n: f64) -> i32 {
        let part = ((force_n - self.low_n) / (self.high_n - self.low_n)).clamp(0.0, 1.0);
        BOTTOM - (part * f64::from(BOTTOM - TOP)).round() as i32
    }
}

/// Draws a firing as SVG, 1200 by 800.
///
/// # Errors
/// Curves without extent.
pub fn thrust_svg(firing: &Firing, curves: &Curves, units: Units) -> Result<String, Problem> {
    let frame = frame(firing, curves)?;
    let mut svg = String::new();
    let canvas = Canvas::new(&mut svg)?;
    let pressure = pressure(curves, &frame);
    title(&canvas, firing, units)?;
    let burn = [frame.x(firing.burn.start_s), frame.x(firing.burn.end_s)];
    canvas.rectangle([(burn[0], TOP), (burn[1], BOTTOM)], palette::SAND)?;
    axes(&canvas, &frame, units)?;
    canvas.line(envelope(&curves.time_s, &curves.raw_n, &frame), 2, palette::FAINT)?;
    let threshold_y = frame.y(curves.burn_threshold_n);
    canvas.stroked(&[(LEFT, threshold_y), (frame.right, threshold_y)], 3, palette::BRICK, Stroke::Dashed)?;
    if let Some((points, highest_pa)) = &pressure {
        canvas.stroked(points, 5, palette::MOSS, Stroke::DashDot)?;
        pressure_axis(&canvas, &frame, *highest_pa, units)?;
    }
    canvas.line(envelope(&curves.time_s, &curves.conditioned_n, &frame), 5, palette::STRONG)?;
    peak(&canvas, &frame, firing, curves, units)?;
    legend(&canvas, pressure.is_some())?;
    canvas.finish()?;
    // A line of many short pieces must not sprout spikes where noise turns it back on itself.
    Ok(svg.replace("<polyline ", "<polyline stroke-linejoin=\"round\" "))
}

/// The same picture as PNG.
///
/// # Errors
/// SVG that is not one of ours.
pub fn png(svg: &str) -> Result<Vec<u8>, Problem> {
    super::canvas::png(svg)
}

fn frame(firing: &Firing, curves: &Curves) -> Result<Frame, Problem> {
    let nothing = || Problem::new("there is no curve to draw").expected("samples around the burn");
    let (first, last) = match (curves.time_s.first(), curves.time_s.last()) {
        (Some(first), Some(last)) if last > first => (*first, *last),
        _ => return Err(nothing()),
    };
    let burn = &firing.burn;
    let aside = ROOM_ASIDE * (burn.thrust_end_s - burn.thrust_start_s).abs();
    let from_s = (burn.thrust_start_s - aside).max(first);
    // A curve carried on beyond the record has its last thrust after the last sample.
    let to_s = (burn.thrust_end_s + aside).min(last.max(burn.thrust_end_s));
    let shown = |values: &[f64]| {
        let inside = curves.time_s.iter().zip(values).filter(|(t, f)| (from_s..=to_s).contains(*t) && f.is_finite());
        inside.fold((0.0_f64, 0.0_f64), |(low, high), (_, f)| (low.min(*f), high.max(*f)))
    };
    let (low, high) = shown(&curves.conditioned_n);
    let (raw_low, raw_high) = shown(&curves.raw_n);
    if !(to_s > from_s && high > 0.0) {
        return Err(nothing());
    }
    let high_n = (high * (1.0 + ROOM_ABOVE)).max(raw_high.min(RAW_ABOVE * high) * 1.04);
    let low_n = low.min(raw_low.max(-RAW_BELOW * high)) - 0.04 * high;
    let right = if curves.pressure_pa.is_some() { RIGHT_WITH_AXIS } else { RIGHT };
    Ok(Frame { right, zero_s: burn.thrust_start_s, from_s, to_s, low_n, high_n })
}

/// At most four points a column of pixels: first, lowest, highest and last, which draws the same as all of them.
fn envelope(time_s: &[f64], value: &[f64], frame: &Frame) -> Vec<(i32, i32)> {
    thinned(time_s, value, frame, |v| frame.y(v))
}

fn thinned(time_s: &[f64], value: &[f64], frame: &Frame, y: impl Fn(f64) -> i32) -> Vec<(i32, i32)> {
    let mut points: Vec<(i32, i32)> = Vec::new();
    let mut flush = |x: i32, ys: &mut Vec<i32>| {
        if let (Some(first), Some(last)) = (ys.first().copied(), ys.last().copied()) {
            let low = ys.iter().copied().min().unwrap_or(first);
            let high = ys.iter().copied().max().unwrap_or(first);
            for y in [first, low, high, last] {
                if points.last() != Some(&(x, y)) {
                    points.push((x, y));
                }
            }
        }
        ys.clear();
    };
    let (mut column, mut ys) = (i32::MIN, Vec::new());
    for (t, v) in time_s.iter().zip(value) {
        if !(frame.from_s..=frame.to_s).contains(t) || !v.is_finite() {
            continue;
        }
        let x = frame.x(*t);
        if x != column {
            flush(column, &mut ys);
            column = x;
        }
        ys.push(y(*v));
    }
    flush(column, &mut ys);
    points
}

fn title(canvas: &Canvas, firing: &Firing, units: Units) -> Result<(), Problem> {
    canvas.text(&shortened(&firing.run.id, 16), (LEFT, 42), Anchor::Left, HEADING)?;
    let mut right = String::new();
    if let Some(class) = &firing.motor_class {
        right.push_str(&class.designation);
    }
    if let Some(total) = &firing.quantities.total_impulse {
        if !right.is_empty() {
            right.push_str("  ·  ");
        }
        right.push_str(&words(total, units).line());
    }
    canvas.text(&shortened(&right, 34), (WIDTH - 36, 42), Anchor::Right, Look { size: 36.0, ..HEADING })
}

fn axes(canvas: &Canvas, frame: &Frame, units: Units) -> Result<(), Problem> {
    let force = units.force();
    let (values, places) = ticks(frame.low_n / force.size_si, frame.high_n / force.size_si, 6.0);
    for value in values {
        let y = frame.y(value * force.size_si);
        canvas.line(vec![(LEFT, y), (frame.right, y)], 2, palette::GRID)?;
        canvas.text(&tick(value, places), (LEFT - 14, y), Anchor::Right, INK)?;
    }
    let (values, places) = ticks(frame.from_s - frame.zero_s, frame.to_s - frame.zero_s, 7.0);
    for value in values {
        let x = frame.x(value + frame.zero_s);
        canvas.line(vec![(x, BOTTOM), (x, BOTTOM + 10)], 3, palette::INK)?;
        canvas.text(&tick(value, places), (x, BOTTOM + 32), Anchor::Centre, INK)?;
    }
    let bold = Look { bold: true, ..INK };
    canvas.text("time from first thrust, s", ((LEFT + frame.right) / 2, HEIGHT - 30), Anchor::Centre, bold)?;
    canvas.text_upwards(&format!("thrust, {}", force.symbol), (28, (TOP + BOTTOM) / 2), bold)?;
    canvas.line(vec![(LEFT, TOP), (LEFT, BOTTOM), (frame.right, BOTTOM)], 3, palette::INK)?;
    let zero = frame.y(0.0);
    canvas.line(vec![(LEFT, zero), (frame.right, zero)], 3, palette::INK)
}

fn tick(value: f64, places: i32) -> String {
    fixed(value, places).replace('-', "−")
}

/// Pressure as points, with its highest value in Pa; zero pressure stands on zero thrust.
fn pressure(curves: &Curves, frame: &Frame) -> Option<(Vec<(i32, i32)>, f64)> {
    let values = curves.pressure_pa.as_ref()?;
    let inside =
        curves.time_s.iter().zip(values).filter(|(t, p)| (frame.from_s..=frame.to_s).contains(*t) && p.is_finite());
    let highest = inside.fold(0.0_f64, |highest, (_, p)| highest.max(*p));
    if highest <= 0.0 {
        return None;
    }
    let newtons_a_pascal = PRESSURE_HEIGHT * frame.high_n / highest;
    let points = thinned(&curves.time_s, values, frame, |p| frame.y(p * newtons_a_pascal));
    Some((points, highest))
}

fn pressure_axis(canvas: &Canvas, frame: &Frame, highest_pa: f64, units: Units) -> Result<(), Problem> {
    let unit = units.pressure();
    let newtons_a_unit = PRESSURE_HEIGHT * frame.high_n / highest_pa * unit.size_si;
    let colour = Look { colour: palette::MOSS, ..INK };
    let (values, places) = ticks(0.0, highest_pa * 1.15 / unit.size_si, 4.0);
    for value in values {
        let y = frame.y(value * newtons_a_unit);
        canvas.line(vec![(frame.right, y), (frame.right + 10, y)], 3, palette::MOSS)?;
        canvas.text(&tick(value, places), (frame.right + 16, y), Anchor::Left, colour)?;
    }
    let at = (WIDTH - 26, (TOP + BOTTOM) / 2);
    canvas.line(vec![(frame.right, TOP), (frame.right, BOTTOM)], 3, palette::MOSS)?;
    canvas.text_upwards(&format!("chamber pressure, {}", unit.symbol), at, Look { bold: true, ..colour })
}

fn peak(canvas: &Canvas, frame: &Frame, firing: &Firing, curves: &Curves, units: Units) -> Result<(), Problem> {
    let Some(figure) = &firing.quantities.peak_thrust else { return Ok(()) };
    let at = (frame.x(curves.peak_time_s), frame.y(figure.value));
    canvas.disc(at, 10, palette::BRICK)?;
    let after_s = curves.peak_time_s - frame.zero_s;
    let after_s = fixed(after_s, if after_s < 0.1 { 3 } else { 2 });
    let label = format!("peak {} at {after_s} s", words(figure, units).line());
    let look = Look { bold: true, colour: palette::BRICK, ..INK };
    let half = canvas.text_width(&label, look.size, true) / 2 + 12;
    let x = at.0.clamp(LEFT + half, (frame.right - half).max(LEFT + half));
    let y = (at.1 - 40).max(TOP + 22);
    // Paper beneath, for raw samples may ring above the peak.
    canvas.rectangle([(x - half, y - 21), (x + half, y + 21)], palette::PAPER)?;
    canvas.text(&label, (x, y), Anchor::Centre, look)
}

/// Samples of each line with its name, in two rows between title and frame.
fn legend(canvas: &Canvas, with_pressure: bool) -> Result<(), Problem> {
    let rows = [96, 140];
    let columns = [LEFT, LEFT + 335, LEFT + 670];
    let sample = |x: i32, y: i32| vec![(x, y), (x + 64, y)];
    let name = |text: &str, x: i32, y: i32| canvas.text(text, (x + 78, y), Anchor::Left, INK);
    canvas.line(sample(columns[0], rows[0]), 5, palette::STRONG)?;
    name("thrust", columns[0], rows[0])?;
    let jagged = (0..9).map(|i| (columns[0] + 8 * i, rows[1] + if i % 2 == 0 { -7 } else { 7 })).collect();
    canvas.line(jagged, 2, palette::FAINT)?;
    name("raw samples", columns[0], rows[1])?;
    canvas.rectangle([(columns[1], rows[0] - 14), (columns[1] + 64, rows[0] + 14)], palette::SAND)?;
    name("burn time", columns[1], rows[0])?;
    canvas.stroked(&sample(columns[1], rows[1]), 3, palette::BRICK, Stroke::Dashed)?;
    name("5 % of peak", columns[1], rows[1])?;
    canvas.line(sample(columns[2], rows[0]), 3, palette::INK)?;
    name("zero (baseline)", columns[2], rows[0])?;
    if with_pressure {
        canvas.stroked(&sample(columns[2], rows[1]), 5, palette::MOSS, Stroke::DashDot)?;
        name("chamber pressure", columns[2], rows[1])?;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;

    /// Set to a folder to keep the pictures of the tests for a look.
    fn keep(name: &str, svg: &str) {
        if let Ok(folder) = std::env::var("BURNTALLY_TEST_PICTURES") {
            std::fs::write(std::path::Path::new(&folder).join(format!("{name}.png")), png(svg).unwrap()).unwrap();
            std::fs::write(std::path::Path::new(&folder).join(format!("{name}.svg")), svg).unwrap();
        }
    }

    fn attributes<'a>(svg: &'a str, name: &str) -> Vec<&'a str> {
        let key = format!(" {name}=\"");
        svg.match_indices(&key)
            .map(|(at, _)| {
                let from = at + key.len();
                &svg[from..from + svg[from..].find('"').unwrap()]
            })
            .collect()
    }

    #[test]
    fn a_firing_is_drawn_with_its_labels_in_large_text() {
        let svg = thrust_svg(&sample::firing(), &sample::curves(3_000), Units::Si).unwrap();
        keep("thrust", &svg);
        for text in ["QX-03", "time from first thrust, s", "thrust, N", "peak 310.0 ± 1.6 N", "5 % of peak", "J284"] {
            assert!(svg.contains(text), "{text}");
        }
        for size in attributes(&svg, "font-size") {
            assert!(size.parse::<f64>().unwrap() >= 26.0, "{size}");
        }
        assert!(svg.len() < 120_000, "{} bytes", svg.len());
    }

    #[test]
    fn customary_units_and_pressure() {
        let mut curves = sample::curves(3_000);
        curves.pressure_pa = Some(curves.conditioned_n.iter().map(|f| 101_325.0 + f * 12_000.0).collect());
        let svg = thrust_svg(&sample::firing(), &curves, Units::Us).unwrap();
        keep("pressure-us", &svg);
        assert!(svg.contains("thrust, lbf") && svg.contains("chamber pressure, psi"));
        let svg = thrust_svg(&sample::firing(), &curves, Units::Si).unwrap();
        keep("pressure-si", &svg);
        assert!(svg.contains("chamber pressure, MPa"));
    }

    #[test]
    fn the_png_is_a_picture_of_full_size_with_text_and_without_installed_fonts() {
        let svg = thrust_svg(&sample::firing(), &sample::curves(300), Units::Si).unwrap();
        let bytes = png(&svg).unwrap();
        let mut reader = ::png::Decoder::new(std::io::Cursor::new(&bytes)).read_info().unwrap();
        assert_eq!((reader.info().width, reader.info().height), (1200, 800));
        let mut pixels = vec![0; reader.output_buffer_size().unwrap()];
        reader.next_frame(&mut pixels).unwrap();
        // The run's id stands at the upper left: dark pixels there mean that the font was found.
        let dark =
            (20..64).flat_map(|y| (136..400).map(move |x| (y * 1200 + x) * 3)).filter(|at| pixels[*at] < 90).count();
        assert!(dark > 500, "{dark}");
    }

    #[test]
    fn names_from_outside_stay_text() {
        let mut firing = sample::firing();
        firing.run.id = "<script>&\"'\u{0}\u{1b}".to_owned();
        let svg = thrust_svg(&firing, &sample::curves(300), Units::Si).unwrap();
        assert!(!svg.contains("<script>") && svg.contains("&lt;script&gt;&amp;"));
        assert!(png(&svg).is_ok());
    }

    #[test]
    fn noise_far_above_the_peak_and_short_records_are_drawn() {
        let mut curves = sample::curves(3_000);
        for (i, raw) in curves.raw_n.iter_mut().enumerate() {
            *raw += 900.0 * (i as f64 * 0.9).sin() * (-((i as f64) - 1_400.0).abs() / 300.0).exp();
        }
        let mut firing = sample::firing();
        firing.run.id = "a-name-far-too-long-for-a-title-of-a-picture".to_owned();
        let svg = thrust_svg(&firing, &curves, Units::Si).unwrap();
        keep("ringing", &svg);
        let mut early = sample::curves(3_000);
        early.peak_time_s = 12.41;
        firing.quantities.peak_thrust.as_mut().unwrap().bound = Some("lower".to_owned());
        keep("early-peak", &thrust_svg(&firing, &early, Units::Si).unwrap());
        assert!(thrust_svg(&firing, &Curves::default(), Units::Si).is_err());
    }

    #[test]
    fn a_column_of_pixels_keeps_its_extremes() {
        let curves = sample::curves(100_000);
        let firing = sample::firing();
        let frame = frame(&firing, &curves).unwrap();
        let points = envelope(&curves.time_s, &curves.raw_n, &frame);
        assert!(points.len() <= 4 * 1200);
        let highest = curves.raw_n.iter().copied().fold(0.0, f64::max);
        assert!(points.iter().any(|(_, y)| *y == frame.y(highest)));
    }
}
