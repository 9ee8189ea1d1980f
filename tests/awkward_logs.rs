//! Small logs with one awkwardness each, and properties that hold for all of them.

use burntally::log::{Log, ReadRequest, read};
use burntally::problem::Problem;
use burntally::run::{ColumnRef, TimeSpec};
use proptest::prelude::*;
use std::path::Path;

fn read_bytes(bytes: &[u8], request: &ReadRequest) -> Result<Log, Problem> {
    let mut source = bytes;
    read(&mut source, Path::new("bench.csv"), request)
}

fn log_of(text: &str) -> Log {
    let log =
        read_bytes(text.as_bytes(), &ReadRequest::default()).unwrap_or_else(|problem| panic!("{problem}\n{text}"));
    consistent(&log);
    log
}

/// What must hold for any log.
fn consistent(log: &Log) {
    let records = log.records;
    assert_eq!(records.read, records.kept + records.repaired + records.dropped, "{records:?} {:?}", log.repairs);
    assert_eq!(log.time_s.len() as u64, records.kept + records.repaired);
    assert_eq!(log.line.len(), log.time_s.len());
    assert!(log.columns.iter().all(|column| column.values.len() == log.time_s.len()));
    assert!(log.time_s.windows(2).all(|pair| pair[1] > pair[0]), "time does not rise");
    assert!(log.time_s.iter().all(|time| time.is_finite()));
}

/// Readings of an 80 Hz record in ms, whole numbers.
fn reading(index: usize) -> i64 {
    8123 + (index as i64 * 7919) % 13 + if (40..80).contains(&index) { 40_000 } else { 0 }
}

fn stamp_ms(index: usize) -> u64 {
    1000 + (index as f64 * 12.5) as u64
}

fn plain(count: usize) -> Vec<String> {
    (0..count).map(|index| format!("{},{}", stamp_ms(index), reading(index))).collect()
}

fn with_header(lines: &[String]) -> String {
    format!("t_ms,load\n{}\n", lines.join("\n"))
}

fn dropped_lines(log: &Log) -> Vec<u64> {
    log.repairs.iter().filter(|repair| repair.kind == "dropped").filter_map(|repair| repair.line).collect()
}

#[test]
fn a_plain_log() {
    let log = log_of(&with_header(&plain(120)));
    assert_eq!(log.records.kept, 120);
    assert_eq!(log.time_s[0], 0.0);
    // Stamps are cut to whole milliseconds; a line through 120 of them is good to twice 0.29 ms/√120 at its ends.
    assert!((log.time_s[100] - 1.25).abs() < 6e-5);
    assert!((log.interval_s - 0.0125).abs() < 1e-4, "{}", log.interval_s);
    assert_eq!(log.clock_resolution_s, 0.001);
    assert_eq!(log.columns.len(), 1);
    assert_eq!((log.columns[0].name.as_str(), log.columns[0].number), ("load", 2));
    assert_eq!(log.line[0], 2);
    assert!(log.gaps.is_empty() && log.repairs.is_empty(), "{:?}", log.repairs);
}

#[test]
fn forms_of_the_same_data_read_alike() {
    let point = |delimiter: &str, end: &str| -> String {
        let mut text = format!("t_s{delimiter}load{end}");
        for index in 0..100 {
            text.push_str(&format!("{:.4}{delimiter}{:.1}{end}", index as f64 * 0.0125, reading(index) as f64 / 10.0));
        }
        text
    };
    let comma = |text: String| text.replace('.', ",");
    let reference = log_of(&point(",", "\n"));
    let utf16 = |text: &str, big: bool, bom: bool| -> Vec<u8> {
        let marked = if bom { format!("\u{feff}{text}") } else { text.to_owned() };
        marked.encode_utf16().flat_map(|unit| if big { unit.to_be_bytes() } else { unit.to_le_bytes() }).collect()
    };
    let mut forms: Vec<Vec<u8>> = Vec::new();
    for end in ["\n", "\r\n", "\r"] {
        for delimiter in [",", ";", "\t", " ", "   ", "|", ", "] {
            forms.push(point(delimiter, end).into_bytes());
        }
        for delimiter in [";", "\t", "  ", "|"] {
            forms.push(comma(point(delimiter, end)).into_bytes());
        }
    }
    for big in [false, true] {
        for bom in [false, true] {
            forms.push(utf16(&comma(point(";", "\r\n")), big, bom));
        }
    }
    forms.push(format!("\u{feff}{}", point(",", "\n")).into_bytes());
    forms.push(
        comma(point("\";\"", "\"\n\"")).replace("t_s", "\"t_s").trim_end_matches('"').replace(';', ",").into_bytes(),
    );
    for form in forms {
        let shown = String::from_utf8_lossy(&form[..60]).into_owned();
        let log = read_bytes(&form, &ReadRequest::default()).unwrap_or_else(|problem| panic!("{problem}\n{shown}"));
        consistent(&log);
        assert_eq!(log.time_s, reference.time_s, "{shown}");
        assert_eq!(log.columns[0].values, reference.columns[0].values, "{shown}");
    }
}

