//! How a log is written, found from its head: delimiter, decimal mark, columns, where the data begins.

use super::field::{self, Decimal, Delimiter, Shape, Splitter, trim};
use super::header::{Header, comment_mark, find_header};
use std::ops::Range;

/// Lines that decide the delimiter; more would cost time and change nothing.
const DECIDING_LINES: usize = 300;
/// Rows of the head kept to tell the time column.
const SAMPLE_ROWS: usize = 2000;

/// What a column holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    Number,
    NumberWithUnit,
    Clock,
    DateTime,
    Text,
    /// Nothing in the whole head.
    Empty,
}

/// The form of a log.
#[derive(Debug, Clone, PartialEq)]
pub struct Layout {
    pub splitter: Splitter,
    pub decimal: Decimal,
    /// Fields of a full record; empty ones after trailing delimiters are not counted.
    pub columns: usize,
    /// Nearly all records have that many fields: one with more or fewer is damaged.
    pub strict: bool,
    pub kinds: Vec<Kind>,
    pub header: Header,
    /// Line number of the first record that reads well.
    pub first_data: u64,
    /// Lines before it that are no comments and not blank, as written; when they turn up again the logger was restarted.
    pub preamble: Vec<Vec<u8>>,
    /// First rows of the data, one vector a column: number, or seconds of a clock or date; NaN where unreadable.
    pub samples: Vec<Vec<f64>>,
}

struct Candidate {
    splitter: Splitter,
    decimal: Decimal,
    columns: usize,
    /// Share of the deciding lines that have `columns` fields and a number among them.
    coverage: f64,
    score: f64,
}

/// Fields without the empty ones at the end.
fn count_filled(line: &[u8], fields: &[Range<usize>]) -> usize {
    let empty = fields.iter().rev().take_while(|range| trim(&line[(*range).clone()]).is_empty()).count();
    fields.len() - empty
}

/// The form of the log whose head is given; `None` if no line holds a number.
pub fn find_layout(head: &[(u64, &[u8])]) -> Option<Layout> {
    let lines: Vec<&(u64, &[u8])> =
        head.iter().filter(|(_, line)| !trim(line).is_empty() && comment_mark(line).is_none()).collect();
    let step = lines.len().div_ceil(DECIDING_LINES).max(1);
    let deciding: Vec<&[u8]> = lines.iter().rev().step_by(step).rev().map(|(_, line)| *line).collect();
    let best = best_candidate(&deciding)?;
    let mut fields = Vec::new();

    // Column kinds from every line of the head that has the usual number of fields.
    let mut counts = vec![[0usize; 6]; best.columns];
    let (mut full, mut numeric_lines) = (0usize, 0usize);
    let mut fraction = (false, false);
    for (_, line) in &lines {
        best.splitter.split(line, &mut fields);
        let filled = count_filled(line, &fields);
        let shapes: Vec<Shape> = fields.iter().map(|range| field::shape(&line[range.clone()], best.decimal)).collect();
        if !shapes.iter().any(|shape| matches!(shape, Shape::Number | Shape::NumberWithUnit)) {
            continue;
        }
        numeric_lines += 1;
        if filled > best.columns || fields.len() < best.columns {
            continue;
        }
        full += 1;
        for (count, (shape, range)) in counts.iter_mut().zip(shapes.iter().zip(&fields)) {
            count[slot(*shape)] += 1;
            if *shape == Shape::Number {
                fraction.0 |= memchr::memchr(b'.', &line[range.clone()]).is_some();
                fraction.1 |= memchr::memchr(b',', &line[range.clone()]).is_some();
            }
        }
    }
    let kinds: Vec<Kind> = counts.iter().map(kind_of).collect();
    let decimal = match (best.decimal, best.splitter.delimiter) {
        (Decimal::Point, Delimiter::Byte(b',')) => Decimal::Point,
        (Decimal::Point, _) if !fraction.0 && !fraction.1 => Decimal::Either,
        (other, _) => other,
    };

    let is_record = |line: &[u8], fields: &mut Vec<Range<usize>>| {
        best.splitter.split(line, fields);
        if fields.len() < best.columns || count_filled(line, fields) > best.columns {
            return false;
        }
        let mut numbers = 0;
        for (kind, range) in kinds.iter().zip(fields.iter()) {
            let shape = field::shape(&line[range.clone()], decimal);
            match (kind, shape) {
                (Kind::Number, Shape::Number) | (Kind::NumberWithUnit, Shape::NumberWithUnit | Shape::Number) => {
                    numbers += 1;
                }
                (Kind::Clock, Shape::Clock) | (Kind::DateTime, Shape::DateTime) => {}
                (Kind::Text | Kind::Empty, _) | (_, Shape::Empty) => {}
                _ => return false,
            }
        }
        numbers > 0
    };
    let first = head.iter().position(|(_, line)| comment_mark(line).is_none() && is_record(line, &mut fields))?;
    let before = &head[..first];
    let mut samples = vec![Vec::new(); best.columns];
    for (_, line) in head[first..].iter().filter(|(_, line)| comment_mark(line).is_none()) {
        if !is_record(line, &mut fields) {
            continue;
        }
        for ((sample, range), kind) in samples.iter_mut().zip(&fields).zip(&kinds) {
            sample.push(sample_value(&line[range.clone()], *kind, decimal));
        }
        if samples.first().is_some_and(|sample| sample.len() >= SAMPLE_ROWS) {
            break;
        }
    }
    let indexed = samples.first().is_some_and(|sample| {
        sample.len() > 1 && sample[0].abs() <= 1.0 && sample.windows(2).all(|pair| pair[1] - pair[0] == 1.0)
    });
    let header = find_header(before, best.columns, best.splitter, indexed);
    Some(Layout {
        splitter: best.splitter,
        decimal,
        columns: best.columns,
        strict: full * 5 >= numeric_lines * 4,
        kinds,
        header,
        first_data: head[first].0,
        preamble: before
            .iter()
            .filter(|(_, line)| !trim(line).is_empty() && comment_mark(line).is_none())
            .map(|(_, line)| trim(line).to_vec())
            .collect(),
        samples,
    })
}

