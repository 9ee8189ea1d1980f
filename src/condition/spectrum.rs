//! Power spectral density by Welch's method, and the noise floor read from it.

use rustfft::{FftPlanner, num_complex::Complex};
use std::f64::consts::PI;

/// One-sided power spectral density.
#[derive(Debug, Clone, PartialEq)]
pub struct Spectrum {
    pub frequency_hz: Vec<f64>,
    /// Unit of the data squared per Hz.
    pub density: Vec<f64>,
}

/// Welch's method: Hann window, half overlap, mean removed from each segment (P. D. Welch, IEEE Trans. Audio
/// Electroacoust. 15 (1967) 70).
///
/// `segment` samples a segment; fewer are used where the data are shorter. `None` for fewer than 8 samples.
pub fn welch(data: &[f64], rate_hz: f64, segment: usize) -> Option<Spectrum> {
    let segment = segment.min(data.len());
    if segment < 8 {
        return None;
    }
    let window: Vec<f64> = (0..segment).map(|i| 0.5 - 0.5 * (2.0 * PI * i as f64 / segment as f64).cos()).collect();
    let scale = 1.0 / (rate_hz * window.iter().map(|w| w * w).sum::<f64>());
    let fft = FftPlanner::new().plan_fft_forward(segment);
    let bins = segment / 2 + 1;
    let mut density = vec![0.0; bins];
    let mut buffer = vec![Complex::new(0.0, 0.0); segment];
    let mut scratch = vec![Complex::new(0.0, 0.0); fft.get_inplace_scratch_len()];
    let mut count = 0;
    let mut start = 0;
    while start + segment <= data.len() {
        let piece = &data[start..start + segment];
        let mean = piece.iter().sum::<f64>() / segment as f64;
        for ((slot, x), w) in buffer.iter_mut().zip(piece).zip(&window) {
            *slot = Complex::new((x - mean) * w, 0.0);
        }
        fft.process_with_scratch(&mut buffer, &mut scratch);
        for (d, c) in density.iter_mut().zip(&buffer) {
            *d += c.norm_sqr() * scale;
        }
        count += 1;
        start += segment - segment / 2;
    }
    for (k, d) in density.iter_mut().enumerate() {
        *d /= f64::from(count);
        // Negative frequencies are folded onto positive ones; zero and Nyquist have no mirror image.
        if k > 0 && !(segment.is_multiple_of(2) && k == bins - 1) {
            *d *= 2.0;
        }
    }
    let frequency_hz = (0..bins).map(|k| k as f64 * rate_hz / segment as f64).collect();
    Some(Spectrum { frequency_hz, density })
}

/// Frequency of the strongest line of `data` between two frequencies, Hz: Hann window, transform padded fourfold.
pub fn strongest_line(data: &[f64], rate_hz: f64, low_hz: f64, high_hz: f64) -> Option<f64> {
    let n = data.len();
    let length = (4 * n).next_power_of_two();
    let mut buffer = vec![Complex::new(0.0, 0.0); length];
    for (i, (slot, x)) in buffer.iter_mut().zip(data).enumerate() {
        slot.re = x * (0.5 - 0.5 * (2.0 * PI * i as f64 / n as f64).cos());
    }
    FftPlanner::new().plan_fft_forward(length).process(&mut buffer);
    let hz = |k: usize| k as f64 * rate_hz / length as f64;
    (1..length / 2)
        .filter(|&k| hz(k) >= low_hz && hz(k) <= high_hz)
        .max_by(|&a, &b| buffer[a].norm_sqr().total_cmp(&buffer[b].norm_sqr()))
        .map(hz)
}

/// A segment length that the transform handles quickly and that leaves some `pieces` half-overlapping segments.
pub fn segment_for(samples: usize, pieces: usize) -> usize {
    let wanted = (2 * samples / (pieces + 1)).clamp(8, 1 << 15);
    let mut segment = 8;
    while segment * 2 <= wanted {
        segment *= 2;
    }
    segment
}

#[cfg(test)]
mod tests {
    use super::*;

    /// scipy 1.17.1: welch(x, fs=64, window="hann", nperseg=32, noverlap=16, detrend="constant", scaling="density").
    #[test]
    fn agrees_with_scipy() {
        let reference: serde_json::Value =
            serde_json::from_str(include_str!("../../tests/reference/item08_filters_signal.json")).expect("reference");
        let list = |v: &serde_json::Value| -> Vec<f64> {
            v.as_array().expect("list").iter().map(|x| x.as_f64().expect("number")).collect()
        };
        let x = list(&reference["vectors"]["input"]);
        let expected = &reference["vectors"]["welch_hann32_overlap16_fs64"];
        let spectrum = welch(&x, 64.0, 32).expect("spectrum");
        let density = list(&expected["density"]);
        assert_eq!(spectrum.density.len(), density.len());
        for (k, (a, b)) in spectrum.density.iter().zip(&density).enumerate() {
            assert!((a - b).abs() <= 1e-10 * b.abs().max(1e-3), "bin {k}: {a} against {b}");
        }
        for (a, b) in spectrum.frequency_hz.iter().zip(list(&expected["f"])) {
            assert!((a - b).abs() < 1e-12);
        }
    }

    #[test]
    fn a_sine_keeps_its_power() {
        let x: Vec<f64> = (0..4096).map(|i| (2.0 * PI * 50.0 * i as f64 / 1000.0).sin()).collect();
        let s = welch(&x, 1000.0, 512).expect("spectrum");
        let power: f64 = s.density.iter().sum::<f64>() * (s.frequency_hz[1] - s.frequency_hz[0]);
        assert!((power - 0.5).abs() < 0.01, "{power}");
    }
}