#[test]
fn latin_1_degree_sign_and_units_row() {
    let mut bytes = b"Messstand 3\nZeit;Kraft;Temp\ns;N;".to_vec();
    bytes.extend_from_slice(&[0xB0, b'C', b'\n']);
    for index in 0..50 {
        bytes.extend_from_slice(format!("{},{:03};{},5;21,0\n", index / 100, index % 100, index * 3).as_bytes());
    }
    let log = read_bytes(&bytes, &ReadRequest::default()).unwrap();
    assert_eq!(log.available, ["Zeit", "Kraft", "Temp"]);
    assert_eq!(log.columns[0].unit.as_deref(), Some("N"));
    assert_eq!(log.columns[1].unit.as_deref(), Some("\u{b0}C"));
    assert!(log.findings[0].contains("semicolon-separated with decimal comma"), "{:?}", log.findings);
}

#[test]
fn banner_comments_and_blank_lines_are_no_records() {
    let mut lines = plain(60);
    lines.insert(30, "# note".to_owned());
    lines.insert(20, String::new());
    let text = format!("Bench logger, invented\nserial 4\n\n# t in ms\n{}", with_header(&lines));
    let log = log_of(&text);
    assert_eq!((log.records.read, log.records.kept), (60, 60));
}

#[test]
fn damaged_lines_are_dropped_and_listed() {
    let mut lines = plain(100);
    lines[10] = "1125".to_owned();
    lines[20] = "1250,81#3".to_owned();
    lines[30] = "1375,8130,1387,8131".to_owned();
    lines[40] = "\u{fffd}\u{1}x,".to_owned();
    lines[50] = "1625,81\u{0}30".to_owned();
    let log = log_of(&with_header(&lines));
    assert_eq!((log.records.read, log.records.dropped), (100, 5));
    assert_eq!(dropped_lines(&log), [12, 22, 32, 42, 52]);
    assert_eq!(log.gaps.len(), 5);
    assert!(log.gaps.iter().all(|gap| gap.missing == 1));
}

#[test]
fn trailing_delimiters_and_text_columns() {
    let mut text = "t_ms,state,load,note,\n".to_owned();
    for index in 0..60 {
        text.push_str(&format!("{},ARMED,{},north wall,\n", stamp_ms(index), reading(index)));
    }
    let log = log_of(&text);
    assert_eq!(log.columns.iter().map(|column| column.name.as_str()).collect::<Vec<_>>(), ["load"]);
    assert_eq!(log.records.kept, 60);
    let refused = read_bytes(
        text.as_bytes(),
        &ReadRequest { columns: vec![ColumnRef::Name("note".to_owned())], ..ReadRequest::default() },
    );
    assert!(refused.unwrap_err().found.contains("holds no numbers"));
}

#[test]
fn a_last_line_cut_in_the_middle_is_dropped_and_a_whole_one_kept() {
    let whole = with_header(&plain(60));
    for cut in [1, 2, 3, 4] {
        let log = log_of(&whole[..whole.len() - 1 - cut]);
        assert_eq!((log.records.read, log.records.dropped), (60, 1), "{cut}");
    }
    let log = log_of(whole.trim_end());
    assert_eq!((log.records.kept, log.records.dropped), (60, 0));
}

