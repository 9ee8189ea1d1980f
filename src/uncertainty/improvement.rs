//! What to do about the largest sources of a figure's error, and what that would bring.

use crate::firing::{BudgetLine, Improvement};

/// A source with less than this share of the variance is no use to improve, unless it is the largest.
const WORTH_SHARE: f64 = 0.3;

/// What makes a source's error smaller, in at most 33 letters, so that it has room on a line of the screen.
fn remedy(source: &str) -> Option<&'static str> {
    Some(match source {
        "calibration fit" => "calibrate with more points",
        "weights" => "hang better known weights",
        "gravity" => "give gravity under [site]",
        "air buoyancy" => "calibrate with denser weights",
        "beyond the heaviest weight" => "calibrate up to the peak thrust",
        "stated accuracy" => "calibrate the cell with weights",
        "force ratio" => "measure the force ratio better",
        "clock" => "have the logger's clock checked",
        "propellant mass" => "weigh the propellant finer",
        "weighing" => "weigh the motor finer",
        "zero" => "record more quiet around the burn",
        "zero before" => "record more quiet before ignition",
        "zero after" => "record more quiet after the burn",
        "course of the zero's drift" => "keep heat off cell and stand",
        "noise" => "shield the cable against noise",
        "noise at the peak" => "sample faster, with less noise",
        "sampling" => "sample faster",
        "interval ends" => "sample faster, with less noise",
        "ignition signal" => "sample the igniter faster",
        "tail beyond the record" => "record until the stand is quiet",
        "stand's response" => "log knocks on the loaded stand",
        "pressure scale" => "have the transducer calibrated",
        "air pressure" => "state air_pressure",
        "zero of the pressure" => "record more quiet before ignition",
        "course of the pressure's zero" => "keep heat off the transducer",
        "noise of the pressure" | "noise at the highest pressure" => "shield the transducer's cable",
        "throat diameter" => "measure the throat more exactly",
        "wear of the throat" => "use a throat that wears less",
        "end of the web" => "sample the pressure faster",
        "web thickness" => "measure the web more exactly",
        _ => return None,
    })
}

/// Adds to the largest lines of a figure's budget (sorted, largest first) what would make them smaller.
///
/// # Formula
/// With a source of share s of the variance halved, the half-width falls by the factor √(1 − ¾ s) (JCGM 100:2008 5.1.2; the
/// interval's factor taken as it is).
pub fn suggest(budget: &mut [BudgetLine], half_width_95: f64, unit: &str) {
    for (place, line) in budget.iter_mut().enumerate() {
        let Some(remedy) = remedy(&line.source).filter(|_| place == 0 || line.share >= WORTH_SHARE) else { continue };
        let halved = half_width_95 * (1.0 - 0.75 * line.share).max(0.0).sqrt();
        line.improvement = Some(Improvement {
            advice: format!(
                "{remedy}: half of this error would leave ± {} instead of ± {}{}{unit}",
                two_digits(halved),
                two_digits(half_width_95),
                if unit.is_empty() { "" } else { " " },
            ),
            remedy: remedy.to_string(),
            half_width_95_if_halved: halved,
        });
    }
}

/// A number to two significant digits.
pub fn two_digits(value: f64) -> String {
    let places = if value > 0.0 { (1.0 - value.log10().floor()).clamp(0.0, 12.0) as usize } else { 0 };
    format!("{value:.places$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(source: &str, share: f64) -> BudgetLine {
        BudgetLine { source: source.to_string(), standard_uncertainty: share.sqrt(), share, improvement: None }
    }

    #[test]
    fn the_largest_lines_say_what_would_help() {
        let mut budget = [line("weights", 0.64), line("noise", 0.32), line("clock", 0.04)];
        suggest(&mut budget, 2.0, "N.s");
        let first = budget[0].improvement.as_ref().expect("advice");
        // √(0.16 + 0.36) of the half-width is left when 64 % of the variance becomes 16 %.
        assert!((first.half_width_95_if_halved - 2.0 * 0.52f64.sqrt()).abs() < 1e-12);
        assert_eq!(
            first.advice,
            "hang better known weights: half of this error would leave ± 1.4 instead of ± 2.0 N.s"
        );
        assert!(budget[1].improvement.is_some() && budget[2].improvement.is_none());
    }

    #[test]
    fn a_source_without_a_remedy_is_left_alone() {
        let mut budget = [line("something else", 1.0)];
        suggest(&mut budget, 2.0, "N");
        assert_eq!(budget[0].improvement, None);
    }

    /// Every source of the reduction by its name there.
    #[test]
    fn every_source_has_a_remedy() {
        let text = concat!(include_str!("../reduce/sources.rs"), include_str!("../reduce/pressure.rs"));
        let named = text.split("Effect::of(\"").skip(1).chain(text.split("zero_effect(\"").skip(1));
        let names: Vec<&str> = named
            .chain(text.split("=> (\"").skip(1))
            .chain(text.split("relative(\"").skip(1))
            .chain(text.split("let source = \"").skip(1))
            .chain(text.split("level_effect(\"").skip(1))
            .filter_map(|rest| rest.split('"').next())
            // Nobody can measure it; it is the model's.
            .filter(|name| *name != "pressure outside the burn time")
            .collect();
        assert!(names.len() >= 25, "{names:?}");
        for name in names {
            assert!(remedy(name).is_some_and(|remedy| remedy.chars().count() <= 33), "{name}");
        }
    }

    #[test]
    fn digits() {
        assert_eq!([0.0123, 0.96, 12.34, 345.6, 0.0].map(two_digits), ["0.012", "0.96", "12", "346", "0"]);
    }
}
