//! Figures from chamber pressure.

/// Mean throat area, m², of the throat before and, where it was measured, after; and half of what wear changed it by.
pub fn throat_area(diameter_m: f64, diameter_after_m: Option<f64>) -> (f64, f64) {
    let area = |d: f64| 0.25 * std::f64::consts::PI * d * d;
    let (before, after) = (area(diameter_m), area(diameter_after_m.unwrap_or(diameter_m)));
    (0.5 * (before + after), 0.5 * (after - before).abs())
}

/// Characteristic velocity, m/s.
///
/// # Formula
/// c* = A_t ∫p dt / m_p, with throat area A_t, absolute chamber pressure p and propellant mass m_p (Sutton and Biblarz, Rocket
/// Propulsion Elements; from memory).
pub fn characteristic_velocity(throat_area_m2: f64, pressure_integral_pa_s: f64, propellant_kg: f64) -> f64 {
    throat_area_m2 * pressure_integral_pa_s / propellant_kg
}

/// Thrust coefficient, 1.
///
/// # Formula
/// C_F = ∫F dt / (A_t ∫p dt), both over the same time (Sutton and Biblarz; from memory).
pub fn thrust_coefficient(impulse_n_s: f64, throat_area_m2: f64, pressure_integral_pa_s: f64) -> f64 {
    impulse_n_s / (throat_area_m2 * pressure_integral_pa_s)
}

/// A straight line through a point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Line {
    pub time_s: f64,
    pub value: f64,
    pub slope: f64,
}

impl Line {
    /// Least squares through samples; `None` for fewer than two instants.
    fn fit(time_s: &[f64], value: &[f64]) -> Option<Line> {
        let n = time_s.len() as f64;
        if time_s.len() < 2 {
            return None;
        }
        let (t, v) = (time_s.iter().sum::<f64>() / n, value.iter().sum::<f64>() / n);
        let spread: f64 = time_s.iter().map(|x| (x - t).powi(2)).sum();
        let slope = time_s.iter().zip(value).map(|(x, y)| (x - t) * (y - v)).sum::<f64>() / spread;
        slope.is_finite().then_some(Line { time_s: t, value: v, slope })
    }

    fn meets(&self, other: &Line) -> Option<(f64, f64)> {
        let t = (other.value - self.value + self.slope * self.time_s - other.slope * other.time_s)
            / (self.slope - other.slope);
        t.is_finite().then_some((t, self.value + self.slope * (t - self.time_s)))
    }
}

/// Where the bisector of the angle between the tangent of the level part and that of the tail-off cuts the trace, on axes of which
/// one unit is `unit_s` by `unit_value`: the result depends on them, since seconds and pascals have no common angle.
pub fn bisector_cut(
    time_s: &[f64],
    value: &[f64],
    level: &Line,
    tail: &Line,
    unit_s: f64,
    unit_value: f64,
) -> Option<f64> {
    let (knee_s, knee) = level.meets(tail)?;
    let direction = |slope: f64, sign: f64| {
        let (x, y) = (sign, sign * slope * unit_s / unit_value);
        let length = x.hypot(y);
        (x / length, y / length)
    };
    // Back along the level part and forth along the tail-off.
    let (back, forth) = (direction(level.slope, -1.0), direction(tail.slope, 1.0));
    let bisector = (back.0 + forth.0, back.1 + forth.1);
    let side = |t: f64, v: f64| bisector.0 * (v - knee) / unit_value - bisector.1 * (t - knee_s) / unit_s;
    let mut cut: Option<f64> = None;
    for (t, v) in time_s.windows(2).zip(value.windows(2)) {
        let (a, b) = (side(t[0], v[0]), side(t[1], v[1]));
        if a == 0.0 || a * b < 0.0 {
            let at = t[0] + (t[1] - t[0]) * a / (a - b).abs().max(f64::MIN_POSITIVE) * (a - b).signum();
            // The bisector runs on through the rest of the trace: the cut beside the knee is meant.
            if cut.is_none_or(|c: f64| (at - knee_s).abs() < (c - knee_s).abs()) {
                cut = Some(at);
            }
        }
    }
    cut
}

