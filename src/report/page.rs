//! report.html: one page that stands alone, readable on a phone, in light and in dark.

use super::advice;
use super::figures::named;
use super::units::{Units, fixed, percent, significant, words};
use crate::firing::{Firing, Status};
use crate::problem::Problem;
use minijinja::value::Serde;
use minijinja::{AutoEscape, Environment, Value, context};
use std::sync::OnceLock;

pub const FILE: &str = "report.html";

/// Repairs beyond this many are counted on the page; result.json lists them all.
const MOST_REPAIRS: usize = 200;

/// The page of a firing; `svg` is put into it as it is and must be a picture of ours.
///
/// # Errors
/// None in practice: the template is built in.
pub fn page(firing: &Firing, svg: Option<&str>, units: Units) -> Result<String, Problem> {
    let failed = |error: &dyn std::fmt::Display| Problem::new(format!("the page could not be made: {error:#}"));
    static ENVIRONMENT: OnceLock<Result<Environment<'static>, String>> = OnceLock::new();
    let environment = ENVIRONMENT.get_or_init(|| {
        let mut environment = Environment::new();
        environment.set_auto_escape_callback(|_| AutoEscape::Html);
        environment
            .add_template(FILE, include_str!("page.html"))
            .map(|()| environment)
            .map_err(|error| error.to_string())
    });
    let environment = environment.as_ref().map_err(|error| failed(error))?;
    let template = environment.get_template(FILE).map_err(|error| failed(&error))?;
    template.render(content(firing, svg, units)).map_err(|error| failed(&error))
}

fn serialised(value: impl serde::Serialize) -> Value {
    Value::from(Serde(value))
}

/// What the template shows; every number is already text.
fn content(firing: &Firing, svg: Option<&str>, units: Units) -> Value {
    let figures: Vec<Value> = named(&firing.quantities)
        .into_iter()
        .filter(|entry| entry.expected || entry.figure.is_some())
        .map(|entry| {
            let value = entry.figure.map_or_else(|| "not known".to_owned(), |figure| words(figure, units).line());
            let source = entry.figure.and_then(|figure| figure.source.clone());
            context! { name => entry.name, definition => entry.definition, value, source }
        })
        .collect();
    let checks: Vec<Value> = [Status::Fail, Status::Caution, Status::Pass]
        .into_iter()
        .flat_map(|status| firing.checks.iter().filter(move |check| check.status == status))
        .map(|check| {
            let advice = if check.status == Status::Pass { None } else { advice::for_check(&check.id) };
            context! { id => check.id.as_str(), status => serialised(check.status), message => check.message.as_str(), advice }
        })
        .collect();
    let probability = firing.motor_class.as_ref().and_then(|class| class.probability.as_ref()).map(|probability| {
        let parts: Vec<String> = probability.iter().map(|(letter, p)| format!("{letter} {}", percent(*p))).collect();
        parts.join(", ")
    });
    let bursts: Vec<Value> = firing
        .bursts
        .iter()
        .map(|burst| {
            context! {
                kind => serialised(burst.kind), from => fixed(burst.start_s, 2), to => fixed(burst.end_s, 2),
                impulse => significant(burst.impulse, 3), peak => significant(burst.peak, 3),
            }
        })
        .collect();
    let repairs = &firing.provenance.repairs;
    context! {
        firing => serialised(firing),
        picture => svg.map(|svg| Value::from_safe_string(svg.to_owned())),
        total => firing.quantities.total_impulse.as_ref().map_or_else(|| "not known".to_owned(), |f| words(f, units).line()),
        position => firing.motor_class.as_ref().map(|class| fixed(class.position * 100.0, 0)),
        probability,
        failed => firing.checks.iter().filter(|check| check.status == Status::Fail).count(),
        cautions => advice::CAUTIONS,
        figures,
        checks,
        budget => budget(firing, units),
        rate => significant(firing.conditioning.sample_rate_hz, 4),
        noise => significant(firing.conditioning.noise_n, 2),
        cutoff => firing.conditioning.cutoff_hz.map(|hz| significant(hz, 3)),
        stand_hz => firing.stand.as_ref().map(|stand| significant(stand.natural_frequency_hz, 3)),
        records => serialised(firing.provenance.records),
        repairs => serialised(&repairs[..repairs.len().min(MOST_REPAIRS)]),
        more_repairs => repairs.len().saturating_sub(MOST_REPAIRS),
        bursts,
        notes => notes(firing),
    }
}