#[test]
fn a_capture_that_begins_in_the_middle_of_a_line() {
    let text = plain(60).join("\n") + "\n";
    let log = log_of(&text[2..]);
    assert_eq!(log.records.read, 60);
    assert!(log.time_s.windows(2).all(|pair| pair[1] - pair[0] < 0.02));
    let log = log_of(&text[6..]);
    assert_eq!((log.records.read, log.records.dropped), (60, 1));
}

#[test]
fn a_restarted_logger_with_its_header() {
    let first = with_header(&plain(60));
    let log = log_of(&format!("{first}{first}"));
    assert_eq!((log.records.read, log.records.kept), (120, 120));
    assert!((log.time_s[60] - log.time_s[59] - 0.0125).abs() < 0.001);
    assert!(log.repairs.iter().any(|repair| repair.kind == "time" && repair.message.contains("line 63")));
    assert!(log.findings.iter().any(|finding| finding.contains("restarted")), "{:?}", log.findings);
}

#[test]
fn counters_roll_over() {
    for (unit, step, start) in [("ms", 12u64, 4_294_966_900u64), ("us", 12_500, 4_294_600_000)] {
        let mut text = format!("t_{unit},load\n");
        for index in 0..100u64 {
            text.push_str(&format!("{},{}\n", (start + index * step) % 4_294_967_296, reading(index as usize)));
        }
        let log = log_of(&text);
        assert_eq!(log.records.kept, 100);
        let factor = if unit == "ms" { 1e-3 } else { 1e-6 };
        assert!((log.time_s[99] - 99.0 * step as f64 * factor).abs() < 1e-9);
        assert!(log.findings.iter().any(|finding| finding.contains("rolled over")));
        assert_eq!(log.repairs.len(), 1);
    }
}

#[test]
fn clock_time_over_midnight_and_iso_dates() {
    let mut clock = "time,load\n".to_owned();
    let mut iso = "timestamp,load\n".to_owned();
    let mut arrow = String::new();
    for index in 0..100 {
        let milliseconds = 86_399_500 + index * 20;
        let of_day = milliseconds % 86_400_000;
        let (h, m, s, ms) = (of_day / 3_600_000, of_day / 60_000 % 60, of_day / 1000 % 60, of_day % 1000);
        let day = 28 + milliseconds / 86_400_000;
        let date = if day == 28 { "2026-02-28" } else { "2026-03-01" };
        let value = reading(index as usize);
        clock.push_str(&format!("{h:02}:{m:02}:{s:02}.{ms:03},{value}\n"));
        iso.push_str(&format!("{date}T{h:02}:{m:02}:{s:02}.{ms:03}Z,{value}\n"));
        arrow.push_str(&format!("{h:02}:{m:02}:{s:02}.{ms:03} -> {value},21.5\n"));
    }
    for text in [clock, iso, arrow] {
        let log = log_of(&text);
        assert_eq!(log.records.kept, 100, "{text}");
        assert!((log.time_s[99] - 1.98).abs() < 1e-6, "{}", log.time_s[99]);
        assert_eq!(log.columns[0].values[50], reading(50) as f64);
    }
}

#[test]
fn seconds_are_preferred_to_a_wall_clock() {
    let mut text = "load,timestamp,seconds\n".to_owned();
    for index in 0..50 {
        text.push_str(&format!(
            "{},2026-05-14 11:30:{:02}.5,{:.3}\n",
            reading(index),
            index,
            100.0 + index as f64 * 0.01
        ));
    }
    let log = log_of(&text);
    assert!((log.interval_s - 0.01).abs() < 1e-9);
}

#[test]
fn a_coarse_clock_is_spread_and_a_record_written_twice_is_dropped() {
    // Whole seconds over 10 Hz; the readings repeat too, as in a quiet record.
    let mut text = "time_s,load\n".to_owned();
    for index in 0..200 {
        text.push_str(&format!("{},{}\n", 7 + index / 10, if index > 100 { 90 } else { 5 }));
    }
    let log = log_of(&text);
    assert_eq!((log.records.kept, log.records.dropped), (200, 0));
    assert!((log.interval_s - 0.1).abs() < 1e-3);
    assert_eq!(log.clock_resolution_s, 1.0);
    assert!(log.time_s.windows(2).all(|pair| (pair[1] - pair[0] - 0.1).abs() < 0.01));

    let mut lines = plain(100);
    lines.insert(51, lines[50].clone());
    let log = log_of(&with_header(&lines));
    assert_eq!((log.records.read, log.records.dropped), (101, 1));
    assert_eq!(dropped_lines(&log), [53]);
}

