//! One error type a person can act on: where, what was found, what was expected, what to write instead.

use std::fmt;
use std::path::{Path, PathBuf};

/// A refusal: the input cannot be used as it stands.
///
/// `found` is always set. The other fields are filled wherever they are known, and the message leaves out what is not.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Problem {
    /// File the trouble is in.
    pub file: Option<PathBuf>,
    /// Line, counted from 1.
    pub line: Option<u64>,
    /// Column (character or field), counted from 1.
    pub column: Option<u64>,
    /// What was found.
    pub found: String,
    /// What was expected instead.
    pub expected: Option<String>,
    /// What to write or do instead.
    pub remedy: Option<String>,
}

impl Problem {
    /// A problem that says what was found.
    pub fn new(found: impl Into<String>) -> Self {
        Problem { found: found.into(), ..Problem::default() }
    }

    /// Names the file, unless one is named already.
    pub fn in_file(mut self, file: impl AsRef<Path>) -> Self {
        self.file.get_or_insert_with(|| file.as_ref().to_path_buf());
        self
    }

    /// Names the line, unless one is named already.
    pub fn at_line(mut self, line: u64) -> Self {
        self.line.get_or_insert(line);
        self
    }

    /// Names the column, unless one is named already.
    pub fn at_column(mut self, column: u64) -> Self {
        self.column.get_or_insert(column);
        self
    }

    /// Says what was expected.
    pub fn expected(mut self, expected: impl Into<String>) -> Self {
        self.expected = Some(expected.into());
        self
    }

    /// Says what to do about it.
    pub fn remedy(mut self, remedy: impl Into<String>) -> Self {
        self.remedy = Some(remedy.into());
        self
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut place = String::new();
        if let Some(file) = &self.file {
            place.push_str(&file.display().to_string());
        }
        if let Some(line) = self.line {
            if !place.is_empty() {
                place.push_str(", ");
            }
            place.push_str(&format!("line {line}"));
        }
        if let Some(column) = self.column {
            if !place.is_empty() {
                place.push_str(", ");
            }
            place.push_str(&format!("column {column}"));
        }
        if !place.is_empty() {
            write!(f, "{place}: ")?;
        }
        f.write_str(&self.found)?;
        if let Some(expected) = &self.expected {
            write!(f, "\n  expected: {expected}")?;
        }
        if let Some(remedy) = &self.remedy {
            write!(f, "\n  do this:  {remedy}")?;
        }
        Ok(())
    }
}

impl std::error::Error for Problem {}