fn budget(firing: &Firing, units: Units) -> Vec<Value> {
    named(&firing.quantities)
        .into_iter()
        .filter_map(|entry| {
            let lines = firing.uncertainty_budget.get(entry.key)?;
            let figure = entry.figure?;
            let unit = units.of(&figure.unit, figure.value);
            let lines: Vec<Value> = lines
                .iter()
                .map(|line| {
                    let u = format!("{} {}", significant(line.standard_uncertainty / unit.size_si, 2), unit.symbol);
                    let remedy = line.improvement.as_ref().map(|improvement| {
                        let half = significant(improvement.half_width_95_if_halved / unit.size_si, 2);
                        format!("{}; half of this error would leave ± {half} {}", improvement.remedy, unit.symbol)
                    });
                    context! { source => line.source.as_str(), u, share => fixed(line.share * 100.0, 1), remedy }
                })
                .collect();
            Some(context! { name => entry.name, lines })
        })
        .collect()
}

/// Conditions and tags as text: what was written where that is kept, else the value itself.
fn notes(firing: &Firing) -> Vec<Value> {
    firing
        .run
        .conditions
        .iter()
        .chain(&firing.run.tags)
        .map(|(name, value)| {
            let text = match value {
                serde_json::Value::String(text) => text.clone(),
                serde_json::Value::Object(map) => match map.get("text").and_then(serde_json::Value::as_str) {
                    Some(text) => text.to_owned(),
                    None => value.to_string(),
                },
                other => other.to_string(),
            };
            context! { name => name.replace('_', " "), value => text }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::export::sample;
    use crate::report::plot;

    #[test]
    fn the_page_stands_alone_and_holds_what_it_must() {
        let firing = sample::firing();
        let svg = plot::thrust_svg(&firing, &sample::curves(300), Units::Si).unwrap();
        let html = page(&firing, Some(&svg), Units::Si).unwrap();
        for text in [
            "<svg",
            "J284",
            "771.2 ± 3.9 N·s",
            "first to last crossing of 5 % of peak thrust",
            "baseline_after",
            "one sample at full scale",
            "1.9 N·s",
            "89.0 %",
            "use better weights; half of this error would leave ± 2.3 N·s",
            &"ab".repeat(32),
            "not a certified one",
            "barricade",
            "Ignite remotely",
            "misfire",
            "Nobody stands near",
            "Local law",
            "viewport",
            "prefers-color-scheme",
        ] {
            assert!(html.contains(text), "{text}");
        }
        let without_namespace = html.replace("http://www.w3.org/2000/svg", "");
        assert!(!without_namespace.contains("http://") && !html.contains("https://") && !html.contains("<script"));
        if let Ok(folder) = std::env::var("BURNTALLY_TEST_PICTURES") {
            std::fs::write(std::path::Path::new(&folder).join(FILE), html).unwrap();
        }
    }

    #[test]
    fn hostile_names_stay_text_everywhere() {
        let bad = "<img src=x onerror=alert(1)>\"'{{ firing }}";
        let mut firing = sample::firing();
        firing.run.id = bad.to_owned();
        firing.run.pour = Some(bad.to_owned());
        firing.run.date = Some(bad.to_owned());
        firing.run.tags.insert(bad.to_owned(), serde_json::json!({ "text": bad }));
        firing.run.conditions.insert(bad.to_owned(), serde_json::json!(bad));
        firing.checks[0].message = bad.to_owned();
        firing.checks[1].id = bad.to_owned();
        firing.provenance.inputs[0].file = bad.to_owned();
        firing.provenance.findings[0] = bad.to_owned();
        firing.provenance.repairs[0].message = bad.to_owned();
        firing.provenance.repairs[0].column = Some(bad.to_owned());
        firing.motor_class.as_mut().unwrap().designation = bad.to_owned();
        firing.quantities.propellant_mass.as_mut().unwrap().source = Some(bad.to_owned());
        firing.uncertainty_budget.get_mut("total_impulse").unwrap()[0].source = bad.to_owned();
        let svg = plot::thrust_svg(&firing, &sample::curves(300), Units::Si).unwrap();
        let html = page(&firing, Some(&svg), Units::Si).unwrap();
        assert!(!html.contains("<img"), "{}", &html[html.find("<img").unwrap_or(0)..]);
        assert!(html.matches("&lt;img").count() >= 13);
    }

    #[test]
    fn little_is_known_and_the_page_says_so() {
        let mut firing = sample::firing();
        firing.quantities = crate::firing::Quantities::default();
        firing.motor_class = None;
        firing.uncertainty_budget.clear();
        firing.checks.clear();
        let html = page(&firing, None, Units::Us).unwrap();
        assert!(html.contains("total impulse not known") && html.contains("none were made"));
    }
}
