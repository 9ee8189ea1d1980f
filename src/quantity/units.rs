//! Every unit the program knows, with its exact factor to SI.
//!
//! Exact by definition: inch, foot, pound (international yard and pound agreement of 1959: 0.0254 m, 0.3048 m,
//! 0.45359237 kg), standard gravity (CGPM 3, 1901), bar, degree. Listed in NIST SP 811, appendix B.

use super::{Dimension, Unit};
use crate::problem::Problem;
use std::sync::LazyLock;

/// Standard gravity, m/s2, exact.
pub const STANDARD_GRAVITY_M_S2: f64 = 9.80665;
/// Where it comes from.
pub const STANDARD_GRAVITY_SOURCE: &str = "standard gravity, 9.80665 m/s2 (CGPM 3, 1901)";

const LB_KG: f64 = 0.45359237;
const INCH_M: f64 = 0.0254;
const FOOT_M: f64 = 0.3048;
const LBF_N: f64 = LB_KG * STANDARD_GRAVITY_M_S2;

/// The unit forces are kept in.
pub const NEWTONS: Unit = unit("N", Dimension::Force, 1.0);

const fn unit(symbol: &'static str, dimension: Dimension, factor: f64) -> Unit {
    Unit { symbol, dimension, factor, offset: 0.0 }
}

const PLAIN: &[Unit] = &[
    NEWTONS,
    unit("kN", Dimension::Force, 1e3),
    unit("mN", Dimension::Force, 1e-3),
    unit("lbf", Dimension::Force, LBF_N),
    unit("kgf", Dimension::Force, STANDARD_GRAVITY_M_S2),
    unit("gf", Dimension::Force, STANDARD_GRAVITY_M_S2 * 1e-3),
    unit("kg", Dimension::Mass, 1.0),
    unit("g", Dimension::Mass, 1e-3),
    unit("mg", Dimension::Mass, 1e-6),
    unit("lb", Dimension::Mass, LB_KG),
    unit("oz", Dimension::Mass, LB_KG / 16.0),
    unit("m", Dimension::Length, 1.0),
    unit("cm", Dimension::Length, 1e-2),
    unit("mm", Dimension::Length, 1e-3),
    unit("km", Dimension::Length, 1e3),
    unit("in", Dimension::Length, INCH_M),
    unit("ft", Dimension::Length, FOOT_M),
    unit("s", Dimension::Time, 1.0),
    unit("ms", Dimension::Time, 1e-3),
    unit("us", Dimension::Time, 1e-6),
    unit("min", Dimension::Time, 60.0),
    unit("V", Dimension::Voltage, 1.0),
    unit("mV", Dimension::Voltage, 1e-3),
    unit("uV", Dimension::Voltage, 1e-6),
    unit("mV/V", Dimension::VoltageRatio, 1e-3),
    unit("V/V", Dimension::VoltageRatio, 1.0),
    unit("count", Dimension::Count, 1.0),
    unit("Pa", Dimension::Pressure, 1.0),
    unit("hPa", Dimension::Pressure, 1e2),
    unit("kPa", Dimension::Pressure, 1e3),
    unit("MPa", Dimension::Pressure, 1e6),
    unit("mbar", Dimension::Pressure, 1e2),
    unit("bar", Dimension::Pressure, 1e5),
    unit("psi", Dimension::Pressure, LBF_N / (INCH_M * INCH_M)),
    unit("K", Dimension::Temperature, 1.0),
    Unit { symbol: "degC", dimension: Dimension::Temperature, factor: 1.0, offset: 273.15 },
    // T_K = (t_F + 459.67) * 5/9
    Unit { symbol: "degF", dimension: Dimension::Temperature, factor: 5.0 / 9.0, offset: 459.67 * 5.0 / 9.0 },
    unit("deg", Dimension::Angle, std::f64::consts::PI / 180.0),
    unit("rad", Dimension::Angle, 1.0),
    unit("m/s", Dimension::Speed, 1.0),
    unit("ft/s", Dimension::Speed, FOOT_M),
    unit("m/s2", Dimension::Acceleration, 1.0),
    unit("ft/s2", Dimension::Acceleration, FOOT_M),
    unit("kg/m3", Dimension::Density, 1.0),
    unit("g/cm3", Dimension::Density, 1e3),
    unit("Hz", Dimension::Frequency, 1.0),
    unit("kHz", Dimension::Frequency, 1e3),
    unit("%", Dimension::Ratio, 1e-2),
    unit("1", Dimension::Ratio, 1.0),
];

