//! Slips of the pen in a list of points: a mistyped reading, loads in another unit, loads and readings swapped.

use crate::quantity::Dimension;

/// Share of the capacity below which, and times the capacity above which, the heaviest load is hard to believe. The project's own judgement.
const LEAST_SHARE: f64 = 0.02;
const MOST_TIMES: f64 = 1.5;
/// Times the capacity from which on nothing is made of the points at all.
const REFUSED_TIMES: f64 = 20.0;
/// A point is called odd from so many standard deviations of the others about their own line on, and from this share of the span.
const ODD_SIGMAS: f64 = 6.0;
const ODD_SHARE: f64 = 0.005;
/// Points that must be left beside it.
const FEWEST: usize = 5;

/// Why the loads cannot be what was hung on this cell.
pub fn beyond_belief(forces: &[f64], capacity: Option<f64>, dimension: Dimension) -> Option<String> {
    let heaviest = forces.iter().fold(0.0_f64, |h, f| h.max(f.abs()));
    let capacity = capacity.filter(|c| *c > 0.0 && heaviest > REFUSED_TIMES * c)?;
    let unit = if dimension == Dimension::Pressure { "Pa" } else { "N" };
    Some(format!("the heaviest load is {heaviest:.0} {unit}, {:.0} times the cell's capacity", heaviest / capacity))
}

/// What is hard to believe of the loads, one plain sentence each. `unit`: of the capacity, N or Pa.
pub fn of_capacity(forces: &[f64], capacity: Option<f64>, unit: &str) -> Option<String> {
    let heaviest = forces.iter().fold(0.0_f64, |h, f| h.max(f.abs()));
    let capacity = capacity.filter(|c| *c > 0.0)?;
    if heaviest > MOST_TIMES * capacity {
        return Some(format!(
            "the heaviest load is {heaviest:.4} {unit}, {:.1} times the cell's capacity: loads in the wrong unit, or loads and readings swapped?",
            heaviest / capacity
        ));
    }
    (heaviest < LEAST_SHARE * capacity).then(|| {
        format!(
            "the heaviest load is {heaviest:.4} {unit}, {:.2} % of the cell's capacity: loads in the wrong unit (g for kg)?",
            100.0 * heaviest / capacity
        )
    })
}

/// The point that lies far off the line through all others, and by what share of the span of readings.
pub fn odd_point(forces: &[f64], readings: &[f64]) -> Option<(usize, f64)> {
    let n = forces.len().min(readings.len());
    if n <= FEWEST {
        return None;
    }
    let span = readings.iter().fold(f64::NEG_INFINITY, |h, r| h.max(*r))
        - readings.iter().fold(f64::INFINITY, |l, r| l.min(*r));
    let off = |left: usize| -> Option<(f64, f64)> {
        let others: Vec<(f64, f64)> = (0..n).filter(|k| *k != left).map(|k| (forces[k], readings[k])).collect();
        let m = others.len() as f64;
        let (mx, my) = (others.iter().map(|p| p.0).sum::<f64>() / m, others.iter().map(|p| p.1).sum::<f64>() / m);
        let sxx: f64 = others.iter().map(|p| (p.0 - mx).powi(2)).sum();
        let slope = others.iter().map(|p| (p.0 - mx) * (p.1 - my)).sum::<f64>() / sxx;
        let about = |p: &(f64, f64)| p.1 - my - slope * (p.0 - mx);
        let sd = (others.iter().map(|p| about(p).powi(2)).sum::<f64>() / (m - 2.0)).sqrt();
        let own = about(&(forces[left], readings[left]));
        (sxx > 0.0).then_some((own.abs() / sd.max(1e-9 * span), own.abs() / span))
    };
    (0..n)
        .filter_map(|k| off(k).map(|(sigmas, share)| (k, sigmas, share)))
        .filter(|(_, sigmas, share)| *sigmas > ODD_SIGMAS && *share > ODD_SHARE)
        .max_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(k, _, share)| (k, share))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_mistyped_reading_is_named() {
        let forces = [0.0, 69.0, 137.0, 206.0, 275.0, 343.0, 275.0, 206.0, 137.0, 69.0];
        let sound: Vec<f64> =
            forces.iter().enumerate().map(|(i, f)| 8400.0 + 820.0 * f + (i * 37 % 11) as f64 * 6.0).collect();
        assert_eq!(odd_point(&forces, &sound), None);
        let mut typed = sound.clone();
        typed[4] += 18_000.0;
        let (at, share) = odd_point(&forces, &typed).expect("the point");
        assert!(at == 4 && (share - 0.064).abs() < 0.01, "{share}");
        // A cell that bends has no odd point.
        let bent: Vec<f64> = forces.iter().map(|f| 8400.0 + 820.0 * f + 0.05 * f * f).collect();
        assert_eq!(odd_point(&forces, &bent), None);
    }

    #[test]
    fn loads_against_the_capacity() {
        assert_eq!(of_capacity(&[0.0, 343.0], Some(500.0), "N"), None);
        assert_eq!(of_capacity(&[0.0, 343.0], None, "N"), None);
        assert!(of_capacity(&[0.0, 0.343], Some(500.0), "N").is_some_and(|t| t.contains("g for kg")));
        assert!(of_capacity(&[0.0, 900.0], Some(500.0), "N").is_some_and(|t| t.contains("swapped")));
        assert_eq!(beyond_belief(&[0.0, 900.0], Some(500.0), Dimension::Force), None);
        assert!(beyond_belief(&[81_780.0, 2.9e6], Some(500.0), Dimension::Force).is_some());
    }
}