fn slot(shape: Shape) -> usize {
    match shape {
        Shape::Number => 0,
        Shape::NumberWithUnit => 1,
        Shape::Clock => 2,
        Shape::DateTime => 3,
        Shape::Text => 4,
        Shape::Empty => 5,
    }
}

fn kind_of(counts: &[usize; 6]) -> Kind {
    let filled: usize = counts[..5].iter().sum();
    if filled == 0 {
        return Kind::Empty;
    }
    // A header and a few damaged lines leave text in any column; a column of numbers is one where most fields are.
    let numbers = counts[0] + counts[1];
    if numbers * 5 >= filled * 3 {
        if counts[1] > counts[0] { Kind::NumberWithUnit } else { Kind::Number }
    } else if counts[3] * 5 >= filled * 3 {
        Kind::DateTime
    } else if counts[2] * 5 >= filled * 3 {
        Kind::Clock
    } else {
        Kind::Text
    }
}

fn sample_value(field: &[u8], kind: Kind, decimal: Decimal) -> f64 {
    let seconds = |ns: Option<i64>| ns.map(|ns| ns as f64 * 1e-9);
    match kind {
        Kind::Number => field::number(field, decimal),
        Kind::NumberWithUnit => {
            field::number_with_unit(field, decimal).map(|(value, _)| value).or_else(|| field::number(field, decimal))
        }
        Kind::Clock => seconds(field::clock_ns(field).or_else(|| field::dated_clock_ns(field))),
        Kind::DateTime => seconds(field::date_time_ns(field)),
        Kind::Text | Kind::Empty => None,
    }
    .unwrap_or(f64::NAN)
}

