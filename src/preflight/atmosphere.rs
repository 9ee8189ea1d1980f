//! Air density of the standard atmosphere.

/// Standard atmosphere (ICAO Doc 7488; U.S. Standard Atmosphere, 1976): sea-level pressure Pa and temperature K, lapse rate K/m, gas constant of
/// dry air J/(kg K), gravity of geopotential m/s².
const PRESSURE_PA: f64 = 101_325.0;
const TEMPERATURE_K: f64 = 288.15;
const LAPSE_K_M: f64 = 0.0065;
const GAS_CONSTANT: f64 = 287.052_87;
const GRAVITY: f64 = 9.806_65;
/// Radius that turns height into geopotential height, m.
const RADIUS_M: f64 = 6_356_766.0;

fn geopotential_m(height_m: f64) -> f64 {
    RADIUS_M * height_m / (RADIUS_M + height_m)
}

/// Temperature at a height, K.
pub fn temperature_k(height_m: f64) -> f64 {
    TEMPERATURE_K - LAPSE_K_M * geopotential_m(height_m)
}

/// Density at a height below 11 km and a temperature, kg/m³: the pressure of the standard atmosphere at that temperature.
///
/// # Formula
/// p = p₀ (1 − L h/T₀)^(g/(R L)), ρ = p/(R T); h geopotential height
pub fn density_kg_m3(height_m: f64, temperature_k: f64) -> f64 {
    let ratio = 1.0 - LAPSE_K_M * geopotential_m(height_m) / TEMPERATURE_K;
    PRESSURE_PA * ratio.powf(GRAVITY / (GAS_CONSTANT * LAPSE_K_M)) / (GAS_CONSTANT * temperature_k)
}
