//! A line to fields, a field to a number or a clock reading.

use std::ops::Range;

/// What stands between the fields.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Delimiter {
    Byte(u8),
    /// Runs of spaces and tabs.
    Spaces,
    /// One field a line.
    None,
}

/// What stands before the fraction.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Decimal {
    Point,
    Comma,
    /// No fraction seen so far, and the comma is not the delimiter: take either.
    Either,
}

/// What a field looks like.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Shape {
    /// Nothing, or a word that says so (`nan`, `null`, `--`).
    Empty,
    Number,
    /// A number with a unit behind it, as scales print: `12.35 kg`.
    NumberWithUnit,
    /// `11:30:37.933`, perhaps after a date in other than ISO order.
    Clock,
    /// ISO 8601 date and time.
    DateTime,
    Text,
}

/// Splits lines into fields.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Splitter {
    pub delimiter: Delimiter,
    /// A terminal put `clock -> ` before each line: the first `->` is a delimiter too.
    pub arrow: bool,
}

/// Blank, or padding: spaces, line end remains, NUL.
fn is_padding(byte: u8) -> bool {
    matches!(byte, b' ' | b'\t' | b'\r' | b'\n' | 0)
}

/// Without spaces, line end remains and NUL padding around it.
pub fn trim(mut bytes: &[u8]) -> &[u8] {
    while let [first, rest @ ..] = bytes
        && is_padding(*first)
    {
        bytes = rest;
    }
    while let [rest @ .., last] = bytes
        && is_padding(*last)
    {
        bytes = rest;
    }
    bytes
}

impl Splitter {
    /// Fills `fields` with the place of each field in `line`; quotes that enclose a field are left out.
    pub fn split(&self, line: &[u8], fields: &mut Vec<Range<usize>>) {
        fields.clear();
        let mut start = 0;
        if self.arrow
            && let Some(at) = memchr::memmem::find(line, b"->")
        {
            fields.push(0..at);
            start = at + 2;
        }
        match self.delimiter {
            Delimiter::None => fields.push(start..line.len()),
            Delimiter::Spaces => {
                let mut at = start;
                loop {
                    while at < line.len() && is_padding(line[at]) {
                        at += 1;
                    }
                    if at >= line.len() {
                        break;
                    }
                    let begin = at;
                    if line[at] == b'"'
                        && let Some(length) = memchr::memchr(b'"', &line[at + 1..])
                    {
                        fields.push(at + 1..at + 1 + length);
                        at += length + 2;
                        continue;
                    }
                    while at < line.len() && !is_padding(line[at]) {
                        at += 1;
                    }
                    fields.push(begin..at);
                }
            }
            Delimiter::Byte(delimiter) => {
                if memchr::memchr(b'"', &line[start..]).is_some() {
                    split_quoted(line, start, delimiter, fields);
                    return;
                }
                // Fields are short: a plain loop beats a search that sets up afresh for each.
                let mut begin = start;
                for (at, &byte) in line.iter().enumerate().skip(start) {
                    if byte == delimiter {
                        fields.push(begin..at);
                        begin = at + 1;
                    }
                }
                fields.push(begin..line.len());
            }
        }
    }
}

fn split_quoted(line: &[u8], start: usize, delimiter: u8, fields: &mut Vec<Range<usize>>) {
    let mut at = start;
    loop {
        let mut begin = at;
        while begin < line.len() && line[begin] == b' ' {
            begin += 1;
        }
        let mut enclosed = None;
        if line.get(begin) == Some(&b'"') {
            let mut close = begin + 1;
            while close < line.len() {
                if line[close] == b'"' {
                    if line.get(close + 1) != Some(&b'"') {
                        break;
                    }
                    close += 1;
                }
                close += 1;
            }
            if close < line.len() {
                enclosed = Some(begin + 1..close);
            }
        }
        let from = enclosed.as_ref().map_or(at, |range| range.end);
        let end = memchr::memchr(delimiter, &line[from..]).map(|offset| from + offset);
        let stop = end.unwrap_or(line.len());
        match enclosed {
            // Anything but padding between the closing quote and the delimiter: not a quoted field after all.
            Some(range) if trim(&line[range.end + 1..stop]).is_empty() => fields.push(range),
            _ => fields.push(at..stop),
        }
        match end {
            Some(end) => at = end + 1,
            None => break,
        }
    }
}

