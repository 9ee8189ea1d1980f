//! A TOML file whose every value knows its line, so that a refusal can say where and what to write instead.

use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured, Unit};
use std::io::Read;
use std::ops::Range;
use std::path::{Path, PathBuf};
use toml::Spanned;
use toml::de::{DeArray, DeTable, DeValue};

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

    /// A text.
    pub fn text(&self, key: &str) -> Result<Option<Found<String>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match value.get_ref() {
            DeValue::String(text) => Ok(Some(Found { value: text.to_string(), span: value.span() })),
            other => {
                Err(self.wrong_type(key, value, "a text in quotes", format!("write {key} = \"{}\"", plain(other))))
            }
        }
    }

    /// One of a list of words.
    pub fn word<T: Copy>(&self, key: &str, words: &[(&str, T)]) -> Result<Option<T>, Problem> {
        let Some(found) = self.text(key)? else { return Ok(None) };
        if let Some((_, meaning)) = words.iter().find(|(word, _)| *word == found.value) {
            return Ok(Some(*meaning));
        }
        let names: Vec<&str> = words.iter().map(|(word, _)| *word).collect();
        let nearest = names
            .iter()
            .max_by(|a, b| strsim::jaro_winkler(&found.value, a).total_cmp(&strsim::jaro_winkler(&found.value, b)));
        let problem = Problem::new(format!("{} is \"{}\"", self.full(key), found.value))
            .expected(format!("one of: {}", names.join(", ")));
        let problem = match nearest {
            Some(name) => problem.remedy(format!("write {key} = \"{name}\", if that is what it means")),
            None => problem,
        };
        Err(self.problem_at(&found.span, problem))
    }

    /// A date or a text; TOML's own date type is taken as it stands.
    pub fn date(&self, key: &str) -> Result<Option<String>, Problem> {
        if let Some(DeValue::Datetime(date)) = self.table.get(key).map(Spanned::get_ref) {
            return Ok(Some(date.to_string()));
        }
        Ok(self.text(key)?.map(|found| found.value))
    }

    /// A plain number.
    pub fn number(&self, key: &str) -> Result<Option<Found<f64>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match number_of(value.get_ref()) {
            Some(number) if number.is_finite() => Ok(Some(Found { value: number, span: value.span() })),
            _ => Err(self.wrong_type(
                key,
                value,
                "a finite number without quotes",
                format!("write {key} = 1.0, with your number"),
            )),
        }
    }

    /// A whole number from 1 up.
    pub fn counting(&self, key: &str) -> Result<Option<Found<usize>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match whole_of(value.get_ref()) {
            Some(number) if number >= 1 => Ok(Some(Found { value: number, span: value.span() })),
            _ => Err(self.wrong_type(
                key,
                value,
                "a whole number from 1 up",
                format!("write {key} = 1, with your number"),
            )),
        }
    }

    /// A quantity string of a dimension, in SI. A ratio may also be a bare number.
    pub fn quantity(&self, key: &str, dimension: Dimension) -> Result<Option<Found<Measured>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match value.get_ref() {
            DeValue::String(text) => match quantity::parse(text, dimension) {
                Ok(measured) => Ok(Some(Found { value: measured, span: value.span() })),
                Err(problem) => {
                    let problem = Problem { found: format!("{}: {}", self.full(key), problem.found), ..problem };
                    Err(self.document.place(problem, value.span().start))
                }
            },
            other => match number_of(other) {
                Some(number) if dimension == Dimension::Ratio && number.is_finite() => {
                    Ok(Some(Found { value: Measured::of(number), span: value.span() }))
                }
                Some(_) => {
                    let unit = dimension.example().trim_matches('"').rsplit(' ').next().unwrap_or("").to_string();
                    let problem = Problem::new(format!("{} = {} has no unit", self.full(key), plain(other)))
                        .expected(format!("{} with its unit, in quotes", dimension.words()))
                        .remedy(format!("write {key} = \"{} {unit}\", with the unit it was measured in", plain(other)));
                    Err(self.document.place(problem, value.span().start))
                }
                None => Err(self.wrong_type(
                    key,
                    value,
                    &format!("{} with its unit, in quotes", dimension.words()),
                    format!("write {key} = {}, with your number", dimension.example()),
                )),
            },
        }
    }

    /// A quantity of one of several dimensions, in SI, with the unit it was written in.
    pub fn quantity_among(
        &self,
        key: &str,
        dimensions: &[Dimension],
    ) -> Result<Option<Found<(Measured, Unit)>>, Problem> {
        let first = dimensions.first().copied().unwrap_or(Dimension::Ratio);
        let unit = self.raw_text(key).and_then(|text| quantity::parse_any(text).ok()).map(|(_, unit)| unit);
        let unit = match unit {
            Some(unit) if dimensions.contains(&unit.dimension) => unit,
            // lets the first dimension word the refusal
            _ => {
                return self
                    .quantity(key, first)
                    .map(|found| found.map(|found| Found { value: (found.value, one()), span: found.span }));
            }
        };
        let found = self.quantity(key, unit.dimension)?;
        Ok(found.map(|found| Found { value: (found.value, unit), span: found.span }))
    }

    /// A quantity above zero.
    pub fn positive(&self, key: &str, dimension: Dimension) -> Result<Option<Measured>, Problem> {
        let Some(found) = self.quantity(key, dimension)? else { return Ok(None) };
        if found.value.value > 0.0 {
            return Ok(Some(found.value));
        }
        let problem = Problem::new(format!("{} is not above zero", self.full(key)))
            .expected(format!("{} above zero", dimension.words()))
            .remedy("correct it, or remove the key if it is not known");
        Err(self.problem_at(&found.span, problem))
    }

    /// The text of a quantity as written, whatever it is.
    pub fn raw_text(&self, key: &str) -> Option<&str> {
        self.table.get(key).and_then(|value| value.get_ref().as_str())
    }

    /// A table below this one.
    pub fn table(&self, key: &str) -> Result<Option<Table<'a>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match value.get_ref() {
            DeValue::Table(table) => {
                Ok(Some(Table { document: self.document, name: self.full(key), table, span: value.span() }))
            }
            DeValue::Array(_) => Err(self.wrong_type(
                key,
                value,
                "one table",
                format!("write [{}] with single brackets, once", self.full(key)),
            )),
            _ => {
                Err(self.wrong_type(key, value, "a table", format!("write [{}] on a line of its own", self.full(key))))
            }
        }
    }

    /// A list of tables (`[[key]]`); empty when it is not there.
    pub fn tables(&self, key: &str) -> Result<Vec<Table<'a>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(Vec::new()) };
        let wrong = |value: &Spanned<DeValue<'_>>| {
            self.wrong_type(
                key,
                value,
                "a list of tables",
                format!("write [[{}]] with double brackets", self.full(key)),
            )
        };
        let DeValue::Array(list) = value.get_ref() else { return Err(wrong(value)) };
        list.iter()
            .map(|item| match item.get_ref() {
                DeValue::Table(table) => {
                    Ok(Table { document: self.document, name: self.full(key), table, span: item.span() })
                }
                _ => Err(wrong(item)),
            })
            .collect()
    }

    /// Pairs of numbers (`[[0, 8123.4], [5, 52311.0]]`) with their places; `None` when the key is not there.
    pub fn pairs(&self, key: &str) -> Result<Option<Vec<Found<[f64; 2]>>>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        let wrong = |value: &Spanned<DeValue<'_>>| {
            let problem = Problem::new(format!(
                "{} holds {} where a pair should be",
                self.full(key),
                type_in_words(value.get_ref())
            ))
            .expected("pairs of finite numbers")
            .remedy(format!("write {key} = [[0, 8123.4], [5, 52311.0]]"));
            self.document.place(problem, value.span().start)
        };
        let DeValue::Array(list) = value.get_ref() else { return Err(wrong(value)) };
        let pair = |item: &Spanned<DeValue<'_>>| -> Result<Found<[f64; 2]>, Problem> {
            let DeValue::Array(numbers) = item.get_ref() else { return Err(wrong(item)) };
            match numbers_of(numbers).as_deref() {
                Some(&[first, second]) => Ok(Found { value: [first, second], span: item.span() }),
                _ => Err(wrong(item)),
            }
        };
        list.iter().map(pair).collect::<Result<Vec<_>, _>>().map(Some)
    }

    /// A header name, or a 1-based number.
    pub fn column(&self, key: &str) -> Result<Option<super::ColumnRef>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match value.get_ref() {
            DeValue::String(text) if !text.trim().is_empty() => Ok(Some(super::ColumnRef::Name(text.to_string()))),
            other => match whole_of(other) {
                Some(number) if number >= 1 => Ok(Some(super::ColumnRef::Number(number))),
                _ => Err(self.wrong_type(
                    key,
                    value,
                    "a header name in quotes, or the number of the column counted from 1",
                    format!("write {key} = \"load\" or {key} = 2"),
                )),
            },
        }
    }

    /// Everything in the table for the record: quantities as SI value, UCUM unit and text; numbers and texts as they are.
    pub fn record(&self) -> Result<serde_json::Map<String, serde_json::Value>, Problem> {
        let mut map = serde_json::Map::new();
        for (key, value) in self.table {
            let name = key.get_ref().to_string();
            let entry = match value.get_ref() {
                DeValue::String(text) => recorded_text(text),
                DeValue::Boolean(flag) => serde_json::Value::from(*flag),
                DeValue::Datetime(date) => serde_json::Value::from(date.to_string()),
                other => match (whole_signed(other), number_of(other)) {
                    (Some(whole), _) => serde_json::Value::from(whole),
                    (None, Some(number)) if number.is_finite() => serde_json::Value::from(number),
                    _ => {
                        return Err(self.wrong_type(
                            &name,
                            value,
                            "a text, a finite number or a quantity",
                            format!("write {name} = \"21 degC\" or {name} = 9"),
                        ));
                    }
                },
            };
            map.insert(name, entry);
        }
        Ok(map)
    }
}