fn best_candidate(lines: &[&[u8]]) -> Option<Candidate> {
    let arrows = lines
        .iter()
        .filter(|line| memchr::memmem::find(line, b"->").is_some_and(|at| field::clock_ns(&line[..at]).is_some()))
        .count();
    let arrow = arrows > 0 && arrows * 5 >= lines.len() * 3;
    // In order of preference where two explain the lines equally well.
    let delimiters = [
        Delimiter::Byte(b'\t'),
        Delimiter::Byte(b';'),
        Delimiter::Byte(b'|'),
        Delimiter::Byte(b','),
        Delimiter::Spaces,
        Delimiter::None,
    ];
    let mut best: Option<Candidate> = None;
    let mut pair_by_comma = false;
    let mut single_comma: Option<Candidate> = None;
    for delimiter in delimiters {
        for decimal in [Decimal::Point, Decimal::Comma] {
            let Some(candidate) = weigh(lines, Splitter { delimiter, arrow }, decimal) else { continue };
            // With one field to a line there is no delimiter to speak of.
            if candidate.columns <= usize::from(arrow) + 1 && delimiter != Delimiter::None {
                continue;
            }
            if delimiter == Delimiter::None && decimal == Decimal::Comma {
                single_comma = Some(candidate);
                continue;
            }
            if best.as_ref().is_none_or(|best| candidate.score > best.score + 1e-9) {
                pair_by_comma = delimiter == Delimiter::Byte(b',')
                    && candidate.columns == 2 + usize::from(arrow)
                    && decimal == Decimal::Point;
                best = Some(candidate);
            }
        }
    }
    // `12,05` down the page is either two integers or one decimal. A zero that leads the second part, or a one-word header,
    // shows the decimal.
    if let Some(single) = single_comma
        && single.coverage > 0.0
        && (best.as_ref().is_none_or(|best| single.score > best.score + 0.2)
            || (pair_by_comma && one_decimal_a_line(lines, arrow)))
    {
        return Some(single);
    }
    best.filter(|best| best.coverage > 0.0)
}

/// Evidence that `a,b` is one number with a decimal comma.
fn one_decimal_a_line(lines: &[&[u8]], arrow: bool) -> bool {
    if arrow {
        return false;
    }
    let mut width = None;
    let mut leading_zero = false;
    for line in lines {
        let line = trim(line);
        let Some(comma) = memchr::memchr(b',', line) else { continue };
        let (whole, part) = (&line[..comma], &line[comma + 1..]);
        if field::number(whole, Decimal::Point).is_none() || !part.iter().all(u8::is_ascii_digit) {
            // The header: two words mean two columns.
            if line.iter().any(u8::is_ascii_alphabetic) {
                return false;
            }
            continue;
        }
        if part.len() < 2 || width.is_some_and(|width| width != part.len()) {
            return false;
        }
        width = Some(part.len());
        leading_zero |= part[0] == b'0';
    }
    leading_zero
}

