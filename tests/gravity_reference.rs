//! GRS80 normal gravity at latitudes and heights, computed two independent ways.

use burntally::quantity::Measured;
use burntally::run::{SiteSpec, gravity, normal_gravity};

/// `reference/normal_gravity.csv`, column gamma_GRS80: H. Moritz, Geodetic Reference System 1980; the heights use the
/// same second-order series. Printed to 1e-12 m/s2; 1e-11 leaves room for rounding of the products.
#[test]
fn normal_gravity_at_nine_latitudes_and_four_heights() {
    let mut rows = 0;
    for line in include_str!("reference/normal_gravity.csv").lines().skip(1) {
        let fields: Vec<f64> = line.split(',').map(|field| field.parse().expect("a number")).collect();
        let (latitude, height, expected) = (fields[0], fields[1], fields[2]);
        let found = normal_gravity(latitude.to_radians(), height);
        assert!((found - expected).abs() < 1e-11, "{latitude} deg, {height} m: {found} {expected}");
        // south as north
        assert!((normal_gravity(-latitude.to_radians(), height) - expected).abs() < 1e-11);
        rows += 1;
    }
    assert_eq!(rows, 36);
}

/// Published: equator 9.7803267715, pole 9.8321863685, 45 deg 9.806199203 m/s2 (GRS80).
#[test]
fn published_values() {
    assert!((normal_gravity(0.0, 0.0) - 9.7803267715).abs() < 1e-10);
    assert!((normal_gravity(90f64.to_radians(), 0.0) - 9.8321863685).abs() < 1e-10);
    assert!((normal_gravity(45f64.to_radians(), 0.0) - 9.806199203).abs() < 1e-9);
}

/// A site by latitude and height takes normal gravity, with the anomaly it cannot know: 2e-5 to 1e-4 relative.
#[test]
fn a_site_by_latitude() {
    let site = SiteSpec {
        latitude_rad: Some(Measured::of(51.5f64.to_radians())),
        height_m: Some(Measured::of(0.0)),
        gravity_m_s2: None,
    };
    let found = gravity(&site);
    assert!((found.value_m_s2 - 9.81203500764).abs() < 1e-10);
    assert!((2e-4..1e-3).contains(&found.standard_uncertainty));
    assert!(found.source.contains("latitude"));
}
