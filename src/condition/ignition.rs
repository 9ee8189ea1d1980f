//! The ignition seen through the stand: models of the rise (`rise`) are driven through the stand (`forward`) and held against the
//! raw readings, so that nothing is differentiated and no noise amplified.
//!
//! # Method
//! For given start, time and shape of the rise, frequency and damping, the level's coefficients are linear and solved exactly with
//! what is expected of them (a penalised least-squares spline); the five are searched by damped Gauss-Newton on what is left
//! (variable projection, G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413). Models are weighted by their evidence
//! (Laplace's approximation); their spread counts as uncertainty.

use crate::condition::forward;
use crate::condition::rise::{Model, Place, RISES, Rise};
use nalgebra::{Cholesky, DMatrix, DVector, Dyn, SMatrix, SVector};

/// The stand as it is known before, each with its standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Known {
    pub frequency_hz: f64,
    pub frequency_u_hz: f64,
    pub damping_ratio: f64,
    pub damping_u: f64,
}

/// What the thrust did at ignition.
#[derive(Debug, Clone, PartialEq)]
pub struct Ignition {
    /// The course from before the rise to some while after, and its standard error.
    pub time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    pub standard_error_n: Vec<f64>,
    /// Highest thrust of that course.
    pub peak_s: f64,
    pub peak_n: f64,
    pub peak_u_n: f64,
    /// From here on the curve is better read from the readings themselves, s.
    pub hand_over_s: f64,
    /// The stand as the fit leaves it.
    pub stand: Known,
}

impl Ignition {
    /// Thrust and its standard error at a time within the course, N.
    pub fn at(&self, time_s: f64) -> (f64, f64) {
        let i = self.time_s.partition_point(|t| *t <= time_s).clamp(1, self.time_s.len().max(2) - 1);
        match (self.time_s.get(i - 1..=i), self.thrust_n.get(i - 1..=i), self.standard_error_n.get(i - 1..=i)) {
            (Some(t), Some(f), Some(u)) => {
                let part = ((time_s - t[0]) / (t[1] - t[0])).clamp(0.0, 1.0);
                (f[0] + part * (f[1] - f[0]), u[0] + part * (u[1] - u[0]))
            }
            _ => (0.0, 0.0),
        }
    }
}

/// Periods before the half-way point of the rise, and after it, that are fitted; fewer than `FEWEST` tell too little.
const BEFORE: f64 = 1.5;
const AFTER: [f64; 3] = [8.5, 5.0, 3.0];
const FEWEST: f64 = 2.5;
/// Readings a period: fewer do not show the swing; more are averaged.
const FEWEST_READINGS: f64 = 8.0;
const MOST_READINGS: f64 = 30.0;
/// Steps within a reading's interval, up to so many periods after the half-way point.
const STEPS: usize = 4;
const FINE_UNTIL: f64 = 1.0;
/// Curvature expected of the level, level² per period³: a steady one for every model, and less beside a transient. From simulated firings.
const BEND: f64 = 2.5e-4;
const BEND_BESIDE_TRANSIENT: f64 = 1.3e-4;
/// The course is looked at for its peak, and given, until so many periods after the rise, in such steps.
const COURSE: f64 = 1.25;
const COURSE_STEP: f64 = 1.0 / 200.0;
const HAND_OVER: f64 = 0.75;
/// What is left may exceed the noise so many times (in variance); beyond, a shorter stretch is tried, ...
const MUCH_LEFT: f64 = 1.5;
/// ... or no model is believed.
const MOST_LEFT: f64 = 2.0;
/// What is left may exceed a very low noise by more, as a share of the level.
const LITTLE_LEFT: f64 = 0.002;
/// Searches of each model, from as many beginnings.
const BEGINNINGS: usize = 2;
/// Models with less evidence than this share are left out.
const LEAST_WEIGHT: f64 = 0.003;

const PARAMETERS: usize = 5;
type Parameters = SVector<f64, PARAMETERS>;

