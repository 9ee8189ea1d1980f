//! Streams the records of a log whose form is known into columns of numbers.

use super::field::{self, Decimal, trim};
use super::header::comment_mark;
use super::layout::{Kind, Layout};
use super::ledger::Ledger;
use super::text::{Lines, Span, readable};

/// What to take from each record.
#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    /// Index of the time column and how it is written.
    pub stamp: Option<(usize, Kind)>,
    /// Indices of the channels.
    pub channels: Vec<usize>,
    /// The channels were asked for by name: a record in which one of them is unreadable is not usable.
    pub asked: bool,
}

/// What was read, in file order.
#[derive(Debug, Default)]
pub struct Table {
    /// As written: own unit, seconds of the day, seconds since the first date; without a time column the record's number.
    pub stamps: Vec<f64>,
    pub line: Vec<u32>,
    pub channels: Vec<Vec<f64>>,
    /// The line is the same, byte for byte, as the record's before.
    pub same_line: Vec<bool>,
    /// Index of the first record after each repeated header.
    pub restarts: Vec<usize>,
    /// Data lines, dropped ones included.
    pub read: u64,
    /// Stamp of a record dropped ahead of all that were kept.
    pub early_stamp: Option<f64>,
    pub comments: u64,
    pub lines_with_nul: u64,
}

/// Why a record is not usable.
enum Fault {
    Fields(usize),
    Unreadable(usize),
    Cut,
    Overlong,
    Fragment,
}

/// The lengths of the last fields of the latest records, to know a last line that was cut.
struct Tail {
    lengths: [(u16, u16); 64],
    next: usize,
}

impl Tail {
    fn measure(field: &[u8]) -> (u16, u16) {
        let field = trim(field);
        let fraction = memchr::memrchr2(b'.', b',', field).map_or(0, |at| field.len() - at);
        (u16::try_from(field.len()).unwrap_or(u16::MAX), u16::try_from(fraction).unwrap_or(u16::MAX))
    }

    fn push(&mut self, field: &[u8]) {
        self.lengths[self.next % 64] = Self::measure(field);
        self.next += 1;
    }

    /// Shorter, or with fewer decimals, than every one of the latest fields.
    fn looks_cut(&self, field: &[u8]) -> bool {
        let (length, fraction) = Self::measure(field);
        let seen = &self.lengths[..self.next.min(64)];
        seen.len() >= 2 && (seen.iter().all(|known| length < known.0) || seen.iter().all(|known| fraction < known.1))
    }
}

/// Reads all lines; every data line is either in the table or in the ledger.
///
/// # Errors
/// Whatever the source reports.
pub fn read_table(lines: &mut Lines<'_>, layout: &Layout, plan: &Plan, ledger: &mut Ledger) -> std::io::Result<Table> {
    let mut reader = Reader {
        layout,
        plan,
        fields: Vec::with_capacity(layout.columns + 1),
        values: vec![0.0; plan.channels.len()],
        last_needed: plan.channels.iter().copied().chain(plan.stamp.map(|(at, _)| at)).max().unwrap_or(0),
        date_origin_ns: None,
        tail: Tail { lengths: [(0, 0); 64], next: 0 },
        stamp: f64::NAN,
    };
    let mut table = Table { channels: vec![Vec::new(); plan.channels.len()], ..Table::default() };
    let header_end = layout.header.names_line.max(layout.header.units_line).unwrap_or(0);
    let mut previous: Vec<u8> = Vec::new();
    while let Some(span) = lines.next_line()? {
        let text = trim_end(lines.text(span));
        let trimmed = trim(text);
        if trimmed.len() != text.len() || trimmed.is_empty() {
            table.lines_with_nul += u64::from(memchr::memchr(0, text).is_some());
            if trimmed.is_empty() && !span.overlong {
                continue;
            }
        }
        if comment_mark(trimmed).is_some() {
            table.comments += u64::from(span.number > layout.first_data);
            continue;
        }
        if span.number < layout.first_data {
            // A fragment of a record, as when the capture began in the middle of one; words are a banner.
            if span.number > header_end && (span.overlong || is_fragment(trimmed)) {
                table.read += 1;
                ledger.dropped(span.number, || describe(&Fault::Fragment, trimmed, &reader));
            }
            continue;
        }
        match reader.record(text, span) {
            Ok(()) => {
                table.read += 1;
                table.stamps.push(if plan.stamp.is_some() { reader.stamp } else { (table.read - 1) as f64 });
                table.line.push(u32::try_from(span.number).unwrap_or(u32::MAX));
                for (channel, value) in table.channels.iter_mut().zip(&reader.values) {
                    channel.push(*value);
                }
                table.same_line.push(previous == text);
                previous.clear();
                previous.extend_from_slice(text);
            }
            Err(fault) => {
                if layout.preamble.iter().any(|known| known == trimmed) {
                    if table.restarts.last() != Some(&table.line.len()) {
                        table.restarts.push(table.line.len());
                    }
                    continue;
                }
                table.read += 1;
                if table.line.is_empty() && table.early_stamp.is_none() && reader.stamp.is_finite() {
                    table.early_stamp = Some(reader.stamp);
                }
                ledger.dropped(span.number, || describe(&fault, trimmed, &reader));
            }
        }
    }
    Ok(table)
}

