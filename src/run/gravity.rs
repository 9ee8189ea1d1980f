//! Gravity of a site: as given, or normal gravity at its latitude and height, or what is true anywhere on land.

use super::{SiteSpec, document::Table};
use crate::problem::Problem;
use crate::quantity::{Dimension, Measured};

/// Gravity with its standard uncertainty and where both came from.
#[derive(Debug, Clone, PartialEq)]
pub struct Gravity {
    pub value_m_s2: f64,
    pub standard_uncertainty: f64,
    /// One plain phrase for the report.
    pub source: String,
}

// Geodetic Reference System 1980 (H. Moritz): equatorial radius, flattening, centrifugal ratio m, first eccentricity
// squared, normal gravity at the equator, and Somigliana's constant.
const SEMI_MAJOR_M: f64 = 6_378_137.0;
const FLATTENING: f64 = 0.003_352_810_681_183_637;
const CENTRIFUGAL_RATIO: f64 = 0.003_449_786_003_077_674;
const ECCENTRICITY_SQUARED: f64 = 0.006_694_380_022_903_416;
const EQUATOR_M_S2: f64 = 9.780_326_771_534_893;
const SOMIGLIANA: f64 = 0.001_931_851_353_260_676;

/// How far true gravity strays from normal gravity at the same height: free-air anomalies of some 40 mGal, one standard
/// deviation (from memory).
const ANOMALY_M_S2: f64 = 4e-4;
/// Root mean square height of a site when heights up to about a kilometre are equally likely (common practice, no
/// source).
const UNKNOWN_HEIGHT_M: f64 = 600.0;
/// Gravity at the earth's surface from the equator to the poles: centre and limits.
const ANYWHERE: (f64, f64) = (9.807, 0.026);

/// Normal gravity of the Geodetic Reference System 1980 in free air, m/s2.
///
/// # Formula
/// γ = γe (1 + k sin²φ)/√(1 − e² sin²φ) (Somigliana); at height h: γ [1 − 2/a (1 + f + m − 2 f sin²φ) h + 3 h²/a²]
/// (H. Moritz, Geodetic Reference System 1980). φ: geodetic latitude, rad; h: height above the ellipsoid, m.
pub fn normal_gravity(latitude_rad: f64, height_m: f64) -> f64 {
    let sine_squared = latitude_rad.sin().powi(2);
    let surface = EQUATOR_M_S2 * (1.0 + SOMIGLIANA * sine_squared) / (1.0 - ECCENTRICITY_SQUARED * sine_squared).sqrt();
    let first = 2.0 / SEMI_MAJOR_M * (1.0 + FLATTENING + CENTRIFUGAL_RATIO - 2.0 * FLATTENING * sine_squared);
    let second = 3.0 / (SEMI_MAJOR_M * SEMI_MAJOR_M);
    surface * (1.0 - first * height_m + second * height_m * height_m)
}

/// Gravity of a site from what is known of it.
///
/// Given gravity rules over latitude. A given value without uncertainty is trusted to its shortest decimal form (half a
/// unit of its last decimal, rectangular).
pub fn gravity(site: &SiteSpec) -> Gravity {
    if let Some(given) = site.gravity_m_s2 {
        let standard_uncertainty =
            given.standard_uncertainty.unwrap_or_else(|| rounding_limits(&given.value.to_string()) / 3f64.sqrt());
        return Gravity { value_m_s2: given.value, standard_uncertainty, source: "given".to_string() };
    }
    let Some(latitude) = site.latitude_rad else {
        let (value_m_s2, limits) = ANYWHERE;
        let source = "neither gravity nor latitude given: 9.807 ± 0.026 m/s2 taken, from equator to pole".to_string();
        return Gravity { value_m_s2, standard_uncertainty: limits / 3f64.sqrt(), source };
    };
    let height = site.height_m.unwrap_or(Measured::of(0.0));
    let value = normal_gravity(latitude.value, height.value);
    let per_metre = normal_gravity(latitude.value, height.value + 1.0) - value;
    let per_radian = (normal_gravity(latitude.value + 1e-4, height.value) - value) / 1e-4;
    let height_u = match site.height_m {
        Some(height) => height.standard_uncertainty.unwrap_or(0.0),
        None => UNKNOWN_HEIGHT_M,
    };
    let parts = [ANOMALY_M_S2, per_metre * height_u, per_radian * latitude.standard_uncertainty.unwrap_or(0.0)];
    let source = match site.height_m {
        Some(_) => "GRS80 normal gravity at the latitude and height given".to_string(),
        None => "GRS80 normal gravity at the latitude given; no height given, taken as sea level ± 600 m".to_string(),
    };
    Gravity {
        value_m_s2: value,
        standard_uncertainty: parts.iter().map(|part| part * part).sum::<f64>().sqrt(),
        source,
    }
}

