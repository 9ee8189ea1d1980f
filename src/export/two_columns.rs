//! A plain CSV of two columns, seconds and newtons.

use crate::problem::Problem;

/// Times and thrusts; a first line of words is a header.
///
/// # Errors
/// Fewer or more columns, text where a number should stand, times that do not rise, fewer than two rows; line set.
pub fn read(bytes: &[u8]) -> Result<(Vec<f64>, Vec<f64>), Problem> {
    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .comment(Some(b'#'))
        .trim(csv::Trim::All)
        .from_reader(bytes);
    let (mut time_s, mut thrust_n): (Vec<f64>, Vec<f64>) = (Vec::new(), Vec::new());
    for (k, record) in reader.records().enumerate() {
        let record = record.map_err(|error| Problem::new(format!("this is no table: {error}")))?;
        let line = record.position().map_or(0, csv::Position::line);
        let numbers: Vec<Option<f64>> =
            record.iter().map(|t| t.parse::<f64>().ok().filter(|v: &f64| v.is_finite())).collect();
        if k == 0 && numbers.iter().all(Option::is_none) {
            continue;
        }
        let [Some(t), Some(f)] = numbers[..] else {
            return Err(Problem::new(format!("the line reads {:?}", record.iter().collect::<Vec<_>>().join(",")))
                .at_line(line)
                .expected("two numbers, time in seconds and thrust in newtons, with a comma between")
                .remedy("write 0.125,412.6 with a decimal point"));
        };
        if time_s.last().is_some_and(|last| *last >= t) {
            return Err(Problem::new(format!("time {t} s does not lie after the row before"))
                .at_line(line)
                .expected("times that rise from row to row"));
        }
        time_s.push(t);
        thrust_n.push(f);
    }
    if time_s.len() < 2 {
        return Err(Problem::new(format!("{} rows of numbers", time_s.len())).expected("two and more"));
    }
    Ok((time_s, thrust_n))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn with_and_without_a_header() {
        let wanted = (vec![0.0, 0.1], vec![0.0, 50.0]);
        assert_eq!(read(b"0,0\n0.1,50\n").expect("rows"), wanted);
        assert_eq!(read(b"# a motor\ntime_s,thrust_n\n0, 0\n0.1, 50\n").expect("rows"), wanted);
    }

    #[test]
    fn faults_are_told_with_their_line() {
        let line = |text: &str| read(text.as_bytes()).expect_err(text).line;
        assert_eq!(line("0,0\n0.1;50\n"), Some(2));
        assert_eq!(line("0,0\n0,50\n"), Some(2));
        assert_eq!(line("a,b\n0,0\n1,2,3\n"), Some(3));
        assert!(read(b"").is_err() && read(b"a,b\n0,0\n").is_err());
    }
}
