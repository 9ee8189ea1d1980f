//! The logger: samples what the cell says, stamps it, and writes it down more or less well.

use super::cell::Cell;
use super::text::{Lines, Text, UnitsRow, clock, encode};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;
use std::f64::consts::TAU;
use std::fmt::Write as _;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TimeStyle {
    Seconds {
        decimals: usize,
    },
    Millis {
        decimals: usize,
    },
    Micros,
    /// `14:03:22.123`, starting in the afternoon.
    Clock,
    /// `2026-05-14T14:03:22.123`.
    Iso,
    /// A sample counter; run.toml gives the rate.
    Counter,
    /// No time at all; run.toml gives the rate.
    None,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Logger {
    /// By the logger's own clock.
    pub rate_hz: f64,
    /// The converter averages over this long before each stamp; 0: takes the value at the stamp.
    pub averaging_s: f64,
    /// Whether run.toml says so.
    pub averaging_told: bool,
    /// Log time = true time x (1 + this).
    pub clock_error: f64,
    /// As written into run.toml.
    pub clock_tolerance: Option<String>,
    /// Standard deviation of the sampling instants, s; stamps tell the true instant.
    pub jitter_s: f64,
    pub time: TimeStyle,
    /// The clock steps this coarsely, s; 0: as fine as it is written.
    pub stamp_step_s: f64,
    /// Stamp of the first record, s.
    pub first_stamp_s: f64,
    /// ms and us counters wrap at 2^32.
    pub rollover: bool,
    /// Step of the converter in reading units; 0: none.
    pub lsb: f64,
    /// Limits of converter or amplifier, reading units.
    pub limits: Option<(f64, f64)>,
    /// Stretches without records, true time.
    pub gaps_s: Vec<(f64, f64)>,
    /// Single spoilt readings.
    pub glitches: usize,
    /// Decimals of a reading.
    pub decimals: usize,
    pub text: Text,
}

impl Default for Logger {
    fn default() -> Self {
        Logger {
            rate_hz: 1000.0,
            averaging_s: 0.0,
            averaging_told: true,
            clock_error: 0.0,
            clock_tolerance: None,
            jitter_s: 0.0,
            time: TimeStyle::Millis { decimals: 3 },
            stamp_step_s: 0.0,
            first_stamp_s: 0.0,
            rollover: false,
            lsb: 1.0,
            limits: None,
            gaps_s: Vec::new(),
            glitches: 0,
            decimals: 0,
            text: Text::default(),
        }
    }
}

/// A further column: name, unit, decimals and its noise-free value against true time.
pub struct Extra<'a> {
    pub name: &'static str,
    pub unit: &'static str,
    pub decimals: usize,
    pub noise: f64,
    /// Values end there.
    pub limit: Option<f64>,
    pub value: Box<dyn Fn(f64) -> f64 + 'a>,
}

/// What is true of the file.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct LogTruth {
    /// Data lines, good and bad.
    pub records: u64,
    /// Line numbers of single spoilt readings.
    pub glitch_lines: Vec<u64>,
    /// Line numbers of data lines beyond reading (garbled, cut).
    pub spoilt_lines: Vec<u64>,
    /// Records that gaps swallowed.
    pub missing: u64,
    /// Readings at a limit.
    pub clipped: u64,
}

impl Logger {
    pub fn time_name(&self) -> Option<(&'static str, &'static str)> {
        match self.time {
            TimeStyle::Seconds { .. } => Some(("t_s", "s")),
            TimeStyle::Millis { .. } => Some(("t_ms", "ms")),
            TimeStyle::Micros => Some(("t_us", "us")),
            TimeStyle::Clock | TimeStyle::Iso => Some(("time", "")),
            TimeStyle::Counter | TimeStyle::None => None,
        }
    }

    fn stamp(&self, log_s: f64, index: u64) -> Option<String> {
        let mut t = log_s + self.first_stamp_s;
        if self.stamp_step_s > 0.0 {
            t = ((t + 1e-9) / self.stamp_step_s).floor() * self.stamp_step_s;
        }
        let wrap = |ticks: f64| if self.rollover { ticks.rem_euclid(4_294_967_296.0) } else { ticks };
        Some(match self.time {
            TimeStyle::Seconds { decimals } => self.comma(format!("{t:.decimals$}")),
            TimeStyle::Millis { decimals } => self.comma(format!("{:.decimals$}", wrap(t * 1e3))),
            TimeStyle::Micros => format!("{:.0}", wrap((t * 1e6).round())),
            TimeStyle::Clock => clock(t + 50_602.0),
            TimeStyle::Iso => format!("2026-05-14T{}", clock(t + 50_602.0)),
            TimeStyle::Counter => index.to_string(),
            TimeStyle::None => return None,
        })
    }

