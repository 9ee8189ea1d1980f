//! vehicle.toml to [`Vehicle`]: every key checked, every refusal with its line and what to write instead.

use super::vehicle::{Fins, Limits, Motor, Nose, NoseShape, Rail, Shape, Site, Transition, Vehicle};
use super::{atmosphere, places};
use crate::problem::Problem;
use crate::quantity::{Dimension, Measured, STANDARD_GRAVITY_M_S2};
use crate::run::document::{Document, Table};
use crate::run::{gravity, read_site};
use std::path::Path;

/// Reads a vehicle.toml.
///
/// # Errors
/// A missing file, bad TOML, unknown or missing keys, wrong units, values that no vehicle has.
pub fn read(path: &Path) -> Result<Vehicle, Problem> {
    vehicle(&Document::read(path)?)
}

/// As [`read`], from text at hand; `path` is for messages.
///
/// # Errors
/// As [`read`].
pub fn read_text(path: &Path, text: &str) -> Result<Vehicle, Problem> {
    vehicle(&Document::from_text(path, text))
}

fn vehicle(document: &Document) -> Result<Vehicle, Problem> {
    let parsed = document.parse()?;
    let root = parsed.root();
    root.only(&["vehicle", "nose", "transition", "fins", "motor", "rail", "site", "limits"])?;
    let table = |name: &str, remedy: &str| {
        root.table(name)?.ok_or_else(|| root.missing(name, &format!("a table [{name}]"), remedy))
    };
    let v = table("vehicle", "write [vehicle] with name, diameter, airframe_mass, airframe_cg")?;
    v.only(&["name", "diameter", "length", "airframe_mass", "airframe_cg", "cp", "drag_coefficient"])?;
    let m = table("motor", "write [motor] with hardware_mass, hardware_cg, propellant_cg")?;
    m.only(&["hardware_mass", "hardware_cg", "propellant_cg", "propellant_mass"])?;
    let r = table("rail", "write [rail] with length, guide_spacing, elevation_angle")?;
    let shape = shape(&root)?;
    let cp_m = v.positive("cp", Dimension::Length)?;
    if cp_m.is_none() && shape.is_none() {
        return Err(v.missing(
            "cp",
            "the centre of pressure, or the shapes to find it from",
            "write cp = \"1.12 m\" from the nose tip, or [nose] and [[fins]]",
        ));
    }
    let drag_coefficient = v.number("drag_coefficient")?.map(|f| f.value);
    if drag_coefficient.is_some_and(|c| !(0.0..=5.0).contains(&c)) {
        return Err(v.problem_with(
            "drag_coefficient",
            Problem::new("the drag coefficient is not between 0 and 5")
                .expected("some 0.4 to 0.8 for a slender vehicle"),
        ));
    }
    let site_table = root.table("site")?;
    let mut defaults = Vec::new();
    if !r.has("elevation_angle") {
        defaults.push("no elevation_angle is given: the rail is taken as upright".to_string());
    }
    if !r.has("foot_clearance") {
        defaults.push("no foot_clearance is given: the aft guide is taken to stand at the rail's foot".to_string());
    }
    if drag_coefficient.is_some() {
        let given = |key: &str| site_table.as_ref().is_some_and(|t| t.has(key));
        if !given("height") {
            defaults.push("no height is given: the air's density is that of sea level".to_string());
        }
        if !given("temperature") {
            defaults.push("no temperature is given: that of the standard atmosphere is taken".to_string());
        }
    }
    let vehicle = Vehicle {
        name: v.text("name")?.map_or_else(|| "vehicle".into(), |f| f.value),
        diameter_m: needed(&v, "diameter", Dimension::Length)?,
        length_m: v.positive("length", Dimension::Length)?,
        airframe_mass_kg: needed(&v, "airframe_mass", Dimension::Mass)?,
        airframe_cg_m: needed(&v, "airframe_cg", Dimension::Length)?,
        cp_m,
        shape,
        drag_coefficient,
        motor: Motor {
            hardware_mass_kg: needed(&m, "hardware_mass", Dimension::Mass)?,
            hardware_cg_m: needed(&m, "hardware_cg", Dimension::Length)?,
            propellant_cg_m: needed(&m, "propellant_cg", Dimension::Length)?,
            propellant_mass_kg: m.positive("propellant_mass", Dimension::Mass)?,
        },
        rail: rail(&r)?,
        site: site(site_table.as_ref())?,
        limits: limits(root.table("limits")?.as_ref())?,
        defaults,
    };
    places::fit_together(&v, &m, &vehicle)?;
    Ok(vehicle)
}

