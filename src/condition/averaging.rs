//! A converter that averages over its whole sample interval: its readings are means of cells, and the thrust between is
//! reconstructed so that every cell keeps its mean.
//!
//! Inside the burn by the piecewise parabolic method with its monotone limits (P. Colella and P. R. Woodward, J. Comput.
//! Phys. 54 (1984) 174); at a rise or fall of at most two cells by a straight ramp whose place follows from the impulse
//! missing under the extrapolated top (after A. Harten, J. Comput. Phys. 83 (1989) 148, subcell resolution).

/// Points a cell in the reconstructed curve.
pub const POINTS_PER_CELL: usize = 20;

/// A reconstructed rise or fall.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Edge {
    /// Foot and top of the ramp, in cells from the start of cell 0.
    pub foot: f64,
    pub top: f64,
    /// Half the range of foot positions that explain the cells equally well, in cells.
    pub foot_half_width: f64,
}

/// The curve between the cells' boundaries: `POINTS_PER_CELL` points a cell, at their centres.
#[derive(Debug, Clone, PartialEq)]
pub struct Reconstructed {
    /// Position in cells, from the start of cell 0.
    pub position: Vec<f64>,
    pub value: Vec<f64>,
    pub rise: Option<Edge>,
    pub fall: Option<Edge>,
}

fn parabolas(means: &[f64]) -> Vec<[f64; 2]> {
    let n = means.len();
    let at = |i: isize| means[i.clamp(0, n as isize - 1) as usize];
    let interface = |i: isize| {
        let (a, b) = (at(i), at(i + 1));
        let v = 7.0 / 12.0 * (a + b) - (at(i - 1) + at(i + 2)) / 12.0;
        v.clamp(a.min(b), a.max(b))
    };
    (0..n as isize)
        .map(|i| {
            let (mut left, mut right, mean) = (interface(i - 1), interface(i), at(i));
            if (right - mean) * (mean - left) <= 0.0 {
                (left, right) = (mean, mean);
            } else {
                let (d, six) = (right - left, 6.0 * (mean - (left + right) / 2.0));
                if d * six > d * d {
                    left = 3.0 * mean - 2.0 * right;
                } else if -d * d > d * six {
                    right = 3.0 * mean - 2.0 * left;
                }
            }
            [left, right]
        })
        .collect()
}

fn parabola(mean: f64, [left, right]: [f64; 2], x: f64) -> f64 {
    let six = 6.0 * (mean - (left + right) / 2.0);
    left + x * (right - left + six * (1.0 - x))
}

/// Mean over a cell of a ramp from 0 at `foot` to the line at `top`, then the line; all in cells from the cell's start.
fn ramp_mean(foot: f64, top: f64, line: impl Fn(f64) -> f64) -> f64 {
    const STEPS: usize = 64;
    (0..STEPS).map(|k| ramp_value(foot, top, (k as f64 + 0.5) / STEPS as f64, &line)).sum::<f64>() / STEPS as f64
}

fn ramp_value(foot: f64, top: f64, x: f64, line: &impl Fn(f64) -> f64) -> f64 {
    if x <= foot {
        0.0
    } else if x >= top {
        line(x)
    } else {
        line(top) * (x - foot) / (top - foot)
    }
}

/// Finds a rise that starts in `cell` and is over within two cells, from the means; `tolerance` is what noise may make.
fn rise(means: &[f64], cell: usize, tolerance: f64) -> Option<Edge> {
    let (a, b, c) = (*means.get(cell)?, *means.get(cell + 1)?, *means.get(cell + 2)?);
    let d = means.get(cell + 3).copied().unwrap_or(c);
    if c <= 0.0 || b < 0.5 * c {
        return None;
    }
    // Top line through the two cells after the rise, x in cells from the start of `cell`; a fall beyond them is not followed.
    let slope = if (d - c).abs() < 0.25 * c { d - c } else { 0.0 };
    let line = |x: f64| c + slope * (x - 2.5);
    let missing = line(0.5) + line(1.5) - a - b;
    let middle = missing / line(0.7).max(1e-9 * c);
    let tolerance = tolerance.max(0.004 * c);
    let mut accepted: Vec<f64> = Vec::new();
    for step in 0..=100 {
        let width = 2.0 * f64::from(step) / 100.0;
        let (foot, top) = (middle - width / 2.0, middle + width / 2.0);
        if foot < -0.02 || top > 2.02 {
            break;
        }
        let first = ramp_mean(foot, top, line);
        let second = ramp_mean(foot - 1.0, top - 1.0, |x| line(x + 1.0));
        if (first - a).abs() <= tolerance && (second - b).abs() <= 2.0 * tolerance {
            accepted.push(width);
        }
    }
    let (narrow, wide) = (*accepted.first()?, *accepted.last()?);
    let width = (narrow + wide) / 2.0;
    let start = cell as f64;
    Some(Edge {
        foot: start + (middle - width / 2.0).max(0.0),
        top: start + middle + width / 2.0,
        foot_half_width: (wide - narrow) / 4.0,
    })
}

