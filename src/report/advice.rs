//! What to do about a check that did not pass, and the cautions every report carries.

/// One sentence of advice for a check of the contract.
pub fn for_check(id: &str) -> Option<&'static str> {
    Some(match id {
        "clipping" => "lower the gain or use a larger cell, and fire again; impulse and peak are lower bounds",
        "overload" => "calibrate the cell anew before its next use; a cell beyond its capacity may have bent",
        "calibration_range" => "calibrate with weights beyond the peak thrust",
        "calibration_quality" => "repeat the calibration up and down with better known weights",
        "baseline_before" => "record at least some seconds of quiet before ignition",
        "baseline_after" => "let the record run on until the stand is quiet again",
        "baseline_shift" => "look at the mounting and the orientation under [stand]; keep heat away from the cell",
        "sampling" => "sample faster: 80 samples a second or more",
        "gaps" => "look for a loose connector or a slow memory card; figures across a gap are guesses",
        "repairs" => "look at the lines named in the report; shield the cable if they are many",
        "ringing" => "stiffen the stand; a tap test for [stand] natural_frequency makes this surer",
        "noise" => "shield and ground the cell's cable; sample faster",
        "polarity" => "give the calibration the sign the stand has, or mount the cell the other way round",
        "propellant_mass" => "look at baseline_shift and at what may have fallen off; weigh the motor before and after",
        "check_load" => "calibrate again: the known weight did not read as it should",
        "other_bursts" => "see that the right burst was taken; [reduction] burst = N chooses another",
        "override" => "a person set this by hand; leave it out of run.toml to let the record decide",
        _ => return None,
    })
}

/// The short caution of the summary.
pub const SHORT_CAUTION: [&str; 2] = [
    "A measured motor is not a certified one. The range's safety code and local",
    "law rule; stay behind a barricade, fire remotely, wait out a misfire.",
];

/// The cautions of the page. Common practice, no source, where no rule is named: the range's own rules come first.
pub const CAUTIONS: [&str; 6] = [
    "A measured motor is not a certified one: these figures describe one firing, and the next motor may behave otherwise.",
    "Nobody stands near a live motor. Keep the distance that the range's safety code sets, behind a barricade.",
    "Ignite remotely, with the igniter's circuit shorted and locked until everyone is clear.",
    "After a misfire disconnect the igniter and wait as long as the safety code says before anyone goes near.",
    "Local law, the range's safety code and licensed practice decide who may make, hold and fire a motor; this report does not.",
    "The figures are no better than the calibration and the record: read the checks before relying on them.",
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_check_of_the_contract_has_advice() {
        let ids = "clipping overload calibration_range calibration_quality baseline_before baseline_after baseline_shift \
                   sampling gaps repairs ringing noise polarity propellant_mass check_load other_bursts override";
        for id in ids.split_whitespace() {
            assert!(for_check(id).is_some(), "{id}");
        }
        assert_eq!(for_check("no_such_check"), None);
    }

    #[test]
    fn the_short_caution_fits_the_screen() {
        assert!(SHORT_CAUTION.iter().all(|line| line.chars().count() <= 78));
    }
}
