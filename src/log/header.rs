//! Header line, units row, and what column names say.

use super::field::{Delimiter, Splitter, trim};
use super::text::readable;
use std::ops::Range;

/// Seconds in one of a named time unit.
pub fn time_unit(text: &str) -> Option<(&'static str, f64)> {
    match text.trim().to_lowercase().as_str() {
        "s" | "sec" | "secs" | "second" | "seconds" => Some(("s", 1.0)),
        "ms" | "msec" | "msecs" | "millis" | "millisecond" | "milliseconds" => Some(("ms", 1e-3)),
        // U+00B5 and U+03BC are two code points for the same sign.
        "us" | "usec" | "usecs" | "micros" | "microsecond" | "microseconds" | "\u{b5}s" | "\u{3bc}s" => {
            Some(("us", 1e-6))
        }
        "ns" | "nsec" | "nanos" | "nanosecond" | "nanoseconds" => Some(("ns", 1e-9)),
        "min" | "mins" | "minute" | "minutes" => Some(("min", 60.0)),
        _ => None,
    }
}

/// Looks like a unit: the ones a bench log may carry, with brackets around it or not.
pub fn is_unit(text: &str) -> bool {
    let text = unbracket(text.trim());
    if time_unit(text).is_some() {
        return true;
    }
    const UNITS: [&str; 53] = [
        "n", "kn", "mn", "lbf", "lb", "lbs", "kgf", "gf", "kg", "g", "oz", "ozf", "pa", "hpa", "kpa", "mpa", "bar",
        "mbar", "psi", "psia", "psig", "atm", "c", "degc", "\u{b0}c", "f", "degf", "\u{b0}f", "k", "deg", "\u{b0}",
        "v", "mv", "uv", "\u{b5}v", "mv/v", "uv/v", "v/v", "a", "ma", "count", "counts", "cnt", "lsb", "raw", "hz",
        "m", "mm", "m/s", "m/s2", "%", "-", "1",
    ];
    let lower = text.to_lowercase();
    UNITS.contains(&lower.as_str())
}

/// Without one pair of brackets around the whole.
fn unbracket(text: &str) -> &str {
    for (open, close) in [('[', ']'), ('(', ')'), ('<', '>'), ('{', '}')] {
        if let Some(inner) = text.strip_prefix(open).and_then(|rest| rest.strip_suffix(close)) {
            return inner.trim();
        }
    }
    text
}

/// The unit in brackets at the end of a header name, and the name without it: `load [N]`, `load (N)`.
pub fn bracketed_unit(name: &str) -> (&str, Option<&str>) {
    let name = name.trim();
    for (open, close) in [('[', ']'), ('(', ')')] {
        if let Some(inner) = name.strip_suffix(close)
            && let Some(at) = inner.rfind(open)
            && at > 0
        {
            let unit = inner[at + 1..].trim();
            // Long brackets are remarks, not units.
            if !unit.is_empty() && unit.chars().count() <= 12 {
                return (name[..at].trim(), Some(unit));
            }
        }
    }
    (name, None)
}

/// Lower-case words of a name, split at anything that is neither letter nor digit.
fn words(name: &str) -> Vec<String> {
    name.to_lowercase()
        .split(|c: char| !c.is_alphanumeric())
        .filter(|word| !word.is_empty())
        .map(str::to_owned)
        .collect()
}

