//! Integrals of sampled curves by the trapezoid rule, which is exact for straight lines between samples.

/// ∫ y dt over all samples. Both slices have equal length.
pub fn trapezoid(time_s: &[f64], y: &[f64]) -> f64 {
    time_s.windows(2).zip(y.windows(2)).map(|(t, y)| (t[1] - t[0]) * (y[0] + y[1]) / 2.0).sum()
}

/// ∫ y dt from `from_s` to `to_s`, with straight lines between samples; nothing is added beyond the record.
pub fn between(time_s: &[f64], y: &[f64], from_s: f64, to_s: f64) -> f64 {
    let first = time_s.partition_point(|t| *t <= from_s).saturating_sub(1);
    let mut sum = 0.0;
    for i in first..time_s.len().saturating_sub(1) {
        let (t0, t1) = (time_s[i], time_s[i + 1]);
        if t0 >= to_s {
            break;
        }
        let (a, b) = (t0.max(from_s), t1.min(to_s));
        if b > a {
            let value = |t: f64| y[i] + (y[i + 1] - y[i]) * (t - t0) / (t1 - t0);
            sum += (b - a) * (value(a) + value(b)) / 2.0;
        }
    }
    sum
}

/// Running integral at each sample, starting at 0.
pub fn cumulative(time_s: &[f64], y: &[f64]) -> Vec<f64> {
    let mut sum = 0.0;
    let mut out = Vec::with_capacity(y.len());
    for i in 0..y.len() {
        if i > 0 {
            sum += (time_s[i] - time_s[i - 1]) * (y[i] + y[i - 1]) / 2.0;
        }
        out.push(sum);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    /// scipy 1.17.1: integrate.trapezoid and cumulative_trapezoid of the committed vectors.
    #[test]
    fn agrees_with_scipy() {
        let reference: serde_json::Value =
            serde_json::from_str(include_str!("../../tests/reference/item08_filters_signal.json")).expect("reference");
        let list = |v: &serde_json::Value| -> Vec<f64> {
            v.as_array().expect("list").iter().map(|x| x.as_f64().expect("number")).collect()
        };
        let vectors = &reference["vectors"];
        let x = list(&vectors["input"]);
        let t: Vec<f64> = (0..x.len()).map(|i| i as f64).collect();
        assert!((trapezoid(&t, &x) - vectors["trapezoid_dx1"].as_f64().expect("number")).abs() < 1e-10);
        for (a, b) in cumulative(&t, &x).iter().zip(list(&vectors["cumulative_trapezoid_dx1"])) {
            assert!((a - b).abs() < 1e-10);
        }
        let uneven = &vectors["nonuniform_impulse"];
        let (t, f) = (list(&uneven["t"]), list(&uneven["f"]));
        assert!((trapezoid(&t, &f) - uneven["trapezoid"].as_f64().expect("number")).abs() < 1e-12);
    }

    #[test]
    fn a_part_of_a_trace() {
        let (t, y) = ([0.0, 1.0, 2.0], [0.0, 2.0, 0.0]);
        assert_eq!(between(&t, &y, 0.0, 2.0), 2.0);
        assert_eq!(between(&t, &y, 0.5, 1.5), 1.5);
        assert_eq!(between(&t, &y, -3.0, 9.0), 2.0);
        assert_eq!(between(&t, &y, 3.0, 9.0), 0.0);
    }
}
