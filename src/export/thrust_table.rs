//! thrust-table.csv: the thrust curve in few rows, with the impulse kept, and its W3C CSVW metadata.
//!
//! Rows are chosen among the points of the curve by splitting, over and over, the straight piece that departs most from
//! the curve, at the point where it departs most; first row, last row and the peak are always there. What area the
//! straight pieces then lack or have too much is given to the rows beside each piece, and the little that is left to all
//! rows between the ends but the peak, so that straight lines between the rows carry the impulse of the curve.

use crate::firing::{Curves, Firing};
use crate::problem::Problem;
use serde_json::json;
use std::cmp::Ordering;
use std::collections::BinaryHeap;

pub const FILE: &str = "thrust-table.csv";
/// Named after the table with a fixed ending, as the CSVW recommendation looks for it.
pub const METADATA_FILE: &str = "thrust-table.csv-metadata.json";
pub const DEFAULT_ROWS: usize = 400;

/// Straight pieces this near to the curve, as a fraction of the peak, are not split further: a fifth of the 0.5 % within
/// which the table holds the peak.
const SHAPE_TOLERANCE: f64 = 0.001;
/// The table keeps the impulse within this fraction.
const IMPULSE_TOLERANCE: f64 = 0.0002;
/// Fewest rows that leave a row beside the ends and the peak to carry area.
const FEWEST_ROWS: usize = 5;

/// Columns of equal length; time in s from first thrust.
#[derive(Debug, Clone, PartialEq)]
pub struct ThrustTable {
    pub time_s: Vec<f64>,
    pub thrust_n: Vec<f64>,
    /// Standard uncertainty, N.
    pub thrust_u_n: Option<Vec<f64>>,
    /// Propellant left, kg.
    pub propellant_kg: Option<Vec<f64>>,
}

impl ThrustTable {
    /// Impulse under straight lines between the rows, N·s.
    pub fn impulse(&self) -> f64 {
        trapezoid(&self.time_s, &self.thrust_n)
    }
}

/// The thrust table of a firing, of at most `rows` rows.
///
/// # Errors
/// Fewer than 5 rows asked for, a curve of fewer than 3 points or without positive peak and impulse, or rows too few to
/// keep the impulse within 0.02 %.
pub fn thrust_table(firing: &Firing, curves: &Curves, rows: usize) -> Result<ThrustTable, Problem> {
    if rows < FEWEST_ROWS {
        return Err(Problem::new(format!("{rows} rows are too few for a thrust table"))
            .expected(format!("at least {FEWEST_ROWS}"))
            .remedy(format!("leave --table-rows out for {DEFAULT_ROWS}")));
    }
    let (time_s, curve_n) = (&curves.thrust_time_s, &curves.thrust_n);
    let ordered = time_s.windows(2).all(|pair| pair[0] < pair[1]);
    if time_s.len() < 3 || time_s.len() != curve_n.len() || !ordered || !curve_n.iter().all(|f| f.is_finite()) {
        return Err(Problem::new("the thrust curve has too few points, or they are out of order")
            .expected("at least 3 points of finite thrust in order of time"));
    }
    let impulse = trapezoid(time_s, curve_n);
    let peak = (0..curve_n.len()).max_by(|a, b| curve_n[*a].total_cmp(&curve_n[*b])).unwrap_or(0);
    if !(impulse > 0.0 && curve_n[peak] > 0.0) || peak == 0 || peak + 1 == curve_n.len() {
        return Err(Problem::new("the thrust curve has no peak between its ends, or no positive impulse")
            .expected("thrust that rises, and falls again within the record")
            .remedy("look at the record with `burntally inspect`; check calibration, orientation and propellant_mass, and [reduction]"));
    }
    let chosen = choose(time_s, curve_n, peak, rows);
    let thrust_n = keep_area(time_s, curve_n, &chosen, peak, impulse);
    let mut table = ThrustTable {
        time_s: chosen.iter().map(|i| time_s[*i] - firing.burn.thrust_start_s).collect(),
        thrust_n,
        thrust_u_n: curves
            .thrust_u_n
            .as_ref()
            .filter(|u| u.len() == curve_n.len())
            .map(|u| chosen.iter().map(|i| u[*i]).collect()),
        propellant_kg: None,
    };
    if (table.impulse() / impulse - 1.0).abs() > IMPULSE_TOLERANCE {
        return Err(Problem::new(format!("{rows} rows cannot keep the impulse of this curve within 0.02 %"))
            .remedy(format!("allow more rows with --table-rows, or leave it out for {DEFAULT_ROWS}")));
    }
    table.propellant_kg =
        firing.quantities.propellant_mass.as_ref().map(|mass| propellant_left(&table, mass.value.max(0.0)));
    Ok(table)
}

