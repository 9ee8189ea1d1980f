//! Quantity strings: `"412.3 g"`, `"412.3 ± 0.5 g"`, `"412.3 g (u 0.3 g)"`.

use super::{Dimension, Measured, Unit, units};
use crate::problem::Problem;

/// A quantity of the wanted dimension, in SI.
///
/// Limits after `±` or `+/-` are rectangular (u = a/√3, JCGM 100:2008, 4.3.7); `(u ...)` gives the standard uncertainty
/// itself. Neither carries the zero offset of a temperature scale. A ratio may go without a unit.
///
/// # Errors
/// No number, no unit, an unknown unit, another dimension, a value that is not finite or cannot be negative.
pub fn parse(text: &str, dimension: Dimension) -> Result<Measured, Problem> {
    let (measured, _) = parse_with(text, Some(dimension))?;
    Ok(measured)
}

/// A quantity of any dimension, in SI, with the unit it was written in.
///
/// # Errors
/// As [`parse`], without the check of the dimension.
pub fn parse_any(text: &str) -> Result<(Measured, Unit), Problem> {
    parse_with(text, None)
}

/// A plain decimal number; `None` for anything else, `inf` and `nan` included.
pub fn parse_number(text: &str) -> Option<f64> {
    let text = text.trim().replace('−', "-");
    let plain = text.bytes().all(|byte| byte.is_ascii_digit() || matches!(byte, b'+' | b'-' | b'.' | b'e' | b'E'));
    if !plain || !text.bytes().any(|byte| byte.is_ascii_digit()) {
        return None;
    }
    text.parse::<f64>().ok().filter(|value| value.is_finite())
}

fn parse_with(text: &str, dimension: Option<Dimension>) -> Result<(Measured, Unit), Problem> {
    let say = |problem: Problem| match dimension {
        Some(wanted) if problem.remedy.is_none() => problem
            .expected(format!("{} with its unit", wanted.words()))
            .remedy(format!("write it like {}", wanted.example())),
        None if problem.remedy.is_none() => problem.remedy("write a number and a unit, like \"412.3 ± 0.5 g\""),
        _ => problem,
    };
    let (body, standard) = split_standard_uncertainty(text).map_err(say)?;
    let (left, right) = split_limits(body);
    let (value, left_unit) = number_and_unit(left, text).map_err(say)?;
    let (limits, right_unit) = match right {
        Some(right) => {
            let (limits, unit) = number_and_unit(right, text).map_err(say)?;
            (Some(limits), unit)
        }
        None => (None, ""),
    };
    let written = match (left_unit, right_unit) {
        ("", unit) | (unit, "") => unit,
        (left, right) if left == right => left,
        (left, right) => {
            return Err(Problem::new(format!("\"{text}\" gives the value in {left} and its limits in {right}"))
                .expected("one unit for both")
                .remedy(format!("write both in {left}, with the unit once at the end")));
        }
    };
    let unit = resolve(written, dimension, text)?;
    if let Some(wanted) = dimension
        && unit.dimension != wanted
    {
        return Err(Problem::new(format!("\"{text}\" is {}", unit.dimension.words()))
            .expected(wanted.words())
            .remedy(format!("write it like {}", wanted.example())));
    }
    let si = value * unit.factor + unit.offset;
    if !si.is_finite() {
        return Err(Problem::new(format!("\"{text}\" is too large a number")).expected("a finite value"));
    }
    if si < 0.0 && unit.dimension.never_negative() {
        let found = if unit.dimension == Dimension::Temperature {
            format!("\"{text}\" is below absolute zero")
        } else {
            format!("\"{text}\" is negative")
        };
        return Err(say(Problem::new(found)));
    }
    let mut measured = Measured::of(si);
    if let Some(limits) = limits {
        if limits < 0.0 {
            return Err(Problem::new(format!("the limits of \"{text}\" are negative"))
                .remedy("write the half-width as a positive number"));
        }
        measured = Measured::within(si, limits * unit.factor);
    }
    if let Some(standard) = standard {
        if limits.is_some() {
            return Err(Problem::new(format!("\"{text}\" gives limits and a standard uncertainty"))
                .expected("one of the two")
                .remedy("keep ± for limits, or (u ...) for a standard uncertainty"));
        }
        measured.standard_uncertainty = Some(uncertainty_si(standard, unit, text)?);
    }
    Ok((measured, unit))
}

