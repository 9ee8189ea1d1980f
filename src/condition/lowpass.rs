//! Zero-phase Butterworth low-pass: designed by the bilinear transform, run forward and then backward.

use std::f64::consts::PI;

/// One second-order section, `a0` = 1: y = b0 x + b1 x1 + b2 x2 - a1 y1 - a2 y2.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Section {
    pub b: [f64; 3],
    pub a: [f64; 2],
}

/// Butterworth low-pass sections of an even `order`.
///
/// # Formula
/// Analogue poles at angles (2k+1)π/(2n) + π/2 on the circle of radius tan(π fc/fs), mapped by s = (1 − z⁻¹)/(1 + z⁻¹).
/// One pass has gain 1/√2 at the cutoff, forward and backward together 1/2. `cutoff_hz` must lie below half of `rate_hz`.
pub fn butterworth(order: usize, cutoff_hz: f64, rate_hz: f64) -> Vec<Section> {
    let w = (PI * cutoff_hz / rate_hz).tan();
    (0..order / 2)
        .map(|k| {
            // Damping of the k-th pole pair: 2 sin of its angle from the imaginary axis.
            let q = 2.0 * (PI * (2 * k + 1) as f64 / (2 * order) as f64).sin();
            let d = 1.0 + q * w + w * w;
            let b0 = w * w / d;
            Section { b: [b0, 2.0 * b0, b0], a: [2.0 * (w * w - 1.0) / d, (1.0 - q * w + w * w) / d] }
        })
        .collect()
}

/// Runs the sections once over the data, started in the steady state of a constant `first`.
fn run(sections: &[Section], data: &mut [f64], first: f64) {
    for section in sections {
        let Section { b, a } = *section;
        // State of the transposed form for a constant input; unit gain at zero frequency keeps the level.
        let mut s1 = first * (1.0 - b[0]);
        let mut s2 = first * (b[2] - a[1]);
        for x in data.iter_mut() {
            let y = b[0] * *x + s1;
            s1 = b[1] * *x - a[0] * y + s2;
            s2 = b[2] * *x - a[1] * y;
            *x = y;
        }
    }
}

/// Filters forward and backward, so that nothing is delayed. The ends are extended by odd reflection over `pad` samples
/// (fewer where the data are shorter), so that a level or a slope at an end is kept.
pub fn forward_backward(sections: &[Section], data: &[f64], pad: usize) -> Vec<f64> {
    let n = data.len();
    if n < 2 {
        return data.to_vec();
    }
    let pad = pad.min(n - 1);
    let mut extended = Vec::with_capacity(n + 2 * pad);
    extended.extend((1..=pad).rev().map(|i| 2.0 * data[0] - data[i]));
    extended.extend_from_slice(data);
    extended.extend((1..=pad).map(|i| 2.0 * data[n - 1] - data[n - 1 - i]));
    let first = extended[0];
    run(sections, &mut extended, first);
    extended.reverse();
    let last = extended[0];
    run(sections, &mut extended, last);
    extended.reverse();
    extended[pad..pad + n].to_vec()
}

/// Zero-phase low-pass of the program: fourth order (two second-order passes), -6 dB at the cutoff.
pub fn zero_phase(data: &[f64], cutoff_hz: f64, rate_hz: f64) -> Vec<f64> {
    // The response to an end dies within a few periods of the cutoff.
    let pad = (3.0 * rate_hz / cutoff_hz).ceil() as usize + 9;
    forward_backward(&butterworth(2, cutoff_hz, rate_hz), data, pad)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reference() -> serde_json::Value {
        serde_json::from_str(include_str!("../../tests/reference/item08_filters_signal.json")).expect("reference file")
    }

    fn list(value: &serde_json::Value) -> Vec<f64> {
        value.as_array().expect("list").iter().map(|v| v.as_f64().expect("number")).collect()
    }

    /// scipy 1.17.1: butter(n, fc, fs=fs, output="sos"), sosfreqz magnitudes.
    #[test]
    fn magnitude_agrees_with_scipy() {
        let reference = reference();
        let mut compared = 0;
        for row in reference["butterworth"]["table"].as_array().expect("rows") {
            let order = row["order"].as_u64().expect("order") as usize;
            if order % 2 == 1 {
                continue;
            }
            let (fs, fc) = (row["fs"].as_f64().expect("fs"), row["fc"].as_f64().expect("fc"));
            let sections = butterworth(order, fc, fs);
            for (f, db) in list(&row["f"]).iter().zip(list(&row["mag_dB_one_pass"])) {
                let (s, c) = (2.0 * PI * f / fs).sin_cos();
                let (s2, c2) = (4.0 * PI * f / fs).sin_cos();
                let gain: f64 = sections
                    .iter()
                    .map(|q| {
                        let num = (q.b[0] + q.b[1] * c + q.b[2] * c2).hypot(q.b[1] * s + q.b[2] * s2);
                        let den = (1.0 + q.a[0] * c + q.a[1] * c2).hypot(q.a[0] * s + q.a[1] * s2);
                        num / den
                    })
                    .product();
                assert!((20.0 * gain.log10() - db).abs() < 1e-9, "order {order} fs {fs} fc {fc} at {f} Hz");
                compared += 1;
            }
        }
        assert!(compared >= 40);
    }

    /// scipy 1.17.1: sosfiltfilt(butter(4, 0.2, output="sos"), x) pads 15 samples; filtfilt(butter(2, 100, fs=1000), x) pads 9.
    #[test]
    fn forward_backward_agrees_with_scipy() {
        let reference = reference();
        let vectors = &reference["vectors"];
        let x = list(&vectors["input"]);
        for (sections, pad, name) in [
            (butterworth(4, 0.1, 1.0), 15, "sosfiltfilt_butter4_0p2_default_pad"),
            (butterworth(2, 100.0, 1000.0), 9, "filtfilt_butter2_100_of_1000"),
            (butterworth(4, 0.1, 1.0), 0, "sosfiltfilt_padtype_none"),
        ] {
            let y = forward_backward(&sections, &x, pad);
            let expected = list(&vectors[name]);
            assert_eq!(y.len(), expected.len());
            for (i, (a, b)) in y.iter().zip(&expected).enumerate() {
                assert!((a - b).abs() < 1e-10, "{name} sample {i}: {a} against {b}");
            }
        }
    }

    /// SAE J211-1 / ISO 6487 phaseless filter coefficients (formula read in a public implementation that cites them).
    #[test]
    fn coefficients_agree_with_the_channel_class_formula() {
        let reference = reference();
        for row in reference["cfc"]["table"].as_array().expect("rows") {
            let fc = row["design_cutoff_Hz"].as_f64().expect("fc");
            let section = butterworth(2, fc, row["fs"].as_f64().expect("fs"))[0];
            assert!((section.b[0] - row["a0"].as_f64().expect("a0")).abs() < 1e-12);
            assert!((-section.a[0] - row["b1"].as_f64().expect("b1")).abs() < 1e-12);
            assert!((-section.a[1] - row["b2"].as_f64().expect("b2")).abs() < 1e-12);
        }
    }

    #[test]
    fn a_level_and_a_slope_pass_unchanged() {
        let x: Vec<f64> = (0..500).map(|i| 3.0 + 0.01 * i as f64).collect();
        for (a, b) in zero_phase(&x, 20.0, 1000.0).iter().zip(&x) {
            assert!((a - b).abs() < 1e-6);
        }
    }
}