fn trapezoid(x: &[f64], y: &[f64]) -> f64 {
    x.windows(2).zip(y.windows(2)).map(|(x, y)| (x[1] - x[0]) * (y[0] + y[1]) / 2.0).sum()
}

/// A straight piece between two points of the curve, with the point between them that lies farthest off.
struct Piece {
    from: usize,
    to: usize,
    split: usize,
    /// Farthest distance, N.
    off_n: f64,
    /// What is gained by splitting here first: distance times root of duration, so that a long shallow bow and a short
    /// deep one both get their rows.
    weight: f64,
}

impl Piece {
    fn new(time_s: &[f64], curve_n: &[f64], from: usize, to: usize) -> Self {
        let duration_s = time_s[to] - time_s[from];
        let slope = (curve_n[to] - curve_n[from]) / duration_s;
        let (mut split, mut off_n) = (from, 0.0);
        for i in from + 1..to {
            let off = (curve_n[i] - curve_n[from] - slope * (time_s[i] - time_s[from])).abs();
            if off > off_n {
                (split, off_n) = (i, off);
            }
        }
        Piece { from, to, split, off_n, weight: off_n * duration_s.sqrt() }
    }
}

impl Ord for Piece {
    fn cmp(&self, other: &Self) -> Ordering {
        self.weight.total_cmp(&other.weight).then_with(|| other.from.cmp(&self.from))
    }
}

impl PartialOrd for Piece {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl PartialEq for Piece {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other) == Ordering::Equal
    }
}

impl Eq for Piece {}

/// Places in the curve that become rows, in order.
fn choose(time_s: &[f64], curve_n: &[f64], peak: usize, rows: usize) -> Vec<usize> {
    let last = curve_n.len() - 1;
    let mut chosen = vec![0, peak, last];
    let near_n = SHAPE_TOLERANCE * curve_n[peak];
    let mut pieces = BinaryHeap::from([Piece::new(time_s, curve_n, 0, peak), Piece::new(time_s, curve_n, peak, last)]);
    while chosen.len() < rows {
        let Some(piece) = pieces.pop() else { break };
        // A piece near enough is left whole, but for the few rows that are needed to carry area.
        if piece.split == piece.from || (piece.off_n <= near_n && chosen.len() >= FEWEST_ROWS) {
            continue;
        }
        chosen.push(piece.split);
        pieces.push(Piece::new(time_s, curve_n, piece.from, piece.split));
        pieces.push(Piece::new(time_s, curve_n, piece.split, piece.to));
    }
    chosen.sort_unstable();
    chosen
}

/// Thrust of the rows, moved so that straight lines between them carry `impulse`.
fn keep_area(time_s: &[f64], curve_n: &[f64], chosen: &[usize], peak: usize, impulse: f64) -> Vec<f64> {
    let times: Vec<f64> = chosen.iter().map(|i| time_s[*i]).collect();
    let peak_n = curve_n[peak];
    let last = chosen.len() - 1;
    let mut thrust_n: Vec<f64> = chosen.iter().map(|i| curve_n[*i]).collect();
    thrust_n[0] = 0.0;
    thrust_n[last] = 0.0;
    // Area the curve has beyond each straight piece; half of it to the row at either end.
    let lacking: Vec<f64> = chosen
        .windows(2)
        .map(|ends| {
            let chord = (time_s[ends[1]] - time_s[ends[0]]) * (curve_n[ends[0]] + curve_n[ends[1]]) / 2.0;
            trapezoid(&time_s[ends[0]..=ends[1]], &curve_n[ends[0]..=ends[1]]) - chord
        })
        .collect();
    let free = |i: usize| i != 0 && i != last && chosen[i] != peak;
    // The peak stays the peak, and a row goes no further below zero than the curve does there.
    let within = |i: usize, value: f64| value.clamp(curve_n[chosen[i]].min(0.0), peak_n);
    for i in (1..last).filter(|i| free(*i)) {
        let moved = thrust_n[i] + (lacking[i - 1] + lacking[i]) / (times[i + 1] - times[i - 1]);
        thrust_n[i] = within(i, moved);
    }
    // What the ends, the peak and the limits could not take goes to the free rows in proportion to their thrust; where
    // rows stop at the peak the others take more, so a few rounds settle it.
    for _ in 0..8 {
        let rest = impulse - trapezoid(&times, &thrust_n);
        let carried: f64 = (1..last)
            .filter(|i| free(*i) && (rest < 0.0 || thrust_n[*i] < peak_n))
            .map(|i| thrust_n[i].max(0.0) * (times[i + 1] - times[i - 1]) / 2.0)
            .sum();
        if carried <= 0.0 || rest.abs() <= 1e-9 * impulse {
            break;
        }
        let factor = (1.0 + rest / carried).max(0.0);
        for i in (1..last).filter(|i| free(*i)) {
            if thrust_n[i] > 0.0 {
                thrust_n[i] = within(i, thrust_n[i] * factor);
            }
        }
    }
    thrust_n
}