/// Takes `(u 0.3 g)` off the end.
fn split_standard_uncertainty(text: &str) -> Result<(&str, Option<&str>), Problem> {
    let trimmed = text.trim();
    let Some(inner) = trimmed.strip_suffix(')') else {
        return Ok((trimmed, None));
    };
    let Some(at) = inner.rfind("(u").filter(|at| inner[at + 2..].starts_with(char::is_whitespace)) else {
        // a bracket of a unit, as in N/(mV/V)
        return Ok((trimmed, None));
    };
    Ok((inner[..at].trim(), Some(inner[at + 2..].trim())))
}

fn uncertainty_si(text: &str, unit: Unit, whole: &str) -> Result<f64, Problem> {
    let (value, written) = number_and_unit(text, whole)?;
    let own = if written.is_empty() { unit } else { resolve(written, Some(unit.dimension), whole)? };
    if own.dimension != unit.dimension {
        return Err(Problem::new(format!("the uncertainty of \"{whole}\" is {}", own.dimension.words()))
            .expected(unit.dimension.words())
            .remedy(format!("give it in {}", unit.symbol)));
    }
    if value < 0.0 {
        return Err(
            Problem::new(format!("the uncertainty of \"{whole}\" is negative")).remedy("write it as a positive number")
        );
    }
    Ok(value * own.factor)
}

fn split_limits(text: &str) -> (&str, Option<&str>) {
    for mark in ["±", "+/-", "+-"] {
        if let Some((left, right)) = text.split_once(mark) {
            return (left.trim(), Some(right.trim()));
        }
    }
    (text.trim(), None)
}

/// Splits `412.3 g` into its number and the unit as written (empty when there is none).
fn number_and_unit<'a>(text: &'a str, whole: &str) -> Result<(f64, &'a str), Problem> {
    let text = text.trim();
    let mut end = 0;
    let mut seen_exponent = false;
    let mut previous = ' ';
    for (at, letter) in text.char_indices() {
        let belongs = match letter {
            '0'..='9' | '.' | ',' => true,
            '+' | '-' | '−' => at == 0 || matches!(previous, 'e' | 'E'),
            // an exponent only where digits follow; the e of a unit does not
            'e' | 'E' => {
                let rest = text[at + 1..].trim_start_matches(['+', '-', '−']);
                !seen_exponent && previous.is_ascii_digit() && rest.starts_with(|next: char| next.is_ascii_digit())
            }
            _ => false,
        };
        if !belongs {
            break;
        }
        seen_exponent |= matches!(letter, 'e' | 'E');
        previous = letter;
        end = at + letter.len_utf8();
    }
    let (number, unit) = (&text[..end], text[end..].trim());
    if number.contains(',') {
        return Err(Problem::new(format!("\"{whole}\" has a comma in its number"))
            .expected("a decimal point, and no separator of thousands")
            .remedy(format!("write \"{}\", if that is what it means", whole.replacen(',', ".", 1))));
    }
    match parse_number(number) {
        Some(value) => Ok((value, unit)),
        None => Err(Problem::new(format!("\"{whole}\" does not hold a finite number and a unit"))),
    }
}