fn place(p: &Parameters) -> Place {
    Place { start: p[0], log_time: p[1], shape: p[2] }
}

/// The readings in periods and levels, with the times at which the response is stepped.
struct Readings {
    data: Vec<f64>,
    noise: f64,
    nodes: Vec<f64>,
    /// Node of each reading.
    at: Vec<usize>,
    /// Inertia at each node over that at ignition.
    inertia: Vec<f64>,
    known: Known,
}

struct Solved {
    coefficients: DVector<f64>,
    normal: Cholesky<f64, Dyn>,
    log_det: f64,
    left: Vec<f64>,
    misfit: f64,
}

struct Fitted {
    model: Model,
    parameters: Parameters,
    covariance: SMatrix<f64, PARAMETERS, PARAMETERS>,
    evidence: f64,
    misfit: f64,
}

impl Readings {
    fn stand(&self, p: &Parameters, node: usize) -> (f64, f64) {
        // Spring and dashpot stay, the mass goes: 1/ω² in proportion to it, 2 ζ/ω steady.
        let faster = self.inertia[node].sqrt().recip();
        (p[3].exp() * faster, p[4] * faster)
    }

    fn solve(&self, model: &Model, p: &Parameters) -> Option<Solved> {
        let columns = model.columns();
        let mut force = vec![0.0; self.nodes.len() * columns];
        for (t, row) in self.nodes.iter().zip(force.chunks_mut(columns)) {
            model.row(place(p), *t, row);
        }
        let response = forward::responses(&self.nodes, &force, columns, |i| self.stand(p, i));
        let m = columns + 1;
        let expectations = model.expectations();
        let mut normal = DMatrix::<f64>::zeros(m, m);
        let mut rhs = DVector::<f64>::zeros(m);
        let weight = 1.0 / (self.noise * self.noise);
        let mut row = vec![1.0; m];
        for (at, y) in self.at.iter().zip(&self.data) {
            row[..columns].copy_from_slice(&response[at * columns..(at + 1) * columns]);
            for i in 0..m {
                rhs[i] += weight * row[i] * y;
                for j in 0..=i {
                    normal[(i, j)] += weight * row[i] * row[j];
                }
            }
        }
        for expected in &expectations {
            for (i, a) in expected {
                for (j, b) in expected {
                    if j <= i {
                        normal[(*i, *j)] += a * b;
                    }
                }
            }
        }
        for i in 0..m {
            // Levels of some ten are possible, no more: keeps a course that the readings do not show from running away.
            normal[(i, i)] += 1e-2;
            for j in 0..i {
                normal[(j, i)] = normal[(i, j)];
            }
        }
        let cholesky = normal.cholesky()?;
        let coefficients = cholesky.solve(&rhs);
        let log_det = 2.0 * cholesky.l_dirty().diagonal().iter().map(|d| d.ln()).sum::<f64>();
        let mut left = Vec::with_capacity(self.data.len() + expectations.len() + 3);
        for (at, y) in self.at.iter().zip(&self.data) {
            let r = &response[at * columns..(at + 1) * columns];
            let found = r.iter().zip(coefficients.iter()).map(|(a, b)| a * b).sum::<f64>() + coefficients[columns];
            left.push((y - found) / self.noise);
        }
        let misfit = left.iter().map(|r| r * r).sum::<f64>() / left.len() as f64;
        left.extend(expectations.iter().map(|e| e.iter().map(|(i, w)| w * coefficients[*i]).sum::<f64>()));
        let (mean, sd) = model.expected_shape();
        let known = &self.known;
        left.push((p[2] - mean) / sd);
        left.push(p[3] * known.frequency_hz / known.frequency_u_hz);
        left.push((p[4] - known.damping_ratio) / known.damping_u);
        Some(Solved { coefficients, normal: cholesky, log_det, left, misfit })
    }

    fn cost(&self, model: &Model, p: &Parameters) -> f64 {
        self.solve(model, p).map_or(f64::INFINITY, |s| s.left.iter().map(|r| r * r).sum())
    }

