//! A table of points beside the calibration file: load, reading, and optionally the direction (up or down).

use super::points::Listed;
use crate::problem::Problem;
use crate::quantity::parse_number;
use crate::run::document::Document;

/// Reads the lines of the table. A first line without numbers is a header; lines that are empty or start with `#` are
/// passed over. Without a direction a load counts as rising until the heaviest was reached.
///
/// # Errors
/// A line that does not hold a load and a reading; its number is named.
pub(super) fn read(document: &Document) -> Result<Vec<Listed>, Problem> {
    let mut rows: Vec<(f64, f64, Option<bool>)> = Vec::new();
    let mut first = true;
    for (number, line) in (1u64..).zip(document.text.lines()) {
        let line = line.trim();
        if line.is_empty() || line.starts_with('#') {
            continue;
        }
        let fields: Vec<&str> = line.split([',', ';', '\t']).map(|field| field.trim().trim_matches('"')).collect();
        let header = std::mem::take(&mut first) && fields.iter().all(|field| parse_number(field).is_none());
        if header {
            continue;
        }
        let bad = |found: String| {
            Err(Problem::new(found)
                .in_file(&document.path)
                .at_line(number)
                .expected("load, reading and, where it is known, up or down")
                .remedy("write the line like 5,52311.0,up"))
        };
        let (Some(load), Some(reading)) =
            (fields.first().and_then(|field| parse_number(field)), fields.get(1).and_then(|field| parse_number(field)))
        else {
            return bad(format!("\"{line}\" does not hold two numbers"));
        };
        let direction = match fields.get(2).map(|field| field.to_lowercase()).as_deref() {
            None | Some("") => None,
            Some("up") => Some(true),
            Some("down") => Some(false),
            Some(other) => return bad(format!("the direction is \"{other}\"")),
        };
        rows.push((load, reading, direction));
    }
    let heaviest = rows.iter().map(|row| row.0.abs()).fold(0.0, f64::max);
    let mut reached = false;
    let mut listed = Vec::with_capacity(rows.len());
    for (load, reading, direction) in rows {
        let falling = reached && load.abs() < heaviest;
        reached |= load.abs() >= heaviest;
        listed.push(Listed { load, reading, rising: direction.unwrap_or(!falling) });
    }
    Ok(listed)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::path::Path;

    fn rows(text: &str) -> Result<Vec<Listed>, Problem> {
        read(&Document::from_text(Path::new("points.csv"), text))
    }

    #[test]
    fn header_comments_and_directions() {
        let found = rows("mass,reading,direction\n# hung by hand\n0,1.5,up\n10;20,up\n10\t21\tdown\n").unwrap();
        assert_eq!(found.len(), 3);
        assert_eq!(found[2], Listed { load: 10.0, reading: 21.0, rising: false });
    }

    #[test]
    fn directions_not_written_are_seen_from_the_loads() {
        let rising: Vec<bool> =
            rows("0,1\n5,2\n10,3\n10,3\n5,2\n0,1\n").unwrap().iter().map(|row| row.rising).collect();
        assert_eq!(rising, vec![true, true, true, true, false, false]);
    }

    #[test]
    fn bad_lines_are_named() {
        assert_eq!(rows("mass,reading\n0,1\n5,x\n").unwrap_err().line, Some(3));
        assert_eq!(rows("0,1,sideways\n").unwrap_err().line, Some(1));
    }
}
