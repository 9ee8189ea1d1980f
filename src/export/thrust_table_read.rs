//! Reads back what `thrust_table` wrote.

use super::thrust_table::ThrustTable;
use crate::problem::Problem;

/// The table of the bytes of a thrust-table.csv.
///
/// # Errors
/// Other columns, text where a number should stand, times that do not rise, fewer than two rows; line set.
pub fn read(bytes: &[u8]) -> Result<ThrustTable, Problem> {
    let mut reader = csv::ReaderBuilder::new().trim(csv::Trim::All).from_reader(bytes);
    let headers: Vec<String> = reader.headers().map_err(|e| unreadable(&e))?.iter().map(str::to_owned).collect();
    let wanted = ["time_s", "thrust_n"];
    if headers.iter().take(2).ne(wanted) {
        return Err(Problem::new(format!("the columns are {}", headers.join(", ")))
            .at_line(1)
            .expected("time_s,thrust_n,thrust_u_n,propellant_kg")
            .remedy("give the thrust-table.csv that `burntally reduce` wrote, or reduce the run again"));
    }
    let at = |name: &str| headers.iter().position(|h| h == name);
    let (u_at, mass_at) = (at("thrust_u_n"), at("propellant_kg"));
    let mut table = ThrustTable {
        time_s: Vec::new(),
        thrust_n: Vec::new(),
        thrust_u_n: u_at.map(|_| Vec::new()),
        propellant_kg: mass_at.map(|_| Vec::new()),
    };
    for record in reader.records() {
        let record = record.map_err(|e| unreadable(&e))?;
        let line = record.position().map_or(0, csv::Position::line);
        let number = |k: usize| -> Result<f64, Problem> {
            let text = record.get(k).unwrap_or("");
            text.parse::<f64>().ok().filter(|v| v.is_finite()).ok_or_else(|| {
                Problem::new(format!("{text:?} in column {} is not a number", headers.get(k).map_or("", |h| h)))
                    .at_line(line)
                    .expected("a finite number")
            })
        };
        let time = number(0)?;
        if table.time_s.last().is_some_and(|last| *last >= time) {
            return Err(Problem::new(format!("time {time} s does not lie after the row before"))
                .at_line(line)
                .expected("times that rise from row to row"));
        }
        table.time_s.push(time);
        table.thrust_n.push(number(1)?);
        // A null field says that it is not known; one is enough to make the column so.
        for (column, k) in [(&mut table.thrust_u_n, u_at), (&mut table.propellant_kg, mass_at)] {
            if let (Some(list), Some(k)) = (column.as_mut(), k) {
                if record.get(k).is_none_or(str::is_empty) { *column = None } else { list.push(number(k)?) }
            }
        }
    }
    if table.time_s.len() < 2 {
        return Err(Problem::new(format!("{} rows of thrust", table.time_s.len())).expected("two and more"));
    }
    Ok(table)
}

fn unreadable(error: &csv::Error) -> Problem {
    let problem = Problem::new(format!("this is no table: {error}")).expected("comma-separated values");
    match error.position() {
        Some(position) => problem.at_line(position.line()),
        None => problem,
    }
}

#[cfg(test)]
mod tests {
    use super::super::{sample, thrust_table};
    use super::*;

    #[test]
    fn what_was_written_reads_back() {
        let (firing, curves) = (sample::firing(), sample::curves(400));
        let table = thrust_table::thrust_table(&firing, &curves, 50).expect("a table");
        let found = read(&thrust_table::to_csv(&table).expect("bytes")).expect("the table");
        assert_eq!(found.time_s.len(), table.time_s.len());
        let alike = |a: &[f64], b: &[f64]| a.iter().zip(b).all(|(a, b)| (a - b).abs() <= 1e-6 * b.abs().max(1.0));
        assert!(alike(&found.time_s, &table.time_s) && alike(&found.thrust_n, &table.thrust_n));
        assert_eq!(found.thrust_u_n.is_some(), table.thrust_u_n.is_some());
        assert_eq!(found.propellant_kg.is_some(), table.propellant_kg.is_some());
    }

    #[test]
    fn faults_are_told_with_their_line() {
        let at = |text: &str| read(text.as_bytes()).expect_err(text);
        assert_eq!(at("a,b\n1,2\n").line, Some(1));
        assert_eq!(at("time_s,thrust_n\n0,1\n0,2\n").line, Some(3));
        assert_eq!(at("time_s,thrust_n\n0,1\n1,x\n").line, Some(3));
        assert!(at("time_s,thrust_n\n0,1\n").found.contains("1 rows"));
        assert_eq!(at("time_s,thrust_n\n0,1\n1,inf\n").line, Some(3));
    }
}