/// What a column name says about time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TimeName {
    /// Not a time.
    No,
    /// A time; its unit if the name gives it (symbol, seconds).
    Time(Option<(&'static str, f64)>),
    /// A counter of samples.
    Counter,
}

/// Tells from a header name whether the column is a time, and in what unit (suffix `_ms`, brackets, or the word itself).
pub fn time_name(name: &str) -> TimeName {
    const TIME: [&str; 17] = [
        "t",
        "time",
        "timestamp",
        "stamp",
        "ts",
        "elapsed",
        "uptime",
        "clock",
        "runtime",
        "zeit",
        "tiempo",
        "temps",
        "tempo",
        "tijd",
        "datetime",
        "epoch",
        "unixtime",
    ];
    const ASIDE: [&str; 18] = [
        "since", "start", "boot", "from", "of", "day", "local", "utc", "gmt", "date", "log", "logger", "system",
        "relative", "rel", "abs", "test", "sample",
    ];
    const COUNTER: [&str; 9] = ["sample", "samples", "index", "idx", "n", "no", "counter", "record", "row"];
    let (bare, bracket) = bracketed_unit(name);
    let words = words(bare);
    let mut unit = bracket.and_then(time_unit);
    if bracket.is_some() && unit.is_none() && !words.iter().any(|word| word == "time" || word == "timestamp") {
        return TimeName::No;
    }
    let mut named = false;
    for word in &words {
        if TIME.contains(&word.as_str()) {
            named = true;
        } else if let Some(found) = time_unit(word) {
            unit = unit.or(Some(found));
            // `s`, `ms`, `millis` or `seconds` alone name a time as well.
            named = true;
        } else if let Some(found) =
            ["time", "timestamp", "t"].iter().find_map(|lead| time_unit(word.strip_prefix(lead)?))
        {
            // `timems`, `tms`
            unit = unit.or(Some(found));
            named = true;
        } else if !ASIDE.contains(&word.as_str()) {
            named = false;
            break;
        }
    }
    let all_known = words.iter().all(|word| {
        TIME.contains(&word.as_str())
            || ASIDE.contains(&word.as_str())
            || time_unit(word).is_some()
            || ["time", "timestamp", "t"]
                .iter()
                .any(|lead| word.strip_prefix(lead).is_some_and(|rest| time_unit(rest).is_some()))
    });
    if named && all_known {
        return TimeName::Time(unit);
    }
    if !words.is_empty()
        && bracket.is_none()
        && words.iter().all(|word| COUNTER.contains(&word.as_str()) || word == "number" || word == "nr")
    {
        return TimeName::Counter;
    }
    TimeName::No
}

/// The comment mark a line begins with, if any.
pub fn comment_mark(line: &[u8]) -> Option<usize> {
    match trim(line) {
        [b'#', ..] | [b'%', ..] => Some(1),
        [b'/', b'/', ..] => Some(2),
        _ => None,
    }
}

/// Names and units found before the data.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Header {
    /// One a column, `column N` where the file names none.
    pub names: Vec<String>,
    pub units: Vec<Option<String>>,
    pub names_line: Option<u64>,
    pub units_line: Option<u64>,
}

/// Looks upward from the first data line for names and units. `lines` are the lines before it, with their numbers.
pub fn find_header(lines: &[(u64, &[u8])], columns: usize, splitter: Splitter, indexed: bool) -> Header {
    let mut rows: Vec<(u64, Vec<String>)> = Vec::new();
    for &(number, line) in lines.iter().rev().filter(|(_, line)| !trim(line).is_empty()).take(6) {
        if let Some(fields) = header_fields(line, columns, splitter, indexed) {
            rows.push((number, fields));
        }
        if rows.len() == 2 {
            break;
        }
    }
    let mut header = Header {
        names: (1..=columns).map(|number| format!("column {number}")).collect(),
        units: vec![None; columns],
        ..Header::default()
    };
    let units_like = |fields: &[String]| {
        fields.iter().any(|field| !field.is_empty()) && fields.iter().all(|field| field.is_empty() || is_unit(field))
    };
    let mut rows = rows.into_iter();
    let (near, far) = (rows.next(), rows.next());
    let (names, units) = match (near, far) {
        (Some(near), Some(far)) if units_like(&near.1) && !units_like(&far.1) => (Some(far), Some(near)),
        (Some(near), Some(far)) if units_like(&far.1) && !units_like(&near.1) => (Some(near), Some(far)),
        (Some(near), _) => (Some(near), None),
        (None, _) => (None, None),
    };
    if let Some((number, fields)) = names {
        header.names_line = Some(number);
        for (at, field) in fields.into_iter().enumerate().filter(|(_, field)| !field.is_empty()) {
            if let Some(unit) = bracketed_unit(&field).1 {
                header.units[at] = Some(unit.to_owned());
            } else if is_unit(&field) && field != "1" && field != "-" {
                header.units[at] = Some(unbracket(&field).to_owned());
            }
            header.names[at] = field;
        }
    }
    if let Some((number, fields)) = units {
        header.units_line = Some(number);
        for (at, field) in fields.into_iter().enumerate() {
            let unit = unbracket(&field);
            if !unit.is_empty() && unit != "-" {
                header.units[at] = Some(unit.to_owned());
            }
        }
    }
    header
}

