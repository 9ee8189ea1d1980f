//! The summary on the screen: class and total impulse first, then the rest, then what did not pass, then the files.

use super::advice;
use super::figures::named;
use super::units::{Units, fixed, percent, words};
use crate::firing::{Check, Estimate, Figure, Firing, Status};
use std::path::Path;

/// How the summary is to look.
#[derive(Debug, Clone, Copy, Default)]
pub struct View {
    pub units: Units,
    /// Escape sequences for a terminal.
    pub colour: bool,
}

const WIDTH: usize = 80;
/// Checks beyond this many that are only cautions are counted, so that the summary fits on a screen.
const MOST_CAUTIONS: usize = 3;
/// Cautions that put a figure as a whole in doubt come before those on the record's small blemishes.
const TELLING: [&str; 7] = [
    "propellant_mass",
    "check_load",
    "polarity",
    "baseline_shift",
    "ringing",
    "calibration_range",
    "calibration_quality",
];
/// With more cautions than this the advice on them is left to the page, for the same reason.
const MOST_ADVISED: usize = 2;

#[derive(Clone, Copy)]
enum Tone {
    Strong,
    Good,
    Caution,
    Bad,
}

impl View {
    fn paint(self, text: &str, tone: Tone) -> String {
        if !self.colour {
            return text.to_owned();
        }
        let code = match tone {
            Tone::Strong => "1",
            Tone::Good => "32",
            Tone::Caution => "33",
            Tone::Bad => "1;31",
        };
        format!("\u{1b}[{code}m{text}\u{1b}[0m")
    }
}

/// Text from outside without control characters, which could move the cursor or colour the terminal.
pub fn plain(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { '\u{fffd}' } else { c }).collect()
}

/// The summary of one firing, ending in a line feed. `files`: folder and names written, none for none.
pub fn summary(firing: &Firing, view: View, files: Option<(&Path, &[&str])>) -> String {
    let mut lines = Vec::new();
    heading(firing, view, &mut lines);
    figures(firing, view, &mut lines);
    improvement(firing, view, &mut lines);
    checks(firing, view, &mut lines);
    if let Some((folder, names)) = files {
        lines.push(String::new());
        lines.extend(wrapped(
            &format!("written to {}: {}", plain(&folder.display().to_string()), names.join(", ")),
            "",
            "  ",
        ));
    }
    lines.extend(advice::SHORT_CAUTION.map(str::to_owned));
    lines.push(String::new());
    lines.join("\n")
}

/// One line for one of several firings: id, designation, total impulse, peak and burn time, checks that did not pass.
pub fn one_line(firing: &Firing, view: View) -> String {
    let figure = |figure: &Option<crate::firing::Figure>| {
        figure.as_ref().map_or_else(|| "not known".to_owned(), |figure| words(figure, view.units).line())
    };
    let designation = firing.motor_class.as_ref().map_or("-", |class| class.designation.as_str());
    let q = &firing.quantities;
    let mut line = format!(
        "{:<12} {:<7} {:<20} peak {:<18} burn {}",
        plain(&firing.run.id),
        plain(designation),
        figure(&q.total_impulse),
        figure(&q.peak_thrust),
        figure(&q.burn_time)
    );
    for (status, word, tone) in [(Status::Fail, "FAIL", Tone::Bad), (Status::Caution, "caution", Tone::Caution)] {
        let ids: Vec<&str> =
            firing.checks.iter().filter(|check| check.status == status).map(|check| check.id.as_str()).collect();
        if !ids.is_empty() {
            line.push_str(&format!("\n             {}: {}", view.paint(word, tone), plain(&ids.join(", "))));
        }
    }
    line
}

fn heading(firing: &Firing, view: View, lines: &mut Vec<String>) {
    let run = &firing.run;
    let mut about = Vec::new();
    if let Some(pour) = &run.pour {
        about.push(format!("pour {}", plain(pour)));
    }
    if let Some(date) = &run.date {
        about.push(plain(date));
    }
    let about = if about.is_empty() { String::new() } else { format!("  ({})", about.join(", ")) };
    lines.push(format!("{}{about}", view.paint(&plain(&run.id), Tone::Strong)));
    lines.push(String::new());
    match &firing.motor_class {
        Some(class) => {
            let mut text = format!("class {}, {} % up its band", class.letter, fixed(class.position * 100.0, 0));
            if let Some(probability) = class.probability.as_ref().filter(|probability| probability.len() > 1) {
                let parts: Vec<String> =
                    probability.iter().map(|(letter, p)| format!("{letter} {}", percent(*p))).collect();
                text.push_str(&format!("; probability {}", parts.join(", ")));
            }
            lines.push(format!("  {}  {text}", view.paint(&format!("{:<18}", class.designation), Tone::Strong)));
        }
        None => lines.push(format!("  {:<19} not known", "class")),
    }
}