/// Propellant left at each row: it goes in proportion to the impulse delivered, which is a constant specific impulse.
fn propellant_left(table: &ThrustTable, mass_kg: f64) -> Vec<f64> {
    let total = table.impulse();
    let mut delivered = 0.0;
    let mut left = vec![mass_kg];
    for (time, thrust) in table.time_s.windows(2).zip(table.thrust_n.windows(2)) {
        delivered += (time[1] - time[0]) * (thrust[0] + thrust[1]) / 2.0;
        left.push((mass_kg * (1.0 - delivered / total)).clamp(0.0, mass_kg));
    }
    // Exactly none at the end; the sum may leave a last digit.
    if let Some(end) = left.last_mut() {
        *end = 0.0;
    }
    left
}

/// The table as CSV: a header row, then one row a line, empty fields where a value is not known.
///
/// # Errors
/// None in practice: the writer writes to memory.
pub fn to_csv(table: &ThrustTable) -> Result<Vec<u8>, Problem> {
    let failed = |error: csv::Error| Problem::new(format!("the thrust table could not be written: {error}"));
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer.write_record(["time_s", "thrust_n", "thrust_u_n", "propellant_kg"]).map_err(failed)?;
    let field = |column: &Option<Vec<f64>>, i: usize| {
        column.as_ref().and_then(|values| values.get(i)).map(|value| digits(*value)).unwrap_or_default()
    };
    for (i, (time_s, thrust_n)) in table.time_s.iter().zip(&table.thrust_n).enumerate() {
        let row = [
            // To the nanosecond, so that no two rows share a time.
            shortest(format!("{time_s:.9}"), *time_s),
            digits(*thrust_n),
            field(&table.thrust_u_n, i),
            field(&table.propellant_kg, i),
        ];
        writer.write_record(&row).map_err(failed)?;
    }
    writer.into_inner().map_err(|error| Problem::new(format!("the thrust table could not be written: {error}")))
}

/// Shortest text that is within 1e-7 of the value: eight digits, without the zeros at the end.
fn digits(value: f64) -> String {
    shortest(format!("{value:.7e}"), value)
}

/// Rust writes the fewest digits that read back as the same number; minus zero is written as zero.
fn shortest(rounded: String, value: f64) -> String {
    let number = rounded.parse::<f64>().unwrap_or(value);
    if number == 0.0 { "0".to_owned() } else { number.to_string() }
}

