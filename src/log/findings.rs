//! How a log is written, in plain sentences.

use super::field::{Decimal, Delimiter};
use super::layout::Layout;
use super::table::Table;
use super::text::{Encoding, LineEnd};

/// One sentence a finding.
pub fn describe(layout: &Layout, encoding: Encoding, line_end: LineEnd, table: &Table) -> Vec<String> {
    let mut findings = Vec::new();
    let delimiter = match layout.splitter.delimiter {
        Delimiter::Byte(b',') => "comma-separated",
        Delimiter::Byte(b';') => "semicolon-separated",
        Delimiter::Byte(b'\t') => "tab-separated",
        Delimiter::Byte(_) => "separated by `|`",
        Delimiter::Spaces => "separated by spaces",
        Delimiter::None => "one column",
    };
    let mut form = delimiter.to_owned();
    if layout.decimal == Decimal::Comma {
        form.push_str(" with decimal comma");
    }
    match layout.header.names_line {
        Some(line) => form.push_str(&format!(", header on line {line}")),
        None => form.push_str(", no header"),
    }
    if let Some(line) = layout.header.units_line {
        form.push_str(&format!(", units on line {line}"));
    }
    form.push_str(&format!(", data from line {}", layout.first_data));
    findings.push(form);
    if layout.splitter.arrow {
        findings.push("each line begins with the clock of a terminal, before `->`".to_owned());
    }
    let code = match encoding {
        Encoding::Bytes { bom: false } => None,
        Encoding::Bytes { bom: true } => Some("UTF-8 with byte order mark"),
        Encoding::Utf16Le { bom: true } => Some("UTF-16 LE with byte order mark"),
        Encoding::Utf16Be { bom: true } => Some("UTF-16 BE with byte order mark"),
        Encoding::Utf16Le { bom: false } => Some("UTF-16 LE without byte order mark"),
        Encoding::Utf16Be { bom: false } => Some("UTF-16 BE without byte order mark"),
    };
    findings.extend(code.map(str::to_owned));
    let ends = match line_end {
        LineEnd::Lf => None,
        LineEnd::CrLf => Some("lines end in CR LF"),
        LineEnd::Cr => Some("lines end in CR alone"),
        LineEnd::Mixed => Some("lines end in LF and in CR, mixed"),
    };
    findings.extend(ends.map(str::to_owned));
    if !layout.strict {
        findings.push(format!("the number of fields varies; {} is the most usual", layout.columns));
    }
    if table.comments > 0 {
        findings.push(format!("{} comment lines among the data", table.comments));
    }
    if table.lines_with_nul > 0 {
        findings.push(format!("{} lines with NUL bytes", table.lines_with_nul));
    }
    if !table.restarts.is_empty() {
        findings.push(format!(
            "the header stands {} more times among the data: the logger was restarted",
            table.restarts.len()
        ));
    }
    findings
}
