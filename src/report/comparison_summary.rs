//! What `compare` says on the screen: one row a group, then whether they are alike, then what does not belong.

use super::summary::{View, plain, wrapped};
use super::units::{fixed, significant};
use crate::compare::pairwise::Alike;
use crate::compare::{Comparison, Group, OddValue, Spread};

/// Figures of the row, with their heading.
const COLUMNS: [(&str, &str); 5] = [
    ("total_impulse", "impulse"),
    ("average_thrust", "average"),
    ("peak_thrust", "peak"),
    ("burn_time", "burn time"),
    ("specific_impulse", "sp. impulse"),
];
/// Figures that differences are told of.
const TOLD: [(&str, &str); 3] =
    [("total_impulse", "total impulse"), ("average_thrust", "average thrust"), ("burn_time", "burn time")];
/// Groups and differences beyond so many are left to the files, so that the summary fits on a screen.
const MOST_GROUPS: usize = 8;
const MOST_DIFFERENCES: usize = 6;

/// The summary, ending in a line feed.
pub fn summary(c: &Comparison, view: View, written: &str) -> String {
    let runs: usize = c.groups.iter().map(|g| g.runs.len()).sum();
    let mut lines = vec![format!(
        "{runs} firing{} in {} group{} by {}",
        if runs == 1 { "" } else { "s" },
        c.groups.len(),
        if c.groups.len() == 1 { "" } else { "s" },
        plain(&c.by)
    )];
    lines.push(String::new());
    lines.extend(rows(c, view));
    lines.push("  mean ± standard deviation from motor to motor".into());
    lines.push(String::new());
    lines.extend(differences(c, view));
    lines.extend(next_motor(c, view));
    lines.extend(trends(c, view));
    lines.extend(attention(c));
    lines.push(String::new());
    lines.extend(wrapped(written, "", "  "));
    lines.push("A measured motor is not a certified one; alike figures do not make a motor safe.".into());
    lines.push(String::new());
    lines.join("\n")
}

fn shown(s: &Spread, view: View) -> String {
    let unit = view.units.of(&s.unit, s.mean);
    match s.standard_deviation {
        Some(sd) => {
            let sd = sd / unit.size_si;
            // Two digits of the spread, and the mean to the same place.
            let places = if sd > 0.0 { (1.0 - sd.log10().floor()) as i32 } else { 2 };
            format!("{} ± {}", fixed(s.mean / unit.size_si, places.max(0)), fixed(sd, places.max(0)))
        }
        None => significant(s.mean / unit.size_si, 5),
    }
}

fn rows(c: &Comparison, view: View) -> Vec<String> {
    let present: Vec<(&str, &str)> =
        COLUMNS.into_iter().filter(|(key, _)| c.groups.iter().any(|g| g.quantities.contains_key(*key))).collect();
    let mut table: Vec<Vec<String>> = vec![["group".to_string(), "n".to_string()].into()];
    for (key, heading) in &present {
        let spread = c.groups.iter().find_map(|g| g.quantities.get(*key));
        let unit = spread.map_or("", |s| view.units.of(&s.unit, s.mean).symbol);
        table[0].push(format!("{heading}, {unit}"));
    }
    for group in c.groups.iter().take(MOST_GROUPS) {
        let mut row = vec![plain(&group.pour), group.n.to_string()];
        row.extend(present.iter().map(|(k, _)| group.quantities.get(*k).map_or("-".into(), |s| shown(s, view))));
        table.push(row);
    }
    let widths: Vec<usize> =
        (0..table[0].len()).map(|k| table.iter().map(|r| r[k].chars().count()).max().unwrap_or(0)).collect();
    // What does not fit in 80 columns is in the files.
    let mut fit = 0;
    let mut used = 0;
    for width in &widths {
        used += width + 2;
        if used > 80 {
            break;
        }
        fit += 1;
    }
    let mut lines: Vec<String> = table
        .iter()
        .map(|row| {
            let cells = row.iter().zip(&widths).take(fit).map(|(cell, width)| {
                let pad = " ".repeat(width - cell.chars().count());
                format!("  {cell}{pad}")
            });
            cells.collect::<String>().trim_end().to_string()
        })
        .collect();
    if c.groups.len() > MOST_GROUPS {
        lines.push(format!("  and {} more groups in comparison.csv", c.groups.len() - MOST_GROUPS));
    }
    lines
}

