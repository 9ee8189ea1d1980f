//! Raw stamps to one running clock: rollover, restarts, misplaced and misread stamps.

/// What the walk along the stamps found. Indices are into the raw stamps.
#[derive(Debug, Default, PartialEq)]
pub struct Untangled {
    /// Running time in the unit of the stamps; NaN where the stamp cannot be used.
    pub time: Vec<f64>,
    /// Stamps that fit neither before nor after.
    pub bad: Vec<usize>,
    /// Records that stand behind later ones; their stamps are good.
    pub late: Vec<usize>,
    /// Where a counter rolled over, and at what.
    pub rollovers: Vec<(usize, f64)>,
    /// Where the clock began anew, and was carried on by one usual step.
    pub resets: Vec<usize>,
}

/// How far ahead a clock that went astray may be back.
const LOOK_AHEAD: usize = 8;
/// Steps above so many usual ones are looked at for being misread.
const FAR: f64 = 20.0;

/// Counters of 32 bits in ms, us or us / 1000, of 16 bits, and the day, half day and hour of a clock; in the stamps' own unit.
pub fn moduli(unit_s: f64, clock: bool) -> Vec<f64> {
    if clock {
        return vec![86_400.0, 43_200.0, 3600.0];
    }
    let full = 4_294_967_296.0;
    let mut all = vec![full, full / 1000.0, 65_536.0];
    if unit_s == 1.0 {
        // Milliseconds or microseconds written as seconds.
        all.push(full / 1e6);
    }
    all
}

/// The usual step: median of those that go forward; `None` if none does.
pub fn usual_step(stamps: &[f64]) -> Option<f64> {
    let mut steps: Vec<f64> = stamps.windows(2).map(|pair| pair[1] - pair[0]).filter(|step| *step > 0.0).collect();
    if steps.is_empty() {
        return None;
    }
    let middle = (steps.len() - 1) / 2;
    Some(*steps.select_nth_unstable_by(middle, f64::total_cmp).1)
}

struct Walk<'a> {
    raw: &'a [f64],
    step: f64,
    offset: f64,
    moduli: &'a [f64],
}

impl Walk<'_> {
    fn at(&self, index: usize) -> f64 {
        self.raw[index] + self.offset
    }

    /// The clock is back where it would be after `last`, soon after record `index`; if `below` is given, below it.
    fn returns(&self, index: usize, last: f64, below: f64) -> Option<usize> {
        (index + 1..(index + 1 + LOOK_AHEAD).min(self.raw.len())).find(|&later| {
            let forward = self.at(later) - last;
            let most = (later - index + 1) as f64 * 3.0 * self.step + self.step;
            forward >= 0.0 && forward <= most && self.at(later) < below
        })
    }

    /// The modulus a counter rolled over at between `last` and record `index`.
    fn rollover(&self, index: usize, last: f64) -> Option<f64> {
        let step = self.at(index) - last;
        self.moduli.iter().copied().find(|&modulus| {
            let forward = step + modulus;
            // Close to the end before, close to the start after: within a fiftieth of the range.
            let most = (FAR * self.step).max(modulus / 50.0).min(modulus / 4.0);
            forward > 0.0 && forward <= most && self.raw[index] >= 0.0 && self.raw[index] < modulus
        })
    }
}

/// Which of two neighbours in the wrong order is to blame.
enum Blame {
    Previous,
    Current,
    Order,
}

/// `p`, `l` good so far, `x` below `l`, `y` next: the reading that leaves the most even steps.
fn blame(p: f64, l: f64, x: f64, y: f64, step: f64) -> Option<Blame> {
    let previous = (x - p - 2.0 * step).abs() + (y - x - step).abs();
    let current = (l - p - step).abs() + (y - l - 2.0 * step).abs();
    let order = (x - p - step).abs() + (l - x - step).abs() + (y - l - step).abs();
    let least = previous.min(current).min(order);
    if !(least <= 3.0 * step) {
        return None;
    }
    if order <= least && x > p && y > l {
        Some(Blame::Order)
    } else if current <= previous && y >= l {
        Some(Blame::Current)
    } else if x >= p && y >= x {
        Some(Blame::Previous)
    } else {
        None
    }
}

/// Walks along the stamps. `restarts` are the indices behind repeated headers, ascending; `step` is the usual step.
pub fn untangle(raw: &[f64], restarts: &[usize], moduli: &[f64], step: f64) -> Untangled {
    let mut out = Untangled { time: vec![f64::NAN; raw.len()], ..Untangled::default() };
    let mut walk = Walk { raw, step, offset: 0.0, moduli };
    let mut restarts = restarts.iter().copied().peekable();
    // Index of the last good record and the one before it.
    let mut last: Option<usize> = None;
    let mut before: Option<usize> = None;
    for index in 0..raw.len() {
        let mut restarted = false;
        while restarts.next_if(|&at| at <= index).is_some() {
            restarted = true;
        }
        let x = walk.at(index);
        let Some(previous) = last else {
            if starts_astray(&walk, index, restarts.peek().copied()) {
                out.bad.push(index);
            } else {
                out.time[index] = x;
                last = Some(index);
            }
            continue;
        };
        let l = out.time[previous];
        let forward = x - l;
        let mut accept = true;
        if forward >= 0.0 {
            accept = forward <= FAR * step || restarted || walk.returns(index, l, x).is_none();
            if !accept {
                out.bad.push(index);
            }
        } else {
            let returns = walk.returns(index, l, f64::INFINITY);
            let known = before.map(|before| out.time[before]);
            let next = (index + 1 < raw.len()).then(|| walk.at(index + 1));
            let verdict = match (known, next) {
                (Some(p), Some(y)) if !restarted => blame(p, l, x, y, step),
                _ => None,
            };
            match verdict {
                Some(Blame::Order) => {
                    out.time[index] = x;
                    out.late.push(index);
                    accept = false;
                }
                Some(Blame::Current) => {
                    out.bad.push(index);
                    accept = false;
                }
                Some(Blame::Previous) => {
                    out.time[previous] = f64::NAN;
                    out.bad.push(previous);
                    last = before;
                }
                None if returns.is_some() && !restarted => {
                    out.bad.push(index);
                    accept = false;
                }
                None => {
                    if let Some(modulus) = walk.rollover(index, l) {
                        walk.offset += modulus;
                        out.rollovers.push((index, modulus));
                    } else {
                        walk.offset = l + step - raw[index];
                        out.resets.push(index);
                    }
                }
            }
        }
        if accept {
            out.time[index] = walk.at(index);
            before = last;
            last = Some(index);
        }
    }
    out.bad.sort_unstable();
    out
}

