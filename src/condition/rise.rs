//! What the thrust does at ignition, as models that a stand's reading can be held against: a rise of one of a few shapes times a
//! level that goes on smoothly, with or without a transient that dies away.
//!
//! All is in units of the stand's period (time) and of the level (thrust). A mass on a spring integrates twice, so what the
//! thrust does within a few hundredths of a period hardly shows in the reading: only a whole rise of few parameters can be told
//! from it.

/// How the thrust comes up; x is time since its start over the time of the rise, a the parameter of its shape.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Rise {
    /// (1 − a) x + a (1 − cos π x)/2 up to x = 1, then over: a straight ramp at a = 0, an S at a = 1.
    Ramp,
    /// 1 − exp(−xᵏ), k = exp a: a first-order approach, as of a chamber that fills, at a = 0; steeper in its middle above.
    Approach,
    /// The same, with a level that stays as it is until the rise is 95 % done.
    ApproachThenLevel,
    /// (1 + exp(4 − 8 x))^−k, k = exp a: an S without ends, with a foot before its start; even at a = 0 (F. J. Richards, J. Exp. Bot. 10
    /// (1959) 290; from memory).
    Soft,
}

pub const RISES: [Rise; 4] = [Rise::Ramp, Rise::Approach, Rise::ApproachThenLevel, Rise::Soft];

/// Times of the rise before its start from which a foot without beginning counts as nil (e⁻¹² of the level).
const FOOT: f64 = 1.0;

/// Knots of the level after the rise, periods: a spline of straight pieces, closer where the reading tells more.
const KNOTS: [f64; 14] = [0.0, 0.1, 0.2, 0.34, 0.5, 0.75, 1.1, 1.6, 2.2, 3.2, 4.6, 6.5, 9.2, 13.0];
/// Time constants of transients, periods: of these three any decay between is made up.
const DECAYS: [f64; 3] = [0.85, 2.2, 5.5];
/// Standard deviation expected of a transient's amplitude, levels.
const TRANSIENT: f64 = 0.5;

/// One model.
#[derive(Debug, Clone)]
pub struct Model {
    pub rise: Rise,
    pub transient: bool,
    /// Intensity of the white noise that the level's curvature is expected to be, level² per period³.
    pub bend: f64,
    knots: Vec<f64>,
}

/// Parameters in which a model is not linear.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Place {
    /// Start, periods.
    pub start: f64,
    /// Natural logarithm of the time of the rise in periods.
    pub log_time: f64,
    pub shape: f64,
}

impl Model {
    /// `length`: periods that the level must be told for.
    pub fn new(rise: Rise, transient: bool, bend: f64, length: f64) -> Self {
        let beyond = KNOTS.iter().position(|k| *k > length).unwrap_or(KNOTS.len() - 1);
        Model { rise, transient, bend, knots: KNOTS[..=beyond].to_vec() }
    }

    pub fn columns(&self) -> usize {
        self.knots.len() + if self.transient { DECAYS.len() } else { 0 }
    }

    /// Mean and standard deviation expected of the shape.
    pub fn expected_shape(&self) -> (f64, f64) {
        match self.rise {
            Rise::Ramp => (0.5, 0.6),
            Rise::Approach | Rise::ApproachThenLevel => (0.3, 0.5),
            Rise::Soft => (0.0, 0.4),
        }
    }

    /// Time from the start after which the level begins its own course, periods.
    pub fn risen(&self, place: Place) -> f64 {
        match self.rise {
            Rise::Ramp | Rise::Soft => place.log_time.exp(),
            // 1 − e⁻³ = 95 %.
            Rise::Approach | Rise::ApproachThenLevel => place.log_time.exp() * 3f64.powf((-place.shape).exp()),
        }
    }