fn differences(c: &Comparison, view: View) -> Vec<String> {
    let mut lines = Vec::new();
    if c.groups.len() < 2 {
        return lines;
    }
    for (key, name) in TOLD {
        let Some(between) = c.between_pours.get(key) else { continue };
        let unit = view.units.of(&between.unit, 1.0);
        let spread = c.variance_components.get(key).map_or(String::new(), |v| {
            format!(
                "; within a group {}{}, between groups {} {}",
                significant(v.repeatability_sd / unit.size_si, 2),
                measuring(c, key)
                    .map_or(String::new(), |u| format!(" (measuring alone {})", significant(u / unit.size_si, 2))),
                significant(v.between_pour_sd / unit.size_si, 2),
                unit.symbol
            )
        });
        lines.extend(wrapped(
            &format!(
                "{name}: {} p {}{spread}",
                between.method.split(';').next().unwrap_or(""),
                probability(between.p_value)
            ),
            "  ",
            "    ",
        ));
        // One figure in full; the others are in comparison.json.
        if key != TOLD[0].0 {
            continue;
        }
        let mut largest: Vec<_> = between.differences.iter().collect();
        largest.sort_by(|a, b| b.difference.abs().total_cmp(&a.difference.abs()));
        for d in largest.iter().take(MOST_DIFFERENCES) {
            let [low, high] = d.interval_95_with_calibration.unwrap_or(d.interval_95);
            let alike = match d.alike {
                Some(Alike::Alike) => "alike",
                Some(Alike::Different) => "not alike",
                Some(Alike::CannotTell) => "cannot tell whether alike",
                None => "calibration error not known: cannot tell whether alike",
            };
            let text = format!(
                "{} − {}: {} ({} to {}) {}, {alike} within {} %",
                plain(&d.a),
                plain(&d.b),
                significant(d.difference / unit.size_si, 3),
                significant(low / unit.size_si, 3),
                significant(high / unit.size_si, 3),
                unit.symbol,
                100.0 * c.alike_within
            );
            lines.extend(wrapped(&text, "    ", "      "));
        }
        if largest.len() > MOST_DIFFERENCES {
            lines.push(format!("    and {} smaller differences in comparison.json", largest.len() - MOST_DIFFERENCES));
        }
    }
    if lines.is_empty() {
        lines.push("  too few firings to say whether the groups differ: two in one group at least".into());
    }
    lines
}

/// Spread that measuring alone makes within a group, in the figure's unit.
fn measuring(c: &Comparison, key: &str) -> Option<f64> {
    let all: Option<Vec<f64>> =
        c.groups.iter().filter_map(|g| g.quantities.get(key)).map(|s| s.measurement_sd).collect();
    let all = all.filter(|a| !a.is_empty())?;
    Some((all.iter().map(|u| u * u).sum::<f64>() / all.len() as f64).sqrt())
}

/// A probability to two digits, or that it is smaller than can be told.
fn probability(p: f64) -> String {
    if p < 1e-4 { "below 0.0001".into() } else { significant(p, 2) }
}

fn next_motor(c: &Comparison, view: View) -> Vec<String> {
    let mut lines = Vec::new();
    let mut few: Vec<(&str, Vec<String>)> = Vec::new();
    for group in c.groups.iter().take(MOST_GROUPS) {
        let Some(s) = group.quantities.get("total_impulse") else { continue };
        let unit = view.units.of(&s.unit, s.mean);
        match (s.tolerance_interval_95_95, &s.words) {
            (Some([low, high]), None) => {
                let text = format!(
                    "next motor of {}: total impulse {} to {} {} (95 % of motors, 95 % confidence)",
                    plain(&group.pour),
                    significant(low / unit.size_si, 4),
                    significant(high / unit.size_si, 4),
                    unit.symbol
                );
                lines.extend(wrapped(&text, "  ", "    "));
            }
            (_, Some(words)) => match few.iter_mut().find(|(known, _)| *known == words) {
                Some((_, names)) => names.push(plain(&group.pour)),
                None => few.push((words, vec![plain(&group.pour)])),
            },
            _ => {}
        }
    }
    for (words, names) in few {
        lines.extend(wrapped(&format!("{}: {words}", names.join(", ")), "  ", "    "));
    }
    if !lines.is_empty() {
        lines.insert(0, String::new());
    }
    lines
}

