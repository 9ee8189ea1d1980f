//! Members of a group and what is worked out of them.

use super::curves::{self, Trace};
use super::pairwise::{self, Difference};
use super::sample::{half_width_95, mean_and_sd};
use super::{
    Between, CurveDifference, DifferenceRecord, FIGURES, Group, OddValue, Run, SetAside, Spread, Trend, failed_checks,
    outliers, permutation, tolerance, trends,
};
use crate::firing::{Figure, Firing};
use crate::problem::Problem;
use rayon::prelude::*;
use std::collections::BTreeMap;

/// Sources of error that all firings on one calibrated cell, stand and site share.
const SHARED: [&str; 10] = [
    "calibration fit",
    "weights",
    "gravity",
    "air buoyancy",
    "beyond the heaviest weight",
    "stated accuracy",
    "force ratio",
    "clock",
    "pressure scale",
    "throat diameter",
];

/// Standard uncertainties of its own measurement that a value must lie off the mean to be odd.
const BEYOND_MEASUREMENT: f64 = 2.0;

/// The figure of a key.
pub fn figure_of<'a>(firing: &'a Firing, key: &str) -> Option<&'a Figure> {
    firing.quantities.by_key(key)
}

/// A run in its group.
pub struct Member<'a> {
    pub run: &'a Run,
    pub id: &'a str,
    /// Why nothing of it is averaged.
    aside: Option<String>,
    /// Which calibration it rests on; `None` where it names no file of its own.
    calibration: Option<String>,
}

impl<'a> Member<'a> {
    pub fn new(run: &'a Run, with_failed: bool) -> Self {
        let failed = failed_checks(&run.firing);
        let aside = (!failed.is_empty() && !with_failed).then(|| format!("failed {}", failed.join(", ")));
        // run.toml comes first and the log last; calibrations lie between.
        let inputs = &run.firing.provenance.inputs;
        let between = inputs.get(1..inputs.len().saturating_sub(1)).unwrap_or_default();
        let calibration =
            (!between.is_empty()).then(|| between.iter().map(|i| i.sha256.as_str()).collect::<Vec<_>>().join("+"));
        Member { run, id: &run.firing.run.id, aside, calibration }
    }

    /// The figure, where it is averaged.
    fn counted(&self, key: &str) -> Option<&'a Figure> {
        let figure = figure_of(&self.run.firing, key)?;
        (self.aside.is_none() && figure.bound.is_none()).then_some(figure)
    }

    /// Standard uncertainty by errors of its own and by those it shares with others on its cell; `None` where not known.
    fn errors(&self, key: &str) -> Option<(f64, f64)> {
        self.counted(key)?.standard_uncertainty?;
        let budget = self.run.firing.uncertainty_budget.get(key)?;
        let sum = |shared: bool| {
            budget
                .iter()
                .filter(|l| SHARED.contains(&l.source.as_str()) == shared)
                .map(|l| l.standard_uncertainty.powi(2))
                .sum::<f64>()
                .sqrt()
        };
        Some((sum(false), sum(true)))
    }
}