    /// Writes what each column contributes to the thrust at time `t` into `row`.
    pub fn row(&self, place: Place, t: f64, row: &mut [f64]) {
        row.fill(0.0);
        let since = t - place.start;
        let x = since / place.log_time.exp();
        if x <= if self.rise == Rise::Soft { -FOOT } else { 0.0 } {
            return;
        }
        let (risen, from) = match self.rise {
            Rise::Ramp => {
                let x = x.min(1.0);
                (
                    (1.0 - place.shape) * x + place.shape * 0.5 * (1.0 - (std::f64::consts::PI * x).cos()),
                    self.risen(place),
                )
            }
            Rise::Approach => (-(-x.powf(place.shape.exp())).exp_m1(), 0.0),
            Rise::ApproachThenLevel => (-(-x.powf(place.shape.exp())).exp_m1(), self.risen(place)),
            Rise::Soft => ((1.0 + (4.0 - 8.0 * x).exp()).powf(-place.shape.exp()), 0.0),
        };
        let u = (since - from).max(0.0);
        let last = self.knots.len() - 1;
        let k = self.knots.partition_point(|knot| *knot <= u).clamp(1, last);
        let part = ((u - self.knots[k - 1]) / (self.knots[k] - self.knots[k - 1])).min(1.0);
        row[k - 1] = risen * (1.0 - part);
        row[k] = risen * part;
        if self.transient {
            for (column, decay) in row[last + 1..].iter_mut().zip(DECAYS) {
                *column = risen * (-u / decay).exp();
            }
        }
    }

    /// Rows that, times the coefficients, are standard normal by what is expected of the level.
    pub fn expectations(&self) -> Vec<Vec<(usize, f64)>> {
        let k = &self.knots;
        let mut rows: Vec<Vec<(usize, f64)>> = (1..k.len() - 1)
            .map(|i| {
                let (left, right) = (k[i] - k[i - 1], k[i + 1] - k[i]);
                let scale = 1.0 / (self.bend * 0.5 * (left + right)).sqrt();
                vec![(i - 1, scale / left), (i, -scale * (1.0 / left + 1.0 / right)), (i + 1, scale / right)]
            })
            .collect();
        if self.transient {
            rows.extend((0..DECAYS.len()).map(|d| vec![(k.len() + d, 1.0 / TRANSIENT)]));
        }
        rows
    }

    /// Logarithm of the density of the expectations, up to what all models share.
    pub fn log_prior(&self) -> f64 {
        let bends = -0.5 * (self.knots.len() - 2) as f64 * self.bend.ln();
        bends - if self.transient { DECAYS.len() as f64 * TRANSIENT.ln() } else { 0.0 }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rise and level at one time, coefficients all 1 and no transient.
    fn risen(rise: Rise, shape: f64, t: f64) -> f64 {
        let model = Model::new(rise, false, 1e-3, 8.0);
        let mut row = vec![0.0; model.columns()];
        model.row(Place { start: 0.0, log_time: 0.5f64.ln(), shape }, t, &mut row);
        row.iter().sum()
    }

    #[test]
    fn rises_start_at_nil_and_end_at_the_level() {
        for rise in RISES {
            for shape in [0.0, 0.5, 1.0] {
                let start = if rise == Rise::Soft { -0.5 * FOOT } else { 0.0 };
                assert_eq!(risen(rise, shape, start), 0.0);
                assert!((risen(rise, shape, 7.5) - 1.0).abs() < 1e-5, "{rise:?} {shape}");
            }
        }
        assert!((risen(Rise::Soft, 0.0, 0.25) - 0.5).abs() < 1e-12);
        assert!((risen(Rise::Ramp, 0.0, 0.25) - 0.5).abs() < 1e-12);
        assert!((risen(Rise::Approach, 0.0, 0.5) - (1.0 - (-1f64).exp())).abs() < 1e-12);
    }

    #[test]
    fn a_straight_level_is_no_surprise() {
        let model = Model::new(Rise::Ramp, true, 1e-3, 8.0);
        let knots = model.columns() - DECAYS.len();
        let level: Vec<f64> = KNOTS[..knots].iter().map(|k| 1.0 - 0.05 * k).chain(DECAYS.map(|_| 0.0)).collect();
        for row in model.expectations() {
            assert!(row.iter().map(|(i, w)| w * level[*i]).sum::<f64>().abs() < 1e-9);
        }
    }
}