    fn within(&self, model: &Model, mut p: Parameters) -> Parameters {
        let shapes = match model.rise {
            Rise::Ramp => (-0.5, 1.5),
            Rise::Approach | Rise::ApproachThenLevel => (-0.5, 2.0),
            Rise::Soft => (-1.5, 1.5),
        };
        p[0] = p[0].clamp(-BEFORE + 0.1, 0.3);
        p[1] = p[1].clamp(0.02f64.ln(), 1.5f64.ln());
        p[2] = p[2].clamp(shapes.0, shapes.1);
        p[3] = p[3].clamp(-0.2, 0.2);
        p[4] = p[4].clamp(1e-4, 0.3);
        p
    }

    /// Where a search may begin: the best few of a coarse grid.
    fn beginnings(&self, model: &Model) -> Vec<Parameters> {
        let (shape, _) = model.expected_shape();
        let times: [f64; 4] = match model.rise {
            Rise::Ramp | Rise::Soft => [0.1, 0.2, 0.4, 0.65],
            Rise::Approach | Rise::ApproachThenLevel => [0.05, 0.1, 0.2, 0.4],
        };
        let starts = times.iter().flat_map(|time| [-0.55, -0.45, -0.35, -0.27].map(|start| (start, time.ln())));
        let mut all: Vec<(f64, Parameters)> = starts
            .map(|(start, time)| Parameters::from([start, time, shape, 0.0, self.known.damping_ratio]))
            .map(|p| (self.cost(model, &p), p))
            .collect();
        all.sort_unstable_by(|a, b| a.0.total_cmp(&b.0));
        all.into_iter().take(BEGINNINGS).map(|(_, p)| p).collect()
    }

    /// A model with and without a transient; each also from where the other ended.
    fn fit_rise(&self, rise: Rise, length: f64) -> Vec<Fitted> {
        let plain = Model::new(rise, false, BEND, length);
        let beside = Model::new(rise, true, BEND_BESIDE_TRANSIENT, length);
        let begin = self.beginnings(&plain);
        let best = |model: &Model, from: &[Parameters]| {
            let fits = from.iter().filter_map(|p| self.fit(model.clone(), *p));
            fits.max_by(|a, b| a.evidence.total_cmp(&b.evidence))
        };
        let first = best(&plain, &begin);
        let mut from = begin;
        from.extend(first.as_ref().map(|f| f.parameters));
        let second = best(&beside, &from);
        let again = second.as_ref().and_then(|f| self.fit(plain, f.parameters));
        let first = first.into_iter().chain(again).max_by(|a, b| a.evidence.total_cmp(&b.evidence));
        first.into_iter().chain(second).filter(|f| f.evidence.is_finite()).collect()
    }

    fn fit(&self, model: Model, mut p: Parameters) -> Option<Fitted> {
        const STEP: [f64; PARAMETERS] = [1e-3, 1e-2, 1e-2, 1e-4, 1e-4];
        let mut solved = self.solve(&model, &p)?;
        let sum = |left: &[f64]| left.iter().map(|r| r * r).sum::<f64>();
        let mut cost = sum(&solved.left);
        let mut hold = 1e-3;
        let mut curvature = SMatrix::<f64, PARAMETERS, PARAMETERS>::zeros();
        for _ in 0..30 {
            let mut jacobian: Vec<Vec<f64>> = Vec::with_capacity(PARAMETERS);
            for (k, step) in STEP.iter().enumerate() {
                let mut q = p;
                q[k] += step;
                let moved = self.solve(&model, &q)?;
                jacobian.push(moved.left.iter().zip(&solved.left).map(|(a, b)| (a - b) / step).collect());
            }
            let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
            curvature = SMatrix::from_fn(|i, j| dot(&jacobian[i], &jacobian[j]));
            let slope = Parameters::from_fn(|i, _| dot(&jacobian[i], &solved.left));
            let mut moved = false;
            for _ in 0..8 {
                let mut damped = curvature;
                for i in 0..PARAMETERS {
                    damped[(i, i)] *= 1.0 + hold;
                }
                let Some(step) = damped.cholesky().map(|c| c.solve(&slope)) else {
                    hold *= 10.0;
                    continue;
                };
                let next = self.within(&model, p - step);
                if let Some(tried) = self.solve(&model, &next)
                    && sum(&tried.left) < cost
                {
                    let gain = cost - sum(&tried.left);
                    (p, cost, solved) = (next, sum(&tried.left), tried);
                    hold = (hold / 5.0).max(1e-6);
                    moved = gain > 0.01;
                    break;
                }
                hold *= 4.0;
            }
            if !moved {
                break;
            }
        }
        let covariance = curvature.cholesky()?.inverse();
        let evidence = -0.5 * cost + model.log_prior() - 0.5 * solved.log_det + 0.5 * covariance.determinant().ln();
        Some(Fitted { model, parameters: p, covariance, evidence, misfit: solved.misfit })
    }
}

