//! result.json: written pretty for files, on one line for standard output, and read back.

use crate::firing::{Firing, SCHEMA};
use crate::problem::Problem;

/// The firing as result.json holds it: indented, ending in a line feed.
///
/// # Errors
/// A figure that is not a finite number: JSON has no way to write it, and null would pass for "not known".
pub fn pretty(firing: &Firing) -> Result<String, Problem> {
    let mut text = serde_json::to_string_pretty(firing).map_err(|error| unwritable(&error.to_string()))?;
    text.push('\n');
    reads_back(&text)?;
    Ok(text)
}

/// The firing on one line, without a line feed.
///
/// # Errors
/// As [`pretty`].
pub fn line(firing: &Firing) -> Result<String, Problem> {
    let text = serde_json::to_string(firing).map_err(|error| unwritable(&error.to_string()))?;
    reads_back(&text)?;
    Ok(text)
}

/// Reads what [`pretty`] or [`line`] wrote.
///
/// # Errors
/// Text that is not JSON, of another schema, or with keys missing; line and column are set.
pub fn read(text: &str) -> Result<Firing, Problem> {
    let at = |error: serde_json::Error| {
        Problem::new(format!("this is not a result of a reduction: {error}"))
            .at_line(error.line() as u64)
            .at_column(error.column() as u64)
            .expected(format!("JSON of the schema {SCHEMA}"))
            .remedy("run `burntally reduce` again to write it anew")
    };
    // The schema is looked at first: another schema is a better explanation than the first key that does not fit.
    let schema: SchemaOnly = serde_json::from_str(text).map_err(at)?;
    if schema.schema != SCHEMA {
        return Err(Problem::new(format!("the schema is {:?}", schema.schema))
            .expected(format!("{SCHEMA:?}"))
            .remedy("reduce the run again with this version of burntally"));
    }
    serde_json::from_str(text).map_err(at)
}

#[derive(serde::Deserialize)]
struct SchemaOnly {
    schema: String,
}

/// serde_json writes a number that is not finite as null; where a number must stand that does not read back.
fn reads_back(text: &str) -> Result<(), Problem> {
    serde_json::from_str::<Firing>(text).map(|_| ()).map_err(|error| unwritable(&error.to_string()))
}

fn unwritable(why: &str) -> Problem {
    Problem::new(format!("a figure of the result is not a finite number ({why})"))
        .expected("finite figures")
        .remedy("look at the log and the calibration for values far out of range")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;

    #[test]
    fn both_forms_read_back_the_same() {
        let firing = sample::firing();
        let pretty_text = pretty(&firing).unwrap();
        assert_eq!(read(&pretty_text).unwrap(), firing);
        let one_line = line(&firing).unwrap();
        assert!(!one_line.contains('\n'));
        assert_eq!(read(&one_line).unwrap(), firing);
    }

    #[test]
    fn every_digit_comes_back() {
        let mut firing = sample::firing();
        let mut state = 1_u64;
        for _ in 0..2000 {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            let value = (state >> 11) as f64 * 1.1e-13 + 1e-7;
            firing.burn.end_s = value;
            assert_eq!(read(&line(&firing).unwrap()).unwrap().burn.end_s.to_bits(), value.to_bits());
        }
    }

    #[test]
    fn unknown_figures_are_null_and_not_absent() {
        let value: serde_json::Value = serde_json::from_str(&line(&sample::firing()).unwrap()).unwrap();
        let quantities = value["quantities"].as_object().unwrap();
        assert_eq!(quantities.get("peak_pressure"), Some(&serde_json::Value::Null));
        assert_eq!(value["stand"], serde_json::Value::Null);
        assert_eq!(quantities["total_impulse"]["unit"], "N.s");
    }

    #[test]
    fn a_figure_that_is_not_finite_is_refused() {
        let mut firing = sample::firing();
        firing.quantities.peak_thrust.as_mut().unwrap().value = f64::NAN;
        assert!(pretty(&firing).unwrap_err().found.contains("not a finite number"));
    }

    #[test]
    fn another_schema_and_broken_text_are_told_apart() {
        let other = line(&sample::firing()).unwrap().replace(SCHEMA, "burntally.result/9");
        assert!(read(&other).unwrap_err().found.contains("burntally.result/9"));
        let cut = &line(&sample::firing()).unwrap()[..200];
        let problem = read(cut).unwrap_err();
        assert_eq!(problem.line, Some(1));
        assert!(problem.column.is_some());
    }
}
