//! The typed values of a table, each refused at its place when it is not what the key is for.

use super::{Found, Table, type_in_words};
use crate::problem::Problem;
use crate::quantity::{self, Dimension, Measured, Unit};
use crate::run::ColumnRef;
use toml::Spanned;
use toml::de::{DeArray, DeValue};

impl<'a> Table<'a> {
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
        // Below this the nearest word is no help.
        let likeness = |name: &str| strsim::jaro_winkler(&found.value, name);
        let nearest =
            names.iter().filter(|name| likeness(name) > 0.75).max_by(|a, b| likeness(a).total_cmp(&likeness(b)));
        let problem = Problem::new(format!("{} is \"{}\"", self.full(key), found.value))
            .expected(format!("one of: {}", names.join(", ")));
        let problem = match nearest {
            Some(name) => problem.remedy(format!("write {key} = \"{name}\", if that is what it means")),
            None => problem.remedy(format!("write {key} with one of these words")),
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

    /// Limits as a fraction: the half-width alone, `"0.5 %"`, from 0 to below 1.
    pub fn limits(&self, key: &str) -> Result<Option<Found<f64>>, Problem> {
        let Some(found) = self.quantity(key, Dimension::Ratio)? else { return Ok(None) };
        if found.value.standard_uncertainty.is_none() && (0.0..1.0).contains(&found.value.value) {
            return Ok(Some(Found { value: found.value.value, span: found.span }));
        }
        let problem = Problem::new(format!("{} is not a half-width from 0 to below 100 %", self.full(key)))
            .expected("limits of an error: its half-width alone")
            .remedy(format!("write {key} = \"0.5 %\", with your number"));
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
    pub fn column(&self, key: &str) -> Result<Option<ColumnRef>, Problem> {
        let Some(value) = self.table.get(key) else { return Ok(None) };
        match value.get_ref() {
            DeValue::String(text) if !text.trim().is_empty() => Ok(Some(ColumnRef::Name(text.to_string()))),
            other => match whole_of(other) {
                Some(number) if number >= 1 => Ok(Some(ColumnRef::Number(number))),
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