/// A fitted model's course at given times, its peak, and their standard errors; levels and periods.
struct Course {
    values: Vec<f64>,
    variances: Vec<f64>,
    peak: f64,
    peak_at: f64,
    peak_variance: f64,
}

fn course(readings: &Readings, fitted: &Fitted, times: &[f64]) -> Option<Course> {
    let model = &fitted.model;
    let mut row = vec![0.0; model.columns()];
    let mut value = |p: &Parameters, solved: &Solved, t: f64| -> f64 {
        model.row(place(p), t, &mut row);
        row.iter().zip(solved.coefficients.iter()).map(|(a, b)| a * b).sum()
    };
    // Counted from the start of the rise, so that the same instants of it are compared where its parameters move.
    let mut top = |p: &Parameters, solved: &Solved| -> (f64, f64) {
        let risen = model.risen(place(p));
        let steps = ((risen + COURSE) / COURSE_STEP) as usize;
        let instants = (0..steps).map(|k| k as f64 * COURSE_STEP).chain([risen]);
        instants
            .map(|u| (p[0] + u, value(p, solved, p[0] + u)))
            .max_by(|a, b| a.1.total_cmp(&b.1))
            .unwrap_or((p[0], 0.0))
    };
    let solved = readings.solve(model, &fitted.parameters)?;
    let (peak_at, peak) = top(&fitted.parameters, &solved);
    let mut peak_slope = Parameters::zeros();
    let mut moved = Vec::with_capacity(PARAMETERS);
    for k in 0..PARAMETERS {
        // As far as the parameter may well lie off, so that what is not linear counts as it acts.
        let step = fitted.covariance[(k, k)].sqrt().clamp(1e-5, 0.2);
        let mut p = fitted.parameters;
        p[k] += step;
        let other = readings.solve(model, &p)?;
        peak_slope[k] = (top(&p, &other).1 - peak) / step;
        moved.push((p, other, step));
    }
    let inverse = solved.normal.inverse();
    let variance_of = |p: &Parameters, t: f64| -> f64 {
        let mut row = vec![0.0; model.columns() + 1];
        model.row(place(p), t, &mut row[..model.columns()]);
        let row = DVector::from_vec(row);
        (row.transpose() * &inverse * &row)[0]
    };
    let mut values = Vec::with_capacity(times.len());
    let mut variances = Vec::with_capacity(times.len());
    for t in times {
        let here = value(&fitted.parameters, &solved, *t);
        let slope = Parameters::from_fn(|k, _| (value(&moved[k].0, &moved[k].1, *t) - here) / moved[k].2);
        values.push(here);
        variances.push((slope.transpose() * fitted.covariance * slope)[0] + variance_of(&fitted.parameters, *t));
    }
    let peak_variance =
        (peak_slope.transpose() * fitted.covariance * peak_slope)[0] + variance_of(&fitted.parameters, peak_at);
    Some(Course { values, variances, peak, peak_at, peak_variance })
}

