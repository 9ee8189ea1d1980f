//! Which column is the time, which are the channels.

use super::header::{TimeName, bracketed_unit, time_name, time_unit};
use super::layout::{Kind, Layout};
use crate::problem::Problem;
use crate::run::{ColumnRef, TimeSpec};

/// The time column and what is known of its unit.
#[derive(Debug, Clone, PartialEq)]
pub struct TimeColumn {
    pub index: usize,
    pub kind: Kind,
    /// Seconds in one, and the symbol; `None`: to be inferred from the stamps.
    pub unit: Option<(String, f64)>,
    /// Where the unit came from, for the report.
    pub unit_source: &'static str,
    /// A counter of samples: needs a rate.
    pub counter: bool,
    /// Named by the person rather than found.
    pub given: bool,
}

/// Index of the column asked for.
///
/// # Errors
/// Not there, ambiguous, or out of range: names what is there and the nearest name.
pub fn find_column(layout: &Layout, wanted: &ColumnRef, what: &str) -> Result<usize, Problem> {
    let names = &layout.header.names;
    let listed = || {
        const SHOWN: usize = 40;
        let mut text = names
            .iter()
            .take(SHOWN)
            .enumerate()
            .map(|(at, name)| format!("{} = {name}", at + 1))
            .collect::<Vec<_>>()
            .join(", ");
        if names.len() > SHOWN {
            text.push_str(&format!(", and {} more", names.len() - SHOWN));
        }
        format!("one of the {} columns of this log: {text}", names.len())
    };
    let name = match wanted {
        ColumnRef::Number(number) if (1..=names.len()).contains(number) => return Ok(number - 1),
        ColumnRef::Number(number) => {
            return Err(Problem::new(format!("{what} column {number} is not in the log"))
                .expected(listed())
                .remedy(format!("give a column name, or a number from 1 to {}", names.len())));
        }
        ColumnRef::Name(name) => name,
    };
    let plain = |text: &str| text.trim().to_lowercase();
    let bare = |text: &str| plain(bracketed_unit(text).0);
    let tests: [&dyn Fn(&str) -> bool; 3] =
        [&|known| known == name, &|known| plain(known) == plain(name), &|known| bare(known) == plain(name)];
    for test in tests {
        let found: Vec<usize> = (0..names.len()).filter(|&at| test(&names[at])).collect();
        match found.as_slice() {
            [] => {}
            [one] => return Ok(*one),
            many => {
                let numbers = many.iter().map(|at| (at + 1).to_string()).collect::<Vec<_>>().join(", ");
                return Err(Problem::new(format!(
                    "{what} column `{name}` is in the log more than once: columns {numbers}"
                ))
                .remedy(format!("give the number of the one you mean, for instance column = {}", many[0] + 1)));
            }
        }
    }
    let problem = Problem::new(format!("{what} column `{name}` is not in the log")).expected(listed());
    let nearest = names
        .iter()
        .map(|known| (strsim::jaro_winkler(&plain(known), &plain(name)), known))
        .max_by(|a, b| a.0.total_cmp(&b.0))
        // Below this the nearest name is no help.
        .filter(|(likeness, _)| *likeness > 0.7);
    Err(match nearest {
        Some((_, known)) => problem.remedy(format!("write column = \"{known}\" if that is the one you mean")),
        None => problem.remedy("write the name as the log has it, or the column's number"),
    })
}

