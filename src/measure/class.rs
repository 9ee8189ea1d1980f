//! Motor class by total impulse: the letter bands, upper edges inclusive.
//!
//! Source: letter system of NFPA 1122/1125/1127 (doubling bands), read in public secondary tables; the exact edges below A
//! are from memory and consistent with the rounded printed ones.

use crate::firing::MotorClass;
use std::collections::BTreeMap;

/// Upper edge of A, N.s; each letter's is twice the one before.
const UPPER_EDGE_OF_A: f64 = 2.5;
/// Names below A, with their upper edges in N.s.
const BELOW_A: [(&str, f64); 3] = [("1/8A", 0.3125), ("1/4A", 0.625), ("1/2A", 1.25)];

/// One band.
#[derive(Debug, Clone, PartialEq)]
pub struct Band {
    pub letter: String,
    /// Exclusive, N.s.
    pub lower: f64,
    /// Inclusive, N.s.
    pub upper: f64,
}

/// Letters A to Z, then AA to AZ and on, since the letter system ends at Z but the doubling does not.
fn letter(mut index: u32) -> String {
    let mut name = String::new();
    loop {
        name.insert(0, char::from(b'A' + (index % 26) as u8));
        if index < 26 {
            return name;
        }
        index = index / 26 - 1;
    }
}

/// The band an impulse falls into; `None` when it is not positive and finite.
pub fn band(impulse: f64) -> Option<Band> {
    if !(impulse > 0.0 && impulse.is_finite()) {
        return None;
    }
    let mut lower = 0.0;
    for (name, upper) in BELOW_A {
        if impulse <= upper {
            return Some(Band { letter: name.to_string(), lower, upper });
        }
        lower = upper;
    }
    let mut upper = UPPER_EDGE_OF_A;
    let mut index = 0;
    while impulse > upper {
        lower = upper;
        upper *= 2.0;
        index += 1;
    }
    Some(Band { letter: letter(index), lower, upper })
}

/// Class of a motor; probabilities as the shares of `trials` of the impulse, where there are any.
pub fn classify(impulse: f64, trials: Option<&[f64]>, average_thrust_n: f64) -> Option<MotorClass> {
    let own = band(impulse)?;
    let probability = trials.filter(|t| !t.is_empty()).map(|trials| {
        let mut counts: BTreeMap<String, usize> = BTreeMap::new();
        let mut last: Option<Band> = None;
        for trial in trials {
            // Most trials fall into the band of the one before.
            if !last.as_ref().is_some_and(|b| *trial > b.lower && *trial <= b.upper) {
                last = band(*trial);
            }
            if let Some(band) = &last {
                match counts.get_mut(&band.letter) {
                    Some(count) => *count += 1,
                    None => drop(counts.insert(band.letter.clone(), 1)),
                }
            }
        }
        let n = trials.len() as f64;
        counts.into_iter().map(|(letter, count)| (letter, count as f64 / n)).collect()
    });
    Some(MotorClass {
        designation: format!("{}{:.0}", own.letter, average_thrust_n),
        position: (impulse - own.lower) / (own.upper - own.lower),
        letter: own.letter,
        probability,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reference() -> serde_json::Value {
        serde_json::from_str(include_str!("../../tests/reference/item05_motor_classes.json")).expect("reference")
    }

    /// tests/reference/item05_motor_classes.json: public tables; 1/8A to 1/2A from memory there.
    #[test]
    fn edge_cases_of_the_public_tables() {
        for case in reference()["edge_cases"].as_array().expect("cases") {
            let impulse = case["total_impulse_Ns"].as_f64().expect("impulse");
            assert_eq!(band(impulse).expect("band").letter, case["class"].as_str().expect("class"), "{impulse}");
        }
    }

    #[test]
    fn every_band_of_the_public_tables() {
        let reference = reference();
        let bands = reference["bands"].as_array().expect("bands");
        assert!(bands.len() >= 22);
        for row in bands {
            let upper = row["upper_inclusive_Ns"].as_f64().expect("upper");
            let b = band(upper).expect("band");
            assert_eq!(b.letter, row["letter"].as_str().expect("letter"));
            assert!((b.upper - upper).abs() < 1e-9 * upper);
            assert!((b.lower - row["lower_exclusive_Ns"].as_f64().expect("lower")).abs() < 1e-9 * upper);
        }
    }

    #[test]
    fn beyond_the_letters_and_beside_them() {
        assert_eq!(band(2.5 * 2f64.powi(25)).expect("band").letter, "Z");
        assert_eq!(band(2.5 * 2f64.powi(26)).expect("band").letter, "AA");
        assert_eq!(band(2.5 * 2f64.powi(52)).expect("band").letter, "BA");
        assert_eq!(band(0.0), None);
        assert_eq!(band(f64::NAN), None);
    }

    #[test]
    fn probability_is_shared_between_neighbours_at_an_edge() {
        let trials: Vec<f64> = (0..1000).map(|i| 630.0 + 0.02 * f64::from(i)).collect();
        let class = classify(640.0, Some(&trials), 150.2).expect("class");
        assert_eq!((class.letter.as_str(), class.designation.as_str()), ("I", "I150"));
        assert!((class.position - 1.0).abs() < 1e-12);
        // The upper edge, 640, belongs to I: 501 of the trials are at or below it.
        let p = class.probability.expect("probability");
        assert!((p["I"] - 0.501).abs() < 1e-9 && (p["J"] - 0.499).abs() < 1e-9, "{p:?}");
        let sure = classify(500.0, Some(&trials[..10]), 100.0).expect("class").probability.expect("probability");
        assert_eq!(sure.get("I"), Some(&1.0));
    }
}