/// A field that says that there is no reading.
pub fn is_missing(field: &[u8]) -> bool {
    let field = trim(field);
    if field.is_empty() {
        return true;
    }
    if field.len() > 8 || field[0].is_ascii_digit() {
        return false;
    }
    const WORDS: [&str; 11] = ["nan", "-nan", "+nan", "null", "none", "n/a", "#n/a", "na", "-", "--", "---"];
    WORDS.iter().any(|word| field.eq_ignore_ascii_case(word.as_bytes()))
}

/// The number a field holds, if it holds one and nothing else; never infinite, never NaN.
#[inline]
pub fn number(field: &[u8], decimal: Decimal) -> Option<f64> {
    let mut field = trim(field);
    if let [b'+', rest @ ..] = field {
        field = rest;
        if matches!(field.first(), Some(b'-' | b'+')) {
            return None;
        }
    }
    // Keeps out `inf` and `nan`, which the parser would take.
    let first = match field {
        [b'-', second, ..] => *second,
        [first, ..] => *first,
        [] => return None,
    };
    if !(first.is_ascii_digit() || first == b'.' || first == b',') {
        return None;
    }
    if decimal != Decimal::Comma
        && let Ok(value) = fast_float2::parse::<f64, _>(field)
    {
        return value.is_finite().then_some(value);
    }
    number_with_marks(field, decimal)
}

/// Decimal comma, and marks between thousands where both marks occur and so tell each other apart.
fn number_with_marks(field: &[u8], decimal: Decimal) -> Option<f64> {
    let mut plain = [0u8; 64];
    if field.len() > plain.len() {
        return None;
    }
    let last_comma = memchr::memrchr(b',', field);
    let last_point = memchr::memrchr(b'.', field);
    let (mark, thousands) = match (last_comma, last_point) {
        (Some(comma), Some(point)) if comma > point && decimal != Decimal::Point => (comma, b'.'),
        (Some(comma), Some(point)) if point > comma && decimal == Decimal::Point => (point, b','),
        (Some(comma), None) if decimal != Decimal::Point => (comma, 0),
        (None, None) => (field.len(), 0),
        // `8.123` where the comma is the decimal mark could be 8.123 or 8123.
        _ => return None,
    };
    let mut length = 0;
    for (at, &byte) in field.iter().enumerate() {
        if at == mark {
            if !field.get(at + 1).is_some_and(u8::is_ascii_digit) {
                return None;
            }
            plain[length] = b'.';
        } else if thousands != 0 && byte == thousands {
            // Thousands stand in threes before the mark, and digits before them.
            if at > mark || (mark - at) % 4 != 0 || at == 0 || !field[at - 1].is_ascii_digit() {
                return None;
            }
            continue;
        } else if byte == b',' {
            return None;
        } else {
            plain[length] = byte;
        }
        length += 1;
    }
    fast_float2::parse::<f64, _>(&plain[..length]).ok().filter(|value| value.is_finite())
}

/// A number followed by a short unit: the number and the unit.
pub fn number_with_unit(field: &[u8], decimal: Decimal) -> Option<(f64, &[u8])> {
    let field = trim(field);
    let end = field.iter().position(|byte| byte.is_ascii_alphabetic() || *byte == b'%')?;
    // An exponent is part of the number.
    let (digits, unit) = field.split_at(end);
    if unit.len() > 6 || !unit.iter().all(|byte| byte.is_ascii_alphabetic() || matches!(byte, b'%' | b'/')) {
        return None;
    }
    let mut digits = trim(digits);
    let mut sign = 1.0;
    // Scales print the sign apart from the digits.
    if let [mark @ (b'+' | b'-'), b' ', rest @ ..] = digits {
        sign = if *mark == b'-' { -1.0 } else { 1.0 };
        digits = trim(rest);
        if !digits.first().is_some_and(u8::is_ascii_digit) {
            return None;
        }
    }
    number(digits, decimal).map(|value| (sign * value, unit))
}

fn digits(bytes: &[u8]) -> Option<u32> {
    if bytes.is_empty() || bytes.len() > 9 {
        return None;
    }
    bytes.iter().try_fold(0u32, |sum, byte| byte.is_ascii_digit().then(|| sum * 10 + u32::from(byte - b'0')))
}