/// The time column: the one named, else the one the names tell, else the one that runs like a clock.
///
/// # Errors
/// A named column that is not there or holds no time; none to be found and no rate given.
pub fn find_time(
    layout: &Layout,
    spec: Option<&TimeSpec>,
    rate_hz: Option<f64>,
) -> Result<Option<TimeColumn>, Problem> {
    let given_unit = spec.and_then(|spec| spec.unit).map(|unit| (unit.symbol.to_owned(), unit.factor));
    if let Some(spec) = spec
        && let Some(column) = &spec.column
    {
        let index = find_column(layout, column, "time")?;
        let mut time = describe(layout, index);
        if matches!(time.kind, Kind::Text | Kind::Empty) {
            return Err(Problem::new(format!("time column `{}` holds no times", layout.header.names[index]))
                .expected("numbers, clock readings (11:30:37.93) or dates with time (2025-02-08 11:30:37.93)")
                .remedy("name another column, or give rate = \"80 Hz\" in [log] if the log has no time"));
        }
        time.given = true;
        time.counter = rate_hz.is_some() && given_unit.is_none() && time.unit.is_none();
        if let Some(unit) = given_unit {
            agrees_with_log(layout, &time, &unit)?;
            time.unit = Some(unit);
            time.unit_source = "as given";
        }
        return Ok(Some(time));
    }
    let mut found = candidates(layout);
    if let Some(rate_hz) = rate_hz {
        // A given rate stands for the clock; a counter beside it still shows what is missing.
        let _ = rate_hz;
        return Ok(found.into_iter().find(|time| time.counter));
    }
    found.retain(|time| !time.counter);
    // Finest first: a column that repeats its stamps less tells more; then seconds before thousandths before dates.
    let rank = |time: &TimeColumn| {
        let fresh = fresh_share(&layout.samples[time.index]);
        let form = match (time.kind, &time.unit) {
            (Kind::Number, Some((symbol, _))) if symbol == "s" => 0,
            (Kind::Number, Some((symbol, _))) if symbol == "ms" => 1,
            (Kind::Number, Some(_)) => 2,
            (Kind::Number | Kind::NumberWithUnit, _) => 3,
            (Kind::DateTime, _) => 4,
            _ => 5,
        };
        (u32::from(fresh < 0.95), form, time.index)
    };
    found.sort_by_key(rank);
    let mut best = found.into_iter().next();
    if best.is_none() {
        best = runs_like_a_clock(layout)?;
    }
    match (&mut best, given_unit) {
        (Some(time), Some(unit)) => {
            agrees_with_log(layout, time, &unit)?;
            time.unit = Some(unit);
            time.unit_source = "as given";
        }
        (None, _) => return Err(no_time(layout)),
        _ => {}
    }
    Ok(best)
}

/// The unit a person gives for the time, against what the log's own header or units row says.
///
/// # Errors
/// They differ: one of the two makes every time, and every impulse, wrong by a round factor.
fn agrees_with_log(layout: &Layout, time: &TimeColumn, given: &(String, f64)) -> Result<(), Problem> {
    match &time.unit {
        Some((symbol, factor)) if *factor != given.1 => Err(Problem::new(format!(
            "run.toml gives the time in {}, the log says {symbol} ({}) for column `{}`",
            given.0, time.unit_source, layout.header.names[time.index]
        ))
        .expected("one unit for the time")
        .remedy(format!(
            "write unit = \"{symbol}\" in [log] time, or leave the unit out; where the log itself is wrong, correct its header in a copy"
        ))),
        _ => Ok(()),
    }
}

/// The refusal where no time can be had.
fn no_time(layout: &Layout) -> Problem {
    Problem::new(format!("no time column found among: {}", layout.header.names.join(", ")))
        .expected("a column of times (named t, time, t_ms, millis, seconds, timestamp, ...), or a sample rate")
        .remedy("give rate = \"80 Hz\" (the logger's own rate) in [log], or time = { column = \"...\", unit = \"ms\" }")
}

/// Share of steps that move forward.
fn fresh_share(sample: &[f64]) -> f64 {
    let forward = sample.windows(2).filter(|pair| pair[1] > pair[0]).count();
    forward as f64 / sample.len().saturating_sub(1).max(1) as f64
}

/// Never, or hardly ever, goes back, and does go forward.
fn mostly_rises(sample: &[f64]) -> bool {
    let steps = sample.len().saturating_sub(1);
    let back = sample.windows(2).filter(|pair| pair[1] < pair[0]).count();
    steps == 0 || (back * 10 <= steps && sample.windows(2).any(|pair| pair[1] > pair[0]))
}

fn describe(layout: &Layout, index: usize) -> TimeColumn {
    let kind = layout.kinds[index];
    let from_row = layout.header.units[index].as_deref().and_then(time_unit);
    let from_name = match time_name(&layout.header.names[index]) {
        TimeName::Time(unit) => unit,
        _ => None,
    };
    let (unit, unit_source) = match (from_row, from_name) {
        (Some(unit), _) if layout.header.units_line.is_some() => (Some(unit), "as the units row says"),
        (Some(unit), _) | (None, Some(unit)) => (Some(unit), "as its name says"),
        (None, None) => (None, "inferred"),
    };
    TimeColumn {
        index,
        kind,
        unit: unit.map(|(symbol, factor)| (symbol.to_owned(), factor)),
        unit_source,
        counter: false,
        given: false,
    }
}

