//! Propagation of distributions by Monte Carlo (JCGM 101:2008 clause 7).
//!
//! A model is a function of independent standardised sources: where all are nil it gives the estimates, and each moves by one
//! when its input moves by one standard uncertainty. Correlated inputs are directions of their covariance
//! ([`super::propagation::directions`]), so that the same model serves the law of propagation.

use super::distribution::{self, Shape};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;

/// Trials unless asked otherwise: the ends of a 95 % interval then scatter by about 0.01 standard uncertainties.
pub const TRIALS: usize = 50_000;
/// Start of all random numbers; fixed, so that a log gives the same figures each time.
pub const SEED: u64 = 20_080_101;
/// Content of the intervals.
pub const CONTENT: f64 = 0.95;
/// Trials of one stream of random numbers. Blocks are handed to threads whole, so the draws do not depend on how many there are.
const BLOCK: usize = 1_000;

/// One independent source of error.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Source {
    pub shape: Shape,
    /// Sources of one number were judged by one and the same scatter: together they follow a multivariate Student's t.
    pub scatter: Option<usize>,
}

impl From<Shape> for Source {
    fn from(shape: Shape) -> Self {
        Source { shape, scatter: None }
    }
}

/// What the trials say of one output.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spread {
    pub mean: f64,
    pub standard_deviation: f64,
    /// Shortest interval with 95 % of the trials (5.3.4, 7.7.4).
    pub shortest_95: [f64; 2],
    /// Interval with 2.5 % of the trials on either side (5.3.3, 7.7.2).
    pub symmetric_95: [f64; 2],
    pub trials: usize,
}

/// Draws every source `trials` times and evaluates the model, which fills its outputs from the sources' values. Gives the
/// values of each output in the order of the trials.
pub fn propagate<M>(trials: usize, sources: &[Source], outputs: usize, seed: u64, model: M) -> Vec<Vec<f64>>
where
    M: Fn(&[f64], &mut [f64]) + Sync,
{
    let scatters: Vec<(usize, f64)> = sources.iter().fold(Vec::new(), |mut known, source| {
        if let (Some(number), Shape::StudentT(degrees_of_freedom)) = (source.scatter, source.shape)
            && known.iter().all(|(n, _)| *n != number)
        {
            known.push((number, degrees_of_freedom));
        }
        known
    });
    let places: Vec<Option<usize>> = sources
        .iter()
        .map(|source| source.scatter.and_then(|number| scatters.iter().position(|(n, _)| *n == number)))
        .collect();
    let blocks: Vec<Vec<f64>> = (0..trials.div_ceil(BLOCK))
        .into_par_iter()
        .map(|block| {
            let mut random = ChaCha8Rng::seed_from_u64(seed);
            random.set_stream(block as u64);
            let count = BLOCK.min(trials - block * BLOCK);
            let mut values = vec![0.0; count * outputs];
            let mut shared = vec![1.0; scatters.len()];
            let mut drawn = vec![0.0; sources.len()];
            for out in values.chunks_exact_mut(outputs.max(1)) {
                for (factor, (_, dof)) in shared.iter_mut().zip(&scatters) {
                    *factor = distribution::scatter(*dof, &mut random);
                }
                for ((value, source), place) in drawn.iter_mut().zip(sources).zip(&places) {
                    *value = match place {
                        Some(place) => distribution::normal(&mut random) * shared[*place],
                        None => source.shape.draw(&mut random),
                    };
                }
                model(&drawn, out);
            }
            values
        })
        .collect();
    (0..outputs)
        .into_par_iter()
        .map(|output| {
            blocks.iter().flat_map(|block| block.iter().skip(output).step_by(outputs).copied()).collect::<Vec<f64>>()
        })
        .collect()
}

/// Sorts the values of an output and sums them up; `None` where a trial gave no finite number, or there are fewer than 100.
pub fn spread(values: &mut [f64]) -> Option<Spread> {
    if values.len() < 100 || !values.iter().all(|v| v.is_finite()) {
        return None;
    }
    values.sort_unstable_by(f64::total_cmp);
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    let variance = values.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>() / (count - 1.0);
    let symmetric_95 = interval_from(values, symmetric_start(values.len()));
    Some(Spread {
        mean,
        standard_deviation: variance.sqrt(),
        shortest_95: shortest(values),
        symmetric_95,
        trials: values.len(),
    })
}

/// Trials inside an interval (7.7.1: the integer part of pM + 1/2).
fn inside(trials: usize) -> usize {
    ((CONTENT * trials as f64 + 0.5) as usize).min(trials - 1)
}

/// First trial of the symmetric interval (7.7.2: the integer part of (M − q)/2 + 1/2, counted from one).
fn symmetric_start(trials: usize) -> usize {
    (trials - inside(trials)).div_ceil(2).saturating_sub(1)
}

fn interval_from(sorted: &[f64], start: usize) -> [f64; 2] {
    [sorted[start], sorted[start + inside(sorted.len())]]
}