#[test]
fn one_misread_stamp_does_not_move_the_rest() {
    let reference = log_of(&with_header(&plain(100)));
    for wrong in ["0", "4294967295", "99999", "1", "33554982"] {
        let mut lines = plain(100);
        lines[50] = format!("{wrong},{}", reading(50));
        let log = log_of(&with_header(&lines));
        assert_eq!((log.records.read, log.records.repaired), (100, 1), "{wrong}");
        // One stamp more or less on a line through a hundred rounded to 1 ms.
        let last = |log: &Log| log.time_s.last().copied().unwrap_or(f64::NAN);
        assert!((last(&log) - last(&reference)).abs() < 1e-5);
        assert!((log.time_s[50] - reference.time_s[50]).abs() < 0.001);
    }
}

/// Largest difference of log time, by line, from the undamaged log; and how many lines are missing. The damaged line is left out.
fn drift(log: &Log, reference: &Log, except: u32) -> (f64, usize) {
    let known: std::collections::HashMap<u32, f64> = log.line.iter().copied().zip(log.time_s.iter().copied()).collect();
    let (mut worst, mut missing) = (0.0f64, 0);
    for (line, time_s) in reference.line.iter().zip(&reference.time_s).filter(|(line, _)| **line != except) {
        match known.get(line) {
            Some(found) => worst = worst.max((found - time_s).abs()),
            None => missing += 1,
        }
    }
    (worst, missing)
}

#[test]
fn a_flipped_bit_in_any_stamp_leaves_the_others() {
    for step in [12.5, 100.0, 3.3] {
        let stamp = |index: usize| 70_000 + (index as f64 * step) as u64;
        let text = |flipped: Option<(usize, u32)>| {
            let mut text = "t_ms,load\n".to_owned();
            for index in 0..100 {
                let bit = flipped.filter(|(at, _)| *at == index).map_or(0, |(_, bit)| 1u64 << bit);
                text.push_str(&format!("{},{}\n", stamp(index) ^ bit, reading(index)));
            }
            text
        };
        let reference = log_of(&text(None));
        for at in 0..100 {
            for bit in 0..32 {
                let log = log_of(&text(Some((at, bit))));
                let (worst, missing) = drift(&log, &reference, at as u32 + 2);
                let size = (1u64 << bit) as f64;
                // A first stamp wrong by less than some steps cannot be told from a gap; it is the origin of log time.
                let origin = if at == 0 && size <= 1001.0 * step { size * 1e-3 } else { 0.0 };
                // Dropping the first record moves the origin by one step.
                let first = if at == 0 { step * 1e-3 * 1.4 } else { 0.0 };
                // A flip of about one step makes two stamps alike; they are then spread by half a step.
                let shared = if size < 2.0 * step { 0.5 * step * 1e-3 } else { 0.0 };
                assert!(
                    // A line through a hundred stamps rounded to 1 ms moves by a hundredth of that when one is not there.
                    worst <= origin + first + shared + 5e-5,
                    "step {step} at {at} bit {bit}: {worst} {:?}",
                    log.repairs
                );
                assert!(missing <= 1, "step {step} at {at} bit {bit}: {missing} missing {:?}", log.repairs);
            }
        }
    }
}

#[test]
fn a_swapped_pair_is_put_in_order() {
    let reference = log_of(&with_header(&plain(100)));
    let mut lines = plain(100);
    lines.swap(50, 51);
    let log = log_of(&with_header(&lines));
    assert_eq!((log.records.kept, log.records.dropped), (100, 0));
    assert_eq!(log.columns[0].values, reference.columns[0].values);
    assert_eq!(log.line[50], 53);
}