/// Runs by the value of a key, groups in the order of their names.
///
/// # Errors
/// A key that is not known, or that no run has.
pub fn by_key<'a>(
    runs: &[&'a Run],
    key: &str,
    findings: &mut Vec<String>,
) -> Result<Vec<(String, Vec<&'a Run>)>, Problem> {
    let word = |value: &serde_json::Value| match value {
        serde_json::Value::String(text) => text.clone(),
        serde_json::Value::Object(map) => {
            map.get("text").and_then(|t| t.as_str()).map_or_else(|| value.to_string(), str::to_string)
        }
        other => other.to_string(),
    };
    let read = |firing: &Firing| -> Option<String> {
        match key.split_once('.') {
            Some(("tags", name)) => firing.run.tags.get(name).map(word),
            Some(("conditions", name)) => firing.run.conditions.get(name).map(word),
            None if key == "pour" => firing.run.pour.clone(),
            None if key == "date" => firing.run.date.clone(),
            None => firing.run.tags.get(key).or_else(|| firing.run.conditions.get(key)).map(word),
            Some(_) => None,
        }
    };
    let mut groups: BTreeMap<String, Vec<&Run>> = BTreeMap::new();
    let mut without = Vec::new();
    for run in runs {
        match read(&run.firing) {
            Some(value) => groups.entry(value).or_default().push(run),
            None => without.push(run.firing.run.id.clone()),
        }
    }
    if groups.is_empty() {
        let mut known: Vec<String> = vec!["pour".into(), "date".into()];
        for run in runs {
            known.extend(run.firing.run.tags.keys().map(|k| format!("tags.{k}")));
            known.extend(run.firing.run.conditions.keys().map(|k| format!("conditions.{k}")));
        }
        known.sort();
        known.dedup();
        return Err(Problem::new(format!("no run has a value for {key:?}"))
            .expected(format!("--by with one of {}", known.join(", ")))
            .remedy("give the pour of each run in its run.toml, or group by another key"));
    }
    if !without.is_empty() {
        findings.push(format!("{} without a value for {key}: in a group of their own", without.join(", ")));
        let rest = runs.iter().filter(|r| without.contains(&r.firing.run.id)).copied().collect();
        groups.insert(format!("no {key}"), rest);
    }
    Ok(groups.into_iter().collect())
}

/// Values averaged.
pub fn values(members: &[Member<'_>], key: &str) -> Vec<f64> {
    members.iter().filter_map(|m| m.counted(key)).map(|f| f.value).collect()
}

/// Error of a group's mean by the calibrations behind it, and its share of each calibration.
///
/// # Formula
/// u² = Σ_c ((n_c/n) ū_c)²: what is shared on one cell adds up, different cells are independent.
fn shared_error(members: &[Member<'_>], key: &str) -> Option<BTreeMap<Option<String>, f64>> {
    let mut sums: BTreeMap<Option<String>, f64> = BTreeMap::new();
    let counted: Vec<&Member<'_>> = members.iter().filter(|m| m.counted(key).is_some()).collect();
    for member in &counted {
        let (_, shared) = member.errors(key)?;
        *sums.entry(member.calibration.clone()).or_default() += shared / counted.len() as f64;
    }
    Some(sums)
}

/// Error of the difference of two means: on the same calibration it cancels but for what the two means feel differently of it.
fn error_of_difference(a: &[Member<'_>], b: &[Member<'_>], key: &str) -> Option<f64> {
    let (mut first, second) = (shared_error(a, key)?, shared_error(b, key)?);
    for (calibration, u) in second {
        let entry = first.entry(calibration.clone()).or_default();
        // Without a file to know it by, two calibrations may be two.
        *entry = if calibration.is_some() { *entry - u } else { entry.hypot(u) };
    }
    Some(first.values().map(|u| u * u).sum::<f64>().sqrt())
}

/// Trace of each member that is averaged.
fn traces<'a>(members: &[Member<'a>]) -> Vec<(&'a str, &'a Trace)> {
    members.iter().filter(|m| m.aside.is_none()).filter_map(|m| Some((m.id, m.run.trace.as_ref()?))).collect()
}

/// Traces at one burn time where that is asked for.
fn aligned(traces: &[(&str, &Trace)], by_burn_time: bool) -> Vec<Trace> {
    let mean = traces.iter().map(|t| t.1.burn_time_s).sum::<f64>() / traces.len().max(1) as f64;
    traces.iter().map(|t| if by_burn_time { curves::stretched(t.1, mean) } else { t.1.clone() }).collect()
}