fn needed(table: &Table<'_>, key: &str, dimension: Dimension) -> Result<Measured, Problem> {
    table.positive(key, dimension)?.ok_or_else(|| {
        table.missing(key, dimension.words(), &format!("write {key} = {}, with your number", dimension.example()))
    })
}

fn length(table: &Table<'_>, key: &str) -> Result<f64, Problem> {
    needed(table, key, Dimension::Length).map(|m| m.value)
}

fn shape(root: &Table<'_>) -> Result<Option<Shape>, Problem> {
    let Some(n) = root.table("nose")? else {
        if root.has("fins") || root.has("transition") {
            return Err(root.missing(
                "nose",
                "[nose] beside fins and transitions",
                "write [nose] with shape, length, diameter",
            ));
        }
        return Ok(None);
    };
    n.only(&["shape", "length", "diameter"])?;
    let words = [
        ("cone", NoseShape::Cone),
        ("ogive", NoseShape::Ogive),
        ("paraboloid", NoseShape::Paraboloid),
        ("ellipsoid", NoseShape::Ellipsoid),
    ];
    let nose = Nose {
        shape: n
            .word("shape", &words)?
            .ok_or_else(|| n.missing("shape", "cone, ogive, paraboloid or ellipsoid", "write shape = \"ogive\""))?,
        length_m: length(&n, "length")?,
        diameter_m: length(&n, "diameter")?,
    };
    let mut transitions = Vec::new();
    for t in root.tables("transition")? {
        t.only(&["station", "length", "diameter_ahead", "diameter_behind"])?;
        transitions.push(Transition {
            station_m: length(&t, "station")?,
            length_m: length(&t, "length")?,
            diameter_ahead_m: length(&t, "diameter_ahead")?,
            diameter_behind_m: length(&t, "diameter_behind")?,
        });
    }
    let mut fins = Vec::new();
    for f in root.tables("fins")? {
        f.only(&[
            "count",
            "station",
            "root_chord",
            "tip_chord",
            "exposed_semispan",
            "sweep_distance",
            "body_diameter",
        ])?;
        let count = f.counting("count")?.ok_or_else(|| f.missing("count", "the number of fins", "write count = 4"))?;
        if !(3..=4).contains(&count.value) {
            return Err(f.problem_at(
                &count.span,
                Problem::new(format!("{} fins", count.value))
                    .expected("3 or 4: Barrowman's interference factor is for these")
                    .remedy("give the centre of pressure itself: cp = \"1.12 m\" under [vehicle], without [nose] and [[fins]]"),
            ));
        }
        let signed = |key: &str| -> Result<f64, Problem> {
            Ok(f.quantity(key, Dimension::Length)?.map_or(0.0, |found| found.value.value))
        };
        let tip_chord_m = signed("tip_chord")?;
        if tip_chord_m < 0.0 {
            let problem = Problem::new("a tip chord below nil").expected("nil for a pointed fin, or more");
            return Err(f.problem_with("tip_chord", problem));
        }
        fins.push(Fins {
            count: count.value,
            station_m: length(&f, "station")?,
            root_chord_m: length(&f, "root_chord")?,
            tip_chord_m,
            exposed_semispan_m: length(&f, "exposed_semispan")?,
            sweep_distance_m: signed("sweep_distance")?,
            body_diameter_m: length(&f, "body_diameter")?,
        });
    }
    Ok(Some(Shape { nose, transitions, fins }))
}

