//! Dead weights to forces, and how the weights' own errors move them.

use crate::quantity::Measured;

/// Density of the air weights are adjusted in by convention, kg/m3 (OIML D 28).
pub(super) const AIR_DENSITY_KG_M3: f64 = 1.2;
/// Limits of the air's density about that, as a fraction: weather and heights to about a kilometre (from memory).
pub(super) const AIR_DENSITY_LIMITS: f64 = 0.10;
/// Density of a weight by convention, kg/m3 (OIML D 28).
pub(super) const CONVENTIONAL_DENSITY_KG_M3: f64 = 8000.0;

/// How the errors of the weights hang together.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum WeightErrors {
    Each,
    Stack,
    Common,
}

/// Limits of a weight's error: of its mass, or in newtons.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Tolerance {
    Relative(Measured),
    ForceN(Measured),
}

impl Tolerance {
    /// Standard uncertainty of one piece that pulls with this force, N. A piece that is not there has no error.
    fn standard_n(&self, piece_n: f64) -> f64 {
        // a stated tolerance is limits even without the sign ±
        let standard = |measured: &Measured| measured.standard_uncertainty.unwrap_or(measured.value / 3f64.sqrt());
        match self {
            Tolerance::Relative(relative) => standard(relative) * piece_n.abs(),
            Tolerance::ForceN(_) if piece_n == 0.0 => 0.0,
            Tolerance::ForceN(force) => standard(force),
        }
    }
}

/// Force of a weight, N.
///
/// # Formula
/// F = m g (1 − ρa/ρ) (ASTM E4, E74): m mass, g local gravity, ρa = 1.2 kg/m3, ρ density of the weight. At that ρa a
/// conventional mass (OIML D 28) pulls as a mass of density 8000 kg/m3 does, whatever it is made of; so without a
/// stated density the listed masses are conventional, and with one they are true masses.
pub(super) fn force_n(mass_kg: f64, gravity_m_s2: f64, density_kg_m3: f64) -> f64 {
    mass_kg * gravity_m_s2 * (1.0 - AIR_DENSITY_KG_M3 / density_kg_m3)
}

/// Standard uncertainty of the air's density, relative to the force it leaves.
pub(super) fn buoyancy_relative(density_kg_m3: f64) -> f64 {
    let lift = AIR_DENSITY_KG_M3 / density_kg_m3;
    AIR_DENSITY_LIMITS / 3f64.sqrt() * lift / (1.0 - lift)
}

/// Distinct forces in rising order, and the place of each point's force among them.
pub(super) fn levels(forces_n: &[f64]) -> (Vec<f64>, Vec<usize>) {
    let mut distinct = forces_n.to_vec();
    distinct.sort_by(f64::total_cmp);
    let largest = forces_n.iter().fold(0.0f64, |largest, force| largest.max(force.abs()));
    // far below any tolerance, far above rounding
    let same = 1e-9 * largest;
    distinct.dedup_by(|next, kept| (*next - *kept).abs() <= same);
    let place = |force: &f64| distinct.iter().position(|level| (level - force).abs() <= same).unwrap_or(0);
    let places = forces_n.iter().map(place).collect();
    (distinct, places)
}

/// Independent errors of the weights: what one standard uncertainty of each does to the force of every point, N.
///
/// `Each`: one error a distinct weight, the same whenever it hangs. `Stack`: weights are added in turn, so that each
/// piece's error stays in all heavier loads. `Common`: one error shared by all.
pub(super) fn independent_errors(forces_n: &[f64], tolerance: &Tolerance, errors: WeightErrors) -> Vec<Vec<f64>> {
    let (distinct, places) = levels(forces_n);
    let shifts: Vec<Vec<f64>> = match errors {
        WeightErrors::Each => (0..distinct.len())
            .map(|at| {
                places.iter().map(|place| if *place == at { tolerance.standard_n(distinct[at]) } else { 0.0 }).collect()
            })
            .collect(),
        WeightErrors::Stack => (0..distinct.len())
            .map(|at| {
                let below = if at == 0 { 0.0 } else { distinct[at - 1] };
                let shift = tolerance.standard_n(distinct[at] - below);
                places.iter().map(|place| if *place >= at { shift } else { 0.0 }).collect()
            })
            .collect(),
        WeightErrors::Common => {
            vec![forces_n.iter().map(|force| tolerance.standard_n(*force).copysign(*force)).collect()]
        }
    };
    shifts.into_iter().filter(|shift| shift.iter().any(|change| *change != 0.0)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    const TOLERANCE: Tolerance =
        Tolerance::Relative(Measured { value: 0.0005, standard_uncertainty: None, limits: None });

    #[test]
    fn each_weight_errs_alike_up_and_down() {
        let errors = independent_errors(&[0.0, 10.0, 20.0, 20.0, 10.0, 0.0], &TOLERANCE, WeightErrors::Each);
        let u = 0.0005 / 3f64.sqrt();
        assert_eq!(errors.len(), 2);
        assert_eq!(errors[0], vec![0.0, 10.0 * u, 0.0, 0.0, 10.0 * u, 0.0]);
    }

    #[test]
    fn a_stack_gathers_the_errors_of_its_pieces() {
        let errors = independent_errors(&[0.0, 10.0, 20.0, 30.0], &TOLERANCE, WeightErrors::Stack);
        let at_top: f64 = errors.iter().map(|error| error[3] * error[3]).sum::<f64>().sqrt();
        // three equal pieces: √3 times one
        assert!((at_top - 10.0 * 0.0005 / 3f64.sqrt() * 3f64.sqrt()).abs() < 1e-15);
        let common = independent_errors(&[0.0, 10.0, 30.0], &TOLERANCE, WeightErrors::Common);
        assert_eq!(common.len(), 1);
        assert!((common[0][2] - 3.0 * common[0][1]).abs() < 1e-15);
    }
}
