//! Names and definitions of the figures, in the order in which a person reads them.

use crate::firing::{Figure, Quantities};

/// A figure by its name on the screen, its definition, and where it is.
pub struct Named<'a> {
    /// Key in result.json.
    pub key: &'static str,
    pub name: &'static str,
    pub definition: &'static str,
    /// Shown as "not known" where it is missing; others are left out then.
    pub expected: bool,
    pub figure: Option<&'a Figure>,
}

/// All figures, total impulse first.
pub fn named(quantities: &Quantities) -> Vec<Named<'_>> {
    let q = quantities;
    let entry = |key, name, expected, figure, definition| Named { key, name, definition, expected, figure };
    vec![
        entry(
            "total_impulse",
            "total impulse",
            true,
            q.total_impulse.as_ref(),
            "thrust over the whole burst with its tail, until the integral is flat within noise",
        ),
        entry("burn_impulse", "burn impulse", true, q.burn_impulse.as_ref(), "impulse within the burn time"),
        entry("burn_time", "burn time", true, q.burn_time.as_ref(), "first to last crossing of 5 % of peak thrust"),
        entry(
            "action_time",
            "action time",
            true,
            q.action_time.as_ref(),
            "first to last crossing of 10 % of peak thrust",
        ),
        entry("average_thrust", "average thrust", true, q.average_thrust.as_ref(), "burn impulse / burn time"),
        entry(
            "peak_thrust",
            "peak thrust",
            true,
            q.peak_thrust.as_ref(),
            "highest thrust of the motor, without ringing of the stand and noise",
        ),
        entry(
            "initial_thrust",
            "initial thrust",
            true,
            q.initial_thrust.as_ref(),
            "mean of the first 0.5 s of the burn, or of the whole burn if shorter (common practice)",
        ),
        entry("rise_time", "rise time", true, q.rise_time.as_ref(), "10 % to 90 % of peak thrust"),
        entry("ignition_delay", "ignition delay", false, q.ignition_delay.as_ref(), "ignition signal to first thrust"),
        entry(
            "propellant_mass",
            "propellant mass",
            true,
            q.propellant_mass.as_ref(),
            "weighed, or from the weight shift of a vertical stand",
        ),
        entry(
            "expelled_mass",
            "expelled mass",
            false,
            q.expelled_mass.as_ref(),
            "mass of the motor before less mass after",
        ),
        entry(
            "specific_impulse",
            "specific impulse",
            true,
            q.specific_impulse.as_ref(),
            "total impulse / (propellant mass × 9.80665 m/s²)",
        ),
        entry(
            "effective_exhaust_velocity",
            "exhaust velocity",
            true,
            q.effective_exhaust_velocity.as_ref(),
            "effective: total impulse / propellant mass",
        ),
        entry("peak_pressure", "peak pressure", false, q.peak_pressure.as_ref(), "absolute, in the chamber"),
        entry("mean_pressure", "mean pressure", false, q.mean_pressure.as_ref(), "absolute, over the action time"),
        entry(
            "characteristic_velocity",
            "characteristic vel.",
            false,
            q.characteristic_velocity.as_ref(),
            "c*: integral of absolute pressure × mean throat area / propellant mass",
        ),
        entry(
            "thrust_coefficient",
            "thrust coefficient",
            false,
            q.thrust_coefficient.as_ref(),
            "over the action time: impulse / (integral of absolute pressure × mean throat area)",
        ),
        entry(
            "burn_rate",
            "burn rate",
            false,
            q.burn_rate.as_ref(),
            "web thickness / web burning time (10 % of highest pressure to the aft-tangent bisector)",
        ),
        entry(
            "extrapolated_impulse",
            "of it extrapolated",
            false,
            q.extrapolated_impulse.as_ref(),
            "part of the total impulse beyond the end of the record",
        ),
    ]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_figure_of_the_result_has_a_name() {
        let value = serde_json::to_value(Quantities::default()).unwrap();
        let mut keys: Vec<&str> = value.as_object().unwrap().keys().map(String::as_str).collect();
        let quantities = Quantities::default();
        let mut shown: Vec<&str> = named(&quantities).iter().map(|entry| entry.key).collect();
        keys.sort_unstable();
        shown.sort_unstable();
        assert_eq!(keys, shown);
        assert!(named(&quantities).iter().all(|entry| entry.name.chars().count() <= 19));
    }
}