    fn comma(&self, text: String) -> String {
        if self.text.decimal_comma { text.replace('.', ",") } else { text }
    }

    /// Writes the log. `force_at(true time, window)` gives the force at the cell, thrust positive.
    pub fn write(
        &self,
        cell: &Cell,
        end_s: f64,
        seed: u64,
        force_at: &dyn Fn(f64, f64) -> f64,
        extras: &[Extra<'_>],
    ) -> (Vec<u8>, LogTruth) {
        let mut rng = ChaCha8Rng::seed_from_u64(seed ^ 0x6c6f_6767_6572);
        let count = (end_s * (1.0 + self.clock_error) * self.rate_hz) as u64 + 1;
        let sign = cell.thrust_sign();
        let mut truth = LogTruth::default();

        // Instants and readings.
        let mut slow = SlowNoise::new(cell.slow_noise_n, self.rate_hz);
        let mut rows: Vec<(u64, f64, f64, f64)> = Vec::with_capacity(count as usize);
        for k in 0..count {
            let mut log_s = k as f64 / self.rate_hz;
            if self.jitter_s > 0.0 && k > 0 {
                let off: f64 = rng.sample(StandardNormal);
                // Never so far that two samples change places.
                log_s += (off * self.jitter_s).clamp(-0.3 / self.rate_hz, 0.3 / self.rate_hz);
            }
            let true_s = log_s / (1.0 + self.clock_error);
            let white: f64 = rng.sample(StandardNormal);
            let mut noise = white * cell.noise_n + slow.next(&mut rng);
            if let Some((size_n, hz)) = cell.hum {
                noise += size_n * (TAU * hz * true_s + 0.7).sin();
            }
            if self.gaps_s.iter().any(|&(from, to)| true_s > from && true_s < to) {
                truth.missing += 1;
                continue;
            }
            let force = force_at(true_s, self.averaging_s / (1.0 + self.clock_error));
            let mut reading = cell.reading(sign * force + noise);
            if let Some((low, high)) = self.limits
                && !(low..=high).contains(&reading)
            {
                reading = reading.clamp(low, high);
                truth.clipped += 1;
            }
            rows.push((k, log_s, true_s, self.quantise(reading)));
        }

        let glitch_rows = self.spoil_single(&mut rows, cell, &mut rng);
        let garbled_rows = pick(&mut rng, rows.len(), self.text.garbled, &glitch_rows);
        let nul_rows = pick(&mut rng, rows.len(), self.text.nul_bytes, &garbled_rows);

        let mut out = Lines { text: String::with_capacity(rows.len() * 24), end: self.text.line_end, count: 0 };
        for line in &self.text.banner {
            out.push(line);
        }
        let (header, units) = self.head(cell, extras);
        if self.text.units_row == UnitsRow::BeforeHeader {
            out.push(&units);
        }
        if self.text.header {
            out.push(&header);
        }
        if self.text.units_row == UnitsRow::AfterHeader {
            out.push(&units);
        }
        let repeat_at = if self.text.repeated_header { rows.len() * 97 / 100 } else { usize::MAX };
        let mut line = String::new();
        for (i, &(k, log_s, true_s, reading)) in rows.iter().enumerate() {
            if self.text.comment_every > 0 && i > 0 && i % self.text.comment_every == 0 {
                out.push(&format!("# still logging, buffer {} %", i % 97));
            }
            if i == repeat_at {
                out.push(&header);
            }
            line.clear();
            let delimiter = self.text.delimiter;
            if let Some(stamp) = self.stamp(log_s, k) {
                line.push_str(&stamp);
                line.push(delimiter);
            }
            line.push_str(&self.comma(format!("{reading:.*}", self.decimals)));
            for extra in extras {
                let noise: f64 = rng.sample(StandardNormal);
                let value = (extra.value)(true_s) + noise * extra.noise;
                let value = extra.limit.map_or(value, |limit| value.min(limit));
                line.push(delimiter);
                line.push_str(&self.comma(format!("{value:.*}", extra.decimals)));
            }
            if self.text.temperature {
                let _ = write!(line, "{delimiter}{}", self.comma(format!("{:.1}", 21.3 + 0.02 * true_s)));
            }
            if self.text.words {
                let _ = write!(line, "{delimiter}{}", if true_s < 1.0 { "WAIT" } else { "OK" });
            }
            if self.text.trailing_delimiter {
                line.push(delimiter);
            }
            if garbled_rows.contains(&i) {
                let keep = line.len() / 2;
                line.truncate(keep);
                line.push_str("~\u{fffd}q?x");
            }
            if nul_rows.contains(&i) {
                line.push('\0');
            }
            truth.records += 1;
            let last = i + 1 == rows.len();
            if last && self.text.cut_last_line {
                line.truncate(line.len() / 2);
                out.text.push_str(&line);
                truth.spoilt_lines.push(out.count + 1);
                break;
            }
            out.push(&line);
            if glitch_rows.contains(&i) {
                truth.glitch_lines.push(out.count);
            }
            if garbled_rows.contains(&i) {
                truth.spoilt_lines.push(out.count);
            }
        }
        (encode(&out.text, self.text.encoding), truth)
    }

    fn quantise(&self, reading: f64) -> f64 {
        if self.lsb > 0.0 { (reading / self.lsb).round() * self.lsb } else { reading }
    }

    fn head(&self, cell: &Cell, extras: &[Extra<'_>]) -> (String, String) {
        let mut names: Vec<&str> = Vec::new();
        let mut units: Vec<&str> = Vec::new();
        if let Some((name, unit)) = self.time_name() {
            names.push(name);
            units.push(unit);
        } else if self.time == TimeStyle::Counter {
            names.push("sample");
            units.push("");
        }
        names.push("load");
        units.push(match cell.scale {
            super::cell::Scale::Direct { unit, .. } => unit,
            _ => cell.reading_unit,
        });
        for extra in extras {
            names.push(extra.name);
            units.push(extra.unit);
        }
        if self.text.temperature {
            names.push("board_temp");
            units.push("degC");
        }
        if self.text.words {
            names.push("state");
            units.push("");
        }
        let join = |parts: &[&str]| {
            let mut line = parts.join(&self.text.delimiter.to_string());
            if self.text.trailing_delimiter {
                line.push(self.text.delimiter);
            }
            line
        };
        (join(&names), join(&units))
    }

    /// Replaces single readings by full scale, zero or a flipped bit; at least a tenth of the range off what was there.
    fn spoil_single(&self, rows: &mut [(u64, f64, f64, f64)], cell: &Cell, rng: &mut ChaCha8Rng) -> Vec<usize> {
        let chosen = pick(rng, rows.len(), self.glitches, &[]);
        let (low, high) =
            rows.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), row| (row.3.min(low), row.3.max(high)));
        let span = high - low;
        let full = self.limits.map_or(high + 3.0 * span, |(_, top)| top);
        let mut done = Vec::new();
        for i in chosen {
            let Some(row) = rows.get_mut(i) else { continue };
            let spoilt = match rng.random_range(0..3) {
                0 => full,
                1 => 0.0,
                _ if cell.reading_unit == "count" => {
                    let bit = (span.max(4.0).log2().floor() as u32).min(30);
                    f64::from((row.3 as i32) ^ (1 << bit))
                }
                _ => -full,
            };
            let spoilt = if (spoilt - row.3).abs() < 0.1 * span { full } else { spoilt };
            if (spoilt - row.3).abs() >= 0.1 * span {
                row.3 = self.quantise(spoilt);
                done.push(i);
            }
        }
        done
    }
}

