//! What a person reads: SI or US customary units, rounded by the uncertainty.

use crate::firing::Figure;
use crate::quantity::STANDARD_GRAVITY_M_S2;

/// Units on the screen, in pictures and on the page. Files for machines stay SI.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Units {
    #[default]
    Si,
    Us,
}

/// Unit on display: `shown = value_si / size_si`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shown {
    pub symbol: &'static str,
    pub size_si: f64,
}

const fn shown(symbol: &'static str, size_si: f64) -> Shown {
    Shown { symbol, size_si }
}

// Exact by definition: the international pound and foot (1959).
const POUND_KG: f64 = 0.453_592_37;
const FOOT_M: f64 = 0.3048;
const INCH_M: f64 = 0.0254;
const POUND_FORCE_N: f64 = POUND_KG * STANDARD_GRAVITY_M_S2;
const PSI_PA: f64 = POUND_FORCE_N / (INCH_M * INCH_M);

impl Units {
    pub fn force(self) -> Shown {
        match self {
            Units::Si => shown("N", 1.0),
            Units::Us => shown("lbf", POUND_FORCE_N),
        }
    }

    pub fn pressure(self) -> Shown {
        match self {
            Units::Si => shown("MPa", 1e6),
            Units::Us => shown("psi", PSI_PA),
        }
    }

    /// Unit to show a figure in: the UCUM code of the contract, and its size where that decides (grams below 1 kg).
    pub fn of(self, code: &str, value: f64) -> Shown {
        match (self, code) {
            (_, "s") => shown("s", 1.0),
            (_, "1") => shown("", 1.0),
            (_, "N") => self.force(),
            (_, "Pa") => self.pressure(),
            (Units::Si, "N.s") => shown("N·s", 1.0),
            (Units::Us, "N.s") => shown("lbf·s", POUND_FORCE_N),
            (Units::Si, "kg") if value.abs() < 1.0 => shown("g", 1e-3),
            (Units::Si, "kg") => shown("kg", 1.0),
            (Units::Us, "kg") => shown("lb", POUND_KG),
            // A burn rate is some millimetres a second; the other speeds of a motor are hundreds of metres a second.
            (Units::Si, "m/s") if value.abs() < 1.0 => shown("mm/s", 1e-3),
            (Units::Us, "m/s") if value.abs() < 1.0 => shown("in/s", INCH_M),
            (Units::Si, "m/s") => shown("m/s", 1.0),
            (Units::Us, "m/s") => shown("ft/s", FOOT_M),
            _ => shown("(SI)", 1.0),
        }
    }
}

/// A figure in words: its number, the 95 % half-width in the same unit where known, and the unit.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Words {
    /// `812.4`, or `≥ 812.4` for a lower bound.
    pub value: String,
    /// `4.1`, or `+4.1 −3.0` where the interval is lopsided; empty where it is not known.
    pub half_width: String,
    pub unit: &'static str,
}

impl Words {
    /// `812.4 ± 4.1 N·s`; without the ± where it is not known.
    pub fn line(&self) -> String {
        let mut text = self.value.clone();
        if !self.half_width.is_empty() {
            text.push_str(if self.half_width.starts_with('+') { " " } else { " ± " });
            text.push_str(&self.half_width);
        }
        if !self.unit.is_empty() {
            text.push(' ');
            text.push_str(self.unit);
        }
        text
    }
}

/// Half-widths that differ by more than this share are both shown.
const LOPSIDED: f64 = 0.1;
/// Digits of a figure whose uncertainty is not known.
const DIGITS_WITHOUT_UNCERTAINTY: i32 = 4;
/// Significant digits of a half-width.
const DIGITS_OF_UNCERTAINTY: i32 = 2;

/// Rounds a figure for a person: the half-width to two significant digits, the value to the same decimal place.
pub fn words(figure: &Figure, units: Units) -> Words {
    let unit = units.of(&figure.unit, figure.value);
    let value = figure.value / unit.size_si;
    let widths = figure
        .interval_95
        .map(|[low, high]| [(figure.value - low) / unit.size_si, (high - figure.value) / unit.size_si])
        .filter(|widths| widths.iter().all(|w| w.is_finite() && *w >= 0.0) && widths[0] + widths[1] > 0.0);
    let decimals = match widths {
        Some(widths) => decimals_for((widths[0] + widths[1]) / 2.0, DIGITS_OF_UNCERTAINTY),
        None => decimals_for(value, DIGITS_WITHOUT_UNCERTAINTY),
    };
    let half_width = match widths {
        None => String::new(),
        Some([below, above]) if (above - below).abs() > LOPSIDED * (above + below) / 2.0 => {
            format!("+{} −{}", fixed(above, decimals), fixed(below, decimals))
        }
        Some([below, above]) => fixed((below + above) / 2.0, decimals),
    };
    let bound = match figure.bound.as_deref() {
        Some("lower") => "≥ ",
        Some("upper") => "≤ ",
        Some(_) => "bound ",
        None => "",
    };
    Words { value: format!("{bound}{}", fixed(value, decimals)), half_width, unit: unit.symbol }
}