/// One line a firing, with the figure it is oddest in first.
fn odd_firings(group: &Group) -> Vec<String> {
    let mut found: Vec<(&str, &OddValue)> =
        group.quantities.iter().flat_map(|(key, s)| s.odd.iter().map(|o| (key.as_str(), o))).collect();
    found.sort_by(|a, b| (b.1.statistic / b.1.critical).total_cmp(&(a.1.statistic / a.1.critical)));
    let mut lines = Vec::new();
    let mut told: Vec<&str> = Vec::new();
    for (key, odd) in &found {
        if told.contains(&odd.id.as_str()) {
            continue;
        }
        told.push(&odd.id);
        let others: Vec<String> = found
            .iter()
            .filter(|(other, o)| o.id == odd.id && other != key)
            .map(|(other, _)| other.replace('_', " "))
            .collect();
        let besides = if others.is_empty() { String::new() } else { format!(", and in {}", others.join(", ")) };
        let place = odd.most_off.map_or(String::new(), |[t, off]| {
            format!("; its thrust is most off {} s into the burn, by {} N", significant(t, 3), significant(off, 3))
        });
        let text = format!(
            "odd in {}: {} by {} ({} test, {} over {}){besides}{place}",
            plain(&group.pour),
            plain(&odd.id),
            key.replace('_', " "),
            odd.test,
            significant(odd.statistic, 3),
            significant(odd.critical, 3)
        );
        lines.extend(wrapped(&text, "  ", "    "));
    }
    lines
}

/// Trends told are those that chance makes but once in a hundred.
const TOLD_TREND: f64 = 0.01;

fn trends(c: &Comparison, view: View) -> Vec<String> {
    let mut lines = Vec::new();
    for trend in c.trends.iter().filter(|t| t.line.p_value < TOLD_TREND) {
        let unit = view.units.of(&trend.unit, 1.0);
        let [low, high] = trend.line.slope_interval_95.map(|v| significant(v / unit.size_si, 2));
        let text = format!(
            "{} runs with {}: {} ({low} to {high}) {} per unit of it over {} firings, p {}; groups differ in more than that",
            trend.quantity.replace('_', " "),
            plain(&trend.against),
            significant(trend.line.slope / unit.size_si, 2),
            unit.symbol,
            trend.line.n,
            probability(trend.line.p_value)
        );
        lines.extend(wrapped(&text, "  ", "    "));
    }
    if let Some(law) = &c.burn_rate_law {
        let text = format!(
            "burn rate r = a pⁿ over {} firings from {} to {} MPa: n {} ({} to {}), a {} ({} to {}) mm/s at 1 MPa",
            law.firings,
            significant(law.range_mpa[0], 3),
            significant(law.range_mpa[1], 3),
            significant(law.exponent, 3),
            significant(law.exponent_interval_95[0], 3),
            significant(law.exponent_interval_95[1], 3),
            significant(law.coefficient_mm_s, 3),
            significant(law.coefficient_interval_95[0], 3),
            significant(law.coefficient_interval_95[1], 3)
        );
        lines.extend(wrapped(&text, "  ", "    "));
    }
    lines
}

fn attention(c: &Comparison) -> Vec<String> {
    let mut lines = vec![String::new()];
    for group in &c.groups {
        for s in &group.set_aside {
            lines.extend(wrapped(
                &format!("set aside {}: {} (--with-failed averages it all the same)", plain(&s.id), plain(&s.reason)),
                "  ",
                "    ",
            ));
        }
        lines.extend(odd_firings(group));
    }
    for d in c.curve_differences.iter().filter(|d| !d.test.differ.is_empty()) {
        let stretches: Vec<String> = d
            .test
            .differ
            .iter()
            .map(|[from, to, off]| {
                format!("{} to {} s by {} N", significant(*from, 3), significant(*to, 3), significant(*off, 3))
            })
            .collect();
        let text = format!(
            "thrust of {} and {} differs: {} (of alike pairs one in twenty does so by chance)",
            plain(&d.a),
            plain(&d.b),
            stretches.join(", ")
        );
        lines.extend(wrapped(&text, "  ", "    "));
    }
    for criterion in c.criteria.iter().filter(|k| !k.met) {
        let text = format!(
            "{}: {} is {}, usual limit {} ({})",
            plain(&criterion.pour),
            criterion.name,
            significant(criterion.value, 3),
            significant(criterion.limit, 3),
            criterion.source
        );
        lines.extend(wrapped(&text, "  ", "    "));
    }
    for text in &c.findings {
        lines.extend(wrapped(&plain(text), "  ", "    "));
    }
    if lines.len() == 1 {
        lines.push("  no firing stands out of its group".into());
    }
    lines
}