/// The fields of a line that could name the columns, exactly `columns` of them; `None` if it could not.
fn header_fields(line: &[u8], columns: usize, splitter: Splitter, indexed: bool) -> Option<Vec<String>> {
    let commented = comment_mark(line);
    let line = match commented {
        Some(length) => trim(trim(line).get(length..)?),
        None => line,
    };
    let mut ways = vec![Splitter { arrow: splitter.arrow, ..splitter }];
    if splitter.arrow {
        ways.push(Splitter { arrow: false, ..splitter });
    }
    // Some loggers write the names with another delimiter than the data.
    ways.extend([b'\t', b';', b',', b'|'].map(|byte| Splitter { delimiter: Delimiter::Byte(byte), arrow: false }));
    let mut ranges: Vec<Range<usize>> = Vec::new();
    for (attempt, way) in ways.into_iter().enumerate() {
        way.split(line, &mut ranges);
        let mut fields: Vec<String> = ranges
            .iter()
            .map(|range| readable(trim(&line[range.clone()])).trim_matches('"').trim().to_owned())
            .collect();
        if way.delimiter == Delimiter::Spaces {
            fields = join_brackets(fields);
        }
        let exact_only = attempt > 0 || commented.is_some();
        if let Some(fields) = fit(fields, columns, exact_only, indexed) {
            let letters = |field: &String| field.chars().any(char::is_alphabetic) || is_unit(field);
            if fields.iter().any(letters) {
                return Some(fields);
            }
        }
    }
    None
}

/// `Load`, `(N)` back to `Load (N)`.
fn join_brackets(fields: Vec<String>) -> Vec<String> {
    let mut joined: Vec<String> = Vec::new();
    for field in fields {
        match joined.last_mut() {
            Some(last) if field.starts_with(['(', '[']) && !last.ends_with([')', ']']) => {
                last.push(' ');
                last.push_str(&field);
            }
            _ => joined.push(field),
        }
    }
    joined
}

/// Exactly `columns` fields, or a row one off for a known reason.
fn fit(mut fields: Vec<String>, columns: usize, exact_only: bool, indexed: bool) -> Option<Vec<String>> {
    while fields.len() > columns && fields.last().is_some_and(String::is_empty) {
        fields.pop();
    }
    if fields.len() == columns {
        return Some(fields);
    }
    // A blank first field over data that has none: the row was written with an index the data went without.
    if fields.len() == columns + 1 && fields[0].is_empty() {
        fields.remove(0);
        return Some(fields);
    }
    if exact_only || columns < 2 {
        return None;
    }
    if fields.len() + 1 == columns {
        // Data with an index the header went without, or a last column without a name.
        if indexed {
            fields.insert(0, String::new());
        } else {
            fields.push(String::new());
        }
        return Some(fields);
    }
    if fields.len() == columns + 1 && columns > 1 {
        fields.truncate(columns);
        return Some(fields);
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;

    const COMMA: Splitter = Splitter { delimiter: Delimiter::Byte(b','), arrow: false };

    #[test]
    fn time_names() {
        for (name, unit) in [
            ("t", None),
            ("Time", None),
            ("t_ms", Some("ms")),
            ("time [us]", Some("us")),
            ("Time (s)", Some("s")),
            ("millis", Some("ms")),
            ("Elapsed Time", None),
            ("seconds", Some("s")),
            ("timestamp", None),
            ("t_\u{b5}s", Some("us")),
        ] {
            let TimeName::Time(found) = time_name(name) else { panic!("{name}") };
            assert_eq!(found.map(|(symbol, _)| symbol), unit, "{name}");
        }
        for name in ["T_RUN_TANK", "load", "temp", "t [degC]", "", "burn time factor", "thrust"] {
            assert_eq!(time_name(name), TimeName::No, "{name}");
        }
        assert_eq!(time_name("sample"), TimeName::Counter);
        assert_eq!(time_name("Sample No"), TimeName::Counter);
    }

    #[test]
    fn units_before_names_with_an_extra_blank_field() {
        let lines: [(u64, &[u8]); 2] = [(1, b",N,degC,,s"), (2, b"thrust,temp,note,seconds")];
        let header = find_header(&lines, 4, COMMA, false);
        assert_eq!(header.names, ["thrust", "temp", "note", "seconds"]);
        assert_eq!(header.units[0].as_deref(), Some("N"));
        assert_eq!(header.units[2], None);
        assert_eq!(header.units[3].as_deref(), Some("s"));
    }

    #[test]
    fn units_after_names_in_brackets_below_a_banner() {
        let lines: [(u64, &[u8]); 4] = [(1, b"Bench 3, invented"), (2, b""), (3, b"t,load"), (4, b"[ms],[kg]")];
        let header = find_header(&lines, 2, COMMA, false);
        assert_eq!(header.names, ["t", "load"]);
        assert_eq!(header.units, [Some("ms".to_owned()), Some("kg".to_owned())]);
        assert_eq!((header.names_line, header.units_line), (Some(3), Some(4)));
    }

    #[test]
    fn names_in_a_comment() {
        let lines: [(u64, &[u8]); 2] = [(1, b"# started"), (2, b"# t_ms,load [N]")];
        let header = find_header(&lines, 2, COMMA, false);
        assert_eq!(header.names, ["t_ms", "load [N]"]);
        assert_eq!(header.units[1].as_deref(), Some("N"));
    }
}