/// Means over `block` neighbours, with the mean of their times.
fn blocks(time_s: &[f64], value: &[f64], block: usize) -> (Vec<f64>, Vec<f64>) {
    let mean = |c: &[f64]| c.iter().sum::<f64>() / c.len() as f64;
    (time_s.chunks_exact(block).map(mean).collect(), value.chunks_exact(block).map(mean).collect())
}

/// Fits the ignition. `half_s`: when the reading first came half-way up; `limit_s`: until when the thrust goes on smoothly after it;
/// `noise_n`: standard deviation of a reading; `inertia`: mass on the spring over that at ignition, at a time.
///
/// `None` where the readings are too few a period, the stretch is too short, or no model explains them within the noise.
pub fn fit(
    time_s: &[f64],
    thrust_n: &[f64],
    noise_n: f64,
    [half_s, limit_s]: [f64; 2],
    known: Known,
    inertia: impl Fn(f64) -> f64,
) -> Option<Ignition> {
    let mut best: Option<(f64, Ignition)> = None;
    for after in AFTER {
        let until_s = limit_s.min(half_s + after / known.frequency_hz);
        if let Some((left, found)) = fit_until(time_s, thrust_n, noise_n, [half_s, until_s], known, &inertia)
            && best.as_ref().is_none_or(|(least, _)| left < *least)
        {
            best = Some((left, found));
        }
        if best.as_ref().is_some_and(|(left, _)| *left < MUCH_LEFT) {
            break;
        }
    }
    best.map(|(_, found)| found)
}

