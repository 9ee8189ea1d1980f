//! Bytes to columns to a time base, with every repair and drop counted.

mod columns;
mod field;
mod findings;
mod header;
mod layout;
mod ledger;
mod spread;
mod stamps;
mod table;
mod text;
mod timebase;

use crate::problem::Problem;
use crate::run::{ColumnRef, TimeSpec};
use layout::{Kind, Layout, find_layout};
use ledger::Ledger;
use serde::{Deserialize, Serialize};
use std::path::Path;
use table::Plan;
use text::{LineEnd, Lines};

/// What to read from a log. Whatever is `None` or empty is found from the log itself and reported.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct ReadRequest {
    pub time: Option<TimeSpec>,
    /// Sample rate for a log without a time column, Hz.
    pub rate_hz: Option<f64>,
    /// Channels to keep; empty: every numeric column except the time.
    pub columns: Vec<ColumnRef>,
}

/// One repair, drop or reinterpretation; never silent.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Repair {
    /// Line of the log, counted from 1; null when it concerns the whole log.
    pub line: Option<u64>,
    /// Column name or number.
    pub column: Option<String>,
    /// `glitch`, `dropped`, `time`, `gap`, ...
    pub kind: String,
    pub message: String,
}

/// read = kept + repaired + dropped, in records (data lines).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub struct Records {
    pub read: u64,
    pub kept: u64,
    pub repaired: u64,
    pub dropped: u64,
}

/// A stretch without records.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Gap {
    /// Last stamp before, first stamp after, log time in s.
    pub start_s: f64,
    pub end_s: f64,
    /// Records that should have been there.
    pub missing: u64,
}

/// A channel of the log.
#[derive(Debug, Clone, PartialEq)]
pub struct Column {
    /// Header name, or `column N`.
    pub name: String,
    /// 1-based place in the line.
    pub number: usize,
    /// Unit as the log gives it (units row, or brackets in the header), as written.
    pub unit: Option<String>,
    /// One value a record, glitches repaired; NaN where a field was empty or unreadable in a record that was kept.
    pub values: Vec<f64>,
}

/// A log read: every vector has one element a kept or repaired record, in time order.
#[derive(Debug, Clone, PartialEq)]
pub struct Log {
    /// s on the log's own clock, unwrapped, from the first data record; strictly increasing.
    pub time_s: Vec<f64>,
    /// Line of the file each record came from.
    pub line: Vec<u32>,
    pub columns: Vec<Column>,
    /// Names (or `column N`) of all columns of the file, for messages.
    pub available: Vec<String>,
    /// Typical interval between records, s (median).
    pub interval_s: f64,
    /// Resolution of the clock, s, where stamps repeat or step coarsely; 0 when fine.
    pub clock_resolution_s: f64,
    pub gaps: Vec<Gap>,
    pub records: Records,
    pub repairs: Vec<Repair>,
    /// How the file is written and where the time came from, one plain sentence each, for the report.
    pub findings: Vec<String>,
    /// Lower-case hex SHA-256 of the raw bytes.
    pub sha256: String,
    pub bytes: u64,
}

/// Reads a log from a stream in one pass after a look at its head; memory grows with the records kept, not with the text.
///
/// # Errors
/// No data lines, no numeric column, a named column that is not there, a time that cannot be understood.
pub fn read(source: &mut dyn std::io::Read, name: &Path, request: &ReadRequest) -> Result<Log, Problem> {
    read_unplaced(source, request).map_err(|problem| problem.in_file(name))
}

