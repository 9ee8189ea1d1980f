//! What `preflight` says on the screen: the verdict first, then what it rests on.

use super::summary::{View, plain, wrapped};
use super::units::{Units, significant};
use crate::firing::Status;
use crate::preflight::{Assumed, Check, Preflight};

/// Words for the checks.
pub(super) fn name(id: &str) -> &str {
    match id {
        "rail_exit_speed" => "speed off the rail",
        "thrust_to_weight" => "thrust to weight",
        "stability_margin" => "stability margin",
        other => other,
    }
}

pub(super) fn unit(c: &Check) -> &str {
    match c.id.as_str() {
        "rail_exit_speed" => "m/s",
        "stability_margin" => "calibres",
        _ => "",
    }
}

/// The verdict, which never stands without what it rests on.
pub(super) fn verdict(p: &Preflight) -> &'static str {
    match (p.verdict == "go", p.qualifications.is_empty()) {
        (true, true) => "GO by the limits below",
        (true, false) => "GO, QUALIFIED",
        (false, _) => "NO-GO",
    }
}

/// The probability that a limit is met, in words.
pub fn probability(c: &Check) -> String {
    match c.probability_met {
        None => "not known".into(),
        Some(p) if p > 0.9995 => "above 0.999".into(),
        Some(p) => format!("{p:.3}"),
    }
}

/// The summary, ending in a line feed.
pub fn summary(p: &Preflight, view: View, written: &str) -> String {
    let mut lines = Vec::new();
    let go = p.verdict == "go";
    let verdict = verdict(p);
    lines.extend(wrapped(&format!("{verdict}  ({}; {})", plain(&p.vehicle), plain(&p.thrust_source)), "", "  "));
    if go && !p.qualifications.is_empty() {
        lines.push("  the limits below are met, but:".into());
    }
    for text in &p.qualifications {
        lines.extend(wrapped(&plain(text), "  - ", "    "));
    }
    lines.push(String::new());
    for c in &p.checks {
        let interval = c
            .interval_95
            .map_or("not known".into(), |[low, high]| format!("{} to {}", significant(low, 3), significant(high, 3)));
        let mark = if c.status == Status::Pass { "met" } else { "NOT MET" };
        let speed = if c.id == "rail_exit_speed" {
            format!(" ({} ft/s)", significant(c.value / 0.3048, 3))
        } else {
            String::new()
        };
        let value = format!("{} {}{speed}", significant(c.value, 4), unit(c));
        lines.push(format!("  {:<18} {}, 95 % {interval}", name(&c.id), value.trim()));
        let probability = probability(c);
        let text = format!("{mark}: {} asked ({}), probability {probability}", significant(c.limit, 4), c.limit_source);
        lines.push(format!("    {text}"));
    }
    lines.push("  go needs each limit met with a probability of 0.975".into());
    for fix in &p.fixes {
        lines.extend(wrapped(&format!("{}: {}", name(&fix.check), fix.advice), "  -> ", "     "));
    }
    lines.push(String::new());
    let t = &p.thrust_to_weight;
    lines.extend(wrapped(
        &format!(
            "thrust to weight: {} over the rail, {} at peak, {} at the lowest on the rail (1 where the thrust is still rising as it lifts); {}",
            significant(t.rail_average, 3),
            significant(t.peak, 3),
            significant(t.lowest_on_rail, 3),
            t.definition
        ),
        "  ",
        "    ",
    ));
    let us = view.units == Units::Us;
    let metres =
        |m: f64| if us { format!("{} ft", significant(m / 0.3048, 4)) } else { format!("{} m", significant(m, 4)) };
    let speed =
        |v: f64| if us { format!("{} ft/s", significant(v / 0.3048, 4)) } else { format!("{} m/s", significant(v, 4)) };
    let force = view.units.force();
    let simple = p.rail.simple_exit_speed_m_s.map_or("does not lift".into(), speed);
    lines.extend(wrapped(
        &format!(
            "rail: {} of travel in {} s with {} {} in the mean, held {} s; by the burn's mean thrust alone {simple}",
            metres(p.rail.effective_length.value),
            significant(p.rail.exit_time.value, 3),
            significant(p.rail.mean_thrust.value / force.size_si, 4),
            force.symbol,
            significant(p.rail.held_s, 2)
        ),
        "  ",
        "    ",
    ));
    let s = &p.stability;
    lines.extend(wrapped(
        &format!(
            "stability: centre of pressure {} ({}){}; centre of gravity {} loaded, {} off the rail, {} at burn-out; margins {}, {}, {} calibres",
            metres(s.cp_m),
            s.cp_source,
            s.cp_side_area_m.map_or(String::new(), |x| format!(", by side area {}", metres(x))),
            metres(s.cg_loaded_m),
            metres(s.cg_at_exit_m),
            metres(s.cg_burnout_m),
            significant(s.margin_loaded, 3),
            significant(s.margin_at_exit, 3),
            significant(s.margin_burnout, 3)
        ),
        "  ",
        "    ",
    ));
    if let Some(angle) = p.wind_angle_at_exit_deg {
        lines.push(format!("  wind meets it at {} deg off the rail", significant(angle, 2)));
    }
    let other = |name: &str, a: &Assumed| {
        format!(
            "{name}: {} off the rail, thrust to weight {}, margin {} calibres",
            speed(a.exit_speed_m_s),
            significant(a.thrust_to_weight, 3),
            significant(a.margin_minimum, 3)
        )
    };
    if let Some(a) = &p.mean_of_group {
        lines.extend(wrapped(&other("the group's mean thrust, for comparison", a), "  ", "    "));
    }
    if let Some(a) = &p.assumed {
        lines.extend(wrapped(&other("the assumed constant thrust, for comparison", a), "  ", "    "));
    }
    for text in &p.findings {
        lines.extend(wrapped(&plain(text), "  ", "    "));
    }
    lines.push(String::new());
    lines.extend(wrapped(written, "", "  "));
    for text in &p.cautions {
        lines.extend(wrapped(text, "", ""));
    }
    lines.push(String::new());
    lines.join("\n")
}