/// Nanoseconds of a clock reading: `h:mm:ss` with fraction after `.`, `,` or `:`, perhaps AM or PM; or `mm:ss.fff`.
pub fn clock_ns(field: &[u8]) -> Option<i64> {
    let mut field = trim(field);
    let mut afternoon = None;
    if field.len() > 2 && matches!(field[field.len() - 1], b'M' | b'm') {
        afternoon = match field[field.len() - 2] {
            b'A' | b'a' => Some(false),
            b'P' | b'p' => Some(true),
            _ => return None,
        };
        field = trim(&field[..field.len() - 2]);
    }
    let first = memchr::memchr(b':', field)?;
    let rest = &field[first + 1..];
    let lead = digits(&field[..first])?;
    let (hours, minutes, seconds) = match rest.get(2) {
        Some(b':') => (lead, digits(&rest[..2])?, &rest[3..]),
        Some(b'.' | b',') => (0, lead, rest),
        _ => return None,
    };
    let (whole, fraction) = match seconds.iter().position(|byte| matches!(byte, b'.' | b',' | b':')) {
        Some(at) => (&seconds[..at], &seconds[at + 1..]),
        None => (seconds, &[][..]),
    };
    if whole.len() != 2 || fraction.len() > 9 || hours > 24 {
        return None;
    }
    let whole = digits(whole)?;
    if minutes > 59 || whole > 60 {
        return None;
    }
    let mut nanoseconds = i64::from(if fraction.is_empty() { 0 } else { digits(fraction)? });
    for _ in fraction.len()..9 {
        nanoseconds *= 10;
    }
    let hours = match afternoon {
        Some(pm) if (1..=12).contains(&hours) => hours % 12 + if pm { 12 } else { 0 },
        Some(_) => return None,
        None => hours,
    };
    Some((i64::from(hours) * 3600 + i64::from(minutes) * 60 + i64::from(whole)) * 1_000_000_000 + nanoseconds)
}

/// Nanoseconds since 1970 of an ISO 8601 date and time (space or `T` between, `/` allowed in the date, zone optional).
pub fn date_time_ns(field: &[u8]) -> Option<i64> {
    let field = trim(field);
    let (date, rest) = (field.get(..10)?, field.get(10..)?);
    if !(matches!(date[4], b'-' | b'/') && date[7] == date[4]) {
        return None;
    }
    let mut clock = match rest {
        [b'T' | b't' | b' ' | b'_', clock @ ..] => clock,
        _ => return None,
    };
    let year = i16::try_from(digits(&date[..4])?).ok()?;
    let (month, day) = (digits(&date[5..7])?, digits(&date[8..10])?);
    let date = jiff::civil::Date::new(year, i8::try_from(month).ok()?, i8::try_from(day).ok()?).ok()?;
    let days = date.duration_since(jiff::civil::date(1970, 1, 1)).as_secs() / 86_400;
    let mut zone_s = 0i64;
    if let [inner @ .., b'Z' | b'z'] = clock {
        clock = inner;
    } else if let Some(at) = clock.iter().rposition(|byte| matches!(byte, b'+' | b'-')) {
        let zone = &clock[at + 1..];
        let (hours, minutes) = match zone {
            [_, _] => (digits(zone)?, 0),
            [_, _, b':', ..] => (digits(&zone[..2])?, digits(&zone[3..])?),
            [_, _, _, _] => (digits(&zone[..2])?, digits(&zone[2..])?),
            _ => return None,
        };
        zone_s = i64::from(hours * 3600 + minutes * 60) * if clock[at] == b'-' { -1 } else { 1 };
        clock = &clock[..at];
    }
    let clock = clock_ns(clock)?;
    (days * 86_400 - zone_s).checked_mul(1_000_000_000)?.checked_add(clock)
}

/// Clock reading after a date in other than ISO order, whose day and month cannot be told apart: the clock alone.
pub fn dated_clock_ns(field: &[u8]) -> Option<i64> {
    let field = trim(field);
    let at = memchr::memchr2(b' ', b'T', field)?;
    let date = &field[..at];
    let parts = date.split(|byte| matches!(byte, b'.' | b'/' | b'-'));
    let (mut count, mut good) = (0, true);
    for part in parts {
        count += 1;
        good &= matches!(part.len(), 1 | 2 | 4) && part.iter().all(u8::is_ascii_digit);
    }
    (count == 3 && good).then(|| clock_ns(&field[at + 1..]))?
}