/// The very first stamp does not belong to what follows.
fn starts_astray(walk: &Walk<'_>, index: usize, restart: Option<usize>) -> bool {
    if index + 3 >= walk.raw.len() || restart == Some(index + 1) || index > LOOK_AHEAD {
        return false;
    }
    let steps = [1, 2].map(|ahead| walk.raw[index + ahead + 1] - walk.raw[index + ahead]);
    let follows_well = steps.iter().all(|step| (0.0..=FAR * walk.step).contains(step));
    let first = walk.raw[index + 1] - walk.raw[index];
    let far = first < 0.0 && walk.rollover(index + 1, walk.raw[index]).is_none() || first > 1000.0 * walk.step;
    follows_well && far
}

/// Stamps that stand off the middle of their neighbours in a clock that is otherwise even; gives them the middle.
/// Returns their indices. `time` has no NaN and rises.
pub fn even_out(time: &mut [f64], step: f64) -> Vec<usize> {
    let mut deviations: Vec<f64> = time.windows(2).map(|pair| (pair[1] - pair[0] - step).abs()).collect();
    if deviations.len() < 8 {
        return Vec::new();
    }
    // Nineteen steps of twenty within a twentieth of the usual one: then a stamp off by a third is not jitter.
    let at = deviations.len() * 19 / 20;
    if *deviations.select_nth_unstable_by(at, f64::total_cmp).1 > 0.05 * step {
        return Vec::new();
    }
    let mut moved = Vec::new();
    for index in 1..time.len() - 1 {
        let (a, b) = (time[index - 1], time[index + 1]);
        let middle = (a + b) / 2.0;
        if (b - a - 2.0 * step).abs() < 0.2 * step && (time[index] - middle).abs() > 0.3 * step {
            time[index] = middle;
            moved.push(index);
        }
    }
    moved
}

#[cfg(test)]
mod tests {
    use super::*;

    fn run(raw: &[f64]) -> Untangled {
        let step = usual_step(raw).unwrap();
        untangle(raw, &[], &moduli(1e-3, false), step)
    }

    fn ramp(count: usize, step: f64) -> Vec<f64> {
        (0..count).map(|index| index as f64 * step).collect()
    }

    #[test]
    fn rollover_of_32_bits_is_unwrapped() {
        let raw: Vec<f64> = (0..40u64).map(|index| ((4_294_967_000u64 + index * 12) % 4_294_967_296) as f64).collect();
        let out = run(&raw);
        assert_eq!(out.rollovers.len(), 1);
        assert!(out.time.windows(2).all(|pair| pair[1] - pair[0] == 12.0));
    }

    #[test]
    fn one_misread_stamp_is_bad_and_the_rest_stands() {
        for wrong in [0.0, 3.0, 1e9, 250.0 + 2048.0, 250.0 + 64.0, 250.0 - 128.0] {
            let mut raw = ramp(60, 12.5);
            raw[20] = wrong;
            let out = run(&raw);
            assert_eq!(out.bad, vec![20], "{wrong}");
            assert!(out.late.is_empty() && out.resets.is_empty(), "{wrong}");
            assert_eq!(out.time[59], 59.0 * 12.5, "{wrong}");
        }
    }

    #[test]
    fn a_swapped_pair_is_late_not_bad() {
        let mut raw = ramp(40, 10.0);
        raw.swap(20, 21);
        let out = run(&raw);
        assert_eq!((out.late.as_slice(), out.bad.len()), (&[21][..], 0));
    }

    #[test]
    fn a_clock_that_begins_anew_is_carried_on() {
        let mut raw = ramp(40, 10.0);
        raw.extend(ramp(40, 10.0));
        let out = run(&raw);
        assert_eq!(out.resets, vec![40]);
        assert_eq!(out.time[79], 790.0);
    }

    #[test]
    fn a_gap_is_neither_bad_nor_a_reset() {
        let mut raw = ramp(40, 10.0);
        for stamp in &mut raw[20..] {
            *stamp += 5000.0;
        }
        let out = run(&raw);
        assert_eq!(out, Untangled { time: raw, ..Untangled::default() });
    }

    #[test]
    fn first_stamp_from_before_the_clock_was_set() {
        let mut raw = ramp(40, 10.0);
        for stamp in &mut raw[1..] {
            *stamp += 1e9;
        }
        assert_eq!(run(&raw).bad, vec![0]);
    }

    #[test]
    fn an_even_clock_shows_a_stamp_that_is_off() {
        let mut time = ramp(100, 12.5);
        time[50] += 8.0;
        assert_eq!(even_out(&mut time, 12.5), vec![50]);
        assert_eq!(time[50], 625.0);
    }
}