/// Half a unit of the last decimal written.
fn rounding_limits(number: &str) -> f64 {
    let decimals =
        number.split_once('.').map_or(0, |(_, decimals)| decimals.chars().take_while(char::is_ascii_digit).count());
    0.5 * 10f64.powi(-(decimals.min(9) as i32))
}

/// Reads `[site]` (of a run, a calibration or a vehicle) from its table; keys beyond these are the caller's business.
///
/// # Errors
/// Wrong units, a latitude beyond the poles, a gravity or height not of this earth.
pub fn read_site(table: &Table<'_>) -> Result<SiteSpec, Problem> {
    let mut site = SiteSpec::default();
    if let Some(found) = table.quantity("gravity", Dimension::Acceleration)? {
        if !(9.7..=9.9).contains(&found.value.value) {
            let problem = Problem::new(format!("{} is {} m/s2", table.full("gravity"), found.value.value))
                .expected("gravity on the ground, between 9.76 and 9.84 m/s2")
                .remedy("write gravity = \"9.8017 m/s2\" with the value of the site, or give latitude and height");
            return Err(table.problem_at(&found.span, problem));
        }
        let mut measured = found.value;
        if measured.standard_uncertainty.is_none() {
            // trailing zeros count, and only the text still has them
            let text = table.raw_text("gravity").unwrap_or("9.81").trim();
            let number = text.split(|letter: char| letter != '.' && !letter.is_ascii_digit()).next().unwrap_or(text);
            measured = Measured::within(measured.value, rounding_limits(number));
        }
        site.gravity_m_s2 = Some(measured);
    }
    if let Some(found) = table.quantity("latitude", Dimension::Angle)? {
        if found.value.value.abs() > std::f64::consts::FRAC_PI_2 + 1e-12 {
            let problem = Problem::new(format!("{} is beyond the pole", table.full("latitude")))
                .expected("-90 to 90 deg, south negative")
                .remedy("write latitude = \"44.7 deg\"");
            return Err(table.problem_at(&found.span, problem));
        }
        site.latitude_rad = Some(found.value);
    }
    if let Some(found) = table.quantity("height", Dimension::Length)? {
        if !(-500.0..=9000.0).contains(&found.value.value) {
            let problem = Problem::new(format!("{} is {} m", table.full("height"), found.value.value))
                .expected("the height of the site above sea level, -500 to 9000 m")
                .remedy("write height = \"310 m\"");
            return Err(table.problem_at(&found.span, problem));
        }
        site.height_m = Some(found.value);
    }
    if site.height_m.is_some() && site.latitude_rad.is_none() && site.gravity_m_s2.is_none() {
        return Err(table.missing(
            "latitude",
            "latitude beside height, or gravity",
            "write latitude = \"44.7 deg\", or gravity = \"9.8017 m/s2\"",
        ));
    }
    Ok(site)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn neither_given_is_said() {
        let found = gravity(&SiteSpec::default());
        assert_eq!(found.value_m_s2, 9.807);
        assert!((found.standard_uncertainty - 0.026 / 3f64.sqrt()).abs() < 1e-12);
        assert!(found.source.contains("neither"));
        // the limits do cover the equator at 4000 m and the poles at sea level
        assert!((normal_gravity(0.0, 0.0) - 9.807).abs() < 0.027);
        assert!((normal_gravity(std::f64::consts::FRAC_PI_2, 0.0) - 9.807).abs() < 0.026);
    }

    #[test]
    fn latitude_without_height_is_less_certain() {
        let latitude_rad = Some(Measured::of(44.7f64.to_radians()));
        let without = gravity(&SiteSpec { latitude_rad, ..SiteSpec::default() });
        let with = gravity(&SiteSpec { latitude_rad, height_m: Some(Measured::of(310.0)), ..SiteSpec::default() });
        assert!(without.standard_uncertainty > 3.0 * with.standard_uncertainty);
        assert!((without.value_m_s2 - with.value_m_s2 - 310.0 * 3.086e-6).abs() < 2e-6);
    }

    #[test]
    fn a_given_value_is_trusted_to_its_last_digit() {
        let given = gravity(&SiteSpec { gravity_m_s2: Some(Measured::of(9.81)), ..SiteSpec::default() });
        assert!((given.standard_uncertainty - 0.005 / 3f64.sqrt()).abs() < 1e-12);
        assert_eq!(rounding_limits("9.800"), 0.0005);
    }
}