/// What a field looks like.
pub fn shape(field: &[u8], decimal: Decimal) -> Shape {
    if is_missing(field) {
        Shape::Empty
    } else if number(field, decimal).is_some() {
        Shape::Number
    } else if date_time_ns(field).is_some() {
        Shape::DateTime
    } else if clock_ns(field).is_some() || dated_clock_ns(field).is_some() {
        Shape::Clock
    } else if number_with_unit(field, decimal).is_some() {
        Shape::NumberWithUnit
    } else {
        Shape::Text
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fields(delimiter: Delimiter, line: &str) -> Vec<String> {
        let mut out = Vec::new();
        Splitter { delimiter, arrow: false }.split(line.as_bytes(), &mut out);
        out.into_iter().map(|range| line[range].to_owned()).collect()
    }

    #[test]
    fn splits_by_each_delimiter() {
        assert_eq!(fields(Delimiter::Byte(b','), "1,,3,"), ["1", "", "3", ""]);
        assert_eq!(fields(Delimiter::Byte(b','), "\"12,3\", \"a \"\"b\"\"\",4"), ["12,3", "a \"\"b\"\"", "4"]);
        assert_eq!(fields(Delimiter::Byte(b','), "\"12,3"), ["\"12", "3"]);
        assert_eq!(fields(Delimiter::Spaces, "  1 \t 2  "), ["1", "2"]);
        assert_eq!(fields(Delimiter::None, "1 2"), ["1 2"]);
        let line = b"11:30:37.9 -> 4,5";
        let mut out = Vec::new();
        Splitter { delimiter: Delimiter::Byte(b','), arrow: true }.split(line, &mut out);
        assert_eq!(out.len(), 3);
    }

    #[test]
    fn numbers_are_numbers_and_nothing_else() {
        let point = |text: &str| number(text.as_bytes(), Decimal::Point);
        assert_eq!(point(" +12.5 "), Some(12.5));
        assert_eq!(point("-.5e2"), Some(-50.0));
        assert_eq!(point("1,234.5"), Some(1234.5));
        for junk in ["", "inf", "nan", "1.2.3", "12 3", "12\u{0}3", "0x10", "1e999", "--1", "+-1", "12a", "1,23"] {
            assert_eq!(point(junk), None, "{junk:?}");
        }
        let comma = |text: &str| number(text.as_bytes(), Decimal::Comma);
        assert_eq!(comma("-12,5"), Some(-12.5));
        assert_eq!(comma("1.234,5"), Some(1234.5));
        assert_eq!(comma("12"), Some(12.0));
        assert_eq!(comma("8.123"), None);
        assert_eq!(comma("12,"), None);
        assert_eq!(number(b"12,5", Decimal::Either), Some(12.5));
        assert_eq!(number(b"12.5", Decimal::Either), Some(12.5));
        assert_eq!(number_with_unit(b"+  12.35 kg", Decimal::Point), Some((12.35, &b"kg"[..])));
    }

    #[test]
    fn clocks_and_dates() {
        assert_eq!(clock_ns(b"11:30:37.933747"), Some(41_437_933_747_000));
        assert_eq!(clock_ns(b"1:02:03 PM"), Some(46_923_000_000_000));
        assert_eq!(clock_ns(b"02:03.5"), Some(123_500_000_000));
        assert_eq!(clock_ns(b"11:61:00"), None);
        // 2025-02-08 is 20127 days after 1970-01-01 (55 years, 14 of them leap, and 38 days).
        assert_eq!(date_time_ns(b"2025-02-08 00:00:01"), Some((20_127 * 86_400 + 1) * 1_000_000_000));
        assert_eq!(date_time_ns(b"2025-02-08T01:00:01+01:00"), date_time_ns(b"2025-02-08T00:00:01Z"));
        assert_eq!(date_time_ns(b"2025-02-30 00:00:01"), None);
        assert_eq!(dated_clock_ns(b"08.02.2025 00:00:01"), Some(1_000_000_000));
        assert_eq!(shape(b"2025-02-08", Decimal::Point), Shape::Text);
    }
}