/// Reconstructs the curve whose cell means are given; `noise` is the standard deviation of a mean.
pub fn reconstruct(means: &[f64], noise: f64) -> Reconstructed {
    let n = means.len();
    let sides = parabolas(means);
    let mut position = Vec::with_capacity(n * POINTS_PER_CELL);
    let mut value = Vec::with_capacity(n * POINTS_PER_CELL);
    for (i, (&mean, &side)) in means.iter().zip(&sides).enumerate() {
        for k in 0..POINTS_PER_CELL {
            let x = (k as f64 + 0.5) / POINTS_PER_CELL as f64;
            position.push(i as f64 + x);
            value.push(parabola(mean, side, x));
        }
    }
    let highest = means.iter().copied().fold(0.0, f64::max);
    let foot = (4.0 * noise).max(0.003 * highest);
    let reversed: Vec<f64> = means.iter().rev().copied().collect();
    let first_cell = |m: &[f64]| {
        let strong = m.iter().position(|v| *v > 0.3 * highest)?;
        Some(m[..strong].iter().rposition(|v| *v <= foot).map_or(0, |i| i + 1))
    };
    let rising = first_cell(means).and_then(|c| rise(means, c, 2.0 * noise));
    let falling = first_cell(&reversed).and_then(|c| rise(&reversed, c, 2.0 * noise)).map(|e| Edge {
        foot: n as f64 - e.foot,
        top: n as f64 - e.top,
        foot_half_width: e.foot_half_width,
    });
    let mut out = Reconstructed { position, value, rise: rising, fall: falling };
    out.draw_edge(means, rising, false);
    out.draw_edge(means, falling, true);
    out
}

impl Reconstructed {
    /// Puts the ramp in place of the parabolas in its two cells.
    fn draw_edge(&mut self, means: &[f64], edge: Option<Edge>, falling: bool) {
        let Some(edge) = edge else { return };
        let n = means.len() as f64;
        let flip = |x: f64| if falling { n - x } else { x };
        let mean_at = |cell: f64| means.get(if falling { n - 1.0 - cell } else { cell } as usize).copied();
        let (foot, top) = (flip(edge.foot), flip(edge.top));
        let cell = foot.floor();
        let (Some(c), d) = (mean_at(cell + 2.0), mean_at(cell + 3.0)) else { return };
        let d = d.unwrap_or(c);
        let slope = if (d - c).abs() < 0.25 * c { d - c } else { 0.0 };
        let line = |x: f64| c + slope * (x - cell - 2.5);
        for (p, v) in self.position.iter().zip(self.value.iter_mut()) {
            let x = flip(*p);
            if x >= cell && x < cell + 2.0 {
                *v = ramp_value(foot, top, x, &line);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Means over unit cells of a trapezoid-shaped pulse.
    fn pulse(n: usize, foot: f64, top: f64, fall: f64, end: f64) -> Vec<f64> {
        (0..n)
            .map(|i| {
                (0..1000)
                    .map(|k| {
                        let x = i as f64 + (f64::from(k) + 0.5) / 1000.0;
                        if x <= foot || x >= end {
                            0.0
                        } else if x < top {
                            100.0 * (x - foot) / (top - foot)
                        } else if x <= fall {
                            100.0
                        } else {
                            100.0 * (end - x) / (end - fall)
                        }
                    })
                    .sum::<f64>()
                    / 1000.0
            })
            .collect()
    }

    #[test]
    fn cells_keep_their_means() {
        let means: Vec<f64> = (0..30).map(|i| 50.0 + 30.0 * (f64::from(i) * 0.4).sin()).collect();
        let r = reconstruct(&means, 0.0);
        for (i, m) in means.iter().enumerate().skip(3).take(20) {
            let cell = &r.value[i * POINTS_PER_CELL..(i + 1) * POINTS_PER_CELL];
            let mean = cell.iter().sum::<f64>() / POINTS_PER_CELL as f64;
            // The midpoint rule over 20 points of a parabola is off by its curvature over 24·20².
            assert!((mean - m).abs() < 0.02, "cell {i}: {mean} against {m}");
        }
        let highest = means.iter().copied().fold(f64::MIN, f64::max);
        assert!(r.value.iter().all(|v| *v <= highest + 1e-9));
    }

    #[test]
    fn a_fast_rise_and_fall_are_placed_within_their_cells() {
        for phase in [0.05, 0.3, 0.55, 0.8, 0.95] {
            let means = pulse(40, 10.0 + phase, 10.2 + phase, 30.0 + phase, 30.2 + phase);
            let r = reconstruct(&means, 0.05);
            let (rise, fall) = (r.rise.expect("rise"), r.fall.expect("fall"));
            assert!((rise.foot - 10.0 - phase).abs() < 0.3, "{phase}: {rise:?}");
            assert!((fall.foot - 30.2 - phase).abs() < 0.3, "{phase}: {fall:?}");
            let area: f64 = r.value.iter().sum::<f64>() / POINTS_PER_CELL as f64;
            assert!((area - 2000.0).abs() < 12.0, "{phase}: {area}");
        }
    }

    #[test]
    fn a_slow_rise_is_left_to_the_parabolas() {
        let r = reconstruct(&pulse(40, 10.0, 16.0, 25.0, 35.0), 0.05);
        assert_eq!((r.rise, r.fall), (None, None));
    }
}