fn figures(firing: &Firing, view: View, lines: &mut Vec<String>) {
    let mut without_interval = false;
    for (place, entry) in named(&firing.quantities).into_iter().enumerate() {
        let text = match entry.figure {
            None if entry.expected => format!("  {:<19} not known", entry.name),
            None => continue,
            Some(figure) => {
                let shown = words(figure, view.units);
                without_interval |= shown.half_width.is_empty();
                let spread = match shown.half_width.as_str() {
                    "" => "± not known".to_owned(),
                    width if width.starts_with('+') => width.to_owned(),
                    width => format!("± {width}"),
                };
                let source = figure.source.as_deref().map(|s| format!(" ({})", plain(s))).unwrap_or_default();
                format!("  {:<19} {:>10} {spread:<11} {}{source}", entry.name, shown.value, shown.unit)
            }
        };
        let mut text = text.trim_end().to_owned();
        if let Some(figure) = entry.figure
            && let Some(estimate) = &figure.estimate
        {
            text.push_str(&format!("\n{:<22}{}", "", estimated(figure, estimate, view)));
        }
        lines.push(if place == 0 { view.paint(&text, Tone::Strong) } else { text });
        if place == 0 {
            lines.push(String::new());
        }
    }
    lines.push("  ± is the half-width of the 95 % interval; ≥ marks a lower bound, ≤ an upper.".to_owned());
    if without_interval {
        lines.push("  ± not known: the error of the force scale, or of a mass, was not stated.".to_owned());
    }
}

/// `perhaps 812 ± 14 N·s by estimate`: what stands beside a bound, never in its place.
fn estimated(figure: &Figure, estimate: &Estimate, view: View) -> String {
    let shown = Figure {
        value: estimate.value,
        standard_uncertainty: estimate.standard_uncertainty,
        interval_95: estimate.interval_95,
        bound: None,
        source: None,
        estimate: None,
        ..figure.clone()
    };
    let basis = estimate.method.split(':').next().unwrap_or_default();
    format!("estimate, not measured: {} ({})", words(&shown, view.units).line(), plain(basis))
}

/// What would narrow the interval of the total impulse most; of the burn time where the impulse has none.
fn improvement(firing: &Firing, view: View, lines: &mut Vec<String>) {
    let best = named(&firing.quantities)
        .into_iter()
        .filter(|entry| matches!(entry.key, "total_impulse" | "burn_time"))
        .find_map(|entry| {
            let first = firing.uncertainty_budget.get(entry.key)?.first()?.improvement.as_ref()?;
            entry.figure.map(|figure| (figure, first))
        });
    if let Some((figure, improvement)) = best {
        let half = improvement.half_width_95_if_halved;
        let halved = Figure { interval_95: Some([figure.value - half, figure.value + half]), ..figure.clone() };
        let halved = words(&halved, view.units);
        let text = format!("{}; half that error: ± {} {}", plain(&improvement.remedy), halved.half_width, halved.unit);
        lines.extend(wrapped(&text, "  to improve first: ", "  "));
    }
}

fn checks(firing: &Firing, view: View, lines: &mut Vec<String>) {
    let count = |status: Status| firing.checks.iter().filter(|check| check.status == status).count();
    let (passed, cautions, failed) = (count(Status::Pass), count(Status::Caution), count(Status::Fail));
    lines.push(String::new());
    if cautions + failed == 0 {
        lines.push(view.paint(&format!("checks: all {passed} passed"), Tone::Good));
        return;
    }
    lines.push(format!("checks: {passed} passed, {cautions} caution, {failed} failed"));
    let mut shown_cautions = 0;
    let mut hidden = Vec::new();
    for status in [Status::Fail, Status::Caution] {
        let mut checks: Vec<&Check> = firing.checks.iter().filter(|check| check.status == status).collect();
        checks.sort_by_key(|check| !TELLING.contains(&check.id.as_str()));
        for check in checks {
            let (word, tone) = match status {
                Status::Fail => ("FAIL", Tone::Bad),
                _ => ("caution", Tone::Caution),
            };
            if status == Status::Caution {
                shown_cautions += 1;
                if shown_cautions > MOST_CAUTIONS {
                    hidden.push(check.id.as_str());
                    continue;
                }
            }
            let text = format!("{}: {}", check.id, plain(&check.message));
            let first = format!("  {word:<8}");
            let mut block = wrapped(&text, &first, "          ");
            let advised = status == Status::Fail || cautions <= MOST_ADVISED;
            if let Some(advice) = advice::for_check(&check.id).filter(|_| advised) {
                block.extend(wrapped(advice, "          -> ", "             "));
            }
            if let Some(line) = block.first_mut() {
                *line = line.replacen(word, &view.paint(word, tone), 1);
            }
            lines.extend(block);
        }
    }
    if shown_cautions > MOST_CAUTIONS {
        let rest = format!("more in report.html and result.json: {}", hidden.join(", "));
        lines.extend(wrapped(&rest, "  ", "          "));
    }
}