#[test]
fn gaps_are_listed() {
    let mut lines = plain(100);
    lines.drain(40..50);
    let log = log_of(&with_header(&lines));
    assert_eq!(log.gaps.len(), 1);
    assert_eq!(log.gaps[0].missing, 10);
    assert!((log.gaps[0].end_s - log.gaps[0].start_s - 0.1375).abs() < 0.002);
}

#[test]
fn stamps_on_a_grid_of_milliseconds_show_no_gaps() {
    for rate in [80.0, 300.0, 700.0, 1000.0, 1300.0] {
        for jitter in [0, 1] {
            let mut text = "t_ms,load\n".to_owned();
            for index in 0..2000 {
                let late = if jitter == 1 { (index * 7919 % 5) as f64 * 0.15 } else { 0.0 };
                text.push_str(&format!(
                    "{},{}\n",
                    (500.3 + index as f64 * 1000.0 / rate + late) as u64,
                    reading(index)
                ));
            }
            let log = log_of(&text);
            assert_eq!(log.records.kept, 2000, "{rate} {:?}", log.repairs);
            assert!(log.gaps.is_empty(), "{rate}: {:?}", log.gaps);
            assert!((log.interval_s * rate - 1.0).abs() < 0.02, "{rate}: {}", log.interval_s);
        }
    }
}

#[test]
fn units_of_time_without_a_name() {
    for (scale, decimals) in [(1.0, 4), (1e3, 0), (1e3, 1), (1e6, 0)] {
        for header in ["", "time,load,temp\n"] {
            let mut text = header.to_owned();
            for index in 0..200 {
                text.push_str(&format!("{:.decimals$},{},21.5\n", index as f64 * 0.0125 * scale, reading(index)));
            }
            let log = log_of(&text);
            assert!((log.time_s[199] - 199.0 * 0.0125).abs() < 0.001, "{scale} {decimals} {header}");
            assert_eq!(log.columns.len(), 2);
            assert!(log.findings.iter().any(|finding| finding.contains("inferred")), "{:?}", log.findings);
        }
    }
    let mut text = "time [min],load\n".to_owned();
    for index in 0..100 {
        text.push_str(&format!("{:.7},{}\n", index as f64 * 0.0125 / 60.0, reading(index)));
    }
    assert!((log_of(&text).time_s[99] - 99.0 * 0.0125).abs() < 1e-4);
}

#[test]
fn a_counter_without_a_name_is_not_taken_for_a_clock() {
    let text: String = (0..60).map(|index| format!("{index},{}\n", reading(index))).collect();
    let problem = read_bytes(text.as_bytes(), &ReadRequest::default()).unwrap_err();
    assert!(problem.found.contains("counts up by one"), "{problem}");
}

#[test]
fn readings_with_units_behind_them() {
    let mut text = "Zeit s;Anzeige\n".to_owned();
    for index in 0..60 {
        text.push_str(&format!("{},{:02};{:+} kg\n", index / 10, index % 10 * 10, reading(index)));
    }
    let log = log_of(&text);
    assert_eq!(log.columns[0].values[3], reading(3) as f64);
    assert_eq!(log.columns[0].unit.as_deref(), Some("kg"));
}

#[test]
fn readings_with_labels_before_them() {
    for (between, mark) in [(",", ":"), (" ", "="), ("\t", ": "), (", ", "=")] {
        let mut text = "Load cell ready\n".to_owned();
        for index in 0..60 {
            text.push_str(&format!("t_ms{mark}{}{between}load{mark}{}\n", stamp_ms(index), reading(index)));
        }
        let log = log_of(&text);
        assert_eq!(log.columns.len(), 1, "{text}");
        assert_eq!(log.columns[0].name, "load");
        assert_eq!(log.columns[0].values[3], reading(3) as f64);
        // 59 steps of 12.5 ms, read off a line through sixty stamps cut to whole milliseconds.
        assert!((log.time_s[59] - 0.7375).abs() < 1e-4, "{}", log.time_s[59]);
    }
}