fn resolve(written: &str, dimension: Option<Dimension>, whole: &str) -> Result<Unit, Problem> {
    if written.is_empty() {
        if dimension == Some(Dimension::Ratio)
            && let Some(one) = units::find("1")
        {
            return Ok(one);
        }
        let example = dimension.map_or("\"412.3 g\"", Dimension::example);
        let problem = Problem::new(format!("\"{whole}\" has no unit"));
        let problem = match dimension {
            Some(dimension) => problem.expected(format!("{} with its unit", dimension.words())),
            None => problem,
        };
        return Err(problem.remedy(format!("write the unit after the number, like {example}")));
    }
    units::find(written).ok_or_else(|| units::unknown_unit(written, dimension))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn plain_limits_and_standard_uncertainty() {
        let plain = parse("412.3 g", Dimension::Mass).unwrap();
        assert!((plain.value - 0.4123).abs() < 1e-15);
        assert_eq!((plain.standard_uncertainty, plain.limits), (None, None));
        for text in ["412.3 ± 0.5 g", "412.3 +/- 0.5 g", "412.3 g ± 0.5 g", "412.3±0.5g"] {
            let limits = parse(text, Dimension::Mass).unwrap();
            assert!((limits.limits.unwrap() - 0.5e-3).abs() < 1e-18, "{text}");
            // JCGM 100:2008, 4.3.7
            assert!((limits.standard_uncertainty.unwrap() - 0.5e-3 / 3f64.sqrt()).abs() < 1e-18, "{text}");
        }
        let standard = parse("412.3 g (u 300 mg)", Dimension::Mass).unwrap();
        assert!((standard.standard_uncertainty.unwrap() - 0.3e-3).abs() < 1e-18);
        assert_eq!(standard.limits, None);
    }

    #[test]
    fn temperature_limits_carry_no_offset() {
        let celsius = parse("21 ± 2 degC", Dimension::Temperature).unwrap();
        assert!((celsius.value - 294.15).abs() < 1e-12);
        assert!((celsius.limits.unwrap() - 2.0).abs() < 1e-12);
        let fahrenheit = parse("32 degF (u 9 degF)", Dimension::Temperature).unwrap();
        assert!((fahrenheit.value - 273.15).abs() < 1e-12);
        assert!((fahrenheit.standard_uncertainty.unwrap() - 5.0).abs() < 1e-12);
        assert!((parse("-3 degC", Dimension::Temperature).unwrap().value - 270.15).abs() < 1e-12);
        assert!(parse("-300 degC", Dimension::Temperature).is_err());
    }

    #[test]
    fn a_ratio_may_go_without_unit_and_nothing_else_may() {
        let ratio = parse("1.000 ± 0.002", Dimension::Ratio).unwrap();
        assert_eq!((ratio.value, ratio.limits), (1.0, Some(0.002)));
        assert!((parse("0.5 %", Dimension::Ratio).unwrap().value - 0.005).abs() < 1e-18);
        let text = parse("412.3", Dimension::Mass).unwrap_err().to_string();
        assert!(text.contains("no unit") && text.contains("412.3 ± 0.5 g"), "{text}");
    }

    #[test]
    fn slopes_with_brackets() {
        let slope = parse("1000 N/(mV/V)", Dimension::ForcePerVoltageRatio).unwrap();
        assert!((slope.value - 1e6).abs() < 1e-6);
        let slope = parse("1000 N/(mV/V) (u 2 N/(mV/V))", Dimension::ForcePerVoltageRatio).unwrap();
        assert!((slope.standard_uncertainty.unwrap() - 2e3).abs() < 1e-9);
        assert!((parse("1.13e-4 N/count", Dimension::ForcePerCount).unwrap().value - 1.13e-4).abs() < 1e-18);
    }

    #[test]
    fn refusals_say_what_to_write() {
        for (text, dimension, part) in [
            ("412,3 g", Dimension::Mass, "412.3 g"),
            ("80 Hz", Dimension::Mass, "is a frequency"),
            ("12 grams", Dimension::Mass, "not known"),
            ("-4 g", Dimension::Mass, "negative"),
            ("nan g", Dimension::Mass, "number"),
            ("inf N", Dimension::Force, "number"),
            ("1e400 N", Dimension::Force, "number"),
            ("1e308 kN", Dimension::Force, "too large"),
            ("", Dimension::Force, "150 N"),
            ("± N", Dimension::Force, "number"),
            ("5 ± -1 N", Dimension::Force, "negative"),
            ("5 ± 1 N (u 1 N)", Dimension::Force, "one of the two"),
            ("5 N ± 1 kN", Dimension::Force, "one unit"),
            ("5 N (u 1 g)", Dimension::Force, "uncertainty"),
            ("1.2.3 N", Dimension::Force, "number"),
            ("5 % ± 1 N", Dimension::Ratio, "one unit"),
        ] {
            let message = parse(text, dimension).expect_err(text).to_string();
            assert!(message.contains(part), "{text}: {message}");
        }
    }

    proptest! {
        #[test]
        fn never_panics(text in "\\PC{0,40}") {
            let _ = parse_any(&text);
            let _ = parse(&text, Dimension::Mass);
        }

        #[test]
        fn never_panics_on_near_quantities(text in "[-+0-9.,eE±/ ()uNgmVkdCF%]{0,24}") {
            let _ = parse_any(&text);
        }

        #[test]
        fn what_is_written_is_read_back(value in -1e6f64..1e6, limits in 0f64..1e3, which in 0usize..40) {
            let unit = units::all()[which];
            prop_assume!(!unit.dimension.never_negative());
            let (measured, read) = parse_any(&format!("{value} ± {limits} {}", unit.symbol)).unwrap();
            prop_assert_eq!(read, unit);
            prop_assert_eq!(measured.value, value * unit.factor + unit.offset);
            prop_assert_eq!(measured.limits, Some(limits * unit.factor));
        }
    }
}
