//! Where along the burn two pours differ, with one chance in twenty of a false alarm anywhere.

use serde::{Deserialize, Serialize};

/// Chance of a false alarm along the whole burn. Few motors can be split in few ways only: then the nearest chance that can be had is taken,
/// up to the second number, or the test says nothing.
pub const LEVEL: f64 = 0.05;
const MOST_LEVEL: f64 = 0.06;
/// All splits are tried up to so many, else so many drawn at random.
const MOST_SPLITS: usize = 2_000;
const SEED: u64 = 20_261_201;
/// Least spread that a difference is held against, as a share of the highest mean: where all motors are alike to the digit nothing is to be
/// made of it.
const LEAST_SPREAD: f64 = 0.002;

/// Outcome of the curve-wise comparison of two groups.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CurveTest {
    /// Largest difference along the burn in standard errors.
    pub statistic: f64,
    /// What it exceeds by chance once in twenty; null where so few splits exist that no difference could be told.
    pub critical: Option<f64>,
    pub p_value: f64,
    /// Chance of a false alarm anywhere along the burn.
    pub level: Option<f64>,
    pub splits: usize,
    /// Stretches of the common time in which the curves differ: start, end, s, and mean difference, N.
    pub differ: Vec<[f64; 3]>,
}

/// What no split changes: sums and sums of squares at each point.
struct Whole<'a> {
    curves: &'a [&'a [f64]],
    sum: Vec<f64>,
    squares: Vec<f64>,
    floor: f64,
}

impl<'a> Whole<'a> {
    fn new(curves: &'a [&'a [f64]], floor: f64) -> Self {
        let points = curves.first().map_or(0, |c| c.len());
        let total = |f: fn(f64) -> f64| (0..points).map(|i| curves.iter().map(|c| f(c[i])).sum()).collect();
        Whole { curves, sum: total(|v| v), squares: total(|v| v * v), floor }
    }

    /// Standardised difference of two groups along the curve; `first` marks members of the first.
    fn course(&self, first: &[bool]) -> Vec<f64> {
        let n1 = first.iter().filter(|f| **f).count() as f64;
        let n2 = first.len() as f64 - n1;
        let mut own = vec![0.0; self.sum.len()];
        for (curve, _) in self.curves.iter().zip(first).filter(|(_, first)| **first) {
            own.iter_mut().zip(*curve).for_each(|(o, v)| *o += v);
        }
        own.iter()
            .zip(self.sum.iter().zip(&self.squares))
            .map(|(s1, (sum, squares))| {
                let s2 = sum - s1;
                let within = (squares - s1 * s1 / n1 - s2 * s2 / n2).max(0.0) / (n1 + n2 - 2.0);
                (s1 / n1 - s2 / n2) / ((within + self.floor * self.floor) * (1.0 / n1 + 1.0 / n2)).sqrt()
            })
            .collect()
    }
}

fn largest(values: &[f64]) -> f64 {
    values.iter().fold(0.0, |l, v| l.max(v.abs()))
}

/// Ways to take `k` of `n`, not beyond the limit.
fn ways(n: usize, k: usize) -> usize {
    let mut w = 1usize;
    for i in 0..k.min(n - k) {
        w = w.saturating_mul(n - i) / (i + 1);
        if w > MOST_SPLITS {
            return MOST_SPLITS + 1;
        }
    }
    w
}

/// Compares two groups of curves on a common time by a permutation test of the largest standardised difference (P. H. Westfall and S. S.
/// Young, Resampling-Based Multiple Testing, 1993; from memory). `None` for fewer than three curves in all.
pub fn compare(time_s: &[f64], a: &[Vec<f64>], b: &[Vec<f64>]) -> Option<CurveTest> {
    let (n, k) = (a.len() + b.len(), a.len());
    if a.is_empty() || b.is_empty() || n < 3 {
        return None;
    }
    let curves: Vec<&[f64]> = a.iter().chain(b).map(Vec::as_slice).collect();
    let highest = curves.iter().flat_map(|c| c.iter()).fold(0.0_f64, |h, v| h.max(v.abs()));
    let floor = LEAST_SPREAD * highest;
    let own: Vec<bool> = (0..n).map(|i| i < k).collect();
    let whole = Whole::new(&curves, floor);
    let seen = whole.course(&own);
    let statistic = largest(&seen);
    let all = ways(n, k);
    let mut found: Vec<f64> = Vec::new();
    if all <= MOST_SPLITS {
        each_split(n, k, &mut |first| found.push(largest(&whole.course(first))));
    } else {
        use rand::SeedableRng;
        use rand::seq::SliceRandom;
        let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(SEED);
        let mut first = own.clone();
        found.push(statistic);
        for _ in 1..MOST_SPLITS {
            first.shuffle(&mut random);
            found.push(largest(&whole.course(&first)));
        }
    }
    let splits = found.len();
    let alike = found.iter().filter(|v| **v >= statistic * (1.0 - 1e-9)).count();
    found.sort_unstable_by(|x, y| y.total_cmp(x));
    // A split and its mirror image give the same where the groups are of one size.
    let step = found.iter().filter(|v| **v >= found[0] * (1.0 - 1e-9)).count();
    let count = |steps: f64| (steps * step as f64) as usize;
    let nearest = (LEVEL * splits as f64 / step as f64).round();
    let allowed = [nearest, nearest - 1.0]
        .map(|steps| count(steps.max(0.0)))
        .into_iter()
        .find(|n| *n > 0 && *n as f64 <= MOST_LEVEL * splits as f64);
    let critical = allowed.map(|n| found[n.min(splits - 1)]);
    let level = allowed.map(|n| n as f64 / splits as f64);
    let differ = critical.map_or_else(Vec::new, |limit| stretches(time_s, &seen, limit, &curves, k));
    Some(CurveTest { statistic, critical, p_value: alike as f64 / splits as f64, level, splits, differ })
}

