//! Whether the stations and diameters of a vehicle fit together: one place beyond the tail, or a calibre too small, makes a margin that is not there.

use super::vehicle::Vehicle;
use crate::problem::Problem;
use crate::run::document::Table;

/// Diameters that agree within this share are one diameter written in two units.
const SAME_DIAMETER: f64 = 0.01;
/// Stations that lie this little behind the tail are rounded, m.
const ROUNDED_M: f64 = 1e-3;

/// Holds what `[vehicle]` and `[motor]` say against the length and the largest diameter.
///
/// # Errors
/// A station behind the aft end, a shape that goes past it, a shape wider than the diameter.
pub fn fit_together(v: &Table<'_>, m: &Table<'_>, vehicle: &Vehicle) -> Result<(), Problem> {
    if let Some(shape) = &vehicle.shape {
        let widest = shape
            .transitions
            .iter()
            .flat_map(|t| [t.diameter_ahead_m, t.diameter_behind_m])
            .fold(shape.nose.diameter_m, f64::max);
        if widest > vehicle.diameter_m.value * (1.0 + SAME_DIAMETER) {
            return Err(v.problem_with(
                "diameter",
                Problem::new(format!(
                    "the shapes are {:.1} mm wide, the vehicle {:.1} mm",
                    1e3 * widest,
                    1e3 * vehicle.diameter_m.value
                ))
                .expected("the largest body diameter: margins are counted in it")
                .remedy("write the largest diameter under [vehicle], or mend the shapes"),
            ));
        }
    }
    let Some(length) = vehicle.length_m else { return Ok(()) };
    let end_m = length.value + ROUNDED_M;
    let behind = |what: &str, station_m: f64| {
        Problem::new(format!("{what} at {station_m:.3} m lies behind the aft end at {:.3} m", length.value))
            .expected("stations from the nose tip, within the vehicle's length")
            .remedy("check the units and that it is measured from the nose tip")
    };
    let stations = [
        (v, "airframe_cg", Some(vehicle.airframe_cg_m)),
        (v, "cp", vehicle.cp_m),
        (m, "hardware_cg", Some(vehicle.motor.hardware_cg_m)),
        (m, "propellant_cg", Some(vehicle.motor.propellant_cg_m)),
    ];
    for (table, key, station) in stations {
        if let Some(station) = station.filter(|s| s.value > end_m) {
            return Err(table.problem_with(key, behind(key, station.value)));
        }
    }
    let Some(shape) = &vehicle.shape else { return Ok(()) };
    let ends = std::iter::once(("the nose's end", shape.nose.length_m))
        .chain(shape.transitions.iter().map(|t| ("a transition's end", t.station_m + t.length_m)))
        .chain(shape.fins.iter().map(|f| ("a fin root's end", f.station_m + f.root_chord_m)));
    for (what, station_m) in ends {
        if station_m > end_m {
            return Err(v.problem_with("length", behind(what, station_m)));
        }
    }
    Ok(())
}