/// Different rows, well apart from each other, from both ends and from those taken.
fn pick(rng: &mut ChaCha8Rng, rows: usize, wanted: usize, taken: &[usize]) -> Vec<usize> {
    let mut out: Vec<usize> = Vec::new();
    let mut tries = 0;
    while rows > 40 && out.len() < wanted && tries < 100 * wanted {
        tries += 1;
        let i = rng.random_range(10..rows - 10);
        if out.iter().chain(taken).all(|&other| other.abs_diff(i) > 8) {
            out.push(i);
        }
    }
    out.sort_unstable();
    out
}

/// About 1/f: one first-order process an octave or so, equal variance each.
struct SlowNoise {
    parts: Vec<(f64, f64, f64)>,
}

impl SlowNoise {
    fn new(size_n: f64, rate_hz: f64) -> SlowNoise {
        if size_n <= 0.0 {
            return SlowNoise { parts: Vec::new() };
        }
        let corners = [0.05, 0.5, 5.0, 50.0];
        let each = size_n / (corners.len() as f64).sqrt();
        let part = |hz: f64| {
            let keep = (-TAU * hz / rate_hz).exp();
            (keep, each * (1.0 - keep * keep).sqrt(), 0.0)
        };
        SlowNoise { parts: corners.iter().map(|&hz| part(hz)).collect() }
    }

    fn next(&mut self, rng: &mut ChaCha8Rng) -> f64 {
        let mut sum = 0.0;
        for (keep, drive, state) in &mut self.parts {
            let noise: f64 = rng.sample(StandardNormal);
            *state = *keep * *state + *drive * noise;
            sum += *state;
        }
        sum
    }
}