fn rail(r: &Table<'_>) -> Result<Rail, Problem> {
    r.only(&["length", "guide_spacing", "foot_clearance", "elevation_angle", "friction_coefficient"])?;
    let at_least_nil = |key: &str, dimension: Dimension, missing: f64| -> Result<Measured, Problem> {
        let Some(found) = r.quantity(key, dimension)? else { return Ok(Measured::of(missing)) };
        if found.value.value < 0.0 {
            let problem = Problem::new(format!("{} is below nil", r.full(key))).expected("nil or more");
            return Err(r.problem_at(&found.span, problem));
        }
        Ok(found.value)
    };
    let right = std::f64::consts::FRAC_PI_2;
    let elevation = at_least_nil("elevation_angle", Dimension::Angle, right)?;
    if !(0.5..=right + 1e-9).contains(&elevation.value) {
        return Err(r.problem_with(
            "elevation_angle",
            Problem::new(format!("the rail stands at {:.1} deg", elevation.value.to_degrees()))
                .expected("30 to 90 deg above the horizontal")
                .remedy("write elevation_angle = \"85 deg\""),
        ));
    }
    let friction = r.number("friction_coefficient")?.map_or(0.0, |f| f.value);
    if !(0.0..=1.0).contains(&friction) {
        return Err(r.problem_with(
            "friction_coefficient",
            Problem::new(format!("a friction coefficient of {friction}")).expected("0 to 1"),
        ));
    }
    let rail = Rail {
        length_m: needed(r, "length", Dimension::Length)?,
        guide_spacing_m: at_least_nil("guide_spacing", Dimension::Length, 0.0)?,
        foot_clearance_m: at_least_nil("foot_clearance", Dimension::Length, 0.0)?,
        elevation_rad: elevation,
        friction_coefficient: friction,
    };
    if !r.has("guide_spacing") {
        return Err(r.missing("guide_spacing", "forward guide to aft guide", "write guide_spacing = \"0.38 m\""));
    }
    if rail.effective_length_m() <= 0.0 {
        return Err(r.problem_with(
            "guide_spacing",
            Problem::new(format!(
                "the guides are {:.3} m apart and start {:.3} m up a rail of {:.3} m: the forward one is off it at rest",
                rail.guide_spacing_m.value, rail.foot_clearance_m.value, rail.length_m.value
            ))
            .expected("a rail longer than guide spacing and foot clearance together"),
        ));
    }
    Ok(rail)
}

fn site(table: Option<&Table<'_>>) -> Result<Site, Problem> {
    let standard = || Measured::of(STANDARD_GRAVITY_M_S2);
    let words = "9.80665 m/s²: neither gravity nor latitude given".to_string();
    let Some(t) = table else {
        return Ok(Site {
            gravity_m_s2: standard(),
            gravity_source: words,
            temperature_k: Measured::of(atmosphere::temperature_k(0.0)),
            temperature_given: false,
            height_m: 0.0,
            wind_m_s: None,
        });
    };
    t.only(&["temperature", "height", "latitude", "gravity", "wind"])?;
    let height_m = t.quantity("height", Dimension::Length)?.map_or(0.0, |f| f.value.value);
    if !(-500.0..=9000.0).contains(&height_m) {
        return Err(
            t.problem_with("height", Problem::new(format!("a height of {height_m} m")).expected("-500 to 9000 m"))
        );
    }
    let (gravity_m_s2, gravity_source) = if t.has("gravity") || t.has("latitude") {
        let g = gravity(&read_site(t)?);
        let measured =
            Measured { value: g.value_m_s2, standard_uncertainty: Some(g.standard_uncertainty), limits: None };
        (measured, g.source)
    } else {
        (standard(), words)
    };
    let temperature = t.quantity("temperature", Dimension::Temperature)?.map(|f| f.value);
    if temperature.is_some_and(|k| !(200.0..=340.0).contains(&k.value)) {
        return Err(t.problem_with(
            "temperature",
            Problem::new("the air's temperature is not of this earth").expected("-70 to 65 degC"),
        ));
    }
    let wind = t.quantity("wind", Dimension::Speed)?.map(|f| f.value.value);
    if wind.is_some_and(|w| w < 0.0) {
        return Err(t.problem_with("wind", Problem::new("a wind below nil").expected("its speed, nil or more")));
    }
    Ok(Site {
        gravity_m_s2,
        gravity_source,
        temperature_k: temperature.unwrap_or_else(|| Measured::of(atmosphere::temperature_k(height_m))),
        temperature_given: temperature.is_some(),
        height_m,
        wind_m_s: wind,
    })
}

fn limits(table: Option<&Table<'_>>) -> Result<Limits, Problem> {
    let mut limits = Limits::default();
    let Some(t) = table else { return Ok(limits) };
    t.only(&["rail_exit_speed", "thrust_to_weight", "stability_margin"])?;
    if let Some(speed) = t.positive("rail_exit_speed", Dimension::Speed)? {
        limits.rail_exit_speed_m_s = (speed.value, true);
    }
    for (key, place) in
        [("thrust_to_weight", &mut limits.thrust_to_weight), ("stability_margin", &mut limits.stability_margin)]
    {
        if let Some(found) = t.number(key)? {
            if found.value <= 0.0 {
                let problem = Problem::new(format!("{} is not above nil", t.full(key))).expected("a number above nil");
                return Err(t.problem_at(&found.span, problem));
            }
            *place = (found.value, true);
        }
    }
    Ok(limits)
}