/// End of burning of the web.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct WebTime {
    /// From the first crossing of 10 % of the highest value, s.
    pub start_s: f64,
    /// By the aft-tangent bisector.
    pub end_s: f64,
    /// Where the two tangents meet: how far a sharper knee would lie.
    pub knee_s: f64,
}

/// Parts of the time to the tail-off over which the level part's tangent is fitted, counted back from the tail-off.
const LEVEL_FROM: f64 = 0.40;
const LEVEL_TO: f64 = 0.08;
/// The tail-off's tangent is fitted between these shares of the level at its beginning.
const TAIL_SHARES: (f64, f64) = (0.75, 0.35);

/// Web burning time of a pressure trace (above the outside air) by the aft-tangent bisector (Sutton and Biblarz; from memory). The
/// axes are scaled by the time from 10 % to 10 % and by the highest pressure.
pub fn web_time(time_s: &[f64], value: &[f64]) -> Option<WebTime> {
    let highest = value.iter().copied().fold(0.0, f64::max);
    let start = value.iter().position(|v| *v >= 0.1 * highest)?;
    let end = value.iter().rposition(|v| *v >= 0.1 * highest)?;
    let unit_s = time_s[end] - time_s[start];
    // The tail-off begins below the level that the last part of the burn holds; that level is found in two steps.
    let last_above = |level: f64| value.iter().rposition(|v| *v >= level);
    let mut level_value = highest;
    let mut found = None;
    for _ in 0..4 {
        let fall = time_s[last_above(TAIL_SHARES.0 * level_value)?];
        let burnt = fall - time_s[start];
        let from = time_s.partition_point(|t| *t < fall - LEVEL_FROM * burnt);
        let to = time_s.partition_point(|t| *t < fall - LEVEL_TO * burnt);
        let level = Line::fit(time_s.get(from..to)?, &value[from..to])?;
        let (a, b) = (last_above(TAIL_SHARES.0 * level_value)?, last_above(TAIL_SHARES.1 * level_value)?);
        let tail = Line::fit(&time_s[a..(b + 2).min(time_s.len())], &value[a..(b + 2).min(time_s.len())])?;
        let (knee_s, knee) = level.meets(&tail)?;
        found = Some((level, tail, knee_s));
        level_value = knee.clamp(0.3 * highest, highest);
    }
    let (level, tail, knee_s) = found?;
    if tail.slope >= 0.0 || tail.slope >= level.slope || unit_s <= 0.0 {
        return None;
    }
    let end_s = bisector_cut(time_s, value, &level, &tail, unit_s, highest)?;
    (end_s > time_s[start]).then_some(WebTime { start_s: time_s[start], end_s, knee_s })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reference(text: &str) -> serde_json::Value {
        serde_json::from_str(text).expect("reference")
    }

    fn number(v: &serde_json::Value) -> f64 {
        v.as_f64().expect("a number")
    }

    /// tests/reference/item07: Sutton and Biblarz, example 2-2 (from memory there, recomputed unrounded: the book rounds on the way).
    #[test]
    fn a_static_test_of_the_book() {
        let example = &reference(include_str!("../../tests/reference/item07_performance_examples.json"))["sutton_2_2"];
        let (inputs, expected) = (&example["inputs"], &example["recomputed"]);
        let (area, wear) = throat_area(number(&inputs["throat_d_m"]), None);
        assert!((area / number(&expected["At"]) - 1.0).abs() < 1e-9 && wear == 0.0);
        let integral = number(&inputs["p1_MPa"]) * 1e6 * number(&inputs["duration_s"]);
        let mass = number(&inputs["mass_before_kg"]) - number(&inputs["mass_after_kg"]);
        let c = characteristic_velocity(area, integral, mass);
        assert!((c / number(&expected["cstar"]) - 1.0).abs() < 1e-9, "{c}");
        let impulse = number(&expected["total_impulse"]);
        let coefficient = thrust_coefficient(impulse, area, integral);
        assert!((coefficient / number(&expected["CF_sl"]) - 1.0).abs() < 1e-9, "{coefficient}");
    }

    /// tests/reference/item07: NASA RP-1311 example 8, specific impulse (m/s) = c* C_F, printed to four or five digits.
    #[test]
    fn velocity_times_coefficient_is_specific_impulse() {
        let all = reference(include_str!("../../tests/reference/item07_performance_examples.json"));
        let table = &all["nasa_rp1311_example8"]["table"];
        for (coefficient, specific) in
            table["CF"].as_array().expect("CF").iter().zip(table["Isp"].as_array().expect("Isp"))
        {
            // One kilogram through 1 m² at such a pressure integral that c* is the table's.
            let integral = number(&table["cstar"]);
            let impulse = number(specific);
            assert!((characteristic_velocity(1.0, integral, 1.0) - integral).abs() < 1e-9);
            let found = thrust_coefficient(impulse, 1.0, integral);
            // C_F has four decimals, specific impulse one.
            assert!((found - number(coefficient)).abs() < 5e-5 + 0.05 / integral + 5e-5, "{found}");
        }
    }

    /// tests/reference/item06: a rounded knee (a quadratic Bézier curve between two tangents) on three scalings of the axes.
    #[test]
    fn the_bisector_cuts_a_rounded_knee_where_the_scaling_puts_it() {
        let all = reference(include_str!("../../tests/reference/item06_burn_time_definitions.json"));
        let vector = &all["analytic_test_vector"];
        let knee = &vector["rounded_knee_bezier"];
        let point = |name: &str| (number(&knee[name][0]), number(&knee[name][1]));
        let (p0, p1, p2) = (point("P0"), point("P1"), point("P2"));
        let trace: Vec<(f64, f64)> = (0..=20_000)
            .map(|i| {
                let s = f64::from(i) / 20_000.0;
                let mix = |a: f64, b: f64, c: f64| (1.0 - s).powi(2) * a + 2.0 * s * (1.0 - s) * b + s * s * c;
                (mix(p0.0, p1.0, p2.0), mix(p0.1, p1.1, p2.1))
            })
            .collect();
        let (t, v): (Vec<f64>, Vec<f64>) = trace.into_iter().unzip();
        let line = |a: (f64, f64), b: (f64, f64)| Line { time_s: a.0, value: a.1, slope: (b.1 - a.1) / (b.0 - a.0) };
        let (level, tail) = (line(p0, p1), line(p1, p2));
        for (name, unit_s, unit_value) in [
            ("axes scaled by burn length 1.5 s and peak 100 N", 1.5, 100.0),
            ("axes scaled 1 s and 1 N (raw)", 1.0, 1.0),
            ("axes scaled 0.94 s and 100 N", 0.94, 100.0),
        ] {
            let cut = bisector_cut(&t, &v, &level, &tail, unit_s, unit_value).expect(name);
            // The trace is cut into 20,000 chords of at most 10 µs.
            assert!((cut - number(&knee["results"][name]["t_end"])).abs() < 1e-5, "{name} {cut}");
        }
    }

    /// The same reference's trace with an exact knee at 1.0 s; burning starts at 10 % of 100 on the rise, 0.024 s.
    #[test]
    fn an_exact_knee_is_the_end_of_the_web() {
        let corners = [(0.0, 0.0), (0.02, 0.0), (0.06, 100.0), (1.0, 90.0), (1.2, 10.0), (1.5, 0.0)];
        let t: Vec<f64> = (0..=15_000).map(|i| f64::from(i) * 1e-4).collect();
        let v: Vec<f64> = t
            .iter()
            .map(|t| {
                let k = corners.iter().rposition(|c| c.0 <= *t).unwrap_or(0).min(corners.len() - 2);
                let (a, b) = (corners[k], corners[k + 1]);
                a.1 + (b.1 - a.1) * (t - a.0) / (b.0 - a.0)
            })
            .collect();
        let web = web_time(&t, &v).expect("web time");
        assert!((web.end_s - 1.0).abs() < 2e-4 && (web.start_s - 0.024).abs() < 2e-4, "{web:?}");
        assert_eq!(web_time(&t, &vec![0.0; t.len()]), None);
    }
}