/// A bare ratio's unit.
fn one() -> Unit {
    Unit { symbol: "1", dimension: Dimension::Ratio, factor: 1.0, offset: 0.0 }
}

fn recorded_text(text: &str) -> serde_json::Value {
    match quantity::parse_any(text) {
        Ok((measured, unit)) => {
            let mut entry = serde_json::Map::new();
            entry.insert("value".into(), measured.value.into());
            entry.insert("unit".into(), unit.dimension.ucum().into());
            if let Some(standard) = measured.standard_uncertainty {
                entry.insert("standard_uncertainty".into(), standard.into());
            }
            entry.insert("text".into(), text.into());
            serde_json::Value::Object(entry)
        }
        Err(_) => serde_json::Value::from(text),
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

/// The value as it could be written, for a remedy.
fn plain(value: &DeValue<'_>) -> String {
    match value {
        DeValue::String(text) => text.to_string(),
        DeValue::Integer(number) => number.to_string(),
        DeValue::Float(number) => number.to_string(),
        DeValue::Boolean(flag) => flag.to_string(),
        DeValue::Datetime(date) => date.to_string(),
        DeValue::Array(_) | DeValue::Table(_) => "...".to_string(),
    }
}

fn whole_signed(value: &DeValue<'_>) -> Option<i64> {
    let integer = value.as_integer()?;
    i64::from_str_radix(integer.as_str(), integer.radix()).ok()
}

fn whole_of(value: &DeValue<'_>) -> Option<usize> {
    whole_signed(value).and_then(|number| usize::try_from(number).ok())
}

fn number_of(value: &DeValue<'_>) -> Option<f64> {
    match value {
        DeValue::Float(number) => number.as_str().parse().ok(),
        other => whole_signed(other).map(|number| number as f64),
    }
}

fn numbers_of(list: &DeArray<'_>) -> Option<Vec<f64>> {
    list.iter().map(|item| number_of(item.get_ref()).filter(|number| number.is_finite())).collect()
}