/// The shortest interval (7.7.4). Around a flat least the chance of the trials alone decides which one that is, and its place
/// would scatter far more than its ends' quantiles do; so among those longer by no more than the chance of the
/// trials makes them, one part in √M, the most nearly symmetric in probability is taken.
fn shortest(sorted: &[f64]) -> [f64; 2] {
    let inside = inside(sorted.len());
    let length = |start: usize| sorted[start + inside] - sorted[start];
    let least = (0..sorted.len() - inside).map(length).fold(f64::INFINITY, f64::min);
    let limit = least * (1.0 + 1.0 / (sorted.len() as f64).sqrt());
    let middle = symmetric_start(sorted.len());
    let start = (0..sorted.len() - inside)
        .filter(|start| length(*start) <= limit)
        .min_by_key(|start| start.abs_diff(middle))
        .unwrap_or(middle);
    interval_from(sorted, start)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one(shape: Shape, trials: usize, seed: u64, of: impl Fn(f64) -> f64 + Sync) -> Spread {
        let mut values = propagate(trials, &[shape.into()], 1, seed, |z, out| out[0] = of(z[0]));
        spread(&mut values[0]).expect("a spread")
    }

    /// Standard error of the ends of the symmetric 95 % interval of a normal output, in standard deviations: √(p(1 − p)/M)/density.
    fn end_error(trials: usize) -> f64 {
        (0.025 * 0.975 / trials as f64).sqrt() / 0.0584
    }

    #[test]
    fn a_normal_output_keeps_mean_deviation_and_interval() {
        let s = one(Shape::Normal, TRIALS, SEED, |z| 10.0 + 2.0 * z);
        let tolerance = 4.0 * 2.0 * end_error(TRIALS);
        assert!((s.mean - 10.0).abs() < 4.0 * 2.0 / (TRIALS as f64).sqrt());
        assert!((s.standard_deviation - 2.0).abs() < 4.0 * 2.0 / (2.0 * TRIALS as f64).sqrt());
        for interval in [s.shortest_95, s.symmetric_95] {
            assert!((interval[0] - (10.0 - 3.92)).abs() < tolerance, "{interval:?}");
            assert!((interval[1] - (10.0 + 3.92)).abs() < tolerance, "{interval:?}");
        }
    }

    /// What the choice among equally short intervals is for: the place of the interval scatters as its quantiles do.
    #[test]
    fn the_place_of_the_interval_is_steady() {
        let middles: Vec<f64> = (0..40)
            .map(|seed| one(Shape::Normal, 20_000, seed, |z| z))
            .map(|s| 0.5 * (s.shortest_95[0] + s.shortest_95[1]))
            .collect();
        let scatter = (middles.iter().map(|m| m * m).sum::<f64>() / 40.0).sqrt();
        assert!(scatter < 1.5 * end_error(20_000) / 2f64.sqrt(), "{scatter}");
    }

    /// Exponential: density highest at nil, so the shortest 95 % runs from nil to -ln 0.05 = 2.996; the symmetric one from 0.0253
    /// to 3.689.
    #[test]
    fn the_shortest_interval_of_a_lopsided_output_leans() {
        let s = one(Shape::Rectangular, TRIALS, SEED, |z| -(0.5 - z / (2.0 * 3f64.sqrt())).ln());
        let (symmetric, shortest) = (s.symmetric_95, s.shortest_95);
        // Standard error of an end: √(p(1 − p)/M)/density at 0.95, with density 0.05; at 0.975 with 0.025. The end of the shortest
        // one may be off by the allowance in length besides.
        let n = TRIALS as f64;
        assert!((symmetric[0] - 0.0253).abs() < 4.0 * (0.025 * 0.975 / n).sqrt() + 1e-4, "{symmetric:?}");
        assert!((symmetric[1] - 3.689).abs() < 4.0 * (0.025 * 0.975 / n).sqrt() / 0.025, "{symmetric:?}");
        assert!(shortest[0] < 0.005, "{shortest:?}");
        assert!((shortest[1] - 2.996).abs() < 4.0 * (0.05 * 0.95 / n).sqrt() / 0.05 + 3.0 / n.sqrt(), "{shortest:?}");
    }

    #[test]
    fn the_draws_do_not_depend_on_the_threads() {
        let draw = |threads: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("a pool");
            let sources = [Shape::Normal.into(), Shape::Rectangular.into()];
            pool.install(|| propagate(5_500, &sources, 2, SEED, |z, out| out.copy_from_slice(z)))
        };
        let (one, many) = (draw(1), draw(5));
        assert_eq!(one, many);
        assert_eq!((one.len(), one[0].len()), (2, 5_500));
        assert!(one[0][0] != one[0][1_000], "each block has a stream of its own");
    }

    /// Two coefficients judged by one scatter: their squares go together, (ν − 2)/(ν − 4) times as much as if drawn apart.
    #[test]
    fn one_scatter_makes_large_errors_meet() {
        let shape = Shape::StudentT(12.0);
        let mean = |scatter: Option<usize>| {
            let sources = [Source { shape, scatter }; 2];
            let values = propagate(200_000, &sources, 1, SEED, |z, out| out[0] = (z[0] * z[1]).powi(2));
            values[0].iter().sum::<f64>() / 200_000.0
        };
        // E[(ν/χ²)²] = ν²/((ν − 2)(ν − 4)) = 1.8 together, (ν/(ν − 2))² = 1.44 apart.
        assert!((mean(Some(3)) - 1.8).abs() < 0.1, "{}", mean(Some(3)));
        assert!((mean(None) - 1.44).abs() < 0.08, "{}", mean(None));
    }

    #[test]
    fn no_spread_without_numbers() {
        assert_eq!(spread(&mut [f64::NAN; 200]), None);
        assert_eq!(spread(&mut [1.0; 50]), None);
        assert!(spread(&mut [1.0; 200]).is_some_and(|s| s.standard_deviation == 0.0));
        assert!(propagate(100, &[], 0, SEED, |_, _| ()).is_empty());
    }
}