/// Breaks text at spaces to fit the screen; a word too long for it stays whole.
pub fn wrapped(text: &str, first: &str, others: &str) -> Vec<String> {
    let mut lines = Vec::new();
    let mut line = first.to_owned();
    let mut used = first.chars().count();
    let mut empty = true;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if !empty && used + 1 + length > WIDTH {
            lines.push(std::mem::replace(&mut line, others.to_owned()));
            used = others.chars().count();
            empty = true;
        }
        if !empty {
            line.push(' ');
            used += 1;
        }
        line.push_str(word);
        used += length;
        empty = false;
    }
    lines.push(line);
    lines
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;
    use crate::firing::Check;

    fn text(firing: &Firing) -> String {
        let names = ["result.json", "thrust-table.csv", "thrust.svg", "thrust.png", "report.html"];
        summary(firing, View::default(), Some((Path::new("reduced/QX-03"), &names)))
    }

    #[test]
    fn class_and_total_impulse_come_first_and_files_last() {
        let text = text(&sample::firing());
        let place = |word: &str| text.find(word).unwrap_or_else(|| panic!("{word} in\n{text}"));
        let order = ["J284", "771.2 ± 3.9", "burn time", "baseline_after", "reduced/QX-03", "not a certified one"];
        assert!(order.windows(2).all(|pair| place(pair[0]) < place(pair[1])), "{text}");
        assert!(!text.contains("sampling"), "checks that passed are only counted");
        assert!(text.contains("95 %"));
        assert!(text.contains("to improve first: use better weights; half that error: ± 2.3 N·s"), "{text}");
        if let Ok(folder) = std::env::var("BURNTALLY_TEST_PICTURES") {
            std::fs::write(Path::new(&folder).join("summary.txt"), &text).unwrap();
        }
    }

    #[test]
    fn it_fits_on_a_screen() {
        let mut firing = sample::firing();
        for id in ["noise", "gaps", "ringing"] {
            let message = "a message of some length that tells what was found and where, in plain words".to_owned();
            firing.checks.push(Check { id: id.to_owned(), status: Status::Caution, message });
        }
        let text = text(&firing);
        assert!(text.lines().count() <= 32, "{text}");
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        assert!(super::summary(&sample::firing(), View::default(), None).lines().count() <= 28);
    }

    #[test]
    fn missing_figures_are_said_in_words() {
        let mut firing = sample::firing();
        firing.motor_class = None;
        firing.quantities.specific_impulse = None;
        let total = firing.quantities.total_impulse.as_mut().unwrap();
        (total.standard_uncertainty, total.interval_95) = (None, None);
        let text = text(&firing);
        assert!(text.contains("specific impulse    not known"));
        assert!(text.contains("771.2 ± not known N·s"), "{text}");
        assert!(!text.contains("ignition delay"));
    }

    #[test]
    fn failed_checks_come_before_cautions_with_advice() {
        let mut firing = sample::firing();
        let message = "thrust flat at 1023 counts for 0.4 s".to_owned();
        firing.checks.push(Check { id: "clipping".to_owned(), status: Status::Fail, message });
        let text = text(&firing);
        assert!(text.find("FAIL").unwrap() < text.find("caution   baseline_after").unwrap_or(usize::MAX), "{text}");
        assert!(text.contains("-> lower the gain"));
    }

    #[test]
    fn colour_only_when_asked_and_nothing_from_outside_reaches_the_terminal() {
        let mut firing = sample::firing();
        firing.run.id = "X\u{1b}[2J".to_owned();
        assert!(!text(&firing).contains('\u{1b}'));
        let view = View { colour: true, ..View::default() };
        let coloured = summary(&sample::firing(), view, None);
        assert!(coloured.contains("\u{1b}[33mcaution\u{1b}[0m"));
    }

    #[test]
    fn customary_units_and_the_short_form() {
        let view = View { units: Units::Us, colour: false };
        assert!(summary(&sample::firing(), view, None).contains("lbf·s"));
        let line = one_line(&sample::firing(), view);
        assert!(line.contains("QX-03") && line.contains("lbf·s") && line.contains("caution: baseline_after"));
    }
}
