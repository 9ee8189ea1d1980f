//! comparison.json, the table of figures and the groups' thrust bands as CSV.

use crate::compare::{Comparison, FIGURES};
use crate::problem::Problem;

pub const FILE: &str = "comparison.json";
pub const TABLE_FILE: &str = "comparison.csv";
pub const BANDS_FILE: &str = "thrust-bands.csv";

/// The comparison as comparison.json holds it: indented, ending in a line feed.
///
/// # Errors
/// A number that is not finite.
pub fn pretty(comparison: &Comparison) -> Result<String, Problem> {
    let mut text = serde_json::to_string_pretty(comparison).map_err(|error| unwritable(&error.to_string()))?;
    text.push('\n');
    read(&text).map_err(|problem| unwritable(&problem.found))?;
    Ok(text)
}

/// The comparison on one line, without a line feed.
///
/// # Errors
/// As [`pretty`].
pub fn line(comparison: &Comparison) -> Result<String, Problem> {
    serde_json::to_string(comparison).map_err(|error| unwritable(&error.to_string()))
}

/// Reads what [`pretty`] wrote.
///
/// # Errors
/// Text that is no comparison; line and column set.
pub fn read(text: &str) -> Result<Comparison, Problem> {
    let again = "run `burntally compare` again to write it anew";
    let found: Comparison = serde_json::from_str(text).map_err(|error| {
        Problem::new(format!("this is no comparison: {error}"))
            .at_line(error.line() as u64)
            .at_column(error.column() as u64)
            .remedy(again)
    })?;
    for group in &found.groups {
        let Some(band) = &group.thrust_band else { continue };
        let n = band.time_s.len();
        let lists = [&band.lower_n, &band.upper_n, &band.standard_deviation_n];
        let whole = band.mean_n.len() == n && lists.iter().all(|l| l.is_empty() || l.len() == n);
        if !whole || band.time_s.windows(2).any(|t| t[0] >= t[1]) {
            return Err(Problem::new(format!("the thrust band of {:?} is damaged", group.pour))
                .expected("lists of one length, and times that rise")
                .remedy(again));
        }
    }
    Ok(found)
}

fn unwritable(why: &str) -> Problem {
    Problem::new(format!("a figure of the comparison is not a finite number ({why})"))
        .expected("finite figures")
        .remedy("look at the results for values far out of range, and leave that run out with --leave-out")
}

/// One row a group and figure.
///
/// # Errors
/// What the writer refuses.
pub fn table(comparison: &Comparison) -> Result<Vec<u8>, Problem> {
    let mut rows = csv::Writer::from_writer(Vec::new());
    let failed = |error: csv::Error| Problem::new(format!("the table could not be written: {error}"));
    rows.write_record([
        "group",
        "quantity",
        "unit",
        "n",
        "mean",
        "standard_deviation",
        "coefficient_of_variation",
        "mean_low_95",
        "mean_high_95",
        "tolerance_low_95_95",
        "tolerance_high_95_95",
        "odd",
    ])
    .map_err(failed)?;
    let number = |value: Option<f64>| value.map_or(String::new(), |v| format!("{v}"));
    for group in &comparison.groups {
        for (key, _) in FIGURES {
            let Some(s) = group.quantities.get(key) else { continue };
            let (mean, tolerance) = (s.mean_interval_95, s.tolerance_interval_95_95);
            rows.write_record([
                group.pour.clone(),
                key.to_string(),
                s.unit.clone(),
                s.n.to_string(),
                number(Some(s.mean)),
                number(s.standard_deviation),
                number(s.coefficient_of_variation),
                number(mean.map(|m| m[0])),
                number(mean.map(|m| m[1])),
                number(tolerance.map(|t| t[0])),
                number(tolerance.map(|t| t[1])),
                s.outliers.join(" "),
            ])
            .map_err(failed)?;
        }
    }
    rows.into_inner().map_err(|error| Problem::new(format!("the table could not be written: {error}")))
}

/// Thrust of each group: mean, and the band for the next motor; empty fields where one firing alone gives no band.
///
/// # Errors
/// What the writer refuses.
pub fn bands(comparison: &Comparison) -> Result<Vec<u8>, Problem> {
    let mut rows = csv::Writer::from_writer(Vec::new());
    let failed = |error: csv::Error| Problem::new(format!("the table could not be written: {error}"));
    rows.write_record(["group", "time_s", "mean_n", "lower_n", "upper_n"]).map_err(failed)?;
    for group in &comparison.groups {
        let Some(band) = &group.thrust_band else { continue };
        for (i, (time, mean)) in band.time_s.iter().zip(&band.mean_n).enumerate() {
            let at = |list: &[f64]| list.get(i).map_or(String::new(), |v| format!("{v:.6}"));
            let row =
                [group.pour.clone(), format!("{time:.6}"), format!("{mean:.6}"), at(&band.lower_n), at(&band.upper_n)];
            rows.write_record(row).map_err(failed)?;
        }
    }
    rows.into_inner().map_err(|error| Problem::new(format!("the table could not be written: {error}")))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::compare::{self, Request, Run, curves::Trace};
    use crate::export::sample;

    fn comparison() -> Comparison {
        let trace = Trace { time_s: vec![0.0, 1.0, 2.0], thrust_n: vec![0.0, 50.0, 0.0], burn_time_s: 1.9 };
        let runs: Vec<Run> = ["A", "B"]
            .map(|id| {
                let mut firing = sample::firing();
                firing.run.id = id.into();
                firing.run.pour = Some("P".into());
                firing.checks.clear();
                Run { firing, trace: Some(trace.clone()) }
            })
            .into();
        let request = Request {
            by: "pour".into(),
            leave_out: vec![],
            alike_within: 0.05,
            with_failed: false,
            by_burn_time: false,
        };
        compare::compare(&runs, &request).expect("a comparison")
    }

    #[test]
    fn what_was_written_reads_back() {
        let c = comparison();
        assert_eq!(read(&pretty(&c).expect("text")).expect("the comparison"), c);
        assert!(!line(&c).expect("a line").contains('\n'));
    }

    #[test]
    fn a_damaged_band_is_refused() {
        let mut c = comparison();
        if let Some(band) = &mut c.groups[0].thrust_band {
            band.mean_n.pop();
        }
        let text = serde_json::to_string(&c).expect("text");
        assert!(read(&text).expect_err("damage").found.contains("is damaged"));
    }
}