/// W3C "Metadata Vocabulary for Tabular Data" of the table, with the UCUM code of each column's unit.
///
/// # Errors
/// None in practice.
pub fn metadata(firing: &Firing) -> Result<Vec<u8>, Problem> {
    let column = |name: &str, title: &str, unit: &str, required: bool, description: &str| {
        json!({
            "name": name,
            "titles": title,
            "datatype": { "base": "double" },
            "required": required,
            "null": "",
            "dc:description": format!("{description} Unit (UCUM): {unit}."),
            "schema:unitCode": unit,
        })
    };
    let value = json!({
        "@context": "http://www.w3.org/ns/csvw",
        "url": FILE,
        "dc:title": format!("Thrust of firing {}", firing.run.id),
        "dc:description": "Thrust of a solid motor on a test stand. Straight lines between the rows carry the total impulse.",
        "dc:creator": format!("{} {}", firing.provenance.program, firing.provenance.version),
        "dialect": { "encoding": "utf-8", "delimiter": ",", "header": true, "lineTerminators": ["\n"] },
        "tableSchema": {
            "columns": [
                column("time_s", "time_s", "s", true, "Time from first thrust."),
                column("thrust_n", "thrust_n", "N", true, "Thrust; zero in the first and the last row."),
                column("thrust_u_n", "thrust_u_n", "N", false,
                    "Standard uncertainty of the thrust; empty where the error of the force scale is not known."),
                column("propellant_kg", "propellant_kg", "kg", false,
                    "Propellant left, taken to go in proportion to the impulse delivered; empty where its mass is not known."),
            ],
            "primaryKey": "time_s",
        },
        "notes": [{
            "type": "Caution",
            "value": "A measured motor is not a certified one; local law and the range's safety code decide what may fly.",
        }],
    });
    let mut text = serde_json::to_string_pretty(&value).map_err(|error| Problem::new(error.to_string()))?;
    text.push('\n');
    Ok(text.into_bytes())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;

    /// Bounds of the contract on one curve.
    fn holds(curves: &Curves, rows: usize) -> ThrustTable {
        let table = thrust_table(&sample::firing(), curves, rows).unwrap();
        let impulse = trapezoid(&curves.thrust_time_s, &curves.thrust_n);
        let peak_n = curves.thrust_n.iter().copied().fold(0.0, f64::max);
        let table_peak_n = table.thrust_n.iter().copied().fold(0.0, f64::max);
        assert!(table.time_s.len() <= rows);
        assert!((table.impulse() / impulse - 1.0).abs() < 2e-4, "{} {}", table.impulse(), impulse);
        assert!((table_peak_n / peak_n - 1.0).abs() < 5e-3);
        assert!(table.time_s.windows(2).all(|pair| pair[0] < pair[1]));
        assert_eq!((table.thrust_n[0], *table.thrust_n.last().unwrap()), (0.0, 0.0));
        assert_eq!(table.time_s[0], 0.0);
        table
    }

    fn noise(count: usize) -> Vec<f64> {
        let mut state = 99_u64;
        (0..count)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                (state >> 33) as f64 / (1_u64 << 31) as f64 - 0.5
            })
            .collect()
    }

    #[test]
    fn impulse_and_peak_are_kept_for_coarse_and_fine_curves() {
        for points in [30, 81, 400, 3_000, 200_000] {
            for rows in [12, 40, DEFAULT_ROWS] {
                let table = holds(&sample::curves(points), rows);
                assert!(table.thrust_n.iter().all(|f| *f >= 0.0));
            }
        }
    }

    #[test]
    fn a_smooth_curve_needs_far_fewer_rows_than_allowed() {
        let curves = sample::curves(3_000);
        let table = holds(&curves, DEFAULT_ROWS);
        assert!(table.time_s.len() < 100, "{} rows", table.time_s.len());
        // Straight lines between the rows stay near the curve everywhere: the tolerance on the shape, and as much again
        // for the area that the rows were moved to carry.
        let mut at = 0;
        for (time, thrust) in curves.thrust_time_s.iter().map(|t| t - 12.4).zip(&curves.thrust_n) {
            while at + 2 < table.time_s.len() && table.time_s[at + 1] < time {
                at += 1;
            }
            let part = (time - table.time_s[at]) / (table.time_s[at + 1] - table.time_s[at]);
            let line = table.thrust_n[at] + part * (table.thrust_n[at + 1] - table.thrust_n[at]);
            assert!((line - thrust).abs() < 2.0 * SHAPE_TOLERANCE * 310.0, "{time}: {line} {thrust}");
        }
    }

    #[test]
    fn a_rough_curve_fills_the_rows_and_keeps_its_impulse() {
        let mut curves = sample::curves(20_000);
        let last = curves.thrust_n.len() - 1;
        for (thrust, noise) in curves.thrust_n[1..last].iter_mut().zip(noise(last)) {
            *thrust += 40.0 * noise;
        }
        let table = holds(&curves, DEFAULT_ROWS);
        assert_eq!(table.time_s.len(), DEFAULT_ROWS);
    }

    #[test]
    fn a_peak_of_one_point_stays_and_is_not_passed() {
        let mut curves = sample::curves(1_000);
        curves.thrust_n[20] = 420.0;
        let table = holds(&curves, 30);
        assert_eq!(table.thrust_n.iter().copied().fold(0.0, f64::max), 420.0);
    }

    #[test]
    fn thrust_that_pulls_is_kept_and_none_is_invented() {
        let mut curves = sample::curves(1_000);
        for thrust in &mut curves.thrust_n[100..120] {
            *thrust = -25.0;
        }
        let table = holds(&curves, DEFAULT_ROWS);
        let lowest = table.thrust_n.iter().copied().fold(f64::INFINITY, f64::min);
        assert!((-25.0..-24.0).contains(&lowest), "{lowest}");
    }

    #[test]
    fn propellant_goes_with_the_impulse() {
        let table = holds(&sample::curves(3_000), DEFAULT_ROWS);
        let left = table.propellant_kg.as_ref().unwrap();
        assert_eq!((left[0], *left.last().unwrap()), (0.4123, 0.0));
        assert!(left.windows(2).all(|pair| pair[0] >= pair[1]));
        let middle = table.time_s.iter().position(|t| *t > 1.3).unwrap();
        let until = trapezoid(&table.time_s[..=middle], &table.thrust_n[..=middle]);
        assert!((left[middle] - 0.4123 * (1.0 - until / table.impulse())).abs() < 1e-12);
    }

    #[test]
    fn unknown_columns_are_empty_fields() {
        let mut firing = sample::firing();
        firing.quantities.propellant_mass = None;
        let mut curves = sample::curves(300);
        curves.thrust_u_n = None;
        let text = String::from_utf8(to_csv(&thrust_table(&firing, &curves, 50).unwrap()).unwrap()).unwrap();
        let mut lines = text.lines();
        assert_eq!(lines.next(), Some("time_s,thrust_n,thrust_u_n,propellant_kg"));
        assert_eq!(lines.next(), Some("0,0,,"));
        assert!(lines.all(|line| line.ends_with(",,")));
    }

    #[test]
    fn the_written_table_reads_back_within_its_digits() {
        let table = holds(&sample::curves(3_000), DEFAULT_ROWS);
        let bytes = to_csv(&table).unwrap();
        let mut reader = csv::Reader::from_reader(bytes.as_slice());
        let rows: Vec<[f64; 4]> = reader.deserialize().map(Result::unwrap).collect();
        assert_eq!(rows.len(), table.time_s.len());
        for (i, row) in rows.iter().enumerate() {
            assert!((row[0] - table.time_s[i]).abs() <= 1e-9);
            assert!((row[1] - table.thrust_n[i]).abs() <= 1e-7 * table.thrust_n[i]);
            assert!((row[3] - table.propellant_kg.as_ref().unwrap()[i]).abs() <= 1e-7 * 0.42);
        }
        assert_eq!(digits(-0.0), "0");
        assert_eq!(digits(0.1 + 0.2), "0.3");
        assert_eq!(digits(123_456.789_012), "123456.79");
    }

    #[test]
    fn the_metadata_describes_the_columns_that_are_written() {
        let metadata: serde_json::Value = serde_json::from_slice(&metadata(&sample::firing()).unwrap()).unwrap();
        assert_eq!(metadata["@context"], "http://www.w3.org/ns/csvw");
        assert_eq!(metadata["url"], FILE);
        let named: Vec<&str> = metadata["tableSchema"]["columns"]
            .as_array()
            .unwrap()
            .iter()
            .map(|column| column["name"].as_str().unwrap())
            .collect();
        let table = to_csv(&holds(&sample::curves(300), 50)).unwrap();
        assert_eq!(named.join(","), String::from_utf8(table).unwrap().lines().next().unwrap());
    }

    #[test]
    fn curves_that_are_none_are_refused() {
        let firing = sample::firing();
        assert!(thrust_table(&firing, &Curves::default(), 400).is_err());
        assert!(thrust_table(&firing, &sample::curves(100), 4).unwrap_err().expected.is_some());
        let mut curves = sample::curves(100);
        curves.thrust_time_s[50] = curves.thrust_time_s[49];
        assert!(thrust_table(&firing, &curves, 400).is_err());
        let mut curves = sample::curves(100);
        curves.thrust_n[50] = f64::NAN;
        assert!(thrust_table(&firing, &curves, 400).is_err());
    }
}