/// Slopes: what a reading is worth, for each unit of force, mass or pressure.
macro_rules! slopes {
    ($list:ident, $count:ident, $volt:ident, $ratio:ident, $($symbol:literal => $factor:expr),+) => {
        $(
            $list.push(unit(concat!($symbol, "/count"), Dimension::$count, $factor));
            $list.push(unit(concat!($symbol, "/V"), Dimension::$volt, $factor));
            $list.push(unit(concat!($symbol, "/mV"), Dimension::$volt, $factor * 1e3));
            $list.push(unit(concat!($symbol, "/(mV/V)"), Dimension::$ratio, $factor * 1e3));
        )+
    };
}

static UNITS: LazyLock<Vec<Unit>> = LazyLock::new(|| {
    let mut list = PLAIN.to_vec();
    slopes!(list, ForcePerCount, ForcePerVolt, ForcePerVoltageRatio,
        "N" => 1.0, "kN" => 1e3, "lbf" => LBF_N, "kgf" => STANDARD_GRAVITY_M_S2, "gf" => STANDARD_GRAVITY_M_S2 * 1e-3);
    slopes!(list, MassPerCount, MassPerVolt, MassPerVoltageRatio,
        "kg" => 1.0, "g" => 1e-3, "lb" => LB_KG);
    slopes!(list, PressurePerCount, PressurePerVolt, PressurePerVoltageRatio,
        "Pa" => 1.0, "kPa" => 1e3, "MPa" => 1e6, "bar" => 1e5, "psi" => LBF_N / (INCH_M * INCH_M));
    list
});

/// Every unit known, in the order a person would look them up.
pub fn all() -> &'static [Unit] {
    &UNITS
}

/// The unit written so; spellings that can mean nothing else (`m/s^2`, `µs`, `°C`, `lbs`, `counts`) are understood.
pub fn find(text: &str) -> Option<Unit> {
    let mut symbol = text.trim().replace(['µ', 'μ'], "u").replace('²', "2").replace('³', "3").replace('^', "");
    symbol.retain(|letter| !letter.is_whitespace());
    let symbol = match symbol.as_str() {
        "°C" | "℃" => "degC",
        "°F" => "degF",
        "°" | "º" => "deg",
        "lbs" => "lb",
        "counts" | "cnt" | "cnts" => "count",
        "sec" => "s",
        other => other,
    };
    all().iter().find(|unit| unit.symbol == symbol).copied()
}

/// The units whose symbols are most like the text, best first, at most three.
pub fn nearest(text: &str, dimension: Option<Dimension>) -> Vec<&'static str> {
    let lower = text.trim().to_lowercase();
    let mut scored: Vec<(f64, &'static str)> = all()
        .iter()
        .filter(|unit| dimension.is_none_or(|wanted| wanted == unit.dimension))
        .map(|unit| {
            let alike = strsim::jaro_winkler(&lower, &unit.symbol.to_lowercase());
            // a bonus keeps `n` next to `N` and `Kn` next to `kN`
            let same_letters = if lower == unit.symbol.to_lowercase() { 1.0 } else { 0.0 };
            (alike + same_letters, unit.symbol)
        })
        .filter(|(score, _)| *score > 0.55)
        .collect();
    scored.sort_by(|a, b| b.0.total_cmp(&a.0));
    scored.into_iter().take(3).map(|(_, symbol)| symbol).collect()
}