fn read_unplaced(source: &mut dyn std::io::Read, request: &ReadRequest) -> Result<Log, Problem> {
    let unreadable = |error: std::io::Error| Problem::new(format!("cannot be read: {error}"));
    let mut lines = Lines::open(source).map_err(unreadable)?;
    let head = head_lines(lines.head(), lines.line_end, lines.head_is_all());
    if head.is_empty() {
        return Err(Problem::new("the file is empty")
            .expected("lines of numbers")
            .remedy("check that the logger wrote to this file and that it was copied whole"));
    }
    let layout = find_layout(&head).ok_or_else(|| {
        let (line, text) = head.iter().find(|(_, line)| !field::trim(line).is_empty()).copied().unwrap_or((1, b""));
        let shown: String = text::readable(text).chars().filter(|c| !c.is_control()).take(60).collect();
        Problem::new(format!("no line holds numbers in columns; the first text is `{shown}`"))
            .at_line(line)
            .expected("a text log: one record a line, numbers between commas, semicolons, tabs or spaces")
            .remedy("export the log as CSV text")
    })?;
    drop(head);
    let time = columns::find_time(&layout, request.time.as_ref(), request.rate_hz)?;
    let plan = plan(&layout, time.as_ref(), request)?;
    let (encoding, line_end) = (lines.encoding, lines.line_end);
    let mut ledger = Ledger::default();
    let mut table = table::read_table(&mut lines, &layout, &plan, &mut ledger).map_err(unreadable)?;
    let (bytes, sha256) = lines.finish();
    if table.line.is_empty() {
        return Err(Problem::new(format!("none of the {} data lines could be read", table.read))
            .expected("records with a readable time and a readable channel"));
    }
    let name_of = |index: usize| layout.header.names.get(index).cloned().unwrap_or_default();
    for (values, &index) in table.channels.iter().zip(&plan.channels) {
        if plan.asked && values.iter().all(|value| value.is_nan()) {
            return Err(no_numbers(&name_of(index)));
        }
    }

    let mut findings = findings::describe(&layout, encoding, line_end, &table);
    let time_name = time.as_ref().map_or_else(String::new, |time| name_of(time.index));
    let base = timebase::time_base(&table, time.as_ref(), &time_name, request.rate_hz, &mut ledger)?;
    findings.extend(base.findings);
    let in_order = base.record.len() == table.line.len() && base.record.windows(2).all(|pair| pair[0] < pair[1]);
    let columns = plan
        .channels
        .iter()
        .zip(std::mem::take(&mut table.channels))
        .map(|(&index, values)| Column {
            name: name_of(index),
            number: index + 1,
            unit: layout.header.units.get(index).cloned().flatten(),
            values: if in_order { values } else { base.record.iter().map(|at| values[*at as usize]).collect() },
        })
        .collect();
    let line = if in_order { table.line } else { base.record.iter().map(|at| table.line[*at as usize]).collect() };
    if !base.gaps.is_empty() {
        let missing: u64 = base.gaps.iter().map(|gap| gap.missing).sum();
        findings.push(format!("{} gaps in the record, about {missing} records missing", base.gaps.len()));
    }
    let records = Records {
        read: table.read,
        kept: table.read.saturating_sub(ledger.dropped + ledger.repaired),
        repaired: ledger.repaired,
        dropped: ledger.dropped,
    };
    Ok(Log {
        time_s: base.time_s,
        line,
        columns,
        available: layout.header.names,
        interval_s: base.interval_s,
        clock_resolution_s: base.clock_resolution_s,
        gaps: base.gaps,
        records,
        repairs: ledger.into_repairs(),
        findings,
        sha256,
        bytes,
    })
}

/// The lines of the head with their numbers; the last one only if it is whole.
fn head_lines(head: &[u8], line_end: LineEnd, whole: bool) -> Vec<(u64, &[u8])> {
    let ends = |byte: &u8| match line_end {
        LineEnd::Lf | LineEnd::CrLf => *byte == b'\n',
        LineEnd::Cr => *byte == b'\r',
        LineEnd::Mixed => matches!(byte, b'\n' | b'\r'),
    };
    let mut lines = Vec::new();
    let (mut number, mut start) = (1, 0);
    let mut at = 0;
    while at < head.len() {
        if ends(&head[at]) {
            lines.push((number, &head[start..at]));
            number += 1;
            if line_end == LineEnd::Mixed && head[at] == b'\r' && head.get(at + 1) == Some(&b'\n') {
                at += 1;
            }
            start = at + 1;
        }
        at += 1;
    }
    if start < head.len() && (whole || lines.is_empty()) {
        lines.push((number, &head[start..]));
    }
    lines
}

/// The channels to keep: those asked for, else every column of numbers but the time.
fn plan(layout: &Layout, time: Option<&columns::TimeColumn>, request: &ReadRequest) -> Result<Plan, Problem> {
    let stamp = time.map(|time| (time.index, time.kind));
    let asked = !request.columns.is_empty();
    let channels = if asked {
        let mut channels = Vec::with_capacity(request.columns.len());
        for wanted in &request.columns {
            let index = columns::find_column(layout, wanted, "channel")?;
            if !matches!(layout.kinds[index], Kind::Number | Kind::NumberWithUnit | Kind::Empty) {
                return Err(no_numbers(&layout.header.names[index]));
            }
            channels.push(index);
        }
        channels
    } else {
        let numeric = |index: &usize| matches!(layout.kinds[*index], Kind::Number | Kind::NumberWithUnit);
        (0..layout.columns).filter(numeric).filter(|index| stamp.is_none_or(|(at, _)| at != *index)).collect()
    };
    if channels.is_empty() {
        return Err(Problem::new("no column of numbers beside the time")
            .expected("at least one channel of readings")
            .remedy("name the channel's column, or say which column is the time in [log] time"));
    }
    Ok(Plan { stamp, channels, asked })
}

fn no_numbers(name: &str) -> Problem {
    Problem::new(format!("column `{name}` holds no numbers"))
        .expected("a column of readings")
        .remedy("name the column that holds the readings; `burntally inspect` lists what is in a log")
}
