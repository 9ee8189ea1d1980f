//! Several firings held against each other: spread, components, differences, odd ones, curves, trends. Pure: same firings, same numbers.

pub mod components;
mod criteria;
pub mod curves;
mod group;
pub mod outliers;
pub mod pairwise;
pub mod permutation;
mod quadrature;
pub mod sample;
pub mod studentised_range;
pub mod tolerance;
pub mod trends;

use crate::firing::{Firing, Status};
use crate::problem::Problem;
use components::Components;
use curves::{Band, Trace};
use group::{Member, figure_of};
use pairwise::Alike;
use permutation::CurveTest;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Name and version of the shape of comparison.json.
pub const SCHEMA: &str = "burntally.comparison/1";

/// A reduced run as it enters.
#[derive(Debug, Clone, PartialEq)]
pub struct Run {
    pub firing: Firing,
    /// Thrust from the start of the burn; `None` where its table is not there.
    pub trace: Option<Trace>,
}

/// What is asked.
#[derive(Debug, Clone, PartialEq)]
pub struct Request {
    /// `pour`, `date`, or `tags.NAME`, `conditions.NAME`.
    pub by: String,
    pub leave_out: Vec<String>,
    /// Share of the mean within which two groups count as alike.
    pub alike_within: f64,
    /// Runs with a failed check are averaged with the others.
    pub with_failed: bool,
    /// Curves are compared at equal shares of the burn time.
    pub by_burn_time: bool,
}

/// Figures compared, in the order they are shown, with what a person calls them.
pub const FIGURES: [(&str, &str); 17] = [
    ("total_impulse", "total impulse"),
    ("burn_impulse", "burn impulse"),
    ("burn_time", "burn time"),
    ("action_time", "action time"),
    ("average_thrust", "average thrust"),
    ("peak_thrust", "peak thrust"),
    ("initial_thrust", "initial thrust"),
    ("rise_time", "rise time"),
    ("ignition_delay", "ignition delay"),
    ("propellant_mass", "propellant mass"),
    ("specific_impulse", "specific impulse"),
    ("effective_exhaust_velocity", "exhaust velocity"),
    ("peak_pressure", "peak pressure"),
    ("mean_pressure", "mean pressure"),
    ("characteristic_velocity", "characteristic velocity"),
    ("thrust_coefficient", "thrust coefficient"),
    ("burn_rate", "burn rate"),
];

/// A run not averaged, or a value of one, and why.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SetAside {
    pub id: String,
    pub reason: String,
}

/// A value that stands out of its group.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct OddValue {
    pub id: String,
    pub value: f64,
    pub test: String,
    /// Departure from the mean in standard deviations, and what it exceeds by chance once in twenty.
    pub statistic: f64,
    pub critical: f64,
    /// Where along the burn this motor departs most from the mean of the others, s from its start, and by how much, N.
    pub most_off: Option<[f64; 2]>,
}

