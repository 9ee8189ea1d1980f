//! Motion along the rail.

/// Thrust as straight lines between points, from first thrust on; s and N. The impulse up to each point goes with it.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Thrust {
    time_s: Vec<f64>,
    thrust_n: Vec<f64>,
    impulse_n_s: Vec<f64>,
}

impl Thrust {
    /// Times must rise; what one list is longer than the other is dropped.
    pub fn new(mut time_s: Vec<f64>, mut thrust_n: Vec<f64>) -> Self {
        let n = time_s.len().min(thrust_n.len());
        time_s.truncate(n);
        thrust_n.truncate(n);
        let mut impulse_n_s = Vec::with_capacity(time_s.len());
        let mut sum = 0.0;
        for i in 0..time_s.len() {
            if i > 0 {
                sum += 0.5 * (time_s[i] - time_s[i - 1]) * (thrust_n[i] + thrust_n[i - 1]);
            }
            impulse_n_s.push(sum);
        }
        Thrust { time_s, thrust_n, impulse_n_s }
    }

    pub fn points(&self) -> (&[f64], &[f64]) {
        (&self.time_s, &self.thrust_n)
    }

    pub fn total_impulse_n_s(&self) -> f64 {
        self.impulse_n_s.last().copied().unwrap_or(0.0)
    }

    pub fn peak_n(&self) -> f64 {
        self.thrust_n.iter().copied().fold(0.0, f64::max)
    }

    /// Mean thrust over the whole curve, N.
    pub fn mean_n(&self) -> f64 {
        let span = self.time_s.last().copied().unwrap_or(0.0) - self.time_s.first().copied().unwrap_or(0.0);
        if span > 0.0 { self.total_impulse_n_s() / span } else { 0.0 }
    }

    /// Thrust and impulse delivered at an instant of the piece that ends at point `k`.
    fn within(&self, k: usize, t: f64) -> (f64, f64) {
        let (t0, f0) = (self.time_s[k - 1], self.thrust_n[k - 1]);
        let slope = (self.thrust_n[k] - f0) / (self.time_s[k] - t0);
        let x = t - t0;
        (f0 + slope * x, self.impulse_n_s[k - 1] + x * (f0 + 0.5 * slope * x))
    }
}

/// What is on the rail.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Launch {
    /// Travel until the forward guide leaves, m.
    pub length_m: f64,
    pub elevation_rad: f64,
    pub friction_coefficient: f64,
    pub gravity_m_s2: f64,
    /// Lift-off mass, and what of it burns away in proportion to the impulse delivered, kg.
    pub mass_kg: f64,
    pub propellant_kg: f64,
    /// Half air density times drag coefficient times cross-section, kg/m; 0: no drag.
    pub drag_kg_m: f64,
    /// The thrust of the curve is multiplied by this.
    pub thrust_factor: f64,
}

/// How the vehicle left.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Exit {
    pub speed_m_s: f64,
    /// From first motion, s.
    pub time_s: f64,
    /// From first thrust to first motion, s.
    pub held_s: f64,
    /// Time average from first motion to exit, N.
    pub mean_thrust_n: f64,
    /// Lowest thrust between, N.
    pub lowest_thrust_n: f64,
    /// Share of the propellant gone at exit.
    pub burned: f64,
    /// Travel, m, and speed, m/s, on the way.
    pub course: Vec<[f64; 2]>,
}

/// Why it did not leave.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stays {
    /// The thrust never exceeds weight and friction.
    NeverLifts,
    /// The motor is spent before the guide leaves.
    Falls,
}

/// Longest step, s.
const STEP_S: f64 = 1e-3;