/// Decimal places that leave `digits` significant digits of `size`; negative where tens or hundreds are rounded away.
fn decimals_for(size: f64, digits: i32) -> i32 {
    if size == 0.0 || !size.is_finite() {
        return digits;
    }
    let place = |size: f64| digits - 1 - size.abs().log10().floor() as i32;
    let decimals = place(size);
    // 0.0996 rounds up to 0.10: one place fewer then, or it would show three digits.
    let step = 10_f64.powi(-decimals);
    place((size / step).round() * step * (1.0 + 1e-12))
}

/// A number to so many decimal places; tens and hundreds are rounded where the places are negative.
pub fn fixed(value: f64, decimals: i32) -> String {
    let text = if decimals >= 0 {
        format!("{value:.places$}", places = decimals.min(12) as usize)
    } else {
        let step = 10_f64.powi(-decimals);
        format!("{:.0}", (value / step).round() * step)
    };
    // Minus zero says nothing to a person.
    if text.starts_with('-') && !text.contains(|c: char| ('1'..='9').contains(&c)) {
        text[1..].to_owned()
    } else {
        text
    }
}

/// A share from 0 to 1 in whole percent; a small one is not rounded to nothing, nor one near 1 to certainty.
pub fn percent(share: f64) -> String {
    if share > 0.0 && share < 0.01 {
        "under 1 %".to_owned()
    } else if share < 1.0 && share > 0.99 {
        "over 99 %".to_owned()
    } else {
        format!("{} %", fixed(share * 100.0, 0))
    }
}

/// A plain number to so many significant digits.
pub fn significant(value: f64, digits: i32) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    fixed(value, decimals_for(value, digits))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample::figure;

    #[test]
    fn the_uncertainty_decides_the_digits() {
        for (value, u, expected) in [
            (812.437, 2.04, "812.4 ± 4.0 N·s"),
            (812.437, 0.0203, "812.437 ± 0.040 N·s"),
            (812.437, 30.0, "812 ± 59 N·s"),
            (81_243.7, 300.0, "81240 ± 590 N·s"),
            (812.437, 0.0508, "812.44 ± 0.10 N·s"),
        ] {
            assert_eq!(words(&figure(value, "N.s", u), Units::Si).line(), expected);
        }
    }

    #[test]
    fn what_is_not_known_is_left_out_and_bounds_are_said() {
        let mut total = figure(812.437, "N.s", 2.0);
        total.interval_95 = None;
        assert_eq!(words(&total, Units::Si).line(), "812.4 N·s");
        total.bound = Some("lower".to_owned());
        assert_eq!(words(&total, Units::Si).line(), "≥ 812.4 N·s");
        total.interval_95 = Some([811.0, 820.0]);
        assert_eq!(words(&total, Units::Si).line(), "≥ 812.4 +7.6 −1.4 N·s");
    }

    #[test]
    fn customary_units_have_their_sizes() {
        // 1 lbf = 4.448 221 615 260 5 N and 1 psi = 6 894.757 Pa, NIST SP 811 appendix B.
        assert!((POUND_FORCE_N - 4.448_221_615_260_5).abs() < 1e-12);
        assert!((PSI_PA - 6_894.757_293_168).abs() < 1e-6);
        assert_eq!(words(&figure(444.822_16, "N.s", 0.444_82), Units::Us).line(), "100.00 ± 0.20 lbf·s");
        assert_eq!(words(&figure(1524.0, "m/s", 15.24), Units::Us).line(), "5000 ± 98 ft/s");
        assert_eq!(words(&figure(6.894_757e6, "Pa", 6894.757), Units::Us).line(), "1000.0 ± 2.0 psi");
        assert_eq!(words(&figure(0.4123, "kg", 0.0003), Units::Si).line(), "412.30 ± 0.59 g");
        assert_eq!(words(&figure(0.006, "m/s", 0.0001), Units::Si).line(), "6.00 ± 0.20 mm/s");
    }

    #[test]
    fn plain_numbers() {
        assert_eq!(significant(0.0, 3), "0");
        assert_eq!(significant(1234.5, 2), "1200");
        assert_eq!(fixed(-0.001, 1), "0.0");
        assert_eq!(
            [0.0, 0.002, 0.03, 0.97, 0.998, 1.0].map(percent).join(", "),
            "0 %, under 1 %, 3 %, 97 %, over 99 %, 100 %"
        );
        assert_eq!(significant(0.099_96, 2), "0.10");
    }
}