/// The same over one stretch; with the share of the noise's variance that is left.
fn fit_until(
    time_s: &[f64],
    thrust_n: &[f64],
    noise_n: f64,
    [half_s, until_s]: [f64; 2],
    known: Known,
    inertia: &impl Fn(f64) -> f64,
) -> Option<(f64, Ignition)> {
    let period_s = 1.0 / known.frequency_hz;
    if noise_n <= 0.0 || until_s - half_s < FEWEST * period_s {
        return None;
    }
    let range = time_s.partition_point(|t| *t < half_s - BEFORE * period_s)..time_s.partition_point(|t| *t <= until_s);
    let (times, values) = (time_s.get(range.clone())?, thrust_n.get(range)?);
    let (first, last) = (*times.first()?, *times.last()?);
    let readings_a_period = (times.len() - 1) as f64 / (last - first) * period_s;
    if readings_a_period < FEWEST_READINGS || first > half_s - 0.8 * period_s {
        return None;
    }
    let block = ((readings_a_period / MOST_READINGS) as usize).max(1);
    let (times, values) = blocks(times, values, block);
    let settled: Vec<f64> =
        times.iter().zip(&values).filter(|(t, _)| **t > half_s + period_s).map(|(_, v)| *v).collect();
    let level = settled.iter().sum::<f64>() / settled.len().max(1) as f64;
    if level.is_nan() || level <= 10.0 * noise_n {
        return None;
    }
    let mut readings = Readings {
        data: values.iter().map(|v| v / level).collect(),
        noise: noise_n / (block as f64).sqrt() / level,
        nodes: Vec::new(),
        at: Vec::new(),
        inertia: Vec::new(),
        known,
    };
    for (i, t) in times.iter().enumerate() {
        let now = (t - half_s) / period_s;
        if let Some(&before) = readings.nodes.last() {
            let steps = if now < FINE_UNTIL { STEPS } else { 1 };
            readings.nodes.extend((1..steps).map(|k| before + (now - before) * k as f64 / steps as f64));
        }
        readings.at.push(readings.nodes.len());
        readings.nodes.push(now);
        debug_assert_eq!(readings.at.len(), i + 1);
    }
    readings.inertia = readings.nodes.iter().map(|s| inertia(half_s + s * period_s).max(0.05)).collect();
    let length = (until_s - half_s) / period_s + 1.0;
    let mut fits: Vec<Fitted> = RISES.iter().flat_map(|rise| readings.fit_rise(*rise, length)).collect();
    let best = fits.iter().max_by(|a, b| a.evidence.total_cmp(&b.evidence))?;
    // A model that must bend the stand to fit is none.
    let bent = (best.parameters[3] * known.frequency_hz / known.frequency_u_hz)
        .hypot((best.parameters[4] - known.damping_ratio) / known.damping_u);
    if best.misfit > MOST_LEFT && (best.misfit.sqrt() * readings.noise > LITTLE_LEFT || bent > 1.0) {
        return None;
    }
    // Where even the best leaves more than the noise (a hum, glitches mended), evidence and errors count accordingly less.
    let best_misfit = best.misfit;
    let excess = best_misfit.max(1.0);
    let highest = best.evidence;
    let end = best.parameters[0] + best.model.risen(place(&best.parameters)) + COURSE;
    let hand_over = end - COURSE + HAND_OVER;
    let stand = |f: &Fitted| (f.parameters[3], f.parameters[4], f.covariance[(3, 3)], f.covariance[(4, 4)]);
    let (log_frequency, damping, log_variance, damping_variance) = stand(best);
    let begin = best.parameters[0] - 0.4;
    let weight = |f: &Fitted| ((f.evidence - highest) / excess).exp();
    fits.retain(|f| (f.evidence - highest) / excess > LEAST_WEIGHT.ln());
    let steps = ((end - begin) / COURSE_STEP) as usize;
    let grid: Vec<f64> = (0..=steps).map(|k| begin + k as f64 * COURSE_STEP).collect();
    let courses: Vec<(f64, Course)> =
        fits.iter().filter_map(|f| course(&readings, f, &grid).map(|c| (weight(f), c))).collect();
    let total: f64 = courses.iter().map(|(w, _)| w).sum();
    if total.is_nan() || total <= 0.0 {
        return None;
    }
    let mean = |of: &dyn Fn(&Course) -> f64| courses.iter().map(|(w, c)| w * of(c)).sum::<f64>() / total;
    let error = |of: &dyn Fn(&Course) -> (f64, f64), mean: f64| {
        let variance = courses
            .iter()
            .map(|(w, c)| (of(c), w))
            .map(|((v, var), w)| w * (excess * var + (v - mean).powi(2)))
            .sum::<f64>();
        (variance / total).sqrt()
    };
    let peak = mean(&|c| c.peak);
    let thrust: Vec<f64> = (0..grid.len()).map(|i| mean(&|c| c.values[i])).collect();
    let standard_error_n =
        thrust.iter().enumerate().map(|(i, m)| level * error(&|c| (c.values[i], c.variances[i]), *m));
    let frequency_hz = known.frequency_hz * log_frequency.exp();
    let ignition = Ignition {
        standard_error_n: standard_error_n.collect(),
        thrust_n: thrust.iter().map(|v| v * level).collect(),
        time_s: grid.iter().map(|s| half_s + s * period_s).collect(),
        peak_s: half_s + period_s * mean(&|c| c.peak_at),
        peak_n: level * peak,
        peak_u_n: level * error(&|c| (c.peak, c.peak_variance), peak),
        hand_over_s: half_s + period_s * hand_over,
        stand: Known {
            frequency_hz,
            frequency_u_hz: frequency_hz * (excess * log_variance).sqrt(),
            damping_ratio: damping,
            damping_u: (excess * damping_variance).sqrt(),
        },
    };
    Some((best_misfit, ignition))
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    const FREQUENCY: f64 = 34.0;
    const DAMPING: f64 = 0.02;

    /// Readings of a thrust that starts at 0.1 s, at 1 kHz, noise 0.2.
    fn readings(thrust: impl Fn(f64) -> f64, seed: u64) -> (Vec<f64>, Vec<f64>) {
        let fine: Vec<f64> = (0..10_000).map(|i| i as f64 * 5e-5).collect();
        let force: Vec<f64> = fine.iter().map(|t| thrust(t - 0.1)).collect();
        let x = forward::responses(&fine, &force, 1, |_| (FREQUENCY, DAMPING));
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        let mut noise = || -> f64 { StandardNormal.sample(&mut rng) };
        (fine.iter().step_by(20).copied().collect(), x.iter().step_by(20).map(|v| v + 0.2 * noise()).collect())
    }

    fn fitted(thrust: impl Fn(f64) -> f64, seed: u64) -> Ignition {
        let (t, y) = readings(thrust, seed);
        let top = y.iter().copied().fold(0.0, f64::max);
        let half = t[y.iter().position(|v| *v > 0.5 * top).expect("a rise")];
        let known = Known { frequency_hz: 34.2, frequency_u_hz: 0.34, damping_ratio: 0.03, damping_u: 0.01 };
        fit(&t, &y, 0.2, [half, 0.45], known, |_| 1.0).expect("a fit")
    }

    /// None of these rises is among the models as it stands but the first two.
    #[test]
    fn a_peak_right_after_a_fast_rise() {
        let spike = |u: f64| 70.0 + 30.0 * (-u.max(0.0) / 0.05).exp();
        type Case = (&'static str, Box<dyn Fn(f64) -> f64>, f64, f64);
        let normal = |x: f64| 1.0 / (1.0 + (-1.7 * x).exp());
        let cases: Vec<Case> = vec![
            ("ramp and spike", Box::new(move |t| spike(t - 0.012) * (t / 0.012).clamp(0.0, 1.0)), 100.0, 0.005),
            (
                "falling from an approach",
                Box::new(|t: f64| (100.0 - 60.0 * t) * -(-t.max(0.0) / 0.004).exp_m1()),
                98.06,
                0.003,
            ),
            (
                "two approaches in turn, then falling",
                Box::new(|t: f64| {
                    let x = t.max(0.0) / 0.003;
                    (100.0 - 60.0 * t) * (1.0 - (1.0 + x) * (-x).exp())
                }),
                97.75,
                0.005,
            ),
            (
                "an S without ends, then falling",
                Box::new(move |t| (100.0 - 60.0 * t) * normal((t - 0.012) / 0.002)),
                98.6,
                0.005,
            ),
        ];
        for (name, thrust, about, limit) in cases {
            let truth = (0..4000).map(|i| thrust(i as f64 * 5e-5)).fold(0.0, f64::max);
            assert!((truth / about - 1.0).abs() < 0.01, "{name}: {truth}");
            for seed in 0..4 {
                let found = fitted(&thrust, seed);
                let error = found.peak_n / truth - 1.0;
                assert!(error.abs() < limit, "{name} {seed}: {error} u {}", found.peak_u_n / truth);
                assert!(
                    (found.peak_n - truth).abs() < 3.5 * found.peak_u_n,
                    "{name} {seed}: {error} u {}",
                    found.peak_u_n
                );
                assert!((found.stand.frequency_hz / FREQUENCY - 1.0).abs() < 0.003, "{name}: {:?}", found.stand);
                assert!((found.stand.damping_ratio / DAMPING - 1.0).abs() < 0.15, "{name}: {:?}", found.stand);
            }
        }
    }

    #[test]
    fn what_no_model_explains_is_refused() {
        // A second rise in the middle.
        let (t, y) = readings(
            |t| {
                if t < 0.0 {
                    0.0
                } else if t < 0.08 {
                    50.0
                } else {
                    100.0
                }
            },
            1,
        );
        let known = Known { frequency_hz: 34.0, frequency_u_hz: 0.3, damping_ratio: 0.02, damping_u: 0.005 };
        assert_eq!(fit(&t, &y, 0.2, [0.106, 0.45], known, |_| 1.0), None);
        assert_eq!(fit(&[], &[], 0.2, [0.1, 0.4], known, |_| 1.0), None);
        assert_eq!(fit(&t[..3], &y[..3], 0.2, [0.1, 0.4], known, |_| 1.0), None);
    }
}