/// The refusal of a unit that is not known: names the nearest ones, else those of the dimension wanted.
pub fn unknown_unit(text: &str, dimension: Option<Dimension>) -> Problem {
    if text.contains("FILL IN") {
        return Problem::new("this place is not filled in yet")
            .expected(dimension.map_or("a unit", Dimension::words))
            .remedy("put in what was measured; the comment beside it says what belongs there");
    }
    let mut close = nearest(text, dimension);
    if close.is_empty() {
        close = nearest(text, None);
    }
    let known: Vec<&str> = all()
        .iter()
        .filter(|unit| dimension.is_none_or(|wanted| wanted == unit.dimension))
        .map(|unit| unit.symbol)
        .collect();
    let problem = Problem::new(format!("unit \"{}\" is not known", text.trim()));
    let problem = match dimension {
        Some(dimension) => problem.expected(format!("{} in one of: {}", dimension.words(), known.join(", "))),
        None => problem,
    };
    match close.as_slice() {
        [] => problem.remedy("use a unit of the list; capitals count"),
        [one] => problem.remedy(format!("did you mean {one}? Capitals count")),
        several => problem.remedy(format!("did you mean {}? Capitals count", several.join(" or "))),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn factor(symbol: &str) -> f64 {
        find(symbol).unwrap_or_else(|| panic!("{symbol} is missing")).factor
    }

    /// Exact definitions and products: NIST SP 811, appendix B. Products may round by one unit in the last place.
    #[test]
    fn factors_are_the_exact_definitions() {
        let expected = [
            ("lbf", 4.4482216152605),
            ("kgf", 9.80665),
            ("gf", 0.00980665),
            ("lb", 0.45359237),
            ("oz", 0.028349523125),
            ("in", 0.0254),
            ("ft", 0.3048),
            ("psi", 6894.757293168361),
            ("bar", 1e5),
            ("ft/s", 0.3048),
            ("min", 60.0),
            ("mV/V", 1e-3),
            ("N/(mV/V)", 1e3),
            ("N/mV", 1e3),
            ("%", 0.01),
        ];
        for (symbol, value) in expected {
            assert!((factor(symbol) / value - 1.0).abs() < 4.0 * f64::EPSILON, "{symbol}");
        }
    }

    #[test]
    fn every_unit_of_the_contract_is_known() {
        let listed = "N kN lbf kgf gf kg g lb oz m cm mm in ft s ms us min V mV uV mV/V count N/count N/V Pa hPa kPa \
                      MPa bar psi degC degF K deg m/s ft/s m/s2 kg/m3 Hz kHz % 1 N/(mV/V)";
        for symbol in listed.split_whitespace() {
            assert!(find(symbol).is_some(), "{symbol}");
        }
    }

    #[test]
    fn symbols_are_unique() {
        let mut seen = std::collections::BTreeSet::new();
        for unit in all() {
            assert!(seen.insert(unit.symbol), "{} twice", unit.symbol);
        }
    }

    #[test]
    fn an_unknown_unit_names_its_neighbours() {
        assert_eq!(nearest("Newton", Some(Dimension::Force)).first(), Some(&"N"));
        assert_eq!(nearest("lbsf", None).first(), Some(&"lbf"));
        assert_eq!(nearest("kn", None).first(), Some(&"kN"));
        let text = unknown_unit("grm", Some(Dimension::Mass)).to_string();
        assert!(text.contains("did you mean g"), "{text}");
    }

    #[test]
    fn a_place_not_filled_in_is_told_as_such() {
        assert_eq!(find("cnt").map(|unit| unit.symbol), Some("count"));
        assert!(unknown_unit("FILL IN: count, V", None).found.contains("not filled in"));
        assert!(unknown_unit("furlong", None).found.contains("not known"));
    }
}
