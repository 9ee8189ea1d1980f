//! A spring-borne mass driven by known courses of thrust: what the cell reads.
//!
//! # Formula
//! x + 2 (ζ/ω) x′ + x″/ω² = T, exact over a step for a T that runs straight through it (second-order system with a particular
//! solution T − 2 (ζ/ω) T′; textbook).

use std::f64::consts::PI;

/// What one step of a given length does, for one frequency and damping.
#[derive(Debug, Clone, Copy)]
struct Step {
    length: f64,
    omega: f64,
    damped: f64,
    damping: f64,
    decay: f64,
    sin: f64,
    cos: f64,
}

impl Step {
    fn new(length: f64, frequency: f64, damping: f64) -> Self {
        let omega = 2.0 * PI * frequency;
        let damped = omega * (1.0 - damping * damping).sqrt();
        let (sin, cos) = (damped * length).sin_cos();
        Step { length, omega, damped, damping, decay: (-damping * omega * length).exp(), sin, cos }
    }

    fn take(&self, y: f64, v: f64, from: f64, to: f64) -> (f64, f64) {
        let slope = (to - from) / self.length;
        let lag = 2.0 * self.damping * slope / self.omega;
        let a = y - from + lag;
        let b = (v - slope + self.damping * self.omega * a) / self.damped;
        let swing = a * self.cos + b * self.sin;
        let rate = self.damped * (b * self.cos - a * self.sin) - self.damping * self.omega * swing;
        (to - lag + self.decay * swing, slope + self.decay * rate)
    }
}

/// Responses, from rest, to several courses at once. `force` holds a row of `columns` values for each of `times` (increasing);
/// `frequency` and `damping` tell those of the step that ends at an index. Gives rows of the same shape.
pub fn responses(times: &[f64], force: &[f64], columns: usize, stand: impl Fn(usize) -> (f64, f64)) -> Vec<f64> {
    let mut out = vec![0.0; force.len()];
    let mut rate = vec![0.0; columns];
    let mut step: Option<(f64, (f64, f64), Step)> = None;
    for i in 1..times.len() {
        let (length, now) = (times[i] - times[i - 1], stand(i));
        let s = match step {
            Some((l, at, s)) if (l - length).abs() < 1e-9 * length && at == now => s,
            _ => Step::new(length, now.0, now.1),
        };
        step = Some((length, now, s));
        let (before, after) = out.split_at_mut(i * columns);
        let before = &before[(i - 1) * columns..];
        for c in 0..columns {
            let (y, v) = s.take(before[c], rate[c], force[(i - 1) * columns + c], force[i * columns + c]);
            (after[c], rate[c]) = (y, v);
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    /// tests/reference/sdof_trapezoid_fn38_zeta003_1kHz.csv: computed in closed form, checked with scipy lsim (3e-12).
    #[test]
    fn the_reference_response() {
        let text = include_str!("../../tests/reference/sdof_trapezoid_fn38_zeta003_1kHz.csv");
        let rows: Vec<Vec<f64>> = text
            .lines()
            .map(|l| l.split(',').filter_map(|x| x.parse().ok()).collect())
            .filter(|r: &Vec<f64>| r.len() >= 3)
            .collect();
        let times: Vec<f64> = rows.iter().map(|r| r[0]).collect();
        let force: Vec<f64> = rows.iter().map(|r| r[1]).collect();
        let found = responses(&times, &force, 1, |_| (38.0, 0.03));
        let top = force.iter().copied().fold(0.0, f64::max);
        let worst = found.iter().zip(&rows).map(|(f, r)| (f - r[2]).abs()).fold(0.0, f64::max);
        // The corners of the trapezoid lie on samples, so that both are exact but for the printed digits.
        assert!(rows.len() > 500 && worst < 1e-6 * top, "{worst} of {top}");
    }
}