#[test]
fn no_time_column() {
    let text: String = (0..50).map(|index| format!("{}\n", reading(index))).collect();
    let problem = read_bytes(text.as_bytes(), &ReadRequest::default()).unwrap_err();
    assert!(problem.remedy.unwrap().contains("rate = \"80 Hz\""));
    let request = ReadRequest { rate_hz: Some(80.0), ..ReadRequest::default() };
    // A damaged line still took its time.
    let text = text.replacen("8130\n", "81x0\n", 1);
    let log = read_bytes(text.as_bytes(), &request).unwrap();
    consistent(&log);
    assert_eq!(log.records.dropped, 1);
    assert!((log.time_s.last().unwrap() - 49.0 / 80.0).abs() < 1e-12);
}

#[test]
fn a_sample_counter_with_a_rate_shows_what_is_missing() {
    let text: String = "sample,load\n".to_owned()
        + &(0..60).filter(|i| *i != 30).map(|i| format!("{i},{}\n", reading(i))).collect::<String>();
    assert!(read_bytes(text.as_bytes(), &ReadRequest::default()).is_err());
    let log = read_bytes(text.as_bytes(), &ReadRequest { rate_hz: Some(80.0), ..ReadRequest::default() }).unwrap();
    assert_eq!(log.gaps.len(), 1);
    assert!((log.time_s[58] - 59.0 / 80.0).abs() < 1e-12);
}

#[test]
fn a_named_time_rules() {
    let mut text = "a,b,load\n".to_owned();
    for index in 0..50 {
        text.push_str(&format!("{},{},{}\n", index * 10, index * 20, reading(index)));
    }
    let time = Some(TimeSpec { column: Some(ColumnRef::Name("b".to_owned())), unit: None });
    let log = read_bytes(text.as_bytes(), &ReadRequest { time, ..ReadRequest::default() }).unwrap();
    assert!((log.interval_s - 0.02).abs() < 1e-9);
    assert!(log.findings.iter().any(|finding| finding.contains("`b`")));
}

#[test]
fn columns_are_found_by_name_and_number() {
    let mut text = "t_ms,Load [N],temp\n".to_owned();
    for index in 0..50 {
        text.push_str(&format!("{},{},21.5\n", index * 10, reading(index)));
    }
    let ask = |column: ColumnRef| {
        read_bytes(text.as_bytes(), &ReadRequest { columns: vec![column], ..ReadRequest::default() })
    };
    for name in ["Load [N]", "load [n]", " load "] {
        let log = ask(ColumnRef::Name(name.to_owned())).unwrap();
        assert_eq!(log.columns[0].unit.as_deref(), Some("N"));
    }
    assert_eq!(ask(ColumnRef::Number(3)).unwrap().columns[0].name, "temp");
    let problem = ask(ColumnRef::Name("laod".to_owned())).unwrap_err();
    assert!(problem.remedy.as_deref().unwrap().contains("Load [N]"), "{problem}");
    assert!(problem.expected.unwrap().contains("temp"));
    assert!(ask(ColumnRef::Number(4)).is_err());
    assert!(ask(ColumnRef::Number(0)).is_err());
}

#[test]
fn inputs_that_are_no_log_are_refused() {
    for bytes in [&b""[..], b"\n\n", b"hello\nworld\n", &[0u8; 5000], b"t,load\n", b"# only\n# comments\n"] {
        let problem = read_bytes(bytes, &ReadRequest::default()).unwrap_err();
        assert_eq!(problem.file.as_deref(), Some(Path::new("bench.csv")));
    }
}

#[test]
fn a_very_long_line_is_dropped_and_counted() {
    let mut lines = plain(100);
    lines[50] = "x".repeat(3_000_000);
    let log = log_of(&with_header(&lines));
    assert_eq!((log.records.read, log.records.dropped), (100, 1));
    assert!(log.repairs[0].message.len() < 300);
}

#[test]
fn real_hot_fire_log() {
    let path = Path::new(concat!(env!("CARGO_MANIFEST_DIR"), "/../shared/real-logs/hotfire-2025-02-08.csv"));
    let Ok(mut file) = std::fs::File::open(path) else {
        eprintln!("skipped: {} is not here", path.display());
        return;
    };
    let request = ReadRequest { columns: vec![ColumnRef::Name("L_THRUST".to_owned())], ..ReadRequest::default() };
    let log = read(&mut file, path, &request).unwrap();
    consistent(&log);

    assert_eq!(log.columns[0].unit.as_deref(), Some("N"));
    assert!(log.findings.iter().any(|finding| finding.contains("`seconds`")), "{:?}", log.findings);
    assert_eq!(log.records.read, log.records.kept);
    assert!((0.001..0.004).contains(&log.interval_s));
}

