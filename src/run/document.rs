//! A TOML file whose every value knows its line, so that a refusal can say where and what to write instead.

mod values;

use crate::problem::Problem;
use std::io::Read;
use std::ops::Range;
use std::path::{Path, PathBuf};
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Descriptions are written by hand; a file beyond this is not one of them.
const LARGEST_BYTES: u64 = 4 << 20;

/// The text of a TOML file.
#[derive(Debug, Clone)]
pub struct Document {
    pub path: PathBuf,
    pub text: String,
}

impl Document {
    /// Reads the file.
    ///
    /// # Errors
    /// The file is missing, not UTF-8, or far too large to be written by hand.
    pub fn read(path: &Path) -> Result<Self, Problem> {
        let file = std::fs::File::open(path).map_err(|error| cannot_open(path, &error))?;
        let mut bytes = Vec::new();
        file.take(LARGEST_BYTES + 1).read_to_end(&mut bytes).map_err(|error| cannot_open(path, &error))?;
        if bytes.len() as u64 > LARGEST_BYTES {
            return Err(Problem::new("the file is larger than 4 MiB").in_file(path).expected("a description in TOML"));
        }
        let text = String::from_utf8(bytes).map_err(|error| {
            let good = &error.as_bytes()[..error.utf8_error().valid_up_to()];
            let line = good.iter().filter(|byte| **byte == b'\n').count() as u64 + 1;
            Problem::new("the file is not UTF-8 text").in_file(path).at_line(line).remedy("save it as UTF-8")
        })?;
        Ok(Document::from_text(path, text))
    }

    /// A document from text already at hand; `path` is for messages and for what is relative to it.
    pub fn from_text(path: &Path, text: impl Into<String>) -> Self {
        let text: String = text.into();
        let text = text.strip_prefix('\u{feff}').map(str::to_owned).unwrap_or(text);
        Document { path: path.to_path_buf(), text }
    }

    /// Parses the text and hands out its top table.
    ///
    /// # Errors
    /// The text is not TOML; the place is named.
    pub fn parse(&self) -> Result<Parsed<'_>, Problem> {
        let root = DeTable::parse(&self.text).map_err(|error| {
            let message = error.message().trim().to_string();
            let problem = Problem::new(format!("this is not TOML: {message}"));
            let problem = match error.span() {
                Some(span) => self.place(problem, span.start),
                None => problem.in_file(&self.path),
            };
            problem.remedy("texts and quantities stand in quotes: key = \"412.3 g\"")
        })?;
        Ok(Parsed { document: self, root: root.into_inner() })
    }

    /// A file named in this document, relative to its folder.
    pub fn resolve(&self, file: &str) -> PathBuf {
        match self.path.parent() {
            Some(folder) => folder.join(file),
            None => PathBuf::from(file),
        }
    }

    fn place(&self, problem: Problem, offset: usize) -> Problem {
        let (line, column) = self.line_column(offset);
        problem.in_file(&self.path).at_line(line).at_column(column)
    }

    fn line_column(&self, offset: usize) -> (u64, u64) {
        let before = self.text.get(..offset.min(self.text.len())).unwrap_or(&self.text);
        let line = before.bytes().filter(|byte| *byte == b'\n').count() as u64 + 1;
        let start = before.rfind('\n').map_or(0, |at| at + 1);
        (line, before[start..].chars().count() as u64 + 1)
    }
}

fn cannot_open(path: &Path, error: &std::io::Error) -> Problem {
    let found = match error.kind() {
        std::io::ErrorKind::NotFound => "there is no such file".to_string(),
        std::io::ErrorKind::PermissionDenied => "the file may not be read".to_string(),
        _ => format!("the file cannot be read: {error}"),
    };
    Problem::new(found).in_file(path).remedy("check the name, and the folder it is relative to")
}

/// A document parsed.
#[derive(Debug)]
pub struct Parsed<'a> {
    document: &'a Document,
    root: DeTable<'a>,
}

impl Parsed<'_> {
    /// The top table.
    pub fn root(&self) -> Table<'_> {
        Table { document: self.document, name: String::new(), table: &self.root, span: 0..0 }
    }
}

/// A value with the place it was found at.
#[derive(Debug, Clone, PartialEq)]
pub struct Found<T> {
    pub value: T,
    pub span: Range<usize>,
}

/// A table of the document with its name, for messages.
#[derive(Debug, Clone)]
pub struct Table<'a> {
    document: &'a Document,
    /// As written between the brackets; empty for the top.
    pub name: String,
    table: &'a DeTable<'a>,
    span: Range<usize>,
}

impl<'a> Table<'a> {
    /// The document this table stands in.
    pub fn document(&self) -> &'a Document {
        self.document
    }

    /// Line the table starts at.
    pub fn line(&self) -> u64 {
        self.document.line_column(self.span.start).0
    }

    /// Refuses any key that is not among these, naming the nearest one.
    pub fn only(&self, known: &[&str]) -> Result<(), Problem> {
        let Some((key, _)) = self.table.iter().find(|(key, _)| !known.contains(&key.get_ref().as_ref())) else {
            return Ok(());
        };
        let written = key.get_ref().as_ref();
        let nearest = known
            .iter()
            .map(|name| (strsim::jaro_winkler(&written.to_lowercase(), name), *name))
            .max_by(|a, b| a.0.total_cmp(&b.0));
        let what = match known {
            _ if self.name.is_empty() => "the top of the file".to_string(),
            _ => format!("[{}]", self.name),
        };
        let problem = Problem::new(format!("key \"{written}\" is not known in {what}"))
            .expected(format!("one of: {}", known.join(", ")));
        let problem = match nearest {
            Some((score, name)) if score > 0.6 => problem.remedy(format!("did you mean \"{name}\"?")),
            _ => problem.remedy("remove the key, or move it to the table it belongs to"),
        };
        Err(self.document.place(problem, key.span().start))
    }

    /// A problem at a place in this document.
    pub fn problem_at(&self, span: &Range<usize>, problem: Problem) -> Problem {
        self.document.place(problem, span.start)
    }

    /// A problem of the table as a whole.
    pub fn problem(&self, problem: Problem) -> Problem {
        self.document.place(problem, self.span.start)
    }

    /// A problem at a key, or at the table when the key is not there.
    pub fn problem_with(&self, key: &str, problem: Problem) -> Problem {
        match self.table.get(key) {
            Some(value) => self.document.place(problem, value.span().start),
            None => self.problem(problem),
        }
    }

    /// Whether the key is there.
    pub fn has(&self, key: &str) -> bool {
        self.table.contains_key(key)
    }

    /// `table.key`, for messages.
    pub fn full(&self, key: &str) -> String {
        if self.name.is_empty() { key.to_string() } else { format!("{}.{key}", self.name) }
    }

    fn wrong_type(&self, key: &str, value: &Spanned<DeValue<'_>>, expected: &str, remedy: String) -> Problem {
        let found = format!("{} is {}", self.full(key), type_in_words(value.get_ref()));
        self.document.place(Problem::new(found).expected(expected).remedy(remedy), value.span().start)
    }

    /// The refusal of a key that must be there.
    pub fn missing(&self, key: &str, expected: &str, remedy: &str) -> Problem {
        self.problem(Problem::new(format!("{} is missing", self.full(key))).expected(expected).remedy(remedy))
    }
}

fn type_in_words(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "a text",
        DeValue::Integer(_) => "a whole number",
        DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date or time",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}
