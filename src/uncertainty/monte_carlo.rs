//! Propagation of distributions by Monte Carlo (JCGM 101:2008 clause 7), the same on every machine and with every number of threads.

use super::distribution::Shape;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;

/// Seed of every run of the program: the same inputs give the same intervals.
pub const SEED: u64 = 20_080_101;
/// Trials of an ordinary reduction: the ends of a 95 % interval come out within about 2 % of its half-width.
pub const TRIALS: usize = 20_000;
/// Trials in one block, each with a random stream of its own, so that threads do not matter.
const BLOCK: usize = 1000;

/// Draws every input `trials` times and gives the model's outputs, one vector an output.
///
/// `model` gets the inputs' draws (in the units of their shapes) and fills the outputs.
pub fn propagate(
    trials: usize,
    inputs: &[Shape],
    outputs: usize,
    model: impl Fn(&[f64], &mut [f64]) + Sync,
) -> Vec<Vec<f64>> {
    let blocks: Vec<Vec<f64>> = (0..trials.div_ceil(BLOCK))
        .into_par_iter()
        .map(|block| {
            let mut rng = ChaCha8Rng::seed_from_u64(SEED);
            rng.set_stream(block as u64);
            let count = BLOCK.min(trials - block * BLOCK);
            let mut drawn = vec![0.0; inputs.len()];
            let mut results = vec![0.0; count * outputs];
            for result in results.chunks_mut(outputs.max(1)) {
                for (value, shape) in drawn.iter_mut().zip(inputs) {
                    *value = shape.draw(&mut rng);
                }
                model(&drawn, result);
            }
            results
        })
        .collect();
    (0..outputs)
        .map(|output| blocks.iter().flat_map(|b| b.iter().skip(output).step_by(outputs).copied()).collect())
        .collect()
}

/// What the trials of one output come to.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spread {
    pub mean: f64,
    pub standard_deviation: f64,
    /// Shortest interval that holds 95 % of the trials (JCGM 101:2008 5.3.4).
    pub shortest_95: [f64; 2],
    /// 2.5 % of the trials on either side.
    pub symmetric_95: [f64; 2],
}

/// Sums up the trials of one output; `None` for fewer than 100 or any that is not finite.
pub fn spread(mut trials: Vec<f64>) -> Option<Spread> {
    let n = trials.len();
    if n < 100 || trials.iter().any(|v| !v.is_finite()) {
        return None;
    }
    let mean = trials.iter().sum::<f64>() / n as f64;
    let variance = trials.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (n - 1) as f64;
    trials.sort_unstable_by(f64::total_cmp);
    // JCGM 101:2008 7.7.2: q the whole number nearest to 0.95 M, the interval from the r-th to the (r + q)-th.
    let q = ((0.95 * n as f64).round() as usize).min(n - 1);
    let shortest =
        (0..n - q).min_by(|a, b| (trials[a + q] - trials[*a]).total_cmp(&(trials[b + q] - trials[*b]))).unwrap_or(0);
    let r = (n - q) / 2;
    Some(Spread {
        mean,
        standard_deviation: variance.sqrt(),
        shortest_95: [trials[shortest], trials[shortest + q]],
        symmetric_95: [trials[r], trials[(r + q).min(n - 1)]],
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sum_of(shapes: &[Shape], trials: usize) -> Vec<f64> {
        propagate(trials, shapes, 1, |x, y| y[0] = x.iter().sum()).remove(0)
    }

    #[test]
    fn threads_and_blocks_do_not_matter() {
        let shapes = [Shape::Normal, Shape::Rectangular];
        let many = sum_of(&shapes, 5500);
        let one =
            rayon::ThreadPoolBuilder::new().num_threads(1).build().expect("a pool").install(|| sum_of(&shapes, 5500));
        assert_eq!(many, one);
        assert_eq!(many.len(), 5500);
        // Fewer trials are the first of more.
        assert_eq!(sum_of(&shapes, 2000), many[..2000]);
    }

    #[test]
    fn a_lopsided_output_has_its_shortest_interval_at_its_heap() {
        let s = spread(propagate(50_000, &[Shape::Normal], 1, |x, y| y[0] = x[0] * x[0]).remove(0)).expect("spread");
        // Chi-squared with one degree of freedom: the shortest 95 % interval runs from nil to 3.841.
        assert!(s.shortest_95[0] < 1e-3 && (s.shortest_95[1] - 3.841).abs() < 0.1, "{s:?}");
        assert!((s.symmetric_95[1] - 5.024).abs() < 0.2, "{s:?}");
    }

    #[test]
    fn nothing_of_too_few_or_of_what_is_no_number() {
        assert_eq!(spread(vec![1.0; 99]), None);
        assert_eq!(spread(vec![f64::NAN; 1000]), None);
    }
}