/// Moves the vehicle along its rail until the forward guide leaves.
///
/// # Formula
/// m(t) a = F(t) − m g sin θ − μ m g cos θ − ½ ρ c_d A v², m = m₀ − m_p ∫F dt / I; held until the right side is above nil. Classical Runge-Kutta
/// steps of fourth order that end at the curve's own points; the exit by bisection within its step.
pub fn leave(thrust: &Thrust, launch: &Launch) -> Result<Exit, Stays> {
    let (time, force) = thrust.points();
    let total = thrust.total_impulse_n_s();
    let holding = launch.gravity_m_s2
        * (launch.elevation_rad.sin() + launch.friction_coefficient * launch.elevation_rad.cos().abs());
    let state = |k: usize, t: f64, v: f64| -> f64 {
        let (f, impulse) = thrust.within(k, t);
        let mass = launch.mass_kg - launch.propellant_kg * if total > 0.0 { impulse / total } else { 0.0 };
        (launch.thrust_factor * f - launch.drag_kg_m * v * v.abs()) / mass - holding
    };
    let mut moving: Option<f64> = None;
    let (mut x, mut v) = (0.0, 0.0);
    let mut exit = Exit { lowest_thrust_n: f64::INFINITY, ..Exit::default() };
    exit.course.push([0.0, 0.0]);
    for k in 1..time.len() {
        let (from, to) = (time[k - 1], time[k]);
        let mut t = from;
        if moving.is_none() {
            if state(k, to, 0.0) <= 0.0 && state(k, from, 0.0) <= 0.0 {
                continue;
            }
            t = if state(k, from, 0.0) > 0.0 { from } else { root(from, to, |t| state(k, t, 0.0)) };
            moving = Some(t);
            exit.lowest_thrust_n = launch.thrust_factor * thrust.within(k, t).0;
        }
        let start = moving.unwrap_or(t);
        let steps = ((to - t) / STEP_S).ceil().max(1.0);
        let h = (to - t) / steps;
        for n in 0..steps as usize {
            let t0 = t + n as f64 * h;
            let advance = |h: f64| -> (f64, f64) {
                let k1 = state(k, t0, v);
                let k2 = state(k, t0 + 0.5 * h, v + 0.5 * h * k1);
                let k3 = state(k, t0 + 0.5 * h, v + 0.5 * h * k2);
                let k4 = state(k, t0 + h, v + h * k3);
                (x + h * v + h * h / 6.0 * (k1 + k2 + k3), v + h / 6.0 * (k1 + 2.0 * k2 + 2.0 * k3 + k4))
            };
            let (next_x, next_v) = advance(h);
            if next_x >= launch.length_m {
                let last = root(0.0, h, |h| advance(h).0 - launch.length_m);
                let end = t0 + last;
                let (f, impulse) = thrust.within(k, end);
                exit.speed_m_s = advance(last).1;
                exit.time_s = end - start;
                exit.held_s = start - time[0];
                let before = impulse_at(thrust, start);
                exit.mean_thrust_n =
                    if exit.time_s > 0.0 { launch.thrust_factor * (impulse - before) / exit.time_s } else { f };
                exit.lowest_thrust_n = exit.lowest_thrust_n.min(launch.thrust_factor * f);
                exit.burned = if total > 0.0 { impulse / total } else { 0.0 };
                exit.course.push([launch.length_m, exit.speed_m_s]);
                return Ok(exit);
            }
            if next_v <= 0.0 && next_x <= 0.0 {
                // It sinks back on its stop.
                (x, v) = (0.0, 0.0);
            } else if next_v <= 0.0 {
                return Err(Stays::Falls);
            } else {
                (x, v) = (next_x, next_v);
            }
            exit.course.push([x, v]);
        }
        exit.lowest_thrust_n = exit.lowest_thrust_n.min(launch.thrust_factor * force[k]);
    }
    Err(if moving.is_some() { Stays::Falls } else { Stays::NeverLifts })
}

fn impulse_at(thrust: &Thrust, t: f64) -> f64 {
    let k = thrust.time_s.partition_point(|x| *x < t).clamp(1, thrust.time_s.len() - 1);
    thrust.within(k, t).1
}

/// Where an increasing function crosses zero between two ends.
fn root(low: f64, high: f64, f: impl Fn(f64) -> f64) -> f64 {
    let (mut low, mut high) = (low, high);
    for _ in 0..80 {
        let middle = 0.5 * (low + high);
        if f(middle) < 0.0 { low = middle } else { high = middle }
    }
    high
}

/// Exit speed under a constant thrust without drag: what is often worked out by hand, m/s; `None` where it does not lift.
pub fn simple_exit_speed_m_s(thrust_n: f64, launch: &Launch) -> Option<f64> {
    let a = thrust_n / launch.mass_kg
        - launch.gravity_m_s2 * (launch.elevation_rad.sin() + launch.friction_coefficient * launch.elevation_rad.cos());
    (a > 0.0).then(|| (2.0 * a * launch.length_m).sqrt())
}