/// Calls `use_it` with every way to take `k` of `n`.
fn each_split(n: usize, k: usize, use_it: &mut dyn FnMut(&[bool])) {
    let mut chosen: Vec<usize> = (0..k).collect();
    loop {
        let mut first = vec![false; n];
        chosen.iter().for_each(|i| first[*i] = true);
        use_it(&first);
        let Some(i) = (0..k).rev().find(|i| chosen[*i] < n - k + i) else { return };
        chosen[i] += 1;
        for j in i + 1..k {
            chosen[j] = chosen[j - 1] + 1;
        }
    }
}

fn stretches(time_s: &[f64], seen: &[f64], limit: f64, curves: &[&[f64]], k: usize) -> Vec<[f64; 3]> {
    let difference = |i: usize| {
        let mean = |c: &[&[f64]]| c.iter().map(|c| c[i]).sum::<f64>() / c.len() as f64;
        mean(&curves[..k]) - mean(&curves[k..])
    };
    let mut found = Vec::new();
    let mut from = None;
    for i in 0..=seen.len() {
        let beyond = i < seen.len() && seen[i].abs() > limit * (1.0 + 1e-9);
        match (from, beyond) {
            (None, true) => from = Some(i),
            (Some(start), false) => {
                let mean = (start..i).map(difference).sum::<f64>() / (i - start) as f64;
                found.push([time_s[start], time_s[i - 1], mean]);
                from = None;
            }
            _ => {}
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_split_comes_once() {
        let mut seen = Vec::new();
        each_split(5, 2, &mut |first| seen.push(first.to_vec()));
        assert_eq!((seen.len(), ways(5, 2)), (10, 10));
        seen.sort();
        seen.dedup();
        assert_eq!(seen.len(), 10);
        assert_eq!(ways(40, 20), MOST_SPLITS + 1);
    }

    /// Two groups of three can be split in twenty ways, ten of them mirror images: no split is rarer than one in ten.
    #[test]
    fn three_against_three_can_tell_nothing() {
        let flat = |level: f64| vec![level; 4];
        let a: Vec<Vec<f64>> = [1.0, 1.01, 1.02].map(flat).to_vec();
        let b: Vec<Vec<f64>> = [9.0, 9.01, 9.02].map(flat).to_vec();
        let test = compare(&[0.0, 1.0, 2.0, 3.0], &a, &b).expect("a test");
        assert_eq!((test.splits, test.critical), (20, None));
        assert!((test.p_value - 0.1).abs() < 1e-12 && test.differ.is_empty());
    }

    #[test]
    fn a_difference_is_found_where_it_is() {
        let time: Vec<f64> = (0..50).map(f64::from).collect();
        let curve = |i: usize, extra: f64| -> Vec<f64> {
            (0..50).map(|t| 100.0 + ((t * 13 + i * 7) % 10) as f64 * 0.3 + if t >= 30 { extra } else { 0.0 }).collect()
        };
        let a: Vec<Vec<f64>> = (0..6).map(|i| curve(i, 0.0)).collect();
        let b: Vec<Vec<f64>> = (0..6).map(|i| curve(i + 6, 8.0)).collect();
        let test = compare(&time, &a, &b).expect("a test");
        assert!(test.p_value < 0.01, "{test:?}");
        let [[from, to, off]] = test.differ[..] else { panic!("{test:?}") };
        assert!(from == 30.0 && to == 49.0 && (off + 8.0).abs() < 1.5, "{test:?}");
    }
}