pub fn describe(name: &str, members: &[Member<'_>], by_burn_time: bool) -> Group {
    let traces = traces(members);
    let aligned = aligned(&traces, by_burn_time);
    let refs: Vec<&Trace> = aligned.iter().collect();
    let mut quantities = BTreeMap::new();
    let mut factors = Vec::new();
    for (key, _) in FIGURES {
        if let Some(spread) = spread(members, key, &traces, &mut factors) {
            quantities.insert(key.to_string(), spread);
        }
    }
    let shared = quantities.get("burn_impulse").and_then(|s: &Spread| Some(s.shared_calibration_u? / s.mean));
    let mut calibrations: Vec<String> = members.iter().filter_map(|m| m.calibration.clone()).collect();
    calibrations.sort();
    calibrations.dedup();
    Group {
        pour: name.to_string(),
        n: members.iter().filter(|m| m.aside.is_none()).count(),
        runs: members.iter().map(|m| m.id.to_string()).collect(),
        set_aside: members
            .iter()
            .filter_map(|m| Some(SetAside { id: m.id.to_string(), reason: m.aside.clone()? }))
            .collect(),
        calibrations,
        quantities,
        thrust_band: (!refs.is_empty()).then(|| curves::band(&refs, curves::common_time(&refs), shared.unwrap_or(0.0))),
    }
}

/// Tolerance factors of a count of firings, two-sided and one-sided.
struct Factors {
    n: usize,
    two: Option<f64>,
    one: Option<f64>,
}

impl Factors {
    fn of(n: usize) -> Self {
        Factors {
            n,
            two: tolerance::two_sided(n, tolerance::CONTENT, tolerance::CONFIDENCE),
            one: tolerance::one_sided(n, tolerance::CONTENT, tolerance::CONFIDENCE),
        }
    }
}

fn spread(members: &[Member<'_>], key: &str, traces: &[(&str, &Trace)], known: &mut Vec<Factors>) -> Option<Spread> {
    let counted: Vec<(&Member<'_>, &Figure)> = members.iter().filter_map(|m| Some((m, m.counted(key)?))).collect();
    let values: Vec<f64> = counted.iter().map(|c| c.1.value).collect();
    let (mean, sd) = mean_and_sd(&values)?;
    let n = values.len();
    let errors: Option<Vec<(f64, f64)>> = counted.iter().map(|c| c.0.errors(key)).collect();
    let measurement_sd = errors.as_ref().map(|e| (e.iter().map(|e| e.0 * e.0).sum::<f64>() / n as f64).sqrt());
    let shared_u = shared_error(members, key).map(|shared| shared.values().map(|u| u * u).sum::<f64>().sqrt());
    let around = |half: f64| [mean - half, mean + half];
    if !known.iter().any(|f| f.n == n) {
        known.push(Factors::of(n));
    }
    let (factor, one) = known.iter().find(|f| f.n == n).map_or((None, None), |f| (f.two, f.one));
    let odd: Vec<OddValue> = outliers::find(&values)
        .into_iter()
        // What its own measurement may be off by makes no firing odd.
        .filter(|o| {
            let own = errors.as_ref().map_or(0.0, |e| e[o.index].0);
            (values[o.index] - mean).abs() > BEYOND_MEASUREMENT * own
        })
        .map(|o| OddValue {
            id: counted[o.index].0.id.to_string(),
            value: values[o.index],
            test: outliers::test_for(n).to_string(),
            statistic: o.statistic,
            critical: o.critical,
            most_off: most_off(counted[o.index].0.id, traces),
        })
        .collect();
    Some(Spread {
        unit: counted[0].1.unit.clone(),
        n,
        values: counted.iter().map(|c| (c.0.id.to_string(), c.1.value)).collect(),
        mean,
        standard_deviation: sd,
        coefficient_of_variation: sd.map(|sd| sd / mean.abs()).filter(|c| c.is_finite()),
        mean_interval_95: sd.and_then(|sd| half_width_95(sd, n, 0.0)).map(around),
        mean_interval_with_calibration: sd.and_then(|sd| half_width_95(sd, n, shared_u?)).map(around),
        tolerance_interval_95_95: sd.and_then(|sd| Some(around(factor? * sd))),
        lower_tolerance_bound_95_95: sd.and_then(|sd| Some(mean - one? * sd)),
        upper_tolerance_bound_95_95: sd.and_then(|sd| Some(mean + one? * sd)),
        measurement_sd,
        shared_calibration_u: shared_u,
        motor_to_motor_sd: sd.zip(measurement_sd).map(|(s, m)| (s * s - m * m).max(0.0).sqrt()),
        outliers: odd.iter().map(|o| o.id.clone()).collect(),
        odd,
        set_aside: members
            .iter()
            .filter_map(|m| {
                let figure = figure_of(&m.run.firing, key)?;
                let reason = m.aside.clone().or_else(|| Some(format!("{} bound only", figure.bound.as_ref()?)))?;
                Some(SetAside { id: m.id.to_string(), reason })
            })
            .collect(),
        words: too_few(n, factor),
    })
}

/// What so few firings can say.
fn too_few(n: usize, factor: Option<f64>) -> Option<String> {
    match (n, factor) {
        (1, _) => Some("one firing: nothing can be said of the spread".into()),
        (2..=4, Some(k)) => Some(format!(
            "{n} firings: the next motor lies within ± {k:.1} standard deviations, too wide to plan with; fire {} or more",
            5
        )),
        _ => None,
    }
}

/// Where a motor departs most from the mean of the others.
fn most_off(id: &str, traces: &[(&str, &Trace)]) -> Option<[f64; 2]> {
    let own = traces.iter().find(|t| t.0 == id)?.1;
    let others: Vec<&Trace> = traces.iter().filter(|t| t.0 != id).map(|t| t.1).collect();
    if others.is_empty() {
        return None;
    }
    let all: Vec<&Trace> = traces.iter().map(|t| t.1).collect();
    curves::common_time(&all)
        .into_iter()
        .map(|t| [t, own.at(t) - others.iter().map(|o| o.at(t)).sum::<f64>() / others.len() as f64])
        .max_by(|a, b| a[1].abs().total_cmp(&b[1].abs()))
}

/// The figure between the groups.
pub fn between(
    groups: &[(String, Vec<Member<'_>>)],
    values: &[Vec<f64>],
    key: &str,
    alike_within: f64,
) -> Option<Between> {
    let filled = values.iter().filter(|v| !v.is_empty()).count();
    let (method, test, welch) = if filled == 2 {
        let pair: Vec<&Vec<f64>> = values.iter().filter(|v| !v.is_empty()).collect();
        match pairwise::welch_t(pair[0], pair[1]) {
            Some(test) => ("Welch's t test", test, None),
            None => ("one-way analysis of variance", pairwise::analysis_of_variance(values)?, None),
        }
    } else {
        let method = "one-way analysis of variance; differences by Tukey-Kramer";
        (method, pairwise::analysis_of_variance(values)?, pairwise::welch_anova(values))
    };
    let unit = groups.iter().flat_map(|g| &g.1).find_map(|m| m.counted(key)).map(|f| f.unit.clone())?;
    let centre = mean_and_sd(&values.concat())?.0.abs();
    let differences = pairwise::differences(values)
        .into_iter()
        .map(|(a, b, d)| {
            let shared = error_of_difference(&groups[a].1, &groups[b].1, key);
            record(&groups[a].0, &groups[b].0, &d, shared, alike_within * centre)
        })
        .collect();
    Some(Between {
        unit,
        method: method.to_string(),
        statistic: test.statistic,
        df: test.df,
        p_value: test.p_value,
        welch,
        differences,
    })
}

fn record(a: &str, b: &str, d: &Difference, shared_u: Option<f64>, margin: f64) -> DifferenceRecord {
    let around = |half: f64| [d.difference - half, d.difference + half];
    DifferenceRecord {
        a: a.to_string(),
        b: b.to_string(),
        difference: d.difference,
        interval_95: around(d.half_width_95),
        interval_95_with_calibration: shared_u.map(|u| around(pairwise::with_calibration(d, u))),
        alike: shared_u.and_then(|u| pairwise::alike_within(d, margin, u)),
    }
}

/// Curves of each two groups held against each other.
pub fn curve_differences(groups: &[(String, Vec<Member<'_>>)], by_burn_time: bool) -> Vec<CurveDifference> {
    let all: Vec<(&str, &Trace)> = groups.iter().flat_map(|g| traces(&g.1)).collect();
    let stretched = aligned(&all, by_burn_time);
    let refs: Vec<&Trace> = stretched.iter().collect();
    let time_s = curves::common_time(&refs);
    let sampled: Vec<Vec<f64>> = refs.iter().map(|c| time_s.iter().map(|t| c.at(*t)).collect()).collect();
    let mut from = 0;
    let parts: Vec<(&str, &[Vec<f64>])> = groups
        .iter()
        .map(|(name, members)| {
            let count = traces(members).len();
            from += count;
            (name.as_str(), &sampled[from - count..from])
        })
        .collect();
    let pairs: Vec<(usize, usize)> = (0..parts.len()).flat_map(|a| (a + 1..parts.len()).map(move |b| (a, b))).collect();
    pairs
        .par_iter()
        .filter_map(|(a, b)| {
            let test = permutation::compare(&time_s, parts[*a].1, parts[*b].1)?;
            Some(CurveDifference { a: parts[*a].0.to_string(), b: parts[*b].0.to_string(), test })
        })
        .collect()
}

/// A number of the run that figures may run with.
fn covariate(firing: &Firing, name: &str) -> Option<f64> {
    let number = |value: &serde_json::Value| {
        value.as_f64().or_else(|| value.get("value").and_then(serde_json::Value::as_f64)).filter(|v| v.is_finite())
    };
    match name.split_once('.') {
        None => trends::days(firing.run.date.as_deref()?),
        Some(("tags", key)) => firing.run.tags.get(key).and_then(number),
        Some((_, key)) => firing.run.conditions.get(key).and_then(number),
    }
}

/// Figures that trends are looked for in.
const TRENDED: [&str; 5] = ["total_impulse", "burn_time", "average_thrust", "peak_thrust", "specific_impulse"];

/// Figures against date, conditions and numbers of `[tags]`, over all groups.
pub fn trends(groups: &[(String, Vec<Member<'_>>)]) -> Vec<Trend> {
    let members: Vec<&Member<'_>> = groups.iter().flat_map(|g| &g.1).collect();
    let mut names: Vec<String> = members
        .iter()
        .flat_map(|m| {
            let run = &m.run.firing.run;
            let tags = run.tags.keys().map(|k| format!("tags.{k}"));
            tags.chain(run.conditions.keys().map(|k| format!("conditions.{k}"))).collect::<Vec<_>>()
        })
        .collect();
    names.sort();
    names.dedup();
    names.insert(0, "date".into());
    let mut found = Vec::new();
    for name in &names {
        for key in TRENDED {
            let points: Vec<(f64, &Figure)> =
                members.iter().filter_map(|m| Some((covariate(&m.run.firing, name)?, m.counted(key)?))).collect();
            let x: Vec<f64> = points.iter().map(|p| p.0).collect();
            let y: Vec<f64> = points.iter().map(|p| p.1.value).collect();
            if let Some(line) = trends::line(&x, &y) {
                let against = if name == "date" { "date, days since 1970-01-01".to_string() } else { name.clone() };
                found.push(Trend { quantity: key.to_string(), unit: points[0].1.unit.clone(), against, line });
            }
        }
    }
    found
}

pub fn burn_rate_law(groups: &[(String, Vec<Member<'_>>)]) -> Option<trends::BurnRateLaw> {
    let points: Vec<(f64, f64)> = groups
        .iter()
        .flat_map(|g| &g.1)
        .filter_map(|m| Some((m.counted("mean_pressure")?.value, m.counted("burn_rate")?.value)))
        .collect();
    let (p, r): (Vec<f64>, Vec<f64>) = points.into_iter().unzip();
    trends::burn_rate_law(&p, &r)
}