/// One thing that may befall a log.
#[derive(Debug, Clone)]
enum Mishap {
    Byte(usize, u8),
    Remove(usize, usize),
    Repeat(usize),
    Swap(usize),
    Cut(usize),
}

fn mishap() -> impl Strategy<Value = Mishap> {
    prop_oneof![
        (any::<usize>(), any::<u8>()).prop_map(|(at, byte)| Mishap::Byte(at, byte)),
        (any::<usize>(), 1..40usize).prop_map(|(at, length)| Mishap::Remove(at, length)),
        any::<usize>().prop_map(Mishap::Repeat),
        any::<usize>().prop_map(Mishap::Swap),
        any::<usize>().prop_map(Mishap::Cut),
    ]
}

fn befall(bytes: &mut Vec<u8>, mishap: &Mishap) {
    let count = bytes.len().max(1);
    match *mishap {
        Mishap::Byte(at, byte) => {
            if let Some(place) = bytes.get_mut(at % count) {
                *place = byte;
            }
        }
        Mishap::Remove(at, length) => {
            let from = at % count;
            bytes.drain(from.min(bytes.len())..(from + length).min(bytes.len()));
        }
        Mishap::Repeat(at) | Mishap::Swap(at) => {
            let mut lines: Vec<Vec<u8>> = bytes.split_inclusive(|byte| *byte == b'\n').map(<[u8]>::to_vec).collect();
            if lines.len() > 2 {
                let at = 1 + at % (lines.len() - 2);
                if matches!(mishap, Mishap::Repeat(_)) {
                    lines.insert(at, lines[at].clone());
                } else {
                    lines.swap(at, at + 1);
                }
            }
            *bytes = lines.concat();
        }
        Mishap::Cut(at) => bytes.truncate(count - at % (count / 4 + 1)),
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(300))]

    #[test]
    fn books_balance_on_damaged_logs(mishaps in prop::collection::vec(mishap(), 0..8), count in 3..150usize) {
        let mut bytes = with_header(&plain(count)).into_bytes();
        for mishap in &mishaps {
            befall(&mut bytes, mishap);
        }
        if let Ok(log) = read_bytes(&bytes, &ReadRequest::default()) {
            consistent(&log);
        }
    }

    #[test]
    fn no_bytes_make_it_panic(bytes in prop::collection::vec(any::<u8>(), 0..2000)) {
        if let Ok(log) = read_bytes(&bytes, &ReadRequest { rate_hz: Some(80.0), ..ReadRequest::default() }) {
            consistent(&log);
        }
    }

    #[test]
    fn no_text_of_numbers_makes_it_panic(text in "[0-9,;. \t\r\n:eE+T\"#a-]{0,400}") {
        for rate_hz in [None, Some(80.0)] {
            if let Ok(log) = read_bytes(text.as_bytes(), &ReadRequest { rate_hz, ..ReadRequest::default() }) {
                consistent(&log);
            }
        }
    }

    #[test]
    fn one_damaged_line_costs_one_record(at in 1..99usize, byte in prop::sample::select(b"#x!?\x01\x80".to_vec()), place in 0..9usize) {
        let mut lines: Vec<Vec<u8>> = plain(100).into_iter().map(String::into_bytes).collect();
        let place = place % lines[at].len();
        lines[at][place] = byte;
        if lines[at][0] == b'#' { return Ok(()); }
        let mut bytes = b"t_ms,load\n".to_vec();
        for line in lines {
            bytes.extend(line);
            bytes.push(b'\n');
        }
        let log = read_bytes(&bytes, &ReadRequest::default()).unwrap();
        consistent(&log);
        prop_assert_eq!((log.records.read, log.records.dropped), (100, 1));
        prop_assert_eq!(dropped_lines(&log), vec![at as u64 + 2]);
    }
}