/// How well a delimiter and a decimal mark explain the lines.
fn weigh(lines: &[&[u8]], splitter: Splitter, decimal: Decimal) -> Option<Candidate> {
    let mut fields = Vec::new();
    // Fields (as delimited, and without empty ones at the end), numbers among them.
    let mut rows: Vec<(usize, usize, usize, usize)> = Vec::new();
    for line in lines {
        splitter.split(line, &mut fields);
        let filled = count_filled(line, &fields);
        let (mut numbers, mut present) = (0, 0);
        for range in &fields[..filled] {
            match field::shape(&line[range.clone()], decimal) {
                Shape::Empty => {}
                Shape::Text => present += 1,
                _ => {
                    present += 1;
                    numbers += 1;
                }
            }
        }
        if numbers > 0 {
            rows.push((fields.len(), filled, numbers, present));
        }
    }
    let mut tally: Vec<(usize, usize)> = Vec::new();
    for &(_, filled, ..) in &rows {
        match tally.iter_mut().find(|(count, _)| *count == filled) {
            Some((_, times)) => *times += 1,
            None => tally.push((filled, 1)),
        }
    }
    let commonest = tally.iter().copied().max_by_key(|&(count, times)| (times, count))?;
    // Where the last columns are often empty the delimiters still show how many there are.
    let columns = tally
        .iter()
        .filter(|(_, times)| *times * 10 >= commonest.1)
        .map(|(count, _)| *count)
        .filter(|&count| {
            count == commonest.0
                || (count > commonest.0 && rows.iter().filter(|row| row.0 >= count).count() * 10 >= rows.len() * 9)
        })
        .max()
        .unwrap_or(commonest.0);
    let matching = rows.iter().filter(|row| row.0 >= columns && row.1 <= columns);
    let (mut sum, mut count) = (0.0, 0usize);
    for &(_, _, numbers, present) in matching {
        sum += numbers as f64 / present.max(1) as f64;
        count += 1;
    }
    if count == 0 {
        return None;
    }
    // Spaces also stand inside dates and remarks: they need better evidence than a mark that was chosen as a delimiter.
    let weight = if splitter.delimiter == Delimiter::Spaces { 0.85 } else { 1.0 };
    let total = lines.len().max(1) as f64;
    Some(Candidate { splitter, decimal, columns, coverage: count as f64 / total, score: weight * sum / total })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn layout(text: &str) -> Layout {
        let head: Vec<(u64, &[u8])> =
            text.lines().enumerate().map(|(at, line)| (at as u64 + 1, line.as_bytes())).collect();
        find_layout(&head).expect("a layout")
    }

    #[test]
    fn delimiters_and_decimal_marks() {
        for (text, delimiter, decimal, columns) in [
            ("0,1.5\n1,2.5\n2,2.5\n", Delimiter::Byte(b','), Decimal::Point, 2),
            ("0;1,5\n1;2,5\n2;2,5\n", Delimiter::Byte(b';'), Decimal::Comma, 2),
            ("0;1\n1;2\n2;2\n", Delimiter::Byte(b';'), Decimal::Either, 2),
            ("0,0\t1,5\n0,1\t2,5\n", Delimiter::Byte(b'\t'), Decimal::Comma, 2),
            ("  0,0  1,5\n  0,1  2,5\n", Delimiter::Spaces, Decimal::Comma, 2),
            ("0.0 1.5\n0.1 2.5\n", Delimiter::Spaces, Decimal::Point, 2),
            ("0, 1.5, 7\n1, 2.5, 7\n", Delimiter::Byte(b','), Decimal::Point, 3),
            ("0|1.5\n1|2.5\n", Delimiter::Byte(b'|'), Decimal::Point, 2),
            ("1.5\n2.5\n", Delimiter::None, Decimal::Point, 1),
            ("12,05\n12,11\n", Delimiter::None, Decimal::Comma, 1),
            ("load\n12,5\n12,1\n", Delimiter::Byte(b','), Decimal::Point, 2),
            ("\"0,1\",\"12,5\"\n\"0,2\",\"12,6\"\n", Delimiter::Byte(b','), Decimal::Comma, 2),
            (
                "2025-02-08 11:30:37\t12.3\tOK\n2025-02-08 11:30:38\t12.3\tOK\n",
                Delimiter::Byte(b'\t'),
                Decimal::Point,
                3,
            ),
            ("2025-02-08 11:30:37 12.3\n2025-02-08 11:30:38 12.3\n", Delimiter::Spaces, Decimal::Point, 3),
            ("1,2,\n2,3,\n", Delimiter::Byte(b','), Decimal::Point, 2),
        ] {
            let found = layout(text);
            assert_eq!(
                (found.splitter.delimiter, found.decimal, found.columns),
                (delimiter, decimal, columns),
                "{text}"
            );
        }
    }

    #[test]
    fn data_begin_after_banner_header_and_units() {
        let found = layout("Logger 4, bench 2\n\n# note\nt;load\nms;N\n0;1,5\n10;2,5\n");
        assert_eq!(found.first_data, 6);
        assert_eq!(found.header.names, ["t", "load"]);
        assert_eq!(found.header.units[1].as_deref(), Some("N"));
    }

    #[test]
    fn last_column_that_is_mostly_empty_is_a_column() {
        let found = layout("1,2,3\n2,3,\n3,4,\n4,5,\n5,6,3\n");
        assert_eq!(found.columns, 3);
    }
}