fn trim_end(mut text: &[u8]) -> &[u8] {
    while let [rest @ .., b'\r'] = text {
        text = rest;
    }
    while let [b'\r', rest @ ..] = text {
        text = rest;
    }
    text
}

/// No letters: a piece of a record, not of a banner.
fn is_fragment(text: &[u8]) -> bool {
    text.iter().any(u8::is_ascii_digit)
        && text.iter().all(|byte| byte.is_ascii_digit() || b" \t,;|.:+-eE\"\0/>".contains(byte))
}

fn describe(fault: &Fault, text: &[u8], reader: &Reader<'_>) -> String {
    const SHOWN: usize = 60;
    let mut shown: String = readable(&text[..text.len().min(SHOWN * 4)])
        .chars()
        .map(|c| if c.is_control() { '\u{fffd}' } else { c })
        .take(SHOWN)
        .collect();
    if shown.len() < text.len() {
        shown.push('\u{2026}');
    }
    let columns = reader.layout.columns;
    match fault {
        Fault::Fields(found) => format!("{found} fields where a record has {columns}: `{shown}`"),
        Fault::Unreadable(at) => {
            let name = reader.layout.header.names.get(*at).map_or("?", String::as_str);
            format!("no number to read in `{name}`: `{shown}`")
        }
        Fault::Cut => format!("the last line was cut in the middle: `{shown}`"),
        Fault::Overlong => format!("longer than any record can be: `{shown}`"),
        Fault::Fragment => format!("a piece of a record ahead of the first whole one: `{shown}`"),
    }
}

struct Reader<'a> {
    layout: &'a Layout,
    plan: &'a Plan,
    fields: Vec<std::ops::Range<usize>>,
    values: Vec<f64>,
    last_needed: usize,
    date_origin_ns: Option<i64>,
    tail: Tail,
    stamp: f64,
}

impl Reader<'_> {
    fn record(&mut self, text: &[u8], span: Span) -> Result<(), Fault> {
        self.stamp = f64::NAN;
        if span.overlong {
            return Err(Fault::Overlong);
        }
        let layout = self.layout;
        layout.splitter.split(text, &mut self.fields);
        let mut count = self.fields.len();
        while count > layout.columns && trim(&text[self.fields[count - 1].clone()]).is_empty() {
            count -= 1;
        }
        if let Some((at, kind)) = self.plan.stamp
            && let Some(range) = self.fields.get(at)
        {
            self.stamp = self.stamp_of(&text[range.clone()], kind);
        }
        let enough = if layout.strict {
            count == layout.columns
        } else {
            // The field behind a needed one shows that it is whole.
            count > self.last_needed + usize::from(count < layout.columns)
        };
        if !enough {
            return Err(if span.terminated { Fault::Fields(count) } else { Fault::Cut });
        }
        let last = self.fields.get(layout.columns - 1).map_or(&[][..], |range| &text[range.clone()]);
        if !span.terminated && self.tail.looks_cut(last) {
            return Err(Fault::Cut);
        }
        if let Some((at, _)) = self.plan.stamp
            && !self.stamp.is_finite()
        {
            return Err(Fault::Unreadable(at));
        }
        let mut unreadable = 0;
        for (value, &at) in self.values.iter_mut().zip(&self.plan.channels) {
            let field = self.fields.get(at).map_or(&[][..], |range| &text[range.clone()]);
            *value = match value_of(field, layout.kinds[at], layout.decimal) {
                Some(value) => value,
                None if field::is_missing(field) => f64::NAN,
                None if self.plan.asked => return Err(Fault::Unreadable(at)),
                None => {
                    unreadable += 1;
                    f64::NAN
                }
            };
        }
        if unreadable * 2 > self.values.len() {
            return Err(Fault::Unreadable(self.plan.channels.first().copied().unwrap_or(0)));
        }
        self.tail.push(last);
        Ok(())
    }

    #[inline]
    fn stamp_of(&mut self, field: &[u8], kind: Kind) -> f64 {
        match kind {
            Kind::Clock => field::clock_ns(field)
                .or_else(|| field::dated_clock_ns(field))
                .or_else(|| field::date_time_ns(field).map(|ns| ns.rem_euclid(86_400_000_000_000)))
                .map_or(f64::NAN, |ns| ns as f64 * 1e-9),
            Kind::DateTime => match field::date_time_ns(field) {
                Some(ns) => ns.saturating_sub(*self.date_origin_ns.get_or_insert(ns)) as f64 * 1e-9,
                None => f64::NAN,
            },
            _ => value_of(field, kind, self.layout.decimal).unwrap_or(f64::NAN),
        }
    }
}

#[inline]
fn value_of(field: &[u8], kind: Kind, decimal: Decimal) -> Option<f64> {
    field::number(field, decimal).or_else(|| match kind {
        Kind::NumberWithUnit => field::number_with_unit(field, decimal).map(|(value, _)| value),
        _ => None,
    })
}