/// One figure of one group, in the figure's unit.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Spread {
    pub unit: String,
    /// Values averaged.
    pub n: usize,
    pub values: BTreeMap<String, f64>,
    pub mean: f64,
    pub standard_deviation: Option<f64>,
    pub coefficient_of_variation: Option<f64>,
    /// Student's t, spread only.
    pub mean_interval_95: Option<[f64; 2]>,
    /// With the errors of calibration that the firings share; null where those are not known.
    pub mean_interval_with_calibration: Option<[f64; 2]>,
    /// 95 % of motors to come lie inside, at 95 % confidence. Not cut at zero.
    pub tolerance_interval_95_95: Option<[f64; 2]>,
    /// 95 % of motors to come lie above, at 95 % confidence; below for the upper one.
    pub lower_tolerance_bound_95_95: Option<f64>,
    pub upper_tolerance_bound_95_95: Option<f64>,
    /// Standard uncertainty of one value by what differs from firing to firing, and by what all on one cell share; null where not known.
    pub measurement_sd: Option<f64>,
    pub shared_calibration_u: Option<f64>,
    /// What is left of the standard deviation for the motors themselves.
    pub motor_to_motor_sd: Option<f64>,
    pub outliers: Vec<String>,
    pub odd: Vec<OddValue>,
    pub set_aside: Vec<SetAside>,
    /// What a person should know of so few firings.
    pub words: Option<String>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Group {
    /// Value of the key that groups: the pour unless `by` says otherwise.
    pub pour: String,
    /// Runs averaged.
    pub n: usize,
    pub runs: Vec<String>,
    pub set_aside: Vec<SetAside>,
    /// Hashes of the calibration files behind the runs.
    pub calibrations: Vec<String>,
    pub quantities: BTreeMap<String, Spread>,
    pub thrust_band: Option<Band>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DifferenceRecord {
    pub a: String,
    pub b: String,
    /// mean(a) − mean(b)
    pub difference: f64,
    /// Spread of the motors only; with three groups and more all these intervals hold together 95 times in 100.
    pub interval_95: [f64; 2],
    /// With errors of calibrations that the two groups do not share; null where those are not known.
    pub interval_95_with_calibration: Option<[f64; 2]>,
    /// Whether the two are alike within the margin asked for.
    pub alike: Option<Alike>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Between {
    pub unit: String,
    pub method: String,
    pub statistic: f64,
    pub df: [f64; 2],
    pub p_value: f64,
    /// Welch's test beside it, which does not ask for equal spreads.
    pub welch: Option<pairwise::Test>,
    pub differences: Vec<DifferenceRecord>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CurveDifference {
    pub a: String,
    pub b: String,
    #[serde(flatten)]
    pub test: CurveTest,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Trend {
    pub quantity: String,
    pub unit: String,
    pub against: String,
    #[serde(flatten)]
    pub line: trends::Line,
}

/// A usual criterion of consistency, held against a group.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Criterion {
    pub pour: String,
    pub name: String,
    pub value: f64,
    pub limit: f64,
    pub met: bool,
    pub source: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    pub schema: String,
    pub by: String,
    pub alike_within: f64,
    pub left_out: Vec<String>,
    pub groups: Vec<Group>,
    pub variance_components: BTreeMap<String, Components>,
    pub between_pours: BTreeMap<String, Between>,
    pub curve_differences: Vec<CurveDifference>,
    pub trends: Vec<Trend>,
    pub burn_rate_law: Option<trends::BurnRateLaw>,
    pub criteria: Vec<Criterion>,
    pub findings: Vec<String>,
    pub program: String,
    pub version: String,
}

/// Compares the runs.
///
/// # Errors
/// No runs, two of one id, one to be left out that is not there, a key that no run has, figures in different units.
pub fn compare(runs: &[Run], request: &Request) -> Result<Comparison, Problem> {
    let mut ids: Vec<&str> = runs.iter().map(|r| r.firing.run.id.as_str()).collect();
    ids.sort_unstable();
    if let Some(pair) = ids.windows(2).find(|p| p[0] == p[1]) {
        return Err(Problem::new(format!("two results with the run id {:?}", pair[0]))
            .expected("each run once")
            .remedy("name each reduced folder once, or give the runs ids of their own and reduce them again"));
    }
    if let Some(missing) = request.leave_out.iter().find(|id| !ids.contains(&id.as_str())) {
        return Err(Problem::new(format!("--leave-out {missing}: there is no run of that id"))
            .expected(format!("one of {}", ids.join(", "))));
    }
    let kept: Vec<&Run> = runs.iter().filter(|r| !request.leave_out.contains(&r.firing.run.id)).collect();
    if kept.is_empty() {
        return Err(Problem::new("no run to compare").expected("at least one reduced run"));
    }
    units_agree(&kept)?;
    let mut findings: Vec<String> =
        request.leave_out.iter().map(|id| format!("{id} left out by --leave-out: it counts nowhere")).collect();
    if request.with_failed {
        findings.extend(kept.iter().filter(|r| !failed_checks(&r.firing).is_empty()).map(|r| {
            format!("{} is averaged although it failed {}", r.firing.run.id, failed_checks(&r.firing).join(", "))
        }));
    }
    let grouped = group::by_key(&kept, &request.by, &mut findings)?;
    let members: Vec<(String, Vec<Member<'_>>)> = grouped
        .into_iter()
        .map(|(name, runs)| (name, runs.into_iter().map(|r| Member::new(r, request.with_failed)).collect()))
        .collect();
    let groups: Vec<Group> =
        members.iter().map(|(name, members)| group::describe(name, members, request.by_burn_time)).collect();
    let mut comparison = Comparison {
        schema: SCHEMA.to_string(),
        by: request.by.clone(),
        alike_within: request.alike_within,
        left_out: request.leave_out.clone(),
        curve_differences: group::curve_differences(&members, request.by_burn_time),
        trends: group::trends(&members),
        burn_rate_law: group::burn_rate_law(&members),
        criteria: groups.iter().flat_map(criteria::criteria).collect(),
        variance_components: BTreeMap::new(),
        between_pours: BTreeMap::new(),
        groups,
        findings,
        program: env!("CARGO_PKG_NAME").to_string(),
        version: env!("CARGO_PKG_VERSION").to_string(),
    };
    for (key, _) in FIGURES {
        let values: Vec<Vec<f64>> = members.iter().map(|(_, m)| group::values(m, key)).collect();
        if let Some(components) = components::components(&values) {
            comparison.variance_components.insert(key.to_string(), components);
        }
        if let Some(between) = group::between(&members, &values, key, request.alike_within) {
            comparison.between_pours.insert(key.to_string(), between);
        }
    }
    Ok(comparison)
}

/// Every figure has one unit in all runs.
fn units_agree(runs: &[&Run]) -> Result<(), Problem> {
    for (key, name) in FIGURES {
        let mut first: Option<(&str, &str)> = None;
        for run in runs {
            let Some(figure) = figure_of(&run.firing, key) else { continue };
            let (unit, id) = (figure.unit.as_str(), run.firing.run.id.as_str());
            match first {
                None => first = Some((unit, id)),
                Some((other, other_id)) if other != unit => {
                    return Err(Problem::new(format!("{name} in {other} in {other_id} and in {unit} in {id}"))
                        .expected("one unit for each figure")
                        .remedy("reduce all runs with the same version of burntally"));
                }
                Some(_) => {}
            }
        }
    }
    Ok(())
}

/// Whether anything asks for attention: an odd firing, a run set aside.
pub fn needs_attention(comparison: &Comparison) -> bool {
    comparison.groups.iter().any(|g| !g.set_aside.is_empty())
        || comparison.findings.iter().any(|f| f.contains("although it failed"))
}

/// Ids of the checks that failed.
pub fn failed_checks(firing: &Firing) -> Vec<&str> {
    firing.checks.iter().filter(|c| c.status == Status::Fail).map(|c| c.id.as_str()).collect()
}