/// Columns that are times by name, or by form (clock readings, dates).
fn candidates(layout: &Layout) -> Vec<TimeColumn> {
    let mut found = Vec::new();
    for index in 0..layout.columns {
        let mut time = describe(layout, index);
        let named = time_name(&layout.header.names[index]);
        let by_form = matches!(time.kind, Kind::Clock | Kind::DateTime);
        let by_unit = time.unit.is_some() && time.kind == Kind::Number && layout.header.names_line.is_some();
        let by_name = matches!(time.kind, Kind::Number | Kind::NumberWithUnit) && named != TimeName::No;
        if !(by_form || by_name || (by_unit && named != TimeName::No)) || !mostly_rises(&layout.samples[index]) {
            continue;
        }
        time.counter = named == TimeName::Counter;
        found.push(time);
    }
    found
}

/// A column without a telling name that rises in steps of nearly one size.
fn runs_like_a_clock(layout: &Layout) -> Result<Option<TimeColumn>, Problem> {
    for index in 0..layout.columns {
        let sample = &layout.samples[index];
        if !matches!(layout.kinds[index], Kind::Number | Kind::NumberWithUnit) || sample.len() < 3 || layout.columns < 2
        {
            continue;
        }
        let mut steps: Vec<f64> = sample.windows(2).map(|pair| pair[1] - pair[0]).collect();
        let total = steps.len();
        let backward = steps.iter().filter(|step| step.is_nan() || **step < 0.0).count();
        steps.retain(|step| *step > 0.0);
        if backward * 50 > total || steps.is_empty() {
            continue;
        }
        steps.sort_by(f64::total_cmp);
        let at = |share: f64| steps[((steps.len() - 1) as f64 * share) as usize];
        // A reading that happens to rise does not do so in even steps.
        if at(0.9) > 3.0 * at(0.1) {
            continue;
        }
        let by_one = steps.iter().filter(|step| **step == 1.0).count();
        let counts = at(0.0) == 1.0 && by_one * 10 >= total * 9;
        if counts || time_name(&layout.header.names[index]) == TimeName::Counter {
            return Err(Problem::new(format!(
                "`{}` counts up by one: sample numbers, or milliseconds at 1 kHz; the log does not say which",
                layout.header.names[index]
            ))
            .expected("the sample rate, or the unit of that column")
            .remedy(format!(
                "give rate = \"80 Hz\" (the logger's own rate) in [log], or time = {{ column = {}, unit = \"ms\" }}",
                index + 1
            )));
        }
        return Ok(Some(describe(layout, index)));
    }
    Ok(None)
}

/// Unit of numeric stamps from their size and step: `(symbol, seconds, reason)`. `step` is the usual step, `span` the whole range.
pub fn infer_unit(first: f64, step: f64, span: f64, whole: bool) -> Option<(&'static str, f64, &'static str)> {
    // Seconds since 1970 for the years 2001 to 2065, and their thousandths.
    for (symbol, factor) in [("s", 1.0), ("ms", 1e-3), ("us", 1e-6), ("ns", 1e-9)] {
        if (1e9..3e9).contains(&(first * factor)) && span * factor < 1e6 {
            return Some((symbol, factor, "the stamps count from 1970"));
        }
    }
    if step.is_nan() || step <= 0.0 {
        return None;
    }
    // Firings are logged at some 5 Hz to 100 kHz, and for less than two hours.
    if !whole && step < 1.5 {
        return Some(("s", 1.0, "from the size of its steps"));
    }
    if step <= 200.0 && span * 1e-3 < 7200.0 {
        return Some(("ms", 1e-3, "from the size of its steps"));
    }
    Some(("us", 1e-6, "from the size of its steps"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_from_size() {
        // 80 Hz in each unit, for 20 s.
        for (step, whole, symbol) in
            [(0.0125, false, "s"), (12.5, true, "ms"), (12.5, false, "ms"), (12_500.0, true, "us")]
        {
            assert_eq!(infer_unit(0.0, step, step * 1600.0, whole).unwrap().0, symbol);
        }
        assert_eq!(infer_unit(1_739_014_237.0, 1.0, 60.0, true).unwrap().0, "s");
        assert_eq!(infer_unit(1_739_014_237_933.0, 12.0, 60_000.0, true).unwrap().0, "ms");
    }
}
