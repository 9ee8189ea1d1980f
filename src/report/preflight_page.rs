//! preflight.html: the check before a flight on one page that stands alone, readable on a phone, in light and in dark.

use super::preflight_summary::{name, probability, unit, verdict};
use super::units::{Units, significant};
use crate::firing::Status;
use crate::preflight::{Assumed, Preflight};
use crate::problem::Problem;
use minijinja::{AutoEscape, Environment, Value, context};

pub const FILE: &str = "preflight.html";

/// The page; `svg` is put into it as it is and must be a picture of ours.
///
/// # Errors
/// None in practice: the template is built in.
pub fn page(p: &Preflight, svg: Option<&str>, units: Units) -> Result<String, Problem> {
    let failed = |error: minijinja::Error| Problem::new(format!("the page could not be made: {error:#}"));
    let mut environment = Environment::new();
    environment.set_auto_escape_callback(|_| AutoEscape::Html);
    environment.add_template(FILE, include_str!("preflight_page.html")).map_err(failed)?;
    environment.get_template(FILE).and_then(|t| t.render(content(p, svg, units))).map_err(failed)
}

/// What the template shows; every number is already text.
fn content(p: &Preflight, svg: Option<&str>, units: Units) -> Value {
    let foot = if units == Units::Us { Some(0.3048) } else { None };
    let metres = |m: f64| format!("{} {}", significant(m / foot.unwrap_or(1.0), 4), foot.map_or("m", |_| "ft"));
    let speed = |v: f64| format!("{} {}", significant(v / foot.unwrap_or(1.0), 4), foot.map_or("m/s", |_| "ft/s"));
    let force = units.force();
    let newtons = |f: f64| format!("{} {}", significant(f / force.size_si, 4), force.symbol);
    let checks: Vec<Value> = p
        .checks
        .iter()
        .map(|c| {
            let said = |x: f64| match c.id.as_str() {
                "rail_exit_speed" => speed(x),
                _ => format!("{} {}", significant(x, 3), unit(c)).trim().to_string(),
            };
            let interval = c
                .interval_95
                .map_or_else(|| "interval not known".to_string(), |[low, high]| format!("95 %: {} to {}", said(low), said(high)));
            let fix: Vec<&str> = p.fixes.iter().filter(|f| f.check == c.id).map(|f| f.advice.as_str()).collect();
            let met = c.status == Status::Pass;
            context! {
                name => name(&c.id), value => said(c.value), limit => said(c.limit), source => c.limit_source.as_str(), interval,
                probability => probability(c),
                class => if met { "pass" } else { "fail" }, mark => if met { "met" } else { "NOT MET" }, fix => fix.join("; "),
            }
        })
        .collect();
    let (t, s) = (&p.thrust_to_weight, &p.stability);
    let margin = |x: f64| format!("{} calibres", significant(x, 3));
    let mut figures = vec![
        ("thrust to weight, rail average", significant(t.rail_average, 3)),
        ("thrust to weight, peak", significant(t.peak, 3)),
        ("thrust to weight, lowest on the rail", significant(t.lowest_on_rail, 3)),
        ("travel until the forward guide leaves", metres(p.rail.effective_length.value)),
        ("time on the rail", format!("{} s", significant(p.rail.exit_time.value, 3))),
        ("mean thrust on the rail", newtons(p.rail.mean_thrust.value)),
        (
            "exit speed by the burn's mean thrust alone",
            p.rail.simple_exit_speed_m_s.map_or_else(|| "does not lift".to_string(), speed),
        ),
        ("centre of pressure", format!("{} ({})", metres(s.cp_m), s.cp_source)),
        ("centroid of the side outline", s.cp_side_area_m.map_or_else(|| "not known".to_string(), metres)),
        ("centre of gravity loaded", metres(s.cg_loaded_m)),
        ("centre of gravity off the rail", metres(s.cg_at_exit_m)),
        ("centre of gravity at burn-out", metres(s.cg_burnout_m)),
        ("margin loaded", margin(s.margin_loaded)),
        ("margin off the rail", margin(s.margin_at_exit)),
        ("margin at burn-out", margin(s.margin_burnout)),
    ];
    if let Some(angle) = p.wind_angle_at_exit_deg {
        figures.push(("angle at which the wind meets it off the rail", format!("{} deg", significant(angle, 2))));
    }
    let figures: Vec<Value> = figures.into_iter().map(|(name, value)| context! { name, value }).collect();
    let beside = |name: &str, a: &Option<Assumed>| {
        a.as_ref().map(|a| {
            context! {
                name, speed => speed(a.exit_speed_m_s), weight => significant(a.thrust_to_weight, 3),
                margin => margin(a.margin_minimum),
            }
        })
    };
    let others: Vec<Value> =
        [beside("the group's mean thrust", &p.mean_of_group), beside("the assumed constant thrust", &p.assumed)]
            .into_iter()
            .flatten()
            .collect();
    context! {
        vehicle => p.vehicle.as_str(), thrust => p.thrust_source.as_str(), verdict => verdict(p),
        class => if p.verdict == "go" { "pass" } else { "fail" },
        qualifications => p.qualifications.clone(), checks, figures, others, definition => t.definition.as_str(),
        findings => p.findings.clone(), cautions => p.cautions.clone(),
        picture => svg.map(|svg| Value::from_safe_string(svg.to_owned())),
    }
}
